//! roundwell
pub mod circuit;
pub mod parts;
pub mod search;
pub mod target;
pub mod text;
pub mod units;
