//! All sections of a board chosen together: only the response of the whole cascade counts, and a value that several sections
//! use is one part number.
//!
//! Each section may miss its own target by more than the board may miss the whole: what it is off can be made good by the
//! others. How far is a limit of its own ([`Goals::own_error`]), so that the sets of each section are a finite list that the
//! windows of that limit give completely. Boards are then put together by part numbers: from the section with the fewest
//! sets on, each next one may bring only so many new part numbers, and what all are off must still add up to within the
//! error at a few frequencies (`offsets`). For each number of part numbers the error limit grows level by level, as for a
//! single section, and nothing found within a level narrows it: so the front, and the numbers reported, are the same for any
//! number of threads.

mod candidates;
mod offsets;
mod sharing;

use std::collections::HashMap;
use std::sync::atomic::{AtomicBool, AtomicU64, AtomicUsize, Ordering};

use rayon::prelude::*;

use crate::parts::Choice;
use crate::target::{Biquad, Measure};

use super::canonical::{canonical, impedance, in_ohms, preferred_impedance, shifted, with_silent};
use super::combine::{Board, Combination, SetAtLevel};
use super::front::{Best, End, ErrorKey, Found, Proof, Takes};
use super::limits::{Progress, StopReason};
use super::model::Model;
use super::outcome::Bound;
use super::prepared::Prepared;
use super::problem::{Goals, Problem, Rank};
use super::section::{LEAST_LEVEL, LEVEL_FACTOR};
use candidates::{Candidate, Catalogue, Gathering, widened};
use offsets::{Off, Offsets, ROWS};
use sharing::{Descent, List, Meet, order, reconciled};

/// What the search of all sections together gave.
pub(crate) struct Together {
    /// The front, with alternatives where asked for.
    pub boards: Vec<Combination>,
    /// What is proved of it.
    pub proof: Proof,
    /// What is known of each number of part numbers.
    pub bounds: Vec<Bound>,
    /// The number of part numbers at which the search ended too early.
    pub ended_at: Option<usize>,
    /// Whether boards that buy less were waited for, whatever the error of those that buy more.
    pub purchases_count: bool,
    /// Sets of sections and boards whose response was evaluated.
    pub sets: u64,
    /// Partial and whole sets and boards visited.
    pub nodes: u64,
}

impl Together {
    /// Whether no board with as few part numbers has a smaller error, of those that the search allows for.
    pub fn proves(&self, row: &Combination) -> bool {
        let part_numbers = row.tally.takes.part_numbers;
        let searched = match self.proof {
            Proof::Exhaustive(_) => true,
            Proof::Stopped { complete_below, .. } => part_numbers < complete_below,
        };
        let bound = self.bounds.iter().filter(|bound| bound.part_numbers == part_numbers);
        let excluded = bound.into_iter().any(|bound| row.key <= ErrorKey::new(bound.searched_to));
        ((searched && self.purchases_count) || excluded) && row.boards.is_empty()
    }
}

/// More partial sets than this are not gone through for one number of choices of one section.
const MOST_NODES: f64 = 4e7;

/// The same where sections may miss their own targets by more than usual.
const FEW_NODES: f64 = 4e5;

/// How much all levels together may take, in candidates and palettes looked at.
const MOST_STEPS: u64 = 300_000_000;

/// Boards of more sections are not searched as a whole.
const MOST_SECTIONS: usize = 16;

/// What it takes, in the same measure, to judge a board that misses the error, and one that meets it.
const MISSED: u64 = 100;
const MET: u64 = 5_000;

/// In how many parts the candidates of the first section are gone through.
const PARTS: usize = 512;

