//! What a search gives: rows with their parts, and how each section was searched.

use crate::parts::Choice;
use crate::target::{Deviation, Figures};
use crate::units::{Kind, Value};

use super::front::Proof;
use super::limits::StopReason;
use super::problem::Joint;

/// What stands in one slot of a row.
#[derive(Clone, Debug, PartialEq)]
pub struct Part {
    /// The slot's index in the circuit.
    pub slot: usize,
    /// Resistor or capacitor.
    pub kind: Kind,
    /// Its value in ohms or farads; that of the whole for a pair.
    pub ideal: f64,
    /// The exact value of a single part; `None` for a pair, and for an unrounded part of the ideal row.
    pub value: Option<Value>,
    /// What it is made of: one part, two for a pair, none for an unrounded part.
    pub pieces: Vec<Choice>,
    /// How the two parts of a pair are joined.
    pub joint: Option<Joint>,
}

/// One board among several that differ in their measured parts.
#[derive(Clone, Debug, PartialEq)]
pub struct BuiltBoard {
    /// The error of its whole cascade, in the unit of the measure.
    pub error: f64,
    /// Its sections.
    pub sections: Vec<Chosen>,
}

/// What was chosen for one section.
#[derive(Clone, Debug, PartialEq)]
pub struct Chosen {
    /// The parts of the filled slots, in slot order.
    pub parts: Vec<Part>,
    /// What they give.
    pub achieved: Figures,
    /// Geometric mean of the resistances that set the response, ohms; `None` without such a resistor.
    pub impedance: Option<f64>,
    /// The impedance levels at which this set also exists on the shelves, this one included, ascending, ohms.
    pub levels: Vec<f64>,
}

/// One row of the shortlist.
#[derive(Clone, Debug, PartialEq)]
pub struct Row {
    /// The error of the whole cascade, in the unit of the measure.
    pub deviation: Deviation,
    /// Its response error in dB, whatever the measure.
    pub decibels: f64,
    /// Different values over the whole board, resistors and capacitors counted apart; `None` for unrounded parts.
    pub part_numbers: Option<usize>,
    /// Bodies on the board.
    pub placed_parts: usize,
    /// The largest relative miss in f0, Q, gain and fz over all sections.
    pub worst_miss: f64,
    /// Whether the row is not on the front, and listed because alternatives were asked for.
    pub alternative: bool,
    /// Whether it is proved that no set on these shelves in this circuit that takes no more of anything, but those of the
    /// rows before it, has a smaller error. For several sections: no board of which each section misses its own target by no
    /// more than [`TogetherSummary::own_errors`] or the error of the row.
    pub proved: bool,
    /// Part numbers that must be bought; `None` without a stock list.
    pub to_buy: Option<usize>,
    /// What the parts of one board cost, in millionths of the currency; `None` where a price is not known. Where boards
    /// differ, that of the dearest.
    pub cost: Option<u64>,
    /// The sections; where boards differ, those of the worst board.
    pub sections: Vec<Chosen>,
    /// The boards, where measured parts make them differ; empty where all are alike.
    pub boards: Vec<BuiltBoard>,
}

/// How one section was searched.
#[derive(Clone, Debug, PartialEq)]
pub struct SectionSummary {
    /// The section's name.
    pub name: String,
    /// What is proved of its front.
    pub proof: Proof,
    /// How many combinations of shelf values there are for the slots that reach the response.
    pub combinations: f64,
    /// Sets whose response was evaluated.
    pub sets: u64,
    /// Partial and whole sets visited.
    pub nodes: u64,
    /// The error limit in force in the end: larger than the job's where nothing lay within that.
    pub error_limit: f64,
    /// The section's own front: part numbers and error, the latter in the unit of the measure.
    pub front: Vec<(usize, f64)>,
    /// Names of the slots that do not reach the response.
    pub silent: Vec<String>,
    /// Slots that may be interchanged, such as `R1 <-> R2`: of two sets that differ by that, one is listed.
    pub interchangeable: Vec<String>,
    /// Inequalities that this target needs and these shelves cannot meet, with both sides.
    pub unmet: Vec<String>,
}

/// What is known of all boards with a certain number of part numbers.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Bound {
    /// At most so many part numbers.
    pub part_numbers: usize,
    /// No such board that the search allows for has an error below this, in the unit of the measure.
    pub none_below: f64,
    /// All such boards with an error up to this have been gone through.
    pub searched_to: f64,
}

/// How all sections were searched together.
#[derive(Clone, Debug, PartialEq)]
pub struct TogetherSummary {
    /// What is proved of the front of whole boards.
    pub proof: Proof,
    /// How far each section may miss its own target, where the board may not miss the whole by more; in the unit of the
    /// measure.
    pub own_errors: Vec<f64>,
    /// By ascending number of part numbers.
    pub bounds: Vec<Bound>,
    /// The number of part numbers at which the search ended before it was complete: of boards with so many or more only
    /// some were looked at, beyond what `bounds` says.
    pub ended_at: Option<usize>,
    /// Sets of sections and boards whose response was evaluated.
    pub sets: u64,
    /// Partial and whole sets and boards visited.
    pub nodes: u64,
    /// Part numbers and error of the best board within the wanted error that choosing the sections one at a time gives.
    pub one_at_a_time: Option<(usize, f64)>,
}

/// The result of a job.
#[derive(Clone, Debug, PartialEq)]
pub struct Outcome {
    /// The rows by error, then part numbers: the front, with alternatives where asked for.
    pub rows: Vec<Row>,
    /// How many more rows there are than the job wants listed.
    pub more_rows: usize,
    /// The fewest part numbers of any board that was found, where the job's limit is below that and so nothing is listed.
    pub fewest_found: Option<usize>,
    /// Whether some sets of the sections' fronts were left out when the sections were combined, being too many.
    pub thinned: bool,
    /// Unrounded parts: capacitors on the shelf where possible, resistors exact.
    pub ideal: Option<Row>,
    /// The ideal parts, each rounded to the nearest value of its shelf.
    pub nearest: Option<Row>,
    /// The sections, each by itself.
    pub sections: Vec<SectionSummary>,
    /// All sections together; `None` for a single section, and where several were only searched one at a time.
    pub together: Option<TogetherSummary>,
    /// Index of the row with the fewest part numbers within the wanted error.
    pub marked: Option<usize>,
    /// Whether the rows lie within the error limit; if not, they are the nearest that were found.
    pub within_limit: bool,
    /// Why the search ended early, if it did.
    pub stopped: Option<StopReason>,
    /// Sets whose response was evaluated, over all sections.
    pub sets: u64,
    /// Partial and whole sets visited, over all sections.
    pub nodes: u64,
}
