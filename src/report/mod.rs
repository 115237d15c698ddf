//! The result of a search as one plain record, and its renderers. Each renderer writes to a writer; none opens files.

mod csv;
mod json;
mod layout;
mod numbers;
mod record;
mod table;

#[cfg(test)]
mod sample;

pub use csv::{CSV_COLUMNS, write_csv};
pub use json::write_json;
pub use layout::{Align, Column, grid, paragraph, unbroken};
pub use numbers::{error_in_words, percent};
pub use record::{
    Achieved, ChosenRecord, FORMAT, FrontPoint, MeasureRecord, PartRecord, PieceRecord, Record, RowRecord,
    SearchRecord, SectionRecord, SectionSearch, ShelfRecord, TargetRecord, WantedRecord,
};
pub use table::write_table;
