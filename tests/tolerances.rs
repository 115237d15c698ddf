//! Tolerances: yield, spread and worst case against closed forms, brute force and independent runs.

#![allow(clippy::unwrap_used)]

mod support;

use std::f64::consts::TAU;

use proptest::prelude::*;
use roundwell::analysis::{
    Boards, Built, BuiltPart, BuiltSection, Conditions, Distribution, Figure, FigureLimit, Formula, Gauge, Joint,
    Limit, Mask, Reference, Sampling, Sensitivities, Tolerances, deviations, estimate, spread, vet, worst_case,
};
use roundwell::circuit::library as circuits;
use roundwell::target::{Biquad, Criterion, Measure, Section, Shape};
use roundwell::units::{Kind, Value, parse_part};

fn part(circuit: &roundwell::circuit::Circuit, name: &str, text: &str) -> BuiltPart {
    let slot = circuit.slot(name).unwrap();
    let kind = circuit.slots[slot].kind;
    let value = parse_part(text, kind).unwrap();
    BuiltPart { slot, kind, value, pieces: vec![value.into()], joint: Joint::Sum }
}

/// A section from pairs of slot and value, in the order of the slots.
fn section(target: Section, id: &str, output: &str, values: &[(&str, &str)]) -> BuiltSection {
    let circuit = support::library(id);
    let output = circuit.outputs.iter().position(|o| o.name == output).unwrap();
    let mut parts: Vec<BuiltPart> = values.iter().map(|(name, text)| part(&circuit, name, text)).collect();
    parts.sort_by_key(|part| part.slot);
    BuiltSection { target, circuit, output, parts }
}

fn board(sections: Vec<BuiltSection>) -> Built {
    Built { title: String::new(), criterion: Criterion::default(), sections }
}

fn low_pass(name: &str, f0: f64, q: f64) -> Section {
    Section::new(name, Shape::LowPass, f0 * TAU, Some(q), 1.0, None).unwrap()
}

/// Two unity-gain sections: fourth-order Butterworth low-pass at 4 kHz.
fn anti_alias() -> Built {
    let first = [("R1", "13k"), ("R2", "36k"), ("C1", "2n2"), ("C2", "1n5")];
    let second = [("R1", "6k2"), ("R2", "7k5"), ("C1", "15n"), ("C2", "2n2")];
    let section = |name, q, values| section(low_pass(name, 4e3, q), "sallen-key-low-pass", "low-pass", values);
    board(vec![section("A", 0.5412, &first), section("B", 1.3066, &second)])
}

/// Within 0.8 dB up to 3 kHz, 37 dB down at 12 kHz, at the frequencies of the independent run.
fn anti_alias_mask() -> Mask {
    let limit = |from: f64, to: f64, lower, upper| Limit { from: from * TAU, to: to * TAU, lower, upper };
    let limits = vec![limit(30.0, 3e3, Some(-0.8), Some(0.8)), limit(12e3, 12e3, None, Some(-37.0))];
    Mask { reference: Reference::Absolute, limits, delays: Vec::new(), figures: Vec::new() }
}

fn tolerances(resistors: f64, capacitors: f64) -> Tolerances {
    Tolerances { resistors, capacitors, distribution: Distribution::Uniform, reel_share: 0.0 }
}

fn sampling(seed: u64, boards: u64) -> Sampling {
    Sampling { seed, boards, half_width: 0.0, confidence: 0.95 }
}

fn gauge(built: &Built, mask: &Mask) -> Gauge {
    Gauge::with_points(mask, &built.targets(), 64)
}

