//! What is searched: targets, circuits and shelves, with everything resolved and checked.

use std::sync::Arc;

use crate::circuit::{Circuit, Output};
use crate::parts::Shelf;
use crate::target::{Criterion, Section};

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
    /// The geometric mean of the resistances of each section must lie in this range, ohms.
    pub impedance: Option<(f64, f64)>,
}
