//! The continuous solve: part values, unrounded, that give the target exactly.
//!
//! The figures are functions of the logarithms of the part values, and there are fewer of them than parts. argmin's
//! L-BFGS looks for values that meet the figures and lie near the middle of the shelves; Newton steps of least norm then
//! meet the figures to rounding. Capacitors come in few values, so they are put on the shelf first and the resistors
//! solved for, as one would do by hand.

use argmin::core::{CostFunction, Error, Executor, Gradient, State};
use argmin::solver::linesearch::MoreThuenteLineSearch;
use argmin::solver::quasinewton::LBFGS;

use crate::circuit::Polynomial;
use crate::target::Section;
use crate::units::{Kind, Value};

use super::family::log_gradient;
use super::model::{Group, Model};
use super::window::Coefficient::{self, D, N};

/// Unrounded values of the active groups of a section.
#[derive(Clone, Debug)]
pub(crate) struct Ideal {
    /// Ohms or farads, by active group.
    pub values: Vec<f64>,
    /// The shelf value where the group was put on the shelf.
    pub on_shelf: Vec<Option<Value>>,
}

/// A ratio of polynomials in the active groups' admittances and the value it must have.
struct Equation {
    dividend: Polynomial,
    divisor: Polynomial,
    target: f64,
}

/// What a solve starts from and may change, in logarithms of admittances.
struct Task<'a> {
    equations: &'a [Equation],
    centre: &'a [f64],
    free: &'a [bool],
}

/// How strongly the middle of the shelves draws, against the square of a relative miss.
const PULL: f64 = 1e-3;

/// The values of the parts that realise the section exactly; `None` if the solver finds none.
pub(crate) fn solve(model: &Model, section: &Section, ignore_gain: bool) -> Option<Ideal> {
    let equations = equations(model, section, ignore_gain);
    let groups = model.active_groups();
    let pinned: Vec<Option<Value>> =
        groups.iter().map(|g| (g.shelf.len() == 1).then(|| g.shelf.values()[0])).collect();
    let centre = start(model, section);
    let free: Vec<bool> = pinned.iter().map(Option::is_none).collect();
    let loose = Task { equations: &equations, centre: &centre, free: &free }.solve()?;
    let exact = |u: &[f64]| -> Vec<f64> {
        groups.iter().zip(u).map(|(g, u)| if g.kind == Kind::Resistor { (-u).exp() } else { u.exp() }).collect()
    };
    // Capacitors on the shelf: combinations of values near the loose solution, nearest first.
    let capacitors: Vec<usize> = (0..groups.len()).filter(|&g| groups[g].kind == Kind::Capacitor).collect();
    let held: Vec<bool> = (0..groups.len()).map(|g| free[g] && groups[g].kind == Kind::Resistor).collect();
    for choice in near_combinations(model, &capacitors, &exact(&loose)) {
        let mut from = loose.clone();
        let mut on_shelf = pinned.clone();
        for (&g, value) in capacitors.iter().zip(&choice) {
            from[g] = value.to_f64().ln();
            on_shelf[g] = Some(*value);
        }
        let Some(u) = (Task { equations: &equations, centre: &from, free: &held }).solve() else { continue };
        let values = exact(&u);
        let fits = groups.iter().zip(&values).all(|(g, v)| {
            let (low, high) = g.shelf.span();
            (low.to_f64() * 0.999..=high.to_f64() * 1.001).contains(v)
        });
        if fits {
            return Some(Ideal { values, on_shelf });
        }
    }
    Some(Ideal { values: exact(&loose), on_shelf: pinned })
}

/// The unrounded values nearest to given ones, by their logarithms, that realise the section exactly; by active group, ohms
/// or farads. Pinned groups keep theirs. `None` where Newton's steps do not lead there.
pub(crate) fn near(model: &Model, section: &Section, ignore_gain: bool, values: &[f64]) -> Option<Vec<f64>> {
    let equations = equations(model, section, ignore_gain);
    let groups = model.active_groups();
    let logarithm = |(group, value): (&Group, &f64)| {
        if group.kind == Kind::Resistor { -value.ln() } else { value.ln() }
    };
    let start: Vec<f64> = groups.iter().zip(values).map(logarithm).collect();
    let free: Vec<bool> = groups.iter().map(|group| group.shelf.len() > 1).collect();
    let found = Task { equations: &equations, centre: &start, free: &free }.polish(start.clone())?;
    let value = |(group, u): (&Group, f64)| if group.kind == Kind::Resistor { (-u).exp() } else { u.exp() };
    Some(groups.iter().zip(found).map(value).collect())
}