// Source: an independent run (numpy, 4,000,000 boards from the closed form of the unity-gain Sallen-Key low-pass, errors
// drawn by numpy.random.default_rng, 64 frequencies to the limit); its own standard error is below 0.00025.
#[test]
fn the_yield_is_that_of_an_independent_run() {
    let built = anti_alias();
    let gauge = gauge(&built, &anti_alias_mask());
    for (capacitors, distribution, expected) in [
        (0.02, Distribution::Uniform, 0.999_709_5),
        (0.05, Distribution::Uniform, 0.786_77),
        (0.10, Distribution::Uniform, 0.481_386_5),
        (0.05, Distribution::TruncatedNormal, 0.977_044),
    ] {
        let tolerances = Tolerances { distribution, ..tolerances(0.01, capacitors) };
        // 99.9 %: the four runs are to agree together.
        let found = estimate(&built, &tolerances, &gauge, &Sampling { confidence: 0.999, ..sampling(3, 200_000) });
        // Beyond it three standard errors of the independent run.
        let (low, high) = (found.interval.0 - 6e-4, found.interval.1 + 6e-4);
        assert!(low <= expected && expected <= high, "{capacitors}: {} against {expected}", found.share());
        assert_eq!(found.boards, 200_000);
    }
}

/// The interval holds the true yield in about the promised share of experiments. The truth is a run of two million boards.
#[test]
fn the_interval_covers_the_truth_as_often_as_it_says() {
    let built = anti_alias();
    let gauge = Gauge::with_points(&anti_alias_mask(), &built.targets(), 16);
    let tolerances = tolerances(0.01, 0.05);
    let truth = estimate(&built, &tolerances, &gauge, &sampling(999, 2_000_000)).share();
    let experiments = 400;
    let covered = (0..experiments)
        .filter(|seed| {
            let (low, high) = estimate(&built, &tolerances, &gauge, &sampling(*seed, 1000)).interval;
            low <= truth && truth <= high
        })
        .count();
    // 95 % are promised. Binomial: fewer than 365 of 400 happen by chance once in a thousand times.
    assert!(covered >= 365, "{covered} of {experiments}");
    assert!(covered < experiments as usize, "an interval that always holds is too wide");
}

#[test]
fn the_result_is_the_same_for_any_number_of_threads() {
    let built = anti_alias();
    let mask = Some(anti_alias_mask());
    let conditions = Conditions {
        tolerances: tolerances(0.01, 0.05),
        mask,
        climate: None,
        real: None,
        levels: None,
        trim: false,
        select: Vec::new(),
        sampling: sampling(5, 20_000),
    };
    let with = |threads| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        pool.install(|| vet(&built, &conditions))
    };
    assert_eq!(with(1), with(3));
}

/// It is drawn until the interval is narrow enough, and no further.
#[test]
fn drawing_ends_when_the_interval_is_narrow_enough() {
    let built = anti_alias();
    let gauge = gauge(&built, &anti_alias_mask());
    let sampling = Sampling { seed: 1, boards: 1_000_000, half_width: 0.005, confidence: 0.95 };
    let found = estimate(&built, &tolerances(0.01, 0.05), &gauge, &sampling);
    let width = found.interval.1 - found.interval.0;
    assert!(width <= 0.01 && width > 0.008 && found.boards < 60_000, "{found:?}");
}

#[test]
fn without_tolerance_all_boards_pass_or_none() {
    let built = anti_alias();
    let good = gauge(&built, &anti_alias_mask());
    let mut mask = anti_alias_mask();
    mask.limits[1].upper = Some(-60.0);
    let bad = gauge(&built, &mask);
    let found = |gauge| estimate(&built, &tolerances(0.0, 0.0), gauge, &sampling(1, 500));
    assert_eq!(found(&good).passed, 500);
    assert_eq!((found(&bad).passed, found(&bad).broken), (0, vec![0, 500]));
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 24, ..ProptestConfig::default() })]

    /// Tighter parts never give a lower yield beyond the interval, where the mask is centred on the nominal board.
    #[test]
    fn tighter_parts_do_not_lower_the_yield(
        resistors in 0.001f64..0.05, capacitors in 0.001f64..0.1, tighter in 0.2f64..0.95,
        share in 0.0f64..1.0, normal in any::<bool>(), seed in any::<u64>(),
    ) {
        let built = anti_alias();
        let figure = |section: usize, figure, nominal: f64| {
            FigureLimit { section, figure, lower: Some(nominal * 0.98), upper: Some(nominal / 0.98) }
        };
        let figures: Vec<FigureLimit> = built.sections.iter().zip(built.nominal()).enumerate()
            .map(|(k, (section, h))| figure(k, Figure::F0, section.target.figures_of(&h).w0)).collect();
        let gauge = gauge(&built, &Mask { reference: Reference::Absolute, limits: Vec::new(), delays: Vec::new(), figures });
        let distribution = if normal { Distribution::TruncatedNormal } else { Distribution::Uniform };
        let run = |factor: f64| {
            let (resistors, capacitors) = (resistors * factor, capacitors * factor);
            let tolerances = Tolerances { resistors, capacitors, distribution, reel_share: share };
            let sampling = Sampling { confidence: 0.9999, ..sampling(seed, 4096) };
            estimate(&built, &tolerances, &gauge, &sampling)
        };
        let (loose, tight) = (run(1.0), run(tighter));
        prop_assert!(tight.interval.1 >= loose.interval.0, "{tight:?} {loose:?}");
    }
}

