//! What a board can carry: headroom and noise as a part of the record, and the text.

use std::f64::consts::TAU;

use serde::Serialize;

use super::layout::{Column, grid, paragraph, unbroken};
use super::numbers::{level, short};
use crate::analysis::{Built, LevelConditions, Levels};

/// Headroom and noise over the band.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct LevelsRecord {
    /// The largest amplitude at the output of an op-amp, V.
    pub swing: f64,
    /// Voltage noise of each op-amp, V/√Hz.
    pub voltage_noise: f64,
    /// Current noise at each input, A/√Hz.
    pub current_noise: f64,
    /// The op-amps in signal order.
    pub op_amps: Vec<PeakRecord>,
    /// The section whose op-amp clips first.
    pub clips_first_section: Option<String>,
    /// That op-amp.
    pub clips_first_op_amp: Option<String>,
    /// The largest amplitude that the source may have, V.
    pub largest_input: Option<f64>,
    /// The noise at the output, V rms.
    pub noise: f64,
    /// Of it that of the resistors.
    pub thermal: f64,
    /// That of the op-amps' voltage noise.
    pub from_voltage_noise: f64,
    /// That of their current noise.
    pub from_current_noise: f64,
    /// The noise with half of every resistance and twice every capacitance, V rms; `None` where source, load, strays or
    /// output resistances do not change alike.
    pub noise_at_half: Option<f64>,
    /// The noise with twice every resistance and half of every capacitance.
    pub noise_at_double: Option<f64>,
    /// Largest sine to noise at the output, dB.
    pub dynamic_range_db: Option<f64>,
}

/// The largest gain from the source to the output of an op-amp.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct PeakRecord {
    /// The section.
    pub section: String,
    /// The op-amp.
    pub op_amp: String,
    /// The gain, a plain ratio.
    pub gain: f64,
    /// Where, Hz.
    pub at_hz: f64,
}

impl LevelsRecord {
    pub(super) fn new(built: &Built, conditions: &LevelConditions, levels: &Levels) -> LevelsRecord {
        let names = |section: usize, op_amp: usize| {
            let section = &built.sections[section];
            (section.target.name.clone(), section.circuit.op_amps[op_amp].name.clone())
        };
        let peak = |peak: &crate::analysis::Peak| {
            let (section, op_amp) = names(peak.section, peak.op_amp);
            PeakRecord { section, op_amp, gain: peak.gain, at_hz: peak.at / TAU }
        };
        let first = levels.first().map(|first| names(first.section, first.op_amp));
        let (clips_first_section, clips_first_op_amp) = first.unzip();
        let around = &conditions.around;
        let alone = around.source_resistance + around.output_resistance + around.stray <= 0.0;
        let scales = alone && around.load_resistance.is_none();
        let noise = &levels.noise;
        LevelsRecord {
            swing: conditions.swing,
            voltage_noise: conditions.voltage_noise,
            current_noise: conditions.current_noise,
            op_amps: levels.peaks.iter().map(peak).collect(),
            clips_first_section,
            clips_first_op_amp,
            largest_input: levels.largest_input(conditions.swing),
            noise: noise.total(),
            thermal: noise.thermal,
            from_voltage_noise: noise.voltage,
            from_current_noise: noise.current,
            noise_at_half: scales.then(|| noise.at_level(0.5)),
            noise_at_double: scales.then(|| noise.at_level(2.0)),
            dynamic_range_db: levels.dynamic_range(conditions.swing),
        }
    }
}

/// The section of the page.
pub(super) fn levels_table(levels: &LevelsRecord, band: [f64; 2], width: usize) -> String {
    let [low, high] = band.map(|hertz| unbroken(&level(hertz, 4, "Hz")));
    let mut text = paragraph("", &format!("Headroom and noise, {low} to {high}"), width);
    text.push('\n');
    let cells = |cell: &dyn Fn(&PeakRecord) -> String| levels.op_amps.iter().map(cell).collect::<Vec<_>>();
    let columns = [
        Column::left("op-amp", cells(&|p| format!("{} of {}", p.op_amp, p.section))),
        Column::right("largest gain\nfrom source", cells(&|p| short(p.gain, 4))),
        Column::right("dB", cells(&|p| format!("{:+.2}", 20.0 * p.gain.log10()))),
        Column::right("at", cells(&|p| level(p.at_hz, 4, "Hz"))),
    ];
    text += &grid(&columns, 1, width);
    text.push('\n');
    let volts = |volts: f64| unbroken(&level(volts, 3, "V"));
    if let (Some(op_amp), Some(section), Some(input)) =
        (&levels.clips_first_op_amp, &levels.clips_first_section, levels.largest_input)
    {
        let line = format!(
            "{op_amp} of section {section} clips first: with an amplitude of {} at the op-amps the source may have {}",
            volts(levels.swing),
            volts(input)
        );
        text += &paragraph("   ", &line, width);
    }
    let of_op_amps = levels.from_voltage_noise + levels.from_current_noise > 0.0;
    let parts = if of_op_amps {
        format!(
            "resistors {}, voltage noise of the op-amps {}, current noise {}",
            volts(levels.thermal),
            volts(levels.from_voltage_noise),
            volts(levels.from_current_noise)
        )
    } else {
        "of the resistors alone".to_string()
    };
    text += &paragraph("   ", &format!("noise at the output {} rms, {parts}", volts(levels.noise)), width);
    if let Some(range) = levels.dynamic_range_db {
        text += &paragraph("   ", &format!("dynamic range {}", unbroken(&format!("{range:.1} dB"))), width);
    }
    if let (Some(half), Some(double)) = (levels.noise_at_half, levels.noise_at_double) {
        let line = format!(
            "with half of every resistance and twice every capacitance {}, the other way round {}",
            volts(half),
            volts(double)
        );
        text += &paragraph("   ", &line, width);
    }
    text
}
