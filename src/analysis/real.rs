//! What real op-amps and their surroundings do to a board.

use std::f64::consts::TAU;

use num_complex::Complex64;

use super::built::{Built, BuiltSection, Formula};
use super::network::{Network, Surroundings};
use crate::target::{Measure, Yardstick};

/// What a section becomes.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum RealSection {
    /// It works.
    Stable {
        /// Pole frequency, rad/s.
        w0: f64,
        /// Pole quality factor; `None` for first order.
        q: Option<f64>,
        /// The least gain-bandwidth product, Hz, with which f0 and Q move by no more than what is wanted because of the
        /// op-amps alone; `None` without op-amps of finite bandwidth, or where none up to a million times f0 is known to do.
        least_bandwidth: Option<f64>,
    },
    /// A pole lies in the right half plane, or on its edge: it oscillates.
    Unstable,
    /// Its poles cannot be found.
    Unknown,
}

/// What a board becomes.
#[derive(Clone, Debug, PartialEq)]
pub struct Real {
    /// The sections, each by itself: the first with the source's resistance, the last with the load.
    pub sections: Vec<RealSection>,
    /// The error of the whole board against the target, in the unit of the measure, and where, rad/s; `None` where a section
    /// is not known to be stable.
    pub error: Option<(f64, f64)>,
    /// The slew rate that the wanted output level asks for.
    pub slew: Option<Slew>,
    /// The board with the least and with the largest gain-bandwidth product, where it has a spread.
    pub ends: Vec<RealEnd>,
}

/// What a board becomes with op-amps from one end of the spread of their gain-bandwidth product: all of them from that end.
#[derive(Clone, Debug, PartialEq)]
pub struct RealEnd {
    /// The gain-bandwidth product there, Hz.
    pub bandwidth: f64,
    /// The sections, without their least bandwidths.
    pub sections: Vec<RealSection>,
    /// As [`Real::error`].
    pub error: Option<(f64, f64)>,
}

/// The steepest that an op-amp's output has to move.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Slew {
    /// The slew rate, V/s.
    pub rate: f64,
    /// Index of the section.
    pub section: usize,
    /// Index of the op-amp in its circuit.
    pub op_amp: usize,
    /// Where it is steepest, rad/s.
    pub at: f64,
}

/// What is asked about real op-amps.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct RealConditions {
    /// The op-amps and what surrounds the board.
    pub around: Surroundings,
    /// The largest relative shift of f0 and Q that is wanted because of the op-amps' bandwidth.
    pub shift: f64,
    /// The largest amplitude of a sine at the output, V, where a slew rate is asked for.
    pub level: Option<f64>,
    /// How far the gain-bandwidth product may lie from its nominal value, relative, 0 to below 1; 0 for not at all.
    pub spread: f64,
}

/// The surroundings with the least and with the largest gain-bandwidth product; none without a spread.
pub(super) fn both_ends(around: &Surroundings, spread: f64) -> Vec<Surroundings> {
    let bandwidth = around.bandwidth.filter(|_| spread > 0.0);
    let end = |bandwidth: f64, factor: f64| Surroundings { bandwidth: Some(bandwidth * factor), ..*around };
    bandwidth.map_or(Vec::new(), |b| [1.0 - spread, 1.0 + spread].map(|factor| end(b, factor)).to_vec())
}

/// What a board becomes with such op-amps and surroundings.
///
/// Poles are the zeros of the determinant of the whole network, followed from their ideal places. The response is a nodal
/// solve of the whole board at each frequency of the measure. Strays lie at every node but the input; a flat gain that the
/// measure ignores is not taken out here.
pub fn real(built: &Built, conditions: &RealConditions, yardstick: &Yardstick) -> Real {
    let around = &conditions.around;
    let mut sections = each_section(built, around);
    for (k, section) in sections.iter_mut().enumerate() {
        if let RealSection::Stable { least_bandwidth: least, .. } = section {
            let own = own_surroundings(around, k, built.sections.len());
            *least = around.bandwidth.and_then(|_| least_bandwidth(&built.sections[k], &own, conditions.shift));
        }
    }
    let ends = real_ends(built, around, conditions.spread, yardstick);
    let slew = conditions.level.filter(|_| are_stable(&sections)).and_then(|level| {
        let chain: Vec<&BuiltSection> = built.sections.iter().collect();
        slew(built, &Network::new(&chain, around), yardstick, level)
    });
    let error = whole_error(built, around, &sections, yardstick);
    Real { sections, error, slew, ends }
}

