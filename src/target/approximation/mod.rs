//! From a specification to poles and zeros: the classical approximations, the transformations of their low-pass
//! prototypes, and the least order that will do.

mod band;
mod design;
mod elliptic;
mod polynomial;
mod prototype;

pub use band::{Band, Roots};
pub use design::{Design, DesignError, EdgeAt, Reference, Specification, StopBand, highest_order};
pub use prototype::{Approximation, HIGHEST_ORDER, Pole, Prototype};
