//! The measure by which a realised cascade is compared with its target.

use std::cmp::Ordering;

use num_complex::Complex64;

use super::section::{Biquad, Section};

/// How strongly each relative miss counts in the weighted measure; zero takes a figure out.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Weights {
    /// Weight of the miss in f0.
    pub f0: f64,
    /// Weight of the miss in Q.
    pub q: f64,
    /// Weight of the miss in gain.
    pub gain: f64,
    /// Weight of the miss in fz (notches only).
    pub fz: f64,
}

impl Weights {
    /// The weights in the order of [`Section::misses`].
    pub fn as_array(&self) -> [f64; 4] {
        [self.f0, self.q, self.gain, self.fz]
    }
}

/// What the error of a set is.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Measure {
    /// Response error: the largest |20 log10(A/B)| in dB over the band, A = max(|H|, floor), B = max(|H*|, floor).
    Decibel,
    /// Vector error: the largest |H − H*| / max(|H*|, floor) over the band, a plain ratio.
    Vector,
    /// Weighted sum of the relative misses in f0, Q, gain and fz, of the worst section, a plain ratio.
    Weighted(Weights),
}

impl Measure {
    /// The unit in which errors of this measure are given: `dB`, or nothing for a plain ratio.
    pub fn unit(&self) -> &'static str {
        match self {
            Measure::Decibel => "dB",
            Measure::Vector | Measure::Weighted(_) => "",
        }
    }

    /// The measure in words.
    pub fn describe(&self) -> &'static str {
        match self {
            Measure::Decibel => "response error, largest |20 log10(|H|/|H*|)| in the band",
            Measure::Vector => "vector error, largest |H - H*|/|H*| in the band",
            Measure::Weighted(_) => "weighted sum of the relative misses in f0, Q, gain and fz",
        }
    }
}

/// A measure with all that it needs to be unambiguous.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Criterion {
    /// What is measured.
    pub measure: Measure,
    /// The band in rad/s; `None` means lowest w0 / 10 to highest w0 × 10.
    pub band: Option<(f64, f64)>,
    /// How far under the largest |H*| in the band the floor lies, dB.
    pub floor_db: f64,
    /// Whether a flat gain offset is ignored: the best constant factor is taken out.
    pub ignore_gain: bool,
}

impl Default for Criterion {
    fn default() -> Self {
        Criterion { measure: Measure::Decibel, band: None, floor_db: 60.0, ignore_gain: false }
    }
}

impl Criterion {
    /// The band in rad/s for these sections.
    pub fn band_for(&self, sections: &[Section]) -> (f64, f64) {
        self.band.unwrap_or_else(|| {
            let lowest = sections.iter().map(|s| s.w0).fold(f64::INFINITY, f64::min);
            let highest = sections.iter().map(|s| s.w0).fold(0.0, f64::max);
            (lowest / 10.0, highest * 10.0)
        })
    }
}

/// How far a realised cascade is off.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Deviation {
    /// The error in the unit of the measure.
    pub error: f64,
    /// Where it is largest, rad/s; `None` for the weighted measure.
    pub at: Option<f64>,
    /// The flat gain factor that was taken out, where one was.
    pub offset: Option<f64>,
}

/// One frequency of the grid.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Sample {
    /// ω in rad/s.
    pub w: f64,
    /// ω² in (rad/s)².
    pub x: f64,
    /// |H*|² of the target there.
    pub power: f64,
}

/// A target made ready for fast and repeated comparison.
///
/// The maximum over the band is taken at stated frequencies, so that anybody can recompute it: both ends of the band and
/// equal logarithmic steps between them, 200 or a little more to the decade; further ones about a pole pair whose
/// half-width 1/(2Q) is less than eight such steps, about the zero of a notch, and where |H*| crosses the floor. The true
/// maximum exceeds this one by at most about 0.3 % of itself; for a notch, whose realised null may fall between two
/// frequencies, by more.
#[derive(Clone, Debug)]
pub struct Yardstick {
    criterion: Criterion,
    sections: Vec<Section>,
    targets: Vec<Biquad>,
    band: (f64, f64),
    floor: f64,
    grid: Vec<Sample>,
    order: Vec<usize>,
}

