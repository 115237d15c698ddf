//! The exact search for buyable sets, and the continuous solve beside it.

mod board;
mod canonical;
mod cascade;
mod family;
mod front;
mod ideal;
mod limits;
mod model;
mod problem;
mod section;
mod window;

pub use board::{Chosen, Outcome, Part, Row, SectionSummary, shortlist};
pub use cascade::{
    Cascade, CascadeError, CascadeRequest, CascadeSection, Filter, Gains, Level, OpAmpLevel, Pairing, Pairings,
    Sequence, Stage, Swing, cascade, ideal_parts,
};
pub use front::{End, ErrorKey, Proof};
pub use limits::{Monitor, Progress, StopReason, Unwatched};
pub use problem::{Goals, Problem, SectionProblem};