/// The ideal's coefficients relative to the leading one of the denominator, as equations; those that the circuit fixes
/// are left out.
fn equations(model: &Model, section: &Section, ignore_gain: bool) -> Vec<Equation> {
    let ideal = section.ideal();
    let order = section.shape.order();
    let count = model.active;
    let numerator: Vec<Coefficient> =
        (0..3).filter(|&k| model.transfer.numerator.get(k).is_some_and(|p| !p.is_empty())).map(N).collect();
    let reference = numerator.iter().copied().find(|c| c.of(&ideal).abs() > 0.0);
    let mut pairs: Vec<(Coefficient, Coefficient)> = (0..order).map(|k| (D(k), D(order))).collect();
    for c in numerator {
        match reference {
            Some(reference) if ignore_gain && c != reference => pairs.push((c, reference)),
            _ if !ignore_gain => pairs.push((c, D(order))),
            _ => {}
        }
    }
    let polynomial = |c: Coefficient| match c {
        N(k) => &model.transfer.numerator[k],
        D(k) => &model.transfer.denominator[k],
    };
    pairs
        .into_iter()
        .map(|(a, b)| {
            let (dividend, divisor) = Polynomial::reduced_ratio(polynomial(a), polynomial(b), count);
            Equation { dividend, divisor, target: a.of(&ideal) / b.of(&ideal) }
        })
        .filter(|e| (0..count).any(|v| e.dividend.degree_in(v) + e.divisor.degree_in(v) > 0))
        .collect()
}

/// Middle values: resistors about 10 kΩ, capacitors to match at w0, both within their shelves.
fn start(model: &Model, section: &Section) -> Vec<f64> {
    const MIDDLE: f64 = 1e4;
    model
        .active_groups()
        .iter()
        .map(|g| {
            let (low, high) = g.shelf.span();
            let wanted = if g.kind == Kind::Resistor { MIDDLE } else { 1.0 / (section.w0 * MIDDLE) };
            let value = wanted.clamp(low.to_f64(), high.to_f64());
            if g.kind == Kind::Resistor { -value.ln() } else { value.ln() }
        })
        .collect()
}

/// Combinations of shelf values for the given groups, by growing distance from `values`.
fn near_combinations(model: &Model, groups: &[usize], values: &[f64]) -> Vec<Vec<Value>> {
    const EACH: usize = 7;
    let mut all: Vec<(f64, Vec<Value>)> = vec![(0.0, Vec::new())];
    for &g in groups {
        let distance = |v: &Value| (v.to_f64() / values[g]).ln().abs();
        let mut near = model.groups[g].shelf.values().to_vec();
        near.sort_by(|a, b| distance(a).total_cmp(&distance(b)).then(a.cmp(b)));
        near.truncate(EACH);
        all = all
            .iter()
            .flat_map(|(sum, list)| {
                near.iter().map(move |v| {
                    let mut longer = list.clone();
                    longer.push(*v);
                    (sum + distance(v).powi(2), longer)
                })
            })
            .collect();
    }
    all.sort_by(|a, b| a.0.total_cmp(&b.0).then_with(|| a.1.cmp(&b.1)));
    all.into_iter().map(|(_, list)| list).collect()
}

impl Equation {
    /// Residual and its gradient in the logarithms of the admittances: ln(ratio/target), or the ratio of the terms that
    /// must cancel to their magnitude where the target is zero. `None` where the ratio has the wrong sign.
    fn residual(&self, u: &[f64]) -> Option<(f64, Vec<f64>)> {
        let x: Vec<f64> = u.iter().map(|u| u.exp()).collect();
        if self.target.abs() <= 0.0 {
            let magnitude = |sign: i64| -> Polynomial {
                let terms = self.dividend.terms().filter(|(_, c)| c.signum() == sign);
                terms.fold(Polynomial::zero(), |sum, (e, c)| sum.plus(&Polynomial::monomial(e, c.abs())))
            };
            let (plus, minus) = (magnitude(1), magnitude(-1));
            let gradient =
                log_gradient(&plus, &x)?.iter().zip(&log_gradient(&minus, &x)?).map(|(a, b)| a - b).collect();
            return Some(((plus.value(&x) / minus.value(&x)).ln(), gradient));
        }
        let ratio = self.dividend.value(&x) / self.divisor.value(&x) / self.target;
        if ratio.is_nan() || ratio <= 0.0 {
            return None;
        }
        let (a, b) = (log_gradient(&self.dividend, &x)?, log_gradient(&self.divisor, &x)?);
        Some((ratio.ln(), a.iter().zip(&b).map(|(a, b)| a - b).collect()))
    }
}