/// Nepers of power ratio (natural logarithm) per decibel.
const NEPER_PER_DB: f64 = std::f64::consts::LN_10 / 10.0;

impl Yardstick {
    /// Prepares the comparison with a cascade of ideal sections.
    pub fn new(sections: &[Section], mut criterion: Criterion) -> Yardstick {
        if let (Measure::Weighted(weights), true) = (&mut criterion.measure, criterion.ignore_gain) {
            weights.gain = 0.0;
        }
        let targets: Vec<Biquad> = sections.iter().map(Section::ideal).collect();
        let band = criterion.band_for(sections);
        let sample = |w: f64| Sample { w, x: w * w, power: power(&targets, w * w) };
        let mut grid: Vec<Sample> = frequencies(sections, band, criterion.floor_db).into_iter().map(sample).collect();
        let peak = grid.iter().map(|s| s.power).fold(0.0, f64::max);
        let floor = peak * 10f64.powf(-criterion.floor_db / 10.0);
        let crossings = grid.windows(2).filter(|pair| (pair[0].power > floor) != (pair[1].power > floor));
        let crossings: Vec<Sample> = crossings.map(|pair| sample(crossing(&targets, floor, pair))).collect();
        grid.extend(crossings);
        grid.sort_by(|a, b| a.w.total_cmp(&b.w));
        let order = spread_order(grid.len());
        Yardstick { criterion, sections: sections.to_vec(), targets, band, floor, grid, order }
    }

    /// The criterion that was asked for.
    pub fn criterion(&self) -> &Criterion {
        &self.criterion
    }

    /// The band, rad/s.
    pub fn band(&self) -> (f64, f64) {
        self.band
    }

    /// The target sections.
    pub fn sections(&self) -> &[Section] {
        &self.sections
    }

