//! The ideal responses and the measure, from their definitions.

use num_complex::Complex64;
use roundwell::target::{Criterion, Measure, Section, Shape, Yardstick};

/// The ideal response of a section, from its definition in [`Section::ideal`]'s text.
pub fn ideal(section: &Section, w: f64) -> Complex64 {
    let (s, w0, g) = (Complex64::new(0.0, w), section.w0, section.gain);
    let bandwidth = section.q.map_or(f64::NAN, |q| w0 / q);
    let d = s * s + s * bandwidth + w0 * w0;
    match section.shape {
        Shape::LowPass => g * w0 * w0 / d,
        Shape::HighPass => g * s * s / d,
        Shape::BandPass => g * bandwidth * s / d,
        Shape::AllPass => g * (s * s - s * bandwidth + w0 * w0) / d,
        Shape::Notch => {
            let wz = section.wz.unwrap();
            let flat = if wz >= w0 { g * (w0 / wz).powi(2) } else { g };
            flat * (s * s + wz * wz) / d
        }
        Shape::FirstOrderLowPass => g * w0 / (s + w0),
        Shape::FirstOrderHighPass => g * s / (s + w0),
        Shape::FirstOrderAllPass => g * (w0 - s) / (s + w0),
    }
}

/// The frequencies, rad/s, at which the error is taken: both ends of the band and equal logarithmic steps between them,
/// 200 or a little more to the decade.
fn steps(sections: &[Section], criterion: &Criterion) -> Vec<f64> {
    let w0 = || sections.iter().map(|s| s.w0);
    let default = (w0().fold(f64::INFINITY, f64::min) / 10.0, w0().fold(0.0, f64::max) * 10.0);
    let (from, to) = criterion.band.unwrap_or(default);
    let decades = (to / from).log10();
    let steps = (200.0 * decades - 1e-6).ceil() as usize;
    (0..=steps).map(|i| from * 10f64.powf(decades * i as f64 / steps as f64)).collect()
}

/// The response of the whole target.
fn whole(sections: &[Section], w: f64) -> Complex64 {
    sections.iter().map(|s| ideal(s, w)).product()
}

/// The floor of |H|, for the largest |H*| at these frequencies.
fn floor(frequencies: &[f64], sections: &[Section], criterion: &Criterion) -> f64 {
    let peak = frequencies.iter().map(|&w| whole(sections, w).norm()).fold(0.0, f64::max);
    peak * 10f64.powf(-criterion.floor_db / 20.0)
}

/// All frequencies of the measure. Besides the equal steps these are the ones where |H*| crosses the floor; about poles
/// of a Q above 5.4 and about zeros there are further ones, which are taken from the measure itself.
pub fn grid(sections: &[Section], criterion: &Criterion) -> Vec<f64> {
    let mut grid = steps(sections, criterion);
    let floor = floor(&grid, sections, criterion);
    let above = |w: f64| whole(sections, w).norm() > floor;
    let crossing = |pair: &[f64]| {
        let (mut a, mut b) = (pair[0].ln(), pair[1].ln());
        for _ in 0..60 {
            let middle = 0.5 * (a + b);
            if above(middle.exp()) == above(pair[0]) { a = middle } else { b = middle }
        }
        (0.5 * (a + b)).exp()
    };
    let crossings: Vec<f64> = grid.windows(2).filter(|p| above(p[0]) != above(p[1])).map(crossing).collect();
    let plain = sections.iter().all(|s| s.wz.is_none() && s.q.is_none_or(|q| q <= 5.4));
    if plain {
        grid.extend(crossings);
        grid.sort_by(f64::total_cmp);
    }
    let stated: Vec<f64> = Yardstick::new(sections, *criterion).frequencies().collect();
    if plain {
        assert_eq!(grid.len(), stated.len(), "the measure takes other frequencies than it says");
    }
    for w in &grid {
        assert!(
            stated.iter().any(|s| (s / w - 1.0).abs() < 1e-11),
            "{w} rad/s is not among the measure's frequencies"
        );
    }
    if plain { grid } else { stated }
}

/// The measure for one cascade, from the definitions.
pub struct Judge {
    criterion: Criterion,
    frequencies: Vec<f64>,
    target: Vec<Complex64>,
    floor: f64,
    order: Vec<usize>,
}

