//! Symbolic nodal analysis: from a netlist with ideal op-amps to N(s)/D(s) in the slot admittances.

use super::polynomial::Polynomial;

/// A transfer function whose coefficients are polynomials in the slot admittances, by ascending powers of s.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Transfer {
    /// Numerator.
    pub numerator: Vec<Polynomial>,
    /// Denominator.
    pub denominator: Vec<Polynomial>,
    /// Which slots are capacitors, in slot order.
    pub(crate) capacitors: Vec<bool>,
}

impl Transfer {
    /// Admittances of slot values given in ohms and farads: conductance of a resistor, capacitance of a capacitor.
    pub fn admittances(&self, values: &[f64]) -> Vec<f64> {
        values.iter().zip(&self.capacitors).map(|(&v, &capacitor)| if capacitor { v } else { 1.0 / v }).collect()
    }

    /// Numerator and denominator coefficients for slot values in ohms and farads, by ascending powers of s.
    ///
    /// Slots that the output leaves out may carry any value: they do not occur.
    pub fn coefficients(&self, values: &[f64]) -> (Vec<f64>, Vec<f64>) {
        let admittances = self.admittances(values);
        let of = |list: &[Polynomial]| list.iter().map(|p| p.value(&admittances)).collect();
        (of(&self.numerator), of(&self.denominator))
    }

    /// Whether the response depends on a slot at all: N ∂D ≠ D ∂N.
    pub fn depends_on(&self, slot: usize) -> bool {
        let derivative = |list: &[Polynomial]| list.iter().map(|p| p.derivative(slot)).collect::<Vec<_>>();
        product(&self.numerator, &derivative(&self.denominator))
            != product(&self.denominator, &derivative(&self.numerator))
    }

    /// The transfer function with slot k replaced by variable `map[k]` of `variables`; `None` leaves the slot out.
    pub fn substituted(&self, map: &[Option<usize>], variables: usize) -> Transfer {
        let of = |list: &[Polynomial]| list.iter().map(|p| p.substituted(map, variables)).collect();
        let mut capacitors = vec![false; variables];
        for (slot, target) in map.iter().enumerate() {
            if let Some(target) = target {
                capacitors[*target] = self.capacitors[slot];
            }
        }
        Transfer { numerator: of(&self.numerator), denominator: of(&self.denominator), capacitors }.simplified()
    }

    /// Whether the response stays the same when slots are permuted: slot k takes the place of slot `order[k]`.
    pub fn is_invariant_under(&self, order: &[usize]) -> bool {
        if self.visibly_moves_under(order) {
            return false;
        }
        let map: Vec<Option<usize>> = order.iter().copied().map(Some).collect();
        let of = |list: &[Polynomial]| list.iter().map(|p| p.substituted(&map, order.len())).collect::<Vec<_>>();
        product(&self.numerator, &of(&self.denominator)) == product(&self.denominator, &of(&self.numerator))
    }

    /// Whether the response differs at one point by far more than rounding: cheaper than the comparison of polynomials.
    fn visibly_moves_under(&self, order: &[usize]) -> bool {
        const S: f64 = 1.3;
        let here: Vec<f64> = (0..order.len()).map(|k| 1.0 + 0.618 * k as f64).collect();
        let there: Vec<f64> = order.iter().map(|&k| here[k]).collect();
        let at = |list: &[Polynomial], x: &[f64]| list.iter().rev().fold(0.0, |sum, p| sum * S + p.value(x));
        let left = at(&self.numerator, &here) * at(&self.denominator, &there);
        let right = at(&self.numerator, &there) * at(&self.denominator, &here);
        (left - right).abs() > 1e-9 * (left.abs() + right.abs())
    }

