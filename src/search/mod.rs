//! The exact search for buyable sets, and the continuous solve beside it.

mod problem;

pub use problem::{Goals, Problem, SectionProblem};
