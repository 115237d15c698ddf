//! Boards of several sections, drawn at random, all chosen together: against every board, for any number of threads, and
//! where the search is stopped.
//!
//! The brute force (`support/whole.rs`) knows nothing of the search.
#![allow(clippy::unwrap_used)]

#[allow(dead_code, reason = "only its drawers, groups and row checks are used here")]
#[path = "support/drawer.rs"]
mod drawer;
mod support;
#[path = "support/whole.rs"]
mod whole;

use std::sync::atomic::{AtomicUsize, Ordering};

use drawer::{Drawer, paired, section_size, target_of};
use roundwell::parts::Buying;
use roundwell::search::{Joint, Monitor, Outcome, Problem, Rank, SectionProblem, StopReason, Unwatched, shortlist};
use roundwell::target::{Measure, Section, Weights};
use roundwell::units::Kind;
use support::*;
use whole::{Whole, board, compare_whole};

const R: Kind = Kind::Resistor;
const C: Kind = Kind::Capacitor;

// ---- drawn at random ----------------------------------------------------------------------------------------------

#[derive(Clone, Copy, Default)]
struct With {
    stock: bool,
    demands: bool,
    pairs: bool,
    all_pass: bool,
    weighted: bool,
    no_gain: bool,
    measured: bool,
    cost: bool,
    /// Floors close under the peak, narrow bands, values over three decades.
    wild: bool,
}

const CIRCUITS: [(&str, &str); 11] = [
    ("sallen-key-low-pass", "low-pass"),
    ("sallen-key-low-pass", "low-pass"),
    ("sallen-key-high-pass", "high-pass"),
    ("multiple-feedback-low-pass", "low-pass"),
    ("tow-thomas", "low-pass"),
    ("rc-low-pass", "low-pass"),
    ("rc-high-pass", "high-pass"),
    ("inverting-low-pass", "low-pass"),
    ("multiple-feedback-band-pass", "band-pass"),
    ("sallen-key-low-pass-gain", "low-pass"),
    ("first-order-all-pass", "all-pass"),
];

fn drawn_drawer(numbers: &mut Numbers, with: With) -> Drawer {
    let resistors = values(R, "4k7 5k6 6k8 8k2 10k 12k 15k 18k 22k");
    let capacitors = values(C, "4n7 6n8 8n2 10n 12n 15n 22n 33n");
    let (resistors, capacitors) = match with.wild {
        true => (values(R, "1k 2k2 4k7 8k2 10k 15k 22k 47k 100k 150k"), values(C, "1n 2n2 4n7 10n 22n 47n 100n")),
        false => (resistors, capacitors),
    };
    let (r, c) = (3 + numbers.below(3), 2 + numbers.below(3));
    let (r, c) = (numbers.some_of(&resistors, r), numbers.some_of(&capacitors, c));
    let boards = if with.measured { 1 } else { 1 + numbers.below(3) as u64 };
    if !with.stock {
        let text = |list: &[roundwell::units::Value]| list.iter().map(|v| format!("{v} ")).collect::<String>();
        return Drawer::of(&text(&r), &text(&c));
    }
    let lines = (r.iter().map(|v| ('R', v))).chain(c.iter().map(|v| ('C', v))).map(|(kind, value)| {
        let quantity = [0, 1, 2, 3, 4, 6, 8][numbers.below(7)] * boards;
        let quantity = if numbers.below(4) == 0 { String::new() } else { quantity.to_string() };
        let price = if with.cost { [0.01, 0.02, 0.05, 0.1][numbers.below(4)].to_string() } else { String::new() };
        format!("{kind},{value},{quantity},,{price},")
    });
    let mut lines: Vec<String> = lines.collect();
    if with.measured {
        let measured = r.iter().map(|v| ('R', v)).chain(c.iter().map(|v| ('C', v))).filter_map(|(kind, value)| {
            let off = [0.97, 1.02, 1.05][numbers.below(3)];
            (numbers.below(3) == 0).then(|| format!("{kind},{value},1,,,{:.4e}", value.to_f64() * off))
        });
        lines.extend(measured.collect::<Vec<String>>());
    }
    let lines: Vec<&str> = lines.iter().map(String::as_str).collect();
    let buying = [Buying::Forbidden, Buying::AtMost(1), Buying::AtMost(3), Buying::Allowed][numbers.below(4)];
    let drawer = Drawer::lines(&lines).boards(boards, numbers.below(2) as u64).buying(buying);
    if buying == Buying::Forbidden || with.cost { drawer } else { drawer.beside(R, "13k").beside(C, "18n") }
}

