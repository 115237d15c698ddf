//! Outer bounds on the figures of every set whose error is at most a limit.
//!
//! The search prunes with these windows, so each of them is a necessary condition: a set within the limit lies inside.
//! They rest on finitely many frequencies of the very grid on which the error itself is taken. At each of them the
//! limit is a linear inequality in the coefficients of |N|² and |D|² (for the vector error: of N and D), so how far a
//! figure can go is a linear program. Its dual is solved, because every feasible point of the dual bounds the figure
//! from outside, however well the solver did.

use microlp::{ComparisonOp, OptimizationDirection, Problem as LinearProgram};
use num_complex::Complex64;

use crate::target::{Biquad, Measure, Section, Weights, Yardstick, about};

/// One coefficient of a transfer function: the power of s in the numerator or the denominator.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub(crate) enum Coefficient {
    /// Of the numerator.
    N(usize),
    /// Of the denominator.
    D(usize),
}

use Coefficient::{D, N};

impl Coefficient {
    /// The coefficient's value.
    pub fn of(self, h: &Biquad) -> f64 {
        match self {
            N(power) => h.num[power],
            D(power) => h.den[power],
        }
    }

    fn power(self) -> usize {
        match self {
            N(power) | D(power) => power,
        }
    }
}

/// A product of coefficients over another, and the interval that it must lie in.
#[derive(Clone, Debug)]
pub(crate) struct Window {
    /// Coefficients multiplied in the dividend.
    pub above: Vec<Coefficient>,
    /// Coefficients multiplied in the divisor.
    pub below: Vec<Coefficient>,
    /// Lower end.
    pub low: f64,
    /// Upper end.
    pub high: f64,
}

/// Relative slack of every window, far above rounding and far below any difference between part values.
const SLACK: f64 = 1e-9;

/// A section's windows for any limit.
#[derive(Debug)]
pub(crate) struct WindowMaker<'a> {
    yardstick: &'a Yardstick,
    section: &'a Section,
    /// Which numerator coefficients the circuit can have.
    numerator: [bool; 3],
    /// The ideal with frequency scaled by w0.
    ideal: Biquad,
    /// Vector error only: unit bounds, which scale with the limit.
    vector: Vec<VectorBound>,
}

/// For one pair of coefficients: |above/below ÷ ideal − 1| ≤ reach × E/(1 − gain × E), E the vector error.
#[derive(Debug)]
struct VectorBound {
    above: Coefficient,
    below: Coefficient,
    reach: (f64, f64),
    gain: f64,
}

