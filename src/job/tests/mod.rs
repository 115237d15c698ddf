//! Jobs that are sound, jobs from flags, and jobs with slips.

#![allow(clippy::unwrap_used)]

mod faults;
mod stock;

use std::f64::consts::TAU;
use std::sync::Arc;
use std::time::Duration;

use proptest::prelude::*;

use super::*;
use crate::circuit::{Circuit, find};
use crate::parts::Series;
use crate::target::{Criterion, Measure, Weights};
use crate::text::{Fault, located, render};
use crate::units::test_support::deterministic;
use crate::units::{Kind, Value, format_part, parse_part};

fn circuits(id: &str) -> Result<Arc<Circuit>, String> {
    find(id).cloned().map(Arc::new).ok_or_else(|| format!("there is no circuit `{id}`"))
}

fn read(text: &str) -> Result<Job, Vec<Fault>> {
    let resolved = JobFile::parse(text).and_then(|job| resolve(&job, &mut circuits, None));
    resolved.map_err(|faults| located(text, faults))
}

fn sound(text: &str) -> Job {
    read(text).unwrap_or_else(|faults| panic!("{}", render(&faults, "job.ron", text, false)))
}

fn in_section(inner: &str) -> String {
    format!("(sections: [({inner})])")
}

fn in_low_pass(inner: &str) -> String {
    format!("(sections: [(shape: LowPass, f0: \"1k\", q: 1, {inner})])")
}

fn in_job(inner: &str) -> String {
    format!("(sections: [(shape: LowPass, f0: \"1k\", q: 1)], {inner})")
}

fn value(text: &str, kind: Kind) -> Value {
    parse_part(text, kind).unwrap()
}

/// The values of a shelf as text.
fn listed(shelf: &crate::parts::Shelf) -> String {
    shelf.values().iter().map(|&v| format_part(v, shelf.kind())).collect::<Vec<_>>().join(" ")
}

const EXAMPLE: &str = r#"(
  title: "Vibration logger, anti-alias",
  sections: [
    (name: "A", shape: LowPass, f0: "1 kHz", q: 0.5412, gain: 2.0, circuit: "tow-thomas"),
    (shape: Notch, w0: "6283 rad/s", q: 2, fz: "1.2 kHz", output: "notch", sign: Either),
    (shape: LowPass, poles: ("1 kHz", "3 kHz"), circuit: "sallen-key-low-pass-gain", gain: 2.5,
        resistors: (series: E24, from: "1k", to: "1M", exclude: ["1k1"]),
        slots: {"R1": (pin: "10k"), "C1": (shelf: (series: E6, from: "1n", to: "100n"))},
        equal: [["R1", "R2"]]),
    (shape: BandPass, f0: 5e2, q: "3", gain: -1, untie: [["RB", "RA"]], slots: {"RG": (exclude: ["1k", "1M"])}),
  ],
  resistors: [(series: E3, from: "1k", to: "1M"), (values: ["33k2", "4k99"])],
  capacitors: (series: [E3, E6], from: "1n", to: "4n7"),
  band: ("10 Hz", "20 kHz"), floor: "50 dB", ignore_gain: true,
  measure: Weighted(f0: 1, q: 0.2, gain: 1),
  max_part_numbers: 8, wanted_error: "0.5 %", error_limit: 0.1, error_resolution: "0.01 %",
  rows: 5, alternatives: 2, impedance: ("2k", "50k"), time_limit: "10 s",
)"#;

