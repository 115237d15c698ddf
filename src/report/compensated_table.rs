//! A shortlist searched for with real op-amps in mind, as text for people: plain, without colour.

use std::io::{self, Write};

use super::compensated::{
    BuiltErrorRecord, BuiltRowRecord, BuiltSectionRecord, CompensatedRecord, CompensationRecord, figures_in_words,
};
use super::detail::detail;
use super::layout::{Column, grid, paragraph, unbroken};
use super::numbers::{decimal_column, error_in_words, level, percent};
use super::record::Record;
use super::table::{figures, label, outcome, searched, target_in_words, values};
use super::vet_real::around_in_words;

/// Writes the record as text of at most `width` characters to the line (40 at least; a name that is longer is not
/// broken).
///
/// # Errors
/// Those of the writer.
pub fn write_compensated_table(record: &CompensatedRecord, width: usize, out: &mut dyn Write) -> io::Result<()> {
    let list = record.as_searched();
    let wanted = error_in_words(list.measure.unit, list.wanted.wanted_error);
    let mark = match list.measure.name {
        "weighted" => format!("fewest part numbers within the wanted error of {wanted}, with ideal op-amps"),
        _ => format!("fewest part numbers whose error as built is within the wanted {wanted}"),
    };
    let table = figures(&list, &mark, width);
    let heading = "With ideal op-amps, against the sections searched for:";
    let mut taken = list.clone();
    taken.marked = record.compensation.first_row().and_then(|row| row.rank);
    let blocks = [
        if list.title.is_empty() { String::new() } else { paragraph("", &list.title, width) },
        corrections(record, width),
        searched(&list, width),
        outcome(&list, width),
        if table.is_empty() { table } else { paragraph("", heading, width) + &table },
        as_built(record, &list, width),
        values(&list, width),
        detail(&taken, width) + &built_in_words(record, width),
        record.compensation.warnings.iter().map(|warning| paragraph("! ", warning, width)).collect(),
        paragraph(
            "",
            "As built means: parts without tolerances, op-amps whose gain falls with the frequency from DC on, and the \
             surroundings that are stated. Tolerances and the layout come on top. Measure the build.",
            width,
        ),
    ];
    let filled: Vec<String> = blocks.into_iter().filter(|block| !block.is_empty()).collect();
    out.write_all(filled.join("\n").as_bytes())
}

/// The unit of the error as built: that of the measure, and of the weighted measure dB.
fn unit(list: &Record) -> &'static str {
    if list.measure.name == "weighted" { "dB" } else { list.measure.unit }
}

/// What is wanted, what is searched for in its place, and what that proves.
fn corrections(record: &CompensatedRecord, width: usize) -> String {
    let compensation = &record.compensation;
    let around = around_in_words(
        (compensation.bandwidth_hz, compensation.bandwidth_spread),
        [
            compensation.output_resistance_ohm,
            compensation.source_resistance_ohm,
            compensation.load_resistance_ohm.unwrap_or(0.0),
        ],
        compensation.stray_farad,
    );
    let mut text = paragraph("", &format!("Wanted as built, with {around}:"), width);
    for section in &compensation.sections {
        text += &paragraph(&format!("{}: ", section.name), &target_in_words(&section.wanted), width);
        let without = section.without.misses_in_words();
        text += &paragraph("   ", &format!("without correction: {}", unbroken(&without)), width);
        if section.state == "corrected" {
            let words = format!("searched for: {}", figures_in_words(&section.searched, &section.wanted));
            text += &paragraph("   ", &words, width);
            let mut words = format!("unrounded parts for that: {}", section.with.misses_in_words());
            for (end, bandwidth) in section.ends.iter().zip(ends_of(compensation)) {
                words += &format!("; with {}: {}", unbroken(&level(bandwidth, 4, "Hz")), end.misses_in_words());
            }
            text += &paragraph("   ", &words, width);
        }
    }
    let searches = match compensation.searches {
        1 => "One search was made, for the ratios of the ideal parts.".to_string(),
        searches => format!("{searches} searches were made, each for other ratios; the best is shown."),
    };
    if let Some(reason) = &compensation.stopped {
        let line = format!("The search for better ratios was stopped: {reason}.");
        text += &paragraph("", &line, width);
    }
    text + &paragraph(
        "",
        &format!(
            "How far op-amps move a section depends on the ratios of its parts, and so does the correction. {searches} What \
             is proved below is the front of the sections searched for, with ideal op-amps; not that no other set is better \
             as built."
        ),
        width,
    )
}

/// The gain-bandwidth products at both ends of the spread.
fn ends_of(compensation: &CompensationRecord) -> Vec<f64> {
    let spread = compensation.bandwidth_spread;
    let both = compensation.bandwidth_hz.map(|b| vec![b * (1.0 - spread), b * (1.0 + spread)]);
    both.filter(|_| spread > 0.0).unwrap_or_default()
}

