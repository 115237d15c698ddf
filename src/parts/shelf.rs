//! Shelves.
use crate::units::{Kind, Value};
/// Shelf.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Shelf { kind: Kind, values: Vec<Value> }
/// Error.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum ShelfError {
    /// .
    #[error("empty")]
    Empty,
}
#[allow(clippy::len_without_is_empty)]
impl Shelf {
    /// .
    pub fn new(_kind: Kind, _values: impl IntoIterator<Item = Value>) -> Result<Shelf, ShelfError> { todo!() }
    /// .
    pub fn kind(&self) -> Kind { self.kind }
    /// .
    pub fn values(&self) -> &[Value] { &self.values }
    /// .
    pub fn contains(&self, _value: Value) -> bool { todo!() }
    /// .
    pub fn nearest(&self, _ideal: f64) -> Value { todo!() }
    /// .
    pub fn intersection(&self, _other: &Shelf) -> Option<Shelf> { todo!() }
    /// .
    pub fn without(&self, _values: &[Value]) -> Result<Shelf, ShelfError> { todo!() }
    /// .
    pub fn len(&self) -> usize { self.values.len() }
    /// .
    pub fn span(&self) -> (Value, Value) { todo!() }
}
