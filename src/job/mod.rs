//! Job files: what the user writes, and how it becomes a [`Problem`](crate::search::Problem) with everything resolved
//! and checked.
//!
//! A job is read into a [`JobFile`], in which every key may be missing; what the command line says is laid over it;
//! [`resolve()`] then fills in the defaults and returns either a [`Job`] or every fault that can be told independently.

mod desk;
mod file;
mod filter;
mod given;
mod goals;
mod listed;
mod mask;
mod resolve;
mod section;
mod shelf;
mod slots;
mod stock;

#[cfg(test)]
mod tests;

pub use file::{
    FilterFile, JobFile, Joints, MeasureFile, PairsFile, RankFile, Response, SectionFile, Sign, SlotFile, Slots,
    Untie,
};
pub use filter::resolve_filter;
pub use given::{Given, Scalar, Scalars};
pub use listed::{Listed, ListedPart, ListedRow, ListedSection};
pub use mask::read_mask;
pub use resolve::{Job, resolve};
pub use shelf::{ShelfFile, Shelves, plain_shelf};
