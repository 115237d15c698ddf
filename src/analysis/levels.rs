//! How much a board can carry: where it clips first, and the noise at its output.

use std::f64::consts::TAU;

use super::built::{Built, BuiltSection};
use super::network::{Network, Surroundings};
use crate::target::Yardstick;
use crate::units::Kind;

/// What is assumed for headroom and noise.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LevelConditions {
    /// The op-amps and what surrounds the board.
    pub around: Surroundings,
    /// The largest amplitude at the output of an op-amp, V.
    pub swing: f64,
    /// Voltage noise of each op-amp, V/√Hz, the same at all frequencies.
    pub voltage_noise: f64,
    /// Current noise at each input of each op-amp, A/√Hz, likewise.
    pub current_noise: f64,
}

/// The largest gain from the source to the output of one op-amp.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Peak {
    /// Index of the section.
    pub section: usize,
    /// Index of the op-amp in its circuit.
    pub op_amp: usize,
    /// The gain, a plain ratio.
    pub gain: f64,
    /// Where, rad/s.
    pub at: f64,
}

/// The noise at the output over the band.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Noise {
    /// Of the resistors, V rms.
    pub thermal: f64,
    /// Of the op-amps' voltage noise.
    pub voltage: f64,
    /// Of their current noise.
    pub current: f64,
}

impl Noise {
    /// All of it, V rms.
    pub fn total(&self) -> f64 {
        self.at_level(1.0)
    }

    /// All of it with every resistance times `factor` and every capacitance divided by it: thermal noise grows with its
    /// square root, that of input currents in proportion.
    pub fn at_level(&self, factor: f64) -> f64 {
        (self.thermal.powi(2) * factor + self.voltage.powi(2) + self.current.powi(2) * factor * factor).sqrt()
    }
}

/// What a board can carry.
#[derive(Clone, Debug, PartialEq)]
pub struct Levels {
    /// The op-amps in signal order, over the band.
    pub peaks: Vec<Peak>,
    /// The largest gain to the output of the board, over the band.
    pub output_gain: f64,
    /// The noise at the output of the board, over the band.
    pub noise: Noise,
}

impl Levels {
    /// The op-amp that clips first; `None` for a board without one.
    pub fn first(&self) -> Option<&Peak> {
        self.peaks.iter().reduce(|most, peak| if peak.gain > most.gain { peak } else { most })
    }

    /// The largest amplitude of a sine of any frequency in the band that the source may have, V.
    pub fn largest_input(&self, swing: f64) -> Option<f64> {
        self.first().map(|peak| swing / peak.gain)
    }

    /// The ratio of the largest sine at the output to the noise, dB.
    pub fn dynamic_range(&self, swing: f64) -> Option<f64> {
        let largest = self.largest_input(swing)? * self.output_gain / 2f64.sqrt();
        Some(20.0 * (largest / self.noise.total()).log10())
    }
}

/// Boltzmann's constant, J/K: exact in the SI.
const BOLTZMANN: f64 = 1.380_649e-23;

/// The temperature for thermal noise, K: 25 °C.
const TEMPERATURE: f64 = 298.15;

