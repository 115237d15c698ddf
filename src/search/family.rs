//! A family: which groups of a section carry the same value, and the search through all its sets.
//!
//! Variables are assigned one by one. A window (an outer bound on one figure) is applied as soon as all but one of its
//! variables are known: it is then solved for that last one, and only shelf values inside are tried. In which order the
//! variables are taken is planned for each level of the error limit, by an estimate of how many partial sets remain.

use std::collections::BTreeMap;

use crate::circuit::{Polynomial, Transfer};
use crate::parts::{Choice, Origin, Shelf, Supply};
use crate::target::Biquad;
use crate::units::Kind;

use super::model::Model;
use super::window::{Coefficient, Window};

/// A variable of a family: one choice for all its groups.
#[derive(Clone, Debug)]
struct Variable {
    /// The choices by ascending admittance.
    choices: Vec<Choice>,
    /// Their admittances: 1/R, or C.
    admittances: Vec<f64>,
    /// A number for each choice that is the same wherever this choice of this kind stands in the family.
    numbers: Vec<u32>,
    /// Which of them must be bought.
    bought: Vec<bool>,
    /// What all bodies of it cost on one board, in millionths; 0 where the price is not known.
    costs: Vec<u64>,
}

impl Variable {
    /// A variable for so many bodies on each board; `None` if no choice can be had so often.
    fn new(
        shelf: &Shelf,
        bodies: u64,
        supply: &Supply,
        known: &mut BTreeMap<(Kind, Choice), u32>,
    ) -> Option<Variable> {
        let origin = |choice: Choice| Some((choice, supply.obtain(choice, bodies)?));
        let mut choices: Vec<(Choice, Origin)> = shelf.choices().iter().copied().filter_map(origin).collect();
        if shelf.kind() == Kind::Resistor {
            choices.reverse();
        }
        let admittance = |choice: &Choice| {
            let value = choice.value.to_f64();
            if shelf.kind() == Kind::Resistor { 1.0 / value } else { value }
        };
        let mut number = |choice: &Choice| {
            let next = known.len() as u32;
            *known.entry((shelf.kind(), *choice)).or_insert(next)
        };
        (!choices.is_empty()).then(|| Variable {
            admittances: choices.iter().map(|(choice, _)| admittance(choice)).collect(),
            numbers: choices.iter().map(|(choice, _)| number(choice)).collect(),
            bought: choices.iter().map(|(_, origin)| *origin == Origin::Bought).collect(),
            costs: choices.iter().map(|(choice, _)| supply.price(*choice).unwrap_or(0) * bodies).collect(),
            choices: choices.into_iter().map(|(choice, _)| choice).collect(),
        })
    }
}

/// A figure of the family: a ratio of polynomials in its variables, reduced to those on which it depends.
#[derive(Clone, Debug)]
struct Figure {
    above: Vec<Coefficient>,
    below: Vec<Coefficient>,
    dividend: Polynomial,
    divisor: Polynomial,
    /// The variables on which it depends, as bits.
    depends: u32,
    /// Logarithmic gradient at the middle of the shelves; empty where it is not defined.
    gradient: Vec<f64>,
}

/// A family of sets of one section.
#[derive(Clone, Debug)]
pub(crate) struct Family {
    /// The variable of each active group.
    member: Vec<usize>,
    variables: Vec<Variable>,
    figures: Vec<Figure>,
    numerator: Vec<Flat>,
    denominator: Vec<Flat>,
}

/// A polynomial laid out for evaluation: factor, and the variables of each term, repeated by their power.
#[derive(Clone, Debug)]
struct Flat(Vec<(f64, Vec<usize>)>);

impl Flat {
    fn new(p: &Polynomial) -> Flat {
        let spread = |exponents: &[u8]| {
            exponents.iter().enumerate().flat_map(|(k, &e)| std::iter::repeat_n(k, usize::from(e))).collect()
        };
        Flat(p.terms().map(|(exponents, factor)| (factor as f64, spread(exponents))).collect())
    }

    fn value(&self, x: &[f64]) -> f64 {
        self.0.iter().map(|(factor, list)| list.iter().fold(*factor, |product, &k| product * x[k])).sum()
    }
}

