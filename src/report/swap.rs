//! Replacements for parts that are gone, as a record, and its renderers.

use std::f64::consts::TAU;
use std::io::{self, Write};

use serde::Serialize;

use super::detail::achieved_in_words;
use super::layout::{Column, grid, paragraph, unbroken};
use super::numbers::{count, decimal_column, error_in_words, percent, span_of_time};
use super::record::{ChosenRecord, TargetRecord};
use crate::parts::Supply;
use crate::search::{Change, Chosen, Reference, Replacement, Replacements, SwapProblem};
use crate::units::{Kind, format_part};

/// The name and version of the JSON format of replacements: keys may be added to it, none is renamed or removed.
pub const SWAP_FORMAT: &str = "roundwell-replacements/1";

/// Replacements for parts of one section.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct SwapRecord {
    /// [`SWAP_FORMAT`].
    pub format: &'static str,
    /// The title of the job.
    pub title: String,
    /// What the section shall be.
    pub target: TargetRecord,
    /// The unit of the errors: `dB`, or empty for a plain ratio.
    pub unit: &'static str,
    /// The slots whose parts are gone.
    pub gone: Vec<String>,
    /// How many other slots may change.
    pub others: usize,
    /// By which error the rows are ranked: `built` or `target`.
    pub ranked_by: &'static str,
    /// `exhaustive` or `stopped`.
    pub proof: &'static str,
    /// Why it stopped, in words.
    pub reason: Option<String>,
    /// The largest error that was looked for.
    pub error_limit: f64,
    /// Sets evaluated.
    pub sets: u64,
    /// Nodes of the search tree visited.
    pub nodes: u64,
    /// How long it took, s.
    pub seconds: f64,
    /// The section as built.
    pub built: ChosenRecord,
    /// Its error against the target.
    pub built_error: f64,
    /// The replacements.
    pub replacements: Vec<ReplacementRecord>,
    /// Values with which nothing is possible while the other parts of the kind stay.
    pub impossible: Vec<ImpossibleRecord>,
}

/// One replacement.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct ReplacementRecord {
    /// The place in the list, from 1.
    pub rank: usize,
    /// How many slots change that were not gone.
    pub others: usize,
    /// The slots that change.
    pub changes: Vec<ChangeRecord>,
    /// Error against the section as built.
    pub against_built: f64,
    /// Error against the target.
    pub against_target: f64,
    /// Changes of f0, Q, gain and fz against the section as built, as plain ratios less one.
    pub moves: [Option<f64>; 4],
    /// All parts and what they give.
    pub section: ChosenRecord,
}

/// A slot that changes.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct ChangeRecord {
    /// The slot.
    pub slot: String,
    /// The value it holds, in IEC 60062 notation.
    pub from: String,
    /// The value it is to hold.
    pub to: String,
    /// How many of the new part all boards need; `None` without a stock list.
    pub need: Option<u64>,
    /// How many there are; `None` where the list does not say, or does not have it.
    pub available: Option<u64>,
    /// How many must be bought.
    pub to_buy: u64,
    /// What the new part or its drawer is called.
    pub id: Option<String>,
    /// The lines of the stock list it is taken from.
    pub lines: Vec<usize>,
}

/// A value with which nothing is possible.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct ImpossibleRecord {
    /// The slot that is gone.
    pub slot: String,
    /// The value, in IEC 60062 notation.
    pub value: String,
    /// The inequality that fails.
    pub why: String,
}

