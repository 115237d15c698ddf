//! Replacements: of a built section some parts are gone, and as few others as possible shall change.

use rayon::prelude::*;

use crate::parts::{Choice, Shelf, Supply};
use crate::target::{Criterion, Figures, Section, Yardstick};
use crate::units::{Kind, Value};

use super::front::{ErrorKey, Found, Proof};
use super::limits::{Monitor, StopReason};
use super::model::{Group, Model};
use super::outcome::Chosen;
use super::prepared::{chosen, unmet};
use super::problem::{Goals, SectionProblem};
use super::section;

/// By what replacements are ranked.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Reference {
    /// By the change of the response against the section as built.
    #[default]
    Built,
    /// By the error against the target.
    Target,
}

/// A built section of which parts are gone.
#[derive(Clone, Debug)]
pub struct SwapProblem {
    /// The section as built: the shelf of each filled slot holds its one part.
    pub built: SectionProblem,
    /// What may go into each slot, in slot order.
    pub open: Vec<Shelf>,
    /// The slots whose parts are gone.
    pub gone: Vec<usize>,
    /// How many other slots may change.
    pub others: usize,
    /// How many replacements to list for each number of other slots.
    pub rows: usize,
    /// By what they are ranked.
    pub reference: Reference,
    /// How responses are compared.
    pub criterion: Criterion,
    /// No replacement beyond this is listed, in the unit of the measure.
    pub error_limit: f64,
    /// What new parts are taken from; the parts that stay are there already.
    pub supply: Supply,
}

/// One slot that changes.
#[derive(Clone, Debug, PartialEq)]
pub struct Change {
    /// The slot's index in the circuit.
    pub slot: usize,
    /// What it holds.
    pub from: Choice,
    /// What it is to hold.
    pub to: Choice,
}

/// A replacement.
#[derive(Clone, Debug, PartialEq)]
pub struct Replacement {
    /// The slots that change, in slot order.
    pub changes: Vec<Change>,
    /// How many of them were not gone.
    pub others: usize,
    /// Error against the section as built, in the unit of the measure.
    pub against_built: f64,
    /// Error against the target.
    pub against_target: f64,
    /// All parts and what they give.
    pub chosen: Chosen,
}

/// What can replace the parts that are gone.
#[derive(Clone, Debug, PartialEq)]
pub struct Replacements {
    /// The section as built, and its error against the target.
    pub built: Chosen,
    /// The ideal section with the figures of that as built.
    pub built_as_target: Section,
    /// Error of the section as built against the target.
    pub built_error: f64,
    /// Those with the fewest other changes first, by error; each better than all with fewer.
    pub rows: Vec<Replacement>,
    /// For values of a slot that is gone: the inequality that fails while the parts of its kind stay, as `C1 = 15n: ...`.
    pub impossible: Vec<(usize, Choice, String)>,
    /// Why the search ended early, if it did: then nothing is proved.
    pub stopped: Option<StopReason>,
    /// Sets whose response was evaluated.
    pub sets: u64,
    /// Partial and whole sets visited.
    pub nodes: u64,
}