impl Family {
    /// The family in which active group k carries variable `member[k]`, with the figures that windows are given for;
    /// `None` if groups that share a variable share no choice that can be had often enough.
    pub fn new(model: &Model, supply: &Supply, member: Vec<usize>, windows: &[Window]) -> Option<Family> {
        let count = member.iter().max().map_or(0, |m| m + 1);
        let mut shelves: Vec<Option<Shelf>> = vec![None; count];
        let mut bodies = vec![0; count];
        for (group, &variable) in model.active_groups().iter().zip(&member) {
            bodies[variable] += group.bodies();
            shelves[variable] = Some(match shelves[variable].take() {
                None => group.shelf.clone(),
                Some(shelf) => shelf.intersection(&group.shelf)?,
            });
        }
        let mut known = BTreeMap::new();
        let variable = |(shelf, &bodies): (&Shelf, &u64)| Variable::new(shelf, bodies, supply, &mut known);
        let variables: Vec<Variable> = shelves.iter().flatten().zip(&bodies).map(variable).collect::<Option<_>>()?;
        let map: Vec<Option<usize>> = member.iter().copied().map(Some).collect();
        let transfer = model.transfer.substituted(&map, count);
        let middle: Vec<f64> = variables.iter().map(|v| v.admittances[v.admittances.len() / 2]).collect();
        let figures = windows.iter().map(|w| Figure::new(w, &transfer, &middle)).collect();
        let flat = |list: &[Polynomial]| list.iter().map(Flat::new).collect();
        let (numerator, denominator) = (flat(&transfer.numerator), flat(&transfer.denominator));
        Some(Family { member, variables, figures, numerator, denominator })
    }

    /// The plan for one level of windows, or `None` if a figure that the family fixes lies outside its window.
    pub fn plan(&self, windows: &[Window]) -> Option<Plan<'_>> {
        let mut limited = Vec::new();
        for figure in &self.figures {
            let Some(window) = windows.iter().find(|w| w.above == figure.above && w.below == figure.below) else {
                continue;
            };
            if figure.depends == 0 {
                let value = figure.dividend.value(&[]) / figure.divisor.value(&[]);
                if !(window.low..=window.high).contains(&value) {
                    return None;
                }
            } else {
                limited.push((figure, window));
            }
        }
        let (order, nodes) = self.cheapest_order(&limited);
        let place: Vec<usize> = (0..order.len()).filter_map(|v| order.iter().position(|&o| o == v)).collect();
        let mut steps: Vec<Vec<Condition>> = vec![Vec::new(); order.len()];
        for (figure, window) in limited {
            let last = (0..order.len()).rev().find(|&depth| figure.depends >> order[depth] & 1 == 1);
            if let Some(depth) = last {
                steps[depth].extend(Condition::new(figure, window, order[depth], &place));
            }
        }
        for step in &mut steps {
            // What is cheap to solve and narrow comes first: most partial sets end there.
            let width =
                |c: &Condition| if c.low * c.high > 0.0 { (c.high / c.low).ln().abs() } else { f64::INFINITY };
            step.sort_by(|a, b| a.solution.cmp(&b.solution).then_with(|| width(a).total_cmp(&width(b))));
        }
        let cheapest = |&v: &usize| self.variables[v].costs.iter().copied().min().unwrap_or(0);
        let mut rest_cost = vec![0; order.len() + 1];
        for (depth, v) in order.iter().enumerate().rev() {
            rest_cost[depth] = rest_cost[depth + 1] + cheapest(v);
        }
        Some(Plan { family: self, order, steps, rest_cost, nodes })
    }

    /// The order of variables with the fewest expected partial sets, by dynamic programming over sets of variables, and
    /// that number.
    fn cheapest_order(&self, limited: &[(&Figure, &Window)]) -> (Vec<usize>, f64) {
        let n = self.variables.len();
        let mut widths: Vec<(f64, &Figure)> = limited
            .iter()
            .filter(|(figure, w)| w.low * w.high > 0.0 && w.high.is_finite() && !figure.gradient.is_empty())
            .map(|(figure, w)| ((w.high / w.low).ln().abs(), *figure))
            .collect();
        widths.sort_by(|a, b| a.0.total_cmp(&b.0));
        let expected = |set: usize| {
            let mut count: f64 = 1.0;
            for (v, variable) in self.variables.iter().enumerate() {
                if set >> v & 1 == 1 {
                    count *= variable.choices.len() as f64;
                }
            }
            // Windows of independent figures thin out independently; dependent ones add nothing.
            let mut basis: Vec<Vec<f64>> = Vec::new();
            for (width, figure) in &widths {
                if figure.depends as usize & !set != 0 {
                    continue;
                }
                let mut rest = figure.gradient.clone();
                for row in &basis {
                    let along: f64 = rest.iter().zip(row).map(|(a, b)| a * b).sum();
                    rest.iter_mut().zip(row).for_each(|(a, b)| *a -= along * b);
                }
                let norm = rest.iter().map(|a| a * a).sum::<f64>().sqrt();
                if norm > 1e-6 {
                    rest.iter_mut().for_each(|a| *a /= norm);
                    basis.push(rest);
                    const TYPICAL_SPAN: f64 = 7.0;
                    count *= (width / TYPICAL_SPAN).min(1.0);
                }
            }
            count
        };
        let full = (1usize << n) - 1;
        let mut cost = vec![f64::INFINITY; full + 1];
        let mut last = vec![0; full + 1];
        cost[0] = 0.0;
        for set in 1..=full {
            let here = expected(set);
            for v in (0..n).filter(|v| set >> v & 1 == 1) {
                let total = cost[set & !(1 << v)] + here;
                if total < cost[set] {
                    (cost[set], last[set]) = (total, v);
                }
            }
        }
        let mut order = Vec::new();
        let mut set = full;
        while set != 0 {
            order.push(last[set]);
            set &= !(1 << last[set]);
        }
        order.reverse();
        (order, cost[full])
    }
}

