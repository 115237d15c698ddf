//! An independent way to a front: every set on the shelves, one after the other.
//!
//! Nothing of the search is used here. The response of a set comes from a numeric nodal solve at each frequency of the
//! measure, the error and the number of part numbers from their definitions:
//! - response error: the largest |20 log10(A/B)| in dB over the band, A = max(|H|, floor), B = max(|H*|, floor);
//! - vector error: the largest |H − H*|/max(|H*|, floor) over the band;
//! - part numbers: different values, resistors and capacitors counted apart;
//! - two sets that differ by a decade of impedance, or by interchangeable slots, are one set.
#![allow(dead_code, reason = "each test program uses its own part of this module")]

mod brute;
pub mod closed_form;
pub mod measure;

use std::collections::BTreeSet;
use std::sync::Arc;

use num_complex::Complex64;
use roundwell::circuit::{self, Circuit};
use roundwell::parts::{Series, Shelf, Supply};
use roundwell::search::{Chosen, Goals, Outcome, Problem, Row, SectionProblem, Unwatched, shortlist};
use roundwell::target::{Criterion, Measure, Section, Shape};
use roundwell::units::{Kind, Value, parse_part};
use roundwell::verify::verify;

pub use brute::Brute;
pub use measure::Judge;

pub const TAU: f64 = std::f64::consts::TAU;

// ---- building problems --------------------------------------------------------------------------------------------

/// The embedded circuit of that name.
pub fn library(id: &str) -> Arc<Circuit> {
    Arc::new(circuit::find(id).unwrap_or_else(|| panic!("no circuit {id}")).clone())
}

/// A second-order section; frequencies in Hz.
pub fn second(shape: Shape, f0: f64, q: f64, gain: f64) -> Section {
    Section::new("A", shape, TAU * f0, Some(q), gain, None).unwrap()
}

/// A notch; frequencies in Hz.
pub fn notch(f0: f64, q: f64, gain: f64, fz: f64) -> Section {
    Section::new("A", Shape::Notch, TAU * f0, Some(q), gain, Some(TAU * fz)).unwrap()
}

/// A first-order section; frequency in Hz.
pub fn first(shape: Shape, f0: f64, gain: f64) -> Section {
    Section::new("A", shape, TAU * f0, None, gain, None).unwrap()
}

/// Values as text, such as `1k 4k7 10k`.
pub fn values(kind: Kind, text: &str) -> Vec<Value> {
    text.split_whitespace().map(|part| parse_part(part, kind).unwrap()).collect()
}

/// A shelf of resistors from text.
pub fn ohms(text: &str) -> Shelf {
    Shelf::new(Kind::Resistor, values(Kind::Resistor, text)).unwrap()
}

/// A shelf of capacitors from text.
pub fn farads(text: &str) -> Shelf {
    Shelf::new(Kind::Capacitor, values(Kind::Capacitor, text)).unwrap()
}

/// A shelf of a whole series between two values.
pub fn series(kind: Kind, series: Series, from: &str, to: &str) -> Shelf {
    let end = |text| parse_part(text, kind).unwrap();
    Shelf::new(kind, series.values_between(end(from), end(to))).unwrap()
}

/// A section with one shelf a kind and the circuit's own ties.
pub fn section(target: Section, id: &str, output: &str, resistors: &Shelf, capacitors: &Shelf) -> SectionProblem {
    SectionProblem::new(target, library(id), output, resistors, capacitors).unwrap()
}

/// The whole front of one section: down to the finest resolution that errors are compared with, any number of rows.
pub fn all_rows() -> Goals {
    Goals { error_resolution: SAME, rows: 1000, ..Goals::default() }
}

/// The whole front up to an error beyond which nothing matters.
pub fn wide(error_limit: f64) -> Goals {
    Goals { error_limit, wanted_error: error_limit / 10.0, ..all_rows() }
}

/// A problem of one section; all-pass sections are judged by the vector error.
pub fn problem(section: SectionProblem, goals: Goals) -> Problem {
    let measure = if section.target.shape.is_all_pass() { Measure::Vector } else { Measure::Decibel };
    let criterion = Criterion { measure, ..Criterion::default() };
    Problem { title: "test".into(), sections: vec![section], criterion, goals, supply: Supply::default() }
}

/// Ways to change what may go into single slots.
pub trait Slots {
    /// Gives a slot a shelf of its own.
    fn shelf(self, slot: &str, shelf: Shelf) -> Self;
    /// Pins a slot to a value.
    fn pin(self, slot: &str, value: &str) -> Self;
    /// Demands the same value of several slots.
    fn equal(self, slots: &[&str]) -> Self;
    /// Lets go of all equalities.
    fn untied(self) -> Self;
}

