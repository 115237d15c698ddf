//! Exact part values, the IEC 60062 notation for them, and the physical quantities of a job.

mod notation;
mod quantity;
mod value;
mod written;

#[cfg(test)]
pub(crate) mod test_support;

pub(crate) use notation::range_in_words;
pub use notation::{NotationError, format_part, parse_part};
pub use quantity::{
    QuantityError, format_si, parse_angular, parse_decibels, parse_delay, parse_frequency, parse_number,
    parse_seconds, rounded,
};
pub use value::{Kind, Value, ValueError};
pub(crate) use written::excerpt;
