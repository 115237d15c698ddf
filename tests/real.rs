//! Real op-amps and surroundings, against first-order figures, closed forms and exact roots.

#![allow(clippy::unwrap_used)]

mod support;

use std::f64::consts::TAU;

use roundwell::analysis::{
    Built, BuiltPart, BuiltSection, Joint, Real, RealConditions, RealSection, Surroundings, real,
};
use roundwell::target::{Criterion, Section, Shape};
use roundwell::units::{Kind, Value, parse_part};

/// A value with ten digits.
fn value(number: f64) -> Value {
    parse_part(&format!("{number:.9e}"), if number < 1.0 { Kind::Capacitor } else { Kind::Resistor }).unwrap()
}

fn board(target: Section, id: &str, output: &str, values: &[(&str, f64)]) -> Built {
    let circuit = support::library(id);
    let output = circuit.outputs.iter().position(|o| o.name == output).unwrap();
    let filled: Vec<usize> = circuit.outputs[output].filled(&circuit).collect();
    let part = |slot: &usize| {
        let place = &circuit.slots[*slot];
        let number =
            values.iter().find(|(name, _)| *name == place.name).unwrap_or_else(|| panic!("{}", place.name)).1;
        let value = value(number);
        BuiltPart { slot: *slot, kind: place.kind, value, pieces: vec![value.into()], joint: Joint::Sum }
    };
    let parts = filled.iter().map(part).collect();
    let section = BuiltSection { target, circuit, output, parts };
    Built { title: String::new(), criterion: Criterion::default(), sections: vec![section] }
}

fn target(shape: Shape, f0: f64, q: f64) -> Section {
    Section::new("A", shape, f0 * TAU, Some(q), 1.0, None).unwrap()
}

fn conditions(around: Surroundings) -> RealConditions {
    RealConditions { around, shift: 0.01, level: None, spread: 0.0 }
}

fn with_bandwidth(bandwidth: f64) -> Surroundings {
    Surroundings { bandwidth: Some(bandwidth), ..Surroundings::IDEAL }
}

fn looked_at(built: &Built, around: Surroundings) -> Real {
    real(built, &conditions(around), &built.yardstick())
}

fn figures(built: &Built, around: Surroundings) -> (f64, Option<f64>) {
    match looked_at(built, around).sections[0] {
        RealSection::Stable { w0, q, .. } => (w0, q),
        other => panic!("{other:?}"),
    }
}

const R: f64 = 10e3;
const C: f64 = 10e-9;

