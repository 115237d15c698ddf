//! The exact front of one section.

use std::collections::BTreeMap;
use std::ops::Range;
use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering};

use rayon::prelude::*;

use crate::parts::{Choice, Origin, Supply};
use crate::target::{Biquad, Yardstick};
use crate::units::{Kind, Value};

use super::assign::{Candidates, items};
use super::canonical::{canonical, distinct, parts};
use super::family::{Budget, Family, Plan, Visitor};
use super::front::{Best, End, ErrorKey, Found, Proof, Takes};
use super::limits::{Monitor, Progress, StopReason};
use super::model::{Group, Model};
use super::problem::{Goals, Rank};
use super::window::{Window, WindowMaker};

/// What the search of one section gave.
#[derive(Clone, Debug)]
pub(crate) struct SectionFront {
    /// For each takings on the front its sets, best first.
    pub rows: Vec<Vec<Found>>,
    /// What is proved of it.
    pub proof: Proof,
    /// Sets whose response was evaluated.
    pub sets: u64,
    /// Partial and whole sets visited.
    pub nodes: u64,
    /// The error limit that was in force in the end: larger than the job's where nothing lay within that.
    pub limit: f64,
}

/// By how much the error limit grows from level to level while nothing is found.
pub(crate) const LEVEL_FACTOR: f64 = 3.0;

/// The least error limit that a level begins with: about the step in which errors are compared.
pub(crate) const LEAST_LEVEL: f64 = 1e-7;

/// A level is passed over where the next is not dearer than this, in expected partial sets.
const DEARER: f64 = 1.5;

/// Where nothing lies within the error limit it is widened, by [`LEVEL_FACTOR`] each time, until something does or it
/// has passed this: in dB as in plain ratio a response that far off has nothing to do with the target.
const FARTHEST: f64 = 300.0;

/// Expected partial sets beyond which a level is left out, once nothing was found within the job's error limit.
const AFFORDABLE: f64 = 3e7;

/// Walks of about equal size: large plans are divided by the values of their first variable, small ones are done in one go.
pub(crate) fn tasks<'a, 'b>(plans: &'b [(usize, Plan<'a>)]) -> Vec<(usize, &'b Plan<'a>, Range<usize>)> {
    const LARGE: f64 = 20_000.0;
    let mut tasks = Vec::new();
    for (form, plan) in plans {
        let roots = plan.roots();
        let size = if plan.nodes > LARGE { ((roots as f64 * LARGE / plan.nodes) as usize).max(1) } else { roots };
        let mut start = 0;
        while start < roots {
            tasks.push((*form, plan, start..(start + size).min(roots)));
            start += size;
        }
    }
    tasks
}

/// Searches one section in all its forms.
pub(crate) fn search(
    forms: &[Model],
    supply: &Supply,
    yardstick: &Yardstick,
    goals: &Goals,
    monitor: &dyn Monitor,
) -> Option<SectionFront> {
    Some(Search::new(forms, supply, yardstick, goals, monitor)?.run())
}

/// The sets of least error, whatever they take: for each takings as many as there are rows and alternatives wanted, so that
/// the nearest of all are among them.
pub(crate) fn nearest(
    forms: &[Model],
    supply: &Supply,
    yardstick: &Yardstick,
    goals: &Goals,
    monitor: &dyn Monitor,
) -> Option<SectionFront> {
    let mut search = Search::new(forms, supply, yardstick, goals, monitor)?;
    let proof = search.walk_counts(goals.error_resolution, goals.error_limit, f64::INFINITY);
    let rows = search.best.all();
    Some(SectionFront { rows, proof, sets: search.sets, nodes: search.nodes, limit: goals.error_limit })
}

struct Search<'a> {
    forms: &'a [Model],
    supply: &'a Supply,
    yardstick: &'a Yardstick,
    goals: &'a Goals,
    monitor: &'a dyn Monitor,
    maker: WindowMaker<'a>,
    /// Windows already made, by error limit: the levels of different counts mostly coincide.
    windows: BTreeMap<ErrorKey, Vec<Window>>,
    best: Best,
    sets: u64,
    nodes: u64,
    /// The smallest number of part numbers for which something was left out.
    left_out: Option<usize>,
    /// Whether an assignment of measured parts to boards was given up for being too large.
    assignment_open: bool,
}

