//! What a row of a shortlist takes from a stock list: what is left, and what is short.

use std::io::{self, Write};

use serde::{Deserialize, Serialize};

use super::layout::{Column, grid, paragraph, printable};
use super::record::FORMAT;
use crate::parts::{Lot, Supply};
use crate::text::Fault;
use crate::units::{Kind, format_part, parse_part};

/// The name and version of the JSON format of needs: keys may be added to it, none is renamed or removed.
pub const NEED_FORMAT: &str = "roundwell-need/1";

/// How to get a file that can be read.
const HELP: &str = "write one with roundwell shortlist JOB --format json --out shortlist.json";

/// What a row takes from a stock list.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct NeedRecord {
    /// [`NEED_FORMAT`].
    pub format: &'static str,
    /// The title of the job.
    pub title: String,
    /// The stock list.
    pub stock: String,
    /// The row of the shortlist.
    pub row: usize,
    /// Boards to build.
    pub boards: u64,
    /// How many of each part used are to be left over.
    pub spares: u64,
    /// The parts, resistors first, by value.
    pub parts: Vec<NeedLine>,
    /// How many of them the list does not have in the number needed.
    pub short: usize,
}

/// What is needed of one part.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct NeedLine {
    /// R or C.
    pub kind: Kind,
    /// The value on the label, in IEC 60062 notation.
    pub value: String,
    /// Tolerance and the like of what the row was made with.
    pub wanted_grade: Option<String>,
    /// The same of what the list has.
    pub grade: Option<String>,
    /// What the part or its drawer is called.
    pub id: Option<String>,
    /// The lines of the list; none if it does not have the part.
    pub lines: Vec<usize>,
    /// Bodies on each board; the most where boards differ.
    pub per_board: u64,
    /// Needed for all boards, with the spares.
    pub need: u64,
    /// How many there are; `None` where the list does not say.
    pub there: Option<u64>,
    /// How many are left; `None` where the list does not say.
    pub left: Option<u64>,
    /// How many are missing.
    pub short: u64,
}

#[derive(Deserialize)]
struct List {
    format: String,
    title: String,
    stock: Option<ListStock>,
    shortlist: Vec<ListRow>,
}

#[derive(Deserialize)]
struct ListStock {
    boards: u64,
    spares: u64,
}

#[derive(Deserialize)]
struct ListRow {
    rank: usize,
    #[serde(default)]
    taken: Vec<ListTaken>,
}

#[derive(Deserialize)]
struct ListTaken {
    kind: Kind,
    notation: String,
    grade: Option<String>,
    measured: Option<String>,
    per_board: u64,
    need: u64,
}

/// For how many boards, where that is not what the shortlist was made for.
#[derive(Clone, Copy, Debug, Default)]
pub struct Quantity {
    /// Boards to build.
    pub boards: Option<u64>,
    /// How many of each part used are to be left over.
    pub spares: Option<u64>,
}

impl NeedRecord {
    /// What a row of a shortlist, given as the JSON of [`write_json`](super::write_json), takes from a stock list.
    ///
    /// # Errors
    /// A text that is no shortlist, or has no such row.
    pub fn new(
        (name, supply): (&str, &Supply),
        (file, json): (&str, &str),
        row: usize,
        quantity: Quantity,
    ) -> Result<NeedRecord, Fault> {
        let fault = |message: String| Fault::at("", printable(&message));
        let list: List = serde_json::from_str(json)
            .map_err(|error| fault(format!("{file} is no shortlist: {error}")).help(HELP))?;
        if list.format != FORMAT {
            let message = format!("{file} has the format `{}`, {FORMAT} is expected", list.format);
            return Err(fault(message).help(HELP));
        }
        let Some(found) = list.shortlist.iter().find(|found| found.rank == row) else {
            let rows = list.shortlist.len();
            let message = format!("{file} has no row {row}");
            return Err(fault(message).help(if rows == 0 {
                "it lists nothing".to_string()
            } else {
                format!("choose one from 1 to {rows} with --row")
            }));
        };
        if found.taken.is_empty() {
            return Err(fault(format!("{file} does not say what row {row} takes")).help(HELP));
        }
        let boards = quantity.boards.or(list.stock.as_ref().map(|stock| stock.boards)).unwrap_or(1);
        let spares = quantity.spares.or(list.stock.as_ref().map(|stock| stock.spares)).unwrap_or(0);
        let as_listed = quantity.boards.is_none() && quantity.spares.is_none();
        let mut parts: Vec<NeedLine> = Vec::new();
        for taken in &found.taken {
            let need = match taken.measured {
                Some(_) => taken.per_board,
                None if as_listed => taken.need,
                None => taken.per_board.saturating_mul(boards).saturating_add(spares),
            };
            let lot = matching(supply, taken);
            let there = match lot {
                None => Some(0),
                Some(lot) => lot.available,
            };
            parts.push(NeedLine {
                kind: taken.kind,
                value: taken.notation.clone(),
                wanted_grade: taken.grade.clone(),
                grade: lot.and_then(super::drawn::grade),
                id: lot.and_then(Lot::id).map(str::to_owned),
                lines: lot.map_or(Vec::new(), |lot| lot.lines.iter().map(|line| line.line).collect()),
                per_board: taken.per_board,
                need,
                there,
                left: there.map(|there| there.saturating_sub(need)),
                short: there.map_or(0, |there| need.saturating_sub(there)),
            });
        }
        Ok(NeedRecord {
            format: NEED_FORMAT,
            title: list.title,
            stock: name.to_string(),
            row,
            boards,
            spares,
            short: parts.iter().filter(|part| part.short > 0).count(),
            parts,
        })
    }
}