/// The board at both ends of the spread.
pub(super) fn real_ends(built: &Built, around: &Surroundings, spread: f64, yardstick: &Yardstick) -> Vec<RealEnd> {
    let end = |around: &Surroundings| {
        let sections = each_section(built, around);
        let error = whole_error(built, around, &sections, yardstick);
        around.bandwidth.map(|bandwidth| RealEnd { bandwidth, sections, error })
    };
    both_ends(around, spread).iter().filter_map(end).collect()
}

/// What surrounds one section: the first has the source's resistance, the last the load.
pub(super) fn own_surroundings(around: &Surroundings, index: usize, count: usize) -> Surroundings {
    let is_last = index + 1 == count;
    Surroundings {
        source_resistance: if index == 0 { around.source_resistance } else { 0.0 },
        load_resistance: around.load_resistance.filter(|_| is_last),
        ..*around
    }
}

/// The poles of each section, without least bandwidths.
pub(super) fn each_section(built: &Built, around: &Surroundings) -> Vec<RealSection> {
    let section = |(k, section)| real_section(section, &own_surroundings(around, k, built.sections.len()));
    built.sections.iter().enumerate().map(section).collect()
}

fn are_stable(sections: &[RealSection]) -> bool {
    sections.iter().all(|section| matches!(section, RealSection::Stable { .. }))
}

/// The error of the whole board and where, rad/s; `None` where a section is not known to be stable.
pub(super) fn whole_error(
    built: &Built,
    around: &Surroundings,
    sections: &[RealSection],
    yardstick: &Yardstick,
) -> Option<(f64, f64)> {
    let chain: Vec<&BuiltSection> = built.sections.iter().collect();
    if are_stable(sections) { error(&Network::new(&chain, around), yardstick) } else { None }
}

/// The slew rate for a sine of the amplitude `level` at that frequency of the band where the board passes most: the input
/// that gives it, at every frequency of the band, moves the op-amps at most so fast.
fn slew(built: &Built, network: &Network, yardstick: &Yardstick, level: f64) -> Option<Slew> {
    let responses: Vec<_> =
        yardstick.frequencies().map(|w| Some((w, network.response(w)?))).collect::<Option<_>>()?;
    let largest = responses.iter().map(|(_, (h, _))| h.norm()).fold(0.0, f64::max);
    let op_amps = built.sections.iter().enumerate();
    let names: Vec<(usize, usize)> =
        op_amps.flat_map(|(k, section)| (0..section.circuit.op_amps.len()).map(move |amp| (k, amp))).collect();
    let mut most: Option<Slew> = None;
    for (w, (_, nodes)) in &responses {
        for ((section, op_amp), node) in names.iter().zip(nodes) {
            let rate = w * node.norm() * level / largest;
            if rate.is_finite() && most.is_none_or(|most| rate > most.rate) {
                most = Some(Slew { rate, section: *section, op_amp: *op_amp, at: *w });
            }
        }
    }
    most
}

/// The pole frequency and Q of one section in its surroundings, without a least bandwidth.
pub(super) fn real_section(section: &BuiltSection, around: &Surroundings) -> RealSection {
    match figures(section, around) {
        Poles::Stable(w0, q) => RealSection::Stable { w0, q, least_bandwidth: None },
        Poles::Unstable => RealSection::Unstable,
        Poles::Unknown => RealSection::Unknown,
    }
}

enum Poles {
    Stable(f64, Option<f64>),
    Unstable,
    Unknown,
}

