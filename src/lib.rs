//! roundwell
pub mod circuit;
pub mod job;
pub mod parts;
pub mod report;
pub mod search;
pub mod target;
pub mod text;
pub mod units;
pub mod verify;
