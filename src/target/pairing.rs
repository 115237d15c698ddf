//! From poles and zeros to sections: which zeros go with which poles.

use super::approximation::{Band, Pole, Roots};
use super::section::{Biquad, Section, SectionError, Shape};

/// The pole figures of one section.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PoleFigures {
    /// Pole frequency, rad/s.
    pub w0: f64,
    /// Pole quality factor; `None` for one real pole.
    pub q: Option<f64>,
}

impl From<Pole> for PoleFigures {
    fn from(pole: Pole) -> PoleFigures {
        match pole {
            Pole::Pair(p) => PoleFigures { w0: p.norm(), q: Some(p.norm() / (-2.0 * p.re)) },
            Pole::Reals(a, b) => {
                let (w0, q) = Section::from_real_poles(-a, -b);
                PoleFigures { w0, q: Some(q) }
            }
            Pole::Real(a) => PoleFigures { w0: -a, q: None },
        }
    }
}

/// The zeros of one section.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Zeros {
    /// None but at infinity.
    AtInfinity,
    /// As many at the origin as there are poles.
    AtOrigin,
    /// One at the origin, one at infinity.
    OfBandPass,
    /// A pair on the imaginary axis, at this frequency in rad/s.
    Pair(f64),
}

/// Poles and zeros as they are put together into sections, both by rising frequency.
///
/// Any set of poles of second order can take any of the zeros of second order; sections of first order are settled.
#[derive(Clone, Debug, PartialEq)]
pub struct Parts {
    /// Poles of second order, by rising frequency, then rising Q.
    pub poles: Vec<PoleFigures>,
    /// As many sets of zeros: pairs by rising frequency, then the others.
    pub zeros: Vec<Zeros>,
    /// Sections of first order.
    pub first_order: Vec<(PoleFigures, Zeros)>,
}

/// Real poles further apart than this Q allows go into two sections of first order.
pub const LOWEST_Q: f64 = 0.01;

impl Parts {
    /// Takes poles and zeros apart. Two real poles share a section of second order unless its Q were below
    /// [`LOWEST_Q`]; then a band-pass gets a first-order high-pass at the lower and a low-pass at the upper one.
    pub fn new(roots: &Roots) -> Parts {
        let mut pairs: Vec<f64> = roots.zeros.clone();
        pairs.sort_by(f64::total_cmp);
        let mut at_origin = roots.at_origin;
        let at_infinity = roots.order() - 2 * pairs.len() - at_origin;
        let is_band_pass = at_origin > 0 && at_infinity > 0;
        let (mut poles, mut first_order) = (Vec::new(), Vec::new());
        for &pole in &roots.poles {
            let figures = PoleFigures::from(pole);
            match pole {
                Pole::Real(_) => {
                    let zeros = if at_origin > 0 { Zeros::AtOrigin } else { Zeros::AtInfinity };
                    at_origin = at_origin.saturating_sub(1);
                    first_order.push((figures, zeros));
                }
                Pole::Reals(a, b) if is_band_pass && figures.q.is_some_and(|q| q < LOWEST_Q) => {
                    let [low, high] = [a.max(b), a.min(b)].map(|p| PoleFigures { w0: -p, q: None });
                    first_order.extend([(low, Zeros::AtOrigin), (high, Zeros::AtInfinity)]);
                    at_origin -= 1;
                }
                _ => poles.push(figures),
            }
        }
        poles.sort_by(|a, b| a.w0.total_cmp(&b.w0).then(a.q.unwrap_or(0.0).total_cmp(&b.q.unwrap_or(0.0))));
        let mut zeros: Vec<Zeros> = pairs.into_iter().map(Zeros::Pair).collect();
        let left = poles.len().saturating_sub(zeros.len());
        let rest = match (is_band_pass, at_origin) {
            (true, _) => Zeros::OfBandPass,
            (false, 0) => Zeros::AtInfinity,
            (false, _) => Zeros::AtOrigin,
        };
        zeros.extend(std::iter::repeat_n(rest, left));
        Parts { poles, zeros, first_order }
    }

    /// How many sections there are.
    pub fn count(&self) -> usize {
        self.poles.len() + self.first_order.len()
    }

    /// For each set of poles the set of zeros by the old rule: the poles of highest Q choose first, and take the pair of
    /// zeros that is nearest in the ratio of frequencies; the others are left for the lowest Q.
    pub fn nearest_zeros(&self) -> Vec<usize> {
        let mut by_q: Vec<usize> = (0..self.poles.len()).collect();
        by_q.sort_by(|&a, &b| self.poles[b].q.unwrap_or(0.0).total_cmp(&self.poles[a].q.unwrap_or(0.0)));
        let mut free: Vec<usize> = (0..self.zeros.len()).collect();
        let mut taken = vec![0; self.poles.len()];
        for pole in by_q {
            let distance = |zero: usize| match self.zeros[zero] {
                Zeros::Pair(wz) => (wz / self.poles[pole].w0).ln().abs(),
                _ => f64::INFINITY,
            };
            let place = (0..free.len()).min_by(|&a, &b| distance(free[a]).total_cmp(&distance(free[b])));
            if let Some(place) = place {
                taken[pole] = free.remove(place);
            }
        }
        taken
    }
}

/// The section of poles and zeros with a gain as [`Shape`] defines it.
///
/// # Errors
/// Figures that are not finite, or a gain of zero.
pub fn section_of(name: &str, poles: PoleFigures, zeros: Zeros, gain: f64) -> Result<Section, SectionError> {
    let (shape, wz) = match (poles.q, zeros) {
        (None, Zeros::AtOrigin) => (Shape::FirstOrderHighPass, None),
        (None, _) => (Shape::FirstOrderLowPass, None),
        (Some(_), Zeros::AtInfinity) => (Shape::LowPass, None),
        (Some(_), Zeros::AtOrigin) => (Shape::HighPass, None),
        (Some(_), Zeros::OfBandPass) => (Shape::BandPass, None),
        (Some(_), Zeros::Pair(wz)) => (Shape::Notch, Some(wz)),
    };
    Section::new(name, shape, poles.w0, poles.q, gain, wz)
}

/// The magnitude of a response where the prototype of a filter has DC.
pub fn magnitude_at_reference(h: &Biquad, band: Band) -> f64 {
    let order = if h.den[2].abs() > 0.0 { 2 } else { 1 };
    match band {
        Band::LowPass(_) | Band::BandStop(..) => (h.num[0] / h.den[0]).abs(),
        Band::HighPass(_) => (h.num[order] / h.den[order]).abs(),
        Band::BandPass(..) => h.value(band.centre()).norm(),
    }
}
