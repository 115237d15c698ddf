//! Headroom and noise against closed forms.

#![allow(clippy::unwrap_used)]

mod support;

use std::f64::consts::{PI, TAU};

use roundwell::analysis::{Built, BuiltPart, BuiltSection, Joint, LevelConditions, Levels, Surroundings, levels};
use roundwell::target::{Criterion, Section, Shape};
use roundwell::units::{Kind, parse_part};

fn section(target: Section, id: &str, output: &str, values: &[(&str, f64)]) -> BuiltSection {
    let circuit = support::library(id);
    let output = circuit.outputs.iter().position(|o| o.name == output).unwrap();
    let part = |slot: usize| {
        let place = &circuit.slots[slot];
        let number =
            values.iter().find(|(name, _)| *name == place.name).unwrap_or_else(|| panic!("{}", place.name)).1;
        let kind = if number < 1.0 { Kind::Capacitor } else { Kind::Resistor };
        let value = parse_part(&format!("{number:.9e}"), kind).unwrap();
        BuiltPart { slot, kind: place.kind, value, pieces: vec![value.into()], joint: Joint::Sum }
    };
    let parts = circuit.outputs[output].filled(&circuit).map(part).collect();
    BuiltSection { target, circuit, output, parts }
}

const R: f64 = 10e3;
const C: f64 = 1e-9;
const KT: f64 = 1.380_649e-23 * 298.15;

fn board(sections: Vec<BuiltSection>, decades: f64) -> Built {
    let w0 = sections[0].target.w0;
    let ends = 10f64.powf(decades);
    let criterion = Criterion { band: Some((w0 / ends, w0 * ends)), ..Criterion::default() };
    Built { title: String::new(), criterion, sections }
}

fn first_order() -> BuiltSection {
    let target = Section::new("A", Shape::FirstOrderLowPass, 1.0 / (R * C), None, 1.0, None).unwrap();
    section(target, "rc-low-pass", "low-pass", &[("R1", R), ("C1", C)])
}

fn tow_thomas(name: &str, q: f64) -> BuiltSection {
    let target = Section::new(name, Shape::LowPass, 1.0 / (R * C), Some(q), 1.0, None).unwrap();
    let values = [("RG", R), ("RQ", q * R), ("C1", C), ("RF", R), ("R2", R), ("C2", C), ("RA", R), ("RB", R)];
    section(target, "tow-thomas", "low-pass", &values)
}

fn found(built: &Built, voltage_noise: f64, current_noise: f64, around: Surroundings) -> Levels {
    let conditions = LevelConditions { around, swing: 10.0, voltage_noise, current_noise };
    levels(built, &conditions, &built.yardstick()).unwrap()
}

// Source: the noise of R and C is kT/C over all frequencies (H. Nyquist, 1928), 2.03 uV for 1 nF at 25 C; between two
// frequencies it is 2 k T/(pi C) times the difference of atan(f/f0). Voltage noise passes the follower as it is, current noise
// at its input meets R in parallel with C.
#[test]
fn a_buffered_low_pass_has_the_noise_of_its_capacitor() {
    let built = board(vec![first_order()], 3.0);
    let share = (1e3f64.atan() - 1e-3f64.atan()) * 2.0 / PI;
    let noise = found(&built, 0.0, 0.0, Surroundings::IDEAL).noise;
    assert!((noise.total() / (KT / C * share).sqrt() - 1.0).abs() < 2e-4, "{noise:?}");
    assert!((noise.total() / 2.03e-6 - 1.0).abs() < 0.005);
    let (en, i) = (5e-9, 2e-12);
    let noise = found(&built, en, i, Surroundings::IDEAL).noise;
    let bandwidth = (1e3 - 1e-3) / (R * C) / TAU;
    assert!((noise.voltage / (en * bandwidth.sqrt()) - 1.0).abs() < 1e-9, "{noise:?}");
    // |Z|^2 = R^2/(1 + (f/f0)^2), over all frequencies R^2 f0 pi/2. The other input is held by the follower's output.
    let current = i * R * (share * PI / 2.0 / (R * C) / TAU).sqrt();
    assert!((noise.current / current - 1.0).abs() < 2e-4, "{noise:?} {current}");
    // Half the impedance: kT over twice the capacitance, half the voltage of the current noise.
    assert!(
        (noise.at_level(0.5).powi(2)
            - noise.thermal.powi(2) / 2.0
            - noise.voltage.powi(2)
            - noise.current.powi(2) / 4.0)
            .abs()
            < 1e-9 * noise.total().powi(2)
    );
}

