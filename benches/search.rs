//! Searches of one section on E96 resistors and E12 capacitors over three decades, and of an eighth-order low-pass.
//!
//! Beside the times, the number of sets and partial sets visited is printed: it is the same on any machine.

#![allow(missing_docs)]

use std::sync::Arc;

use divan::Bencher;
use roundwell::circuit::find;
use roundwell::parts::{Series, Shelf, Supply};
use roundwell::search::{Goals, Problem, SectionProblem, Unwatched, shortlist};
use roundwell::target::{Criterion, Measure, Section, Shape};
use roundwell::units::{Kind, parse_part};

fn main() {
    for case in CASES {
        let outcome = shortlist(&case.problem(), &Unwatched);
        println!("{}: {} sets, {} nodes, {} rows", case.name, outcome.sets, outcome.nodes, outcome.rows.len());
    }
    let outcome = shortlist(&eighth_order(), &Unwatched);
    println!("eighth order: {} sets, {} nodes, {} rows", outcome.sets, outcome.nodes, outcome.rows.len());
    divan::main();
}

struct Case {
    name: &'static str,
    circuit: &'static str,
    output: &'static str,
    shape: Shape,
    f0: f64,
    q: Option<f64>,
    gain: f64,
    fz: Option<f64>,
    most: Option<usize>,
}

impl std::fmt::Display for Case {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str(self.name)
    }
}

const fn case(
    name: &'static str,
    circuit: &'static str,
    output: &'static str,
    shape: Shape,
    q: f64,
    gain: f64,
) -> Case {
    Case { name, circuit, output, shape, f0: 1e3, q: Some(q), gain, fz: None, most: None }
}

const fn first_order(name: &'static str, output: &'static str, shape: Shape, gain: f64) -> Case {
    Case { name, circuit: name, output, shape, f0: 1e3, q: None, gain, fz: None, most: None }
}

const CASES: &[Case] = &[
    case("tow-thomas 1", "tow-thomas", "low-pass", Shape::LowPass, std::f64::consts::FRAC_1_SQRT_2, 1.0),
    Case { f0: 3.4e3, ..case("tow-thomas 2", "tow-thomas", "low-pass", Shape::LowPass, 5.3, 2.0) },
    case("tow-thomas band-pass", "tow-thomas", "band-pass", Shape::BandPass, 5.0, -2.0),
    first_order("rc-low-pass", "low-pass", Shape::FirstOrderLowPass, 1.0),
    first_order("rc-high-pass", "high-pass", Shape::FirstOrderHighPass, 1.0),
    first_order("inverting-low-pass", "low-pass", Shape::FirstOrderLowPass, -2.0),
    first_order("first-order-all-pass", "all-pass", Shape::FirstOrderAllPass, 1.0),
    case("sallen-key-low-pass", "sallen-key-low-pass", "low-pass", Shape::LowPass, 1.3, 1.0),
    case("sallen-key-low-pass-gain", "sallen-key-low-pass-gain", "low-pass", Shape::LowPass, 1.3, 2.0),
    case("sallen-key-high-pass", "sallen-key-high-pass", "high-pass", Shape::HighPass, 1.3, 1.0),
    case("multiple-feedback-low-pass", "multiple-feedback-low-pass", "low-pass", Shape::LowPass, 1.3, -2.0),
    case("multiple-feedback-band-pass", "multiple-feedback-band-pass", "band-pass", Shape::BandPass, 5.0, -2.0),
    case("akerberg-mossberg", "akerberg-mossberg", "low-pass", Shape::LowPass, 5.0, 2.0),
    case("fliege-notch", "fliege-notch", "notch", Shape::Notch, 5.0, 1.0),
    case("feed-forward notch", "feed-forward-biquad", "notch", Shape::Notch, 2.0, -1.0),
    Case {
        fz: Some(1.7e3),
        ..case("feed-forward low-pass notch", "feed-forward-biquad", "notch", Shape::Notch, 2.0, -1.0)
    },
    Case {
        fz: Some(0.6e3),
        ..case("feed-forward high-pass notch", "feed-forward-biquad", "notch", Shape::Notch, 2.0, -1.0)
    },
    case("feed-forward all-pass", "feed-forward-biquad", "all-pass", Shape::AllPass, 1.5, -1.0),
    Case {
        most: Some(5),
        ..case("state-variable low-pass", "state-variable", "low-pass", Shape::LowPass, 0.8618, 1.0)
    },
    Case {
        most: Some(5),
        ..case("state-variable band-pass", "state-variable", "band-pass", Shape::BandPass, 2.0, -3.0)
    },
    Case {
        most: Some(5),
        ..case("state-variable high-pass", "state-variable", "high-pass", Shape::HighPass, 2.0, 1.0)
    },
];

fn shelf(kind: Kind, series: Series, from: &str, to: &str) -> Shelf {
    let end = |text| parse_part(text, kind).expect("a part value");
    Shelf::new(kind, series.values_between(end(from), end(to))).expect("a shelf")
}

impl Case {
    fn section(&self) -> SectionProblem {
        let tau = std::f64::consts::TAU;
        let target = Section::new("A", self.shape, tau * self.f0, self.q, self.gain, self.fz.map(|fz| tau * fz));
        let circuit = Arc::new(find(self.circuit).expect("a circuit").clone());
        let resistors = shelf(Kind::Resistor, Series::E96, "1k", "1M");
        let capacitors = shelf(Kind::Capacitor, Series::E12, "1n", "1u");
        SectionProblem::new(target.expect("a section"), circuit, self.output, &resistors, &capacitors)
            .expect("an output")
    }

    fn problem(&self) -> Problem {
        let mut criterion = Criterion::default();
        let mut goals = Goals { max_part_numbers: self.most, ..Goals::default() };
        if self.shape.is_all_pass() {
            criterion.measure = Measure::Vector;
            goals = Goals { wanted_error: 0.01, error_limit: 0.12, error_resolution: 1e-4, ..goals };
        }
        Problem {
            title: self.name.into(),
            sections: vec![self.section()],
            criterion,
            goals,
            supply: Supply::default(),
        }
    }
}

/// Butterworth, 1 kHz, four Tow-Thomas sections.
fn eighth_order() -> Problem {
    let sections = [0.5098, 0.6013, 0.9000, 2.5629]
        .map(|q| case("section", "tow-thomas", "low-pass", Shape::LowPass, q, 1.0).section());
    Problem {
        title: "eighth order".into(),
        sections: sections.to_vec(),
        criterion: Criterion::default(),
        goals: Goals::default(),
        supply: Supply::default(),
    }
}

#[divan::bench(args = CASES, sample_count = 5)]
fn section(bencher: Bencher, case: &Case) {
    let problem = case.problem();
    bencher.bench(|| shortlist(&problem, &Unwatched));
}

#[divan::bench(sample_count = 5)]
fn four_sections(bencher: Bencher) {
    let problem = eighth_order();
    bencher.bench(|| shortlist(&problem, &Unwatched));
}
