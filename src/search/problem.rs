//! What is searched: targets, circuits and shelves, with everything resolved and checked.

use std::sync::Arc;

use crate::circuit::{Circuit, Output};
use crate::parts::{Shelf, Supply};
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
    /// The stock that is drawn on, and for how many boards.
    pub supply: Supply,
}

/// How two parts may stand together in a slot.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Joint {
    /// One after the other.
    Series,
    /// Side by side.
    Parallel,
}

impl Joint {
    /// The value of two parts together, in ohms or farads: resistors add in series, capacitors in parallel, otherwise their
    /// reciprocals do.
    pub fn value(self, kind: Kind, a: f64, b: f64) -> f64 {
        let adds = (kind == Kind::Resistor) == (self == Joint::Series);
        if adds { a + b } else { a * b / (a + b) }
    }
}

/// Where two parts may take the place of one.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Pairs {
    /// The joints allowed in each slot, in slot order; slots beyond the list allow none.
    pub joints: Vec<Vec<Joint>>,
    /// How many slots of the section may hold a pair.
    pub most: usize,
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
    /// Where two parts may take the place of one.
    pub pairs: Pairs,
    /// How far this section may miss its own target where all are chosen together; `None` for what the goals say.
    pub own_error: Option<f64>,
}

impl SectionProblem {
    /// Whether both are the same but for their name.
    pub(crate) fn is_like(&self, other: &SectionProblem) -> bool {
        let target = Section { name: self.target.name.clone(), ..other.target.clone() };
        let same_circuit = Arc::ptr_eq(&self.circuit, &other.circuit) || self.circuit.id == other.circuit.id;
        same_circuit
            && self.target == target
            && (self.output, &self.shelves, &self.equal) == (other.output, &other.shelves, &other.equal)
            && (&self.pairs, self.own_error) == (&other.pairs, other.own_error)
    }

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
        Some(SectionProblem { target, circuit, output, shelves, equal, pairs: Pairs::default(), own_error: None })
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
    /// Where several sections are chosen together: by how much each of them may miss its own target, if that is more than
    /// the board may miss the whole. `None` for the wanted error.
    pub own_error: Option<f64>,
    /// Whether several sections are only searched one at a time and their fronts combined: that is quick, but then nothing is
    /// proved of the board.
    pub one_at_a_time: bool,
    /// The front ends where the best error falls below this.
    pub error_resolution: f64,
    /// How many rows to list at most.
    pub rows: usize,
    /// How many further sets to list for each number of part numbers.
    pub alternatives: usize,
    /// The geometric mean of the resistances that set the response of each section must lie in this range, ohms.
    pub impedance: Option<(f64, f64)>,
    /// What the rows are ranked by.
    pub rank: Rank,
    /// Where measured parts go to several boards: whether each board may have other parts beside them too.
    pub each_board_its_own: bool,
}

impl Goals {
    /// By how much each of several sections may miss its own target, if the board may not miss the whole by more.
    pub fn own_error(&self) -> f64 {
        self.own_error.unwrap_or(self.wanted_error)
    }
}

/// What rows are ranked by first; the others follow in the order given here.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Rank {
    /// The error.
    #[default]
    Error,
    /// Part numbers.
    PartNumbers,
    /// Part numbers that must be bought.
    ToBuy,
    /// The cost of the parts of a board, which then takes part in the front.
    Cost,
    /// Placed parts.
    PlacedParts,
}

impl Default for Goals {
    /// 0.1 dB wanted, 1 dB limit, 0.001 dB resolution, ten rows, no alternatives.
    fn default() -> Self {
        Goals {
            max_part_numbers: None,
            wanted_error: 0.1,
            error_limit: 1.0,
            own_error: None,
            one_at_a_time: false,
            error_resolution: 0.001,
            rows: 10,
            alternatives: 0,
            impedance: None,
            rank: Rank::Error,
            each_board_its_own: false,
        }
    }
}
