//! What temperature and age do to a board: its part of the record, and the text.

use std::f64::consts::TAU;

use serde::Serialize;

use super::layout::{Column, grid, paragraph, unbroken};
use super::numbers::{level, short};
use super::vet_table::{of_hundred, rounded};
use crate::analysis::{Built, Climate, Drift, Extremes, FigureDrift, KindDrift};
use crate::units::{Kind, format_part};

/// What temperature and age do. Changes are relative to the nominal board.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct DriftRecord {
    /// From the lowest to the highest temperature, K above that at which the nominal values hold.
    pub kelvin: [f64; 2],
    /// How resistors change.
    pub resistors: KindDriftRecord,
    /// How capacitors change.
    pub capacitors: KindDriftRecord,
    /// The parts of which the stock list says how they change.
    pub parts: Vec<PartDriftRecord>,
    /// The figures of the sections.
    pub figures: Vec<FigureDriftRecord>,
    /// The largest change of the response by temperature alone, in the unit of the measure.
    pub response_by_temperature: f64,
    /// Where that is, Hz.
    pub response_by_temperature_at_hz: f64,
    /// The largest change by temperature and age.
    pub response_with_age: f64,
    /// Where that is, Hz.
    pub response_with_age_at_hz: f64,
}

/// How the parts of one kind change.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct KindDriftRecord {
    /// The range of temperature coefficients, ppm/K.
    pub coefficient_ppm: [f64; 2],
    /// How far those of two part numbers can be apart, ppm/K.
    pub tracking_ppm: f64,
    /// By how much a part can be off at the end of its life, relative.
    pub ageing: f64,
}

/// What the stock list says of one part.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct PartDriftRecord {
    /// The section.
    pub section: String,
    /// The slot.
    pub slot: String,
    /// Resistor or capacitor.
    pub kind: Kind,
    /// The value on its label, in IEC 60062 notation, where the slot holds a pair.
    pub notation: Option<String>,
    /// The range of temperature coefficients, ppm/K.
    pub coefficient_ppm: Option<[f64; 2]>,
    /// By how much it can be off at the end of its life, relative.
    pub ageing: Option<f64>,
}

/// How one figure moves.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct FigureDriftRecord {
    /// The section.
    pub section: String,
    /// `f0`, `q`, `gain` or `fz`.
    pub figure: &'static str,
    /// Lowest and highest relative change by temperature alone.
    pub by_temperature: [f64; 2],
    /// Lowest and highest relative change by temperature and age.
    pub with_age: [f64; 2],
}

impl KindDriftRecord {
    fn new(drift: &KindDrift) -> KindDriftRecord {
        // Coefficients are given to a thousandth of a ppm/K.
        let ppm = |x: f64| (x * 1e9).round() / 1e3;
        let tracking = drift.tracking.min(drift.high - drift.low);
        KindDriftRecord {
            coefficient_ppm: [ppm(drift.low), ppm(drift.high)],
            tracking_ppm: ppm(tracking),
            ageing: drift.ageing,
        }
    }
}

impl DriftRecord {
    pub(super) fn new(built: &Built, climate: &Climate, drift: &Drift) -> DriftRecord {
        let mut figures = Vec::new();
        for (section, drift) in built.sections.iter().zip(&drift.sections) {
            let all = [("f0", Some(drift.f0)), ("q", drift.q), ("gain", Some(drift.gain)), ("fz", drift.fz)];
            figures.extend(all.into_iter().filter_map(|(figure, drift)| {
                let FigureDrift { temperature, with_age } = drift?;
                let both = |Extremes { low, high }| [low, high];
                let section = section.target.name.clone();
                Some(FigureDriftRecord {
                    section,
                    figure,
                    by_temperature: both(temperature),
                    with_age: both(with_age),
                })
            }));
        }
        // Coefficients are given to a thousandth of a ppm/K.
        let ppm = |x: f64| (x * 1e9).round() / 1e3;
        let mut parts = Vec::new();
        for (section, part) in built.sections.iter().flat_map(|s| s.parts.iter().map(move |part| (s, part))) {
            let said = part.pieces.iter().filter(|piece| piece.coefficient.is_some() || piece.ageing.is_some());
            parts.extend(said.map(|piece| PartDriftRecord {
                section: section.target.name.clone(),
                slot: section.slot_name(part.slot).to_string(),
                kind: part.kind,
                notation: (part.pieces.len() > 1).then(|| format_part(piece.label, part.kind)),
                coefficient_ppm: piece.coefficient.map(|(low, high)| [ppm(low), ppm(high)]),
                ageing: piece.ageing,
            }));
        }
        DriftRecord {
            parts,
            kelvin: [climate.coldest, climate.hottest],
            resistors: KindDriftRecord::new(&climate.resistors),
            capacitors: KindDriftRecord::new(&climate.capacitors),
            figures,
            response_by_temperature: drift.temperature.0,
            response_by_temperature_at_hz: drift.temperature.1 / TAU,
            response_with_age: drift.with_age.0,
            response_with_age_at_hz: drift.with_age.1 / TAU,
        }
    }

