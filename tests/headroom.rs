//! Cascades of sections: their levels against the numeric nodal solve, their response against the poles and zeros, and
//! the choice of pairing, order and gains against all others.

#![allow(clippy::unwrap_used)]

use std::sync::Arc;

use num_complex::Complex64;
use roundwell::circuit::{Circuit, Output, find, response};
use roundwell::job::{JobFile, resolve, resolve_filter};
use roundwell::search::{Filter, ideal_parts};
use roundwell::target::Pole;
use roundwell::text::render;

const TAU: f64 = std::f64::consts::TAU;

fn circuits(id: &str) -> Result<Arc<Circuit>, String> {
    find(id).cloned().map(Arc::new).ok_or_else(|| format!("there is no circuit `{id}`"))
}

fn filter(keys: &str) -> Filter {
    let text = format!("(filter: ({keys}))");
    let job = JobFile::parse(&text).unwrap_or_else(|faults| panic!("{}", render(&faults, "", &text, false)));
    resolve_filter(&job, &mut circuits).unwrap_or_else(|faults| panic!("{}", render(&faults, "", &text, false)))
}

/// Filters of every response, with real poles, first-order sections, notches, fixed and free gains.
const FILTERS: [&str; 9] = [
    r#"approximation: Butterworth, response: LowPass, edge: "1k", order: 4, gain: 2"#,
    r#"approximation: Chebyshev, response: LowPass, edge: "1k", order: 5, ripple: 1"#,
    r#"approximation: Bessel, response: HighPass, edge: 200, order: 3"#,
    r#"approximation: Chebyshev, response: BandPass, edges: ("900", "1k1"), order: 3, ripple: 0.5, gain: 4"#,
    r#"approximation: Elliptic, response: LowPass, edge: "3k4", order: 4, ripple: 0.5, attenuation: 40"#,
    r#"approximation: Legendre, response: BandStop, edges: (40, 60), order: 2"#,
    r#"approximation: LinkwitzRiley, response: LowPass, edge: "2k2", order: 4, circuits: ["sallen-key-low-pass"]"#,
    r#"approximation: Gaussian, response: BandPass, edges: (300, 3400), order: 1"#,
    r#"approximation: InverseChebyshev, response: HighPass, edge: 100, order: 3, attenuation: 40, reference: Dc"#,
];

/// The response at a node, from the input of its section, by the numeric nodal solve.
fn at_node(circuit: &Circuit, output: &Output, node: usize, values: &[f64], w: f64) -> Complex64 {
    response(circuit, &Output { node, ..output.clone() }, values, w).unwrap()
}

#[test]
fn levels_are_those_of_the_nodal_solve() {
    for keys in FILTERS {
        let Filter { cascade, .. } = filter(keys);
        let low = cascade.sections.iter().map(|s| s.section.w0).fold(f64::INFINITY, f64::min) / 1e4;
        let high = cascade.sections.iter().map(|s| s.section.w0).fold(0.0, f64::max) * 1e4;
        let frequencies: Vec<f64> = (0..=20_000).map(|k| low * (high / low).powf(f64::from(k) / 20_000.0)).collect();
        let mut before = vec![1.0; frequencies.len()];
        let (mut largest, mut counted) = (0.0f64, 0);
        for section in &cascade.sections {
            assert!(section.is_counted, "{keys}");
            let problem = section.problem.as_ref().unwrap();
            let (circuit, output) = (&problem.circuit, problem.output());
            let values = ideal_parts(problem).unwrap();
            assert_eq!(section.op_amps.len(), circuit.op_amps.len());
            for (level, amp) in section.op_amps.iter().zip(&circuit.op_amps) {
                let magnitudes = frequencies.iter().zip(&before);
                let found =
                    magnitudes.map(|(&w, before)| before * at_node(circuit, output, amp.out, &values, w).norm());
                let found = found.fold(0.0, f64::max);
                let miss = found / level.peak.magnitude - 1.0;
                let label = format!("{keys}: section {} {}", section.section.name, level.name);
                // The scan can only come near the peak from below.
                assert!((-2e-4..1e-6).contains(&miss), "{label}: {found} is there, {:?} is said", level.peak);
                largest = largest.max(level.peak.magnitude);
                counted += 1;
            }
            for (w, before) in frequencies.iter().zip(&mut before) {
                *before *= at_node(circuit, output, output.node, &values, *w).norm();
            }
        }
        assert!(counted >= cascade.sections.len());
        let least = cascade.sections.iter().map(|s| s.least.magnitude).fold(f64::INFINITY, f64::min);
        assert!((largest / least / cascade.swing.chosen - 1.0).abs() < 0.01, "{keys} {:?}", cascade.swing);
    }
}

