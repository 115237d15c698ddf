//! One row in full: what it takes, what it gives, and which part stands on which board.

use super::drawn::placed;
use super::layout::{Column, grid, paragraph, printable, unbroken};
use super::numbers::{decimal_column, level, percent, short};
use super::record::{Achieved, PartRecord, Record, RowRecord, TargetRecord};
use super::table::notation;
use crate::units::Kind;

/// What to buy or take for the row that is taken first, and what it gives.
pub(super) fn detail(record: &Record, width: usize) -> String {
    let Some(row) = record.marked_row().or(record.shortlist.first()) else { return String::new() };
    let rank = row.rank.map_or(String::new(), |rank| format!(" {rank}"));
    let mut text = match &record.stock {
        None => format!("Row{rank} needs, and gives:\n"),
        Some(stock) => {
            let boards = if stock.boards == 1 { "1 board".to_string() } else { format!("{} boards", stock.boards) };
            let spares = match stock.spares {
                0 => String::new(),
                1 => " and 1 spare of each".to_string(),
                spares => format!(" and {spares} spares of each"),
            };
            let line = format!("Row{rank} takes for {boards}{spares}, of what is in stock, and gives:");
            paragraph("", &line, width)
        }
    };
    for kind in [Kind::Resistor, Kind::Capacitor] {
        // Measured parts are named where they stand.
        let of_kind = row.taken.iter().filter(|taken| taken.kind == kind && !is_measured(row, &taken.lines));
        let list: Vec<String> = of_kind.map(|taken| taken_in_words(record, taken)).collect();
        if !list.is_empty() {
            text += &paragraph(&format!("  {}: ", kind.letter()), &list.join(", "), width);
        }
    }
    for (section, chosen) in record.sections.iter().zip(&row.sections) {
        let figures = achieved_in_words(&chosen.achieved, &section.target);
        text += &paragraph(&format!("  {}: ", section.name), &figures, width);
        let measured = placed(chosen);
        if !measured.is_empty() && row.boards.is_empty() {
            text += &paragraph(&format!("  {}: ", section.name), &printable(&format!("measured: {measured}")), width);
        }
    }
    if let Some(offset) = row.gain_offset {
        let line = format!("a flat gain offset of {} dB was taken out", short(-20.0 * offset.log10(), 3));
        text += &paragraph("  ", &line, width);
    }
    if !row.boards.is_empty() {
        text += "\n";
        text += &boards(record, row, width);
    }
    text
}

/// Whether the parts of these lines are single measured ones.
fn is_measured(row: &RowRecord, lines: &[usize]) -> bool {
    let boards = row.boards.iter().flat_map(|board| &board.sections).chain(&row.sections);
    let pieces = boards.flat_map(|section| &section.parts).flat_map(|part| &part.made_of);
    pieces.into_iter().any(|piece| piece.measured.is_some() && piece.lines == lines && !lines.is_empty())
}

/// Such as `3 x 10k5`, or with a stock `3 x 10k5 1 % (A3): 30 of 40`.
fn taken_in_words(record: &Record, taken: &super::TakenRecord) -> String {
    let mut words = format!("{} x {}", taken.per_board, taken.notation);
    if record.stock.is_none() {
        return unbroken(&words);
    }
    // A name tells parts of one value apart; where there is none, what the list says of them must.
    if let Some(word) = taken.id.as_ref().or(taken.grade.as_ref()) {
        words += &format!(" ({})", printable(word));
    }
    words += &match (taken.to_buy, taken.available) {
        (0, Some(there)) => format!(": {} of {there}", taken.need),
        (0, None) => format!(": {}", taken.need),
        (buy, _) if buy == taken.need => format!(": {buy} to buy"),
        (buy, there) => format!(": {} of {}, {buy} to buy", taken.need, there.unwrap_or(0)),
    };
    unbroken(&words)
}

/// The boards of a row that differ: which measured part stands where, and what each board gives.
fn boards(record: &Record, row: &RowRecord, width: usize) -> String {
    let rank = row.rank.map_or(String::new(), |rank| format!(" of row {rank}"));
    let errors: Vec<Option<f64>> = row.boards.iter().map(|board| board.error).collect();
    let mut columns = vec![
        Column::right("board", row.boards.iter().map(|board| board.board.to_string()).collect()),
        Column::right(format!("error {}", record.measure.unit).trim_end(), decimal_column(&errors)),
    ];
    let several = record.sections.len() > 1;
    for (index, section) in record.sections.iter().enumerate() {
        let of_board = || row.boards.iter().filter_map(move |board| board.sections.get(index));
        let name = |slot: &str| if several { format!("{}\n{slot}", section.name) } else { slot.to_string() };
        let slots: Vec<&String> =
            of_board().next().map_or(Vec::new(), |first| first.parts.iter().map(|p| &p.slot).collect());
        for slot in slots {
            let parts: Vec<&PartRecord> =
                of_board().filter_map(|chosen| chosen.parts.iter().find(|part| part.slot == *slot)).collect();
            let measured = parts.iter().any(|part| part.made_of.iter().any(|piece| piece.measured.is_some()));
            if measured || row.boards_differ_in_values() {
                columns.push(Column::left(name(slot), parts.into_iter().map(standing).collect()));
            }
        }
    }
    paragraph("", &format!("Boards{rank}, the best first; measured parts by name and value:"), width)
        + &grid(&columns, 1, width)
}

/// What stands in a slot: a measured part by its name and value.
fn standing(part: &PartRecord) -> String {
    let names: Vec<&str> =
        part.made_of.iter().filter(|p| p.measured.is_some()).filter_map(|p| p.id.as_deref()).collect();
    match names.is_empty() {
        true => notation(part),
        false => printable(&format!("{} {}", names.join("+"), notation(part))),
    }
}

/// Achieved figures with their distance from the target.
pub(super) fn achieved_in_words(achieved: &Achieved, target: &TargetRecord) -> String {
    let figure = |name: &str, shown: String, value: f64, ideal: f64| {
        unbroken(&format!("{name} {shown} ({})", percent(value / ideal - 1.0)))
    };
    let mut words = Vec::new();
    if let Some(f0) = achieved.f0_hz {
        words.push(figure("f0", level(f0, 6, "Hz"), f0, target.f0_hz));
    }
    if let (Some(q), Some(ideal)) = (achieved.q, target.q) {
        words.push(figure("Q", short(q, 5), q, ideal));
    }
    if let Some(gain) = achieved.gain {
        words.push(figure("gain", short(gain, 5), gain, target.gain));
    }
    if let (Some(fz), Some(ideal)) = (achieved.fz_hz, target.fz_hz) {
        words.push(figure("fz", level(fz, 6, "Hz"), fz, ideal));
    }
    words.join(", ")
}