/// Each row as built.
fn as_built(record: &CompensatedRecord, list: &Record, width: usize) -> String {
    let compensation = &record.compensation;
    let rows: Vec<&BuiltRowRecord> = compensation.rows.iter().chain(&compensation.references).collect();
    let name = |row: &&BuiltRowRecord| {
        let listed = list.shortlist.iter().chain(&list.references);
        let listed = listed.into_iter().find(|known| known.rank == row.rank && known.name == row.name);
        listed.map_or(String::new(), |known| label(list, known))
    };
    if rows.is_empty() {
        return String::new();
    }
    let unit = unit(list);
    let scale = if unit.is_empty() { 100.0 } else { 1.0 };
    let in_unit = if unit.is_empty() { "%" } else { unit };
    let errors = |of: &dyn Fn(&BuiltRowRecord) -> Option<f64>| {
        let found: Vec<Option<f64>> = rows.iter().map(|row| of(row).map(|error| scale * error)).collect();
        decimal_column(&found)
    };
    let at = |row: &&BuiltRowRecord| match row.nominal.error_at_hz.filter(|_| row.nominal.error > Some(1e-9)) {
        Some(hertz) => level(hertz, 3, "Hz"),
        None => "-".to_string(),
    };
    let mut columns = vec![
        Column::left("row", rows.iter().map(name).collect()),
        Column::right(format!("error\n{in_unit}"), errors(&|row| row.nominal.error)),
        Column::right("largest\nat", rows.iter().map(at).collect()),
    ];
    let several = compensation.sections.len() > 1;
    for (k, section) in compensation.sections.iter().enumerate() {
        let of = |row: &&BuiltRowRecord, figure: fn(&BuiltSectionRecord) -> Option<f64>| {
            let found = row.nominal.sections.get(k);
            let shown = found.map(|found| figure(found).map_or_else(|| found.state.to_string(), percent));
            shown.unwrap_or_else(|| "-".to_string())
        };
        let head = |figure: &str| match several {
            true => format!("{} {figure}\noff by", section.name),
            false => format!("{figure}\noff by"),
        };
        columns.push(Column::right(head("f0"), rows.iter().map(|row| of(row, |s| s.f0_miss)).collect()));
        if section.wanted.q.is_some() {
            columns.push(Column::right(head("Q"), rows.iter().map(|row| of(row, |s| s.q_miss)).collect()));
        }
    }
    for (k, bandwidth) in ends_of(compensation).iter().enumerate() {
        let header = format!("{in_unit} at\n{}", level(*bandwidth, 3, "Hz"));
        columns.push(Column::right(header, errors(&|row| row.ends.get(k)?.error)));
    }
    let mut text = paragraph("", "As built, against what is wanted:", width) + &grid(&columns, 1, width);
    if rows.iter().any(|row| row.nominal.sections.iter().any(|section| section.state == "unstable")) {
        text += &paragraph("  ", "unstable: it oscillates", width);
    }
    // Another network asks for another correction.
    let others = compensation.references.iter().filter(|row| row.name == Some("ideal parts"));
    let mut others = others.flat_map(|row| &row.nominal.sections).zip(&compensation.sections);
    if others.any(|(built, section)| built.misses_more_than(&section.with, 1e-4)) {
        let line = "the ideal parts, and the values nearest to them, have other ratios than the correction is for";
        text += &paragraph("  ", line, width);
    }
    if let Some(best) = compensation.best.filter(|best| Some(*best) != compensation.marked) {
        text += &paragraph("  ", &format!("row {best} comes closest as built"), width);
    }
    text
}

/// What the row that is taken first gives as built.
fn built_in_words(record: &CompensatedRecord, width: usize) -> String {
    let Some(row) = record.compensation.first_row() else { return String::new() };
    let mut text = String::new();
    for (section, built) in record.compensation.sections.iter().zip(&row.nominal.sections) {
        let figures = |found: &BuiltSectionRecord| unbroken(&found.misses_in_words());
        let mut words = format!("as built {}", figures(built));
        for (end, found) in row.ends.iter().filter_map(|end| {
            let index = record.compensation.sections.iter().position(|known| known.name == section.name)?;
            Some((end, end.sections.get(index)?))
        }) {
            words += &format!("; {}", with_bandwidth(end, &figures(found)));
        }
        text += &paragraph(&format!("  {}: ", section.name), &words, width);
    }
    text
}

fn with_bandwidth(end: &BuiltErrorRecord, figures: &str) -> String {
    let bandwidth = end.bandwidth_hz.map_or(String::new(), |bandwidth| level(bandwidth, 4, "Hz"));
    format!("with {} {figures}", unbroken(&bandwidth))
}
