//! The exact search for buyable sets, and the continuous solve beside it.

mod assign;
mod board;
mod canonical;
mod cascade;
mod combine;
mod family;
mod front;
mod ideal;
mod limits;
mod model;
mod outcome;
mod prepared;
mod problem;
mod section;
mod shortage;
mod swap;
mod together;
mod window;

pub use board::shortlist;
pub use cascade::{
    Cascade, CascadeError, CascadeRequest, CascadeSection, Filter, Gains, Level, OpAmpLevel, Pairing, Pairings,
    Sequence, Stage, Swing, cascade, ideal_parts, ideal_parts_near,
};
pub use front::{End, ErrorKey, Proof};
pub use limits::{Monitor, Progress, StopReason, Unwatched};
pub use outcome::{Bound, BuiltBoard, Chosen, Outcome, Part, Row, SectionSummary, TogetherSummary};
pub use problem::{Goals, Joint, Pairs, Problem, Rank, SectionProblem};
pub use swap::{Change, Reference, Replacement, Replacements, SwapProblem, replacements};