/// The section's own poles, followed from their ideal places, and whether all poles are stable.
fn figures(section: &BuiltSection, around: &Surroundings) -> Poles {
    let network = Network::new(&[section], around);
    let w0 = section.target.w0;
    let Some(all) = network.poles(w0) else { return Poles::Unknown };
    // A pole on the axis, as far as it can be told, is none that a filter can have.
    if all.iter().any(|pole| pole.re > -1e-9 * pole.norm()) {
        return Poles::Unstable;
    }
    let Some(own) = own_poles(section, around) else { return Poles::Unknown };
    // What was followed must be among all: otherwise it was lost on the way.
    let known = |pole: &Complex64| all.iter().any(|other| (other - pole).norm() < 1e-6 * pole.norm());
    match own.as_slice() {
        list if !list.iter().all(known) => Poles::Unknown,
        [pole] => Poles::Stable(-pole.re, None),
        [a, b] => {
            let w0 = (a * b).re.sqrt();
            Poles::Stable(w0, Some(-w0 / (a + b).re))
        }
        _ => Poles::Unknown,
    }
}

/// Where the poles of the ideal section have gone.
fn own_poles(section: &BuiltSection, around: &Surroundings) -> Option<Vec<Complex64>> {
    let den = Formula::of(section).biquad(&section.admittances()).den;
    let mut poles = if section.target.shape.order() == 1 {
        vec![Complex64::from(-den[0] / den[1])]
    } else {
        let half = Complex64::from(-0.5 * den[1] / den[2]);
        let root = (half * half - den[0] / den[2]).sqrt();
        vec![half + root, half - root]
    };
    // Small steps at first, where the poles move in proportion.
    const STEPS: i32 = 24;
    for k in 1..=STEPS {
        let share = 10f64.powf(-4.0 * f64::from(STEPS - k) / f64::from(STEPS));
        poles = Network::new(&[section], &around.in_part(share)).follow(&poles)?;
    }
    Some(poles)
}

/// How far above f0 a bandwidth is looked for, as a factor: beyond it an op-amp is as good as ideal.
const HIGHEST: f64 = 1e6;

/// The least bandwidth with which neither f0 nor Q moves by more than `shift` against ideal op-amps in the same surroundings.
fn least_bandwidth(section: &BuiltSection, around: &Surroundings, shift: f64) -> Option<f64> {
    let with = |bandwidth| Surroundings { bandwidth, ..*around };
    let Poles::Stable(w0, q) = figures(section, &with(None)) else { return None };
    // Poles that cannot be found say nothing: then there is no answer, rather than a wrong one.
    let good = |bandwidth: f64| match figures(section, &with(Some(bandwidth))) {
        Poles::Stable(found, quality) => {
            let of_q = quality.zip(q).map_or(0.0, |(found, ideal)| (found / ideal - 1.0).abs());
            Some((found / w0 - 1.0).abs().max(of_q) <= shift)
        }
        Poles::Unstable => Some(false),
        Poles::Unknown => None,
    };
    let mut high = HIGHEST * w0 / TAU;
    if !good(high)? {
        return None;
    }
    // Downwards to the first that is too little, so that what is found holds for everything above it.
    let mut low = high / 4.0;
    while low > w0 / TAU && good(low)? {
        (high, low) = (low, low / 4.0);
    }
    for _ in 0..20 {
        let middle = (low * high).sqrt();
        if good(middle)? { high = middle } else { low = middle }
    }
    Some(high)
}

fn error(network: &Network, yardstick: &Yardstick) -> Option<(f64, f64)> {
    let floor = yardstick.floor_power().sqrt();
    let vector = matches!(yardstick.criterion().measure, Measure::Vector);
    let mut most = (0.0, yardstick.band().0);
    for sample in yardstick.samples() {
        let (h, _) = network.response(sample.w)?;
        let ideal: Complex64 = yardstick.sections().iter().map(|section| section.ideal().value(sample.w)).product();
        let error = if vector {
            (h - ideal).norm() / ideal.norm().max(floor)
        } else {
            20.0 * (h.norm().max(floor) / ideal.norm().max(floor)).log10().abs()
        };
        if error.is_nan() {
            return None;
        }
        if error > most.0 {
            most = (error, sample.w);
        }
    }
    Some(most)
}
