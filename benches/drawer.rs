//! Searches that draw on a stock list, allow pairs, or give measured parts to boards.
//!
//! Beside the times, the number of sets and partial sets visited is printed: it is the same on any machine.

#![allow(missing_docs)]

use std::f64::consts::FRAC_1_SQRT_2;
use std::fmt::Write;
use std::sync::Arc;

use divan::Bencher;
use roundwell::circuit::find;
use roundwell::parts::{Buying, Choice, LotId, Series, Shelf, Stock, Supply};
use roundwell::search::{Goals, Joint, Pairs, Problem, SectionProblem, Unwatched, shortlist};
use roundwell::target::{Criterion, Section, Shape};
use roundwell::units::{Kind, Value, format_part, parse_part};

fn main() {
    for case in CASES {
        let outcome = shortlist(&(case.problem)(), &Unwatched);
        let proved = if outcome.stopped.is_none() { "to the end" } else { "stopped" };
        println!(
            "{}: {} sets, {} nodes, {} rows, {proved}",
            case.name,
            outcome.sets,
            outcome.nodes,
            outcome.rows.len()
        );
    }
    divan::main();
}

struct Case {
    name: &'static str,
    problem: fn() -> Problem,
}

impl std::fmt::Display for Case {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str(self.name)
    }
}

const CASES: &[Case] = &[
    Case { name: "drawer, 1 board", problem: || drawer(1) },
    Case { name: "drawer, 10 boards", problem: || drawer(10) },
    Case { name: "pairs, tow-thomas, at most 1", problem: || pairs("tow-thomas", FRAC_1_SQRT_2, 1) },
    Case { name: "pairs, tow-thomas, at most 2", problem: || pairs("tow-thomas", FRAC_1_SQRT_2, 2) },
    Case { name: "pairs, tow-thomas, at most 4", problem: || pairs("tow-thomas", FRAC_1_SQRT_2, 4) },
    Case { name: "pairs, sallen-key, at most 1", problem: || pairs("sallen-key-low-pass", 1.3, 1) },
    Case { name: "pairs, sallen-key, at most 2", problem: || pairs("sallen-key-low-pass", 1.3, 2) },
    Case { name: "measured, one set for all boards", problem: || measured(false) },
    Case { name: "measured, each board its own", problem: || measured(true) },
];

/// SplitMix64 (G. Steele, D. Lea, C. Flood, Fast Splittable Pseudorandom Number Generators, 2014).
struct Numbers(u64);

impl Numbers {
    fn below(&mut self, n: u64) -> u64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        (z ^ (z >> 31)) % n
    }
}

fn values(series: Series, kind: Kind, from: &str, to: &str) -> Vec<Value> {
    let end = |text| parse_part(text, kind).expect("a value");
    series.values_between(end(from), end(to)).to_vec()
}

fn section(name: &str, circuit: &str, f0: f64, q: f64, resistors: &Shelf, capacitors: &Shelf) -> SectionProblem {
    let target =
        Section::new(name, Shape::LowPass, std::f64::consts::TAU * f0, Some(q), 1.0, None).expect("a section");
    let circuit = Arc::new(find(circuit).expect("a circuit").clone());
    SectionProblem::new(target, circuit, "low-pass", resistors, capacitors).expect("an output")
}

fn problem(sections: Vec<SectionProblem>, supply: Supply) -> Problem {
    Problem { title: String::new(), sections, criterion: Criterion::default(), goals: Goals::default(), supply }
}

/// The shelf of all lots of a kind, and of the values that may be bought.
fn of_stock(supply: &Supply, kind: Kind, bought: Vec<Value>) -> Shelf {
    let lots: Vec<(LotId, Value)> =
        supply.lots().filter(|(_, lot)| lot.kind == kind).map(|(id, lot)| (id, lot.value())).collect();
    let choices = lots.into_iter().map(|(id, value)| Choice { value, lot: Some(id) });
    Shelf::of_choices(kind, choices.chain(bought.into_iter().map(Choice::from))).expect("a shelf")
}