impl Slots for SectionProblem {
    fn shelf(mut self, slot: &str, shelf: Shelf) -> Self {
        let index = self.circuit.slot(slot).unwrap();
        self.shelves[index] = shelf;
        self
    }

    fn pin(self, slot: &str, value: &str) -> Self {
        let kind = self.circuit.slots[self.circuit.slot(slot).unwrap()].kind;
        self.shelf(slot, Shelf::new(kind, values(kind, value)).unwrap())
    }

    fn equal(mut self, slots: &[&str]) -> Self {
        let group = slots.iter().map(|s| self.circuit.slot(s).unwrap()).collect();
        self.equal.push(group);
        self
    }

    fn untied(mut self) -> Self {
        self.equal.clear();
        self
    }
}

// ---- a fixed source of numbers -----------------------------------------------------------------------------------

/// SplitMix64 (G. Steele, D. Lea, C. Flood, Fast Splittable Pseudorandom Number Generators, 2014).
pub struct Numbers(pub u64);

impl Numbers {
    pub fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        z ^ (z >> 31)
    }

    /// Below `n`.
    pub fn below(&mut self, n: usize) -> usize {
        (self.next() % n as u64) as usize
    }

    /// Between two numbers, evenly in the logarithm.
    pub fn between(&mut self, from: f64, to: f64) -> f64 {
        from * (to / from).powf((self.next() >> 11) as f64 / (1u64 << 53) as f64)
    }

    /// Some of the list, each at most once, in the list's order.
    pub fn some_of(&mut self, list: &[Value], count: usize) -> Vec<Value> {
        let mut left = list.to_vec();
        let mut taken: Vec<Value> = (0..count.min(list.len())).map(|_| left.remove(self.below(left.len()))).collect();
        taken.sort_unstable();
        taken
    }
}

// ---- comparison --------------------------------------------------------------------------------------------------

/// Errors that differ by no more than this (dB, or a plain ratio) count as equal.
pub const SAME: f64 = 1e-9;

/// Whether two errors agree.
pub fn agree(a: f64, b: f64) -> bool {
    (a - b).abs() <= SAME
}

/// The number of part numbers and the error of each row that is on the front, as listed.
pub fn listed(outcome: &Outcome) -> Vec<(usize, f64)> {
    let rows = outcome.rows.iter().filter(|row| !row.alternative);
    let mut front: Vec<(usize, f64)> = rows.map(|r| (r.part_numbers.unwrap(), r.deviation.error)).collect();
    front.sort_by_key(|(count, _)| *count);
    front
}

/// What the goals leave of a whole front: nothing beyond the error limit unless nothing better exists, nothing after the
/// best error has fallen below the resolution.
pub fn within_goals(front: &[(usize, f64)], goals: &Goals) -> Vec<(usize, f64)> {
    let mut kept: Vec<(usize, f64)> = Vec::new();
    for &(count, error) in front.iter().filter(|(_, error)| *error <= goals.error_limit) {
        if kept.last().is_none_or(|&(_, best)| best >= goals.error_resolution) {
            kept.push((count, error));
        }
    }
    kept
}

/// The values of a row in ohms and farads, by section and slot.
pub fn filled(problem: &Problem, row: &Row) -> Vec<Vec<f64>> {
    let of = |(section, chosen): (&SectionProblem, &Chosen)| {
        let mut slots = vec![1.0; section.circuit.slots.len()];
        chosen.parts.iter().for_each(|part| slots[part.slot] = part.ideal);
        slots
    };
    problem.sections.iter().zip(&row.sections).map(of).collect()
}

/// The response of a row's whole cascade, by numeric nodal solves.
pub fn cascade<'a>(problem: &'a Problem, filled: &'a [Vec<f64>]) -> impl Fn(f64) -> Option<Complex64> + 'a {
    move |w| {
        let each = problem.sections.iter().zip(filled);
        each.map(|(s, values)| circuit::response(&s.circuit, s.output(), values, w)).product()
    }
}