impl Figure {
    fn new(window: &Window, transfer: &Transfer, middle: &[f64]) -> Figure {
        let count = middle.len();
        let product = |list: &[Coefficient]| {
            list.iter().fold(Polynomial::constant(1, count), |product, c| {
                let factor = match c {
                    Coefficient::N(power) => transfer.numerator.get(*power),
                    Coefficient::D(power) => transfer.denominator.get(*power),
                };
                factor.map_or(Polynomial::zero(), |f| product.times(f))
            })
        };
        let (mut a, mut b) = (product(&window.above), product(&window.below));
        (a, b) = Polynomial::reduced_ratio(&a, &b, count);
        if b.sign() < 0 {
            (a, b) = (a.times_integer(-1), b.times_integer(-1));
        }
        let depends = (0..count).filter(|&v| a.degree_in(v) + b.degree_in(v) > 0).map(|v| 1 << v).sum();
        let gradient = log_gradient(&a, middle).zip(log_gradient(&b, middle));
        let gradient = gradient.map_or(Vec::new(), |(a, b)| a.iter().zip(&b).map(|(a, b)| a - b).collect());
        if depends == 0 {
            (a, b) = (a.substituted(&vec![None; count], 0), b.substituted(&vec![None; count], 0));
        }
        let (above, below) = (window.above.clone(), window.below.clone());
        Figure { above, below, dividend: a, divisor: b, depends, gradient }
    }
}

/// d ln|P| / d ln x for each variable; `None` where P vanishes.
pub(crate) fn log_gradient(p: &Polynomial, x: &[f64]) -> Option<Vec<f64>> {
    let value = p.value(x);
    if value.abs() <= 0.0 || !value.is_finite() {
        return None;
    }
    let mut gradient = vec![0.0; x.len()];
    for (exponents, factor) in p.terms() {
        let powers = exponents.iter().zip(x).map(|(&e, x)| x.powi(i32::from(e)));
        let share = factor as f64 * powers.product::<f64>() / value;
        gradient.iter_mut().zip(exponents).for_each(|(g, &e)| *g += share * f64::from(e));
    }
    Some(gradient)
}

/// How a condition is solved for its last variable y.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
enum Solution {
    /// The ratio is a constant times one power of y.
    Power,
    /// Dividend and divisor are linear in y, and the divisor is positive.
    Linear,
    /// Dividend and divisor are at most quadratic in y, and the divisor is positive: the hull is solved, each value in
    /// it is tried.
    Quadratic,
    /// Each value is tried.
    Trial,
}

