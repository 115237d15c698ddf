//! Ideal first- and second-order sections.

use num_complex::Complex64;
use serde::{Deserialize, Serialize};
use thiserror::Error;

/// The shape of one section's response.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Shape {
    /// Second-order low-pass; the gain is that at DC.
    LowPass,
    /// Second-order high-pass; the gain is that far above f0.
    HighPass,
    /// Second-order band-pass; the gain is that at f0.
    BandPass,
    /// Notch with fz equal to, above or below f0; the gain is that of the wider pass-band, see [`Section::ideal`].
    Notch,
    /// Second-order all-pass; the sign of the gain is that at DC.
    AllPass,
    /// First-order low-pass; the gain is that at DC.
    FirstOrderLowPass,
    /// First-order high-pass; the gain is that far above f0.
    FirstOrderHighPass,
    /// First-order all-pass; the sign of the gain is that at DC.
    FirstOrderAllPass,
}

impl Shape {
    /// Every shape, in the order in which they are listed.
    pub const ALL: [Shape; 8] = [
        Shape::LowPass,
        Shape::HighPass,
        Shape::BandPass,
        Shape::Notch,
        Shape::AllPass,
        Shape::FirstOrderLowPass,
        Shape::FirstOrderHighPass,
        Shape::FirstOrderAllPass,
    ];

    /// The name in running text, such as `low-pass`.
    pub fn name(self) -> &'static str {
        match self {
            Shape::LowPass => "low-pass",
            Shape::HighPass => "high-pass",
            Shape::BandPass => "band-pass",
            Shape::Notch => "notch",
            Shape::AllPass => "all-pass",
            Shape::FirstOrderLowPass => "first-order low-pass",
            Shape::FirstOrderHighPass => "first-order high-pass",
            Shape::FirstOrderAllPass => "first-order all-pass",
        }
    }

    /// 1 or 2.
    pub fn order(self) -> usize {
        match self {
            Shape::FirstOrderLowPass | Shape::FirstOrderHighPass | Shape::FirstOrderAllPass => 1,
            _ => 2,
        }
    }

    /// Whether the magnitude says nothing about f0, so that the vector error must be used.
    pub fn is_all_pass(self) -> bool {
        matches!(self, Shape::AllPass | Shape::FirstOrderAllPass)
    }

    /// Which powers of s the numerator of this shape has, from s^0 upwards.
    pub fn numerator(self) -> [bool; 3] {
        match self {
            Shape::LowPass | Shape::FirstOrderLowPass => [true, false, false],
            Shape::HighPass => [false, false, true],
            Shape::BandPass | Shape::FirstOrderHighPass => [false, true, false],
            Shape::Notch => [true, false, true],
            Shape::AllPass => [true, true, true],
            Shape::FirstOrderAllPass => [true, true, false],
        }
    }
}

/// A section that cannot be.
#[derive(Clone, Debug, PartialEq, Error)]
pub enum SectionError {
    /// A figure is zero, negative (where it must be positive) or not finite.
    #[error("{what} must be {expected}, found {value}")]
    Figure {
        /// The figure's name.
        what: &'static str,
        /// What it must be.
        expected: &'static str,
        /// What was given.
        value: f64,
    },
    /// A second-order shape without Q, or a notch figure on another shape.
    #[error("a {shape} section {problem}")]
    Mismatch {
        /// The shape's name.
        shape: &'static str,
        /// What does not fit it.
        problem: &'static str,
    },
}

/// One ideal section of a target.
#[derive(Clone, Debug, PartialEq)]
pub struct Section {
    /// The name by which the user knows it.
    pub name: String,
    /// Its shape.
    pub shape: Shape,
    /// Pole frequency in rad/s.
    pub w0: f64,
    /// Pole quality factor; `None` for first-order shapes.
    pub q: Option<f64>,
    /// Signed gain (plain ratio) as [`Shape`] defines it.
    pub gain: f64,
    /// Zero frequency of a notch in rad/s; `None` for the other shapes.
    pub wz: Option<f64>,
}

