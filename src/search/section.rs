//! The exact front of one section.

use std::collections::BTreeMap;
use std::sync::atomic::{AtomicBool, AtomicUsize, Ordering};

use rayon::prelude::*;

use crate::target::{Biquad, Yardstick};
use crate::units::{Kind, Value};

use super::canonical::{canonical, distinct};
use super::family::{Family, Visitor};
use super::front::{Best, End, ErrorKey, Found, Proof};
use super::limits::{Monitor, Progress, StopReason};
use super::model::{Model, partitions};
use super::problem::Goals;
use super::window::{Window, WindowMaker};

/// What the search of one section gave.
#[derive(Clone, Debug)]
pub(crate) struct SectionFront {
    /// For each number of part numbers on the front its sets, best first.
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
const LEVEL_FACTOR: f64 = 3.0;

/// The least error limit that a level begins with: about the step in which errors are compared.
const LEAST_LEVEL: f64 = 1e-7;

/// A level is passed over where the next is not dearer than this, in expected partial sets.
const DEARER: f64 = 1.5;

/// Where nothing lies within the error limit it is widened, by [`LEVEL_FACTOR`] each time, until something does or it
/// has passed this: in dB as in plain ratio a response that far off has nothing to do with the target.
const FARTHEST: f64 = 300.0;

/// Expected partial sets beyond which a level is left out, once nothing was found within the job's error limit.
const AFFORDABLE: f64 = 3e7;

/// Searches one section.
pub(crate) fn search(
    model: &Model,
    yardstick: &Yardstick,
    goals: &Goals,
    monitor: &dyn Monitor,
) -> Option<SectionFront> {
    let maker = WindowMaker::new(yardstick, model.numerator())?;
    let mut search = Search {
        model,
        yardstick,
        goals,
        monitor,
        maker,
        windows: BTreeMap::new(),
        best: Best::new(goals.alternatives + 1),
        sets: 0,
        nodes: 0,
        left_out: None,
    };
    Some(search.run())
}

struct Search<'a> {
    model: &'a Model,
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
}