impl Solution {
    /// Whether values in the solved interval must still be tried.
    fn is_loose(self) -> bool {
        matches!(self, Solution::Quadratic | Solution::Trial)
    }
}

/// A window on a figure, arranged for its last variable y.
#[derive(Clone, Debug)]
struct Condition {
    dividend: Arranged,
    divisor: Arranged,
    low: f64,
    high: f64,
    solution: Solution,
    /// For [`Solution::Power`]: the power of y.
    power: i32,
}

/// A polynomial by powers of the last variable: for each term its factor, the power of the last variable, and the depths
/// of the others, repeated by their power.
#[derive(Clone, Debug)]
struct Arranged(Vec<(f64, usize, Vec<usize>)>);

/// The largest power of a last variable that is arranged; a figure beyond it is left to the exact evaluation.
const MOST_POWERS: usize = 16;

impl Arranged {
    fn new(p: &Polynomial, last: usize, place: &[usize]) -> Arranged {
        let term = |(exponents, factor): (&[u8], i64)| {
            let others = exponents.iter().enumerate().filter(|(v, _)| *v != last);
            let depths = others.flat_map(|(v, &e)| std::iter::repeat_n(place[v], usize::from(e))).collect();
            (factor as f64, usize::from(exponents[last]), depths)
        };
        Arranged(p.terms().map(term).collect())
    }

    fn degree(&self) -> usize {
        self.0.iter().map(|t| t.1).max().unwrap_or(0)
    }

    /// The power of y if all terms have the same.
    fn single_power(&self) -> Option<usize> {
        let first = self.0.first()?.1;
        self.0.iter().all(|t| t.1 == first).then_some(first)
    }

    /// Coefficients by power of y for the admittances chosen so far.
    fn coefficients(&self, chosen: &[f64]) -> [f64; MOST_POWERS] {
        let mut sum = [0.0; MOST_POWERS];
        for (factor, power, depths) in &self.0 {
            sum[*power] += depths.iter().fold(*factor, |product, &depth| product * chosen[depth]);
        }
        sum
    }

    /// Sum of all terms for y = 1.
    fn total(&self, chosen: &[f64]) -> f64 {
        self.0
            .iter()
            .map(|(factor, _, depths)| depths.iter().fold(*factor, |product, &depth| product * chosen[depth]))
            .sum()
    }
}

impl Condition {
    fn new(figure: &Figure, window: &Window, last: usize, place: &[usize]) -> Option<Condition> {
        let dividend = Arranged::new(&figure.dividend, last, place);
        let divisor = Arranged::new(&figure.divisor, last, place);
        if dividend.degree().max(divisor.degree()) >= MOST_POWERS {
            return None;
        }
        let single = dividend.single_power().zip(divisor.single_power());
        let (solution, power) = match single {
            Some((p, q)) => (Solution::Power, p as i32 - q as i32),
            None if dividend.degree() <= 1 && divisor.degree() <= 1 && figure.divisor.sign() > 0 => {
                (Solution::Linear, 0)
            }
            None if dividend.degree() <= 2 && divisor.degree() <= 2 && figure.divisor.sign() > 0 => {
                (Solution::Quadratic, 0)
            }
            None => (Solution::Trial, 0),
        };
        Some(Condition { dividend, divisor, low: window.low, high: window.high, solution, power })
    }

