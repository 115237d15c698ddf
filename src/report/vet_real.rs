//! What real op-amps and their surroundings do to a board: its part of the record, and the text.

use std::f64::consts::TAU;

use serde::Serialize;

use super::layout::{Column, grid, paragraph, unbroken};
use super::numbers::{level, percent, short};
use super::vet_table::{of_hundred, rounded};
use crate::analysis::{Built, Real, RealConditions, RealEnd, RealSection};
use crate::target::Figures;

/// What real op-amps and their surroundings do.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct RealRecord {
    /// Gain-bandwidth product of the op-amps, Hz; `None` for ideal ones.
    pub bandwidth_hz: Option<f64>,
    /// Output resistance of the op-amps, Ω.
    pub output_resistance_ohm: f64,
    /// Resistance of the source, Ω.
    pub source_resistance_ohm: f64,
    /// Load, Ω.
    pub load_resistance_ohm: Option<f64>,
    /// Stray capacitance from every node to ground, F.
    pub stray_farad: f64,
    /// The relative shift for which the least gain-bandwidth products are given.
    pub shift: f64,
    /// The sections, each by itself.
    pub sections: Vec<RealSectionRecord>,
    /// The error of the whole board against the target, in the unit of the measure; `None` where it is unstable.
    pub error: Option<f64>,
    /// Where it is largest, Hz.
    pub error_at_hz: Option<f64>,
    /// The slew rate that is needed, where an output level is given.
    pub slew: Option<SlewRecord>,
    /// How far the gain-bandwidth product may lie from its nominal value, relative; 0 where no spread is given.
    pub bandwidth_spread: f64,
    /// The board with the least and with the largest gain-bandwidth product; empty without a spread.
    pub ends: Vec<RealEndRecord>,
}

/// The board with op-amps from one end of the spread of their gain-bandwidth product.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct RealEndRecord {
    /// The gain-bandwidth product there, Hz.
    pub bandwidth_hz: f64,
    /// The sections, each by itself, without least bandwidths.
    pub sections: Vec<RealSectionRecord>,
    /// The error of the whole board against the target, in the unit of the measure; `None` where it is unstable.
    pub error: Option<f64>,
    /// Where it is largest, Hz.
    pub error_at_hz: Option<f64>,
}

/// One section.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct RealSectionRecord {
    /// Its name.
    pub name: String,
    /// `stable`, `unstable`, or `unknown` where the poles cannot be found.
    pub state: &'static str,
    /// Pole frequency, Hz, if it is stable.
    pub f0_hz: Option<f64>,
    /// Its relative change against ideal op-amps and surroundings.
    pub f0_shift: Option<f64>,
    /// Pole quality factor.
    pub q: Option<f64>,
    /// Its relative change.
    pub q_shift: Option<f64>,
    /// The least gain-bandwidth product, Hz, for the wanted shift.
    pub least_bandwidth_hz: Option<f64>,
}

/// The slew rate that an output level asks for.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct SlewRecord {
    /// The amplitude at the output, V.
    pub level: f64,
    /// The slew rate, V/s.
    pub rate: f64,
    /// The section whose op-amp needs it.
    pub section: String,
    /// The op-amp.
    pub op_amp: String,
    /// Where, Hz.
    pub at_hz: f64,
}

