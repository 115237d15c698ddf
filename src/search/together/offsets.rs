//! How far sections are off their targets at a few frequencies, as numbers that add up along a cascade.
//!
//! In decibels the error of a cascade is, at each frequency, the sum of what its sections are off; for the vector error the
//! same holds of magnitude and phase. So a few of these frequencies tell early that some sections cannot be made good by any
//! of the others. They are taken from the grid on which the error itself is measured: a sum beyond its bound there proves
//! an error beyond the limit.

use crate::target::{Biquad, Measure, Section, Yardstick, about};

/// How many numbers are kept for a section.
pub(super) const ROWS: usize = 16;

/// What a section, or several together, are off: decibels, then radians for the vector error.
pub(super) type Off = [f32; ROWS];

/// What rounding may add to a row of one section.
const SLACK: f32 = 2e-5;

/// The frequencies and what is compared there.
#[derive(Debug)]
pub(super) struct Offsets {
    /// ω in rad/s and, in dB, how far |H*| lies above the floor there.
    at: Vec<(f64, f64)>,
    /// Whether the phase is compared too.
    phase: bool,
    /// Whether a flat gain is ignored: then magnitudes are compared with that at the first frequency.
    relative: bool,
}

impl Offsets {
    /// Frequencies for a cascade: about its poles and zeros and at the ends of what lies above the floor.
    pub fn new(whole: &Yardstick) -> Offsets {
        let criterion = whole.criterion();
        let phase = criterion.measure == Measure::Vector;
        if matches!(criterion.measure, Measure::Weighted(_)) {
            return Offsets { at: Vec::new(), phase: false, relative: false };
        }
        let above: Vec<(f64, f64)> = (whole.samples().iter())
            .map(|sample| (sample.w, 10.0 * (sample.power / whole.floor_power()).log10()))
            .filter(|(_, above)| *above > 0.0)
            .collect();
        let ends = above.first().zip(above.last()).map(|(first, last)| (first.0, last.0));
        let wanted = ends.map_or(Vec::new(), |ends| wanted(whole.sections(), ends));
        let nearest = |w: &f64| {
            let next = above.partition_point(|(at, _)| at < w);
            let around = [next.checked_sub(1), Some(next)].into_iter().flatten().filter_map(|i| above.get(i));
            around.min_by(|a, b| (a.0 / w).ln().abs().total_cmp(&(b.0 / w).ln().abs())).copied()
        };
        let mut at: Vec<(f64, f64)> = Vec::new();
        for candidate in wanted.iter().filter_map(nearest) {
            let most = if phase { ROWS / 2 } else { ROWS };
            if at.len() < most && !at.iter().any(|known| known.0.total_cmp(&candidate.0).is_eq()) {
                at.push(candidate);
            }
        }
        // The first is what the others are compared with, so it had better be high above the floor.
        at.sort_by(|a, b| b.1.total_cmp(&a.1).then(a.0.total_cmp(&b.0)));
        Offsets { at, phase, relative: criterion.ignore_gain }
    }

    /// What a section is off.
    pub fn of(&self, target: &Biquad, achieved: &Biquad) -> Off {
        let mut off = [0.0; ROWS];
        // A realised null is as far off as any number.
        let decibels = |w: f64| {
            let ratio = achieved.power(w * w) / target.power(w * w);
            (10.0 * ratio.log10()).clamp(-1e4, 1e4)
        };
        let reference = self.at.first().filter(|_| self.relative).map_or(0.0, |(w, _)| decibels(*w));
        for (i, (w, _)) in self.at.iter().enumerate() {
            off[i] = (decibels(*w) - reference) as f32;
            if self.phase {
                off[ROWS / 2 + i] = (achieved.value(*w) / target.value(*w)).arg() as f32;
            }
        }
        off
    }

    /// The largest sum, either way, that a cascade with at most this error can have in each row; infinite where the error
    /// says nothing. `widest` is the sum over the sections of the largest that each can be off.
    pub fn reach(&self, error: f64, sections: usize, widest: &Off) -> Off {
        let mut reach = [f32::INFINITY; ROWS];
        // A vector error of E allows magnitudes from 1 − E to 1 + E and angles up to asin E.
        let decibels = match self.phase {
            true if error < 1.0 => -20.0 * (1.0 - error).log10(),
            true => f64::INFINITY,
            false => error,
        };
        let span = if self.relative { 2.0 * decibels } else { decibels };
        for (i, (_, above)) in self.at.iter().enumerate() {
            // Nearer to the floor than that, one side of the comparison may be cut off by it.
            let compared = self.phase || *above > span;
            if compared && (i > 0 || !self.relative) {
                reach[i] = span as f32 + SLACK * sections as f32;
            }
            // The sum of the angles is one of these or a whole turn away, if it can come that far.
            let row = ROWS / 2 + i;
            if self.phase && error < 1.0 && widest[row] < 1.5 * std::f32::consts::PI - 0.01 {
                reach[row] = error.asin() as f32 + SLACK * sections as f32;
            }
        }
        reach
    }
}

/// Where to compare: the ends, and about each pole pair and zero.
fn wanted(sections: &[Section], (from, to): (f64, f64)) -> Vec<f64> {
    let mut list = vec![from, to];
    let within = |w: &f64| (from..=to).contains(w);
    let mut by_q: Vec<&Section> = sections.iter().collect();
    by_q.sort_by(|a, b| b.q.unwrap_or(0.5).total_cmp(&a.q.unwrap_or(0.5)));
    list.extend(by_q.iter().map(|s| s.w0).filter(within));
    for section in by_q {
        let half = (0.5 / section.q.unwrap_or(0.5)).min(0.5);
        list.extend([section.w0 * (1.0 - half), section.w0 * (1.0 + half)].iter().copied().filter(within));
    }
    list.extend(about((from * to).sqrt(), 0.5, 1.0, (from, to)));
    list
}