impl SwapRecord {
    /// The record of a search that took `seconds`.
    pub fn new(title: &str, problem: &SwapProblem, found: &Replacements, seconds: f64) -> SwapRecord {
        let section = &problem.built;
        let slots = &section.circuit.slots;
        let record = |chosen: &Chosen| ChosenRecord::new(&problem.supply, section, chosen);
        let built = record(&found.built);
        let row = |(rank, row): (usize, &Replacement)| {
            let chosen = record(&row.chosen);
            let (new, old) = (&chosen.achieved, &built.achieved);
            let ratio =
                |new: Option<f64>, old: Option<f64>| Some(new? / old? - 1.0).filter(|ratio| ratio.is_finite());
            ReplacementRecord {
                rank,
                others: row.others,
                changes: (row.changes.iter())
                    .map(|change| {
                        let bodies = row.changes.iter().filter(|other| other.to == change.to).count() as u64;
                        change_record(&problem.supply, slots, change, bodies)
                    })
                    .collect(),
                against_built: row.against_built,
                against_target: row.against_target,
                moves: [
                    ratio(new.f0_hz, old.f0_hz),
                    ratio(new.q, old.q),
                    ratio(new.gain, old.gain),
                    ratio(new.fz_hz, old.fz_hz),
                ],
                section: chosen,
            }
        };
        SwapRecord {
            format: SWAP_FORMAT,
            title: title.to_string(),
            target: TargetRecord {
                shape: section.target.shape.name(),
                f0_hz: section.target.w0 / TAU,
                q: section.target.q,
                gain: section.target.gain,
                fz_hz: section.target.wz.map(|wz| wz / TAU),
            },
            unit: problem.criterion.measure.unit(),
            gone: problem.gone.iter().map(|&slot| slots[slot].name.clone()).collect(),
            others: problem.others,
            ranked_by: match problem.reference {
                Reference::Built => "built",
                Reference::Target => "target",
            },
            proof: if found.stopped.is_some() { "stopped" } else { "exhaustive" },
            reason: found.stopped.map(|reason| reason.describe().to_string()),
            error_limit: problem.error_limit,
            sets: found.sets,
            nodes: found.nodes,
            seconds,
            built_error: found.built_error,
            replacements: (1..).zip(&found.rows).map(row).collect(),
            impossible: (found.impossible.iter())
                .map(|(slot, choice, why)| ImpossibleRecord {
                    slot: slots[*slot].name.clone(),
                    value: format_part(choice.value, slots[*slot].kind),
                    why: why.clone(),
                })
                .collect(),
            built,
        }
    }
}

fn change_record(supply: &Supply, slots: &[crate::circuit::Slot], change: &Change, bodies: u64) -> ChangeRecord {
    let kind: Kind = slots[change.slot].kind;
    let lot = supply.lot_of(change.to);
    let need = supply.need(change.to, bodies);
    let available = lot.and_then(|lot| lot.available);
    let bought = supply.has_stock() && !supply.suffices(change.to, bodies);
    ChangeRecord {
        slot: slots[change.slot].name.clone(),
        from: format_part(change.from.value, kind),
        to: format_part(change.to.value, kind),
        need: supply.has_stock().then_some(need),
        available,
        to_buy: if bought { need - available.unwrap_or(0).min(need) } else { 0 },
        id: lot.and_then(|lot| lot.id()).map(str::to_owned),
        lines: lot.map_or(Vec::new(), |lot| lot.lines.iter().map(|line| line.line).collect()),
    }
}

/// Writes the record as indented JSON with a line end. The keys are the fields of [`SwapRecord`].
///
/// # Errors
/// Those of the writer.
pub fn write_swap_json(record: &SwapRecord, out: &mut dyn Write) -> io::Result<()> {
    serde_json::to_writer_pretty(&mut *out, record).map_err(io::Error::from)?;
    writeln!(out)
}