// Source: first-order shifts for op-amps of gain wt/s, classical results of Budak, Sedra and Brackett, and Huelsman (from
// memory), which agree with a derivation of first order in 1/wt from the same netlists.
#[test]
fn every_circuit_shifts_as_its_first_order_figures_say() {
    let (w0, q) = (1.0 / (R * C), 4.0);
    let f0 = w0 / TAU;
    let low = || target(Shape::LowPass, f0, q);
    // Shifts per f0/GBW of w0 and of Q.
    let unit = |time: f64| 1.0 / (2.0 * time * w0);
    let gain = 3.0 - 1.0 / q;
    let mfb = {
        let (r1, r2, r3, c1, c2) = (R, R, 0.5 * R, 4.0 * q * C, C / (2.0 * q));
        let (g1, g2, g3) = (1.0 / r1, 1.0 / r2, 1.0 / r3);
        let shift = unit(r3 * c2);
        let values = [("R1", r1), ("R2", r2), ("R3", r3), ("C1", c1), ("C2", c2)];
        let built = board(low(), "multiple-feedback-low-pass", "low-pass", &values);
        (built, -shift, shift * (g2 + g3 - g1) / (g1 + g2 + g3))
    };
    let band = {
        let (r3, r2) = (2.0 * q * R, 1.0 / (2.0 * q / R - 1.0 / (q * R)));
        let values = [("R1", q * R), ("R2", r2), ("R3", r3), ("C1", C), ("C2", C)];
        let built = board(target(Shape::BandPass, f0, q), "multiple-feedback-band-pass", "band-pass", &values);
        let shift = (1.0 / (q * R) + 1.0 / r2) / (2.0 * C * w0);
        (built, -shift, shift)
    };
    let tow = [("RG", R), ("RQ", q * R), ("C1", C), ("RF", R), ("R2", R), ("C2", C), ("RA", R), ("RB", R)];
    let state =
        [("R1", R), ("R2", R), ("R3", R), ("R4", R), ("R5", R), ("R6", (2.0 * q - 1.0) * R), ("C1", C), ("C2", C)];
    let fliege =
        [("C7", C), ("C2", C), ("R7", 2.0 * q * R), ("R8", 2.0 * q * R), ("R1", R), ("R3", R), ("R4", R), ("R6", R)];
    let forward = [tow.as_slice(), &[("CF", C), ("R5", R), ("R6", R)]].concat();
    let low_sallen = [("R1", R), ("R2", R), ("C1", 2.0 * q * C), ("C2", C / (2.0 * q))];
    let high_sallen = [("C1", C), ("C2", C), ("R1", R / (2.0 * q)), ("R2", 2.0 * q * R)];
    let with_gain = [("R1", R), ("R2", R), ("C1", C), ("C2", C), ("RA", R), ("RB", (gain - 1.0) * R)];
    let cases = [
        (
            board(low(), "sallen-key-low-pass", "low-pass", &low_sallen),
            -unit(R * C / (2.0 * q)),
            unit(R * C / (2.0 * q)),
        ),
        (
            board(target(Shape::HighPass, f0, q), "sallen-key-high-pass", "high-pass", &high_sallen),
            -unit(R * C / (2.0 * q)),
            unit(R * C / (2.0 * q)),
        ),
        (
            board(low(), "sallen-key-low-pass-gain", "low-pass", &with_gain),
            -gain * gain * unit(R * C),
            gain * gain * unit(R * C),
        ),
        mfb,
        band,
        (board(low(), "tow-thomas", "low-pass", &tow), -1.5, 4.0 * q + 0.5),
        (board(low(), "akerberg-mossberg", "low-pass", &tow), -1.5, 0.5),
        (board(low(), "state-variable", "low-pass", &state), -(1.0 - 1.5 / q), 4.0 * q - 1.5 / q),
        (board(target(Shape::Notch, f0, q), "fliege-notch", "notch", &fliege), -2.0, 0.0),
        (
            board(target(Shape::Notch, f0, q), "feed-forward-biquad", "notch", &forward),
            -(1.5 - 0.5 / q),
            5.0 * q - 0.5 - 0.5 / q,
        ),
    ];
    for (built, of_w0, of_q) in cases {
        let id = &built.sections[0].circuit.id;
        let nominal = built.sections[0].target.figures_of(&built.nominal()[0]);
        assert!((nominal.w0 / w0 - 1.0).abs() < 1e-6 && (nominal.q.unwrap() / q - 1.0).abs() < 1e-6, "{id}");
        let ratio = 1e-5;
        let (found, quality) = figures(&built, with_bandwidth(f0 / ratio));
        let shifts = [(found / nominal.w0 - 1.0) / ratio, (quality.unwrap() / nominal.q.unwrap() - 1.0) / ratio];
        for (found, expected) in shifts.into_iter().zip([of_w0, of_q]) {
            // What is left is of second order: about the square of the shift.
            assert!((found - expected).abs() < 5e-3 * (1.0 + expected.abs()), "{id}: {found} against {expected}");
        }
    }
}

