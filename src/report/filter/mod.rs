//! A filter and its sections as one plain record, and its renderers.

mod record;
mod text;

use std::io::{self, Write};

use serde_json::to_writer_pretty;

use crate::units::rounded;

pub use record::{
    ChoiceRecord, FilterRecord, LevelRecord, NotchRecord, OpAmpRecord, PoleRecord, SECTIONS_FORMAT, SectionOfFilter,
    SectionsRecord, StopBandRecord, SwingRecord,
};
pub use text::write_sections_table;

/// Writes the record as indented JSON with a line end: SI units, unrounded, null for what is not known.
///
/// # Errors
/// Those of the writer.
pub fn write_sections_json(record: &SectionsRecord, out: &mut dyn Write) -> io::Result<()> {
    to_writer_pretty(&mut *out, record).map_err(io::Error::from)?;
    writeln!(out)
}

/// The digits of the figures in a job file: far below what parts can meet, and still readable.
const DIGITS: usize = 10;

/// Writes the sections as a job file (RON) for the shortlist. Frequencies are in Hz; figures have ten digits.
///
/// # Errors
/// Those of the writer.
pub fn write_sections_job(record: &SectionsRecord, out: &mut dyn Write) -> io::Result<()> {
    for line in record.summary() {
        writeln!(out, "// {line}")?;
    }
    if record.has_other_keys {
        writeln!(out, "// The shelves and goals of the job that holds this filter are not repeated here.")?;
    }
    writeln!(out, "(\n    title: {:?},\n    sections: [", record.title)?;
    for section in &record.sections {
        let figure = |number: f64| rounded(number, DIGITS);
        let mut keys = vec![format!("name: {:?}", section.name), format!("shape: {:?}", section.shape)];
        keys.push(format!("f0: {}", figure(section.f0_hz)));
        keys.extend(section.q.map(|q| format!("q: {}", figure(q))));
        keys.extend(section.fz_hz.map(|fz| format!("fz: {}", figure(fz))));
        keys.push(format!("gain: {}", figure(section.gain)));
        keys.extend(section.circuit.as_ref().map(|circuit| format!("circuit: {circuit:?}")));
        writeln!(out, "        ({}),", keys.join(", "))?;
    }
    writeln!(out, "    ],\n)")
}
