//! Low-pass prototypes: the poles and zeros of each approximation in its own normalisation.

use std::f64::consts::{LN_10, PI};

use num_complex::Complex64;
use serde::{Deserialize, Serialize};

use super::elliptic;
use super::polynomial::{Wide, roots};

/// How an ideal rectangular pass band is approached.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, Serialize, Deserialize)]
pub enum Approximation {
    /// Maximally flat magnitude (S. Butterworth, 1930).
    Butterworth,
    /// Equal ripple in the pass band.
    Chebyshev,
    /// Flat pass band, equal ripple in the stop band.
    InverseChebyshev,
    /// Equal ripple in both bands (W. Cauer, 1931).
    Elliptic,
    /// Maximally flat delay (W. E. Thomson, 1949).
    Bessel,
    /// Taylor series of the Gaussian magnitude: |H|² = 1/Σ Ω^2k/k!, k to the order.
    Gaussian,
    /// Steepest fall with a monotonic magnitude (A. Papoulis, 1958), from Legendre polynomials.
    Legendre,
    /// The square of a Butterworth low-pass or high-pass of half the order (S. Linkwitz and R. Riley, 1976).
    LinkwitzRiley,
}

impl Approximation {
    /// Every approximation, in the order in which they are listed.
    pub const ALL: [Approximation; 8] = [
        Approximation::Butterworth,
        Approximation::Chebyshev,
        Approximation::InverseChebyshev,
        Approximation::Elliptic,
        Approximation::Bessel,
        Approximation::Gaussian,
        Approximation::Legendre,
        Approximation::LinkwitzRiley,
    ];

    /// The name in running text, such as `inverse Chebyshev`.
    pub fn name(self) -> &'static str {
        match self {
            Approximation::Butterworth => "Butterworth",
            Approximation::Chebyshev => "Chebyshev",
            Approximation::InverseChebyshev => "inverse Chebyshev",
            Approximation::Elliptic => "elliptic",
            Approximation::Bessel => "Bessel",
            Approximation::Gaussian => "Gaussian",
            Approximation::Legendre => "Legendre-Papoulis",
            Approximation::LinkwitzRiley => "Linkwitz-Riley",
        }
    }

    /// Whether the ripple of the pass band sets the poles.
    pub fn has_ripple(self) -> bool {
        matches!(self, Approximation::Chebyshev | Approximation::Elliptic)
    }

    /// Whether the attenuation of the stop band sets poles and zeros.
    pub fn has_attenuation(self) -> bool {
        matches!(self, Approximation::InverseChebyshev | Approximation::Elliptic)
    }

    /// Whether there is a filter of this order.
    pub fn has_order(self, order: usize) -> bool {
        order > 0 && (self != Approximation::LinkwitzRiley || order.is_multiple_of(2))
    }

    /// The low-pass prototype of an order, in the approximation's own normalisation: half power at 1 (Butterworth,
    /// Legendre), half amplitude at 1 (Linkwitz-Riley), end of the ripple band at 1 (Chebyshev, elliptic), start of the
    /// stop band at 1 (inverse Chebyshev), a delay of 1 s at DC (Bessel), |H|² = 1/Σ Ω^2k/k! (Gaussian).
    ///
    /// `order` from 1 to [`HIGHEST_ORDER`], even for Linkwitz-Riley; `ripple` and `attenuation` in dB, where
    /// [`has_ripple`](Approximation::has_ripple) and [`has_attenuation`](Approximation::has_attenuation) say so larger
    /// than 0, the ripple smaller than the attenuation. The others do not look at them.
    pub fn prototype(self, order: usize, ripple: f64, attenuation: f64) -> Prototype {
        match self {
            Approximation::Butterworth => Prototype::of_poles(butterworth(order)),
            Approximation::Chebyshev => chebyshev(order, ripple),
            Approximation::InverseChebyshev => inverse_chebyshev(order, attenuation),
            Approximation::Elliptic => elliptic::prototype(order, ripple, attenuation),
            Approximation::Bessel => Prototype::of_roots(roots(&bessel_polynomial(order))),
            Approximation::Gaussian => of_squares(&gaussian_polynomial(order)),
            Approximation::Legendre => {
                let mut polynomial = legendre_polynomial(order);
                polynomial[0] = Wide::whole(1);
                of_squares(&polynomial)
            }
            Approximation::LinkwitzRiley => {
                let half = butterworth(order / 2);
                let mut poles: Vec<Pole> = half.iter().filter(|p| matches!(p, Pole::Pair(_))).copied().collect();
                poles.extend(poles.clone());
                poles.extend((order % 4 == 2).then_some(Pole::Reals(-1.0, -1.0)));
                Prototype::of_poles(poles)
            }
        }
    }
}

