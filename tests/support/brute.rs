//! Every set on the shelves, one after the other.

use std::collections::{BTreeMap, BTreeSet};

use num_complex::Complex64;
use roundwell::circuit;
use roundwell::search::{Problem, SectionProblem};
use roundwell::target::Measure;
use roundwell::units::{Kind, Value};

use super::closed_form::{closed_form, misses};
use super::measure::Judge;
use super::{Numbers, SAME, TAU};

/// Slots that carry one value.
struct Group {
    slots: Vec<usize>,
    kind: Kind,
    values: Vec<Value>,
}

/// One set with its error.
#[derive(Clone, Debug)]
pub struct Found {
    pub error: f64,
    /// Values of the groups that reach the response, the same for all decades of impedance and interchanges.
    pub key: Vec<Value>,
}

/// The best sets by number of part numbers, best first.
pub type Ranked = BTreeMap<usize, Vec<Found>>;

/// All sets of one section, one after the other.
pub struct Brute<'a> {
    problem: &'a Problem,
    section: &'a SectionProblem,
    groups: Vec<Group>,
    /// Which groups reach the response.
    active: Vec<usize>,
    silent: Vec<usize>,
    swaps: Vec<(usize, usize)>,
    judge: Option<Judge>,
    keep: usize,
    /// Sets that were enumerated.
    pub sets: u64,
    pub best: Ranked,
}

