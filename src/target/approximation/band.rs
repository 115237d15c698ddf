//! The four responses, and the transformations that lead to them from a low-pass prototype.

use num_complex::Complex64;

use super::prototype::{Pole, Prototype};

/// A response with its pass-band edges, rad/s.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Band {
    /// Low-pass: the upper edge of the pass band.
    LowPass(f64),
    /// High-pass: the lower edge of the pass band.
    HighPass(f64),
    /// Band-pass: lower and upper edge of the pass band.
    BandPass(f64, f64),
    /// Band-stop: upper edge of the lower pass band, and lower edge of the upper one.
    BandStop(f64, f64),
}

/// Poles and zeros of a filter, rad/s. Zeros that are missing lie at infinity.
#[derive(Clone, Debug, PartialEq)]
pub struct Roots {
    /// The poles.
    pub poles: Vec<Pole>,
    /// Frequencies of the pairs of zeros on the imaginary axis.
    pub zeros: Vec<f64>,
    /// How many zeros lie at the origin.
    pub at_origin: usize,
}

impl Roots {
    /// How many poles there are.
    pub fn order(&self) -> usize {
        self.poles.iter().map(|pole| pole.count()).sum()
    }
}

impl Band {
    /// The name in running text.
    pub fn name(self) -> &'static str {
        match self {
            Band::LowPass(_) => "low-pass",
            Band::HighPass(_) => "high-pass",
            Band::BandPass(..) => "band-pass",
            Band::BandStop(..) => "band-stop",
        }
    }

    /// Whether each pole of the prototype makes two.
    pub fn doubles(self) -> bool {
        matches!(self, Band::BandPass(..) | Band::BandStop(..))
    }

    /// The centre, the geometric mean of the edges; for one edge that edge.
    pub fn centre(self) -> f64 {
        match self {
            Band::LowPass(edge) | Band::HighPass(edge) => edge,
            Band::BandPass(low, high) | Band::BandStop(low, high) => low.sqrt() * high.sqrt(),
        }
    }

    /// The prototype's frequency, 1 at the edges, for a frequency of the filter: w/e, e/w, |w² − w0²|/(B w), and the
    /// reciprocal of the last for a band-stop.
    pub fn to_prototype(self, w: f64) -> f64 {
        // (w − w0)(w + w0) keeps its digits about the centre.
        let off = |low: f64, high: f64| {
            let centre = self.centre();
            ((w - centre) * (w + centre)).abs() / ((high - low) * w)
        };
        match self {
            Band::LowPass(edge) => w / edge,
            Band::HighPass(edge) => edge / w,
            Band::BandPass(low, high) => off(low, high),
            Band::BandStop(low, high) => 1.0 / off(low, high),
        }
    }

    /// The frequencies of the filter, rising, for one of the prototype: one for low-pass and high-pass, otherwise two.
    pub fn from_prototype(self, frequency: f64) -> Vec<f64> {
        let split = |bandwidth: f64| {
            let upper = (bandwidth + bandwidth.hypot(2.0 * self.centre())) / 2.0;
            vec![self.centre() / upper * self.centre(), upper]
        };
        match self {
            Band::LowPass(edge) => vec![edge * frequency],
            Band::HighPass(edge) => vec![edge / frequency],
            Band::BandPass(low, high) => split((high - low) * frequency),
            Band::BandStop(low, high) => split((high - low) / frequency),
        }
    }

    /// Poles and zeros of the filter: s → s/e, e/s, (s² + w0²)/(B s), B s/(s² + w0²).
    pub fn transform(self, prototype: &Prototype) -> Roots {
        let missing = prototype.order() - 2 * prototype.zeros.len();
        match self {
            Band::LowPass(edge) => {
                let scaled = prototype.scaled(1.0 / edge);
                Roots { poles: scaled.poles, zeros: scaled.zeros, at_origin: 0 }
            }
            Band::HighPass(edge) => Roots {
                poles: prototype.poles.iter().map(|pole| inverted(*pole, edge)).collect(),
                zeros: prototype.zeros.iter().map(|zero| edge / zero).collect(),
                at_origin: missing,
            },
            Band::BandPass(low, high) => Roots {
                poles: prototype.poles.iter().flat_map(|pole| self.split(*pole, high - low)).collect(),
                zeros: prototype.zeros.iter().flat_map(|zero| self.from_prototype(*zero)).collect(),
                at_origin: missing,
            },
            Band::BandStop(low, high) => Roots {
                poles: prototype.poles.iter().flat_map(|pole| self.split(inverted(*pole, 1.0), high - low)).collect(),
                zeros: (prototype.zeros.iter().flat_map(|zero| self.from_prototype(*zero)))
                    .chain(std::iter::repeat_n(self.centre(), missing))
                    .collect(),
                at_origin: 0,
            },
        }
    }

    /// The roots of s² − B p s + w0² for the poles p.
    fn split(self, pole: Pole, bandwidth: f64) -> Vec<Pole> {
        let w0 = self.centre();
        let real = |p: f64| {
            let half = bandwidth * p / 2.0;
            if half.abs() < w0 {
                Pole::Pair(Complex64::new(half, ((w0 - half.abs()) * (w0 + half.abs())).sqrt()))
            } else {
                let far = half - ((half.abs() - w0) * (half.abs() + w0)).sqrt();
                Pole::Reals(w0 / far * w0, far)
            }
        };
        match pole {
            Pole::Real(p) => vec![real(p)],
            Pole::Reals(a, b) => vec![real(a), real(b)],
            Pole::Pair(p) => {
                let half = p * (bandwidth / 2.0);
                let root = (half * half - w0 * w0).sqrt();
                // The sum that does not cancel; the other root follows from the product w0².
                let far = if (half.conj() * root).re >= 0.0 { half + root } else { half - root };
                [far, w0 / far * w0].map(|r| Pole::Pair(Complex64::new(r.re, r.im.abs()))).to_vec()
            }
        }
    }
}

fn inverted(pole: Pole, edge: f64) -> Pole {
    match pole {
        Pole::Pair(p) => Pole::Pair((p.inv() * edge).conj()),
        Pole::Reals(a, b) => Pole::Reals(edge / a, edge / b),
        Pole::Real(a) => Pole::Real(edge / a),
    }
}