    /// The angular frequencies at which responses are compared, ascending, rad/s.
    pub fn frequencies(&self) -> impl Iterator<Item = f64> + '_ {
        self.grid.iter().map(|sample| sample.w)
    }

    /// |floor|², in the unit of |H|².
    pub(crate) fn floor_power(&self) -> f64 {
        self.floor
    }

    /// The grid, by ascending frequency.
    pub(crate) fn samples(&self) -> &[Sample] {
        &self.grid
    }

    /// The error of the realised sections, which must be as many as the target's and in the same order.
    pub fn deviation(&self, achieved: &[Biquad]) -> Deviation {
        self.within(achieved, f64::INFINITY).unwrap_or(Deviation { error: f64::INFINITY, at: None, offset: None })
    }

    /// The error if it is at most `limit`; `None`, often much sooner, if it is larger or not a number.
    pub fn within(&self, achieved: &[Biquad], limit: f64) -> Option<Deviation> {
        let found = match self.criterion.measure {
            Measure::Decibel => self.decibel(achieved, limit),
            Measure::Vector => self.vector(achieved, limit),
            Measure::Weighted(weights) => Some(self.weighted(achieved, &weights)),
        }?;
        (found.error <= limit).then_some(found)
    }

    fn weighted(&self, achieved: &[Biquad], weights: &Weights) -> Deviation {
        let error = self
            .sections
            .iter()
            .zip(achieved)
            .map(|(section, h)| {
                let misses = section.misses(&section.figures_of(h));
                misses
                    .into_iter()
                    .zip(weights.as_array())
                    .filter_map(|(miss, weight)| miss.filter(|_| weight > 0.0).map(|miss| miss * weight))
                    .sum::<f64>()
            })
            .fold(0.0, |worst, error| if error > worst || error.is_nan() { error } else { worst });
        Deviation { error, at: None, offset: None }
    }

    /// Natural logarithm of the ratio of the (floored) powers, with the gain factor `offset` (of power) applied.
    fn log_ratio(&self, power: f64, target: f64, offset: f64) -> f64 {
        ((power * offset).max(self.floor) / target.max(self.floor)).ln()
    }

    fn decibel(&self, achieved: &[Biquad], limit: f64) -> Option<Deviation> {
        let bound = limit * NEPER_PER_DB;
        if !self.criterion.ignore_gain {
            return self.decibel_of_all(achieved, bound);
        }
        let mut powers = vec![0.0; self.grid.len()];
        let (mut lowest, mut highest) = (f64::INFINITY, f64::NEG_INFINITY);
        for &i in &self.order {
            let sample = &self.grid[i];
            powers[i] = power(achieved, sample.x);
            // With a free offset only points well above the floor can be compared before the offset is known.
            if sample.power <= self.floor * (2.0 * bound).exp() {
                continue;
            }
            let ratio = (powers[i] / sample.power).ln();
            lowest = lowest.min(ratio);
            highest = highest.max(ratio);
            if highest - lowest > 2.0 * bound || ratio.is_nan() {
                return None;
            }
        }
        let points: Vec<(f64, f64, f64)> = self.grid.iter().zip(&powers).map(|(s, &p)| (s.x, p, s.power)).collect();
        let offset = self.best_offset(&points);
        let (error, x) = points
            .iter()
            .map(|&(x, p, t)| (self.log_ratio(p, t, offset).abs(), x))
            .fold((0.0, self.grid[0].x), |best, here| if here.0 > best.0 { here } else { best });
        Some(Deviation { error: error / NEPER_PER_DB, at: Some(x.sqrt()), offset: Some(offset.sqrt()) })
    }

    /// The same where the gain counts: the largest and the smallest ratio are enough, and need one logarithm each.
    fn decibel_of_all(&self, achieved: &[Biquad], bound: f64) -> Option<Deviation> {
        // The last digit is left to the comparison of the error itself.
        let most = bound.exp() * (1.0 + 1e-12);
        let (mut lowest, mut highest) = ((1.0, self.grid[0].x), (1.0, self.grid[0].x));
        for &i in &self.order {
            let sample = &self.grid[i];
            let ratio = power(achieved, sample.x).max(self.floor) / sample.power.max(self.floor);
            if ratio > most || ratio * most < 1.0 || ratio.is_nan() {
                return None;
            }
            // Of equal ones the lowest frequency.
            let better =
                |best: (f64, f64), more: bool| more || (ratio.total_cmp(&best.0).is_eq() && sample.x < best.1);
            if better(highest, ratio > highest.0) {
                highest = (ratio, sample.x);
            }
            if better(lowest, ratio < lowest.0) {
                lowest = (ratio, sample.x);
            }
        }
        let (above, below) = (highest.0.ln(), -lowest.0.ln());
        let (error, x) = match above.total_cmp(&below) {
            Ordering::Greater => (above, highest.1),
            Ordering::Less => (below, lowest.1),
            Ordering::Equal => (above, highest.1.min(lowest.1)),
        };
        Some(Deviation { error: error / NEPER_PER_DB, at: Some(x.sqrt()), offset: None })
    }

    /// The factor of power that makes the largest excess and the largest shortfall equal; 1 unless gain is ignored.
    ///
    /// Both are monotone in the factor, so bisection on its logarithm finds where they meet.
    fn best_offset(&self, points: &[(f64, f64, f64)]) -> f64 {
        if !self.criterion.ignore_gain {
            return 1.0;
        }
        let imbalance = |u: f64| {
            let logs = points.iter().map(|&(_, p, t)| self.log_ratio(p, t, u.exp()));
            let (low, high) = logs.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(v), h.max(v)));
            low + high
        };
        let raw = points.iter().filter(|p| p.2 > self.floor).map(|&(_, p, t)| (t / p).ln());
        let (mut from, mut to) = raw.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(v), h.max(v)));
        // Where the floor cuts nothing off, the middle of the ratios is the answer.
        let middle = 0.5 * (from + to);
        if imbalance(middle).abs() <= 1e-14 {
            return middle.exp();
        }
        for _ in 0..80 {
            let middle = 0.5 * (from + to);
            if imbalance(middle) > 0.0 { to = middle } else { from = middle }
        }
        (0.5 * (from + to)).exp()
    }

    /// Whether no flat factor c brings |c H/H* − 1| within `limit` at all frequencies well above the floor: there every
    /// ratio H/H* must lie within an angle of asin(limit) about the real axis, and the largest and smallest of them
    /// within (1 + limit)/(1 − limit).
    fn is_hopeless(&self, achieved: &[Biquad], limit: f64) -> bool {
        if limit >= 1.0 {
            return false;
        }
        let (mut lowest, mut highest) = (f64::INFINITY, 0.0f64);
        self.order.iter().map(|&i| &self.grid[i]).filter(|sample| sample.power > self.floor).any(|sample| {
            let value = |sections: &[Biquad]| sections.iter().map(|h| h.value(sample.w)).product::<Complex64>();
            let ratio = value(achieved) / value(&self.targets);
            (lowest, highest) = (lowest.min(ratio.norm()), highest.max(ratio.norm()));
            ratio.re <= 0.0
                || ratio.im.abs() > limit * ratio.norm()
                || highest * (1.0 - limit) > lowest * (1.0 + limit)
        })
    }

    fn vector(&self, achieved: &[Biquad], limit: f64) -> Option<Deviation> {
        let value = |sections: &[Biquad], w: f64| sections.iter().map(|h| h.value(w)).product::<Complex64>();
        let off = |w: f64, factor: f64| {
            let ideal = value(&self.targets, w);
            (value(achieved, w) * factor - ideal).norm() / ideal.norm().max(self.floor.sqrt())
        };
        let largest = |factor: f64, bound: f64| {
            let mut worst = (0.0, self.band.0);
            for &i in &self.order {
                let w = self.grid[i].w;
                let error = off(w, factor);
                if error > bound || error.is_nan() {
                    return None;
                }
                if error > worst.0 {
                    worst = (error, w);
                }
            }
            Some(worst)
        };
        let factor = if self.criterion.ignore_gain {
            if self.is_hopeless(achieved, limit) {
                return None;
            }
            // The largest error is a convex function of the factor; the best one lies among the gain ratios.
            let ratios = self.grid.iter().filter(|s| s.power > self.floor);
            let logs = ratios.map(|s| 0.5 * (s.power / power(achieved, s.x)).ln()).filter(|log| log.is_finite());
            let (low, high) = logs.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), log| (l.min(log), h.max(log)));
            let worst = |u: f64| largest(u.exp(), f64::INFINITY).map_or(f64::NEG_INFINITY, |(e, _)| -e);
            golden_maximum((low, high), worst).exp()
        } else {
            1.0
        };
        let (error, at) = largest(factor, limit)?;
        Some(Deviation { error, at: Some(at), offset: self.criterion.ignore_gain.then_some(factor) })
    }
}