/// Headroom and noise of a board over the band; `None` where its network cannot be solved.
///
/// Gains are those of the whole chain from the source. Noise sources are independent: 4 k T/R of each resistor and of the
/// source's resistance, and those of the op-amps; their densities at the output are summed, and integrated over the band by
/// trapezoids.
pub fn levels(built: &Built, conditions: &LevelConditions, yardstick: &Yardstick) -> Option<Levels> {
    let chain: Vec<&BuiltSection> = built.sections.iter().collect();
    let network = Network::new(&chain, &conditions.around);
    let op_amps = built.sections.iter().enumerate();
    let names: Vec<(usize, usize)> =
        op_amps.flat_map(|(k, section)| (0..section.circuit.op_amps.len()).map(move |amp| (k, amp))).collect();
    let mut peaks: Vec<Peak> =
        names.into_iter().map(|(section, op_amp)| Peak { section, op_amp, gain: 0.0, at: f64::NAN }).collect();
    let mut output_gain = 0.0f64;
    let mut squares = [0.0; 3];
    let mut before: Option<(f64, [f64; 3])> = None;
    for w in yardstick.frequencies() {
        let (h, nodes) = network.response(w)?;
        output_gain = output_gain.max(h.norm());
        for (peak, node) in peaks.iter_mut().zip(&nodes) {
            if node.norm() > peak.gain {
                (peak.gain, peak.at) = (node.norm(), w);
            }
        }
        let density = densities(&network, built, conditions, w)?;
        if let Some((last, densities)) = before {
            let step = (w - last) / TAU;
            for (square, (a, b)) in squares.iter_mut().zip(densities.iter().zip(&density)) {
                *square += 0.5 * (a + b) * step;
            }
        }
        before = Some((w, density));
    }
    for (place, peak) in peaks.iter_mut().enumerate() {
        (peak.gain, peak.at) = refined(yardstick, peak.at, |w| Some(network.response(w)?.1[place].norm()))?;
    }
    let [thermal, voltage, current] = squares.map(f64::sqrt);
    Some(Levels { peaks, output_gain, noise: Noise { thermal, voltage, current } })
}

/// The largest value between the neighbours of the frequency at which the largest of the measure's frequencies lies, and where.
fn refined(yardstick: &Yardstick, at: f64, value: impl Fn(f64) -> Option<f64>) -> Option<(f64, f64)> {
    let below = yardstick.frequencies().filter(|w| *w < at).last().unwrap_or(at);
    let above = yardstick.frequencies().find(|w| *w > at).unwrap_or(at);
    let (mut low, mut high) = (below.ln(), above.ln());
    // Thirds: a peak is smooth, so that this leaves far less than a millionth of its height.
    for _ in 0..40 {
        let third = (high - low) / 3.0;
        let (left, right) = (low + third, high - third);
        if value(left.exp())? < value(right.exp())? { low = left } else { high = right }
    }
    let middle = (0.5 * (low + high)).exp().clamp(below, above);
    let (coarse, fine) = (value(at)?, value(middle)?);
    Some(if fine > coarse { (fine, middle) } else { (coarse, at) })
}

/// The densities of thermal, voltage and current noise at the output, V²/Hz.
fn densities(network: &Network, built: &Built, conditions: &LevelConditions, w: f64) -> Option<[f64; 3]> {
    let reach = network.reach(w)?;
    let thermal = |ohms: f64, gain: f64| 4.0 * BOLTZMANN * TEMPERATURE / ohms * gain;
    let mut sums = [0.0; 3];
    let around = &conditions.around;
    if around.source_resistance > 0.0 {
        sums[0] += thermal(around.source_resistance, reach.from_current(Some(0), Some(1)));
    }
    let resistors = built.sections.iter().enumerate().flat_map(|(k, section)| {
        let list = section.parts.iter().filter(|part| part.kind == Kind::Resistor);
        list.map(move |part| (k, section.circuit.slots[part.slot].nodes, part.value.to_f64()))
    });
    for (section, [a, b], ohms) in resistors {
        sums[0] += thermal(ohms, reach.from_current(network.place(section, a), network.place(section, b)));
    }
    if let Some(load) = around.load_resistance {
        sums[0] += thermal(load, reach.from_current(network.output_place(), None));
    }
    let mut number = 0;
    for (k, section) in built.sections.iter().enumerate() {
        for op_amp in &section.circuit.op_amps {
            sums[1] += conditions.voltage_noise.powi(2) * reach.from_input(number);
            for node in [op_amp.plus, op_amp.minus] {
                let gain = reach.from_current(network.place(k, node), None);
                sums[2] += conditions.current_noise.powi(2) * gain;
            }
            number += 1;
        }
    }
    Some(sums)
}
