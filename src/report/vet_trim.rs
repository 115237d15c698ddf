//! How a board is trimmed: a part of the record, and the text.

use std::f64::consts::TAU;

use serde::Serialize;

use super::layout::{Column, grid, paragraph};
use super::numbers::{level, short};
use crate::analysis::{Built, Selection, Trim, Watch};
use crate::units::{Kind, Value, format_part};

/// One step of a trim.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct TrimRecord {
    /// The section.
    pub section: String,
    /// What is set: `f0`, `Q`, `fz` or `gain`.
    pub figure: &'static str,
    /// The slot that is made adjustable.
    pub slot: String,
    /// Its relative reach to either side that the tolerances of the others require.
    pub reach: f64,
    /// A fixed part and a trimmer in series, Ω.
    pub fixed_ohm: Option<f64>,
    /// The trimmer, Ω.
    pub trimmer_ohm: Option<f64>,
    /// Both in IEC 60062 notation.
    pub pair: Option<[String; 2]>,
    /// In place of both, the values to select from on test; `None` where the shelf does not reach that far.
    pub select: Option<SelectRecord>,
    /// What to look at: `phase`, `magnitude`, or `least` for the frequency of the null.
    pub watch: &'static str,
    /// At which frequency, Hz.
    pub at_hz: f64,
    /// The phase in degrees, or the gain as a plain ratio, that it is to be.
    pub value: Option<f64>,
}

/// Values from which one is selected on test.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct SelectRecord {
    /// How many there are.
    pub count: usize,
    /// The smallest, Ω.
    pub from_ohm: f64,
    /// The largest, Ω.
    pub to_ohm: f64,
    /// By how much the figure can still be off with the best of exact values, relative, to either side.
    pub leaves: f64,
    /// The same where two neighbours are off by the tolerance of the resistors.
    pub leaves_with_tolerance: f64,
    /// The values in IEC 60062 notation, ascending.
    pub values: Vec<String>,
}

impl SelectRecord {
    fn new(selection: &Selection) -> SelectRecord {
        let ohms = |value: Option<&Value>| value.map_or(f64::NAN, |value| value.to_f64());
        SelectRecord {
            count: selection.values.len(),
            from_ohm: ohms(selection.values.first()),
            to_ohm: ohms(selection.values.last()),
            leaves: selection.leaves,
            leaves_with_tolerance: selection.leaves_with_tolerance,
            values: selection.values.iter().map(|value| format_part(*value, Kind::Resistor)).collect(),
        }
    }
}

impl TrimRecord {
    pub(super) fn new(built: &Built, trim: &Trim, select: Option<&Selection>) -> TrimRecord {
        let section = &built.sections[trim.section];
        let (watch, at, value) = match trim.watch {
            Watch::Phase { at, degrees } => ("phase", at, Some(degrees)),
            Watch::Magnitude { at, gain } => ("magnitude", at, Some(gain)),
            Watch::Least { at } => ("least", at, None),
        };
        TrimRecord {
            section: section.target.name.clone(),
            figure: trim.figure,
            slot: section.slot_name(trim.slot).to_string(),
            reach: trim.reach,
            fixed_ohm: trim.pair.map(|(fixed, _)| fixed.to_f64()),
            trimmer_ohm: trim.pair.map(|(_, trimmer)| trimmer.to_f64()),
            pair: trim.pair.map(|(fixed, trimmer)| [fixed, trimmer].map(|value| format_part(value, Kind::Resistor))),
            select: select.map(SelectRecord::new),
            watch,
            at_hz: at / TAU,
            value,
        }
    }
}

/// The section of the page.
pub(super) fn trim_table(trims: &[TrimRecord], width: usize) -> String {
    if trims.is_empty() {
        return paragraph("", "Trim: no resistor of these circuits sets a figure without moving another", width);
    }
    let mut text = paragraph("", "Trim, in this order, from input to output of each section", width);
    text.push('\n');
    let cells = |cell: &dyn Fn(&TrimRecord) -> String| trims.iter().map(cell).collect::<Vec<_>>();
    let watch = |trim: &TrimRecord| {
        let at = level(trim.at_hz, 5, "Hz");
        match (trim.watch, trim.value) {
            ("phase", Some(degrees)) => format!("phase {}° at {at}", short(degrees, 4)),
            (_, Some(gain)) => format!("gain {} at {at}", short(gain, 4)),
            _ => format!("null at {at}"),
        }
    };
    let pair = |trim: &TrimRecord| match &trim.pair {
        Some([fixed, trimmer]) => format!("{fixed} + {trimmer}"),
        None => "-".to_string(),
    };
    let columns = [
        Column::left("set", cells(&|t| format!("{} of {}", t.figure, t.section))),
        Column::left("by", cells(&|t| t.slot.clone())),
        Column::right("reach", cells(&|t| format!("±{:.1} %", 100.0 * t.reach))),
        Column::right("fixed +\ntrimmer", cells(&pair)),
        Column::left("until", cells(&watch)),
    ];
    text += &grid(&columns, 1, width);
    text.push('\n');
    text + &select_table(trims, width)
}

/// What has to be at hand where the resistors are selected on test.
fn select_table(trims: &[TrimRecord], width: usize) -> String {
    let mut text = paragraph("", "Or select on test, in the same order, in place of fixed part and trimmer", width);
    text.push('\n');
    let cells = |cell: &dyn Fn(&SelectRecord) -> String| {
        trims.iter().map(|trim| trim.select.as_ref().map_or("-".to_string(), cell)).collect::<Vec<_>>()
    };
    let all = |cell: &dyn Fn(&TrimRecord) -> String| trims.iter().map(cell).collect::<Vec<_>>();
    let off = |ratio: f64| format!("±{:.2} %", 100.0 * ratio);
    let columns = [
        Column::left("set", all(&|t| format!("{} of {}", t.figure, t.section))),
        Column::left("by", all(&|t| t.slot.clone())),
        Column::right("values", cells(&|s| s.count.to_string())),
        Column::right("from", cells(&|s| s.values.first().cloned().unwrap_or_default())),
        Column::right("to", cells(&|s| s.values.last().cloned().unwrap_or_default())),
        Column::right("leaves", cells(&|s| off(s.leaves))),
        Column::right("with their\ntolerance", cells(&|s| off(s.leaves_with_tolerance))),
    ];
    text += &grid(&columns, 1, width);
    let mut lists = String::new();
    for trim in trims {
        if let Some(select) = &trim.select {
            lists += &paragraph(&format!("   {} {}: ", trim.section, trim.slot), &select.values.join(" "), width);
        }
    }
    if trims.iter().any(|trim| trim.select.is_none()) {
        lists += &paragraph("   ", "- the values do not reach that far: give others with --trim-values", width);
    }
    if !lists.is_empty() {
        text.push('\n');
    }
    text + &lists
}