impl<'a> Search<'a> {
    fn new(
        forms: &'a [Model],
        supply: &'a Supply,
        yardstick: &'a Yardstick,
        goals: &'a Goals,
        monitor: &'a dyn Monitor,
    ) -> Option<Search<'a>> {
        Some(Search {
            forms,
            supply,
            yardstick,
            goals,
            monitor,
            maker: WindowMaker::new(yardstick, forms.first()?.numerator())?,
            windows: BTreeMap::new(),
            best: Best::new(goals.alternatives + 1, goals.rank == Rank::Cost),
            sets: 0,
            nodes: 0,
            left_out: None,
            assignment_open: false,
        })
    }

    fn run(&mut self) -> SectionFront {
        let mut limit = self.goals.error_limit;
        let mut proof = self.walk_counts(self.goals.error_resolution, limit, f64::INFINITY);
        let halted = |proof: &Proof| matches!(proof, Proof::Stopped { .. });
        while self.best.is_empty() && !halted(&proof) && limit < FARTHEST {
            let from = limit;
            limit *= LEVEL_FACTOR;
            proof = self.walk_counts(from, limit, AFFORDABLE);
        }
        if let (Some(complete_below), false) = (self.left_out, halted(&proof)) {
            proof = Proof::Stopped { reason: StopReason::TooLarge, complete_below };
        }
        if self.assignment_open && !halted(&proof) {
            proof = Proof::Stopped { reason: StopReason::Assignment, complete_below: 0 };
        }
        let mut rows = self.best.front();
        if matches!(proof, Proof::Exhaustive(_)) && !self.cost_counts() {
            // What a silent slot made of sets with fewer values may lie beyond the end of the front.
            let resolution = ErrorKey::new(self.goals.error_resolution);
            let ends: Vec<Takes> =
                rows.iter().filter(|row| row[0].key < resolution).map(|row| row[0].takes).collect();
            rows.retain(|row| !ends.iter().any(|end| *end != row[0].takes && end.is_within(&row[0].takes)));
        }
        SectionFront { rows, proof, sets: self.sets, nodes: self.nodes, limit }
    }

    /// Whether measured parts go to several boards of which each may be its own.
    fn boards_differ(&self) -> bool {
        self.goals.each_board_its_own && self.supply.boards > 1 && self.forms.iter().any(Model::is_measured)
    }

    fn cost_counts(&self) -> bool {
        self.goals.rank == Rank::Cost
    }

    /// The windows for sets up to an error.
    fn windows(&mut self, limit: f64) -> Vec<Window> {
        // The key rounds, so the windows are made for the largest error of that key.
        let key = ErrorKey::new(limit);
        self.windows.entry(key).or_insert_with(|| self.maker.windows(key.ceiling())).clone()
    }

    /// Walks what a set takes upwards, part numbers first: each up to `limit` in levels that begin at `first`; levels that
    /// are not affordable are left out.
    fn walk_counts(&mut self, first: f64, limit: f64, affordable: f64) -> Proof {
        let spans: Vec<(usize, usize)> = self.forms.iter().map(Model::part_numbers).collect();
        let fewest = spans.iter().map(|span| span.0).min().unwrap_or(0);
        // Where each board may be its own, what silent slots take decides which sets can stand on one board of a run.
        let silent = if self.boards_differ() { self.forms[0].silent_groups().len() } else { 0 };
        let most = spans.iter().map(|span| span.1).max().unwrap_or(0) + silent;
        let allowed = self.goals.max_part_numbers.unwrap_or(most);
        let resolution = ErrorKey::new(self.goals.error_resolution);
        let mut by_placed: Vec<Range<usize>> = Vec::new();
        for (index, form) in self.forms.iter().enumerate() {
            match by_placed.last_mut() {
                Some(range) if self.forms[range.start].placed_parts == form.placed_parts => range.end = index + 1,
                _ => by_placed.push(index..index + 1),
            }
        }
        let mut passed_over = false;
        for part_numbers in fewest..=most.min(allowed) {
            // Families are built when they are first needed: most classes are passed over.
            let mut families: Vec<Option<Vec<(usize, Family)>>> = vec![None; by_placed.len()];
            let most_bought = if self.supply.has_stock() { self.supply.buying.most().min(part_numbers) } else { 0 };
            for bought in 0..=most_bought {
                for (range, families) in by_placed.iter().zip(&mut families) {
                    let placed_parts = self.forms[range.start].placed_parts;
                    let takes = Takes { part_numbers, bought, placed_parts };
                    if !self.cost_counts() && self.best.error_within(&takes).is_some_and(|key| key < resolution) {
                        passed_over = true;
                        continue;
                    }
                    let from = if self.boards_differ() { 0 } else { range.start };
                    let families = families.get_or_insert_with(|| self.families(from..range.end, part_numbers));
                    if let Some(stopped) = self.walk(families, takes, (first, limit), affordable) {
                        return stopped;
                    }
                }
            }
            // Everything that takes more starts from here.
            let least = Takes { part_numbers, bought: 0, placed_parts: self.forms[0].placed_parts };
            let settled = self.best.error_within(&least).is_some_and(|key| key < resolution);
            if settled && !self.cost_counts() {
                return Proof::Exhaustive(if part_numbers < most { End::Resolution } else { End::AllCounts });
            }
        }
        Proof::Exhaustive(match (allowed < most, passed_over) {
            (true, _) => End::CountLimit,
            (false, true) => End::Resolution,
            (false, false) => End::AllCounts,
        })
    }

    /// Walks the families of one lot of takings, level by level, until the best is found; gives a proof back only where the
    /// search was stopped.
    fn walk(
        &mut self,
        families: &[(usize, Family)],
        takes: Takes,
        (first, limit): (f64, f64),
        affordable: f64,
    ) -> Option<Proof> {
        // A set that takes more must be strictly better than every one that takes less.
        let cap = match self.best.error_within(&takes) {
            Some(best) if self.goals.alternatives == 0 && !self.cost_counts() => best.below().map(ErrorKey::ceiling),
            _ => Some(limit),
        };
        let cap = cap?.min(limit);
        // A resolution of zero would never grow.
        let mut level = first.max(LEAST_LEVEL).min(cap);
        let mut searched: Option<ErrorKey> = None;
        loop {
            let next = (level * LEVEL_FACTOR).min(cap);
            if affordable.is_finite() && self.expected(families, level) > affordable {
                let below = takes.part_numbers;
                self.left_out = Some(self.left_out.map_or(below, |least| least.min(below)));
                return None;
            }
            if level < cap && self.expected(families, next) < DEARER * self.expected(families, level) {
                level = next;
                continue;
            }
            // Beyond what has been searched only a cheaper set is wanted.
            let known = searched.and_then(|key| self.best.cost_within(&takes, key));
            let cost = match known.filter(|_| self.cost_counts()) {
                Some(0) => return None,
                Some(known) => known - 1,
                None => u64::MAX,
            };
            if self.search_level(families, takes, Budget { bought: takes.bought, cost }, level).is_none() {
                let reason = self.monitor.stop().unwrap_or(StopReason::Interrupted);
                return Some(Proof::Stopped { reason, complete_below: takes.part_numbers });
            }
            searched = Some(ErrorKey::new(level));
            // A set that takes this may also have come from fewer variables and a silent slot: what counts is whether
            // anything within this level can still be missing.
            if level >= cap || self.best.worst_kept(&takes).is_some_and(|key| key <= ErrorKey::new(level)) {
                return None;
            }
            level = next;
        }
    }

    /// The families of some forms whose sets may have that many part numbers, one of each class under the symmetries of
    /// the form.
    fn families(&mut self, forms: Range<usize>, part_numbers: usize) -> Vec<(usize, Family)> {
        let windows = self.windows(self.goals.error_resolution);
        let mut members: Vec<(usize, Vec<usize>)> = Vec::new();
        for index in forms {
            let form = &self.forms[index];
            let Some(wanted) = part_numbers.checked_sub(form.least_extra) else { continue };
            let (resistors, capacitors) = form.kinds();
            for r in 0..=resistors {
                for c in 0..=capacitors {
                    let (least, most) = form.part_numbers_of(r, c);
                    // Where boards may differ altogether, one of them may do with less than another.
                    if least <= wanted && (wanted <= most || self.boards_differ()) {
                        members.extend(form.members(r, c).into_iter().map(|member| (index, member)));
                    }
                    if self.monitor.stop().is_some() {
                        return Vec::new();
                    }
                }
            }
        }
        // A stop leaves families out here; the level that follows then reports it.
        let build = |(index, member): (usize, Vec<usize>)| {
            let family = || Family::new(&self.forms[index], self.supply, member, &windows);
            Some((index, self.monitor.stop().is_none().then(family).flatten()?))
        };
        members.into_par_iter().filter_map(build).collect()
    }

    /// How many partial sets a level is expected to have.
    fn expected(&mut self, families: &[(usize, Family)], level: f64) -> f64 {
        let windows = self.windows(level);
        let nodes =
            |(_, f): &(usize, Family)| self.monitor.stop().is_none().then(|| Some(f.plan(&windows)?.nodes)).flatten();
        families.par_iter().filter_map(nodes).collect::<Vec<_>>().iter().sum()
    }

    /// Searches all families for sets up to an error; `None` if it was stopped. What was found until then is kept.
    fn search_level(&mut self, families: &[(usize, Family)], takes: Takes, budget: Budget, level: f64) -> Option<()> {
        let windows = self.windows(level);
        if self.monitor.stop().is_some() {
            return None;
        }
        let mut plans: Vec<_> =
            families.par_iter().filter_map(|(form, family)| Some((*form, family.plan(&windows)?))).collect();
        plans.retain(|(_, plan)| plan.least_cost() <= budget.cost);
        let tasks = tasks(&plans);
        let known = self.best.clone();
        let best_error = self.best.error().map(ErrorKey::ceiling);
        let (finished, total) = (AtomicUsize::new(0), tasks.len().max(1));
        let stopped = AtomicBool::new(false);
        let results: Vec<(Collector<'_>, u64)> = tasks
            .into_par_iter()
            .map(|(form, plan, roots)| {
                let mut collector = Collector {
                    model: &self.forms[form],
                    form,
                    supply: self.supply,
                    yardstick: self.yardstick,
                    goals: self.goals,
                    monitor: self.monitor,
                    stopped: &stopped,
                    takes,
                    limit: level,
                    best: Best::new(self.goals.alternatives + 1, self.cost_counts()),
                    known: &known,
                    candidates: Candidates::default(),
                    sets: 0,
                };
                if collector.stopped() {
                    return (collector, 0);
                }
                let nodes = plan.walk(roots, budget, &mut collector);
                let done = finished.fetch_add(1, Ordering::Relaxed) + 1;
                self.monitor.progress(&Progress {
                    section: Some(&self.yardstick.sections()[0].name),
                    part_numbers: takes.part_numbers,
                    error_limit: level,
                    best: best_error,
                    bound: None,
                    done: done as f64 / total as f64,
                });
                (collector, nodes)
            })
            .collect();
        let mut candidates = Candidates::default();
        for (collector, nodes) in results {
            self.nodes += nodes;
            self.sets += collector.sets;
            self.best.merge(collector.best);
            candidates.merge(collector.candidates);
        }
        // All sets within the level are there, so the best assignment within it is among them.
        let boards = usize::try_from(self.supply.boards).unwrap_or(usize::MAX);
        let (assigned, open) = candidates.assigned(boards);
        assigned.into_iter().for_each(|found| self.best.insert(found));
        self.assignment_open |= open;
        (!stopped.load(Ordering::Relaxed)).then_some(())
    }
}