impl Section {
    /// Checks the figures and builds the section. A notch without `wz` has its zero at `w0`.
    ///
    /// # Errors
    /// A figure that is not finite or not positive, a second-order shape without Q, a first-order one with Q, a zero
    /// frequency on a shape that has none.
    pub fn new(
        name: impl Into<String>,
        shape: Shape,
        w0: f64,
        q: Option<f64>,
        gain: f64,
        wz: Option<f64>,
    ) -> Result<Section, SectionError> {
        let positive = |what, value: f64| {
            if value.is_finite() && value > 0.0 {
                Ok(())
            } else {
                Err(SectionError::Figure { what, expected: "a positive finite number", value })
            }
        };
        let mismatch = |problem| Err(SectionError::Mismatch { shape: shape.name(), problem });
        positive("w0", w0)?;
        if !gain.is_finite() || gain.abs() < f64::MIN_POSITIVE {
            return Err(SectionError::Figure { what: "gain", expected: "finite and not zero", value: gain });
        }
        match (shape.order(), q) {
            (2, Some(q)) => positive("q", q)?,
            (2, None) => return mismatch("needs a q (or two poles)"),
            (_, Some(_)) => return mismatch("has no q: leave it out"),
            (_, None) => {}
        }
        let wz = match (shape, wz) {
            (Shape::Notch, wz) => {
                let wz = wz.unwrap_or(w0);
                positive("fz", wz)?;
                Some(wz)
            }
            (_, Some(_)) => return mismatch("has no fz: leave it out, or ask for a notch"),
            (_, None) => None,
        };
        Ok(Section { name: name.into(), shape, w0, q, gain, wz })
    }

    /// The pole figures of two real poles at `first` and `second` (rad/s): w0 is their geometric mean, Q at most 1/2.
    pub fn from_real_poles(first: f64, second: f64) -> (f64, f64) {
        let w0 = (first * second).sqrt();
        (w0, w0 / (first + second))
    }

    /// The ideal transfer function, denominator monic in the highest power.
    ///
    /// With D = s² + (w0/Q) s + w0² and g the gain: low-pass g w0²/D, high-pass g s²/D, band-pass g (w0/Q) s/D, all-pass
    /// g (s² − (w0/Q) s + w0²)/D. A notch is g (w0/wz)² (s² + wz²)/D for wz ≥ w0 (g holds at DC) and g (s² + wz²)/D
    /// below (g holds far above f0). First order, D = s + w0: g w0/D, g s/D, g (w0 − s)/D.
    pub fn ideal(&self) -> Biquad {
        let (w0, g) = (self.w0, self.gain);
        let bw = self.q.map_or(0.0, |q| w0 / q);
        let w0w0 = w0 * w0;
        let num = match self.shape {
            Shape::LowPass => [g * w0w0, 0.0, 0.0],
            Shape::HighPass => [0.0, 0.0, g],
            Shape::BandPass => [0.0, g * bw, 0.0],
            Shape::Notch => {
                let wz = self.wz.unwrap_or(w0);
                if wz >= w0 { [g * w0w0, 0.0, g * w0w0 / (wz * wz)] } else { [g * wz * wz, 0.0, g] }
            }
            Shape::AllPass => [g * w0w0, -g * bw, g],
            Shape::FirstOrderLowPass => [g * w0, 0.0, 0.0],
            Shape::FirstOrderHighPass => [0.0, g, 0.0],
            Shape::FirstOrderAllPass => [g * w0, -g, 0.0],
        };
        let den = if self.shape.order() == 2 { [w0w0, bw, 1.0] } else { [w0, 1.0, 0.0] };
        Biquad { num, den }
    }

    /// The figures that a transfer function of this section's shape has, named as this section names them.
    pub fn figures_of(&self, h: &Biquad) -> Figures {
        let (n, d) = (h.num, h.den);
        let (w0, q) = if self.shape.order() == 2 {
            ((d[0] / d[2]).sqrt(), Some((d[0] / d[2]).sqrt() * d[2] / d[1]))
        } else {
            (d[0] / d[1], None)
        };
        let high = self.shape.order();
        let gain = match self.shape {
            Shape::LowPass | Shape::FirstOrderLowPass | Shape::AllPass | Shape::FirstOrderAllPass => n[0] / d[0],
            Shape::HighPass | Shape::FirstOrderHighPass => n[high] / d[high],
            Shape::BandPass => n[1] / d[1],
            Shape::Notch => {
                if self.wz.unwrap_or(self.w0) >= self.w0 {
                    n[0] / d[0]
                } else {
                    n[2] / d[2]
                }
            }
        };
        let wz = (self.shape == Shape::Notch).then(|| (n[0] / n[2]).sqrt());
        Figures { w0, q, gain, wz }
    }

