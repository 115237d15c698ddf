//! All sets of one section that may stand on a board, with what they take part in.

use std::collections::BTreeMap;
use std::sync::atomic::{AtomicUsize, Ordering};

use rayon::prelude::*;

use crate::parts::{Choice, Supply};
use crate::target::Biquad;
use crate::units::Kind;

use super::super::canonical::{impedance, in_ohms};
use super::super::family::{Budget, Family, Visitor};
use super::super::limits::{Monitor, StopReason};
use super::super::model::{Group, Model};
use super::super::prepared::Prepared;
use super::super::problem::Goals;
use super::super::section::tasks;
use super::super::window::WindowMaker;
use super::offsets::{Off, Offsets};

/// A set of one section.
#[derive(Clone, Debug)]
pub(super) struct Candidate {
    /// Its part numbers, ascending and distinct.
    pub palette: Box<[u16]>,
    /// The form of the section that it fills.
    pub form: u16,
    /// The catalogue's number of the choice of each active group.
    pub items: Box<[u16]>,
    /// How far it misses its own target, in the unit of the measure.
    pub own: f64,
    /// What its response is off.
    pub off: Off,
}

impl Candidate {
    /// The order of candidates: those with the same part numbers stand together.
    pub fn rank(&self) -> (&[u16], u16, &[u16]) {
        (&self.palette, self.form, &self.items)
    }
}

/// Numbers for all choices and part numbers of a board.
#[derive(Debug)]
pub(super) struct Catalogue {
    items: Vec<(Kind, Choice)>,
    part_numbers: Vec<u16>,
    numbers: BTreeMap<(Kind, Choice), u16>,
}

impl Catalogue {
    /// Numbers what may stand in these forms; `None` if there is more than can be numbered.
    pub fn new<'a>(forms: impl Iterator<Item = &'a Model>, supply: &Supply) -> Option<Catalogue> {
        let mut numbers: BTreeMap<(Kind, Choice), u16> = BTreeMap::new();
        for group in forms.flat_map(Model::active_groups) {
            numbers.extend(group.shelf.choices().iter().map(|&choice| ((group.kind, choice), 0)));
        }
        u16::try_from(numbers.len()).ok()?;
        let items: Vec<(Kind, Choice)> = numbers.keys().copied().collect();
        numbers.values_mut().zip(0..).for_each(|(number, next)| *number = next);
        let mut known: BTreeMap<(Kind, Choice), u16> = BTreeMap::new();
        let part_number = |&(kind, choice): &(Kind, Choice)| {
            let next = known.len() as u16;
            *known.entry(supply.part_number(kind, choice)).or_insert(next)
        };
        let part_numbers = items.iter().map(part_number).collect();
        Some(Catalogue { items, part_numbers, numbers })
    }

    /// The choice of a number.
    pub fn choice(&self, item: u16) -> Choice {
        self.items[usize::from(item)].1
    }

    /// How many part numbers there are.
    pub fn part_numbers(&self) -> usize {
        self.part_numbers.iter().max().map_or(0, |most| usize::from(*most) + 1)
    }

    fn palette(&self, items: &[u16]) -> Box<[u16]> {
        let mut palette: Vec<u16> = items.iter().map(|&item| self.part_numbers[usize::from(item)]).collect();
        palette.sort_unstable();
        palette.dedup();
        palette.into()
    }
}

/// A limit with room for rounding.
pub(super) fn widened(limit: f64) -> f64 {
    limit * (1.0 + 1e-9) + 1e-12
}

/// Sets of a section with a certain number of different choices.
#[derive(Debug, Default)]
pub(super) struct Gathered {
    pub candidates: Vec<Candidate>,
    /// Sets whose response was evaluated.
    pub sets: u64,
    /// Partial and whole sets visited.
    pub nodes: u64,
}

/// More sets than this are not kept for one number of choices of one section.
const MOST_CANDIDATES: usize = 3_000_000;

/// What candidates are judged by.
pub(super) struct Gathering<'a> {
    pub prepared: &'a Prepared<'a>,
    pub catalogue: &'a Catalogue,
    pub offsets: &'a Offsets,
    pub goals: &'a Goals,
    pub monitor: &'a dyn Monitor,
}