/// Evaluates the sets of one task and keeps the best.
struct Collector<'a> {
    model: &'a Model,
    form: usize,
    supply: &'a Supply,
    yardstick: &'a Yardstick,
    goals: &'a Goals,
    monitor: &'a dyn Monitor,
    stopped: &'a AtomicBool,
    takes: Takes,
    limit: f64,
    best: Best,
    /// What was known before this level.
    known: &'a Best,
    /// Sets for several boards that differ.
    candidates: Candidates,
    sets: u64,
}

impl Visitor for Collector<'_> {
    fn set(&mut self, choices: &dyn Fn() -> Vec<Choice>, response: &Biquad) {
        self.sets += 1;
        // The set is judged in its canonical form below; this first look may differ from that by rounding.
        let limit = self.best.worst_kept(&self.takes).map_or(self.limit, |key| key.ceiling().min(self.limit));
        let order = self.yardstick.sections()[0].shape.order();
        if !response.is_stable(order) {
            return;
        }
        let Some(first) = self.yardstick.within(&[*response], limit * (1.0 + 1e-9) + 1e-12) else { return };
        let choices = choices();
        let groups = self.model.active_groups();
        if self.goals.rank == Rank::Cost && self.goals.alternatives == 0 {
            // What the silent slots add can only make it dearer; the key is that of the error less rounding.
            let cost =
                parts(groups, &choices).map(|(_, choice, bodies)| self.supply.price(choice).unwrap_or(0) * bodies);
            let cost = cost.sum();
            let takes = Takes {
                part_numbers: distinct(self.supply, groups, &choices) + self.model.least_extra,
                bought: 0,
                placed_parts: self.model.placed_parts,
            };
            let key = ErrorKey::new(first.error * (1.0 - 1e-9) - 1e-12);
            if self.best.beats(&takes, cost, key) || self.known.beats(&takes, cost, key) {
                return;
            }
        }
        // Measured parts are there once: with several boards such a set serves one of them.
        let boards_differ = self.supply.boards > 1 && self.model.is_measured();
        let own = boards_differ && self.goals.each_board_its_own;
        if !own && distinct(self.supply, groups, &choices) + self.model.least_extra < self.takes.part_numbers {
            return;
        }
        for found in canonical(self.model, self.form, self.supply, self.goals, &choices) {
            if self.goals.max_part_numbers.is_none_or(|most| found.takes.part_numbers <= most) {
                self.keep(found, limit, boards_differ);
            }
        }
    }

    fn stopped(&mut self) -> bool {
        if self.monitor.stop().is_some() {
            self.stopped.store(true, Ordering::Relaxed);
        }
        self.stopped.load(Ordering::Relaxed)
    }
}