/// No prototype has a higher order.
pub const HIGHEST_ORDER: usize = 24;

/// One or two poles that go into one section.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Pole {
    /// A complex pair, by its member with positive imaginary part.
    Pair(Complex64),
    /// Two real poles, both negative.
    Reals(f64, f64),
    /// One real pole, negative.
    Real(f64),
}

impl Pole {
    /// How many poles these are.
    pub fn count(self) -> usize {
        if matches!(self, Pole::Real(_)) { 1 } else { 2 }
    }
}

/// A low-pass prototype: poles, zeros on the imaginary axis, and as many zeros at infinity as are missing.
#[derive(Clone, Debug, PartialEq)]
pub struct Prototype {
    /// The poles.
    pub poles: Vec<Pole>,
    /// Frequencies of the pairs of zeros on the imaginary axis.
    pub zeros: Vec<f64>,
    /// How far the largest magnitude lies above that at DC, dB.
    pub peak_db: f64,
    /// From which frequency on the attenuation of the stop band holds, where it is part of the approximation.
    pub stop_edge: Option<f64>,
}

impl Prototype {
    fn of_poles(poles: Vec<Pole>) -> Prototype {
        Prototype { poles, zeros: Vec::new(), peak_db: 0.0, stop_edge: None }
    }

    fn of_roots((upper, real): (Vec<Complex64>, Vec<f64>)) -> Prototype {
        let pairs = upper.into_iter().map(Pole::Pair);
        Prototype::of_poles(pairs.chain(real.into_iter().map(Pole::Real)).collect())
    }

    /// The order: how many poles it has.
    pub fn order(&self) -> usize {
        self.poles.iter().map(|pole| pole.count()).sum()
    }

    /// How far the magnitude at a frequency lies under its largest, dB; infinite at a zero.
    pub fn attenuation(&self, frequency: f64) -> f64 {
        let s = Complex64::new(0.0, frequency);
        let mut db = self.peak_db;
        for pole in &self.poles {
            let ratio = match *pole {
                Pole::Pair(p) => ((s - p) / p.norm()).norm() * ((s - p.conj()) / p.norm()).norm(),
                Pole::Reals(a, b) => ((s - a) / a).norm() * ((s - b) / b).norm(),
                Pole::Real(a) => ((s - a) / a).norm(),
            };
            db += 20.0 * ratio.log10();
        }
        for zero in &self.zeros {
            db -= 20.0 * ((1.0 - frequency / zero) * (1.0 + frequency / zero)).abs().log10();
        }
        db
    }

    /// The smallest attenuation from a frequency of the transition or stop band upwards, dB under the largest magnitude.
    pub fn attenuation_from(&self, frequency: f64) -> f64 {
        match self.stop_edge.filter(|edge| !self.zeros.is_empty() && frequency >= *edge) {
            Some(edge) => self.attenuation(edge),
            None => self.attenuation(frequency),
        }
    }

    /// The frequency of the transition band at which the attenuation under the largest magnitude is `db`, larger than
    /// that of the ripple band; `None` where the approximation has none.
    ///
    /// Bisection to rounding between `from`, the end of the ripple band, and the start of the stop band.
    pub fn frequency_at(&self, db: f64, from: f64) -> Option<f64> {
        let (mut low, mut high) = (from, self.stop_edge.unwrap_or(from.max(1.0)));
        if self.attenuation(low) > db {
            return None;
        }
        while self.attenuation(high) < db {
            if self.stop_edge.is_some() || high > 1e12 {
                return None;
            }
            high *= 2.0;
        }
        loop {
            let middle = if low > 0.0 { (low * high).sqrt() } else { high / 2.0 };
            if middle <= low || middle >= high || high - low <= 1e-16 * high {
                return Some(middle);
            }
            if self.attenuation(middle) < db {
                low = middle
            } else {
                high = middle
            }
            if high < 1e-12 {
                return None;
            }
        }
    }

