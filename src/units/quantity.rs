//! Quantities.
/// Error.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum QuantityError {
    /// .
    #[error("empty")]
    Empty,
}
/// .
pub fn parse_frequency(_text: &str) -> Result<f64, QuantityError> { todo!() }
/// .
pub fn parse_angular(_text: &str) -> Result<f64, QuantityError> { todo!() }
/// .
pub fn parse_decibels(_text: &str) -> Result<f64, QuantityError> { todo!() }
/// .
pub fn parse_seconds(_text: &str) -> Result<f64, QuantityError> { todo!() }
/// .
pub fn parse_number(_text: &str) -> Result<f64, QuantityError> { todo!() }
/// .
pub fn format_si(_value: f64, _digits: usize, _unit: &str) -> String { todo!() }