impl Collector<'_> {
    /// Whether a value is taken from several lots of which one would do: the same set with fewer part numbers is another.
    fn splits_a_value(&self, found: &Found) -> bool {
        if !self.supply.has_stock() || self.goals.rank == Rank::Cost {
            return false;
        }
        let mut by_value: BTreeMap<(Kind, Value), Vec<(&Group, Choice)>> = BTreeMap::new();
        for (group, &choice) in self.model.groups.iter().zip(&found.choices) {
            by_value.entry((group.kind, choice.value)).or_default().push((group, choice));
        }
        let splits = |places: &Vec<(&Group, Choice)>| {
            let bodies = places.iter().map(|(group, _)| group.bodies()).sum();
            let would_do = |choice: Choice| {
                places.iter().all(|(group, _)| group.shelf.contains(choice))
                    && self.supply.obtain(choice, bodies) == Some(Origin::Stock)
            };
            let several = places.iter().any(|(_, choice)| *choice != places[0].1);
            several && places.iter().any(|(_, choice)| would_do(*choice))
        };
        by_value.values().any(splits)
    }

    /// Keeps a set whose response lies within the limit.
    fn keep(&mut self, mut found: Found, limit: f64, boards_differ: bool) {
        if self.splits_a_value(&found) {
            return;
        }
        let own = boards_differ && self.goals.each_board_its_own;
        let achieved = self.model.biquad(&found.choices[..self.model.active]);
        if let Some(deviation) = self.yardstick.within(&[achieved], limit + 1e-12) {
            (found.error, found.key) = (deviation.error, ErrorKey::new(deviation.error));
            if boards_differ && (own || !items(self.supply, &found.choices).is_empty()) {
                if found.takes.is_within(&self.takes) || !own {
                    self.candidates.insert(self.supply, &self.model.groups, found, own);
                }
            } else {
                self.best.insert(found);
            }
        }
    }
}
