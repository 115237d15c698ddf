//! Preferred number series and shelves of part values.

mod series;
mod shelf;

pub use series::{Series, UnknownSeries};
pub use shelf::{Shelf, ShelfError};