impl Search<'_> {
    fn run(&mut self) -> SectionFront {
        let mut limit = self.goals.error_limit;
        let mut proof = self.walk_counts(self.goals.error_resolution, limit, f64::INFINITY);
        let halted = |proof: &Proof| matches!(proof, Proof::Stopped { .. });
        while self.best.front().is_empty() && !halted(&proof) && limit < FARTHEST {
            let from = limit;
            limit *= LEVEL_FACTOR;
            proof = self.walk_counts(from, limit, AFFORDABLE);
        }
        if let (Some(complete_below), false) = (self.left_out, halted(&proof)) {
            proof = Proof::Stopped { reason: StopReason::TooLarge, complete_below };
        }
        let mut rows = self.best.front();
        if matches!(proof, Proof::Exhaustive(_)) {
            // What a silent slot made of sets with fewer values may lie beyond the end of the front.
            let resolution = ErrorKey::new(self.goals.error_resolution);
            let end = rows.iter().position(|row| row[0].key < resolution);
            rows.truncate(end.map_or(rows.len(), |end| end + 1));
        }
        SectionFront { rows, proof, sets: self.sets, nodes: self.nodes, limit }
    }

    /// The windows for sets up to an error.
    fn windows(&mut self, limit: f64) -> Vec<Window> {
        // The key rounds, so the windows are made for the largest error of that key.
        let key = ErrorKey::new(limit);
        self.windows.entry(key).or_insert_with(|| self.maker.windows(key.ceiling())).clone()
    }

    /// Walks the number of different values upwards, each up to `limit` in levels that begin at `first`; levels that are
    /// not affordable are left out.
    fn walk_counts(&mut self, first: f64, limit: f64, affordable: f64) -> Proof {
        let count = |kind| self.model.active_groups().iter().filter(|g| g.kind == kind).count();
        let (resistors, capacitors) = (count(Kind::Resistor), count(Kind::Capacitor));
        let fewest = usize::from(resistors > 0) + usize::from(capacitors > 0);
        let most = resistors + capacitors;
        let extra = self.model.least_extra;
        let allowed = self.goals.max_part_numbers.unwrap_or(most + extra);
        for k in fewest..=most.min(allowed.saturating_sub(extra)) {
            let families = self.families(k, (resistors, capacitors));
            // A set with more part numbers must be strictly better than every one with fewer.
            let cap = match self.best.error_up_to(k + extra) {
                Some(best) if self.goals.alternatives == 0 => best.below().map(ErrorKey::ceiling),
                _ => Some(limit),
            };
            let Some(cap) = cap.map(|cap| cap.min(limit)) else {
                return Proof::Exhaustive(End::Resolution);
            };
            // A resolution of zero would never grow.
            let mut level = first.max(LEAST_LEVEL).min(cap);
            loop {
                let next = (level * LEVEL_FACTOR).min(cap);
                if affordable.is_finite() && self.expected(&families, level) > affordable {
                    let below = k + extra;
                    self.left_out = Some(self.left_out.map_or(below, |least| least.min(below)));
                    break;
                }
                if level < cap && self.expected(&families, next) < DEARER * self.expected(&families, level) {
                    level = next;
                    continue;
                }
                if self.search_level(&families, k, level).is_none() {
                    let reason = self.monitor.stop().unwrap_or(StopReason::Interrupted);
                    return Proof::Stopped { reason, complete_below: k + extra };
                }
                // A set of this count may also have come from fewer variables and a silent slot: what counts is
                // whether anything within this level can still be missing.
                if level >= cap || self.best.worst_kept(k + extra).is_some_and(|key| key <= ErrorKey::new(level)) {
                    break;
                }
                level = next;
            }
            if self.best.error_up_to(k + extra).is_some_and(|key| key < ErrorKey::new(self.goals.error_resolution)) {
                return Proof::Exhaustive(if k < most { End::Resolution } else { End::AllCounts });
            }
        }
        Proof::Exhaustive(if allowed < most + extra { End::CountLimit } else { End::AllCounts })
    }

    /// The families with exactly `count` variables, one of each class under the section's symmetries.
    fn families(&mut self, count: usize, (resistors, capacitors): (usize, usize)) -> Vec<Family> {
        let groups = self.model.active_groups();
        let windows = self.windows(self.goals.error_resolution);
        let mut members = Vec::new();
        for r in 0..=count {
            for of_resistors in partitions(resistors, r) {
                if self.monitor.stop().is_some() {
                    return Vec::new();
                }
                for of_capacitors in partitions(capacitors, count - r) {
                    let (mut next_r, mut next_c) = (of_resistors.iter(), of_capacitors.iter());
                    let member: Vec<usize> = groups
                        .iter()
                        .filter_map(|g| match g.kind {
                            Kind::Resistor => next_r.next().copied(),
                            Kind::Capacitor => next_c.next().map(|c| c + r),
                        })
                        .collect();
                    let mirrored = self.model.symmetries.iter().any(|order| {
                        let image: Vec<usize> = order.iter().map(|&k| member[k]).collect();
                        renumbered(&image, r) < renumbered(&member, r)
                    });
                    if !mirrored {
                        members.push(member);
                    }
                }
            }
        }
        // A stop leaves families out here; the level that follows then reports it.
        let build =
            |member| self.monitor.stop().is_none().then(|| Family::new(self.model, member, &windows)).flatten();
        members.into_par_iter().filter_map(build).collect()
    }

    /// How many partial sets a level is expected to have.
    fn expected(&mut self, families: &[Family], level: f64) -> f64 {
        let windows = self.windows(level);
        let nodes = |f: &Family| self.monitor.stop().is_none().then(|| Some(f.plan(&windows)?.nodes)).flatten();
        families.par_iter().filter_map(nodes).collect::<Vec<_>>().iter().sum()
    }

    /// Searches all families for sets up to an error; `None` if it was stopped. What was found until then is kept.
    fn search_level(&mut self, families: &[Family], count: usize, level: f64) -> Option<()> {
        let windows = self.windows(level);
        if self.monitor.stop().is_some() {
            return None;
        }
        let plans: Vec<_> = families.par_iter().filter_map(|f| f.plan(&windows)).collect();
        // Large families are divided by the values of their first variable, small ones are done in one go.
        const LARGE: f64 = 20_000.0;
        let mut tasks = Vec::new();
        for plan in &plans {
            let roots = plan.roots();
            let size = if plan.nodes > LARGE { ((roots as f64 * LARGE / plan.nodes) as usize).max(1) } else { roots };
            let mut start = 0;
            while start < roots {
                tasks.push((plan, start..(start + size).min(roots)));
                start += size;
            }
        }
        let best_error = self.best.error_up_to(usize::MAX).map(ErrorKey::ceiling);
        let (finished, total) = (AtomicUsize::new(0), tasks.len().max(1));
        let stopped = AtomicBool::new(false);
        let results: Vec<(Collector<'_>, u64)> = tasks
            .into_par_iter()
            .map(|(plan, roots)| {
                let mut collector = Collector {
                    model: self.model,
                    yardstick: self.yardstick,
                    goals: self.goals,
                    monitor: self.monitor,
                    stopped: &stopped,
                    count,
                    limit: level,
                    best: Best::new(self.goals.alternatives + 1),
                    sets: 0,
                };
                if collector.stopped() {
                    return (collector, 0);
                }
                let nodes = plan.walk(roots, &mut collector);
                let done = finished.fetch_add(1, Ordering::Relaxed) + 1;
                self.monitor.progress(&Progress {
                    section: &self.yardstick.sections()[0].name,
                    part_numbers: count,
                    error_limit: level,
                    best: best_error,
                    done: done as f64 / total as f64,
                });
                (collector, nodes)
            })
            .collect();
        for (collector, nodes) in results {
            self.nodes += nodes;
            self.sets += collector.sets;
            self.best.merge(collector.best);
        }
        (!stopped.load(Ordering::Relaxed)).then_some(())
    }
}

