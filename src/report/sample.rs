//! A finished search for the tests of the renderers: sets written down here, figures computed from them.

#![allow(clippy::unwrap_used)]

use std::collections::BTreeSet;
use std::f64::consts::TAU;
use std::sync::Arc;

use super::Record;
use crate::circuit::find;
use crate::parts::{Choice, Series, Shelf, Supply};
use crate::search::{
    Chosen, End, Goals, Outcome, Part, Problem, Proof, Row, SectionProblem, SectionSummary, StopReason,
};
use crate::target::{Biquad, Criterion, Measure, Section, Shape, Yardstick};
use crate::units::{Kind, Value, parse_part};

/// One Tow-Thomas section.
pub fn record() -> Record {
    Record::new(&problem(1), &outcome(&problem(1)), 0.0123)
}

/// Two Tow-Thomas sections.
pub fn two_sections() -> Record {
    Record::new(&problem(2), &outcome(&problem(2)), 1.5)
}

/// A search that the time limit ended, with an alternative and nothing within the limit.
pub fn stopped() -> Record {
    let problem = problem(1);
    let mut found = outcome(&problem);
    found.stopped = Some(StopReason::TimeLimit);
    found.within_limit = false;
    found.marked = None;
    found.sections[0].proof = Proof::Stopped { reason: StopReason::TimeLimit, complete_below: 4 };
    found.sections[0].unmet = vec!["C1/C2 >= 4 Q^2 = 1600, but these shelves give 1000 at most".to_string()];
    found.rows[1].alternative = true;
    found.rows[1].proved = false;
    Record::new(&problem, &found, 10.0)
}

/// The same under the vector measure, with gain ignored.
pub fn vector() -> Record {
    let mut problem = problem(1);
    problem.criterion = Criterion { measure: Measure::Vector, ignore_gain: true, ..problem.criterion };
    problem.goals = Goals { wanted_error: 0.03, error_limit: 0.12, error_resolution: 0.0001, ..problem.goals };
    Record::new(&problem, &outcome(&problem), 0.2)
}

pub fn problem(sections: usize) -> Problem {
    let shelf = |kind, series: Series, from, to| {
        let [from, to] = [from, to].map(|text| parse_part(text, kind).unwrap());
        Shelf::new(kind, series.values_between(from, to)).unwrap()
    };
    let resistors = shelf(Kind::Resistor, Series::E96, "1k", "1M");
    let capacitors = shelf(Kind::Capacitor, Series::E12, "1n", "1u");
    let circuit = Arc::new(find("tow-thomas").unwrap().clone());
    let section = |name: &str, q| {
        let target = Section::new(name, Shape::LowPass, 1000.0 * TAU, Some(q), 1.0, None).unwrap();
        SectionProblem::new(target, circuit.clone(), "low-pass", &resistors, &capacitors).unwrap()
    };
    Problem {
        title: "Vibration logger, anti-alias".to_string(),
        sections: [section("A", 0.5412), section("B", 1.3066)].into_iter().take(sections).collect(),
        criterion: Criterion::default(),
        goals: Goals { wanted_error: 0.4, ..Goals::default() },
        supply: Supply::default(),
    }
}

/// Sets of values in the slot order of Tow-Thomas (RG, RQ, C1, RF, R2, C2, RA, RB), for Q 0.5412 and 1.3066.
const SETS: [[&str; 2]; 2] = [
    ["15k8 8k66 10n 15k8 16k2 10n 15k8 15k8", "15k8 21k 10n 15k8 16k2 10n 15k8 15k8"],
    ["15k8 8k66 10n 15k8 15k8 10n 15k8 15k8", "15k8 20k5 10n 15k8 15k8 10n 15k8 15k8"],
];