    /// The interval of y in which the condition can hold; `None` if nowhere. Exact but for rounding, which the slack of
    /// the window covers; loose solutions give more than that.
    fn interval(&self, chosen: &[f64]) -> Option<(f64, f64)> {
        let everything = (0.0, f64::INFINITY);
        match self.solution {
            Solution::Trial => Some(everything),
            Solution::Power => {
                let factor = self.dividend.total(chosen) / self.divisor.total(chosen);
                if factor.is_nan() || factor.abs() <= 0.0 {
                    return (self.low <= 0.0 && self.high >= 0.0).then_some(everything);
                }
                let (a, b) = (self.low / factor, self.high / factor);
                let (low, high) = (a.min(b).max(0.0), a.max(b));
                if high <= 0.0 {
                    return None;
                }
                let root = |x: f64| match self.power {
                    1 => x,
                    -1 => 1.0 / x,
                    2 => x.sqrt(),
                    -2 => 1.0 / x.sqrt(),
                    k => x.powf(1.0 / f64::from(k)),
                };
                Some(if self.power > 0 { (root(low), root(high)) } else { (root(high), root(low)) })
            }
            Solution::Linear | Solution::Quadratic => {
                let (a, b) = (self.dividend.coefficients(chosen), self.divisor.coefficients(chosen));
                let (mut from, mut to) = everything;
                // sign (A − end B) ≤ 0 for both ends of the window.
                for (end, sign) in [(self.high, 1.0), (self.low, -1.0)] {
                    if end.is_finite() {
                        let c = [0, 1, 2].map(|k| sign * (a[k] - end * b[k]));
                        let (low, high) = not_positive(c)?;
                        (from, to) = (f64::max(from, low), f64::min(to, high));
                    }
                }
                (from <= to).then_some((from, to))
            }
        }
    }

    /// Whether a value of y satisfies the condition, for the loose solutions.
    fn admits(&self, coefficients: &([f64; MOST_POWERS], [f64; MOST_POWERS]), y: f64) -> bool {
        let value = |c: &[f64; MOST_POWERS], degree: usize| c[..=degree].iter().rev().fold(0.0, |sum, c| sum * y + c);
        let ratio = value(&coefficients.0, self.dividend.degree()) / value(&coefficients.1, self.divisor.degree());
        (self.low..=self.high).contains(&ratio)
    }
}

/// The hull of all y > 0 at which c0 + c1 y + c2 y² ≤ 0; `None` if there are none.
fn not_positive([c0, c1, c2]: [f64; 3]) -> Option<(f64, f64)> {
    let everything = (0.0, f64::INFINITY);
    if c2.abs() <= 0.0 {
        return if c1 > 0.0 {
            (c0 <= 0.0).then(|| (0.0, -c0 / c1))
        } else if c1 < 0.0 {
            Some((f64::max(0.0, -c0 / c1), f64::INFINITY))
        } else {
            (c0 <= 0.0).then_some(everything)
        };
    }
    let discriminant = c1 * c1 - 4.0 * c0 * c2;
    if discriminant.is_nan() || discriminant < 0.0 {
        return (c2 < 0.0).then_some(everything);
    }
    // Both roots without cancellation.
    let half = -0.5 * (c1 + discriminant.sqrt().copysign(c1));
    let (a, b) = (half / c2, if half.abs() > 0.0 { c0 / half } else { 0.0 });
    let (first, second) = (a.min(b), a.max(b));
    if c2 > 0.0 {
        (second > 0.0).then_some((first.max(0.0), second))
    } else if first > 0.0 {
        Some(everything)
    } else {
        Some((second.max(0.0), f64::INFINITY))
    }
}

/// A family with an order of variables and the conditions that apply at each.
#[derive(Debug)]
pub(crate) struct Plan<'a> {
    family: &'a Family,
    order: Vec<usize>,
    steps: Vec<Vec<Condition>>,
    /// By depth, what the variables from there on cost at least.
    rest_cost: Vec<u64>,
    /// Expected number of partial sets.
    pub nodes: f64,
}

/// What a set may use up.
#[derive(Clone, Copy, Debug)]
pub(crate) struct Budget {
    /// How many part numbers may be bought.
    pub bought: usize,
    /// What the parts of a board may cost at most, in millionths.
    pub cost: u64,
}

/// What a walk through a plan meets.
pub(crate) trait Visitor {
    /// A set whose figures lie in all windows: the choices of the active groups and the transfer function.
    fn set(&mut self, choices: &dyn Fn() -> Vec<Choice>, response: &Biquad);
    /// Whether to stop, asked now and then.
    fn stopped(&mut self) -> bool;
}

