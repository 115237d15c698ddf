//! All sections of a board chosen together, on E96 resistors and E12 capacitors over three decades.
//!
//! Beside the times, the boards found and the sets and partial sets visited are printed: they are the same on any machine.

#![allow(missing_docs)]

use std::sync::Arc;
use std::time::Instant;

use roundwell::circuit::find;
use roundwell::parts::{Series, Shelf, Supply};
use roundwell::search::{Goals, Problem, SectionProblem, Unwatched, shortlist};
use roundwell::target::{Criterion, Section, Shape};
use roundwell::units::{Kind, parse_part};

fn shelf(kind: Kind, series: Series, from: &str, to: &str) -> Shelf {
    let end = |text| parse_part(text, kind).expect("a part value");
    Shelf::new(kind, series.values_between(end(from), end(to))).expect("a shelf")
}

fn butterworth(order: usize, circuit: &str, gain: f64, goals: Goals) -> Problem {
    let tau = std::f64::consts::TAU;
    let resistors = shelf(Kind::Resistor, Series::E96, "1k", "1M");
    let capacitors = shelf(Kind::Capacitor, Series::E12, "1n", "1u");
    let circuit = Arc::new(find(circuit).expect("a circuit").clone());
    let section = |k: usize| {
        let q = 0.5 / (std::f64::consts::PI * (2 * k + 1) as f64 / (2 * order) as f64).cos();
        let name = ["A", "B", "C", "D"][k];
        let target = Section::new(name, Shape::LowPass, tau * 1e3, Some(q), gain, None).expect("a section");
        SectionProblem::new(target, circuit.clone(), "low-pass", &resistors, &capacitors).expect("an output")
    };
    Problem {
        title: format!("order {order}"),
        sections: (0..order / 2).map(section).collect(),
        criterion: Criterion::default(),
        goals,
        supply: Supply::default(),
    }
}

fn main() {
    let args: Vec<String> = std::env::args().skip(1).filter(|a| !a.starts_with("--")).collect();
    let orders: Vec<usize> =
        args.first().map_or(vec![4, 6, 8], |a| a.split(',').map(|x| x.parse().unwrap()).collect());
    let most: Option<usize> = args.get(2).and_then(|a| a.parse().ok());
    for (circuit, gain) in [("tow-thomas", 1.0), ("sallen-key-low-pass", 1.0), ("multiple-feedback-low-pass", -1.0)] {
        if args.get(1).is_some_and(|only| !circuit.starts_with(only.as_str())) {
            continue;
        }
        for &order in &orders {
            let goals = Goals { max_part_numbers: most, error_resolution: 0.01, ..Goals::default() };
            let start = Instant::now();
            let outcome = shortlist(&butterworth(order, circuit, gain, goals), &Unwatched);
            let time = start.elapsed();
            println!("{circuit} order {order}: {time:?}, {} sets, {} nodes", outcome.sets, outcome.nodes);
            for row in &outcome.rows {
                println!("   {:?} {:.6} {}", row.part_numbers, row.deviation.error, row.proved);
            }
            if let Some(t) = &outcome.together {
                println!("   {:?} {:?} one at a time {:?}", t.proof, t.bounds, t.one_at_a_time);
            }
            println!("   nearest {:?}", outcome.nearest.as_ref().map(|r| (r.part_numbers, r.deviation.error)));
        }
    }
}
