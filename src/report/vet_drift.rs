//! What temperature and age do to a board: its part of the record, and the text.

use std::f64::consts::TAU;

use serde::Serialize;

use super::layout::{Column, grid, paragraph, unbroken};
use super::numbers::{level, short};
use super::vet_table::{of_hundred, rounded};
use crate::analysis::{Built, Climate, Drift, Extremes, FigureDrift, KindDrift};

/// What temperature and age do. Changes are relative to the nominal board.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct DriftRecord {
    /// From the lowest to the highest temperature, K above that at which the nominal values hold.
    pub kelvin: [f64; 2],
    /// How resistors change.
    pub resistors: KindDriftRecord,
    /// How capacitors change.
    pub capacitors: KindDriftRecord,
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
        DriftRecord {
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
        self.resistors.ageing > 0.0 || self.capacitors.ageing > 0.0
    }
}

/// The section of the page.
pub(super) fn drift_table(drift: &DriftRecord, unit: &str, width: usize) -> String {
    let [cold, hot] = drift.kelvin.map(|kelvin| unbroken(&format!("{} °C", short(25.0 + kelvin, 5))));
    let warms = drift.kelvin.iter().any(|kelvin| kelvin.abs() > 0.0);
    let title =
        if warms { format!("Drift, {cold} to {hot}, against 25\u{a0}°C") } else { "Drift by age".to_string() };
    let mut text = paragraph("", &title, width);
    for (name, kind) in [("resistors", drift.resistors), ("capacitors", drift.capacitors)] {
        let mut words = Vec::new();
        if warms {
            let [low, high] = kind.coefficient_ppm.map(|ppm| short(ppm, 5));
            let tracking = short(kind.tracking_ppm, 5);
            words.push(format!("{low} to {high} ppm/K, part numbers at most {tracking} ppm/K apart"));
        }
        if drift.ages() {
            words.push(format!("{} over their life", of_hundred(kind.ageing)));
        }
        text += &paragraph(&format!("   {name}: "), &words.join("; "), width);
    }
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
