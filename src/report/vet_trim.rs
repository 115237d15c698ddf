//! How a board is trimmed: a part of the record, and the text.

use std::f64::consts::TAU;

use serde::Serialize;

use super::layout::{Column, grid, paragraph};
use super::numbers::{level, short};
use crate::analysis::{Built, Trim, Watch};
use crate::units::{Kind, format_part};

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
    /// What to look at: `phase`, `magnitude`, or `least` for the frequency of the null.
    pub watch: &'static str,
    /// At which frequency, Hz.
    pub at_hz: f64,
    /// The phase in degrees, or the gain as a plain ratio, that it is to be.
    pub value: Option<f64>,
}

impl TrimRecord {
    pub(super) fn new(built: &Built, trim: &Trim) -> TrimRecord {
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
    text + &grid(&columns, 1, width)
}