impl<'a> Brute<'a> {
    /// Runs through all sets of the problem's only section and keeps the best `keep` of each number of part numbers.
    pub fn run(problem: &'a Problem, keep: usize) -> Brute<'a> {
        let section = &problem.sections[0];
        let targets = std::slice::from_ref(&section.target);
        let weighted = matches!(problem.criterion.measure, Measure::Weighted(_));
        let mut brute = Brute {
            problem,
            section,
            groups: groups(section),
            active: Vec::new(),
            silent: Vec::new(),
            swaps: Vec::new(),
            judge: (!weighted).then(|| Judge::new(targets, &problem.criterion)),
            keep,
            sets: 0,
            best: BTreeMap::new(),
        };
        brute.find_roles();
        let mut choice = vec![0; brute.groups.len()];
        let mut slots = vec![1.0; section.circuit.slots.len()];
        brute.enumerate(0, &mut choice, &mut slots);
        brute
    }

    fn response(&self, slots: &[f64], w: f64) -> Option<Complex64> {
        circuit::response(&self.section.circuit, self.section.output(), slots, w)
    }

    /// Finds by trial which groups move the response and which two may be interchanged.
    fn find_roles(&mut self) {
        let mut numbers = Numbers(7);
        let trials: Vec<Vec<f64>> = (0..3)
            .map(|_| {
                let circuit = &self.section.circuit;
                circuit
                    .slots
                    .iter()
                    .map(|s| match s.kind {
                        Kind::Resistor => numbers.between(1e3, 1e4),
                        Kind::Capacitor => numbers.between(1e-8, 1e-7),
                    })
                    .collect()
            })
            .collect();
        let same = |change: &dyn Fn(&mut Vec<f64>)| {
            trials.iter().all(|base| {
                let mut base = base.clone();
                for group in &self.groups {
                    let value = base[group.slots[0]];
                    group.slots.iter().for_each(|&s| base[s] = value);
                }
                let mut changed = base.clone();
                change(&mut changed);
                [0.3, 1.0, 2.7].iter().all(|w| {
                    let w = w * TAU * 1e3;
                    let (a, b) = (self.response(&base, w).unwrap(), self.response(&changed, w).unwrap());
                    (a - b).norm() <= 1e-9 * a.norm()
                })
            })
        };
        let silent = |g: &usize| same(&|v: &mut Vec<f64>| self.groups[*g].slots.iter().for_each(|&s| v[s] *= 1.7));
        let (silent, active): (Vec<usize>, Vec<usize>) = (0..self.groups.len()).partition(silent);
        let swap = |a: usize, b: usize| {
            let (one, two) = (&self.groups[a], &self.groups[b]);
            one.kind == two.kind
                && one.slots.len() == two.slots.len()
                && same(&|v: &mut Vec<f64>| one.slots.iter().zip(&two.slots).for_each(|(&x, &y)| v.swap(x, y)))
        };
        let pairs = active.iter().flat_map(|&a| active.iter().filter(move |&&b| b > a).map(move |&b| (a, b)));
        let swaps: Vec<(usize, usize)> = pairs.filter(|&(a, b)| swap(a, b)).collect();
        (self.active, self.silent, self.swaps) = (active, silent, swaps);
    }

    fn enumerate(&mut self, depth: usize, choice: &mut Vec<usize>, slots: &mut Vec<f64>) {
        let Some(&group) = self.active.get(depth) else { return self.judge_set(choice, slots) };
        for i in 0..self.groups[group].values.len() {
            choice[group] = i;
            let value = self.groups[group].values[i].to_f64();
            for k in 0..self.groups[group].slots.len() {
                slots[self.groups[group].slots[k]] = value;
            }
            self.enumerate(depth + 1, choice, slots);
        }
    }

    /// The fewest part numbers over all values of the silent groups that the wanted impedance allows.
    fn part_numbers(&self, choice: &mut Vec<usize>, position: usize) -> Option<usize> {
        match self.silent.get(position) {
            Some(&group) => (0..self.groups[group].values.len())
                .filter_map(|i| {
                    choice[group] = i;
                    self.part_numbers(choice, position + 1)
                })
                .min(),
            None => {
                let chosen = || self.groups.iter().zip(choice.iter()).map(|(g, &i)| (g, g.values[i]));
                if let Some((from, to)) = self.problem.goals.impedance {
                    let logs: Vec<f64> = chosen()
                        .filter(|(g, _)| g.kind == Kind::Resistor)
                        .flat_map(|(g, v)| std::iter::repeat_n(v.to_f64().ln(), g.slots.len()))
                        .collect();
                    let mean = (logs.iter().sum::<f64>() / logs.len() as f64).exp();
                    if !(from..=to).contains(&mean) {
                        return None;
                    }
                }
                Some(chosen().map(|(g, v)| (g.kind, v)).collect::<BTreeSet<_>>().len())
            }
        }
    }

    fn judge_set(&mut self, choice: &mut Vec<usize>, slots: &mut [f64]) {
        self.sets += 1;
        let Some(count) = self.part_numbers(choice, 0) else { return };
        if self.problem.goals.max_part_numbers.is_some_and(|most| count > most) {
            return;
        }
        let kept = self.best.get(&count).filter(|list| list.len() >= self.keep);
        let limit = kept.and_then(|list| list.last()).map_or(f64::INFINITY, |f| f.error);
        let Some(error) = self.error(slots, limit) else { return };
        let key = self.key(choice);
        let list = self.best.entry(count).or_default();
        if list.iter().any(|f| f.key == key) {
            return;
        }
        let place = list.partition_point(|f| f.error <= error);
        list.insert(place, Found { error, key });
        list.truncate(self.keep);
    }

    /// The error of a set; `None` if it is above the limit, or the set is unstable.
    fn error(&self, slots: &[f64], limit: f64) -> Option<f64> {
        let form = || closed_form(self.section, slots).unwrap();
        // Of all circuits of the library only this one can be unstable.
        if self.section.circuit.id == "sallen-key-low-pass-gain" && form().den[1] <= 0.0 {
            return None;
        }
        if let Measure::Weighted(weights) = self.problem.criterion.measure {
            let misses = misses(&self.section.target, &form());
            let gain = if self.problem.criterion.ignore_gain { 0.0 } else { weights.gain };
            let weights = [weights.f0, weights.q, gain, weights.fz];
            let error = misses.iter().zip(weights).map(|(miss, weight)| miss * weight).sum::<f64>();
            return Some(error).filter(|e| *e <= limit);
        }
        self.judge.as_ref()?.error(&|w| self.response(slots, w), limit)
    }

    /// The same for all sets that differ by a decade of impedance or by interchangeable groups.
    fn key(&self, choice: &[usize]) -> Vec<Value> {
        let chosen: Vec<Value> = self.groups.iter().zip(choice).map(|(g, &i)| g.values[i]).collect();
        let active = || self.active.iter().map(|&g| (self.groups[g].kind, chosen[g]));
        let decade = |v: Value| v.exponent() + v.mantissa().ilog10() as i32;
        let least = active().filter(|(kind, _)| *kind == Kind::Resistor).map(|(_, v)| v).min().map_or(0, decade);
        let of = |swap: Option<(usize, usize)>| -> Vec<Value> {
            let mut image = chosen.clone();
            if let Some((a, b)) = swap {
                image.swap(a, b);
            }
            let shift = |g: usize| if self.groups[g].kind == Kind::Resistor { -least } else { least };
            self.active.iter().map(|&g| image[g].shifted(shift(g)).unwrap()).collect()
        };
        let swaps = self.swaps.iter().copied().map(Some);
        swaps.chain([None]).map(of).min().unwrap()
    }

    /// The error by number of part numbers, each better than all with fewer: what a shortlist must show.
    pub fn front(&self) -> Vec<(usize, f64)> {
        let mut front: Vec<(usize, f64)> = Vec::new();
        for (&count, list) in &self.best {
            let error = list[0].error;
            if front.last().is_none_or(|&(_, best)| error < best - SAME) {
                front.push((count, error));
            }
        }
        front
    }
}

fn groups(section: &SectionProblem) -> Vec<Group> {
    let mut groups: Vec<Group> = Vec::new();
    for slot in section.output().filled(&section.circuit) {
        let shelf = section.shelves[slot].values();
        let together = section.equal.iter().find(|e| e.contains(&slot));
        let known = groups.iter_mut().find(|g| together.is_some_and(|e| e.contains(&g.slots[0])));
        match known {
            Some(group) => {
                group.slots.push(slot);
                group.values.retain(|v| shelf.contains(v));
            }
            None => {
                let kind = section.circuit.slots[slot].kind;
                groups.push(Group { slots: vec![slot], kind, values: shelf.to_vec() });
            }
        }
    }
    groups
}
