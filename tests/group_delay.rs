//! Limits of the group delay: against the slope of the phase of a nodal solve, and drawn boards against closed forms.

#![allow(missing_docs, clippy::unwrap_used)]

mod support;

use std::f64::consts::TAU;

use num_complex::Complex64;
use roundwell::analysis::{Built, Distribution, Gauge, Limit, Mask, Reference, Sampling, Tolerances, estimate};
use roundwell::circuit::response;
use roundwell::job::Listed;
use roundwell::report::{Record, write_json};
use roundwell::search::{Problem, Unwatched, shortlist};
use roundwell::target::{Criterion, Section, Shape};
use roundwell::units::Kind;

fn boards(problem: &Problem) -> Vec<Built> {
    let outcome = shortlist(problem, &Unwatched);
    let mut bytes = Vec::new();
    write_json(&Record::new(problem, &outcome, 0.0), &mut bytes).unwrap();
    let listed = Listed::parse(std::str::from_utf8(&bytes).unwrap()).unwrap();
    listed.rows.iter().map(|row| listed.built(row, &mut |id| Ok(support::library(id))).unwrap()).collect()
}

fn delays(from: f64, to: f64, lower: Option<f64>, upper: Option<f64>) -> Mask {
    let limit = Limit { from: from * TAU, to: to * TAU, lower, upper };
    Mask { reference: Reference::Peak, limits: Vec::new(), delays: vec![limit], figures: Vec::new() }
}

/// The room to a limit of zero is the least group delay: the central difference of the phase of the solved network, section
/// by section, at the frequency that is told.
#[test]
fn the_group_delay_is_the_slope_of_the_phase_of_the_network() {
    let shelves = |id: &str, output: &str, target: Section| {
        let resistors = support::series(Kind::Resistor, roundwell::parts::Series::E12, "1k", "100k");
        let capacitors = support::series(Kind::Capacitor, roundwell::parts::Series::E3, "1n", "100n");
        support::section(target, id, output, &resistors, &capacitors)
    };
    let named = |name: &str, section: Section| Section { name: name.to_string(), ..section };
    let mut problem = support::problem(
        shelves("tow-thomas", "low-pass", support::second(Shape::LowPass, 1e3, 2.0, 1.0)),
        support::wide(3.0),
    );
    problem.sections.push(shelves(
        "sallen-key-high-pass",
        "high-pass",
        named("B", support::second(Shape::HighPass, 200.0, 0.7, 1.0)),
    ));
    problem.sections.push(shelves(
        "rc-low-pass",
        "low-pass",
        named("C", support::first(Shape::FirstOrderLowPass, 3e3, 1.0)),
    ));
    let built = boards(&problem).remove(0);
    let phase = |w: f64, step: f64| -> f64 {
        let of = |section: &roundwell::analysis::BuiltSection| {
            let at = |w: f64| response(&section.circuit, section.output(), &section.values(), w).unwrap();
            let turn: Complex64 = at(w + step) / at(w - step);
            turn.arg()
        };
        built.sections.iter().map(of).sum()
    };
    for f in [30.0, 200.0, 700.0, 1000.0, 1100.0, 5e3, 30e3] {
        let w = f * TAU;
        let gauge = Gauge::new(&delays(f, f, Some(0.0), None), &built.targets(), built.criterion);
        let found = gauge.standings(&built.nominal())[0];
        let slope = -phase(w, 1e-5 * w) / (2e-5 * w);
        assert!((found.margin - slope).abs() < 1e-7 * slope, "{f} Hz: {} {slope}", found.margin);
    }
}

/// Closed form: far below its corner a first-order low-pass delays by RC, so with R off evenly within t a limit of (1 + x) RC
/// is kept by the share (t + x)/(2 t); above it by RC/(1 + (w RC)²).
#[test]
fn drawn_boards_keep_a_delay_as_often_as_the_closed_form_says() {
    let rc = 10e3 * 10e-9;
    let target = support::first(Shape::FirstOrderLowPass, 1.0 / (TAU * rc), 1.0);
    let (r, c) = (support::ohms("10k"), support::farads("10n"));
    let mut problem =
        support::problem(support::section(target, "rc-low-pass", "low-pass", &r, &c), support::wide(1.0));
    problem.criterion = Criterion { band: Some((10.0, 1e6)), ..problem.criterion };
    let built = boards(&problem).remove(0);
    let tolerances =
        Tolerances { resistors: 0.05, capacitors: 0.0, distribution: Distribution::Uniform, reel_share: 0.0 };
    let sampling = Sampling { boards: 40_000, half_width: 0.0, ..Sampling::default() };
    for (lower, upper, expected) in [
        (None, Some(1.02), 0.7),
        (Some(0.98), None, 0.7),
        (Some(0.99), Some(1.04), 0.5),
        (None, Some(1.051), 1.0),
        (Some(1.051), None, 0.0),
    ] {
        let [lower, upper] = [lower, upper].map(|side| side.map(|factor: f64| factor * rc));
        let gauge = Gauge::new(&delays(0.001, 0.01, lower, upper), &built.targets(), built.criterion);
        let found = estimate(&built, &tolerances, &gauge, &sampling);
        let room = 5.0 * (expected * (1.0 - expected) / 40_000.0f64).sqrt() + 1e-9;
        assert!((found.share() - expected).abs() <= room, "{lower:?} {upper:?}: {} {expected}", found.share());
        assert_eq!(found.broken, [found.boards - found.passed]);
    }
}