impl<'a> WindowMaker<'a> {
    /// Prepares for a yardstick of exactly one section.
    pub fn new(yardstick: &'a Yardstick, numerator: [bool; 3]) -> Option<WindowMaker<'a>> {
        let [section] = yardstick.sections() else { return None };
        let mut ideal = section.ideal();
        let order = section.shape.order() as i32;
        for power in 0..3 {
            let scale = section.w0.powi(power as i32 - order);
            ideal.num[power] *= scale;
            ideal.den[power] *= scale;
        }
        let mut maker = WindowMaker { yardstick, section, numerator, ideal, vector: Vec::new() };
        if yardstick.criterion().measure == Measure::Vector {
            maker.vector = maker.vector_bounds();
        }
        Some(maker)
    }

    /// The windows for sets whose error is at most `limit`, in the unit of the measure.
    pub fn windows(&self, limit: f64) -> Vec<Window> {
        let mut windows = match self.yardstick.criterion().measure {
            Measure::Decibel => self.decibel(limit),
            Measure::Vector => self.vector_windows(limit),
            Measure::Weighted(weights) => self.weighted(&weights, limit),
        };
        for window in &mut windows {
            window.low -= SLACK * window.low.abs();
            window.high += SLACK * window.high.abs();
        }
        // Poles in the left half plane, whatever else holds.
        let order = self.section.shape.order();
        windows.extend((0..order).map(|power| Window {
            above: vec![D(power)],
            below: vec![D(order)],
            low: f64::MIN_POSITIVE,
            high: f64::INFINITY,
        }));
        windows
    }

    /// The window of a ratio from relative ends (of the absolute value) and the ideal ratio.
    fn relative(&self, above: &[Coefficient], below: &[Coefficient], ends: (f64, f64)) -> Window {
        let ideal = self.section.ideal();
        let value = |list: &[Coefficient]| list.iter().map(|c| c.of(&ideal)).product::<f64>();
        let ratio = value(above) / value(below);
        let (a, b) = (ratio * ends.0, ratio * ends.1);
        Window { above: above.to_vec(), below: below.to_vec(), low: a.min(b), high: a.max(b) }
    }

    /// Coefficients of the ideal that are not zero, numerator first.
    fn present(&self) -> Vec<Coefficient> {
        let numerator = (0..3).map(N);
        let denominator = (0..=self.section.shape.order()).map(D);
        numerator.chain(denominator).filter(|c| c.of(&self.ideal).abs() > 0.0).collect()
    }

    /// Whether the window of a ratio says anything when a flat gain is ignored.
    fn comparable(&self, a: Coefficient, b: Coefficient) -> bool {
        !self.yardstick.criterion().ignore_gain || matches!((a, b), (N(_), N(_)) | (D(_), D(_)))
    }

    fn weighted(&self, weights: &Weights, limit: f64) -> Vec<Window> {
        let reach = |weight: f64| {
            let off = if weight > 0.0 { limit / weight } else { f64::INFINITY };
            ((1.0 - off).max(0.0), 1.0 + off)
        };
        let powers = |(low, high): (f64, f64), k: i32| (low.powi(k), high.powi(k));
        let inverse = |(low, high): (f64, f64)| (1.0 / high, 1.0 / low);
        let (w0, q, gain, wz) = (reach(weights.f0), reach(weights.q), reach(weights.gain), reach(weights.fz));
        let mut windows = Vec::new();
        if self.section.shape.order() == 2 {
            windows.push(self.relative(&[D(0)], &[D(2)], powers(w0, 2)));
            windows.push(self.relative(&[D(1), D(1)], &[D(0), D(2)], inverse(powers(q, 2))));
            let over_q = inverse(q);
            windows.push(self.relative(&[D(1)], &[D(2)], (w0.0 * over_q.0, w0.1 * over_q.1)));
        } else {
            windows.push(self.relative(&[D(0)], &[D(1)], w0));
        }
        if let Some((above, below)) = gain_ratio(self.section) {
            windows.push(self.relative(&[above], &[below], gain));
        }
        if self.section.wz.is_some() {
            windows.push(self.relative(&[N(0)], &[N(2)], powers(wz, 2)));
        }
        windows.retain(|w| !w.low.is_nan() && !w.high.is_nan());
        windows
    }

    /// Grid frequencies for the linear programs, in units of w0, with |H*|²: those nearest to a spread that is denser
    /// about pole and zero, in a range where the rows are well scaled. Fewer would still give outer bounds, only wider.
    fn sample_frequencies(&self) -> Vec<(f64, f64)> {
        let w0w0 = self.section.w0 * self.section.w0;
        let samples = self.yardstick.samples();
        let band = self.yardstick.band();
        let mut wanted = vec![band.0, band.1];
        wanted.extend(about(self.section.w0, (0.5 / self.section.q.unwrap_or(0.5)).min(0.3), 0.35, band));
        if let Some(wz) = self.section.wz {
            wanted.extend(about(wz, 0.5 * 10f64.powf(-self.yardstick.criterion().floor_db / 20.0), 1.0, band));
        }
        let mut picked: Vec<usize> =
            wanted.into_iter().map(|w| samples.partition_point(|s| s.x < w * w).min(samples.len() - 1)).collect();
        picked.sort_unstable();
        picked.dedup();
        let scaled = picked.into_iter().map(|i| (samples[i].x / w0w0, samples[i].power));
        scaled.filter(|(x, _)| (1e-3..=1e3).contains(x)).collect()
    }

    /// Rows a·δ ≤ b for the deviation δ of (p0, p1, p2, q0, q1, q2) from the ideal, in units of ε nepers of power.
    fn magnitude_rows(&self, epsilon: f64) -> Vec<([f64; 6], f64)> {
        let (p, q) = (powers(&self.ideal.num), powers(&self.ideal.den));
        let floor = self.yardstick.floor_power();
        let mut rows = Vec::new();
        for (x, target) in self.sample_frequencies() {
            let weight = [1.0, x, x * x];
            let at = |c: &[f64; 3]| c[0] + x * (c[1] + x * c[2]);
            let mut row = |factor: f64, sign: f64| {
                // sign (P − factor Q) ≤ 0, written for the deviations and scaled to coefficients about one.
                let scale = sign / (factor * at(&q));
                let mut a = [0.0; 6];
                for j in 0..3 {
                    a[j] = weight[j] * scale;
                    a[j + 3] = -factor * weight[j] * scale;
                }
                rows.push((a, scale * (factor * at(&q) - at(&p)) / epsilon));
            };
            row(target.max(floor) * epsilon.exp(), 1.0);
            let lower = target * (-epsilon).exp();
            if lower > floor {
                row(lower, -1.0);
            }
        }
        rows
    }

    fn decibel(&self, limit: f64) -> Vec<Window> {
        let epsilon = limit.max(1e-7) * std::f64::consts::LN_10 / 10.0;
        let rows = self.magnitude_rows(epsilon);
        let order = self.section.shape.order();
        let n = self.numerator;
        let unknown = [n[0], n[1] || (n[0] && n[2]), n[2], true, true, order == 2];
        let (p, q) = (powers(&self.ideal.num), powers(&self.ideal.den));
        let ideal = [p[0], p[1], p[2], q[0], q[1], q[2]];
        // Ends of (functional over normalising functional) relative to the ideal.
        let ends = |above: &[f64; 6], below: &[f64; 6]| -> (f64, f64) {
            let value = dot(above, &ideal);
            let reach = |sign: f64| {
                dual_bound(&rows, &unknown, below, &above.map(|c| sign * c), reach_of(epsilon)) * epsilon / value
            };
            (1.0 - reach(-1.0), 1.0 + reach(1.0))
        };
        let unit = |j: usize| {
            let mut c = [0.0; 6];
            c[j] = 1.0;
            c
        };
        // Squares of coefficients that are linear in the unknowns.
        let linear: Vec<(Coefficient, [f64; 6])> = (self.present().into_iter())
            .filter_map(|c| match c {
                D(1) if order == 2 => None,
                N(1) if n[0] && n[2] => None,
                N(1) if order == 1 || !(n[0] || n[2]) => Some((c, unit(1))),
                N(1) => None,
                N(k) => Some((c, unit(k))),
                D(k) => Some((c, unit(3 + k))),
            })
            .collect();
        let root = |(low, high): (f64, f64)| (low.max(0.0).sqrt(), high.max(0.0).sqrt());
        let mut windows = Vec::new();
        for (i, (a, above)) in linear.iter().enumerate() {
            for (b, below) in &linear[i + 1..] {
                if self.comparable(*a, *b) {
                    windows.push(self.relative(&[*a], &[*b], root(ends(above, below))));
                }
            }
        }
        if order == 1 {
            return windows;
        }
        // d1² is not linear: M = q0 + q1 + q2 = |D|² at w0 exceeds it by q2 (1 − x0)², x0 = sqrt(q0/q2), which is of
        // second order where the limit keeps x0 near 1.
        let m = [0.0, 0.0, 0.0, 1.0, 1.0, 1.0];
        let x0 = root(ends(&unit(3), &unit(5)));
        let apart = (1.0 - x0.0).powi(2).max((x0.1 - 1.0).powi(2));
        let q_squared = 1.0 / (q[0] + q[1] + q[2]);
        for (b, below) in &linear {
            if self.comparable(D(1), *b) {
                let (low, high) = ends(&m, below);
                let (_, q2) = ends(&unit(5), below);
                // All relative to the ideal, where M is 1/Q² and q2 is 1.
                let low = if apart.is_finite() && q2.is_finite() { low - q2 * apart * q_squared } else { 0.0 };
                windows.push(self.relative(&[D(1)], &[*b], root((low, high))));
            }
        }
        // 1/Q² = d1²/(d0 d2) with d0 d2 between g sqrt(1 − t²) and g = (q0 + q2)/2, t = (x0² − 1)/(x0² + 1).
        let (low, high) = ends(&m, &[0.0, 0.0, 0.0, 0.5, 0.0, 0.5]);
        let tilt = |x: f64| ((x * x - 1.0) / (x * x + 1.0)).powi(2);
        let t = tilt(x0.0).max(if x0.1.is_finite() { tilt(x0.1) } else { 1.0 });
        let high = high / (1.0 - t).max(0.0).sqrt();
        let low = low - apart / x0.0 * q_squared;
        let low = if low.is_finite() { low.max(0.0) } else { 0.0 };
        windows.push(self.relative(&[D(1), D(1)], &[D(0), D(2)], (low, high)));
        // A notch whose null is not exact by construction: n1² ≤ |N|²/x at any x; taken at the wanted null.
        if let (true, Some(wz)) = (n[1] && n[0] && n[2], self.section.wz) {
            let x = (wz / self.section.w0).powi(2);
            let depth = [1.0 / x, 1.0, x, 0.0, 0.0, 0.0];
            let value =
                dual_bound(&rows, &unknown, &unit(5), &depth, reach_of(epsilon)) * epsilon + dot(&depth, &ideal);
            let bound = value.max(0.0).sqrt();
            if bound.is_finite() && self.comparable(N(1), D(2)) {
                let bound = bound * self.section.w0;
                windows.push(Window { above: vec![N(1)], below: vec![D(2)], low: -bound, high: bound });
            }
        }
        windows.retain(|w| !w.low.is_nan() && !w.high.is_nan());
        windows
    }

    fn vector_bounds(&self) -> Vec<VectorBound> {
        let order = self.section.shape.order();
        let n = self.numerator;
        let unknown = [n[0], n[1], n[2], true, true, order == 2];
        let floor = self.yardstick.floor_power().sqrt();
        let mut rows = Vec::new();
        let mut denominators = Vec::new();
        let samples = self.sample_frequencies();
        for (x, _) in samples.iter().step_by(2) {
            let w = x.sqrt();
            let powers = [Complex64::new(1.0, 0.0), Complex64::new(0.0, w), Complex64::new(-x, 0.0)];
            let ideal = self.ideal.value(w);
            let denominator: Complex64 = (0..3).map(|j| powers[j] * self.ideal.den[j]).sum();
            // |N − H* D| ≤ E max(|H*|, floor) |D|, both sides over |D*|; a disc lies inside each of its tangents.
            let scale = (denominator * ideal.norm().max(floor)).inv();
            for direction in 0..8 {
                let turn = Complex64::from_polar(1.0, std::f64::consts::FRAC_PI_4 * f64::from(direction));
                let mut a = [0.0; 6];
                let mut d = [0.0; 6];
                for j in 0..3 {
                    a[j] = (turn * powers[j] * scale).re;
                    a[j + 3] = -(turn * powers[j] * ideal * scale).re;
                    d[j + 3] = (turn * powers[j] / denominator).re;
                }
                rows.push((a, 1.0));
                denominators.push(d);
            }
        }
        let place = |c: Coefficient| match c {
            N(k) => k,
            D(k) => 3 + k,
        };
        let unit = |c: Coefficient| {
            let mut row = [0.0; 6];
            row[place(c)] = 1.0;
            row
        };
        // N1 of a notch is no part of the ideal, but the vector error bounds it like the others.
        let mut all = self.present();
        all.extend((0..3).filter(|&k| n[k] && self.ideal.num[k].abs() <= 0.0).map(N));
        let mut bounds = Vec::new();
        for &below in &self.present() {
            // How much |D/D*| can differ from 1 per unit of E |D/D*|: an octagon about the disc, hence the cosine.
            let widest =
                denominators.iter().map(|d| dual_bound(&rows, &unknown, &unit(below), d, REACH)).fold(0.0, f64::max);
            let gain = widest / std::f64::consts::FRAC_PI_8.cos();
            for &above in &all {
                if place(above) == place(below) || !self.comparable(above, below) {
                    continue;
                }
                let reach =
                    |sign: f64| dual_bound(&rows, &unknown, &unit(below), &unit(above).map(|c| sign * c), REACH);
                bounds.push(VectorBound { above, below, reach: (reach(-1.0), reach(1.0)), gain });
            }
        }
        bounds
    }

    fn vector_windows(&self, limit: f64) -> Vec<Window> {
        let mut windows = Vec::new();
        for bound in &self.vector {
            // μ = |D/D*| obeys μ ≤ 1 + gain E μ.
            let room = 1.0 - bound.gain * limit;
            if room.is_nan() || room <= 0.0 {
                continue;
            }
            let unit = limit / room;
            let (above, below) = (bound.above, bound.below);
            let ideal = above.of(&self.ideal);
            let scale = self.section.w0.powi(below.power() as i32 - above.power() as i32);
            let by = below.of(&self.ideal) / scale;
            let ends = [(ideal - bound.reach.0 * unit) / by, (ideal + bound.reach.1 * unit) / by];
            let (low, high) = (ends[0].min(ends[1]), ends[0].max(ends[1]));
            if low.is_finite() && high.is_finite() {
                windows.push(Window { above: vec![above], below: vec![below], low, high });
            }
        }
        if self.section.shape.order() == 2 {
            let find = |below: Coefficient| {
                windows.iter().find(|w| w.above == [D(1)] && w.below == [below]).map(|w| (w.low, w.high))
            };
            if let (Some(a), Some(b)) = (find(D(0)), find(D(2)))
                && a.0.min(b.0) > 0.0
            {
                let (low, high) = (a.0 * b.0, a.1 * b.1);
                windows.push(Window { above: vec![D(1), D(1)], below: vec![D(0), D(2)], low, high });
            }
        }
        windows
    }
}

/// The coefficients whose ratio is the gain of a shape, as [`Section::figures_of`] takes it.
pub(crate) fn gain_ratio(section: &Section) -> Option<(Coefficient, Coefficient)> {
    let probe = section.ideal();
    let gain = section.gain;
    (0..3)
        .filter(|&k| probe.num[k].abs() > 0.0 && probe.den[k].abs() > 0.0)
        .find(|&k| (probe.num[k] / probe.den[k] / gain - 1.0).abs() < 1e-12)
        .map(|k| (N(k), D(k)))
}

fn powers(p: &[f64; 3]) -> [f64; 3] {
    [p[0] * p[0], p[1] * p[1] - 2.0 * p[0] * p[2], p[2] * p[2]]
}

fn dot(a: &[f64; 6], b: &[f64; 6]) -> f64 {
    a.iter().zip(b).map(|(x, y)| x * y).sum()
}

/// How far a coefficient is taken to deviate at most, in units of δ, where rounding is charged: a hundred times its ideal
/// value, scaled so that it is about one. No set within any limit of use comes near that.
fn reach_of(epsilon: f64) -> f64 {
    100.0 / epsilon
}

/// The same for the vector error, whose smallest limit of use is 1e-4.
const REACH: f64 = 1e6;

/// An upper bound on `objective`·δ over all δ with rows a·δ ≤ b and `normal`·δ = 0, coordinates not in `unknown` being
/// zero; infinite if none was found.
///
/// For multipliers λ ≥ 0 and any μ, objective·δ = (Σ λ a + μ normal)·δ + r·δ ≤ Σ λ b + r·δ, r what the multipliers
/// leave. The solver chooses λ and μ; the bound is then formed here, with r (rounding) charged at `reach` units of δ.
fn dual_bound(
    rows: &[([f64; 6], f64)],
    unknown: &[bool; 6],
    normal: &[f64; 6],
    objective: &[f64; 6],
    reach: f64,
) -> f64 {
    let mut dual = LinearProgram::new(OptimizationDirection::Minimize);
    let multipliers: Vec<_> = rows.iter().map(|(_, b)| dual.add_var(*b, (0.0, f64::INFINITY))).collect();
    let free = dual.add_var(0.0, (f64::NEG_INFINITY, f64::INFINITY));
    for j in (0..6).filter(|&j| unknown[j]) {
        let mut line: Vec<_> = multipliers.iter().zip(rows).map(|(&v, (a, _))| (v, a[j])).collect();
        line.push((free, normal[j]));
        dual.add_constraint(&line, ComparisonOp::Eq, objective[j]);
    }
    let Some(solution) = dual.solve().ok().and_then(|outcome| outcome.into_solution().ok()) else {
        return f64::INFINITY;
    };
    let lambda: Vec<f64> = multipliers.iter().map(|&v| solution.var_value(v).max(0.0)).collect();
    let mu = solution.var_value(free);
    let bound: f64 = lambda.iter().zip(rows).map(|(l, (_, b))| l * b).sum();
    let rest: f64 = (0..6)
        .filter(|&j| unknown[j])
        .map(|j| {
            let sum: f64 = lambda.iter().zip(rows).map(|(l, (a, _))| l * a[j]).sum();
            (objective[j] - sum - mu * normal[j]).abs()
        })
        .sum();
    if rest * reach > 1e-2 * bound.abs().max(1e-3) { f64::INFINITY } else { bound + rest * reach }
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;
    use crate::target::{Criterion, Shape};

    /// Fixed-seed uniform numbers in −1..1.
    struct Uniform(u64);

    impl Uniform {
        fn next(&mut self) -> f64 {
            self.0 ^= self.0 << 13;
            self.0 ^= self.0 >> 7;
            self.0 ^= self.0 << 17;
            (self.0 >> 11) as f64 / (1u64 << 52) as f64 - 1.0
        }
    }

    fn targets() -> Vec<Section> {
        let w = std::f64::consts::TAU;
        let mut list = Vec::new();
        for shape in Shape::ALL {
            for (f0, q, gain) in [(1e3, 0.9, 1.0), (3.4e3, 5.3, -2.0), (47.0, 0.5412, 10.0), (2e4, 25.0, 1.0)] {
                for fz in [1.0, 0.6, 1.7] {
                    let wz = (shape == Shape::Notch).then_some(w * f0 * fz);
                    let q = (shape.order() == 2).then_some(q);
                    list.extend(Section::new("s", shape, w * f0, q, gain, wz));
                    if wz.is_none() {
                        break;
                    }
                }
            }
        }
        list
    }

    /// Sets off by all sizes, in all coefficients: each must lie in the windows made for its own error.
    #[test]
    fn windows_are_outer_bounds() {
        let mut uniform = Uniform(0x9e37_79b9_7f4a_7c15);
        let (mut checked, mut narrow) = (0, 0);
        for target in targets() {
            for (measure, ignore_gain) in [
                (Measure::Decibel, false),
                (Measure::Decibel, true),
                (Measure::Vector, false),
                (Measure::Weighted(Weights { f0: 1.0, q: 0.3, gain: 0.5, fz: 1.0 }), false),
            ] {
                if target.shape.is_all_pass() && measure == Measure::Decibel {
                    continue;
                }
                let criterion = Criterion { measure, ignore_gain, ..Criterion::default() };
                let yardstick = Yardstick::new(std::slice::from_ref(&target), criterion);
                let maker = WindowMaker::new(&yardstick, target.shape.numerator()).unwrap();
                for size in [1e-5, 1e-3, 1e-2, 0.1] {
                    for _ in 0..4 {
                        let mut h = target.ideal();
                        h.num.iter_mut().chain(&mut h.den).for_each(|c| *c *= (size * uniform.next()).exp());
                        let error = yardstick.deviation(&[h]).error;
                        if !h.is_stable(target.shape.order()) || error <= 0.0 {
                            continue;
                        }
                        for window in maker.windows(error) {
                            let value = |list: &[Coefficient]| list.iter().map(|c| c.of(&h)).product::<f64>();
                            let ratio = value(&window.above) / value(&window.below);
                            assert!(
                                (window.low..=window.high).contains(&ratio),
                                "{target:?} {measure:?} {error}: {window:?} has {ratio}"
                            );
                            checked += 1;
                            narrow += usize::from(window.high < window.low * (1.0 + 20.0 * size));
                        }
                    }
                }
            }
        }
        // Not only true but useful: most windows are of the size of the deviation.
        assert!(checked > 5_000 && narrow * 3 > checked, "{checked} {narrow}");
    }
}