/// The same partition with its blocks numbered by first appearance, resistors (blocks below `r`) and capacitors apart.
fn renumbered(member: &[usize], r: usize) -> Vec<usize> {
    let mut names: Vec<usize> = Vec::new();
    let mut number = |block: usize| {
        names.iter().position(|&n| n == block).unwrap_or_else(|| {
            names.push(block);
            names.len() - 1
        })
    };
    member.iter().map(|&block| 2 * number(block) + usize::from(block >= r)).collect()
}

/// Evaluates the sets of one task and keeps the best.
struct Collector<'a> {
    model: &'a Model,
    yardstick: &'a Yardstick,
    goals: &'a Goals,
    monitor: &'a dyn Monitor,
    stopped: &'a AtomicBool,
    count: usize,
    limit: f64,
    best: Best,
    sets: u64,
}

impl Visitor for Collector<'_> {
    fn set(&mut self, values: &dyn Fn() -> Vec<Value>, response: &Biquad) {
        self.sets += 1;
        // The set is judged in its canonical form below; this first look may differ from that by rounding.
        let limit = self
            .best
            .worst_kept(self.count + self.model.least_extra)
            .map_or(self.limit, |key| key.ceiling().min(self.limit));
        let order = self.yardstick.sections()[0].shape.order();
        if !response.is_stable(order) || self.yardstick.within(&[*response], limit * (1.0 + 1e-9) + 1e-12).is_none() {
            return;
        }
        let values = values();
        if distinct(self.model.active_groups(), &values) < self.count {
            return;
        }
        let Some(mut found) = canonical(self.model, self.goals, &values) else { return };
        if self.goals.max_part_numbers.is_some_and(|most| found.part_numbers > most) {
            return;
        }
        let achieved = self.model.biquad(&found.values[..self.model.active]);
        if let Some(deviation) = self.yardstick.within(&[achieved], limit + 1e-12) {
            (found.error, found.key) = (deviation.error, ErrorKey::new(deviation.error));
            self.best.insert(found);
        }
    }

    fn stopped(&mut self) -> bool {
        if self.monitor.stop().is_some() {
            self.stopped.store(true, Ordering::Relaxed);
        }
        self.stopped.load(Ordering::Relaxed)
    }
}