/// The lot for a part: of the same label and grade, else of the same label and with the most parts. A measured part is only
/// itself.
fn matching<'a>(supply: &'a Supply, taken: &ListTaken) -> Option<&'a Lot> {
    let label = parse_part(&taken.notation, taken.kind).ok()?;
    let measured = taken.measured.as_deref().map(|text| parse_part(text, taken.kind)).transpose().ok()?;
    let fits = |lot: &&Lot| lot.kind == taken.kind && lot.nominal == label && lot.measured == measured;
    let lots: Vec<&Lot> = supply.lots().map(|(_, lot)| lot).filter(fits).collect();
    let same = lots.iter().find(|lot| super::drawn::grade(lot) == taken.grade);
    same.copied().or_else(|| lots.into_iter().max_by_key(|lot| lot.available.unwrap_or(u64::MAX)))
}

/// Writes the record as indented JSON with a line end. The keys are the fields of [`NeedRecord`].
///
/// # Errors
/// Those of the writer.
pub fn write_need_json(record: &NeedRecord, out: &mut dyn Write) -> io::Result<()> {
    serde_json::to_writer_pretty(&mut *out, record).map_err(io::Error::from)?;
    writeln!(out)
}

/// Writes the record as text of at most `width` characters to the line.
///
/// # Errors
/// Those of the writer.
pub fn write_need_table(record: &NeedRecord, width: usize, out: &mut dyn Write) -> io::Result<()> {
    let boards = if record.boards == 1 { "1 board".to_string() } else { format!("{} boards", record.boards) };
    let spares = if record.spares == 0 { String::new() } else { format!(", {} of each left over", record.spares) };
    let of = if record.title.is_empty() { String::new() } else { format!(" of {}", printable(&record.title)) };
    let line = format!("Row {}{of}: {boards}{spares}, from {}", record.row, printable(&record.stock));
    let mut text = paragraph("", &line, width) + "\n";
    let rows = || record.parts.iter();
    let dash = |number: Option<u64>| number.map_or("-".to_string(), |number| number.to_string());
    let word = |text: &Option<String>| text.as_deref().map_or("-".to_string(), printable);
    let lines = |part: &NeedLine| {
        let lines: Vec<String> = part.lines.iter().map(ToString::to_string).collect();
        if lines.is_empty() { "-".to_string() } else { lines.join(" ") }
    };
    let mut columns = vec![
        Column::left("", rows().map(|part| part.kind.letter().to_string()).collect()),
        Column::right("value", rows().map(|part| part.value.clone()).collect()),
        Column::left("id", rows().map(|part| word(&part.id)).collect()),
        Column::right("line", rows().map(lines).collect()),
        Column::right("a board", rows().map(|part| part.per_board.to_string()).collect()),
        Column::right("need", rows().map(|part| part.need.to_string()).collect()),
        Column::right("there", rows().map(|part| dash(part.there)).collect()),
        Column::right("left", rows().map(|part| dash(part.left)).collect()),
    ];
    // A name tells parts of one value apart; where there is none, what the list says of them must.
    if rows().any(|part| part.id.is_none() && !part.lines.is_empty()) {
        columns.insert(2, Column::left("grade", rows().map(|part| word(&part.grade)).collect()));
    }
    if record.short > 0 {
        columns.push(Column::right("short", rows().map(|part| part.short.to_string()).collect()));
    }
    text += &grid(&columns, 2, width);
    for part in rows().filter(|part| part.grade != part.wanted_grade && !part.lines.is_empty()) {
        let [wanted, has] = [&part.wanted_grade, &part.grade].map(|grade| grade.as_deref().unwrap_or("no grade"));
        let line = format!("{} {}: the row has {wanted}, the list {has}", part.kind.letter(), part.value);
        text += &paragraph("! ", &printable(&line), width);
    }
    let verdict = match record.short {
        0 => "The stock suffices.".to_string(),
        1 => "The stock is short of 1 part number.".to_string(),
        short => format!("The stock is short of {short} part numbers."),
    };
    text += &paragraph("", &verdict, width);
    out.write_all(text.as_bytes())
}

/// The value of a measured part as it is read back.
pub(super) fn measured_notation(lot: &Lot) -> Option<String> {
    lot.measured.map(|value| format_part(value, lot.kind))
}