/// The product of the sections is the filter: poles, zeros, and the gain at its reference.
#[test]
fn the_sections_make_the_filter() {
    for keys in FILTERS {
        let filter = filter(keys);
        let product = |w: f64| -> Complex64 {
            filter.cascade.sections.iter().map(|section| section.section.ideal().value(w)).product()
        };
        let roots = &filter.design.roots;
        let of_roots = |w: f64| {
            let s = Complex64::new(0.0, w);
            let poles: Complex64 = roots
                .poles
                .iter()
                .map(|pole| match *pole {
                    Pole::Pair(p) => (s - p) * (s - p.conj()),
                    Pole::Reals(a, b) => (s - a) * (s - b),
                    Pole::Real(a) => s - a,
                })
                .product();
            let zeros: f64 = roots.zeros.iter().map(|z| (z - w) * (z + w)).product();
            s.powi(i32::try_from(roots.at_origin).unwrap()) * zeros / poles
        };
        let centre = filter.specification.band.centre();
        let ratios: Vec<Complex64> =
            [0.11, 0.53, 1.037, 1.9, 8.3].map(|t| product(t * centre) / of_roots(t * centre)).to_vec();
        assert!(ratios.iter().all(|ratio| (ratio / ratios[0] - 1.0).norm() < 1e-9), "{keys} {ratios:?}");
        let peak = (0..20_000).map(|k| product(centre * 10f64.powf(f64::from(k) / 5000.0 - 2.0)).norm());
        let peak = peak.fold(0.0, f64::max);
        let peak_over_gain =
            if keys.contains("Dc") { 10f64.powf(filter.design.prototype.peak_db / 20.0) } else { 1.0 };
        assert!((peak / filter.cascade.gain / peak_over_gain - 1.0).abs() < 1e-3, "{keys} {peak}");
        if let Some(gain) = filter.request.gain {
            assert!((filter.cascade.gain / gain - 1.0).abs() < 1e-9, "{keys}");
        }
    }
}

/// No order and no pairing of a filter whose levels follow its gains swings less.
#[test]
fn no_other_order_or_pairing_swings_less() {
    let keys = r#"approximation: Chebyshev, response: BandPass, edges: ("900", "1k1"), order: 3, ripple: 0.5"#;
    let best = filter(keys).cascade.swing.chosen;
    let mut others = Vec::new();
    for order in ["1, 2, 3", "1, 3, 2", "2, 1, 3", "2, 3, 1", "3, 1, 2", "3, 2, 1"] {
        others.push(filter(&format!("{keys}, sequence: [{order}]")).cascade.swing.chosen);
    }
    let least = others.iter().copied().fold(f64::INFINITY, f64::min);
    assert!((best / least - 1.0).abs() < 1e-3, "{best} {others:?}");
    assert!(others.iter().any(|other| *other > best * 1.05), "{others:?}");

    for keys in FILTERS {
        let swing = filter(keys).cascade.swing;
        let limit = swing.chosen * (1.0 - 1e-6);
        assert!(swing.rising_q > limit && swing.falling_q > limit, "{keys} {swing:?}");
        assert!(swing.nearest_zeros.is_none_or(|nearest| nearest > limit), "{keys} {swing:?}");
    }
}

/// The usual rule for free gains: every section's largest op-amp output peaks as high as the last one's.
#[test]
fn free_gains_let_all_sections_peak_alike() {
    let Filter { cascade, .. } = filter(FILTERS[3]);
    let peaks: Vec<f64> = cascade.sections.iter().map(|section| section.peak().magnitude).collect();
    // The gains are rounded to three digits.
    assert!(peaks.iter().all(|peak| (peak / peaks[0] - 1.0).abs() < 0.02), "{peaks:?}");
    let equal = filter(&format!("{}, gains: Equal", FILTERS[3])).cascade;
    let gains: Vec<f64> = equal.sections.iter().map(|section| section.section.gain).collect();
    assert!(gains.iter().all(|gain| (gain / gains[0] - 1.0).abs() < 1e-9), "{gains:?}");
    let given =
        filter(r#"approximation: Butterworth, response: LowPass, edge: "1k", order: 4, gains: [2, 3]"#).cascade;
    assert!((given.gain - 6.0).abs() < 1e-12 && (given.sections[0].section.gain.abs() - 2.0).abs() < 1e-12);
}

/// A job with a filter is the job with the sections that it gives.
#[test]
fn a_filter_resolves_to_its_sections() {
    for keys in FILTERS {
        let text = format!("(filter: ({keys}))");
        let job = resolve(&JobFile::parse(&text).unwrap(), &mut circuits, None).unwrap();
        let filter = filter(keys);
        assert_eq!(job.problem.sections.len(), filter.cascade.sections.len());
        for (problem, section) in job.problem.sections.iter().zip(&filter.cascade.sections) {
            let (found, wanted) = (&problem.target, &section.section);
            assert_eq!((found.shape, &found.name), (wanted.shape, &wanted.name));
            let misses = found.misses(&wanted.figures_of(&wanted.ideal()));
            assert!(misses.into_iter().flatten().all(|miss| miss < 1e-9), "{keys} {misses:?}");
            let taken = section.problem.as_ref().unwrap();
            assert_eq!((&problem.circuit.id, problem.output), (&taken.circuit.id, taken.output), "{keys}");
        }
        assert!(filter.cascade.sections.iter().all(|s| s.section.w0 / TAU > 1.0));
    }
}
