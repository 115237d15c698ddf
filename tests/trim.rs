//! Trim plans against closed forms.

#![allow(clippy::unwrap_used)]

mod support;

use std::f64::consts::TAU;

use roundwell::analysis::{
    Boards, Built, BuiltPart, BuiltSection, Distribution, Joint, Sensitivities, Tolerances, Trim, Watch, selection,
    trims,
};
use roundwell::parts::Series;
use roundwell::target::{Criterion, Section, Shape};
use roundwell::units::{Kind, format_part, parse_part};

fn board(target: Section, id: &str, output: &str, values: &[(&str, f64)]) -> Built {
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
    let section = BuiltSection { target, circuit, output, parts };
    Built { title: String::new(), criterion: Criterion::default(), sections: vec![section] }
}

const R: f64 = 10e3;
const C: f64 = 10e-9;
const Q: f64 = 2.0;

fn tow_thomas() -> Built {
    let target = Section::new("A", Shape::LowPass, 1.0 / (R * C), Some(Q), 1.0, None).unwrap();
    let values = [("RG", R), ("RQ", Q * R), ("C1", C), ("RF", R), ("R2", R), ("C2", C), ("RA", R), ("RB", R)];
    board(target, "tow-thomas", "low-pass", &values)
}

fn tolerances(resistors: f64, capacitors: f64) -> Tolerances {
    Tolerances { resistors, capacitors, distribution: Distribution::Uniform, reel_share: 0.0 }
}

fn named(built: &Built, trims: &[Trim]) -> Vec<(String, &'static str)> {
    trims.iter().map(|t| (built.sections[0].slot_name(t.slot).to_string(), t.figure)).collect()
}

// Source: the design equations of Tow and Thomas: w0^2 = RB/(RA RF R2 C1 C2), Q = w0 RQ C1, gain RA RF/(RB RG); and the order
// R2, RQ, RG of any textbook. R2 takes up the sum of RF, RA, RB (1 %) and C1, C2 (5 %); with f0 set, RQ that of C1 alone; RG
// that of RF, RA and RB.
#[test]
fn the_reach_of_each_trim_is_what_the_rest_leaves() {
    let built = tow_thomas();
    let found = trims(&built, &tolerances(0.01, 0.05));
    let names: Vec<(String, &str)> =
        [("R2", "f0"), ("RQ", "Q"), ("RG", "gain")].map(|(s, f)| (s.to_string(), f)).into();
    assert_eq!(named(&built, &found), names);
    for (trim, reach) in found.iter().zip([0.13, 0.05, 0.03]) {
        assert!((trim.reach - reach).abs() < 1e-12, "{trim:?}");
    }
}

/// The fixed part and the trimmer cover the reach even if both are off, and no smaller trimmer does.
#[test]
fn fixed_part_and_trimmer_cover_the_reach() {
    let built = tow_thomas();
    for trim in trims(&built, &tolerances(0.01, 0.05)) {
        let section = &built.sections[0];
        let nominal = section.parts.iter().find(|part| part.slot == trim.slot).unwrap().value.to_f64();
        let (fixed, trimmer) = trim.pair.unwrap();
        let (fixed, trimmer) = (fixed.to_f64(), trimmer.to_f64());
        assert!(fixed * 1.01 <= nominal * (1.0 - trim.reach));
        let reaches = |trimmer: f64| fixed * 0.99 + trimmer * 0.8 >= nominal * (1.0 + trim.reach);
        assert!(reaches(trimmer) && !reaches(trimmer * 0.5));
        // The next value of E24 is at most an eighth larger.
        assert!(fixed * 1.13 * 1.01 > nominal * (1.0 - trim.reach));
    }
    // Parts as loose as this leave nothing to trim with.
    assert!(trims(&built, &tolerances(0.2, 0.9)).iter().all(|trim| trim.figure != "f0" || trim.pair.is_none()));
}

/// A board off at a corner is trimmed step by step: each figure comes out right, and no reach is exceeded, for small errors.
#[test]
fn trimming_by_the_plan_brings_a_board_back() {
    let built = tow_thomas();
    let limits = tolerances(1e-4, 5e-4);
    let boards = Boards::new(&built, &limits);
    let target = &built.sections[0].target;
    let nominal = target.figures_of(&built.nominal()[0]);
    let plan = trims(&built, &limits);
    for bits in 0u32..256 {
        let parts = &built.sections[0].parts;
        let mut errors: Vec<f64> = (parts.iter().enumerate())
            .map(|(k, part)| limits.of(part.kind) * if bits >> k & 1 == 1 { 1.0 } else { -1.0 })
            .collect();
        for trim in &plan {
            let k = parts.iter().position(|part| part.slot == trim.slot).unwrap();
            errors[k] = 0.0;
            let value = |errors: &[f64]| {
                let found = target.figures_of(&boards.with_errors(errors)[0]);
                match trim.figure {
                    "f0" => found.w0 / nominal.w0,
                    "Q" => found.q.unwrap() / nominal.q.unwrap(),
                    _ => found.gain / nominal.gain,
                }
            };
            let slope = {
                let s = Sensitivities::of(&built.sections[0]).figures(k);
                match trim.figure {
                    "f0" => s.f0,
                    "Q" => s.q,
                    _ => s.gain,
                }
            };
            for _ in 0..5 {
                errors[k] -= (value(&errors) - 1.0) / slope;
            }
            assert!((value(&errors) - 1.0).abs() < 1e-12, "{bits} {}", trim.figure);
            assert!(errors[k].abs() <= trim.reach * 1.01, "{bits} {} {} {}", trim.figure, errors[k], trim.reach);
        }
        // No later step has disturbed an earlier one.
        let found = target.figures_of(&boards.with_errors(&errors)[0]);
        assert!((found.w0 / nominal.w0 - 1.0).abs() < 1e-12 && (found.q.unwrap() / Q - 1.0).abs() < 1e-9);
        assert!((found.gain / nominal.gain - 1.0).abs() < 1e-12);
    }
}

