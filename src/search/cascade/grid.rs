//! The frequencies at which a cascade is looked at.

use crate::target::{Band, Parts, Zeros};

use super::Level;

/// Frequencies at which levels are compared, rad/s, rising, and which of them lie in the pass band.
#[derive(Clone, Debug)]
pub(super) struct Grid {
    pub frequencies: Vec<f64>,
    pub in_pass_band: Vec<bool>,
}

/// Steps to the decade of the grid.
const STEPS: f64 = 60.0;

/// Frequencies from well below to well above all poles and zeros, and closely about each pole.
pub(super) fn grid(parts: &Parts, band: Band, pass_end: f64) -> Grid {
    const WIDER: f64 = 30.0;
    let poles = || parts.poles.iter().chain(parts.first_order.iter().map(|(poles, _)| poles));
    let zeros = parts.zeros.iter().filter_map(|zeros| match zeros {
        Zeros::Pair(wz) => Some(*wz),
        _ => None,
    });
    let all: Vec<f64> = poles().map(|p| p.w0).chain(zeros).collect();
    let low = all.iter().copied().fold(f64::INFINITY, f64::min) / WIDER;
    let high = all.iter().copied().fold(0.0, f64::max) * WIDER;
    let count = ((high / low).log10() * STEPS).ceil();
    let mut frequencies: Vec<f64> = (0..=count as usize).map(|k| low * (high / low).powf(k as f64 / count)).collect();
    for pole in poles() {
        let half = 0.5 / pole.q.unwrap_or(0.5).max(0.5);
        frequencies.extend((-20..=20).map(|k| pole.w0 * (1.0 + half * f64::from(k) / 4.0)).filter(|w| *w > low));
    }
    // Far out, where levels only settle.
    frequencies.extend((1..=8).flat_map(|k| {
        let factor = 10f64.powf(f64::from(k) / 2.0);
        [low / factor, high * factor]
    }));
    frequencies.extend(band.from_prototype(pass_end));
    frequencies.sort_by(f64::total_cmp);
    frequencies.dedup_by(|a, b| (*a / *b - 1.0).abs() < 1e-12);
    let in_pass_band = frequencies.iter().map(|&w| band.to_prototype(w) <= pass_end * (1.0 + 1e-9)).collect();
    Grid { frequencies, in_pass_band }
}

/// The largest value of a smooth magnitude: the best of the grid, then golden section about it.
pub(super) fn peak(grid: &Grid, magnitude: impl Fn(f64) -> f64) -> Level {
    let f = &grid.frequencies;
    let values: Vec<f64> = f.iter().map(|&w| magnitude(w)).collect();
    let at = (0..f.len()).fold(0, |best, k| if values[k] > values[best] { k } else { best });
    let (mut a, mut b) = (f[at.saturating_sub(1)].ln(), f[(at + 1).min(f.len() - 1)].ln());
    const GOLDEN: f64 = 0.618_033_988_749_894_9;
    for _ in 0..80 {
        let (left, right) = (b - GOLDEN * (b - a), a + GOLDEN * (b - a));
        if magnitude(left.exp()) > magnitude(right.exp()) { b = right } else { a = left }
    }
    let w = (0.5 * (a + b)).exp();
    let inner = Level { magnitude: magnitude(w), w };
    if inner.magnitude > values[at] { inner } else { Level { magnitude: values[at], w: f[at] } }
}