#[test]
fn the_example_resolves_to_its_problem() {
    let Job { problem, time_limit, order } = sound(EXAMPLE);
    assert_eq!(problem.title, "Vibration logger, anti-alias");
    assert_eq!(order, crate::analysis::Order::AsFound);
    assert_eq!(time_limit, Some(Duration::from_secs(10)));
    assert_eq!(
        problem.criterion,
        Criterion {
            measure: Measure::Weighted(Weights { f0: 1.0, q: 0.2, gain: 1.0, fz: 1.0 }),
            band: Some((10.0 * TAU, 20e3 * TAU)),
            floor_db: 50.0,
            ignore_gain: true,
        }
    );
    let goals = problem.goals;
    assert_eq!((goals.max_part_numbers, goals.rows, goals.alternatives), (Some(8), 5, 2));
    let errors = [goals.wanted_error, goals.error_limit, goals.error_resolution];
    assert_eq!(errors.map(|error| format!("{error:.6}")), ["0.005000", "0.100000", "0.000100"]);
    assert_eq!(goals.impedance, Some((2e3, 50e3)));

    let sections = problem.sections;
    let summary = sections.iter().map(|s| {
        let slots = |group: &Vec<usize>| group.iter().map(|&i| s.circuit.slots[i].name.as_str()).collect::<Vec<_>>();
        let equal: Vec<Vec<&str>> = s.equal.iter().map(slots).collect();
        let t = &s.target;
        let hertz = |w: f64| format!("{:.1}", w / TAU);
        let figures = (hertz(t.w0), t.q.map(|q| format!("{q:.4}")), t.gain, t.wz.map(hertz));
        format!("{} {:?} {figures:?} {} {} {equal:?}", t.name, t.shape, s.circuit.id, s.output().name)
    });
    insta::assert_snapshot!(summary.collect::<Vec<_>>().join("\n"), @r#"
    A LowPass ("1000.0", Some("0.5412"), 2.0, None) tow-thomas low-pass [["RA", "RB"]]
    2 Notch ("1000.0", Some("2.0000"), -1.0, Some("1200.0")) feed-forward-biquad notch [["RA", "RB"]]
    3 LowPass ("1732.1", Some("0.4330"), 2.5, None) sallen-key-low-pass-gain low-pass [["R1", "R2"]]
    4 BandPass ("500.0", Some("3.0000"), -1.0, None) tow-thomas band-pass []
    "#);
    let shelf = |section: usize, slot: &str| {
        let section = &sections[section];
        listed(&section.shelves[section.circuit.slot(slot).unwrap()])
    };
    assert_eq!(shelf(0, "RG"), "1k 2k2 4k7 4k99 10k 22k 33k2 47k 100k 220k 470k 1M");
    assert_eq!(shelf(3, "RG"), "2k2 4k7 4k99 10k 22k 33k2 47k 100k 220k 470k");
    assert_eq!(shelf(0, "C1"), "1n 1n5 2n2 3n3 4n7");
    assert_eq!((shelf(2, "R1"), shelf(2, "R2")), ("10k".into(), "10k".into()));
    assert_eq!(shelf(2, "C1").split(' ').count(), 13);
    assert_eq!(shelf(2, "RA").split(' ').count(), 3 * 24);
    // An untied pair is free, and a slot that an output leaves out keeps a shelf.
    assert!(sections[3].equal.is_empty());
    assert_eq!(shelf(1, "R6"), shelf(0, "RG"));
}

#[test]
fn defaults_are_those_of_the_trade() {
    let one = |inner: &str| sound(&in_section(inner)).problem;
    let problem = one("shape: LowPass, f0: 1000, q: 0.7");
    let section = &problem.sections[0];
    assert_eq!((section.target.name.as_str(), section.target.gain, problem.title.as_str()), ("1", 1.0, ""));
    assert_eq!(problem.criterion, Criterion::default());
    assert_eq!(problem.goals, crate::search::Goals::default());
    let range = |series: Series, from, to, kind| series.values_between(value(from, kind), value(to, kind));
    for (slot, shelf) in section.circuit.slots.iter().zip(&section.shelves) {
        let expected = match slot.kind {
            Kind::Resistor => range(Series::E96, "1k", "1M", slot.kind),
            Kind::Capacitor => range(Series::E12, "1n", "1u", slot.kind),
        };
        assert_eq!(shelf.values(), expected);
    }
    for (inner, circuit, output) in [
        ("shape: LowPass, f0: 1, q: 1", "tow-thomas", "low-pass"),
        ("shape: LowPass, f0: 1, q: 1, gain: -1", "tow-thomas", "low-pass-inverted"),
        (
            "shape: FirstOrderLowPass, f0: 1, circuit: \"inverting-low-pass\", gain: -1",
            "inverting-low-pass",
            "low-pass",
        ),
        ("shape: BandPass, f0: 1, q: 1, gain: -1", "tow-thomas", "band-pass"),
        ("shape: BandPass, f0: 1, q: 1, sign: Either", "tow-thomas", "band-pass"),
        ("shape: HighPass, f0: 1, q: 1, sign: Either", "state-variable", "high-pass"),
        ("shape: Notch, f0: 1, q: 1, sign: Either", "feed-forward-biquad", "notch"),
        ("shape: AllPass, f0: 1, q: 1, sign: Either", "feed-forward-biquad", "all-pass"),
        ("shape: FirstOrderLowPass, f0: 1", "rc-low-pass", "low-pass"),
        ("shape: FirstOrderHighPass, f0: 1", "rc-high-pass", "high-pass"),
        ("shape: FirstOrderAllPass, f0: 1, sign: Either", "first-order-all-pass", "all-pass"),
        // Where no sign was asked for, that of the circuit is taken.
        ("shape: BandPass, f0: 1, q: 1", "tow-thomas", "band-pass"),
        ("shape: HighPass, f0: 1, q: 1", "state-variable", "high-pass"),
        ("shape: Notch, f0: 1, q: 1", "fliege-notch", "notch"),
        ("shape: Notch, f0: 1, q: 1, fz: 1", "fliege-notch", "notch"),
        ("shape: Notch, f0: 1, q: 1, gain: -1", "feed-forward-biquad", "notch"),
        ("shape: Notch, f0: 1, q: 1, fz: 2", "feed-forward-biquad", "notch"),
        ("shape: AllPass, f0: 1, q: 1", "feed-forward-biquad", "all-pass"),
        ("shape: FirstOrderLowPass, f0: 1, gain: -2", "inverting-low-pass", "low-pass"),
        ("shape: FirstOrderAllPass, f0: 1", "first-order-all-pass", "all-pass"),
        ("shape: FirstOrderAllPass, f0: 1, gain: -1", "first-order-all-pass-lead", "all-pass"),
    ] {
        let problem = one(inner);
        let section = &problem.sections[0];
        assert_eq!((section.circuit.id.as_str(), section.output().name.as_str()), (circuit, output), "{inner}");
        let sign = section.output().gain_sign();
        assert!(sign.is_none_or(|sign| f64::from(sign) * section.target.gain > 0.0), "{inner}");
        let vector = section.target.shape.is_all_pass();
        assert_eq!(problem.criterion.measure, if vector { Measure::Vector } else { Measure::Decibel }, "{inner}");
        assert_eq!(problem.goals.error_limit.to_string(), if vector { "0.12" } else { "1" });
    }
}

#[test]
fn two_real_poles_are_the_roots_of_the_denominator() {
    // s² + (w0/Q) s + w0² = (s + p1) (s + p2).
    let section = &sound(&in_section("shape: LowPass, poles: (\"1k\", 3000)")).problem.sections[0];
    let (w0, q) = (section.target.w0, section.target.q.unwrap());
    assert!((w0 * w0 / (3e6 * TAU * TAU) - 1.0).abs() < 1e-14 && (w0 / q / (4e3 * TAU) - 1.0).abs() < 1e-14);
}

#[test]
fn unwritten_errors_give_way_to_written_ones() {
    for (inner, expected) in [
        ("wanted_error: 2", [2.0, 2.0, 0.001]),
        ("error_limit: \"0.05 dB\"", [0.05, 0.05, 0.001]),
        ("wanted_error: 1e-4", [1e-4, 1.0, 1e-4]),
        ("measure: Vector", [0.01, 0.12, 1e-4]),
    ] {
        let goals = sound(&in_job(inner)).problem.goals;
        let found = [goals.wanted_error, goals.error_limit, goals.error_resolution];
        assert_eq!(found.map(f64::to_bits), expected.map(f64::to_bits), "{inner}");
    }
}

#[test]
fn flags_win_and_are_named() {
    let text = in_job("resistors: (series: E6), rows: 3, floor: 40, circuit: \"state-variable\"");
    let mut job = JobFile::parse(&text).unwrap();
    job.overlay(JobFile {
        resistors: Some(ShelfFile::from_flag("--resistors", "E3,E6,5k1 1k..10k").unwrap()),
        capacitors: Some(ShelfFile::from_flag("--capacitors", "10n,22n").unwrap()),
        rows: Some(Given::flag("--rows", "7")),
        band: Some(Given::range("--band", "10 Hz .. 1 kHz").unwrap()),
        ..JobFile::default()
    });
    let problem = resolve(&job, &mut circuits, None).unwrap().problem;
    let section = &problem.sections[0];
    assert_eq!((problem.goals.rows, problem.criterion.floor_db.to_string()), (7, "40".to_string()));
    assert_eq!(section.circuit.id, "state-variable");
    assert_eq!(problem.criterion.band, Some((10.0 * TAU, 1e3 * TAU)));
    assert_eq!(listed(&section.shelves[0]), "1k 1k5 2k2 3k3 4k7 5k1 6k8 10k");
    assert_eq!(listed(&section.shelves[section.circuit.slot("C1").unwrap()]), "10n 22n");

    job.overlay(JobFile {
        resistors: Some(ShelfFile::from_flag("--resistors", "E5,10n").unwrap()),
        rows: Some(Given::flag("--rows", "none")),
        measure: Some(Given::flag("--measure", MeasureFile::Weighted { f0: None, q: None, gain: None, fz: None })),
        ..JobFile::default()
    });
    let faults = resolve(&job, &mut circuits, None).unwrap_err();
    insta::assert_snapshot!(render(&located(&text, faults), "job.ron", &text, false), @r#"
    error: --resistors: "E5" is no series of preferred numbers: write E3, E6, E12,
           E24, E48, E96 or E192

    error: --resistors: "10n" is a capacitor value where a resistor value is needed:
           write one such as 4k7, 2R2 or 1M

    error: --measure: every weight is zero
     |
     = help: write Weighted(f0: 1, q: 0.2, gain: 1), for example

    error: --rows: rows must be a whole number from 1 to 10000, found none
    "#);
}

#[test]
fn shelves_of_flags_are_refused_when_they_are_none() {
    for text in ["", " , ", "E24 1k..10k 1k..2k"] {
        let fault = ShelfFile::from_flag("--resistors", text).unwrap_err();
        assert_eq!((fault.path.as_str(), fault.message), ("--resistors", format!("`{text}` is no shelf")));
    }
    assert_eq!(ShelfFile::from_flag("-r", "1k..2k").unwrap(), ShelfFile::from_flag("-r", ":1k..2k").unwrap());
    for text in ["1k", "1k..", "..1k", ".."] {
        assert!(Given::range("--band", text).unwrap_err().message.ends_with("is no range"));
    }
}

/// One change of a text.
#[derive(Clone, Debug)]
enum Change {
    Delete(usize),
    Insert(usize, &'static str),
    Repeat(usize),
}

fn change() -> impl Strategy<Value = Vec<Change>> {
    const PIECES: [&str; 21] = [
        "(", ")", "[", "]", "{", "}", ",", ":", "\"", "'", "\\", "/*", "//", "r#\"", "Some(", "-", "1e999", "µ",
        "\u{feff}", "\r\n", "#![",
    ];
    let change = prop_oneof![
        any::<prop::sample::Index>().prop_map(|at| Change::Delete(at.index(1 << 20))),
        (any::<prop::sample::Index>(), prop::sample::select(&PIECES[..]))
            .prop_map(|(at, piece)| Change::Insert(at.index(1 << 20), piece)),
        any::<prop::sample::Index>().prop_map(|at| Change::Repeat(at.index(1 << 20))),
    ];
    prop::collection::vec(change, 1..4)
}

/// A text taken apart into words and signs, so that changes meet what means something.
fn words(text: &str) -> Vec<String> {
    let mut words: Vec<String> = Vec::new();
    for c in text.chars() {
        match words.last_mut() {
            Some(word) if c.is_alphanumeric() && word.ends_with(char::is_alphanumeric) => word.push(c),
            _ => words.push(c.to_string()),
        }
    }
    words
}

proptest! {
    #![proptest_config(deterministic(4000))]

    // A slip anywhere is told, in the text or as a job that means something else, and never ends the program.
    #[test]
    fn no_text_makes_it_panic(changes in change()) {
        let mut words = words(EXAMPLE);
        for change in changes {
            let at = |index: usize| index % words.len();
            match change {
                Change::Delete(index) => { words.remove(at(index)); }
                Change::Insert(index, piece) => words.insert(at(index), piece.to_string()),
                Change::Repeat(index) => { let at = at(index); words.insert(at, words[at].clone()); }
            }
        }
        let text = words.concat();
        if let Err(faults) = read(&text) {
            prop_assert!(!faults.is_empty());
            for fault in &faults {
                let span = fault.span.clone().unwrap();
                prop_assert!(text.get(span).is_some(), "{fault:?}");
            }
            let shown = render(&faults, "job.ron", &text, false);
            prop_assert!(shown.matches("job.ron:").count() >= faults.len());
        }
    }
}