/// Each circuit with values that make its shape: the derivatives of all figures and of the response, numerically.
#[test]
fn sensitivities_are_the_derivatives() {
    let mut checked = 0;
    for circuit in circuits() {
        for (index, output) in circuit.outputs.iter().enumerate() {
            let notch = output.shape == Shape::Notch;
            let q = (output.shape.order() == 2).then_some(1.0);
            let target = Section::new("s", output.shape, 1e4, q, 1.0, notch.then_some(1e4)).unwrap();
            let parts = output.filled(circuit).map(|slot| {
                let kind = circuit.slots[slot].kind;
                // Other values in every slot, with products of about 1e-4 s.
                let mantissa = 100 + 17 * slot as u64;
                let value = Value::new(mantissa, if kind == Kind::Resistor { 2 } else { -10 }).unwrap();
                BuiltPart { slot, kind, value, pieces: vec![value.into()], joint: Joint::Sum }
            });
            let section = BuiltSection {
                target: target.clone(),
                circuit: support::library(&circuit.id),
                output: index,
                parts: parts.collect(),
            };
            let built = board(vec![section]);
            let boards = Boards::new(&built, &tolerances(0.01, 0.01));
            let sensitivities = Sensitivities::of(&built.sections[0]);
            let count = built.sections[0].parts.len();
            let at = |part: usize, error: f64| -> Biquad {
                let mut errors = vec![0.0; count];
                errors[part] = error;
                boards.with_errors(&errors)[0]
            };
            // The formula and the transfer function of the library agree.
            let nominal = Formula::of(&built.sections[0]).biquad(&built.sections[0].admittances());
            let (n, d) = output.transfer.coefficients(&built.sections[0].values());
            for (k, value) in n.iter().enumerate() {
                assert!((nominal.num[k] - value).abs() <= 1e-12 * value.abs(), "{}", circuit.id);
            }
            for (k, value) in d.iter().enumerate() {
                assert!((nominal.den[k] - value).abs() <= 1e-12 * value.abs(), "{}", circuit.id);
            }
            let step = 1e-5;
            for part in 0..count {
                let (up, down) = (at(part, step), at(part, -step));
                let slope =
                    |value: &dyn Fn(&Biquad) -> f64| (value(&up) - value(&down)) / (2.0 * step * value(&nominal));
                let figures = sensitivities.figures(part);
                let expected = [
                    slope(&|h| target.figures_of(h).w0),
                    target.q.map_or(0.0, |_| slope(&|h| target.figures_of(h).q.unwrap())),
                    slope(&|h| target.figures_of(h).gain),
                    target.wz.map_or(0.0, |_| slope(&|h| target.figures_of(h).wz.unwrap())),
                ];
                let found = [figures.f0, figures.q, figures.gain, figures.fz];
                for (found, expected) in found.iter().zip(expected) {
                    // A pole pair that these values push into the right half plane has no Q to differentiate.
                    if expected.is_finite() {
                        assert!(
                            (found - expected).abs() < 1e-6 * (1.0 + found.abs()),
                            "{} {found} {expected}",
                            circuit.id
                        );
                        checked += 1;
                    }
                }
                for w in [3e3, 1e4, 2.7e4] {
                    let slope = (up.value(w) - down.value(w)) / (2.0 * step * nominal.value(w));
                    let found = sensitivities.response(w)[part];
                    assert!((found - slope).norm() < 1e-6 * (1.0 + slope.norm()), "{} {found} {slope}", circuit.id);
                }
            }
        }
    }
    assert!(checked > 300, "{checked}");
}