impl Gathering<'_> {
    /// All sets with exactly so many different choices whose own error is at most `own`, each once;
    /// [`StopReason::Effort`] where more partial sets are expected than are affordable.
    pub fn gather(&self, choices: usize, own: f64, affordable: f64) -> Result<Gathered, StopReason> {
        let forms = &self.prepared.forms;
        let maker = forms.first().and_then(|form| WindowMaker::new(&self.prepared.yardstick, form.numerator()));
        let Some(maker) = maker else { return Ok(Gathered::default()) };
        let windows = maker.windows(own);
        let mut members: Vec<(usize, Vec<usize>)> = Vec::new();
        for (index, form) in forms.iter().enumerate() {
            let (resistors, capacitors) = form.kinds();
            for r in 0..=resistors.min(choices) {
                if choices - r <= capacitors {
                    members.extend(form.members(r, choices - r).into_iter().map(|member| (index, member)));
                }
            }
            if let Some(reason) = self.monitor.stop() {
                return Err(reason);
            }
        }
        let supply = self.prepared.supply;
        let build = |(form, member): (usize, Vec<usize>)| {
            let family = || Family::new(&forms[form], supply, member, &windows);
            Some((form, self.monitor.stop().is_none().then(family).flatten()?))
        };
        let families: Vec<(usize, Family)> = members.into_par_iter().filter_map(build).collect();
        let plans: Vec<_> =
            families.par_iter().filter_map(|(form, family)| Some((*form, family.plan(&windows)?))).collect();
        if let Some(reason) = self.monitor.stop() {
            return Err(reason);
        }
        if plans.iter().map(|(_, plan)| plan.nodes).sum::<f64>() > affordable {
            return Err(StopReason::Effort);
        }
        let budget = Budget { bought: supply.buying.most(), cost: u64::MAX };
        let kept = AtomicUsize::new(0);
        let results: Vec<(Gathered, bool)> = tasks(&plans)
            .into_par_iter()
            .map(|(form, plan, roots)| {
                let mut collector = Collector {
                    gathering: self,
                    model: &forms[form],
                    form,
                    own,
                    gathered: Gathered::default(),
                    kept: &kept,
                    stopped: false,
                };
                if !collector.stopped() {
                    collector.gathered.nodes = plan.walk(roots, budget, &mut collector);
                }
                (collector.gathered, collector.stopped)
            })
            .collect();
        if let Some(reason) = self.monitor.stop() {
            return Err(reason);
        }
        if results.iter().any(|(_, stopped)| *stopped) || kept.into_inner() > MOST_CANDIDATES {
            return Err(StopReason::Effort);
        }
        let mut whole = Gathered::default();
        for (gathered, _) in results {
            whole.sets += gathered.sets;
            whole.nodes += gathered.nodes;
            whole.candidates.extend(gathered.candidates);
        }
        whole.candidates.par_sort_by(|a, b| a.rank().cmp(&b.rank()));
        whole.candidates.dedup_by(|a, b| a.form == b.form && a.items == b.items);
        Ok(whole)
    }
}

/// Keeps the sets of one task.
struct Collector<'a> {
    gathering: &'a Gathering<'a>,
    model: &'a Model,
    form: usize,
    own: f64,
    gathered: Gathered,
    /// Sets kept by all tasks.
    kept: &'a AtomicUsize,
    stopped: bool,
}

impl Visitor for Collector<'_> {
    fn set(&mut self, choices: &dyn Fn() -> Vec<Choice>, response: &Biquad) {
        self.gathered.sets += 1;
        let Gathering { prepared, catalogue, offsets, goals, .. } = self.gathering;
        let yardstick = &prepared.yardstick;
        let order = yardstick.sections()[0].shape.order();
        if !response.is_stable(order) {
            return;
        }
        let Some(own) = yardstick.within(&[*response], widened(self.own)).map(|miss| miss.error) else { return };
        let choices = choices();
        let groups = self.model.active_groups();
        if let (Some((from, to)), Some(level)) = (goals.impedance, impedance(groups, &in_ohms(&choices)))
            && !(from..=to).contains(&level)
        {
            return;
        }
        let number = |(group, &choice): (&Group, &Choice)| catalogue.numbers.get(&(group.kind, choice)).copied();
        let Some(items) = groups.iter().zip(&choices).map(number).collect::<Option<Vec<u16>>>() else { return };
        let image = |order: &Vec<usize>| order.iter().map(|&k| items[k]).collect::<Vec<u16>>();
        let items = self.model.symmetries.iter().map(image).chain([items.clone()]).min().unwrap_or(items);
        let off = offsets.of(&yardstick.sections()[0].ideal(), response);
        let palette = catalogue.palette(&items);
        self.gathered.candidates.push(Candidate { palette, form: self.form as u16, items: items.into(), own, off });
        self.stopped |= self.kept.fetch_add(1, Ordering::Relaxed) > MOST_CANDIDATES;
    }

    fn stopped(&mut self) -> bool {
        self.stopped |=
            self.gathering.monitor.stop().is_some() || self.kept.load(Ordering::Relaxed) > MOST_CANDIDATES;
        self.stopped
    }
}