    fn ages(&self) -> bool {
        let of_parts = || self.parts.iter().any(|part| part.ageing.is_some_and(|ageing| ageing > 0.0));
        self.resistors.ageing > 0.0 || self.capacitors.ageing > 0.0 || of_parts()
    }
}

/// What the stock list says of single parts: those alike on one line.
fn said_of_parts(drift: &DriftRecord, warms: bool, width: usize) -> String {
    let mut lines: Vec<(String, Vec<String>)> = Vec::new();
    for part in &drift.parts {
        let coefficient = part.coefficient_ppm.filter(|_| warms).map(|range| {
            let [low, high] = range.map(|ppm| short(ppm, 5));
            if low == high { format!("{low} ppm/K") } else { format!("{low} to {high} ppm/K") }
        });
        let ageing = part.ageing.map(|ageing| format!("{} over their life", of_hundred(ageing)));
        let words: Vec<String> = coefficient.into_iter().chain(ageing).collect();
        if words.is_empty() {
            continue;
        }
        let words = words.join("; ");
        let of_pair = part.notation.as_ref().map_or(String::new(), |notation| format!(" {notation}"));
        let name = unbroken(&format!("{} {}{of_pair}", part.section, part.slot));
        match lines.iter_mut().find(|(known, _)| *known == words) {
            Some((_, names)) => names.push(name),
            None => lines.push((words, vec![name])),
        }
    }
    let line = |(words, names): (String, Vec<String>)| {
        paragraph("   ", &format!("{words} by the stock list: {}", names.join(", ")), width)
    };
    lines.into_iter().map(line).collect()
}

/// The section of the page.
pub(super) fn drift_table(drift: &DriftRecord, unit: &str, width: usize) -> String {
    let [cold, hot] = drift.kelvin.map(|kelvin| unbroken(&format!("{} °C", short(25.0 + kelvin, 5))));
    let warms = drift.kelvin.iter().any(|kelvin| kelvin.abs() > 0.0);
    let title =
        if warms { format!("Drift, {cold} to {hot}, against 25\u{a0}°C") } else { "Drift by age".to_string() };
    let mut text = paragraph("", &title, width);
    let kinds = [("resistors", drift.resistors, Kind::Resistor), ("capacitors", drift.capacitors, Kind::Capacitor)];
    for (name, kind, of) in kinds {
        let mut words = Vec::new();
        if warms {
            let [low, high] = kind.coefficient_ppm.map(|ppm| short(ppm, 5));
            let tracking = short(kind.tracking_ppm, 5);
            words.push(format!("{low} to {high} ppm/K, part numbers at most {tracking} ppm/K apart"));
        }
        if drift.ages() {
            words.push(format!("{} over their life", of_hundred(kind.ageing)));
        }
        let other = if drift.parts.iter().any(|part| part.kind == of) { "other " } else { "" };
        text += &paragraph(&format!("   {other}{name}: "), &words.join("; "), width);
    }
    text += &said_of_parts(drift, warms, width);
    text.push('\n');
    let percent = |ratio: f64| match format!("{:+.3} %", 100.0 * ratio) {
        zero if zero == "+0.000 %" || zero == "-0.000 %" => "0 %".to_string(),
        shown => shown,
    };
    let cells = |cell: &dyn Fn(&FigureDriftRecord) -> String| drift.figures.iter().map(cell).collect::<Vec<_>>();
    let name = |f: &FigureDriftRecord| format!("{} {}", f.section, if f.figure == "q" { "Q" } else { f.figure });
    let mut columns = vec![Column::left("figure", cells(&name))];
    if warms {
        columns.push(Column::right("temperature\nfrom", cells(&|f| percent(f.by_temperature[0]))));
        columns.push(Column::right("\nto", cells(&|f| percent(f.by_temperature[1]))));
    }
    if drift.ages() {
        columns.push(Column::right("with age\nfrom", cells(&|f| percent(f.with_age[0]))));
        columns.push(Column::right("\nto", cells(&|f| percent(f.with_age[1]))));
    }
    text += &grid(&columns, 1, width);
    text.push('\n');
    let at = |hertz: f64| unbroken(&level(hertz, 4, "Hz"));
    let change = |value: f64, hertz: f64| format!("{} at {}", unbroken(&rounded(unit, value)), at(hertz));
    let by_temperature = change(drift.response_by_temperature, drift.response_by_temperature_at_hz);
    let with_age = change(drift.response_with_age, drift.response_with_age_at_hz);
    let line = match (warms, drift.ages()) {
        (true, true) => {
            format!("the response moves by at most {by_temperature} by temperature, and by {with_age} with age")
        }
        (true, false) => format!("the response moves by at most {by_temperature}"),
        (false, _) => format!("the response moves by at most {with_age}"),
    };
    text + &paragraph("   ", &line, width)
}