/// First-order sections: buffered ones keep their pole; the inverting one has the smaller root of a quadratic (exact).
#[test]
fn first_order_sections_follow_their_exact_roots() {
    let first = |shape, id: &str, output: &str, values: &[(&str, f64)]| {
        let gain = if id == "inverting-low-pass" { -1.0 } else { 1.0 };
        let target = Section::new("A", shape, 1.0 / (R * C), None, gain, None).unwrap();
        board(target, id, output, values)
    };
    let bandwidth = 1e5;
    let buffered = [("R1", R), ("C1", C), ("RA", R), ("RB", R)];
    for (shape, id, output) in [
        (Shape::FirstOrderLowPass, "rc-low-pass", "low-pass"),
        (Shape::FirstOrderHighPass, "rc-high-pass", "high-pass"),
        (Shape::FirstOrderAllPass, "first-order-all-pass", "all-pass"),
        (Shape::FirstOrderAllPass, "first-order-all-pass-lead", "all-pass"),
    ] {
        let (w0, q) = figures(&first(shape, id, output, &buffered), with_bandwidth(bandwidth));
        assert!((w0 * R * C - 1.0).abs() < 1e-9 && q.is_none(), "{id} {w0}");
    }
    // (G1 + G2 + s C) s/wt + G2 + s C = 0.
    let built = first(Shape::FirstOrderLowPass, "inverting-low-pass", "low-pass", &[("R1", R), ("R2", R), ("C2", C)]);
    let wt = TAU * bandwidth;
    let (a, b, c) = (C / wt, 2.0 / R / wt + C, 1.0 / R);
    let exact = 2.0 * c / (b + (b * b - 4.0 * a * c).sqrt());
    let (w0, _) = figures(&built, with_bandwidth(bandwidth));
    assert!((w0 / exact - 1.0).abs() < 1e-9, "{w0} {exact}");
}

// Source: the roots of the cubic (1 + s/wt) P(s) - s R1 C1, P = 1 + s (R1 C1 + R1 C2 + R2 C2) + s^2 R1 R2 C1 C2, which is the
// unity-gain low-pass of Sallen and Key with an op-amp of gain wt/s; worked for 40 kHz, Q 5, 10 MHz: f0 -1.94 %, Q +1.90 %, and
// -0.96 dB at 1.11 f0 (numpy.roots).
#[test]
fn a_fast_low_pass_moves_by_two_percent() {
    let q = 5.0;
    let c = 1.0 / (TAU * 40e3 * R);
    let values = [("R1", R), ("R2", R), ("C1", 2.0 * q * c), ("C2", c / (2.0 * q))];
    let built = board(target(Shape::LowPass, 40e3, q), "sallen-key-low-pass", "low-pass", &values);
    let found = looked_at(&built, with_bandwidth(10e6));
    let RealSection::Stable { w0, q: Some(quality), least_bandwidth: Some(least) } = found.sections[0] else {
        panic!("{found:?}");
    };
    assert!((w0 / TAU / 40e3 - 1.0 + 0.0194).abs() < 1e-4, "{}", w0 / TAU);
    assert!((quality / q - 1.0 - 0.0190).abs() < 1e-4, "{quality}");
    let pole = num_complex::Complex64::new(-0.5 * w0 / quality, w0 * (1.0 - 0.25 / (quality * quality)).sqrt());
    let wt = TAU * 10e6;
    let p = 1.0 + pole * (R * 2.0 * q * c + 2.0 * R * c / (2.0 * q)) + pole * pole * (R * R * c * c);
    let rest = (1.0 + pole / wt) * p - pole * (R * 2.0 * q * c);
    assert!(rest.norm() < 1e-8, "{rest}");
    // First order: GBW = Q f0/1 % = 20 MHz for a shift of 1 %.
    assert!((least / 20e6 - 1.0).abs() < 0.05, "{least}");
    let (error, at) = found.error.unwrap();
    assert!(error > 0.9 && error < 1.7 && at > 0.0, "{error} {at}");
    // With ideal surroundings nothing moves, and the error is that of the coefficients.
    let ideal = looked_at(&built, Surroundings::IDEAL);
    let RealSection::Stable { w0, q: Some(quality), least_bandwidth: None } = ideal.sections[0] else {
        panic!("{ideal:?}");
    };
    let nominal = built.sections[0].target.figures_of(&built.nominal()[0]);
    assert!((w0 / nominal.w0 - 1.0).abs() < 1e-9 && (quality / nominal.q.unwrap() - 1.0).abs() < 1e-9);
    assert!((ideal.error.unwrap().0 - built.yardstick().deviation(&built.nominal()).error).abs() < 1e-9);
}

