//! What is searched: targets, circuits and shelves, with everything resolved and checked.

use std::sync::Arc;

use crate::circuit::{Circuit, Output};
use crate::parts::Shelf;
use crate::target::{Criterion, Section};
use crate::units::Kind;

/// A whole job.
#[derive(Clone, Debug)]
pub struct Problem {
    /// The job's title.
    pub title: String,
    /// Its sections in signal order; never empty.
    pub sections: Vec<SectionProblem>,
    /// How realisations are compared with the target.
    pub criterion: Criterion,
    /// What is wanted of the result.
    pub goals: Goals,
}

/// One section: a target, the circuit that shall realise it, and what may go into each slot.
#[derive(Clone, Debug)]
pub struct SectionProblem {
    /// The ideal section; the sign of its gain is that of the circuit's output.
    pub target: Section,
    /// The circuit.
    pub circuit: Arc<Circuit>,
    /// Index of the output taken.
    pub output: usize,
    /// The shelf of each slot, in slot order; a pinned slot has a shelf of one value.
    pub shelves: Vec<Shelf>,
    /// Groups of slots that must carry the same value: ties in force and the job's own, disjoint, two slots or more.
    pub equal: Vec<Vec<usize>>,
}

impl SectionProblem {
    /// A section with one shelf a kind and the circuit's own ties in force, taken at the output of that name.
    ///
    /// `None` if the circuit has no such output.
    pub fn new(
        target: Section,
        circuit: Arc<Circuit>,
        output: &str,
        resistors: &Shelf,
        capacitors: &Shelf,
    ) -> Option<SectionProblem> {
        let output = circuit.outputs.iter().position(|o| o.name == output)?;
        let shelf = |slot: &crate::circuit::Slot| match slot.kind {
            Kind::Resistor => resistors.clone(),
            Kind::Capacitor => capacitors.clone(),
        };
        let shelves = circuit.slots.iter().map(shelf).collect();
        let filled = |tie: &Vec<usize>| -> Vec<usize> {
            tie.iter().copied().filter(|slot| !circuit.outputs[output].without.contains(slot)).collect()
        };
        let equal = circuit.ties.iter().map(filled).filter(|tie| tie.len() > 1).collect();
        Some(SectionProblem { target, circuit, output, shelves, equal })
    }

    /// The output that is taken.
    pub fn output(&self) -> &Output {
        &self.circuit.outputs[self.output]
    }
}

/// What is wanted of the result. Errors are in the unit of the measure: dB, or a plain ratio.
#[derive(Clone, Debug, PartialEq)]
pub struct Goals {
    /// No set may need more part numbers than this.
    pub max_part_numbers: Option<usize>,
    /// The row with the fewest part numbers within this error is marked.
    pub wanted_error: f64,
    /// Nothing worse is listed unless nothing better exists.
    pub error_limit: f64,
    /// The front ends where the best error falls below this.
    pub error_resolution: f64,
    /// How many rows to list at most.
    pub rows: usize,
    /// How many further sets to list for each number of part numbers.
    pub alternatives: usize,
    /// The geometric mean of the resistances that set the response of each section must lie in this range, ohms.
    pub impedance: Option<(f64, f64)>,
}

impl Default for Goals {
    /// 0.1 dB wanted, 1 dB limit, 0.001 dB resolution, ten rows, no alternatives.
    fn default() -> Self {
        Goals {
            max_part_numbers: None,
            wanted_error: 0.1,
            error_limit: 1.0,
            error_resolution: 0.001,
            rows: 10,
            alternatives: 0,
            impedance: None,
        }
    }
}