/// Writes the record as text of at most `width` characters to the line.
///
/// # Errors
/// Those of the writer.
pub fn write_swap_table(record: &SwapRecord, width: usize, out: &mut dyn Write) -> io::Result<()> {
    let mut text = String::new();
    if !record.title.is_empty() {
        text += &paragraph("", &record.title, width);
    }
    let built: Vec<String> = (record.built.parts.iter())
        .map(|part| unbroken(&format!("{} {}", part.slot, part.notation.as_deref().unwrap_or("-"))))
        .collect();
    let name = &record.built.name;
    text += &paragraph(
        &format!("{name}: "),
        &format!("{}; circuit {}", record.target.shape, record.built.circuit),
        width,
    );
    text += &paragraph("   built ", &built.join(", "), width);
    text += &paragraph("   ", &achieved_in_words(&record.built.achieved, &record.target), width);
    let others = match record.others {
        0 => "nothing else may change".to_string(),
        1 => "at most 1 other slot may change".to_string(),
        others => format!("at most {others} other slots may change"),
    };
    text += &paragraph("   ", &format!("gone: {}; {others}", record.gone.join(", ")), width);
    let limit = unbroken(&error_in_words(record.unit, record.error_limit));
    let by = if record.ranked_by == "built" { "the section as built" } else { "the target" };
    let statement = match &record.reason {
        None if record.replacements.is_empty() => {
            format!("proved: no replacement within {limit} of {by} exists with so few changes")
        }
        None => format!("proved: within {limit} of {by} no better replacement exists with as few changes"),
        Some(reason) => format!("stopped, {reason}: better replacements may exist"),
    };
    text += &paragraph("   ", &statement, width);
    let total = format!(
        "{} sets evaluated, {} nodes visited, {}",
        count(record.sets),
        count(record.nodes),
        span_of_time(record.seconds)
    );
    text += &paragraph("Search: ", &total, width);
    text += "\n";
    if record.replacements.is_empty() {
        let line = format!(
            "Nothing within {limit} of {by} replaces what is gone. More slots that may change (--others), wider shelves or \
             parts to buy, or a larger --error-limit may help."
        );
        text += &paragraph("", &line, width);
    } else {
        text += &grid(&columns(record), 1, width);
        let changed: std::collections::BTreeSet<&str> =
            record.replacements.iter().flat_map(|row| &row.changes).map(|change| change.slot.as_str()).collect();
        if record.replacements.iter().any(|row| row.changes.len() < changed.len()) {
            text += &paragraph("= ", "stays as it is", width);
        }
        if record.replacements.iter().flat_map(|row| &row.changes).any(|change| change.to_buy > 0) {
            text += &paragraph("! ", "must be bought, or there are not enough", width);
        }
    }
    if !record.impossible.is_empty() {
        text += "\n";
        for impossible in &record.impossible {
            let line = format!("{} (with the other parts of its kind as they are)", impossible.why);
            text += &paragraph(&format!("{} = {}: ", impossible.slot, impossible.value), &line, width);
        }
    }
    text += "\n";
    text += &paragraph(
        "",
        "Values are computed for ideal parts and ideal op-amps. Check case, voltage rating, dielectric and tolerance of \
         a new part, and measure the first board.",
        width,
    );
    out.write_all(text.as_bytes())
}

fn columns(record: &SwapRecord) -> Vec<Column> {
    let rows = || record.replacements.iter();
    let unit = if record.unit.is_empty() { "%" } else { record.unit };
    let scale = if record.unit.is_empty() { 100.0 } else { 1.0 };
    let errors = |figure: &dyn Fn(&ReplacementRecord) -> f64| {
        decimal_column(&rows().map(|row| Some(scale * figure(row))).collect::<Vec<_>>())
    };
    let mut columns = vec![
        Column::right("row", rows().map(|row| row.rank.to_string()).collect()),
        Column::right("other\nchanges", rows().map(|row| row.others.to_string()).collect()),
    ];
    for part in &record.built.parts {
        let change = |row: &ReplacementRecord| row.changes.iter().find(|change| change.slot == part.slot).cloned();
        if rows().any(|row| change(row).is_some()) {
            let cell = |row: &ReplacementRecord| match change(row) {
                None => "=".to_string(),
                Some(ChangeRecord { to, to_buy: 1.., .. }) => format!("{to} !"),
                Some(ChangeRecord { to, id: Some(id), .. }) => format!("{to} {}", super::printable(&id)),
                Some(ChangeRecord { to, .. }) => to,
            };
            columns.push(Column::left(part.slot.clone(), rows().map(cell).collect()));
        }
    }
    columns.push(Column::right(format!("{unit} from\nbuilt"), errors(&|row| row.against_built)));
    columns.push(Column::right(format!("{unit} from\ntarget"), errors(&|row| row.against_target)));
    let names = ["f0", "Q", "gain", "fz"];
    for (index, name) in names.into_iter().enumerate() {
        let moved = |row: &ReplacementRecord| row.moves[index];
        if rows().any(|row| moved(row).is_some_and(|by| by.abs() > 1e-12)) {
            let cells = rows().map(|row| moved(row).map_or("-".to_string(), percent)).collect();
            columns.push(Column::right(name, cells));
        }
    }
    columns
}