    /// The transfer function with the part of one variable made of two: the variable is the first of them, a new last
    /// variable the second. `in_row` (admittances a, b) gives ab/(a + b), otherwise the two add up.
    ///
    /// Two resistors or two capacitors in series have the admittance ab/(a + b), in parallel a + b.
    pub(crate) fn paired(&self, variable: usize, in_row: bool) -> Transfer {
        let count = self.capacitors.len() + 1;
        let same: Vec<Option<usize>> = (0..count - 1).map(Some).collect();
        let [first, second] = [variable, count - 1].map(|v| Polynomial::variable(v, count));
        let (sum, both) = (first.plus(&second), first.times(&second));
        let all = self.numerator.iter().chain(&self.denominator);
        let top = all.map(|p| p.degree_in(variable)).max().unwrap_or(0);
        let expanded = |p: &Polynomial| {
            (0..=p.degree_in(variable)).fold(Polynomial::zero(), |total, power| {
                let rest = p.coefficient_of(variable, power).substituted(&same, count);
                // With N and D both times (a + b)^top no denominator is left.
                let with = match in_row {
                    true => both.power(power, count).times(&sum.power(top - power, count)),
                    false => sum.power(power, count),
                };
                total.plus(&rest.times(&with))
            })
        };
        let of = |list: &[Polynomial]| list.iter().map(expanded).collect();
        let mut capacitors = self.capacitors.clone();
        capacitors.push(self.capacitors[variable]);
        Transfer { numerator: of(&self.numerator), denominator: of(&self.denominator), capacitors }.simplified()
    }

    /// Takes out a monomial common to all coefficients, common powers of s, and vanishing leading coefficients.
    fn simplified(mut self) -> Transfer {
        for list in [&mut self.numerator, &mut self.denominator] {
            while list.last().is_some_and(Polynomial::is_empty) {
                list.pop();
            }
        }
        while !self.numerator.is_empty()
            && !self.denominator.is_empty()
            && self.numerator[0].is_empty()
            && self.denominator[0].is_empty()
        {
            self.numerator.remove(0);
            self.denominator.remove(0);
        }
        let all = self.numerator.iter().chain(&self.denominator);
        if let Some(common) = Polynomial::common_monomial(all) {
            for p in self.numerator.iter_mut().chain(&mut self.denominator) {
                *p = p.divided_by_monomial(&common);
            }
        }
        self
    }
}

/// Product of two polynomials in s whose coefficients are polynomials, without vanishing leading coefficients.
fn product(a: &[Polynomial], b: &[Polynomial]) -> Vec<Polynomial> {
    let mut out = vec![Polynomial::zero(); (a.len() + b.len()).saturating_sub(1)];
    for (i, p) in a.iter().enumerate() {
        for (j, q) in b.iter().enumerate() {
            out[i + j] = out[i + j].plus(&p.times(q));
        }
    }
    while out.last().is_some_and(Polynomial::is_empty) {
        out.pop();
    }
    out
}

/// What the analysis needs of a netlist. Node 0 is ground, node 1 the source.
pub(crate) struct Network<'a> {
    /// Number of nodes, ground and source included.
    pub nodes: usize,
    /// End nodes of each slot.
    pub slots: &'a [[usize; 2]],
    /// Which slots are capacitors.
    pub capacitors: &'a [bool],
    /// Plus, minus and output node of each op-amp.
    pub op_amps: &'a [[usize; 3]],
}

const GROUND: usize = 0;
const SOURCE: usize = 1;

