//! Roots of real polynomials to full double precision.
//!
//! Aberth's simultaneous iteration (O. Aberth, Mathematics of Computation 27, 1973). The polynomial is evaluated in
//! double-double arithmetic (T. J. Dekker, Numerische Mathematik 18, 1971), because the coefficients of the
//! approximations alternate and cancel: in plain double precision order 12 would cost up to eight digits.

use std::f64::consts::TAU;

use num_complex::Complex64;

/// A number as the unevaluated sum of two, about 32 decimal digits.
#[derive(Clone, Copy, Debug, Default)]
pub(super) struct Wide {
    high: f64,
    low: f64,
}

impl Wide {
    fn sum(a: f64, b: f64) -> Wide {
        let high = a + b;
        let part = high - a;
        Wide { high, low: (a - (high - part)) + (b - part) }
    }

    fn product(a: f64, b: f64) -> Wide {
        let high = a * b;
        Wide { high, low: a.mul_add(b, -high) }
    }

    fn plus(self, other: Wide) -> Wide {
        let (high, low) = (Wide::sum(self.high, other.high), Wide::sum(self.low, other.low));
        let first = Wide::sum(high.high, high.low + low.high);
        Wide::sum(first.high, first.low + low.low)
    }

    fn times(self, factor: f64) -> Wide {
        let product = Wide::product(self.high, factor);
        Wide::sum(product.high, self.low.mul_add(factor, product.low))
    }

    /// The exact whole number.
    pub fn whole(number: i128) -> Wide {
        let high = number as f64;
        Wide::sum(high, (number - high as i128) as f64)
    }

    /// The quotient by a plain number.
    pub fn over(self, divisor: f64) -> Wide {
        let quotient = self.high / divisor;
        let rest = self.plus(Wide::product(-quotient, divisor));
        Wide::sum(quotient, (rest.high + rest.low) / divisor)
    }

    /// The nearest plain number.
    pub fn rounded(self) -> f64 {
        self.high + self.low
    }
}

/// P(z) and P'(z) by Horner's rule, real coefficients by ascending powers.
fn evaluated(coefficients: &[Wide], z: Complex64) -> (Complex64, Complex64) {
    let (mut re, mut im) = (Wide::default(), Wide::default());
    let mut slope = Complex64::new(0.0, 0.0);
    for c in coefficients.iter().rev() {
        slope = slope * z + Complex64::new(re.rounded(), im.rounded());
        let next = re.times(z.re).plus(im.times(-z.im)).plus(*c);
        im = re.times(z.im).plus(im.times(z.re));
        re = next;
    }
    (Complex64::new(re.rounded(), im.rounded()), slope)
}

/// The roots with positive imaginary part, and the real ones, of a polynomial without multiple roots; each to rounding.
///
/// `coefficients` by ascending powers, the first and the last not zero.
pub(super) fn roots(coefficients: &[Wide]) -> (Vec<Complex64>, Vec<f64>) {
    const ROUNDS: usize = 500;
    const SETTLED: f64 = 4e-16;
    let degree = coefficients.len().saturating_sub(1);
    let (Some(first), Some(last)) = (coefficients.first(), coefficients.last()) else { return Default::default() };
    let radius = (first.rounded() / last.rounded()).abs().powf(1.0 / degree.max(1) as f64);
    // Not symmetric about the real axis: otherwise a pair could never leave it.
    let start = |k: usize| Complex64::from_polar(radius, TAU * (k as f64 + 0.37) / degree as f64);
    let mut z: Vec<Complex64> = (0..degree).map(start).collect();
    for _ in 0..ROUNDS {
        let mut largest = 0.0f64;
        for k in 0..degree {
            let (value, slope) = evaluated(coefficients, z[k]);
            let ratio = value / slope;
            let others: Complex64 = (0..degree).filter(|&m| m != k).map(|m| (z[k] - z[m]).inv()).sum();
            let step = ratio / (1.0 - ratio * others);
            if step.re.is_finite() && step.im.is_finite() {
                z[k] -= step;
                largest = largest.max(step.norm() / z[k].norm());
            }
        }
        if largest < SETTLED {
            break;
        }
    }
    let (mut upper, mut real) = (Vec::new(), Vec::new());
    for root in z {
        if root.im.abs() <= 1e-11 * root.norm() {
            real.push(root.re);
        } else if root.im > 0.0 {
            upper.push(root);
        }
    }
    upper.sort_by(|a, b| a.im.total_cmp(&b.im));
    real.sort_by(f64::total_cmp);
    (upper, real)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn known_roots_are_found() {
        // (x - 1)(x - 2)...(x - 20), Wilkinson's polynomial, whose roots are lost in plain double precision.
        let mut p = vec![1i128];
        for root in 1..=20 {
            let mut next = vec![0; p.len() + 1];
            for (k, c) in p.iter().enumerate() {
                next[k + 1] += c;
                next[k] -= root * c;
            }
            p = next;
        }
        let wide: Vec<Wide> = p.into_iter().map(Wide::whole).collect();
        let (upper, real) = roots(&wide);
        assert!(upper.is_empty() && real.len() == 20, "{upper:?} {real:?}");
        for (k, root) in real.iter().enumerate() {
            assert!((root / (k + 1) as f64 - 1.0).abs() < 1e-12, "{root}");
        }
        // x^4 + 4 = (x^2 - 2 x + 2)(x^2 + 2 x + 2).
        let (upper, real) = roots(&[4, 0, 0, 0, 1].map(Wide::whole));
        assert!(real.is_empty() && upper.len() == 2);
        assert!(upper.iter().all(|z| (z.re.abs() - 1.0).abs() < 1e-15 && (z.im - 1.0).abs() < 1e-15), "{upper:?}");
    }

    #[test]
    fn wide_numbers_keep_what_double_precision_loses() {
        let third = Wide::whole(1).over(3.0);
        let rest = third.times(3.0).plus(Wide::whole(-1));
        assert!(rest.rounded().abs() < 1e-31, "{}", rest.rounded());
        let big = 123_456_789_012_345_678_901_234_567i128;
        assert_eq!(Wide::whole(big).plus(Wide::whole(-big + 7)).rounded().to_string(), "7");
    }
}