/// Finds replacements; `None` if the section as built is no stable section of its shape.
///
/// For each number of other slots, every choice of that many is searched exactly.
pub fn replacements(problem: &SwapProblem, monitor: &dyn Monitor) -> Option<Replacements> {
    let section = &problem.built;
    let whole = Yardstick::new(std::slice::from_ref(&section.target), problem.criterion);
    let criterion = Criterion { band: Some(whole.band()), ..problem.criterion };
    let model = Model::new(section, &problem.supply)?;
    let kept: Vec<Choice> = model.groups.iter().map(|group| group.shelf.choices()[0]).collect();
    let as_built = model.biquad(&kept[..model.active]);
    let Figures { w0, q, gain, wz } = section.target.figures_of(&as_built);
    let of_shape = as_built.is_stable(section.target.shape.order());
    let built_as_target = Section::new(&section.target.name, section.target.shape, w0, q, gain, wz).ok()?;
    let built_yardstick = Yardstick::new(std::slice::from_ref(&built_as_target), criterion);
    let yardstick = match problem.reference {
        Reference::Built => &built_yardstick,
        Reference::Target => &whole,
    };
    let is_gone = |group: &Group| group.slots.iter().any(|slot| problem.gone.contains(slot));
    let changeable: Vec<usize> = (0..model.groups.len()).filter(|&g| !is_gone(&model.groups[g])).collect();

    let mut found = Replacements {
        built: chosen(section, &model, &filled(&kept), Vec::new()),
        built_as_target,
        built_error: whole.deviation(&[as_built]).error,
        rows: Vec::new(),
        impossible: impossible(problem),
        stopped: None,
        sets: 0,
        nodes: 0,
    };
    if !of_shape {
        return None;
    }
    let mut best: Option<ErrorKey> = None;
    for others in 0..=problem.others {
        let tasks = subsets(&changeable, others, &|g| model.groups[g].slots.len());
        let searched: Vec<(Vec<Candidate>, u64, u64, Option<StopReason>)> =
            tasks.into_par_iter().map(|free| search(problem, &model, &kept, &free, yardstick, monitor)).collect();
        let mut candidates = Vec::new();
        for (list, sets, nodes, stopped) in searched {
            candidates.extend(list);
            (found.sets, found.nodes) = (found.sets + sets, found.nodes + nodes);
            found.stopped = found.stopped.or(stopped);
        }
        candidates.sort();
        candidates.dedup();
        candidates.retain(|candidate| best.is_none_or(|best| candidate.key < best));
        candidates.truncate(problem.rows);
        best = candidates.first().map(|candidate| candidate.key).or(best);
        for candidate in &candidates {
            let changes: Vec<Change> = changes(&model, &kept, &candidate.choices);
            let response = model.biquad(&candidate.choices[..model.active]);
            found.rows.push(Replacement {
                others: changes.iter().filter(|change| !is_gone(group_of(&model, change.slot))).count(),
                changes,
                against_built: built_yardstick.deviation(&[response]).error,
                against_target: whole.deviation(&[response]).error,
                chosen: chosen(section, &model, &filled(&candidate.choices), Vec::new()),
            });
        }
    }
    Some(found)
}

/// A set of all groups, by error.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
struct Candidate {
    key: ErrorKey,
    choices: Vec<Choice>,
}

fn filled(choices: &[Choice]) -> Vec<(f64, Option<Choice>)> {
    choices.iter().map(|choice| (choice.value.to_f64(), Some(*choice))).collect()
}

fn group_of(model: &Model, slot: usize) -> &Group {
    let index = model.groups.iter().position(|group| group.slots.contains(&slot)).unwrap_or(0);
    &model.groups[index]
}

fn changes(model: &Model, kept: &[Choice], choices: &[Choice]) -> Vec<Change> {
    let groups = model.groups.iter().zip(kept.iter().zip(choices));
    let mut changes: Vec<Change> = groups
        .filter(|(_, (from, to))| from != to)
        .flat_map(|(group, (&from, &to))| group.slots.iter().map(move |&slot| Change { slot, from, to }))
        .collect();
    changes.sort_by_key(|change| change.slot);
    changes
}

/// The sets of groups with exactly so many slots together.
fn subsets(groups: &[usize], slots: usize, size: &dyn Fn(usize) -> usize) -> Vec<Vec<usize>> {
    match (slots, groups.split_first()) {
        (0, _) => vec![Vec::new()],
        (_, None) => Vec::new(),
        (_, Some((&first, rest))) => {
            let mut found = subsets(rest, slots, size);
            if let Some(left) = slots.checked_sub(size(first)) {
                found.extend(subsets(rest, left, size).into_iter().map(|mut more| {
                    more.push(first);
                    more
                }));
            }
            found
        }
    }
}

