//! A section that has been searched, and what its sets are as parts.

use crate::circuit::Need;
use crate::parts::{Choice, Origin, Supply};
use crate::target::{Biquad, Yardstick};
use crate::units::Value;

use super::canonical::{canonical, impedance, in_ohms, shifted, with_silent};
use super::combine::SetAtLevel;
use super::front::{ErrorKey, Proof};
use super::ideal::{self, Ideal};
use super::model::{Group, Model};
use super::outcome::{Chosen, Part, SectionSummary};
use super::problem::{Goals, SectionProblem};
use super::section::SectionFront;

/// A section ready to be combined.
pub(crate) struct Prepared<'a> {
    pub problem: &'a SectionProblem,
    pub supply: &'a Supply,
    pub yardstick: Yardstick,
    /// With single parts, and with pairs in every way that is allowed.
    pub forms: Vec<Model>,
    pub front: SectionFront,
}

impl Prepared<'_> {
    /// Gives a section for which a stopped search found nothing its rounded ideal parts, so that what was found for the
    /// other sections is not lost.
    pub fn fall_back(&mut self, goals: &Goals) {
        if !self.front.rows.is_empty() || matches!(self.front.proof, Proof::Exhaustive(_)) {
            return;
        }
        let ignore_gain = self.yardstick.criterion().ignore_gain;
        let single = &self.forms[0];
        let found = ideal::solve(single, &self.problem.target, ignore_gain).and_then(|ideal| {
            let rounded = self.rounded(&ideal);
            let mut found = canonical(single, 0, self.supply, goals, &rounded[..single.active]).into_iter().next()?;
            let response = single.biquad(&found.choices[..single.active]);
            found.error = self.yardstick.deviation(&[response]).error;
            found.key = ErrorKey::new(found.error);
            found.error.is_finite().then_some(found)
        });
        self.front.rows.extend(found.map(|found| vec![found]));
    }

    pub fn summary(&self, shortages: &[String]) -> SectionSummary {
        let circuit = &self.problem.circuit;
        let single = &self.forms[0];
        let names =
            |slots: &[usize]| slots.iter().map(|&s| circuit.slots[s].name.as_str()).collect::<Vec<_>>().join("=");
        let silent = single.silent_groups().iter().flat_map(|g| &g.slots);
        let swap = |order: &Vec<usize>| {
            let moved = (0..order.len()).filter(|&k| k < order[k]);
            let pairs = moved.map(|k| {
                let groups = single.active_groups();
                format!("{} <-> {}", names(&groups[k].slots), names(&groups[order[k]].slots))
            });
            pairs.collect::<Vec<_>>().join(", ")
        };
        SectionSummary {
            name: self.problem.target.name.clone(),
            proof: self.front.proof.clone(),
            combinations: self.forms.iter().map(Model::combinations).sum(),
            sets: self.front.sets,
            nodes: self.front.nodes,
            error_limit: self.front.limit,
            front: self.front.rows.iter().map(|row| (row[0].takes.part_numbers, row[0].error)).collect(),
            silent: silent.map(|&s| circuit.slots[s].name.clone()).collect(),
            interchangeable: single.symmetries.iter().map(swap).collect(),
            unmet: unmet(self.problem).into_iter().chain(shortages.iter().cloned()).collect(),
        }
    }
}

/// The needs of a section's output that its shelves cannot meet, with both sides.
pub(crate) fn unmet(section: &SectionProblem) -> Vec<String> {
    let circuit = &section.circuit;
    let output = section.output();
    let q = section.target.q.unwrap_or(0.5);
    let reach = |need: &Need| {
        let product = |slots: &[usize], largest: bool| -> f64 {
            let end = |&s: &usize| {
                let (low, high) = section.shelves[s].span();
                if largest { high.to_f64() } else { low.to_f64() }
            };
            slots.iter().map(end).product()
        };
        product(&need.above, need.at_least) / product(&need.below, !need.at_least)
    };
    let concerned = circuit.needs.iter().filter(|need| need.outputs.contains(&output.name));
    concerned
        .filter_map(|need| {
            let (bound, reach) = (need.bound(q, section.target.gain.abs()), reach(need));
            let fails = if need.at_least { reach < bound } else { reach > bound };
            let end = if need.at_least { "at most" } else { "at least" };
            fails.then(|| {
                format!("{} = {}, but these shelves give {} {end}", need.text(circuit), short(bound), short(reach))
            })
        })
        .collect()
}

