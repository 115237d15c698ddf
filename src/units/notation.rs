//! IEC 60062.
use super::{Kind, Value};
/// Error.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum NotationError {
    /// .
    #[error("empty")]
    Empty,
}
/// .
pub fn parse_part(_text: &str, _kind: Kind) -> Result<Value, NotationError> { todo!() }
/// .
pub fn format_part(_value: Value, _kind: Kind) -> String { todo!() }