/// |H|² of a cascade at x = ω².
fn power(sections: &[Biquad], x: f64) -> f64 {
    sections.iter().map(|h| h.power(x)).product()
}

/// Steps of the grid to the decade.
const STEPS_PER_DECADE: f64 = 200.0;

/// How close the further frequencies about a sharp pole pair lie, in its half-widths.
const CLOSE_TO_POLE: f64 = 0.1;

/// How close those about the zero of a notch lie, in half-widths of its null: the realised null may lie anywhere near.
const CLOSE_TO_ZERO: f64 = 0.02;

/// The angular frequencies of the grid, ascending; see [`Yardstick`].
fn frequencies(sections: &[Section], band: (f64, f64), floor_db: f64) -> Vec<f64> {
    let decades = (band.1 / band.0).log10();
    // The small margin keeps a whole number of decades, as rounding leaves it, from getting a step too many.
    let count = (STEPS_PER_DECADE * decades - 1e-6).ceil().max(1.0);
    let mut grid: Vec<f64> = (0..=count as usize).map(|i| band.0 * 10f64.powf(decades * i as f64 / count)).collect();
    if let Some(last) = grid.last_mut() {
        *last = band.1;
    }
    let few_steps = 8.0 * std::f64::consts::LN_10 / STEPS_PER_DECADE;
    for section in sections {
        let half_width = 0.5 / section.q.unwrap_or(0.5);
        if half_width < few_steps {
            grid.extend(about(section.w0, half_width, CLOSE_TO_POLE, band));
        }
        if let Some(wz) = section.wz {
            grid.extend(about(wz, 0.5 * 10f64.powf(-floor_db / 20.0), CLOSE_TO_ZERO, band));
        }
    }
    grid.sort_by(f64::total_cmp);
    grid.dedup_by(|next, kept| *next <= *kept * (1.0 + 1e-12));
    grid
}

