//! All sections of a board chosen together, on E96 resistors and E12 capacitors over three decades.
//!
//! For each filter two searches: that for the fewest part numbers within 0.1 dB, and that for the whole front up to the
//! number of part numbers at which the error falls under 0.01 dB. Beside the times, the sets and partial sets visited are
//! printed: they are the same on any machine. With `--test` only one small filter is searched.

#![allow(missing_docs)]

use std::f64::consts::{PI, TAU};
use std::sync::Arc;
use std::time::Instant;

use roundwell::circuit::find;
use roundwell::parts::{Series, Shelf, Supply};
use roundwell::search::{Goals, Outcome, Problem, SectionProblem, Unwatched, shortlist};
use roundwell::target::{Criterion, Section, Shape};
use roundwell::units::{Kind, parse_part};

fn shelf(kind: Kind, series: Series, from: &str, to: &str) -> Shelf {
    let end = |text| parse_part(text, kind).expect("a part value");
    Shelf::new(kind, series.values_between(end(from), end(to))).expect("a shelf")
}

fn section(target: Section, circuit: &str, output: &str) -> SectionProblem {
    let resistors = shelf(Kind::Resistor, Series::E96, "1k", "1M");
    let capacitors = shelf(Kind::Capacitor, Series::E12, "1n", "1u");
    let circuit = Arc::new(find(circuit).expect("a circuit").clone());
    SectionProblem::new(target, circuit, output, &resistors, &capacitors).expect("an output")
}

fn problem(title: String, sections: Vec<SectionProblem>) -> Problem {
    let goals = Goals { error_resolution: 0.01, ..Goals::default() };
    Problem { title, sections, criterion: Criterion::default(), goals, supply: Supply::default() }
}

/// A Butterworth low-pass at 1 kHz of equal circuits.
fn butterworth(order: usize, circuit: &str, gain: f64) -> Problem {
    let one = |k: usize| {
        let q = 0.5 / (PI * (2 * k + 1) as f64 / (2 * order) as f64).cos();
        let target = Section::new(format!("{}", k + 1), Shape::LowPass, TAU * 1e3, Some(q), gain, None);
        section(target.expect("a section"), circuit, "low-pass")
    };
    problem(format!("Butterworth {order}, {circuit}"), (0..order / 2).map(one).collect())
}

/// An elliptic low-pass of order 5 (0.5 dB, 40 dB) at 1 kHz; its figures are checked against scipy.signal elsewhere.
fn elliptic() -> Problem {
    let notch = |name, f0: f64, q, gain, fz: f64| {
        let target = Section::new(name, Shape::Notch, TAU * f0, Some(q), gain, Some(TAU * fz));
        section(target.expect("a section"), "feed-forward-biquad", "notch")
    };
    let first = Section::new("1", Shape::FirstOrderLowPass, TAU * 470.0, None, 1.0, None).expect("a section");
    let sections = vec![
        section(first, "rc-low-pass", "low-pass"),
        notch("2", 799.5, 1.4499, -1.0, 1880.0),
        notch("3", 1014.4, 7.6748, -1.0, 1312.6),
    ];
    problem("elliptic 5, feed-forward-biquad".to_string(), sections)
}

fn timed(problem: &Problem) -> (f64, Outcome) {
    let start = Instant::now();
    let outcome = shortlist(problem, &Unwatched);
    (start.elapsed().as_secs_f64(), outcome)
}

/// The marked row: part numbers, error, and whether fewer are ruled out.
fn marked(outcome: &Outcome, wanted: f64) -> Option<(usize, f64, bool)> {
    let row = &outcome.rows[outcome.marked?];
    let part_numbers = row.part_numbers?;
    let bounds = &outcome.together.as_ref()?.bounds;
    let fewer = bounds.iter().filter(|b| b.part_numbers < part_numbers);
    let last = fewer.max_by_key(|b| b.part_numbers);
    Some((part_numbers, row.deviation.error, last.is_none_or(|bound| bound.none_below >= wanted)))
}

fn report(problem: &Problem) {
    let wanted = problem.goals.wanted_error;
    // The front up to the wanted error is at its end once that is met.
    let goals = Goals { error_resolution: wanted, ..problem.goals.clone() };
    let (first, fewest) = timed(&Problem { goals, ..problem.clone() });
    let (whole, outcome) = timed(problem);
    println!("{}", problem.title);
    println!(
        "  {wanted} dB: {:?} in {first:.2} s, {} sets, {} nodes",
        marked(&fewest, wanted),
        fewest.sets,
        fewest.nodes
    );
    println!("  front: {whole:.2} s, {} sets, {} nodes", outcome.sets, outcome.nodes);
    for row in &outcome.rows {
        let proved = if row.proved { "proved" } else { "not proved" };
        println!("    {} part numbers: {:.5} dB, {proved}", row.part_numbers.unwrap_or(0), row.deviation.error);
    }
    let together = outcome.together.as_ref();
    println!("  one section at a time: {:?}", together.and_then(|t| t.one_at_a_time));
    let nearest = outcome.nearest.as_ref().map(|row| (row.part_numbers, row.deviation.error));
    println!("  nearest value to each: {nearest:?}");
    if let Some(end) = together.and_then(|t| t.ended_at) {
        println!("  ended at {end} part numbers");
    }
}

fn main() {
    if std::env::args().any(|argument| argument == "--test") {
        return report(&butterworth(4, "sallen-key-low-pass", 1.0));
    }
    for (circuit, gain) in [("tow-thomas", 1.0), ("sallen-key-low-pass", 1.0), ("multiple-feedback-low-pass", -1.0)] {
        for order in [4, 6, 8] {
            report(&butterworth(order, circuit, gain));
        }
    }
    report(&elliptic());
}