// Source: 1/Q becomes 1/Q - 4 f0/GBW in the Tow-Thomas circuit: it oscillates once 4 Q f0/GBW is above 1 (Budak; from memory).
#[test]
fn a_network_that_oscillates_is_told_as_such() {
    let q = 20.0;
    let tow = [("RG", R), ("RQ", q * R), ("C1", C), ("RF", R), ("R2", R), ("C2", C), ("RA", R), ("RB", R)];
    let f0 = 1.0 / (R * C * TAU);
    let built = board(target(Shape::LowPass, f0, q), "tow-thomas", "low-pass", &tow);
    let unstable = looked_at(&built, with_bandwidth(2.0 * q * f0));
    assert_eq!(unstable.sections, [RealSection::Unstable]);
    assert_eq!((unstable.error, unstable.slew), (None, None));
    let stable = looked_at(&built, with_bandwidth(10.0 * q * f0));
    assert!(matches!(stable.sections[0], RealSection::Stable { .. }));
}

// Source: as above, Q moves by 4 Q + 1/2 of f0/GBW: for 1 % with Q of 4 the bandwidth is 1650 f0, to first order.
#[test]
fn the_least_bandwidth_follows_the_first_order_shift() {
    let q = 4.0;
    let f0 = 1.0 / (R * C * TAU);
    let tow = [("RG", R), ("RQ", q * R), ("C1", C), ("RF", R), ("R2", R), ("C2", C), ("RA", R), ("RB", R)];
    let built = board(target(Shape::LowPass, f0, q), "tow-thomas", "low-pass", &tow);
    // Whatever the op-amp that is looked at.
    for bandwidth in [100.0 * f0, 1e4 * f0] {
        let found = looked_at(&built, with_bandwidth(bandwidth));
        let RealSection::Stable { least_bandwidth: Some(least), .. } = found.sections[0] else { panic!("{found:?}") };
        assert!((least / f0 / 1650.0 - 1.0).abs() < 0.02, "{}", least / f0);
        // It is what it says: just enough.
        for (factor, enough) in [(1.001, true), (0.999, false)] {
            let (w0, quality) = figures(&built, with_bandwidth(least * factor));
            let nominal = built.sections[0].target.figures_of(&built.nominal()[0]);
            let shift = (w0 / nominal.w0 - 1.0).abs().max((quality.unwrap() / nominal.q.unwrap() - 1.0).abs());
            assert_eq!(shift <= 0.01, enough, "{shift}");
        }
    }
}

/// A source adds to the first resistor, strays to the capacitors at their nodes; a load says nothing to an ideal output.
#[test]
fn surroundings_follow_closed_forms() {
    let values = |r1: f64, c1: f64| {
        let target = Section::new("A", Shape::FirstOrderLowPass, 1e4, None, 1.0, None).unwrap();
        board(target, "rc-low-pass", "low-pass", &[("R1", r1), ("C1", c1), ("RA", R), ("RB", R)])
    };
    let built = values(R, C);
    let around =
        Surroundings { source_resistance: 600.0, stray: 100e-12, load_resistance: Some(1e3), ..Surroundings::IDEAL };
    let (w0, _) = figures(&built, around);
    assert!((w0 * (R + 600.0) * (C + 100e-12) - 1.0).abs() < 1e-9, "{w0}");
    let low = |r1: f64| {
        let values = [("R1", r1), ("R2", 12e3), ("C1", 22e-9), ("C2", 4.7e-9)];
        board(target(Shape::LowPass, 1.5e3, 1.1), "sallen-key-low-pass", "low-pass", &values)
    };
    let with_source = figures(&low(R), Surroundings { source_resistance: 600.0, ..Surroundings::IDEAL });
    let without = figures(&low(R + 600.0), Surroundings::IDEAL);
    assert!((with_source.0 / without.0 - 1.0).abs() < 1e-9);
    assert!((with_source.1.unwrap() / without.1.unwrap() - 1.0).abs() < 1e-9);
}