impl Network<'_> {
    /// V(output)/V(source) by Cramer's rule, or `None` where the equations do not determine it.
    ///
    /// An ideal op-amp is a nullor: its inputs share one voltage (columns merge) and its output current is free (the
    /// output's current law is dropped).
    pub fn transfer(&self, output: usize) -> Option<Transfer> {
        let mut class: Vec<usize> = (0..self.nodes).collect();
        for &[plus, minus, _] in self.op_amps {
            let (keep, drop) = (class[plus].min(class[minus]), class[plus].max(class[minus]));
            class.iter_mut().filter(|c| **c == drop).for_each(|c| *c = keep);
        }
        if class[SOURCE] == class[GROUND] {
            return None;
        }
        let mut columns: Vec<usize> = class.iter().copied().filter(|c| *c > SOURCE).collect();
        columns.sort_unstable();
        columns.dedup();
        let driven = |node: usize| self.op_amps.iter().any(|o| o[2] == node);
        let rows: Vec<usize> = (SOURCE + 1..self.nodes).filter(|&n| !driven(n)).collect();
        if rows.len() != columns.len() {
            return None;
        }
        // One more variable than slots: the last one is s.
        let variables = self.slots.len() + 1;
        let entry = |row: usize, column: usize| {
            let mut sum = Polynomial::zero();
            for (slot, &[a, b]) in self.slots.iter().enumerate() {
                let mut admittance = Polynomial::variable(slot, variables);
                if self.capacitors[slot] {
                    admittance = admittance.times(&Polynomial::variable(variables - 1, variables));
                }
                for (here, there) in [(a, b), (b, a)] {
                    if here == row && class[here] == column {
                        sum = sum.plus(&admittance);
                    }
                    if here == row && class[there] == column {
                        sum = sum.minus(&admittance);
                    }
                }
            }
            sum
        };
        let matrix: Vec<Vec<Polynomial>> =
            rows.iter().map(|&r| columns.iter().map(|&c| entry(r, c)).collect()).collect();
        let denominator = determinant(&matrix, variables);
        if denominator.is_empty() {
            return None;
        }
        let numerator = match class[output] {
            GROUND => return None,
            SOURCE => denominator.clone(),
            wanted => {
                let place = columns.iter().position(|&c| c == wanted)?;
                let mut replaced = matrix;
                for (line, &row) in replaced.iter_mut().zip(&rows) {
                    line[place] = entry(row, SOURCE).times_integer(-1);
                }
                determinant(&replaced, variables)
            }
        };
        let by_power_of_s = |p: &Polynomial| -> Vec<Polynomial> {
            let keep: Vec<Option<usize>> = (0..variables).map(|k| Some(k.min(variables - 2))).collect();
            (0..=p.degree_in(variables - 1))
                .map(|power| p.coefficient_of(variables - 1, power).substituted(&keep, variables - 1))
                .collect()
        };
        let transfer = Transfer {
            numerator: by_power_of_s(&numerator),
            denominator: by_power_of_s(&denominator),
            capacitors: self.capacitors.to_vec(),
        };
        Some(transfer.simplified())
    }
}

/// Determinant by expansion along the rows; minors are kept by the set of columns they use.
fn determinant(matrix: &[Vec<Polynomial>], variables: usize) -> Polynomial {
    let n = matrix.len();
    let mut minors = vec![Polynomial::zero(); 1 << n];
    minors[0] = Polynomial::constant(1, variables);
    for used in 1usize..1 << n {
        let row = used.count_ones() as usize - 1;
        let mut sum = Polynomial::zero();
        for column in (0..n).filter(|c| used >> c & 1 == 1) {
            let entry = &matrix[row][column];
            let minor = &minors[used & !(1 << column)];
            if !entry.is_empty() && !minor.is_empty() {
                let later = (used >> (column + 1)).count_ones();
                let sign = if later % 2 == 0 { 1 } else { -1 };
                sum = sum.plus(&entry.times(minor).times_integer(sign));
            }
        }
        minors[used] = sum;
    }
    minors.swap_remove((1 << n) - 1)
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;

    #[test]
    fn divider_and_inverting_amplifier() {
        // source - R1 - node 2 - R2 - ground
        let divider = Network { nodes: 3, slots: &[[1, 2], [2, 0]], capacitors: &[false, false], op_amps: &[] };
        let (n, d) = divider.transfer(2).unwrap().coefficients(&[1e3, 3e3]);
        assert!((n[0] / d[0] - 0.75).abs() < 1e-15);
        // source - R1 - node 2 (minus), R2 from node 2 to the output, node 3
        let amplifier =
            Network { nodes: 4, slots: &[[1, 2], [2, 3]], capacitors: &[false, false], op_amps: &[[0, 2, 3]] };
        let transfer = amplifier.transfer(3).unwrap();
        let (n, d) = transfer.coefficients(&[1e3, 3e3]);
        assert!((n[0] / d[0] + 3.0).abs() < 1e-15);
        assert!(transfer.depends_on(0) && transfer.depends_on(1));
    }

    #[test]
    fn an_undetermined_network_is_refused() {
        let floating = Network { nodes: 4, slots: &[[2, 3]], capacitors: &[false], op_amps: &[] };
        assert!(floating.transfer(3).is_none());
    }

    #[test]
    fn an_unused_slot_does_not_reach_the_response() {
        // A resistor from the source to ground.
        let loaded =
            Network { nodes: 3, slots: &[[1, 2], [2, 0], [1, 0]], capacitors: &[false, true, false], op_amps: &[] };
        let transfer = loaded.transfer(2).unwrap();
        assert!(transfer.depends_on(0) && transfer.depends_on(1) && !transfer.depends_on(2));
        assert!(!transfer.is_invariant_under(&[1, 0, 2]));
    }
}