/// Frequencies about a pole or zero, within the band: as close as `step` × `width` (relative) there, wider with distance.
pub(crate) fn about(centre: f64, width: f64, step: f64, band: (f64, f64)) -> Vec<f64> {
    let reach = (band.1 / centre).max(centre / band.0).max(1.0).ln();
    let count = ((reach / width).asinh() / step).ceil() as i32;
    (-count..=count)
        .map(|i| centre * (width * f64::sinh(step * f64::from(i))).exp())
        .filter(|w| (band.0..=band.1).contains(w))
        .collect()
}

/// Where |H*|² crosses the floor between two neighbours of the grid, by bisection.
fn crossing(targets: &[Biquad], floor: f64, pair: &[Sample]) -> f64 {
    let (mut from, mut to) = (pair[0].w, pair[1].w);
    let above = pair[0].power > floor;
    for _ in 0..60 {
        let middle = 0.5 * (from + to);
        if (power(targets, middle * middle) > floor) == above { from = middle } else { to = middle }
    }
    0.5 * (from + to)
}

/// All indices below `len`, so ordered that any leading part is spread over the whole range.
fn spread_order(len: usize) -> Vec<usize> {
    let bits = usize::BITS - len.next_power_of_two().leading_zeros() - 1;
    (0..len.next_power_of_two())
        .map(|i| if bits == 0 { 0 } else { i.reverse_bits() >> (usize::BITS - bits) })
        .filter(|&i| i < len)
        .collect()
}