impl RealRecord {
    pub(super) fn new(built: &Built, conditions: &RealConditions, real: &Real, nominal: &[Figures]) -> RealRecord {
        let around = &conditions.around;
        let sections = |found: &[RealSection]| {
            let all = built.sections.iter().zip(found).zip(nominal);
            all.map(|((section, real), nominal)| RealSectionRecord::new(&section.target.name, real, nominal))
                .collect()
        };
        let end = |end: &RealEnd| RealEndRecord {
            bandwidth_hz: end.bandwidth,
            sections: sections(&end.sections),
            error: end.error.map(|(error, _)| error),
            error_at_hz: end.error.map(|(_, w)| w / TAU),
        };
        RealRecord {
            bandwidth_hz: around.bandwidth,
            output_resistance_ohm: around.output_resistance,
            source_resistance_ohm: around.source_resistance,
            load_resistance_ohm: around.load_resistance,
            stray_farad: around.stray,
            shift: conditions.shift,
            sections: sections(&real.sections),
            error: real.error.map(|(error, _)| error),
            error_at_hz: real.error.map(|(_, w)| w / TAU),
            slew: real.slew.zip(conditions.level).map(|(slew, level)| SlewRecord {
                level,
                rate: slew.rate,
                section: built.sections[slew.section].target.name.clone(),
                op_amp: built.sections[slew.section].circuit.op_amps[slew.op_amp].name.clone(),
                at_hz: slew.at / TAU,
            }),
            bandwidth_spread: conditions.spread,
            ends: real.ends.iter().map(end).collect(),
        }
    }
}

impl RealSectionRecord {
    /// A section with its shifts against the figures of ideal op-amps.
    pub(super) fn new(name: &str, real: &RealSection, nominal: &Figures) -> RealSectionRecord {
        let record = RealSectionRecord {
            name: name.to_string(),
            state: "unstable",
            f0_hz: None,
            f0_shift: None,
            q: None,
            q_shift: None,
            least_bandwidth_hz: None,
        };
        match *real {
            RealSection::Unstable => record,
            RealSection::Unknown => RealSectionRecord { state: "unknown", ..record },
            RealSection::Stable { w0, q, least_bandwidth } => RealSectionRecord {
                state: "stable",
                f0_hz: Some(w0 / TAU),
                f0_shift: Some(w0 / nominal.w0 - 1.0),
                q,
                q_shift: q.zip(nominal.q).map(|(q, ideal)| q / ideal - 1.0),
                least_bandwidth_hz: least_bandwidth,
                ..record
            },
        }
    }
}

/// Op-amps with the spread of their gain-bandwidth product, the resistances of their outputs, of source and load, strays.
pub(super) fn around_in_words((bandwidth, spread): (Option<f64>, f64), ohms: [f64; 3], stray: f64) -> String {
    let mut around = vec![match bandwidth {
        Some(bandwidth) => format!("op-amps of {}", unbroken(&level(bandwidth, 4, "Hz"))),
        None => "ideal op-amps".to_string(),
    }];
    if spread > 0.0 {
        around.push(format!("{} and all alike", unbroken(&format!("±{}", of_hundred(spread)))));
    }
    for (ohms, name) in ohms.into_iter().zip(["output resistance", "source", "load"]).filter(|(ohms, _)| *ohms > 0.0)
    {
        around.push(format!("{name} {}", unbroken(&level(ohms, 4, "Ω"))));
    }
    if stray > 0.0 {
        around.push(format!("{} from every node to ground", unbroken(&level(stray, 4, "F"))));
    }
    around.join(", ")
}