/// Chooses all sections of a board together; `None` where that is not offered: for one section or very many, for measured parts on
/// several boards, and where the cost counts.
pub(crate) fn together(board: &Board<'_>) -> Option<Together> {
    let problem = board.problem;
    let measured = board.prepared.iter().any(|p| p.forms.iter().any(Model::is_measured));
    let offered =
        (2..=MOST_SECTIONS).contains(&problem.sections.len()) && board.prepared.len() == problem.sections.len();
    if !offered
        || problem.goals.one_at_a_time
        || problem.goals.rank == Rank::Cost
        || (measured && problem.supply.boards > 1)
    {
        return None;
    }
    let forms = || board.prepared.iter().flat_map(|p| &p.forms);
    let mut search = Search {
        board,
        catalogue: Catalogue::new(forms(), &problem.supply)?,
        offsets: Offsets::new(board.whole),
        best: Best::new(problem.goals.alternatives + 1, false),
        pools: board.prepared.iter().map(|_| Pool::default()).collect(),
        bounds: Vec::new(),
        open_from: None,
        ended_at: None,
        steps: 0,
        sets: 0,
        nodes: 0,
    };
    let proof = search.run();
    let boards = search.best.front().iter().flatten().filter_map(|found| board.placed(found)).collect();
    let Search { bounds, ended_at, sets, nodes, .. } = search;
    Some(Together { boards, proof, bounds, ended_at, purchases_count: purchases_count(problem), sets, nodes })
}

/// Whether boards that buy less with more part numbers, or at a larger error, are waited for: only where that is what rows
/// are ranked by, for it takes long.
fn purchases_count(problem: &Problem) -> bool {
    problem.goals.rank == Rank::ToBuy || !problem.supply.has_stock()
}

/// The sets gathered for one section.
#[derive(Default)]
struct Pool {
    /// By palette, form and items.
    candidates: Vec<Candidate>,
    /// All with up to so many different choices are there...
    choices: usize,
    /// ... and with an own error up to this.
    own: f64,
    /// Whether those with more choices were left out, being too many.
    is_cut: bool,
}

/// The error limits to go through for boards that must be better than `cap`.
fn levels(goals: &Goals, cap: f64) -> Vec<f64> {
    let mut level = goals.error_resolution.max(LEAST_LEVEL);
    let mut levels = vec![goals.wanted_error, goals.own_error(), cap];
    // One just below the last is not worth while.
    while level * 1.5 < cap {
        levels.push(level);
        level *= LEVEL_FACTOR;
    }
    levels.retain(|level| *level <= cap);
    levels.sort_by(f64::total_cmp);
    levels.dedup();
    levels
}

/// Why a level was not searched to its end.
enum Halt {
    /// The search was stopped from outside, or would take too long.
    Stopped(StopReason),
    /// This level and the following would take too long; more part numbers need not.
    Level,
}

struct Search<'a> {
    board: &'a Board<'a>,
    catalogue: Catalogue,
    offsets: Offsets,
    best: Best,
    pools: Vec<Pool>,
    bounds: Vec<Bound>,
    /// The smallest number of part numbers for which something was left out.
    open_from: Option<usize>,
    /// The number of part numbers from which on only some boards were looked at.
    ended_at: Option<usize>,
    /// Candidates and palettes looked at.
    steps: u64,
    sets: u64,
    nodes: u64,
}