/// Where `f` is largest in the interval, by golden section: to rounding for one hump.
fn golden_maximum(span: (f64, f64), f: impl Fn(f64) -> f64) -> f64 {
    const RATIO: f64 = 0.618_033_988_749_894_8;
    let (mut a, mut b) = span;
    let (mut c, mut d) = (b - RATIO * (b - a), a + RATIO * (b - a));
    let (mut fc, mut fd) = (f(c), f(d));
    for _ in 0..70 {
        if fc >= fd {
            (b, d, fd) = (d, c, fc);
            c = b - RATIO * (b - a);
            fc = f(c);
        } else {
            (a, c, fc) = (c, d, fd);
            d = a + RATIO * (b - a);
            fd = f(d);
        }
    }
    0.5 * (a + b)
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;
    use crate::target::Shape;

    fn low_pass(f0: f64, q: f64, gain: f64) -> Section {
        Section::new("s", Shape::LowPass, f0, Some(q), gain, None).unwrap()
    }

    /// The error on a brute grid: 200,001 points over the band, and as many within 1 % of a notch's zero.
    fn brute(target: &[Section], achieved: &[Biquad], floor_db: f64) -> f64 {
        let band = Criterion::default().band_for(target);
        let ideal: Vec<Biquad> = target.iter().map(Section::ideal).collect();
        let spread =
            |from: f64, to: f64| (0..=200_000).map(move |i| from * (to / from).powf(f64::from(i) / 200_000.0));
        let mut ws: Vec<f64> = spread(band.0, band.1).collect();
        target.iter().filter_map(|s| s.wz).for_each(|wz| ws.extend(spread(0.99 * wz, 1.01 * wz)));
        let peak = ws.iter().map(|w| power(&ideal, w * w)).fold(0.0, f64::max);
        let floor = peak * 10f64.powf(-floor_db / 10.0);
        ws.iter()
            .map(|w| (power(achieved, w * w).max(floor) / power(&ideal, w * w).max(floor)).log10().abs() * 10.0)
            .fold(0.0, f64::max)
    }

    #[test]
    fn error_agrees_with_a_brute_grid() {
        let cases = [
            (low_pass(1.0, 0.7, 1.0), low_pass(1.002, 0.71, 0.999)),
            (low_pass(1.0, 5.0, 2.0), low_pass(1.03, 4.8, 2.01)),
            (low_pass(1.0, 40.0, 1.0), low_pass(0.98, 41.0, 1.0)),
            (
                Section::new("n", Shape::Notch, 1.0, Some(3.0), 1.0, Some(1.3)).unwrap(),
                Section::new("n", Shape::Notch, 1.001, Some(3.1), 1.0, Some(1.3004)).unwrap(),
            ),
        ];
        for (target, off) in cases {
            for floor_db in [60.0, 30.0] {
                let target = [target.clone()];
                let yardstick = Yardstick::new(&target, Criterion { floor_db, ..Criterion::default() });
                let error = yardstick.deviation(&[off.ideal()]).error;
                let expected = brute(&target, &[off.ideal()], floor_db);
                // The brute grid has 500 times as many points; see the bound stated on `Yardstick`.
                assert!(error <= expected * (1.0 + 1e-4), "{error} {expected}");
                assert!(error >= expected * (1.0 - 4e-3), "{error} {expected}");
            }
        }
    }

    #[test]
    fn a_flat_offset_is_taken_out_and_reported() {
        let target = [low_pass(1.0, 0.9, 1.0)];
        let criterion = Criterion { ignore_gain: true, ..Criterion::default() };
        let flat = Yardstick::new(&target, criterion).deviation(&[low_pass(1.0, 0.9, 1.7).ideal()]);
        assert!(flat.error < 1e-9, "{flat:?}");
        assert!((flat.offset.unwrap() * 1.7 - 1.0).abs() < 1e-9);
        let both = Yardstick::new(&target, criterion).deviation(&[low_pass(1.0, 1.0, 1.7).ideal()]);
        // Half the distance between the largest and the smallest ratio, by a plain scan.
        let (achieved, ideal) = (low_pass(1.0, 1.0, 1.7).ideal(), target[0].ideal());
        let ratios = (0..=400).map(|i| 10f64.powf(-1.0 + f64::from(i) / 200.0));
        let ratios: Vec<f64> = ratios.map(|w| 10.0 * (achieved.power(w * w) / ideal.power(w * w)).log10()).collect();
        let (low, high) = ratios.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), &r| (l.min(r), h.max(r)));
        assert!((both.error - 0.5 * (high - low)).abs() < 1e-9, "{both:?} {low} {high}");
        let vector = Criterion { measure: Measure::Vector, ..criterion };
        let flat = Yardstick::new(&target, vector).deviation(&[low_pass(1.0, 0.9, 1.7).ideal()]);
        assert!(flat.error < 1e-6, "{flat:?}");
    }

    #[test]
    fn vector_error_of_an_all_pass_follows_its_phase() {
        // Two first-order all-passes differ by |e^{j(a-b)} - 1| with a, b = 2 atan(w/w0): largest near w0.
        let section = |w0| Section::new("a", Shape::FirstOrderAllPass, w0, None, 1.0, None).unwrap();
        let criterion = Criterion { measure: Measure::Vector, ..Criterion::default() };
        let found = Yardstick::new(&[section(1.0)], criterion).deviation(&[section(1.01).ideal()]);
        let expected = (0..100_000)
            .map(|i| 0.1 * 100f64.powf(f64::from(i) / 1e5))
            .map(|w| 2.0 * ((w / 1.0).atan() - (w / 1.01).atan()).abs().sin())
            .fold(0.0, f64::max);
        assert!((found.error - expected).abs() < 1e-4 * expected, "{found:?} {expected}");
    }

    #[test]
    fn the_limit_cuts_exactly() {
        let target = [low_pass(1.0, 0.7, 1.0)];
        let yardstick = Yardstick::new(&target, Criterion::default());
        let h = [low_pass(1.01, 0.7, 1.0).ideal()];
        let error = yardstick.deviation(&h).error;
        assert!(yardstick.within(&h, error).is_some());
        assert!(yardstick.within(&h, error * (1.0 - 1e-9)).is_none());
    }

    #[test]
    fn spread_order_is_a_permutation() {
        for len in [1, 2, 3, 17, 64] {
            let mut order = spread_order(len);
            order.sort_unstable();
            assert_eq!(order, (0..len).collect::<Vec<_>>());
        }
    }
}