/// The section of the page.
pub(super) fn real_table(real: &RealRecord, unit: &str, width: usize) -> String {
    let ohms = [real.output_resistance_ohm, real.source_resistance_ohm, real.load_resistance_ohm.unwrap_or(0.0)];
    let around = around_in_words((real.bandwidth_hz, 0.0), ohms, real.stray_farad);
    let mut text = paragraph("", &format!("Real network: {around}"), width);
    for section in &real.sections {
        let line = match section.state {
            "unstable" => "unstable: it oscillates. Take faster op-amps, another circuit, or a lower Q.",
            "unknown" => "its poles cannot be found, so nothing is said about it",
            _ => continue,
        };
        text += &paragraph(&format!("   {}: ", section.name), line, width);
    }
    let stable: Vec<&RealSectionRecord> = real.sections.iter().filter(|section| section.state == "stable").collect();
    let cells = |cell: &dyn Fn(&RealSectionRecord) -> String| stable.iter().map(|s| cell(s)).collect::<Vec<_>>();
    if !stable.is_empty() {
        let dash = || "-".to_string();
        let mut columns = vec![
            Column::left("section", cells(&|s| s.name.clone())),
            Column::right("f0", cells(&|s| s.f0_hz.map_or_else(dash, |f| level(f, 6, "Hz")))),
            Column::right("shift", cells(&|s| s.f0_shift.map_or_else(dash, percent))),
            Column::right("Q", cells(&|s| s.q.map_or_else(dash, |q| short(q, 5)))),
            Column::right("shift", cells(&|s| s.q_shift.map_or_else(dash, percent))),
        ];
        if real.bandwidth_hz.is_some() {
            let header = format!("least bandwidth\nfor {}", of_hundred(real.shift));
            let least = |s: &RealSectionRecord| s.least_bandwidth_hz.map_or_else(dash, |f| level(f, 3, "Hz"));
            columns.push(Column::right(header, cells(&least)));
        }
        text.push('\n');
        text += &grid(&columns, 1, width);
    }
    let mut whole = String::new();
    if let (Some(error), Some(at)) = (real.error, real.error_at_hz) {
        let line = format!(
            "error of the whole board against the target {} at {}",
            unbroken(&rounded(unit, error)),
            unbroken(&level(at, 4, "Hz"))
        );
        whole += &paragraph("   ", &line, width);
    }
    if let Some(slew) = &real.slew {
        let line = format!(
            "an amplitude of {} at the output asks for {} of slew rate, at {} of section {} at {}",
            unbroken(&format!("{} V", short(slew.level, 4))),
            unbroken(&format!("{} V/µs", short(slew.rate * 1e-6, 3))),
            slew.op_amp,
            slew.section,
            unbroken(&level(slew.at_hz, 4, "Hz"))
        );
        whole += &paragraph("   ", &line, width);
    }
    if !whole.is_empty() {
        text.push('\n');
    }
    text + &whole + &ends_table(real, unit, width)
}

/// The board at both ends of the spread of the gain-bandwidth product.
fn ends_table(real: &RealRecord, unit: &str, width: usize) -> String {
    if real.ends.is_empty() {
        return String::new();
    }
    let spread = unbroken(&format!("±{}", of_hundred(real.bandwidth_spread)));
    let line = format!("gain-bandwidth product within {spread}, that of all op-amps off alike");
    let mut text = format!("\n{}\n", paragraph("   ", &line, width));
    let rows: Vec<(&RealEndRecord, &RealSectionRecord)> =
        real.ends.iter().flat_map(|end| end.sections.iter().map(move |section| (end, section))).collect();
    let cells = |cell: &dyn Fn(&RealEndRecord, &RealSectionRecord) -> String| {
        rows.iter().map(|(end, section)| cell(end, section)).collect::<Vec<_>>()
    };
    let dash = || "-".to_string();
    let f0 = |s: &RealSectionRecord| s.f0_hz.map_or_else(|| s.state.to_string(), |f| level(f, 6, "Hz"));
    let columns = [
        Column::left("section", cells(&|_, s| s.name.clone())),
        Column::right("GBW", cells(&|end, _| level(end.bandwidth_hz, 4, "Hz"))),
        Column::right("f0", cells(&|_, s| f0(s))),
        Column::right("shift", cells(&|_, s| s.f0_shift.map_or_else(dash, percent))),
        Column::right("Q", cells(&|_, s| s.q.map_or_else(dash, |q| short(q, 5)))),
        Column::right("shift", cells(&|_, s| s.q_shift.map_or_else(dash, percent))),
    ];
    text += &grid(&columns, 1, width);
    let error = |end: &RealEndRecord| {
        let with = unbroken(&format!("with {}", level(end.bandwidth_hz, 4, "Hz")));
        match (end.error, end.error_at_hz) {
            (Some(error), Some(hertz)) => {
                let place = unbroken(&level(hertz, 4, "Hz"));
                format!("{} at {place} {with}", unbroken(&rounded(unit, error)))
            }
            _ => format!("none {with}, for a section is not known to be stable"),
        }
    };
    let errors: Vec<String> = real.ends.iter().map(error).collect();
    let line = format!("error of the whole board against the target: {}", errors.join(", "));
    text + "\n" + &paragraph("   ", &line, width)
}