impl Judge {
    pub fn new(sections: &[Section], criterion: &Criterion) -> Judge {
        Judge::on(grid(sections, criterion), sections, criterion)
    }

    /// The measure on other frequencies than its own.
    pub fn on(frequencies: Vec<f64>, sections: &[Section], criterion: &Criterion) -> Judge {
        let target = frequencies.iter().map(|&w| whole(sections, w)).collect();
        let floor = floor(&frequencies, sections, criterion);
        // A stride without a common factor visits all frequencies, far apart ones first.
        let n = frequencies.len();
        let shares_factor = |mut a: usize, mut b: usize| {
            while b > 0 {
                (a, b) = (b, a % b);
            }
            a > 1
        };
        let mut stride = n * 5 / 13 + 1;
        while shares_factor(n, stride) {
            stride += 1;
        }
        let order = (0..n).map(|i| i * stride % n).collect();
        Judge { criterion: *criterion, frequencies, target, floor, order }
    }

    /// The error of a response, or `None` if it exceeds `limit`.
    pub fn error(&self, response: &dyn Fn(f64) -> Option<Complex64>, limit: f64) -> Option<f64> {
        match (self.criterion.measure, self.criterion.ignore_gain) {
            (Measure::Weighted(_), _) => panic!("the weighted measure has no frequencies"),
            (Measure::Vector, true) => panic!("not covered here"),
            (Measure::Decibel, true) => self.without_offset(response, limit),
            (Measure::Vector, false) => {
                self.largest(response, limit, |h, t| (h - t).norm() / t.norm().max(self.floor))
            }
            (Measure::Decibel, false) => self.largest(response, limit, |h, t| self.decibels(h, t)),
        }
    }

    /// The error in dB whatever the measure, no offset taken out.
    pub fn decibel_error(&self, response: &dyn Fn(f64) -> Option<Complex64>) -> f64 {
        self.largest(response, f64::INFINITY, |h, t| self.decibels(h, t)).unwrap()
    }

    fn decibels(&self, h: Complex64, target: Complex64) -> f64 {
        (20.0 * (h.norm().max(self.floor) / target.norm().max(self.floor)).log10()).abs()
    }

    fn largest(
        &self,
        response: &dyn Fn(f64) -> Option<Complex64>,
        limit: f64,
        error: impl Fn(Complex64, Complex64) -> f64,
    ) -> Option<f64> {
        let mut worst = 0.0;
        for &i in &self.order {
            let here = error(response(self.frequencies[i])?, self.target[i]);
            if here.is_nan() || here > limit {
                return None;
            }
            worst = f64::max(worst, here);
        }
        Some(worst)
    }

    /// The smallest response error over all constant gain factors k. The largest excess of k |H| over |H*| rises with k,
    /// the largest shortfall falls: their maximum is least where they meet.
    fn without_offset(&self, response: &dyn Fn(f64) -> Option<Complex64>, limit: f64) -> Option<f64> {
        // With all |H| and |H*| far above the floor the error is half the spread of their ratios in dB.
        let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
        let mut pairs = Vec::new();
        for &i in &self.order {
            let (h, t) = (response(self.frequencies[i])?.norm(), self.target[i].norm());
            pairs.push((h, t));
            if t > self.floor * 10f64.powf(limit.min(60.0) * 3.0 / 20.0) {
                let ratio = 20.0 * (h / t).log10();
                (low, high) = (low.min(ratio), high.max(ratio));
                if high - low > 2.0 * limit || ratio.is_nan() {
                    return None;
                }
            }
        }
        let excess_and_shortfall = |k: f64| {
            let of = |&(h, t): &(f64, f64)| 20.0 * ((h * k.exp()).max(self.floor) / t.max(self.floor)).log10();
            let both = |(high, low): (f64, f64), ratio: f64| (high.max(ratio), low.max(-ratio));
            pairs.iter().map(of).fold((f64::NEG_INFINITY, f64::NEG_INFINITY), both)
        };
        let (mut from, mut to) = (-40.0, 40.0);
        for _ in 0..100 {
            let middle = 0.5 * (from + to);
            let (excess, shortfall) = excess_and_shortfall(middle);
            if excess > shortfall { to = middle } else { from = middle }
        }
        let (excess, shortfall) = excess_and_shortfall(0.5 * (from + to));
        Some(excess.max(shortfall)).filter(|e| *e <= limit)
    }
}