    /// The prototype with all frequencies divided by `unit`, so that this frequency becomes 1.
    pub fn scaled(&self, unit: f64) -> Prototype {
        let pole = |pole: &Pole| match *pole {
            Pole::Pair(p) => Pole::Pair(p / unit),
            Pole::Reals(a, b) => Pole::Reals(a / unit, b / unit),
            Pole::Real(a) => Pole::Real(a / unit),
        };
        Prototype {
            poles: self.poles.iter().map(pole).collect(),
            zeros: self.zeros.iter().map(|zero| zero / unit).collect(),
            peak_db: self.peak_db,
            stop_edge: self.stop_edge.map(|edge| edge / unit),
        }
    }
}

/// Power ratio less one, of a level in dB.
pub(super) fn excess(db: f64) -> f64 {
    (db * LN_10 / 10.0).exp_m1()
}

/// The angles (2i − 1)π/2n of the pairs.
fn angles(order: usize) -> impl Iterator<Item = f64> {
    (1..=order / 2).map(move |i| (2 * i - 1) as f64 * PI / (2 * order) as f64)
}

fn butterworth(order: usize) -> Vec<Pole> {
    let pairs = angles(order).map(|t| Pole::Pair(Complex64::new(-t.sin(), t.cos())));
    pairs.chain((order % 2 == 1).then_some(Pole::Real(-1.0))).collect()
}

/// The poles of the Chebyshev approximation with ε² = `pass`: on an ellipse.
fn ellipse(order: usize, pass: f64) -> Vec<Pole> {
    let mu = (1.0 / pass.sqrt()).asinh() / order as f64;
    let pairs = angles(order).map(|t| Pole::Pair(Complex64::new(-mu.sinh() * t.sin(), mu.cosh() * t.cos())));
    pairs.chain((order % 2 == 1).then_some(Pole::Real(-mu.sinh()))).collect()
}

fn chebyshev(order: usize, ripple: f64) -> Prototype {
    let peak_db = if order.is_multiple_of(2) { ripple } else { 0.0 };
    Prototype { peak_db, ..Prototype::of_poles(ellipse(order, excess(ripple))) }
}

/// The reciprocals of the Chebyshev poles for ε² = 1/(A² − 1), and zeros at 1/cos.
fn inverse_chebyshev(order: usize, attenuation: f64) -> Prototype {
    let inverted = |pole| match pole {
        Pole::Pair(p) => Pole::Pair(p.inv().conj()),
        Pole::Reals(a, b) => Pole::Reals(1.0 / a, 1.0 / b),
        Pole::Real(a) => Pole::Real(1.0 / a),
    };
    let poles = ellipse(order, 1.0 / excess(attenuation)).into_iter().map(inverted).collect();
    let zeros = angles(order).map(|t| 1.0 / t.cos()).collect();
    Prototype { poles, zeros, peak_db: 0.0, stop_edge: Some(1.0) }
}

/// The reverse Bessel polynomial: coefficients (2n − k)!/(2^(n−k) k! (n − k)!) by ascending powers.
fn bessel_polynomial(order: usize) -> Vec<Wide> {
    let n = order as i128;
    let mut coefficients = vec![1i128];
    for k in (0..n).rev() {
        let above = coefficients[coefficients.len() - 1];
        coefficients.push(above * (2 * n - k) * (k + 1) / (2 * (n - k)));
    }
    coefficients.into_iter().rev().map(Wide::whole).collect()
}

/// n! Σ x^k/k!, k = 0 to n, in x = Ω².
fn gaussian_polynomial(order: usize) -> Vec<Wide> {
    let mut coefficients = vec![1i128];
    for k in (1..=order as i128).rev() {
        coefficients.push(coefficients[coefficients.len() - 1] * k);
    }
    coefficients.into_iter().rev().map(Wide::whole).collect()
}

