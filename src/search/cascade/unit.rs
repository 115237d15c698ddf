//! One section as a stage of a cascade: its response, and that of every op-amp output in it.

use crate::parts::{Choice, Shelf, Supply};
use crate::target::{Biquad, Section};

use super::super::canonical::with_silent;
use super::super::ideal;
use super::super::model::Model;
use super::super::problem::SectionProblem;

/// What realises a section.
#[derive(Clone, Debug)]
pub struct Stage {
    /// The section with circuit and shelves; the sign of the target's gain is that of the output.
    pub problem: SectionProblem,
    /// The signed gain, where the circuit gives only this one whatever its parts.
    pub fixed_gain: Option<f64>,
}

/// Unrounded part values, in ohms and farads by slot, that give a section exactly; slots that the output leaves empty
/// carry 1. `None` where the continuous solve finds none.
///
/// Slots without effect on the response carry a shelf value, as the shortlist would give them. Quantities in stock are not
/// asked for.
pub fn ideal_parts(problem: &SectionProblem) -> Option<Vec<f64>> {
    let supply = Supply::default();
    let plain = |shelf: &Shelf| Shelf::new(shelf.kind(), shelf.values().iter().copied()).ok();
    let shelves = problem.shelves.iter().map(plain).collect::<Option<_>>()?;
    let model = Model::new(&SectionProblem { shelves, ..problem.clone() }, &supply)?;
    let ideal = ideal::solve(&model, &problem.target, false)?;
    let nearest = model.active_groups().iter().zip(&ideal.values).map(|(group, &value)| group.shelf.nearest(value));
    let (filled, _) = with_silent(&model, &supply, nearest.map(Choice::from).collect(), false).into_iter().next()?;
    let mut values = vec![1.0; problem.circuit.slots.len()];
    for (index, (group, shelf_value)) in model.groups.iter().zip(&filled).enumerate() {
        let value = ideal.values.get(index).copied().unwrap_or_else(|| shelf_value.value.to_f64());
        group.slots.iter().for_each(|&slot| values[slot] = value);
    }
    Some(values)
}

/// Unrounded part values by slot that give a section exactly and lie as near as can be to given ones, by their logarithms:
/// the network keeps its ratios as far as the section lets it. Pinned slots, and those without effect on the response, keep
/// what they have. With `ignore_gain` the gain may be any. `None` where no such values are found.
pub fn ideal_parts_near(problem: &SectionProblem, ignore_gain: bool, values: &[f64]) -> Option<Vec<f64>> {
    let supply = Supply::default();
    let plain = |shelf: &Shelf| Shelf::new(shelf.kind(), shelf.values().iter().copied()).ok();
    let shelves = problem.shelves.iter().map(plain).collect::<Option<_>>()?;
    let model = Model::new(&SectionProblem { shelves, ..problem.clone() }, &supply)?;
    let start: Vec<f64> = model.active_groups().iter().map(|group| values[group.slots[0]]).collect();
    let found = ideal::near(&model, &problem.target, ignore_gain, &start)?;
    let mut near = values.to_vec();
    for (group, value) in model.active_groups().iter().zip(found) {
        group.slots.iter().for_each(|&slot| near[slot] = value);
    }
    Some(near)
}

/// A section, and what its op-amp outputs do.
#[derive(Clone, Debug)]
pub(super) struct Unit {
    /// The section, with the gain for which it was solved.
    pub section: Section,
    /// Its circuit, where there is one.
    pub stage: Option<Stage>,
    /// Whether the gain can be chosen.
    pub is_free: bool,
    /// The op-amp outputs by name, from the section's input; only the section's output where the others are not known.
    pub nodes: Vec<(String, Biquad)>,
    /// Whether every op-amp output is among them.
    pub is_counted: bool,
}

/// Gains that are tried where a circuit cannot give the first.
const OTHER_GAINS: [f64; 4] = [2.0, 0.5, 10.0, 0.1];

impl Unit {
    /// The section of gain 1, or of the gain that its circuit fixes or can give.
    pub fn new(section: Section, stage: Option<Stage>) -> Unit {
        let Some(stage) = stage else { return Unit::alone(section, None) };
        if let Some(gain) = stage.fixed_gain {
            return Unit::of_gain(&stage, gain).unwrap_or_else(|| {
                let section = Section { gain, ..stage.problem.target.clone() };
                Unit::alone(section, Some(stage))
            });
        }
        let sign = stage.problem.target.gain.signum();
        let tried = std::iter::once(1.0).chain(OTHER_GAINS).find_map(|gain| Unit::of_gain(&stage, sign * gain));
        tried.unwrap_or_else(|| Unit::alone(stage.problem.target.clone(), Some(stage)))
    }

    /// A section of which only the output is known.
    fn alone(section: Section, stage: Option<Stage>) -> Unit {
        let is_free = stage.as_ref().is_none_or(|stage| stage.fixed_gain.is_none());
        let nodes = vec![(String::new(), section.ideal())];
        Unit { section, stage, is_free, nodes, is_counted: false }
    }

    /// The section with a signed gain, its parts solved for; `None` where its circuit cannot give it.
    pub fn of_gain(stage: &Stage, gain: f64) -> Option<Unit> {
        let mut stage = stage.clone();
        stage.problem.target.gain = gain;
        let values = ideal_parts(&stage.problem)?;
        let positive = values.iter().all(|value| value.is_finite() && *value > 0.0);
        let nodes = positive.then(|| op_amp_outputs(&stage.problem, &values)).flatten();
        let section = stage.problem.target.clone();
        let is_free = stage.fixed_gain.is_none();
        Some(match nodes.filter(|nodes| !nodes.is_empty()) {
            Some(nodes) => Unit { section, stage: Some(stage), is_free, nodes, is_counted: true },
            None => Unit::alone(section, Some(stage)),
        })
    }

    /// The same with another gain, solved anew; `None` where its circuit cannot give it.
    pub fn with_gain(&self, gain: f64) -> Option<Unit> {
        if (gain / self.section.gain - 1.0).abs() < 1e-12 {
            return Some(self.clone());
        }
        match &self.stage {
            Some(stage) if self.is_counted => Unit::of_gain(stage, gain),
            stage => Some(Unit::alone(Section { gain, ..self.section.clone() }, stage.clone())),
        }
    }

    /// The section's response.
    pub fn output(&self) -> Biquad {
        self.section.ideal()
    }

    /// The largest magnitude at one of the op-amp outputs, from the section's input.
    pub fn largest(&self, w: f64) -> f64 {
        self.nodes.iter().map(|(_, h)| h.value(w).norm()).fold(0.0, f64::max)
    }
}

/// The response at each op-amp output for slot values; `None` where one is of more than second order.
fn op_amp_outputs(problem: &SectionProblem, values: &[f64]) -> Option<Vec<(String, Biquad)>> {
    let (circuit, output) = (&problem.circuit, problem.output());
    let fixed = |list: Vec<f64>| -> Option<[f64; 3]> {
        (list.len() <= 3).then(|| [0, 1, 2].map(|k| list.get(k).copied().unwrap_or(0.0)))
    };
    let response = |node: usize| {
        let transfer =
            if node == output.node { Some(output.transfer.clone()) } else { circuit.transfer_to(node, output) };
        let (n, d) = transfer?.coefficients(values);
        Some(Biquad { num: fixed(n)?, den: fixed(d)? })
    };
    circuit.op_amps.iter().map(|amp| Some((amp.name.clone(), response(amp.out)?))).collect()
}
