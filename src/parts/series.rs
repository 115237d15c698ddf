//! IEC 60063.
use crate::units::Value;
use serde::{Deserialize, Serialize};
/// Series.
#[allow(missing_docs)]
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
pub enum Series { E3, E6, E12, E24, E48, E96, E192 }
/// Error.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("unknown series {0}")]
pub struct UnknownSeries(String);
impl std::str::FromStr for Series { type Err = UnknownSeries; fn from_str(_s: &str) -> Result<Series, UnknownSeries> { todo!() } }
impl Series {
    /// .
    pub const ALL: [Series; 7] = [Series::E3, Series::E6, Series::E12, Series::E24, Series::E48, Series::E96, Series::E192];
    /// .
    pub fn name(self) -> &'static str { todo!() }
    /// .
    pub fn per_decade(self) -> usize { todo!() }
    /// .
    pub fn mantissas(self) -> &'static [u64] { todo!() }
    /// .
    pub fn digits(self) -> u32 { todo!() }
    /// .
    pub fn customary_tolerance_percent(self) -> &'static str { todo!() }
    /// .
    pub fn values_between(self, _from: Value, _to: Value) -> Vec<Value> { todo!() }
    /// .
    pub fn neighbours(self, _ideal: f64) -> (Value, Value) { todo!() }
    /// .
    pub fn nearest(self, _ideal: f64) -> Value { todo!() }
}
