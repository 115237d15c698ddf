//! Polynomials in slot admittances with integer coefficients: exact, so that "does not depend on" is a proof.

use std::collections::BTreeMap;

/// A polynomial in a fixed number of variables.
///
/// In the circuit engine variable k is the admittance of slot k: its conductance in siemens for a resistor, its
/// capacitance in farads for a capacitor (the power of s is kept apart).
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Polynomial {
    /// Exponents by variable, and the coefficient, which is never zero.
    terms: BTreeMap<Vec<u8>, i64>,
}

impl Polynomial {
    /// The polynomial without a term.
    pub fn zero() -> Polynomial {
        Polynomial::default()
    }

    /// A constant over `variables` variables.
    pub fn constant(value: i64, variables: usize) -> Polynomial {
        Polynomial::from_terms([(vec![0; variables], value)])
    }

    /// One variable, to the first power.
    pub fn variable(index: usize, variables: usize) -> Polynomial {
        let mut exponents = vec![0; variables];
        exponents[index] = 1;
        Polynomial::from_terms([(exponents, 1)])
    }

    /// One term: a coefficient times variables to the given powers.
    pub fn monomial(exponents: &[u8], coefficient: i64) -> Polynomial {
        Polynomial::from_terms([(exponents.to_vec(), coefficient)])
    }

    fn from_terms(terms: impl IntoIterator<Item = (Vec<u8>, i64)>) -> Polynomial {
        let mut sum = Polynomial::zero();
        for (exponents, coefficient) in terms {
            sum.add_term(exponents, coefficient);
        }
        sum
    }

    fn add_term(&mut self, exponents: Vec<u8>, coefficient: i64) {
        let sum = self.terms.get(&exponents).copied().unwrap_or(0) + coefficient;
        if sum == 0 {
            self.terms.remove(&exponents);
        } else {
            self.terms.insert(exponents, sum);
        }
    }

    /// Exponents by variable and coefficient of each term, in a fixed order.
    pub fn terms(&self) -> impl Iterator<Item = (&[u8], i64)> {
        self.terms.iter().map(|(e, &c)| (e.as_slice(), c))
    }

    /// How many terms there are.
    pub fn len(&self) -> usize {
        self.terms.len()
    }

    /// Whether there is no term at all.
    pub fn is_empty(&self) -> bool {
        self.terms.is_empty()
    }

    /// Sum.
    pub fn plus(&self, other: &Polynomial) -> Polynomial {
        let both = self.terms.iter().chain(&other.terms);
        Polynomial::from_terms(both.map(|(e, &c)| (e.clone(), c)))
    }

    /// Product with an integer.
    pub fn times_integer(&self, factor: i64) -> Polynomial {
        Polynomial::from_terms(self.terms.iter().map(|(e, &c)| (e.clone(), c * factor)))
    }

    /// Difference.
    pub fn minus(&self, other: &Polynomial) -> Polynomial {
        self.plus(&other.times_integer(-1))
    }

    /// Product.
    pub fn times(&self, other: &Polynomial) -> Polynomial {
        let mut product = Polynomial::zero();
        for (a, &x) in &self.terms {
            for (b, &y) in &other.terms {
                product.add_term(a.iter().zip(b).map(|(m, n)| m + n).collect(), x * y);
            }
        }
        product
    }

    /// Partial derivative by one variable.
    pub fn derivative(&self, variable: usize) -> Polynomial {
        Polynomial::from_terms(self.terms.iter().filter(|(e, _)| e[variable] > 0).map(|(e, &c)| {
            let mut lower = e.clone();
            lower[variable] -= 1;
            (lower, c * i64::from(e[variable]))
        }))
    }

    /// The same polynomial with variable k renamed to `map[k]` among `variables` new ones; `None` sets it to zero.
    pub fn substituted(&self, map: &[Option<usize>], variables: usize) -> Polynomial {
        let kept = self.terms.iter().filter_map(|(old, &c)| {
            let mut exponents = vec![0u8; variables];
            for (&power, target) in old.iter().zip(map) {
                match target {
                    Some(target) => exponents[*target] += power,
                    None if power > 0 => return None,
                    None => {}
                }
            }
            Some((exponents, c))
        });
        Polynomial::from_terms(kept)
    }

    /// The polynomial to a power.
    pub fn power(&self, exponent: u8, variables: usize) -> Polynomial {
        (0..exponent).fold(Polynomial::constant(1, variables), |product, _| product.times(self))
    }

    /// The highest power of a variable.
    pub fn degree_in(&self, variable: usize) -> u8 {
        self.terms.keys().map(|e| e[variable]).max().unwrap_or(0)
    }

    /// What multiplies the given power of a variable, without that variable.
    pub fn coefficient_of(&self, variable: usize, power: u8) -> Polynomial {
        Polynomial::from_terms(self.terms.iter().filter(|(e, _)| e[variable] == power).map(|(e, &c)| {
            let mut rest = e.clone();
            rest[variable] = 0;
            (rest, c)
        }))
    }