impl Search<'_> {
    fn run(&mut self) -> Proof {
        let goals = &self.board.problem.goals;
        let prepared = self.board.prepared;
        let span = |p: &Prepared<'_>| {
            let spans = p.forms.iter().map(Model::part_numbers);
            let choices = |form: &Model| form.active + form.silent_groups().len();
            (spans.map(|span| span.0).min().unwrap_or(0), p.forms.iter().map(choices).max().unwrap_or(0))
        };
        let fewest = prepared.iter().map(|p| span(p).0).max().unwrap_or(0).max(1);
        let most: usize = prepared.iter().map(|p| span(p).1).sum();
        let placed_parts = prepared.iter().map(|p| p.forms[0].placed_parts).sum();
        let allowed = goals.max_part_numbers.unwrap_or(most);
        let resolution = ErrorKey::new(goals.error_resolution);
        for part_numbers in fewest..=most.min(allowed) {
            // Unless that is what counts, boards that buy less with more part numbers are not waited for.
            let bought = if purchases_count(self.board.problem) { 0 } else { usize::MAX };
            let least = Takes { part_numbers, bought, placed_parts };
            let known = self.best.error_within(&least);
            if known.is_some_and(|key| key < resolution) {
                return self.proof(End::Resolution);
            }
            // Boards with more part numbers must be strictly better.
            let cap = match known {
                Some(known) if goals.alternatives == 0 => known.below().map_or(0.0, ErrorKey::ceiling),
                _ => goals.error_limit,
            };
            let cap = cap.min(goals.error_limit);
            for level in levels(goals, cap) {
                match self.level(part_numbers, (level, cap)) {
                    Ok(()) => {}
                    Err(Halt::Stopped(reason)) => {
                        self.ended_at.get_or_insert(part_numbers);
                        return Proof::Stopped { reason, complete_below: self.complete_below(part_numbers) };
                    }
                    Err(Halt::Level) => {
                        self.open_from(part_numbers);
                        break;
                    }
                }
                let found = match goals.alternatives {
                    0 => self.best.error_within(&least),
                    _ => self.best.worst_kept(&least),
                };
                if self.pools.iter().all(|pool| !pool.is_cut) {
                    let all = Takes { bought: usize::MAX, placed_parts: usize::MAX, ..least };
                    let best = self.best.error_within(&all).filter(|key| *key <= ErrorKey::new(level));
                    self.bounds.retain(|bound| bound.part_numbers != part_numbers);
                    let none_below = best.map_or(level, ErrorKey::value);
                    self.bounds.push(Bound { part_numbers, none_below, searched_to: level });
                } else {
                    self.open_from(part_numbers);
                    self.ended_at.get_or_insert(part_numbers);
                }
                if found.is_some_and(|key| key <= ErrorKey::new(level)) {
                    break;
                }
            }
        }
        self.proof(if allowed < most { End::CountLimit } else { End::AllCounts })
    }

    /// What is proved of a search that was not stopped from outside.
    fn proof(&self, end: End) -> Proof {
        match self.open_from {
            Some(complete_below) => Proof::Stopped { reason: StopReason::Effort, complete_below },
            None => Proof::Exhaustive(end),
        }
    }

    fn complete_below(&self, part_numbers: usize) -> usize {
        self.open_from.map_or(part_numbers, |open| open.min(part_numbers))
    }

    /// Notes that boards of so many part numbers have not all been gone through.
    fn open_from(&mut self, part_numbers: usize) {
        self.open_from = Some(self.complete_below(part_numbers));
    }

    /// How far a section may at least miss its own target when the board may miss the whole by `level`, and later by `cap`.
    fn own(&self, section: usize, level: f64, cap: f64) -> f64 {
        let problem = self.board.problem;
        match (problem.sections[section].own_error, &problem.criterion.measure) {
            (Some(own), _) => own,
            // The whole is as bad as its worst section.
            (None, Measure::Weighted(_)) => level,
            // Twice at most: sets gathered for one level serve the next.
            (None, _) if level <= problem.goals.own_error() && cap > 1.5 * problem.goals.own_error() => {
                problem.goals.own_error()
            }
            (None, _) => problem.goals.own_error().max(cap),
        }
    }

    /// Sees to it that all sets of each section are there that a board of so many part numbers may have.
    fn gather(&mut self, part_numbers: usize, (level, cap): (f64, f64)) -> Result<(), Halt> {
        let board = self.board;
        for (index, prepared) in board.prepared.iter().enumerate() {
            let own = self.own(index, level, cap);
            let pool = &mut self.pools[index];
            // Beyond the usual limit only what is quickly done is.
            let affordable = if level > board.problem.goals.own_error() { FEW_NODES } else { MOST_NODES };
            if pool.own < own {
                *pool = Pool { own, ..Pool::default() };
            } else if own < pool.own {
                // More choices are dear where the limit is wide.
                pool.candidates.retain(|candidate| candidate.own <= widened(own));
                pool.own = own;
            }
            let all = prepared.forms.iter().map(|form| form.active).max().unwrap_or(0);
            // Several measured parts may be one part number.
            let needed = if prepared.forms.iter().any(Model::is_measured) { all } else { part_numbers.min(all) };
            let gathering = Gathering {
                prepared,
                catalogue: &self.catalogue,
                offsets: &self.offsets,
                goals: &board.problem.goals,
                monitor: board.monitor,
            };
            while self.pools[index].choices < needed && !self.pools[index].is_cut {
                let choices = self.pools[index].choices + 1;
                board.monitor.progress(&Progress {
                    section: Some(&prepared.problem.target.name),
                    part_numbers,
                    error_limit: level,
                    best: self.best.error().map(ErrorKey::ceiling),
                    bound: self.bounds.last().map(|bound| bound.none_below),
                    done: 0.0,
                });
                let gathered = match gathering.gather(choices, own, affordable) {
                    Ok(gathered) => gathered,
                    Err(StopReason::Effort) if level > board.problem.goals.own_error() => {
                        // What has been gathered is too wide for what follows, and is gathered again.
                        self.pools[index] = Pool::default();
                        return Err(Halt::Level);
                    }
                    Err(StopReason::Effort) => {
                        self.pools[index].is_cut = true;
                        break;
                    }
                    Err(reason) => return Err(Halt::Stopped(reason)),
                };
                self.sets += gathered.sets;
                self.nodes += gathered.nodes;
                let pool = &mut self.pools[index];
                pool.candidates.extend(gathered.candidates);
                pool.candidates.par_sort_by(|a, b| a.rank().cmp(&b.rank()));
                pool.choices = choices;
            }
        }
        Ok(())
    }

    /// Finds all boards of at most so many part numbers and at most that error.
    fn level(&mut self, part_numbers: usize, (level, cap): (f64, f64)) -> Result<(), Halt> {
        self.gather(part_numbers, (level, cap))?;
        let board = self.board;
        let sections = board.prepared.len();
        let reach = |spans: &[(Off, Off)]| {
            let widest = |row: usize| spans.iter().map(|(least, most)| f32::max(-least[row], most[row])).sum();
            self.offsets.reach(level, sections, &std::array::from_fn::<f32, ROWS, _>(widest))
        };
        let pools = self.pools.iter().map(|pool| pool.candidates.as_slice());
        let (lists, reach) = reconciled(pools, part_numbers, reach);
        if lists.iter().any(Vec::is_empty) {
            return Ok(());
        }
        let order = order(&lists);
        let mut lists: Vec<List<'_>> =
            order.par_iter().map(|&index| List::new(lists[index].clone(), self.catalogue.part_numbers())).collect();
        lists.iter_mut().skip(1).last().into_iter().for_each(|last| last.index_by_off(&reach));
        let roots = lists[0].len();
        let size = roots.div_ceil(PARTS).max(1);
        let starts: Vec<usize> = (0..roots).step_by(size).collect();
        let (steps, finished) = (AtomicU64::new(self.steps), AtomicUsize::new(0));
        let overrun = AtomicBool::new(false);
        let free = |p: &Prepared<'_>| p.forms.iter().all(Model::silent_groups_are_free);
        let takes_are_known = !board.problem.supply.has_stock() && board.prepared.iter().all(free);
        let best_error = self.best.error().map(ErrorKey::ceiling);
        let bound = self.bounds.last().map(|bound| bound.none_below);
        let results: Vec<(Best, u64, u64)> = starts
            .par_iter()
            .map(|&start| {
                let mut meeting = Meeting {
                    board,
                    catalogue: &self.catalogue,
                    lists: &lists,
                    order: &order,
                    part_numbers,
                    level,
                    models: HashMap::new(),
                    best: Best::new(board.problem.goals.alternatives + 1, false),
                    sets: 0,
                    takes_are_known,
                    told: 0,
                    steps: &steps,
                    overrun: &overrun,
                };
                let mut descent = Descent::new(&lists, reach, part_numbers);
                descent.run(start..(start + size).min(roots), &mut meeting);
                let done = finished.fetch_add(1, Ordering::Relaxed) + 1;
                board.monitor.progress(&Progress {
                    section: None,
                    part_numbers,
                    error_limit: level,
                    best: best_error,
                    bound,
                    done: done as f64 / starts.len() as f64,
                });
                (meeting.best, meeting.sets, descent.steps)
            })
            .collect();
        if overrun.into_inner() {
            // What was found until then would depend on the threads.
            return Err(Halt::Stopped(StopReason::Effort));
        }
        for (best, sets, steps) in results {
            self.best.merge(best);
            self.sets += sets;
            self.nodes += steps;
            self.steps += steps;
        }
        board.monitor.stop().map_or(Ok(()), |reason| Err(Halt::Stopped(reason)))
    }
}