    /// The largest relative miss |x/x* − 1| over f0, Q, gain and, for a notch, fz.
    pub fn worst_miss(&self, achieved: &Figures) -> f64 {
        self.misses(achieved).into_iter().flatten().fold(0.0, f64::max)
    }

    /// Relative misses |x/x* − 1| of w0, Q, gain and wz; `None` where the shape has no such figure.
    pub fn misses(&self, achieved: &Figures) -> [Option<f64>; 4] {
        let miss = |x: f64, ideal: f64| (x / ideal - 1.0).abs();
        [
            Some(miss(achieved.w0, self.w0)),
            self.q.zip(achieved.q).map(|(ideal, x)| miss(x, ideal)),
            Some(miss(achieved.gain, self.gain)),
            self.wz.zip(achieved.wz).map(|(ideal, x)| miss(x, ideal)),
        ]
    }
}

/// What a realisation gives, in the terms of a [`Section`].
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Figures {
    /// Pole frequency, rad/s.
    pub w0: f64,
    /// Pole quality factor; `None` for first order.
    pub q: Option<f64>,
    /// Signed gain.
    pub gain: f64,
    /// Zero frequency of a notch, rad/s.
    pub wz: Option<f64>,
}

/// A transfer function of order two at most: coefficients by ascending powers of s.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Biquad {
    /// Numerator.
    pub num: [f64; 3],
    /// Denominator.
    pub den: [f64; 3],
}

/// |P(jω)|² at x = ω². Not from the coefficients of |P|²: near a null those cancel to nothing.
fn squared(p: &[f64; 3], x: f64) -> f64 {
    let even = p[0] - p[2] * x;
    even * even + p[1] * p[1] * x
}

impl Biquad {
    /// |H(jω)|² at x = ω².
    pub fn power(&self, x: f64) -> f64 {
        squared(&self.num, x) / squared(&self.den, x)
    }

    /// H(jω).
    pub fn value(&self, w: f64) -> Complex64 {
        let poly = |p: &[f64; 3]| Complex64::new(p[0] - p[2] * w * w, p[1] * w);
        poly(&self.num) / poly(&self.den)
    }

    /// The group delay −dφ/dω at ω in rad/s, s. The jump of the phase at a zero on the imaginary axis is no delay.
    pub fn group_delay(&self, w: f64) -> f64 {
        let x = w * w;
        // Of p0 + p1 s + p2 s²: the derivative of atan2(p1 w, p0 - p2 w²).
        let turn = |[p0, p1, p2]: [f64; 3]| {
            let (even, odd) = (p0 - p2 * x, p1 * w);
            // Without an odd part the phase turns nowhere, not even where the whole vanishes.
            if p1.abs() > 0.0 { p1 * (p0 + p2 * x) / (even * even + odd * odd) } else { 0.0 }
        };
        turn(self.den) - turn(self.num)
    }

    /// Whether all poles lie strictly in the left half plane (all coefficients present of one sign: Hurwitz for order
    /// one and two).
    pub fn is_stable(&self, order: usize) -> bool {
        let sign = self.den[order].signum();
        self.den[..=order].iter().all(|d| d * sign > 0.0)
    }
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;

    fn section(shape: Shape, wz: Option<f64>) -> Section {
        let q = (shape.order() == 2).then_some(2.5);
        Section::new("s", shape, 3.0, q, -1.75, wz).unwrap()
    }

    #[test]
    fn figures_of_the_ideal_are_the_target() {
        for shape in Shape::ALL {
            for wz in [None, Some(2.0), Some(3.0), Some(5.0)] {
                if wz.is_some() && shape != Shape::Notch {
                    continue;
                }
                let target = section(shape, wz);
                let miss = target.worst_miss(&target.figures_of(&target.ideal()));
                assert!(miss < 1e-14, "{shape:?} {miss}");
            }
        }
    }