/// The value on the label.
fn label(problem: &SwapProblem, choice: Choice) -> Value {
    problem.supply.lot_of(choice).map_or(choice.value, |lot| lot.nominal)
}

/// The values that are gone: they are placed nowhere anew.
fn gone(problem: &SwapProblem) -> Vec<(Kind, Value)> {
    let shelf = |&slot: &usize| &problem.built.shelves[slot];
    problem.gone.iter().map(shelf).map(|shelf| (shelf.kind(), label(problem, shelf.choices()[0]))).collect()
}

/// The nearest sets in which the gone groups and those in `free` may change.
fn search(
    problem: &SwapProblem,
    model: &Model,
    kept: &[Choice],
    free: &[usize],
    yardstick: &Yardstick,
    monitor: &dyn Monitor,
) -> (Vec<Candidate>, u64, u64, Option<StopReason>) {
    let nothing = (Vec::new(), 0, 0, None);
    let gone = gone(problem);
    let mut section = problem.built.clone();
    for (index, group) in model.groups.iter().enumerate() {
        let is_gone = group.slots.iter().any(|slot| problem.gone.contains(slot));
        if !is_gone && !free.contains(&index) {
            continue;
        }
        for &slot in &group.slots {
            let stays = (!is_gone).then_some(kept[index]);
            // A replacement is one set for all boards, and a measured part does for one.
            let too_few = |choice: &Choice| {
                problem.supply.boards > 1 && problem.supply.lot_of(*choice).is_some_and(|lot| lot.measured.is_some())
            };
            let is_there =
                |choice: &Choice| !gone.contains(&(group.kind, label(problem, *choice))) && !too_few(choice);
            let others = problem.open[slot].choices().iter().copied().filter(is_there);
            let Ok(shelf) = Shelf::of_choices(group.kind, others.chain(stays)) else { return nothing };
            section.shelves[slot] = shelf;
        }
    }
    let forms = Model::forms(&section, &problem.supply);
    let goals = Goals {
        alternatives: problem.rows.saturating_sub(1),
        error_limit: problem.error_limit,
        error_resolution: 0.0,
        ..Goals::default()
    };
    let Some(front) = section::nearest(&forms, &problem.supply, yardstick, &goals, monitor) else { return nothing };
    let stopped = match front.proof {
        Proof::Stopped { reason, .. } => Some(reason),
        Proof::Exhaustive(_) => None,
    };
    // The groups of the narrower section stand in another order where more of them reach the response.
    let candidate = |found: &Found| {
        let form = &forms[found.form];
        let of_slot = |slot: usize| {
            let index = form.groups.iter().position(|group| group.slots.contains(&slot))?;
            found.choices.get(index).copied()
        };
        let choices = model.groups.iter().map(|group| of_slot(group.slots[0])).collect::<Option<Vec<Choice>>>()?;
        Some(Candidate { key: found.key, choices })
    };
    let found = front.rows.iter().flatten().filter(|found| found.error <= problem.error_limit);
    (found.filter_map(candidate).collect(), front.sets, front.nodes, stopped)
}

/// Values of the slots that are gone with which no choice of the other kind helps: the parts of the slot's kind stay, all
/// else is free.
fn impossible(problem: &SwapProblem) -> Vec<(usize, Choice, String)> {
    let slots = &problem.built.circuit.slots;
    let mut found = Vec::new();
    for &slot in &problem.gone {
        for &choice in problem.open[slot].choices() {
            if gone(problem).contains(&(slots[slot].kind, label(problem, choice))) {
                continue;
            }
            let Ok(only) = Shelf::of_choices(slots[slot].kind, [choice]) else { continue };
            let mut section = problem.built.clone();
            for (index, shelf) in section.shelves.iter_mut().enumerate() {
                if index == slot {
                    *shelf = only.clone();
                } else if slots[index].kind != slots[slot].kind {
                    *shelf = problem.open[index].clone();
                }
            }
            found.extend(unmet(&section).into_iter().map(|why| (slot, choice, why)));
        }
    }
    found
}