/// Recomputes a row from its parts: shelves, equalities, counts, error.
pub fn check_row(problem: &Problem, row: &Row) {
    let mut bought = BTreeSet::new();
    for (section, chosen) in problem.sections.iter().zip(&row.sections) {
        let expected: Vec<usize> = section.output().filled(&section.circuit).collect();
        assert_eq!(chosen.parts.iter().map(|p| p.slot).collect::<Vec<_>>(), expected);
        for part in &chosen.parts {
            let value = part.value.unwrap();
            assert_eq!(part.kind, section.circuit.slots[part.slot].kind);
            assert!(section.shelves[part.slot].contains(value), "{value} is not on the shelf");
            assert!((part.ideal / value.to_f64() - 1.0).abs() < 1e-15);
            bought.insert((part.kind, value));
        }
        for equal in &section.equal {
            let of = |slot: &usize| chosen.parts.iter().find(|p| p.slot == *slot).unwrap().value;
            assert!(equal.windows(2).all(|pair| of(&pair[0]) == of(&pair[1])), "a tie is broken");
        }
    }
    assert_eq!(row.part_numbers, Some(bought.len()));
    assert_eq!(row.placed_parts, row.sections.iter().map(|s| s.parts.len()).sum::<usize>());
    if matches!(problem.criterion.measure, Measure::Weighted(_)) || problem.criterion.ignore_gain {
        return;
    }
    let targets: Vec<Section> = problem.sections.iter().map(|s| s.target.clone()).collect();
    let judge = Judge::new(&targets, &problem.criterion);
    let values = filled(problem, row);
    let error = judge.error(&cascade(problem, &values), f64::INFINITY).unwrap();
    assert!(agree(error, row.deviation.error), "recomputed {error}, listed {}", row.deviation.error);
    let decibels = judge.decibel_error(&cascade(problem, &values));
    assert!(agree(decibels, row.decibels), "recomputed {decibels} dB, listed {} dB", row.decibels);
}

/// Searches a problem of one section and compares with all its sets; gives back what was found.
pub fn compare(label: &str, problem: &Problem) -> Outcome {
    let keep = problem.goals.alternatives + 1;
    let brute = Brute::run(problem, keep);
    assert!(brute.sets <= 200_000, "{label}: {} sets", brute.sets);
    let outcome = shortlist(problem, &Unwatched);
    let whole = brute.front();
    let expected = within_goals(&whole, &problem.goals);
    let found = listed(&outcome);
    let say = || format!("{label}\n every set: {whole:?}\n within the goals: {expected:?}\n listed: {found:?}");
    assert_eq!(outcome.stopped, None, "{}", say());
    for row in outcome.rows.iter().filter(|row| row.proved && !row.alternative) {
        let fewer = whole.iter().filter(|(count, _)| Some(*count) <= row.part_numbers);
        let best = fewer.map(|(_, error)| *error).fold(f64::INFINITY, f64::min);
        assert!(row.deviation.error <= best + SAME, "a row is said to be proved and is not: {}", say());
    }
    if expected.is_empty() {
        // Nothing within the limit: the nearest that exists must be named, and whatever else is listed must be true.
        assert!(!outcome.within_limit, "{}", say());
        match whole.iter().map(|(_, error)| *error).min_by(f64::total_cmp) {
            None => assert!(outcome.rows.is_empty(), "{}", say()),
            Some(nearest) => {
                assert!(!outcome.rows.is_empty() && agree(outcome.rows[0].deviation.error, nearest), "{}", say());
                for (count, error) in &found {
                    let there = whole.iter().any(|(c, e)| c == count && agree(*e, *error));
                    assert!(there, "{}", say());
                }
            }
        }
    } else {
        assert!(outcome.within_limit, "{}", say());
        assert_eq!(found.len(), expected.len(), "{}", say());
        for ((count, error), (c, e)) in found.iter().zip(&expected) {
            assert!(count == c && agree(*error, *e), "{}", say());
        }
        if problem.goals.alternatives > 0 {
            compare_alternatives(&brute, &outcome, &expected, problem.goals.error_limit, &say());
        }
    }
    for pair in outcome.rows.windows(2) {
        assert!(pair[0].deviation.error <= pair[1].deviation.error + SAME, "{}: not ranked", say());
    }
    let within = outcome.rows.iter().filter(|row| row.deviation.error <= problem.goals.wanted_error);
    let marked = outcome.marked.map(|i| outcome.rows[i].part_numbers);
    assert_eq!(marked, within.map(|row| row.part_numbers).min(), "the wrong row is marked: {}", say());
    outcome.rows.iter().for_each(|row| check_row(problem, row));
    assert_eq!(verify(problem, &outcome), Ok(()), "{}", say());
    outcome
}

/// For each number of part numbers on the front the best sets with exactly that many.
fn compare_alternatives(brute: &Brute<'_>, outcome: &Outcome, front: &[(usize, f64)], limit: f64, text: &str) {
    for (count, _) in front {
        let every: Vec<f64> = brute.best[count].iter().map(|f| f.error).filter(|e| *e <= limit).collect();
        let rows = outcome.rows.iter().filter(|r| r.part_numbers == Some(*count));
        let found: Vec<f64> = rows.map(|r| r.deviation.error).collect();
        assert!(
            every.len() == found.len() && every.iter().zip(&found).all(|(a, b)| agree(*a, *b)),
            "{text}\n {count} part numbers: {every:?} {found:?}"
        );
    }
}