// Source: closed form. w0 = 1/sqrt(R1 R2 C1 C2): with independent uniform errors its relative standard deviation is
// sqrt((2 tR^2 + 2 tC^2)/12), and where equal parts are off together sqrt((4 tR^2 + 2 tC^2)/12) for two equal resistors.
#[test]
fn the_deviation_of_f0_follows_the_closed_form() {
    let values = [("R1", "10k"), ("R2", "10k"), ("C1", "22n"), ("C2", "4n7")];
    let built = board(vec![section(low_pass("A", 1565.0, 1.08), "sallen-key-low-pass", "low-pass", &values)]);
    let deviation = |share: f64| {
        let tolerances = Tolerances { reel_share: share, ..tolerances(0.02, 0.05) };
        deviations(&built, &tolerances, &built.yardstick()).sections[0].f0
    };
    let (r, c) = (0.02f64.powi(2), 0.05f64.powi(2));
    assert!((deviation(0.0) - ((2.0 * r + 2.0 * c) / 12.0).sqrt()).abs() < 1e-12);
    assert!((deviation(1.0) - ((4.0 * r + 2.0 * c) / 12.0).sqrt()).abs() < 1e-12);
}

#[test]
fn drawn_boards_spread_as_the_sensitivities_say() {
    let built = anti_alias();
    let yardstick = built.yardstick();
    for share in [0.0, 0.7] {
        for distribution in [Distribution::Uniform, Distribution::TruncatedNormal] {
            // Small, so that what the sensitivities leave out is below the error of the draw.
            let tolerances = Tolerances { distribution, reel_share: share, ..tolerances(0.002, 0.005) };
            let drawn = spread(&built, &tolerances, &yardstick, 11, 20_000);
            let expected = deviations(&built, &tolerances, &yardstick);
            let nominal = built.nominal();
            assert_eq!((drawn.boards, drawn.unstable), (20_000, 0));
            for ((section, drawn), (expected, h)) in
                built.sections.iter().zip(&drawn.sections).zip(expected.sections.iter().zip(&nominal))
            {
                let figures = section.target.figures_of(h);
                // Five standard errors of a standard deviation: 5/sqrt(2 n).
                let close = |found: f64, expected: f64| (found / expected - 1.0).abs() < 5.0 / 40_000f64.sqrt();
                let (w0, q) = (drawn.w0.unwrap(), drawn.q.unwrap());
                assert!(close(w0.deviation / figures.w0, expected.f0), "{share} {distribution:?}");
                assert!(close(q.deviation / figures.q.unwrap(), expected.q), "{share} {distribution:?}");
                assert!(w0.low < w0.median && w0.median < w0.high);
                assert!((w0.median / figures.w0 - 1.0).abs() < 0.1 * expected.f0);
            }
        }
    }
}

/// A pair spreads less than a single part: equal halves in series by the square root of two.
#[test]
fn pairs_average_their_errors() {
    let values = [("R1", "10k"), ("C1", "10n")];
    let target = Section::new("A", Shape::FirstOrderLowPass, 1e4, None, 1.0, None).unwrap();
    let single = board(vec![section(target, "rc-low-pass", "low-pass", &values)]);
    let deviation = |built: &Built| deviations(built, &tolerances(0.02, 0.0), &built.yardstick()).sections[0].f0;
    let plain = deviation(&single);
    assert!((plain - 0.02 / 3f64.sqrt()).abs() < 1e-12);
    for (piece, joint) in [("5k", Joint::Sum), ("20k", Joint::Reciprocal)] {
        let mut pair = single.clone();
        let part = pair.sections[0].parts.iter_mut().find(|part| part.kind == Kind::Resistor).unwrap();
        part.pieces = vec![parse_part(piece, Kind::Resistor).unwrap().into(); 2];
        part.joint = joint;
        assert!((deviation(&pair) / plain - 0.5f64.sqrt()).abs() < 1e-12, "{joint:?}");
        let drawn = spread(&pair, &tolerances(0.02, 0.0), &pair.yardstick(), 1, 20_000);
        let w0 = drawn.sections[0].w0.unwrap();
        assert!((w0.deviation / 1e4 / (plain * 0.5f64.sqrt()) - 1.0).abs() < 5.0 / 40_000f64.sqrt(), "{joint:?}");
    }
}