    /// Divides every term by a monomial that all of them contain.
    pub fn divided_by_monomial(&self, monomial: &[u8]) -> Polynomial {
        Polynomial::from_terms(
            self.terms.iter().map(|(e, &c)| (e.iter().zip(monomial).map(|(m, n)| m - n).collect(), c)),
        )
    }

    /// The largest monomial that divides every term of every polynomial given; `None` if none has a term.
    pub fn common_monomial<'a>(polynomials: impl IntoIterator<Item = &'a Polynomial>) -> Option<Vec<u8>> {
        polynomials
            .into_iter()
            .flat_map(|p| p.terms.keys())
            .cloned()
            .reduce(|a, b| a.iter().zip(&b).map(|(m, n)| *m.min(n)).collect())
    }

    /// 1 or -1 where all coefficients have that sign (the polynomial then has it for all positive values), otherwise 0.
    pub fn sign(&self) -> i64 {
        let mut signs = self.terms.values().map(|c| c.signum());
        let Some(first) = signs.next() else { return 0 };
        if signs.all(|s| s == first) { first } else { 0 }
    }

    /// The terms with positive coefficients, and the others with their signs turned: this is the first minus the second.
    pub fn by_sign(&self) -> (Polynomial, Polynomial) {
        let terms = |positive: bool| {
            let kept = self.terms.iter().filter(move |(_, c)| (**c > 0) == positive);
            Polynomial::from_terms(kept.map(|(e, c)| (e.clone(), c.abs())))
        };
        (terms(true), terms(false))
    }

    /// Value for the given variables.
    pub fn value(&self, variables: &[f64]) -> f64 {
        let term = |(e, &c): (&Vec<u8>, &i64)| {
            let powers = e.iter().zip(variables).map(|(&k, x)| x.powi(i32::from(k)));
            c as f64 * powers.product::<f64>()
        };
        self.terms.iter().map(term).sum()
    }

    /// Whether a/b is the same for every value of a variable: a ∂b = b ∂a as polynomials.
    pub fn ratio_ignores(a: &Polynomial, b: &Polynomial, variable: usize) -> bool {
        a.times(&b.derivative(variable)) == b.times(&a.derivative(variable))
    }

    /// Whether a/b visibly differs between two points that differ in one variable only.
    fn ratio_moves(a: &Polynomial, b: &Polynomial, variable: usize, variables: usize) -> bool {
        let here: Vec<f64> = (0..variables).map(|k| 1.0 + 0.618 * k as f64).collect();
        let mut there = here.clone();
        there[variable] *= 1.5;
        let (left, right) = (a.value(&here) * b.value(&there), a.value(&there) * b.value(&here));
        (left - right).abs() > 1e-9 * left.abs()
    }

    /// a/b with every variable taken out on which the ratio does not depend, and common monomials cancelled.
    pub fn reduced_ratio(a: &Polynomial, b: &Polynomial, variables: usize) -> (Polynomial, Polynomial) {
        let (mut a, mut b) = (a.clone(), b.clone());
        for variable in 0..variables {
            let (top, bottom) = (a.degree_in(variable), b.degree_in(variable));
            // One pair of points can show dependence at once; only its absence needs the exact test.
            if top + bottom > 0
                && !Polynomial::ratio_moves(&a, &b, variable, variables)
                && Polynomial::ratio_ignores(&a, &b, variable)
            {
                // A ratio that does not depend on the variable equals that of the leading coefficients in it.
                (a, b) = (a.coefficient_of(variable, top), b.coefficient_of(variable, bottom));
            }
        }
        if let Some(common) = Polynomial::common_monomial([&a, &b]) {
            (a, b) = (a.divided_by_monomial(&common), b.divided_by_monomial(&common));
        }
        (a, b)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn x(i: usize) -> Polynomial {
        Polynomial::variable(i, 3)
    }

    #[test]
    fn sums_cancel_exactly() {
        assert!(x(0).times(&x(1)).minus(&x(1).times(&x(0))).is_empty());
        assert_eq!(x(0).plus(&x(0)), x(0).times_integer(2));
    }

    #[test]
    fn a_common_factor_leaves_the_ratio() {
        // (x0 + x1) x2 / (x0 + x1) = x2: x0 and x1 go, although they are no common monomial.
        let factor = x(0).plus(&x(1));
        let (a, b) = Polynomial::reduced_ratio(&factor.times(&x(2)), &factor, 3);
        assert_eq!(a, x(2));
        assert_eq!(b, Polynomial::constant(1, 3));
    }

    #[test]
    fn merging_adds_exponents() {
        let p = x(0).times(&x(1)).plus(&x(2));
        let merged = p.substituted(&[Some(0), Some(0), None], 1);
        assert_eq!(merged.terms().collect::<Vec<_>>(), [(&[2u8][..], 1)]);
        assert!((merged.value(&[3.0]) - 9.0).abs() < 1e-15);
    }
}