fn stock(csv: &str) -> Supply {
    Supply::of_stock(&Stock::read(csv.as_bytes()).expect("a stock list"))
}

/// 200 resistor and 60 capacitor lines in mixed quantities; a fourth-order Butterworth of two Tow-Thomas sections.
fn drawer(boards: u64) -> Problem {
    let mut numbers = Numbers(11);
    let mut csv = String::from("kind,value,quantity,tolerance\n");
    let mut lines = |kind: Kind, mut list: Vec<Value>, count: usize, quantities: &[u64]| {
        while list.len() > count {
            list.remove(numbers.below(list.len() as u64) as usize);
        }
        for value in list {
            let quantity = quantities[numbers.below(quantities.len() as u64) as usize];
            let _ = writeln!(csv, "{},{},{quantity},1%", kind.letter(), format_part(value, kind));
        }
    };
    lines(Kind::Resistor, values(Series::E96, Kind::Resistor, "1k", "1M"), 200, &[5, 10, 20, 40, 100, 200]);
    lines(Kind::Capacitor, values(Series::E24, Kind::Capacitor, "1n", "1u"), 60, &[5, 10, 20, 40, 100]);
    let mut supply = stock(&csv);
    supply.boards = boards;
    let [resistors, capacitors] = [Kind::Resistor, Kind::Capacitor].map(|kind| of_stock(&supply, kind, Vec::new()));
    let sections =
        [("A", 0.5412), ("B", 1.3066)].map(|(name, q)| section(name, "tow-thomas", 1e3, q, &resistors, &capacitors));
    problem(sections.to_vec(), supply)
}

/// E24 resistors in pairs and E6 capacitors, over three decades.
fn pairs(circuit: &str, q: f64, most: usize) -> Problem {
    let shelf = |kind, series, from, to| Shelf::new(kind, values(series, kind, from, to)).expect("a shelf");
    let resistors = shelf(Kind::Resistor, Series::E24, "1k", "1M");
    let capacitors = shelf(Kind::Capacitor, Series::E6, "1n", "1u");
    let mut section = section("A", circuit, 1e3, q, &resistors, &capacitors);
    let joints = |slot: &roundwell::circuit::Slot| match slot.kind {
        Kind::Resistor => vec![Joint::Series, Joint::Parallel],
        Kind::Capacitor => Vec::new(),
    };
    section.pairs = Pairs { joints: section.circuit.slots.iter().map(joints).collect(), most };
    problem(vec![section], Supply::default())
}

/// 24 measured capacitors within 5 % of 10n and 4n7, for six boards of one Sallen-Key section with E96 resistors.
fn measured(own: bool) -> Problem {
    let mut numbers = Numbers(7);
    let mut csv = String::from("kind,value,measured,id\n");
    for index in 0..24 {
        let (label, nominal) = if index < 12 { ("10n", 10e-9) } else { ("4n7", 4.7e-9) };
        let value = nominal * (0.95 + 0.1 * numbers.below(1_000_000) as f64 / 1e6);
        let _ = writeln!(csv, "C,{label},{value:.3e},M{:02}", index + 1);
    }
    let mut supply = stock(&csv);
    (supply.boards, supply.buying) = (6, Buying::Allowed);
    let resistors = Shelf::new(Kind::Resistor, values(Series::E96, Kind::Resistor, "1k", "1M")).expect("a shelf");
    let capacitors = of_stock(&supply, Kind::Capacitor, Vec::new());
    let section = section("A", "sallen-key-low-pass", 1.5e3, FRAC_1_SQRT_2, &resistors, &capacitors);
    let mut problem = problem(vec![section], supply);
    problem.goals.each_board_its_own = own;
    problem
}

#[divan::bench(args = CASES, sample_count = 5)]
fn search(bencher: Bencher, case: &Case) {
    let problem = (case.problem)();
    bencher.bench(|| shortlist(&problem, &Unwatched));
}