/// All corners by brute force, written down here on its own: nested loops over the signs of eight parts.
#[test]
fn the_worst_corner_is_that_of_a_brute_force() {
    let built = anti_alias();
    let yardstick = built.yardstick();
    let (r, c) = (0.01, 0.05);
    let formulas: Vec<Formula> = built.sections.iter().map(Formula::of).collect();
    let mut most = 0.0f64;
    for bits in 0u32..256 {
        let mut bit = 0;
        let board: Vec<Biquad> = (built.sections.iter().zip(&formulas))
            .map(|(section, formula)| {
                let off = section.parts.iter().map(|part| {
                    let sign = if bits >> bit & 1 == 1 { 1.0 } else { -1.0 };
                    bit += 1;
                    match part.kind {
                        Kind::Resistor => 1.0 / (part.value.to_f64() * (1.0 + sign * r)),
                        Kind::Capacitor => part.value.to_f64() * (1.0 + sign * c),
                    }
                });
                formula.biquad(&off.collect::<Vec<_>>())
            })
            .collect();
        most = most.max(yardstick.deviation(&board).error);
    }
    let frequencies: Vec<f64> = yardstick.frequencies().collect();
    let judge = |board: &[Biquad]| {
        let deviation = yardstick.deviation(board);
        (deviation.error, deviation.at)
    };
    let found = worst_case(&built, &tolerances(r, c), &frequencies, &judge);
    assert!(found.every_corner && found.slots == 8 && found.corners == 256);
    assert!(
        found.value >= most * (1.0 - 1e-12) && (found.inside || found.value <= most * (1.0 + 1e-9)),
        "{} {most}",
        found.value
    );
    // What is claimed is what those parts give.
    let again = yardstick.deviation(&Boards::new(&built, &tolerances(r, c)).with_errors(&found.errors));
    assert!((again.error - found.value).abs() <= 1e-12 && again.at == found.at);
    // No drawn board is worse.
    let drawn = spread(&built, &tolerances(r, c), &yardstick, 2, 20_000);
    assert!(drawn.error.unwrap().high <= found.value);
}

/// The lone corner of one part against the other: with more slots than are tried in full, what the sensitivities point to
/// must not be less than the full set of a smaller board that it contains.
#[test]
fn a_large_board_is_at_least_as_bad_as_its_parts() {
    let values = |r: &'static str| -> Vec<(&'static str, &'static str)> {
        let resistors = ["RG", "RQ", "RF", "R2", "RA", "RB"].map(|name| (name, r));
        resistors.into_iter().chain([("C1", "10n"), ("C2", "10n")]).collect()
    };
    let tow = |name, r| section(low_pass(name, 1.6e3, 1.0), "tow-thomas", "low-pass", &values(r));
    let large = board(vec![tow("A", "10k"), tow("B", "10k"), tow("C", "10k")]);
    let yardstick = large.yardstick();
    let frequencies: Vec<f64> = yardstick.frequencies().collect();
    let judge = |board: &[Biquad]| (yardstick.deviation(board).error, yardstick.deviation(board).at);
    let found = worst_case(&large, &tolerances(0.01, 0.05), &frequencies, &judge);
    assert!(!found.every_corner && found.slots == 24);
    // Three equal sections at the same corner: three times the error in dB of one of them at the same frequency.
    let small = board(vec![tow("A", "10k")]);
    let one = Section { gain: small.targets()[0].gain, ..small.targets()[0].clone() };
    let single = roundwell::target::Yardstick::new(&[one], large.criterion);
    let judge = |board: &[Biquad]| (single.deviation(board).error, single.deviation(board).at);
    let of_one = worst_case(&small, &tolerances(0.01, 0.05), &frequencies, &judge);
    assert!(of_one.every_corner && of_one.slots == 8);
    // The floor lies 60 dB under the peak for one section as for three, so the single one sees more of the stop-band.
    assert!(found.value > 2.5 * of_one.value, "{} {}", found.value, of_one.value);
}