    #[test]
    fn power_is_the_square_of_the_value() {
        for shape in Shape::ALL {
            let h = section(shape, None).ideal();
            for w in [0.1, 2.0, 3.1, 40.0] {
                assert!((h.power(w * w) - h.value(w).norm_sqr()).abs() < 1e-12 * h.power(w * w).max(1e-3));
            }
        }
    }

    /// Against the central difference of the phase, as `scipy.signal.group_delay` would be checked; and, as closed forms,
    /// 2 ζ/w0 at DC for a second-order low-pass, twice 1/w0 there for a first-order all-pass.
    #[test]
    fn the_group_delay_is_the_slope_of_the_phase() {
        for shape in Shape::ALL {
            for wz in [None, Some(2.0), Some(5.0)] {
                if wz.is_some() && shape != Shape::Notch {
                    continue;
                }
                let h = section(shape, wz).ideal();
                for w in [0.1, 1.0, 2.9, 3.1, 10.0] {
                    let step = 1e-5 * w;
                    let slope = -(h.value(w + step) / h.value(w - step)).arg() / (2.0 * step);
                    let found = h.group_delay(w);
                    assert!((found - slope).abs() < 1e-8 * found.abs().max(1.0), "{shape:?} {w} {found} {slope}");
                }
            }
        }
        // A null that leaves a little: its zeros turn the phase as poles do.
        let h = Biquad { num: [4.0, 0.1, 1.0], den: [9.0, 1.2, 1.0] };
        let slope = -(h.value(2.0 + 1e-6) / h.value(2.0 - 1e-6)).arg() / 2e-6;
        assert!((h.group_delay(2.0) - slope).abs() < 1e-6 * slope.abs(), "{slope}");
        let low_pass = Section::new("s", Shape::LowPass, 3.0, Some(2.5), 1.0, None).unwrap().ideal();
        assert!((low_pass.group_delay(0.0) - 1.0 / (2.5 * 3.0)).abs() < 1e-15);
        assert!((section(Shape::FirstOrderAllPass, None).ideal().group_delay(0.0) - 2.0 / 3.0).abs() < 1e-15);
        // At the null itself only the poles count: Q/w0 times 2 at w0.
        let null = section(Shape::Notch, Some(3.0)).ideal();
        assert!((null.group_delay(3.0) - 2.0 * 2.5 / 3.0).abs() < 1e-12);
    }

    #[test]
    fn gains_hold_where_the_shape_says() {
        let g = |shape, w: f64| section(shape, None).ideal().value(w);
        assert!((g(Shape::LowPass, 0.0).re + 1.75).abs() < 1e-12);
        assert!((g(Shape::HighPass, 1e9).re + 1.75).abs() < 1e-12);
        assert!((g(Shape::BandPass, 3.0).re + 1.75).abs() < 1e-12);
        assert!((g(Shape::AllPass, 0.0).re + 1.75).abs() < 1e-12);
        assert!((section(Shape::Notch, Some(5.0)).ideal().value(0.0).re + 1.75).abs() < 1e-12);
        assert!((section(Shape::Notch, Some(2.0)).ideal().value(1e9).re + 1.75).abs() < 1e-12);
    }

    #[test]
    fn impossible_sections_are_refused() {
        let new = |shape, w0, q, gain, wz| Section::new("s", shape, w0, q, gain, wz).unwrap_err().to_string();
        assert_eq!(new(Shape::LowPass, -1.0, Some(1.0), 1.0, None), "w0 must be a positive finite number, found -1");
        assert_eq!(
            new(Shape::LowPass, 1.0, Some(f64::NAN), 1.0, None),
            "q must be a positive finite number, found NaN"
        );
        assert_eq!(new(Shape::LowPass, 1.0, None, 1.0, None), "a low-pass section needs a q (or two poles)");
        assert_eq!(
            new(Shape::FirstOrderLowPass, 1.0, Some(1.0), 1.0, None),
            "a first-order low-pass section has no q: leave it out"
        );
        assert_eq!(
            new(Shape::HighPass, 1.0, Some(1.0), 1.0, Some(2.0)),
            "a high-pass section has no fz: leave it out, or ask for a notch"
        );
        assert_eq!(new(Shape::HighPass, 1.0, Some(1.0), 0.0, None), "gain must be finite and not zero, found 0");
    }
}
