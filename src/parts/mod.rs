//! The parts that may be bought: preferred number series, and the shelf of values allowed in a slot.

mod series;
mod shelf;

pub use series::{Series, UnknownSeries};
pub use shelf::{Shelf, ShelfError};

use crate::units::Value;

/// The one of two values, given in ascending order, with the smaller ratio to `ideal`; the smaller
/// when both are equally far.
fn closer(below: Value, above: Value, ideal: f64) -> Value {
    if ideal / below.to_f64() <= above.to_f64() / ideal { below } else { above }
}