/// The polynomial L(x), x = Ω², of Papoulis: zero at 0, 1 at 1, of the given degree.
///
/// A. Papoulis, Optimum Filters with Monotonic Response, Proceedings of the IRE 46, 1958 (odd orders), and On Monotonic
/// Response Filters, 47, 1959 (even orders), written with shifted Legendre polynomials, whose coefficients are whole.
fn legendre_polynomial(order: usize) -> Vec<Wide> {
    let k = (order - 1) / 2;
    let is_even = order.is_multiple_of(2);
    let mut sum = vec![0i128; k + 1];
    for i in (0..=k).filter(|i| !is_even || i % 2 == k % 2) {
        // The coefficient of t^m is (−1)^(i+m) C(i, m) C(i+m, m); each from the one before.
        let mut term = if i % 2 == 0 { 1i128 } else { -1 };
        for (m, total) in sum.iter_mut().enumerate().take(i + 1) {
            *total += (2 * i as i128 + 1) * term;
            let (i, m) = (i as i128, m as i128);
            term = -term * (i - m) * (i + m + 1) / ((m + 1) * (m + 1));
        }
    }
    let mut square = vec![0i128; 2 * k + 1];
    for (a, x) in sum.iter().enumerate() {
        for (b, y) in sum.iter().enumerate() {
            square[a + b] += x * y;
        }
    }
    let (shift, factor, divisor) = if is_even { (1, 4, (k + 1) * (k + 2)) } else { (0, 1, (k + 1) * (k + 1)) };
    let mut integral = vec![Wide::whole(0); order + 1];
    for (m, c) in square.into_iter().enumerate() {
        let power = m + shift + 1;
        integral[power] = Wide::whole(factor * c).over(divisor as f64).over(power as f64);
    }
    integral
}

/// The prototype whose D(s) D(−s) is a polynomial in x = −s²: the roots with negative real part.
fn of_squares(polynomial: &[Wide]) -> Prototype {
    let (upper, real) = roots(polynomial);
    let pairs = upper.into_iter().map(|x| {
        let s = (-x).sqrt();
        Complex64::new(-s.re.abs(), s.im.abs())
    });
    let mut pairs: Vec<Complex64> = pairs.collect();
    pairs.sort_by(|a, b| a.im.total_cmp(&b.im));
    Prototype::of_roots((pairs, real.into_iter().map(|x| -(-x).sqrt()).collect()))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn rounded(list: &[Wide]) -> Vec<f64> {
        list.iter().map(|c| c.rounded()).collect()
    }

    #[test]
    fn polynomials_are_those_of_the_tables() {
        // F. F. Kuo, Network Analysis and Synthesis, table of L_n(ω²) (from memory), orders 2 to 6.
        let tables: [&[f64]; 5] = [
            &[0.0, 0.0, 1.0],
            &[0.0, 1.0, -3.0, 3.0],
            &[0.0, 0.0, 3.0, -8.0, 6.0],
            &[0.0, 1.0, -8.0, 28.0, -40.0, 20.0],
            &[0.0, 0.0, 6.0, -40.0, 105.0, -120.0, 50.0],
        ];
        for (k, table) in tables.iter().enumerate() {
            assert!(rounded(&legendre_polynomial(k + 2)).iter().zip(*table).all(|(a, b)| (a - b).abs() < 1e-12));
        }
        // The reverse Bessel polynomials of order 3 and 4: H. Krall and O. Frink, Transactions of the AMS 65, 1949.
        assert_eq!(format!("{:?}", rounded(&bessel_polynomial(3))), "[15.0, 15.0, 6.0, 1.0]");
        assert_eq!(format!("{:?}", rounded(&bessel_polynomial(4))), "[105.0, 105.0, 45.0, 10.0, 1.0]");
    }

    #[test]
    fn papoulis_polynomials_end_at_one_and_never_fall() {
        for order in 1..=HIGHEST_ORDER {
            let p = Approximation::Legendre.prototype(order, 0.0, 0.0);
            assert_eq!(p.order(), order);
            assert!((p.attenuation(1.0) - 10.0 * 2f64.log10()).abs() < 1e-9, "{order} {}", p.attenuation(1.0));
            let levels: Vec<f64> = (0..=400).map(|i| p.attenuation(f64::from(i) / 200.0)).collect();
            assert!(levels.windows(2).all(|pair| pair[1] >= pair[0] - 1e-9), "{order}");
        }
    }

    #[test]
    fn every_approximation_has_the_poles_of_its_order() {
        for approximation in Approximation::ALL {
            for order in (1..=HIGHEST_ORDER).filter(|n| approximation.has_order(*n)) {
                let p = approximation.prototype(order, 0.5, 60.0);
                assert_eq!(p.order(), order, "{approximation:?}");
                assert!(p.attenuation(0.0).abs() <= p.peak_db + 1e-9);
                let stable = p.poles.iter().all(|pole| match *pole {
                    Pole::Pair(p) => p.re < 0.0 && p.im > 0.0,
                    Pole::Reals(a, b) => a < 0.0 && b < 0.0,
                    Pole::Real(a) => a < 0.0,
                });
                assert!(stable, "{approximation:?} {order} {:?}", p.poles);
            }
        }
    }
}