impl Task<'_> {
    /// Residuals and Jacobian; the columns of fixed variables are zero.
    fn system(&self, u: &[f64]) -> Option<(Vec<f64>, Vec<Vec<f64>>)> {
        let mut residuals = Vec::new();
        let mut rows = Vec::new();
        for equation in self.equations {
            let (residual, mut gradient) = equation.residual(u)?;
            gradient.iter_mut().zip(self.free).filter(|(_, free)| !**free).for_each(|(g, _)| *g = 0.0);
            residuals.push(residual);
            rows.push(gradient);
        }
        Some((residuals, rows))
    }

    fn solve(&self) -> Option<Vec<f64>> {
        const ROUNDS: u64 = 200;
        const MEMORY: usize = 7;
        let search = LBFGS::new(MoreThuenteLineSearch::new(), MEMORY).with_tolerance_grad(1e-10).ok()?;
        let near = Executor::new(Descent(self), search)
            .configure(|state| state.param(self.centre.to_vec()).max_iters(ROUNDS))
            .run()
            .ok()
            .and_then(|result| result.state().get_best_param().cloned())
            .unwrap_or_else(|| self.centre.to_vec());
        // From the descent's end, or, should it have run astray, from the start.
        self.polish(near).or_else(|| self.polish(self.centre.to_vec()))
    }

    /// Newton steps of least norm until the residuals are rounding.
    fn polish(&self, mut u: Vec<f64>) -> Option<Vec<f64>> {
        const STEPS: usize = 60;
        const CLOSE: f64 = 1e-11;
        for _ in 0..STEPS {
            let (residuals, rows) = self.system(&u)?;
            if residuals.iter().all(|r| r.abs() < CLOSE) {
                return Some(u);
            }
            let step = least_norm(&rows, &residuals)?;
            let longest = step.iter().fold(0.0f64, |m, s| m.max(s.abs()));
            let factor = (1.0 / longest).min(1.0);
            u.iter_mut().zip(&step).for_each(|(u, s)| *u -= factor * s);
        }
        None
    }
}

/// The shortest x with rows·x = right: x = Jᵀ y, (J Jᵀ) y = right, by elimination with pivoting; rows that depend on
/// others must agree with them.
fn least_norm(rows: &[Vec<f64>], right: &[f64]) -> Option<Vec<f64>> {
    let n = rows.len();
    let dot = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(x, y)| x * y).sum::<f64>();
    let mut system: Vec<Vec<f64>> =
        (0..n).map(|i| (0..n).map(|j| dot(&rows[i], &rows[j])).chain([right[i]]).collect()).collect();
    let scale = (0..n).map(|i| system[i][i]).fold(0.0, f64::max);
    let mut pivots = Vec::new();
    let mut done = 0;
    for column in 0..n {
        let best = (done..n).max_by(|&a, &b| system[a][column].abs().total_cmp(&system[b][column].abs()))?;
        if system[best][column].abs() <= 1e-12 * scale {
            continue;
        }
        system.swap(done, best);
        for row in (0..n).filter(|&r| r != done) {
            let factor = system[row][column] / system[done][column];
            let lead = system[done].clone();
            system[row].iter_mut().zip(&lead).for_each(|(x, l)| *x -= factor * l);
        }
        pivots.push(column);
        done += 1;
    }
    let mut x = vec![0.0; rows.first()?.len()];
    for (row, &column) in pivots.iter().enumerate() {
        let y = system[row][n] / system[row][column];
        x.iter_mut().zip(&rows[column]).for_each(|(x, j)| *x += y * j);
    }
    Some(x)
}

/// The cost that L-BFGS descends: squared residuals, and a weak pull towards the middle.
struct Descent<'a>(&'a Task<'a>);

impl CostFunction for Descent<'_> {
    type Param = Vec<f64>;
    type Output = f64;

    fn cost(&self, u: &Vec<f64>) -> Result<f64, Error> {
        let pull: f64 = u.iter().zip(self.0.centre).map(|(u, c)| (u - c).powi(2)).sum();
        let miss = self.0.system(u).map_or(f64::INFINITY, |(r, _)| r.iter().map(|r| r * r).sum());
        Ok(miss + PULL * pull)
    }
}

impl Gradient for Descent<'_> {
    type Param = Vec<f64>;
    type Gradient = Vec<f64>;

    fn gradient(&self, u: &Vec<f64>) -> Result<Vec<f64>, Error> {
        let mut gradient: Vec<f64> = u.iter().zip(self.0.centre).map(|(u, c)| 2.0 * PULL * (u - c)).collect();
        if let Some((residuals, rows)) = self.0.system(u) {
            for (residual, row) in residuals.iter().zip(&rows) {
                gradient.iter_mut().zip(row).for_each(|(g, j)| *g += 2.0 * residual * j);
            }
        }
        gradient.iter_mut().zip(self.0.free).filter(|(_, free)| !**free).for_each(|(g, _)| *g = 0.0);
        Ok(gradient)
    }
}