/// Judges the boards of one part of a level.
struct Meeting<'a, 'b> {
    board: &'a Board<'a>,
    catalogue: &'b Catalogue,
    lists: &'b [List<'b>],
    order: &'b [usize],
    part_numbers: usize,
    level: f64,
    /// Whole boards by the forms of their sections.
    models: HashMap<Vec<u16>, Model>,
    best: Best,
    sets: u64,
    /// Whether a board takes what its active groups do: no silent one ever needs a part number of its own.
    takes_are_known: bool,
    /// Steps that have been added to those of all parts.
    told: u64,
    steps: &'b AtomicU64,
    overrun: &'b AtomicBool,
}

impl Meet for Meeting<'_, '_> {
    fn meet(&mut self, chosen: &[usize]) -> u64 {
        self.sets += 1;
        let prepared = self.board.prepared;
        let mut candidates: Vec<&Candidate> = vec![self.lists[0].candidate(chosen[0]); chosen.len()];
        for (depth, &index) in chosen.iter().enumerate() {
            candidates[self.order[depth]] = self.lists[depth].candidate(index);
        }
        let choices: Vec<Vec<Choice>> = (candidates.iter())
            .map(|candidate| candidate.items.iter().map(|&item| self.catalogue.choice(item)).collect())
            .collect();
        let responses: Vec<Biquad> = (prepared.iter().zip(&candidates).zip(&choices))
            .map(|((p, candidate), choices)| p.forms[usize::from(candidate.form)].biquad(choices))
            .collect();
        let mut palette: Vec<u16> = candidates.iter().flat_map(|c| c.palette.iter().copied()).collect();
        palette.sort_unstable();
        palette.dedup();
        let placed = prepared.iter().zip(&candidates).map(|(p, c)| p.forms[usize::from(c.form)].placed_parts);
        let least = Takes { part_numbers: palette.len(), bought: 0, placed_parts: placed.sum() };
        // What takes at least as much as one that is known must be no worse; where alternatives are wanted, as good as the
        // last that is kept of those that take the same.
        let known = match self.board.problem.goals.alternatives {
            0 => self.best.error_within(&least),
            _ if self.takes_are_known => self.best.worst_kept(&least),
            _ => None,
        };
        let limit = known.map_or(self.level, |key| key.ceiling().min(self.level));
        if self.board.whole.within(&responses, widened(limit)).is_none() {
            return MISSED;
        }
        let forms: Vec<u16> = candidates.iter().map(|c| c.form).collect();
        let active = choices.concat();
        let board = self.board;
        let model = self.models.entry(forms.clone()).or_insert_with(|| board.model(&forms));
        let goals = &board.problem.goals;
        for mut found in canonical(model, board.form_number(&forms), &board.problem.supply, goals, &active) {
            if found.takes.part_numbers > self.part_numbers {
                continue;
            }
            let Some(placed) = board.placed(&found) else { continue };
            let responses = board.responses(&placed.sets);
            if let Some(deviation) = board.whole.within(&responses, self.level + 1e-12) {
                (found.error, found.key) = (deviation.error, ErrorKey::new(deviation.error));
                self.best.insert(found);
            }
        }
        MET
    }