impl Plan<'_> {
    /// How many values the first variable has.
    pub fn roots(&self) -> usize {
        self.order.first().map_or(1, |&v| self.family.variables[v].choices.len())
    }

    /// What any of its sets costs at least.
    pub fn least_cost(&self) -> u64 {
        self.rest_cost[0]
    }

    /// Visits every set in the windows and the budget whose first variable's index lies in `roots`; counts partial and
    /// whole sets.
    pub fn walk(&self, roots: std::ops::Range<usize>, budget: Budget, visitor: &mut dyn Visitor) -> u64 {
        let n = self.order.len();
        let mut walk = Walk {
            plan: self,
            budget,
            chosen: vec![0.0; n],
            index: vec![0; n],
            taken: vec![0; n],
            nodes: 0,
            halted: false,
            visitor,
        };
        walk.descend(0, (0, 0), Some(roots));
        walk.nodes
    }
}

struct Walk<'a, 'b> {
    plan: &'a Plan<'a>,
    budget: Budget,
    /// Admittances by depth.
    chosen: Vec<f64>,
    /// Value indices by depth.
    index: Vec<usize>,
    /// Value numbers by depth: no two variables take the same value, for that set belongs to a smaller family.
    taken: Vec<u32>,
    nodes: u64,
    halted: bool,
    visitor: &'b mut dyn Visitor,
}

impl Walk<'_, '_> {
    /// Goes on from a partial set that needs so many part numbers bought and costs so much.
    fn descend(&mut self, depth: usize, spent: (usize, u64), roots: Option<std::ops::Range<usize>>) {
        let plan = self.plan;
        let Some(&v) = plan.order.get(depth) else { return self.leaf() };
        let variable = &plan.family.variables[v];
        let (mut low, mut high) = (0.0, f64::INFINITY);
        let mut from = 0;
        for (i, condition) in plan.steps[depth].iter().enumerate() {
            match condition.interval(&self.chosen[..depth]) {
                Some((least, most)) => (low, high) = (f64::max(low, least), f64::min(high, most)),
                None => return,
            }
            if i == 0 {
                from = variable.admittances.partition_point(|&y| y < low);
            }
            if low > high || variable.admittances.get(from).is_none_or(|&y| y > high) {
                return;
            }
        }
        from += variable.admittances[from..].partition_point(|&y| y < low);
        let mut to = from + variable.admittances[from..].partition_point(|&y| y <= high);
        if let Some(roots) = roots {
            (from, to) = (from.max(roots.start), to.min(roots.end));
        }
        let trials: Vec<_> = plan.steps[depth]
            .iter()
            .filter(|c| c.solution.is_loose() && from < to)
            .map(|c| {
                let chosen = &self.chosen[..depth];
                (c, (c.dividend.coefficients(chosen), c.divisor.coefficients(chosen)))
            })
            .collect();
        for i in from..to {
            let y = variable.admittances[i];
            if self.taken[..depth].contains(&variable.numbers[i]) {
                continue;
            }
            let (bought, cost) = (spent.0 + usize::from(variable.bought[i]), spent.1 + variable.costs[i]);
            if bought > self.budget.bought || cost + plan.rest_cost[depth + 1] > self.budget.cost {
                continue;
            }
            if !trials.iter().all(|(condition, coefficients)| condition.admits(coefficients, y)) {
                continue;
            }
            self.nodes += 1;
            if self.nodes.is_multiple_of(1 << 14) {
                self.halted |= self.visitor.stopped();
            }
            if self.halted {
                return;
            }
            self.chosen[depth] = y;
            self.index[depth] = i;
            self.taken[depth] = variable.numbers[i];
            self.descend(depth + 1, (bought, cost), None);
        }
    }

    fn leaf(&mut self) {
        let (plan, family) = (self.plan, self.plan.family);
        let mut x = vec![0.0; self.chosen.len()];
        for (&v, &y) in plan.order.iter().zip(&self.chosen) {
            x[v] = y;
        }
        let fill = |list: &[Flat]| [0, 1, 2].map(|k| list.get(k).map_or(0.0, |p| p.value(&x)));
        let response = Biquad { num: fill(&family.numerator), den: fill(&family.denominator) };
        let choices = || {
            let mut of = vec![0; self.index.len()];
            for (&v, &i) in plan.order.iter().zip(&self.index) {
                of[v] = i;
            }
            family.member.iter().map(|&v| family.variables[v].choices[of[v]]).collect()
        };
        self.visitor.set(&choices, &response);
    }
}