fn drawn_section(numbers: &mut Numbers, drawer: &Drawer, with: With) -> Option<SectionProblem> {
    let (id, output) = CIRCUITS[numbers.below(if with.all_pass { 11 } else { 10 })];
    let shape = library(id).output(output).unwrap().shape;
    let placeholder = Section::new("A", shape, 1.0, (shape.order() == 2).then_some(1.0), 1.0, None).unwrap();
    let mut section = drawer.section(placeholder, id, output);
    let filled: Vec<usize> = section.output().filled(&section.circuit).collect();
    if with.demands {
        for _ in 0..numbers.below(3) {
            let slot = filled[numbers.below(filled.len())];
            let together = section.equal.iter().find(|e| e.contains(&slot)).cloned().unwrap_or(vec![slot]);
            let choices = section.shelves[slot].choices().to_vec();
            let one = choices[numbers.below(choices.len())];
            let pin = numbers.below(2) == 0;
            let other = filled[numbers.below(filled.len())];
            let kind = |s: usize| section.circuit.slots[s].kind;
            let free = |s| !section.equal.iter().any(|e| e.contains(&s));
            if numbers.below(2) == 0 && slot != other && kind(slot) == kind(other) && free(slot) && free(other) {
                section.shelves[other] = section.shelves[slot].clone();
                section.equal.push(vec![slot, other]);
            } else if let Some(shelf) = section.shelves[slot].filtered(|choice| (*choice == one) == pin) {
                together.iter().for_each(|&s| section.shelves[s] = shelf.clone());
            }
        }
        if numbers.below(4) == 0 {
            section.own_error = Some([0.1, 0.5, 2.0][numbers.below(3)]);
        }
    }
    if with.pairs && numbers.below(2) == 0 {
        let (kind, joint) = [(R, Joint::Series), (C, Joint::Parallel), (R, Joint::Parallel)][numbers.below(3)];
        section = paired(section, kind, &[joint], 1);
    }
    let mut planted: Vec<f64> = vec![1.0; section.circuit.slots.len()];
    for (value, shelf) in planted.iter_mut().zip(&section.shelves) {
        *value = shelf.values()[numbers.below(shelf.len())].to_f64() * numbers.between(1.0 / 1.1, 1.1);
    }
    section.equal.iter().for_each(|equal| equal.iter().for_each(|&s| planted[s] = planted[equal[0]]));
    section.target = target_of(&section, &planted)?;
    Some(section)
}

/// A problem of two or three sections with at most 150,000 boards; sometimes with the first section twice.
fn drawn(numbers: &mut Numbers, with: With) -> Option<Problem> {
    let drawer = drawn_drawer(numbers, with);
    let other = if with.stock || numbers.below(3) > 0 { drawer.clone() } else { drawn_drawer(numbers, with) };
    let mut sections = Vec::new();
    for _ in 0..2 + numbers.below(2) {
        let drawer = if sections.is_empty() { &drawer } else { &other };
        sections.push(drawn_section(numbers, drawer, with)?);
    }
    if numbers.below(4) == 0 {
        sections[1] = sections[0].clone();
    }
    if sections.iter().map(section_size).product::<f64>() > 150_000.0 {
        return None;
    }
    let vector = sections.iter().any(|s| s.target.shape.is_all_pass());
    let scale = if vector || with.weighted { 0.1 } else { 1.0 };
    let limit = scale * [1.0, 3.0, 10.0][numbers.below(3)];
    let mut goals = wide(limit);
    goals.own_error =
        [None, Some(0.05), Some(0.5), Some(2.0), Some(20.0)][numbers.below(5)].map(|own: f64| own * scale);
    goals.alternatives = [0, 0, 0, 2][numbers.below(4)];
    if with.demands {
        goals.max_part_numbers = [None, None, Some(3), Some(5)][numbers.below(4)];
        goals.error_resolution = [SAME, SAME, limit / 20.0][numbers.below(3)];
        goals.impedance = [None, None, Some((6e3, 1.5e4))][numbers.below(3)];
    }
    goals.rank = [Rank::Error, Rank::Error, Rank::PartNumbers, Rank::ToBuy][numbers.below(4)];
    if with.cost {
        goals.rank = Rank::Cost;
    }
    let mut problem = Problem { supply: drawer.supply.clone(), ..board(sections, goals) };
    problem.criterion.ignore_gain = with.no_gain && !vector;
    if with.wild {
        problem.criterion.floor_db = [60.0, 40.0, 20.0, 10.0][numbers.below(4)];
        let w0 = problem.sections[numbers.below(problem.sections.len())].target.w0;
        let bands = [None, None, Some((w0 / 3.0, w0 * 2.0)), Some((w0 / 30.0, w0 * 0.9)), Some((w0, w0 * 20.0))];
        problem.criterion.band = bands[numbers.below(5)];
    }
    if with.weighted {
        let weight = |numbers: &mut Numbers| [0.0, 0.5, 1.0, 2.0][numbers.below(4)];
        let [f0, q, gain] = [0, 1, 2].map(|_| weight(numbers));
        problem.criterion.measure = Measure::Weighted(Weights { f0: f0 + 0.1, q, gain, fz: 1.0 });
    }
    Some(problem)
}

/// Does something with so many problems of a seed; says of all that fail, which.
fn each_drawn(seed: u64, count: usize, with: With, check: &dyn Fn(&str, &Problem)) {
    let mut numbers = Numbers(seed);
    let (mut failed, mut number) = (Vec::new(), 0);
    while number < count {
        let Some(problem) = drawn(&mut numbers, with) else { continue };
        let label = format!("seed {seed}, problem {number}");
        number += 1;
        if std::panic::catch_unwind(std::panic::AssertUnwindSafe(|| check(&label, &problem))).is_err() {
            failed.push(label);
        }
    }
    assert!(failed.is_empty(), "{} of {count} failed: {failed:?}", failed.len());
}