    fn halted(&mut self, steps: u64) -> bool {
        // Now and then only: the others count along.
        if steps - self.told > 1 << 14 {
            let all = self.steps.fetch_add(steps - self.told, Ordering::Relaxed) + steps - self.told;
            self.told = steps;
            if all > MOST_STEPS {
                self.overrun.store(true, Ordering::Relaxed);
            }
            return self.overrun.load(Ordering::Relaxed) || self.board.monitor.stop().is_some();
        }
        false
    }
}

impl Board<'_> {
    /// A number for the forms of all sections.
    fn form_number(&self, forms: &[u16]) -> usize {
        let radix = self.prepared.iter().map(|p| p.forms.len());
        radix.zip(forms).fold(0, |number, (radix, &form)| number * radix + usize::from(form))
    }

    /// The forms that [`form_number`](Self::form_number) counts.
    fn forms_of(&self, mut number: usize) -> Vec<usize> {
        let mut forms: Vec<usize> = Vec::new();
        for prepared in self.prepared.iter().rev() {
            forms.push(number % prepared.forms.len());
            number /= prepared.forms.len();
        }
        forms.reverse();
        forms
    }

    /// All sections as one model: the active groups of each, then the silent ones of each. It has no transfer function.
    fn model(&self, numbers: &[u16]) -> Model {
        let forms: Vec<&Model> =
            self.prepared.iter().zip(numbers).map(|(p, &form)| &p.forms[usize::from(form)]).collect();
        let mut whole = Model { symmetries: Vec::new(), blocks: Vec::new(), ..forms[0].clone() };
        whole.groups.clear();
        for form in &forms {
            whole.groups.extend_from_slice(form.active_groups());
            whole.blocks.push(form.active);
        }
        whole.active = whole.groups.len();
        whole.groups.extend(forms.iter().flat_map(|form| form.silent_groups().iter().cloned()));
        whole.placed_parts = forms.iter().map(|form| form.placed_parts).sum();
        whole.least_extra = 0;
        // Sections that are alike in all but their name may change places.
        let blocks: Vec<_> = whole.sections().collect();
        for second in 1..forms.len() {
            for first in 0..second {
                if numbers[first] == numbers[second]
                    && self.prepared[first].problem.is_like(self.prepared[second].problem)
                {
                    let mut swap: Vec<usize> = (0..whole.active).collect();
                    for (a, b) in blocks[first].clone().zip(blocks[second].clone()) {
                        swap.swap(a, b);
                    }
                    whole.symmetries.push(swap);
                }
            }
        }
        whole
    }

    /// The sections of a board found, at the impedance level nearest to the wanted one.
    fn placed(&self, found: &Found) -> Option<Combination> {
        let forms: Vec<u16> = self.forms_of(found.form).into_iter().map(|form| form as u16).collect();
        let model = self.model(&forms);
        let groups = model.active_groups();
        let middle = preferred_impedance(&self.problem.goals);
        let at = |&level: &i32| {
            let active = shifted(groups, &found.choices[..groups.len()], level)?;
            let filled = with_silent(&model, &self.problem.supply, active, false).into_iter();
            let (choices, tally) = filled.filter(|(_, tally)| tally.takes == found.takes).min()?;
            let distance = impedance(groups, &in_ohms(&choices)).map_or(0.0, |z| (z / middle).ln().abs());
            Some((distance, level, choices, tally))
        };
        let nearest = |a: &(f64, i32, _, _), b: &(f64, i32, _, _)| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1));
        let (_, level, choices, tally) = found.levels.iter().filter_map(at).min_by(nearest)?;
        let (mut active, mut silent) = (0, groups.len());
        let set = |(p, &form): (&Prepared<'_>, &u16)| {
            let form_model = &p.forms[usize::from(form)];
            let (own, quiet) = (form_model.active, form_model.silent_groups().len());
            let list = [&choices[active..active + own], &choices[silent..silent + quiet]].concat();
            (active, silent) = (active + own, silent + quiet);
            SetAtLevel { form: usize::from(form), choices: list, levels: found.levels.clone(), level }
        };
        let sets: Vec<SetAtLevel> = self.prepared.iter().zip(&forms).map(set).collect();
        let key = ErrorKey::new(self.whole.deviation(&self.responses(&sets)).error);
        Some(Combination { key, tally, sets, boards: Vec::new() })
    }
}