/// What scaling says is what a scaled board has.
#[test]
fn the_impedance_level_scales_the_noise() {
    let scaled = |factor: f64| {
        let values = [("R1", R * factor), ("R2", R * factor), ("C1", 4.0 * C / factor), ("C2", C / factor)];
        let target = Section::new("A", Shape::LowPass, 0.5 / (R * C), Some(1.0), 1.0, None).unwrap();
        board(vec![section(target, "sallen-key-low-pass", "low-pass", &values)], 1.0)
    };
    let noise = |factor: f64| found(&scaled(factor), 4e-9, 1e-12, Surroundings::IDEAL).noise;
    for factor in [0.5, 2.0, 10.0] {
        assert!((noise(factor).total() / noise(1.0).at_level(factor) - 1.0).abs() < 1e-6, "{factor}");
    }
}

// Source: peak gains of a Tow-Thomas section of equal parts: Q at f0 at the band-pass output, and that of a second-order
// low-pass, Q/sqrt(1 - 1/(4 Q^2)) at f0 sqrt(1 - 1/(2 Q^2)), at both others; closed forms.
#[test]
fn peaks_follow_their_closed_forms() {
    let q = 5.0;
    let built = board(vec![tow_thomas("A", q)], 1.0);
    let levels = found(&built, 0.0, 0.0, Surroundings::IDEAL);
    let low = q / (1.0 - 0.25 / (q * q)).sqrt();
    for (peak, gain) in levels.peaks.iter().zip([q, low, low]) {
        assert!((peak.gain / gain - 1.0).abs() < 1e-9, "{peak:?} {gain}");
        assert!((peak.at * R * C - 1.0).abs() < 0.02);
    }
    let input = levels.largest_input(10.0).unwrap();
    assert!((input * low / 10.0 - 1.0).abs() < 1e-9 && levels.first().unwrap().gain >= q);
    let range = 20.0 * (10.0 / 2f64.sqrt() / levels.noise.total()).log10();
    assert!((levels.dynamic_range(10.0).unwrap() - range).abs() < 0.02);
}

/// Gains count from the source of the chain: two equal sections multiply.
#[test]
fn a_chain_is_taken_from_its_source() {
    let (one, two) =
        (board(vec![tow_thomas("A", 3.0)], 1.0), board(vec![tow_thomas("A", 3.0), tow_thomas("B", 3.0)], 1.0));
    let (single, chain) = (found(&one, 0.0, 0.0, Surroundings::IDEAL), found(&two, 0.0, 0.0, Surroundings::IDEAL));
    assert_eq!(chain.peaks.len(), 6);
    assert!((chain.peaks[1].gain / single.peaks[1].gain - 1.0).abs() < 1e-9);
    assert!((chain.peaks[4].gain / single.peaks[1].gain.powi(2) - 1.0).abs() < 1e-6);
    assert_eq!((chain.first().unwrap().section, chain.peaks[5].section), (1, 1));
    // The first section's noise passes through the second: more than that of one by itself.
    assert!(chain.noise.thermal > single.noise.thermal);
}

/// A source's resistance has noise like any other, and divides nothing at DC here.
#[test]
fn the_source_has_noise_too() {
    let built = board(vec![first_order()], 3.0);
    let with = found(&built, 0.0, 0.0, Surroundings { source_resistance: 5e3, ..Surroundings::IDEAL });
    // R and source together still leave kT/C; the corner is lower, so that the band holds a little more of it.
    assert!((with.noise.total() / (KT / C).sqrt() - 1.0).abs() < 1e-3, "{:?}", with.noise);
}