/// The steepest sine of a buffered low-pass: 2 pi f |H| V, which grows up to the end of the band; closed form.
#[test]
fn the_slew_rate_follows_the_sine() {
    let target = Section::new("A", Shape::FirstOrderLowPass, 1.0 / (R * C), None, 1.0, None).unwrap();
    let built = board(target, "rc-low-pass", "low-pass", &[("R1", R), ("C1", C), ("RA", R), ("RB", R)]);
    let asked = RealConditions { level: Some(5.0), ..conditions(Surroundings::IDEAL) };
    let slew = real(&built, &asked, &built.yardstick()).slew.unwrap();
    let h = |x: f64| 1.0 / (1.0 + x * x).sqrt();
    let expected = 10.0 / (R * C) * 5.0 * h(10.0) / h(0.1);
    assert!((slew.rate / expected - 1.0).abs() < 1e-9, "{slew:?} {expected}");
    assert_eq!((slew.section, slew.op_amp), (0, 0));
}

// Source: the exact cubic of the test above, once more with its coefficients written out; its roots found here by Newton's
// iteration from the ideal pole. First order: f0 moves by -Q f0/GBW.
#[test]
fn both_ends_of_the_bandwidth_are_those_of_the_exact_roots() {
    let (q, f0) = (5.0, 40e3);
    let c = 1.0 / (TAU * f0 * R);
    let (c1, c2) = (2.0 * q * c, c / (2.0 * q));
    let values = [("R1", R), ("R2", R), ("C1", c1), ("C2", c2)];
    let built = board(target(Shape::LowPass, f0, q), "sallen-key-low-pass", "low-pass", &values);
    let exact = |bandwidth: f64| {
        let (t, a, b) = (1.0 / (TAU * bandwidth), R * (c1 + 2.0 * c2), R * R * c1 * c2);
        let coefficients = [1.0, a + t - R * c1, b + a * t, b * t];
        let zero = num_complex::Complex64::new(0.0, 0.0);
        let at = |s: num_complex::Complex64| coefficients.iter().rev().fold(zero, |sum, k| sum * s + k);
        let slope =
            |s: num_complex::Complex64| s * s * 3.0 * coefficients[3] + s * 2.0 * coefficients[2] + coefficients[1];
        let mut s = num_complex::Complex64::new(-0.1, 1.0) * TAU * f0;
        (0..50).for_each(|_| s -= at(s) / slope(s));
        (s.norm() / (TAU * f0), s.norm() / (-2.0 * s.re))
    };
    let asked = RealConditions { spread: 0.3, ..conditions(with_bandwidth(10e6)) };
    let found = real(&built, &asked, &built.yardstick());
    assert_eq!(found.ends.len(), 2);
    for (end, bandwidth) in found.ends.iter().zip([7e6, 13e6]) {
        assert!((end.bandwidth / bandwidth - 1.0).abs() < 1e-12);
        let RealSection::Stable { w0, q: Some(quality), least_bandwidth: None } = end.sections[0] else {
            panic!("{end:?}");
        };
        let (expected, of_q) = exact(bandwidth);
        assert!((w0 / (TAU * f0) / expected - 1.0).abs() < 1e-9 && (quality / of_q - 1.0).abs() < 1e-8, "{quality}");
        assert!(end.error.is_some());
    }
    // The slower op-amp is the worse one, and both lie about what the nominal one gives.
    let error = |end: usize| found.ends[end].error.unwrap().0;
    assert!(error(0) > found.error.unwrap().0 && error(1) < found.error.unwrap().0);
    // Without a spread there are no ends.
    assert!(looked_at(&built, with_bandwidth(10e6)).ends.is_empty());
    let ideal = RealConditions { spread: 0.3, ..conditions(Surroundings::IDEAL) };
    assert!(real(&built, &ideal, &built.yardstick()).ends.is_empty());
}