fn outcome(problem: &Problem) -> Outcome {
    let values = |section: usize, set: usize| -> Vec<Value> {
        let texts = SETS[set][section].split(' ').zip(&problem.sections[section].circuit.slots);
        texts.map(|(text, slot)| parse_part(text, slot.kind).unwrap()).collect()
    };
    let ideal = |section: usize| -> Vec<f64> {
        let r = 1.0 / (problem.sections[section].target.w0 * 10e-9);
        let q = problem.sections[section].target.q.unwrap();
        vec![r, q * r, 10e-9, r, r, 10e-9, r, r]
    };
    let row = |set: Option<usize>| {
        let mut achieved = Vec::new();
        let mut numbers = BTreeSet::new();
        let sections: Vec<Chosen> = problem
            .sections
            .iter()
            .enumerate()
            .map(|(index, section)| {
                let chosen = set.map(|set| values(index, set));
                let exact = ideal(index);
                let numeric: Vec<f64> = match &chosen {
                    Some(values) => values.iter().map(|value| value.to_f64()).collect(),
                    None => exact.clone(),
                };
                let (n, d) = section.output().transfer.coefficients(&numeric);
                let of = |list: &[f64]| [0, 1, 2].map(|k| list.get(k).copied().unwrap_or(0.0));
                let h = Biquad { num: of(&n), den: of(&d) };
                achieved.push(h);
                let part = |slot: usize| {
                    let kind = section.circuit.slots[slot].kind;
                    let value = match &chosen {
                        Some(values) => Some(values[slot]),
                        None => (kind == Kind::Capacitor).then(|| parse_part("10n", kind).unwrap()),
                    };
                    let pieces = value.into_iter().map(Choice::from).collect();
                    Part { slot, kind, ideal: exact[slot], value, pieces, joint: None }
                };
                let parts: Vec<Part> = (0..section.circuit.slots.len()).map(part).collect();
                numbers.extend(parts.iter().filter_map(|part| Some((part.kind, part.value?))));
                let impedance = 15_600.0;
                let figures = section.target.figures_of(&h);
                Chosen {
                    parts,
                    achieved: figures,
                    impedance: Some(impedance),
                    levels: vec![impedance, 10.0 * impedance],
                }
            })
            .collect();
        let targets: Vec<Section> = problem.sections.iter().map(|section| section.target.clone()).collect();
        let error = |criterion| Yardstick::new(&targets, criterion).deviation(&achieved);
        let pairs = problem.sections.iter().zip(&sections);
        Row {
            deviation: error(problem.criterion),
            decibels: error(Criterion { measure: Measure::Decibel, ..problem.criterion }).error,
            part_numbers: set.map(|_| numbers.len()),
            placed_parts: 8 * problem.sections.len(),
            worst_miss: pairs.map(|(s, chosen)| s.target.worst_miss(&chosen.achieved)).fold(0.0, f64::max),
            alternative: false,
            proved: true,
            to_buy: None,
            cost: None,
            sections,
            boards: Vec::new(),
        }
    };
    let rows = vec![row(Some(0)), row(Some(1))];
    let front = rows.iter().map(|row| (row.part_numbers.unwrap(), row.deviation.error)).collect::<Vec<_>>();
    let summary = |section: &SectionProblem| SectionSummary {
        name: section.target.name.clone(),
        proof: Proof::Exhaustive(End::Resolution),
        combinations: 289f64.powi(4) * 37f64.powi(2),
        sets: 123_456,
        nodes: 789,
        error_limit: 0.25,
        front: front.clone(),
        silent: vec!["RA".to_string(), "RB".to_string()],
        interchangeable: Vec::new(),
        unmet: Vec::new(),
    };
    let sections: Vec<SectionSummary> = problem.sections.iter().map(summary).collect();
    Outcome {
        nearest: Some(row(Some(1))),
        ideal: Some(row(None)),
        together: None,
        marked: (0..rows.len())
            .filter(|&index| rows[index].deviation.error <= problem.goals.wanted_error)
            .min_by_key(|&index| rows[index].part_numbers),
        more_rows: 0,
        fewest_found: None,
        thinned: false,
        within_limit: true,
        stopped: None,
        sets: 123_456 * sections.len() as u64,
        nodes: 789,
        sections,
        rows,
    }
}