/// A number with four significant digits, no more decimals than needed.
fn short(x: f64) -> String {
    let digits = (3 - x.abs().log10().floor() as i32).clamp(0, 6) as usize;
    let text = format!("{x:.digits$}");
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').to_string() } else { text }
}

impl Prepared<'_> {
    /// The ideal parts on their shelves, each to the nearest, the silent groups filled.
    pub fn rounded(&self, ideal: &Ideal) -> Vec<Choice> {
        let single = &self.forms[0];
        // Of several lots of one value that which suffices, else the first.
        let of_value = |group: &Group, value: Value| {
            let lots = || group.shelf.choices().iter().copied().filter(move |choice| choice.value == value);
            let enough = lots().find(|choice| self.supply.obtain(*choice, group.bodies()) == Some(Origin::Stock));
            enough.or_else(|| lots().next()).unwrap_or(value.into())
        };
        let nearest = single.active_groups().iter().zip(&ideal.values).map(|(g, &v)| of_value(g, g.shelf.nearest(v)));
        let active: Vec<Choice> = nearest.collect();
        let whole = with_silent(single, self.supply, active.clone(), false).into_iter().next();
        let whole = whole.map(|(choices, _)| choices);
        whole.unwrap_or_else(|| {
            let level = impedance(single.active_groups(), &in_ohms(&active)).unwrap_or(1.0);
            let silent = single.silent_groups().iter().map(|g| of_value(g, g.shelf.nearest(level)));
            active.iter().copied().chain(silent).collect()
        })
    }

    /// A chosen section from a set at its level.
    pub fn chosen_at(&self, set: &SetAtLevel) -> Chosen {
        let groups = self.forms[set.form].active_groups();
        let level = |&level: &i32| {
            let shifted = shifted(groups, &set.choices[..groups.len()], level - set.level)?;
            impedance(groups, &in_ohms(&shifted))
        };
        let values: Vec<(f64, Option<Choice>)> =
            set.choices.iter().map(|choice| (choice.value.to_f64(), Some(*choice))).collect();
        self.chosen(set.form, &values, set.levels.iter().filter_map(level).collect())
    }

    /// A chosen section from the values of all its groups.
    pub fn chosen(&self, form: usize, values: &[(f64, Option<Choice>)], levels: Vec<f64>) -> Chosen {
        chosen(self.problem, &self.forms[form], values, levels)
    }

    /// The transfer function of a chosen section.
    pub fn response(&self, chosen: &Chosen) -> Biquad {
        // The slots themselves, whatever stands in them.
        let single = &self.forms[0];
        let value = |group: &Group| {
            let part = chosen.parts.iter().find(|part| part.slot == group.slots[0]);
            part.map_or(f64::NAN, |part| part.ideal)
        };
        let values: Vec<f64> = single.active_groups().iter().map(value).collect();
        single.biquad_of(&values)
    }
}

/// A chosen section from the values of all its groups.
pub(crate) fn chosen(
    section: &SectionProblem,
    form: &Model,
    values: &[(f64, Option<Choice>)],
    mut levels: Vec<f64>,
) -> Chosen {
    let active: Vec<f64> = values[..form.active].iter().map(|(v, _)| *v).collect();
    let achieved = section.target.figures_of(&form.biquad_of(&active));
    let mut parts: Vec<Part> = Vec::new();
    for (group, &(ideal, choice)) in form.groups.iter().zip(values) {
        for &slot in &group.slots {
            let other = parts.iter_mut().find(|part| part.slot == slot);
            match (other, group.joint) {
                (Some(first), Some(joint)) => {
                    first.ideal = joint.value(group.kind, first.ideal, ideal);
                    first.value = None;
                    first.pieces.extend(choice);
                    first.pieces.sort_unstable_by(|a, b| b.cmp(a));
                }
                _ => parts.push(Part {
                    slot,
                    kind: group.kind,
                    ideal,
                    value: choice.map(|choice| choice.value),
                    pieces: choice.into_iter().collect(),
                    joint: group.joint,
                }),
            }
        }
    }
    parts.sort_by_key(|part| part.slot);
    let impedance = impedance(form.active_groups(), &active);
    if levels.is_empty() {
        levels.extend(impedance);
    }
    Chosen { parts, achieved, impedance, levels }
}