// Source: closed forms of the phase: -90 degrees at f0 for a low-pass, 0 or 180 for a band-pass, whatever Q.
#[test]
fn what_is_watched_rests_on_what_is_set() {
    let built = tow_thomas();
    let found = trims(&built, &tolerances(0.01, 0.05));
    let Watch::Phase { at, degrees } = found[0].watch else { panic!("{found:?}") };
    assert!((at * R * C - 1.0).abs() < 1e-12 && (degrees + 90.0).abs() < 1e-9);
    let Watch::Phase { at, degrees } = found[1].watch else { panic!("{found:?}") };
    let x = at * R * C;
    assert!((degrees + 180.0 - (x / Q / (x * x - 1.0)).atan().to_degrees()).abs() < 1e-9, "{degrees}");
    let Watch::Magnitude { at, gain } = found[2].watch else { panic!("{found:?}") };
    assert!(at * R * C < 0.02 && (gain - 1.0).abs() < 1e-3);
    // A Fliege notch is tuned by its null.
    let target = Section::new("N", Shape::Notch, 50.0 * TAU, Some(Q), 1.0, None).unwrap();
    let c = 1.0 / (R * 50.0 * TAU);
    let values =
        [("C7", c), ("C2", c), ("R7", 2.0 * Q * R), ("R8", 2.0 * Q * R), ("R1", R), ("R3", R), ("R4", R), ("R6", R)];
    let notch = board(target, "fliege-notch", "notch", &values);
    let found = trims(&notch, &tolerances(0.01, 0.05));
    assert_eq!(named(&notch, &found), [("R1".to_string(), "f0")]);
    assert!(matches!(found[0].watch, Watch::Least { at } if (at / 50.0 / TAU - 1.0).abs() < 1e-12));
}

/// Values to select from on test, by hand: R2 = 10k has to reach 8.7k to 11.3k; of E24 with 1 % that is 8k2 (8.282k at most) to 12k
/// (11.88k at least). The widest step is that from 8k2 to 9k1; f0 follows R2 with -1/2.
#[test]
fn values_selected_on_test_cover_the_reach() {
    let built = tow_thomas();
    let plan = trims(&built, &tolerances(0.01, 0.05));
    let (least, most) = Kind::Resistor.range();
    let shelf = Series::E24.values_between(least, most);
    let nominal = parse_part("10k", Kind::Resistor).unwrap();
    let found = selection(&plan[0], nominal, &shelf, 0.01).unwrap();
    let names: Vec<String> = found.values.iter().map(|value| format_part(*value, Kind::Resistor)).collect();
    assert_eq!(names, ["8k2", "9k1", "10k", "11k", "12k"]);
    assert!((plan[0].sensitivity + 0.5).abs() < 1e-12, "{}", plan[0].sensitivity);
    assert!((found.leaves - 0.5 * 0.9 / 17.3).abs() < 1e-12, "{}", found.leaves);
    let (a, b) = (8.2 * 0.99, 9.1 * 1.01);
    assert!((found.leaves_with_tolerance - 0.5 * (b - a) / (b + a)).abs() < 1e-12);
    // Brute force: whatever is needed between them, one of the values leaves no more, and somewhere no less.
    let left = |needed: f64| {
        let off = found.values.iter().map(|value| (value.to_f64() / needed - 1.0).abs());
        0.5 * off.fold(f64::INFINITY, f64::min)
    };
    let worst = (0..=380_000).map(|k| left(8.2e3 + 0.01 * f64::from(k))).fold(0.0, f64::max);
    assert!(worst <= found.leaves * (1.0 + 1e-12) && worst > found.leaves * 0.9999, "{worst}");
    // A finer series leaves less; a shelf that ends too early does not do.
    let fine = selection(&plan[0], nominal, &Series::E96.values_between(least, most), 0.01).unwrap();
    assert!(fine.leaves < found.leaves / 3.0 && fine.values.len() > 10);
    for (from, to) in [("8k7", "1M"), ("1k", "11k")] {
        let end = |text| parse_part(text, Kind::Resistor).unwrap();
        assert_eq!(selection(&plan[0], nominal, &Series::E24.values_between(end(from), end(to)), 0.01), None);
    }
    assert_eq!(selection(&plan[0], nominal, &[], 0.01), None);
}