/// A board that oscillates at a corner is told as such, and counts as failed.
#[test]
fn unstable_boards_are_told() {
    // Q is 1/(3 - K) with K = 1 + RB/RA: at K = 2.95 errors of 5 % in RB make it negative.
    let values = [("R1", "10k"), ("R2", "10k"), ("C1", "10n"), ("C2", "10n"), ("RA", "10k"), ("RB", "19k5")];
    let circuit = "sallen-key-low-pass-gain";
    let target = Section::new("A", Shape::LowPass, 1e4, Some(20.0), 2.95, None).unwrap();
    let built = board(vec![section(target, circuit, "low-pass", &values)]);
    let limit = Limit { from: 10.0, to: 100.0, lower: None, upper: Some(1e3) };
    let mask = Mask { reference: Reference::Absolute, limits: vec![limit], delays: Vec::new(), figures: Vec::new() };
    let conditions = Conditions {
        tolerances: tolerances(0.05, 0.05),
        mask: Some(mask),
        climate: None,
        real: None,
        levels: None,
        trim: false,
        select: Vec::new(),
        sampling: sampling(1, 2000),
    };
    let found = vet(&built, &conditions);
    assert!(found.worst.value.is_infinite());
    assert!(found.spread.unstable > 1000 && found.spread.unstable < 19_000, "{}", found.spread.unstable);
    let mask = found.mask.unwrap();
    // The limit is a thousand dB away: only unstable boards break it.
    let unstable = found.spread.unstable as f64 / found.spread.boards as f64;
    assert!((1.0 - mask.yields.share() - unstable).abs() < 0.05);
    assert!(mask.worst.unwrap().value.is_infinite());
}

/// The statement that the nominal error no longer matters follows its definition: a third of the standard deviation.
#[test]
fn the_nominal_error_matters_or_not() {
    let built = anti_alias();
    let with = |tolerance: f64| {
        let tolerances = tolerances(tolerance, tolerance);
        vet(
            &built,
            &Conditions {
                tolerances,
                mask: None,
                climate: None,
                real: None,
                levels: None,
                trim: false,
                select: Vec::new(),
                sampling: sampling(1, 100),
            },
        )
    };
    let (loose, tight) = (with(0.1), with(0.0001));
    assert!(loose.nominal_is_lost_in_spread() && !tight.nominal_is_lost_in_spread());
    let ratio = loose.deviations.response.0 / tight.deviations.response.0;
    assert!((ratio / 1000.0 - 1.0).abs() < 1e-9);
}

/// An all-pass is judged by the vector error, where the phase carries all: the spread at f0 by closed form.
#[test]
fn the_phase_of_an_all_pass_is_regarded() {
    let values = [("R1", "10k"), ("C1", "10n"), ("RA", "10k"), ("RB", "10k")];
    let target = Section::new("A", Shape::FirstOrderAllPass, 1e4, None, 1.0, None).unwrap();
    let mut built = board(vec![section(target, "first-order-all-pass", "all-pass", &values)]);
    built.criterion.measure = Measure::Vector;
    // H = (1 - jx)/(1 + jx), x = w R C: |dH/H| = 2 x/(1 + x^2) dx/x, largest at x = 1, where it is dx/x. RA and RB move H by
    // (x/(1 + x^2)) sqrt(1 + x^2) or so; they are left without tolerance: only the capacitor has one.
    let found = deviations(&built, &tolerances(0.0, 0.03), &built.yardstick());
    assert!((found.response.0 / (0.03 / 3f64.sqrt()) - 1.0).abs() < 1e-3, "{:?}", found.response);
    assert!((found.response.1 / 1e4 - 1.0).abs() < 0.02);
}