/// Compares so many problems of a seed, and demands at least so many rows, and boards whose sections miss by more than it.
fn compare_drawn(seed: u64, count: usize, with: With, least: (usize, usize)) {
    let (rows, made_good) = (AtomicUsize::new(0), AtomicUsize::new(0));
    each_drawn(seed, count, with, &|label, problem| {
        let outcome = compare_whole(label, problem);
        rows.fetch_add(outcome.rows.len(), Ordering::Relaxed);
        let offs = Whole::run(problem).best.into_values().filter(|b| b.own.iter().all(|own| *own > b.error));
        made_good.fetch_add(offs.count(), Ordering::Relaxed);
    });
    let seen = (rows.into_inner(), made_good.into_inner());
    assert!(seen.0 >= least.0 && seen.1 >= least.1, "{seen:?} seen, {least:?} wanted");
}

#[test]
fn drawn_boards() {
    compare_drawn(1, 40, With::default(), (80, 10));
}

#[test]
fn drawn_with_demands() {
    compare_drawn(2, 40, With { demands: true, ..With::default() }, (40, 5));
}

#[test]
fn drawn_with_pairs() {
    compare_drawn(3, 25, With { pairs: true, demands: true, ..With::default() }, (40, 3));
}

#[test]
fn drawn_with_stock() {
    compare_drawn(4, 40, With { stock: true, ..With::default() }, (60, 5));
    compare_drawn(5, 30, With { stock: true, demands: true, pairs: true, ..With::default() }, (40, 3));
}

#[test]
fn drawn_with_floors_and_bands() {
    let wild = With { wild: true, ..With::default() };
    compare_drawn(13, 40, wild, (40, 1));
    compare_drawn(14, 20, With { no_gain: true, ..wild }, (20, 1));
    compare_drawn(15, 20, With { all_pass: true, stock: true, ..wild }, (20, 1));
}

#[test]
fn drawn_with_cost() {
    compare_drawn(12, 20, With { stock: true, cost: true, ..With::default() }, (20, 1));
}

#[test]
fn drawn_with_measured_parts_on_one_board() {
    compare_drawn(11, 20, With { stock: true, measured: true, ..With::default() }, (20, 1));
}

#[test]
fn drawn_with_other_measures() {
    compare_drawn(6, 25, With { all_pass: true, ..With::default() }, (40, 1));
    compare_drawn(7, 25, With { weighted: true, demands: true, ..With::default() }, (40, 0));
    compare_drawn(8, 20, With { no_gain: true, ..With::default() }, (30, 1));
}

// ---- threads and stops --------------------------------------------------------------------------------------------

#[test]
fn the_outcome_is_the_same_for_any_number_of_threads() {
    let pool = |threads| rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
    let (one, two) = (pool(1), pool(2));
    for with in [With::default(), With { stock: true, demands: true, pairs: true, ..With::default() }] {
        each_drawn(9, 12, with, &|label, problem| {
            let found: Vec<Outcome> =
                [&one, &two, &two].iter().map(|p| p.install(|| shortlist(problem, &Unwatched))).collect();
            assert_eq!(found[0], found[1], "{label}");
            assert_eq!(found[0], found[2], "{label}");
        });
    }
}

/// Stops when it has been asked so many times.
struct StopsAfter {
    calls: AtomicUsize,
    most: usize,
}

impl Monitor for StopsAfter {
    fn stop(&self) -> Option<StopReason> {
        let calls = self.calls.fetch_add(1, Ordering::Relaxed);
        (calls >= self.most).then_some(StopReason::Interrupted)
    }
}

#[test]
fn a_stopped_search_claims_no_more_than_it_proved() {
    let (stopped, proved) = (AtomicUsize::new(0), AtomicUsize::new(0));
    for with in [With::default(), With { stock: true, demands: true, ..With::default() }] {
        each_drawn(10, 12, with, &|label, problem| {
            let whole = Whole::run(problem);
            let counting = StopsAfter { calls: AtomicUsize::new(0), most: usize::MAX };
            shortlist(problem, &counting);
            let asked = counting.calls.into_inner();
            for part in 0..12 {
                let most = if part < 4 { part } else { asked * (part - 3) / 8 };
                let outcome = shortlist(problem, &StopsAfter { calls: AtomicUsize::new(0), most });
                if outcome.together.is_none() {
                    continue;
                }
                let label = format!("{label}, stopped after {most} of {asked}");
                whole.check_claims(&label, &outcome);
                if outcome.stopped.is_some() {
                    stopped.fetch_add(1, Ordering::Relaxed);
                    proved.fetch_add(outcome.rows.iter().filter(|row| row.proved).count(), Ordering::Relaxed);
                }
            }
        });
    }
    let seen = (stopped.into_inner(), proved.into_inner());
    assert!(seen.0 > 50 && seen.1 > 5, "{seen:?} stopped outcomes and proved rows in them");
}
