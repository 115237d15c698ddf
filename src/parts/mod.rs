//! The parts that may be bought or are there: preferred number series, the shelf of values allowed in a slot, and
//! the stock list of a drawer.

mod series;
mod shelf;
mod stock;
mod supply;

pub use series::{Series, UnknownSeries};
pub use shelf::{Choice, Shelf, ShelfError};
pub use stock::{
    AtLine, Dielectric, DielectricClass, Film, Price, STOCK_COLUMNS, Stock, StockError, StockFault, StockLine,
    StockOddity, TemperatureCoefficient, Tolerance, ToleranceError,
};
pub use supply::{Buying, Lot, LotId, Origin, Supply};

use crate::units::Value;

/// The one of two values, given in ascending order, with the smaller ratio to `ideal`; the smaller
/// when both are equally far.
fn closer(below: Value, above: Value, ideal: f64) -> Value {
    if ideal / below.to_f64() <= above.to_f64() / ideal { below } else { above }
}
