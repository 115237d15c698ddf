//! The sets of several sections put together on one board.

use std::collections::{BTreeMap, BTreeSet};

use rayon::prelude::*;

use crate::parts::{Choice, Supply};
use crate::target::{Biquad, Yardstick};
use crate::units::{Kind, Value};

use super::canonical::{Tally, impedance, in_ohms, preferred_impedance, shifted, tally, with_silent};
use super::front::{ErrorKey, Found};
use super::limits::Monitor;
use super::model::Model;
use super::prepared::Prepared;
use super::problem::{Goals, Problem, Rank};
use super::section;

/// A combination of one set for each section.
#[derive(Clone)]
pub(crate) struct Combination {
    pub key: ErrorKey,
    pub tally: Tally,
    pub sets: Vec<SetAtLevel>,
    /// For each board that differs from others: a set of each section.
    pub boards: Vec<Vec<SetAtLevel>>,
}

/// A set of a section at one impedance level.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(crate) struct SetAtLevel {
    pub form: usize,
    /// The choices of all groups.
    pub choices: Vec<Choice>,
    /// Levels at which the set exists, in decades from the lowest, and this one.
    pub levels: Vec<i32>,
    pub level: i32,
}

/// A job whose sections have been searched.
pub(crate) struct Board<'a> {
    pub problem: &'a Problem,
    pub whole: &'a Yardstick,
    pub prepared: &'a [Prepared<'a>],
    pub monitor: &'a dyn Monitor,
}

/// Where several sections have more combinations of sets than this, their lists are thinned.
const MOST_COMBINATIONS: usize = 20_000;

/// How many combinations are formed even when the job was stopped meanwhile.
const LEAST_COMBINATIONS: usize = 500;

/// Where the sections of one combination can stand at more combinations of impedance levels, only the preferred is taken.
const MOST_LEVELS: usize = 256;

impl Combination {
    /// Whether another takes no more of anything, the cost included where it counts.
    pub fn is_beaten_by(&self, other: &Combination, cost_counts: bool) -> bool {
        let cheaper = !cost_counts || other.tally.cost <= self.tally.cost;
        other.tally.takes.is_within(&self.tally.takes) && cheaper
    }

    /// The values without what they are taken from.
    pub fn values(&self) -> Vec<Value> {
        self.sets.iter().flat_map(|set| set.choices.iter().map(|choice| choice.value)).collect()
    }
}

impl Board<'_> {
    /// Puts the sets of sections that are alike in all but their name into one order: exchanged they are the same board.
    pub fn put_in_order(&self, combination: &mut Combination) {
        if !combination.boards.is_empty() {
            return;
        }
        for second in 1..self.prepared.len() {
            for first in 0..second {
                let alike = self.prepared[first].problem.is_like(self.prepared[second].problem);
                if alike && combination.sets[second] < combination.sets[first] {
                    combination.sets.swap(first, second);
                }
            }
        }
    }

    /// All combinations of one set of each section that the stock allows, or, where they are too many, of thinned lists;
    /// and whether something was left out.
    pub fn combinations(&self) -> (Vec<Combination>, bool) {
        let mut lists: Vec<Vec<&Found>> =
            self.prepared.iter().map(|p| p.front.rows.iter().flatten().collect()).collect();
        let size = |lists: &[Vec<&Found>]| lists.iter().map(Vec::len).fold(1usize, usize::saturating_mul);
        let mut thinned = false;
        while size(&lists) > MOST_COMBINATIONS {
            // The longest list gives up its last alternative, then its row with the most part numbers.
            let firsts: Vec<&Found> = self.prepared.iter().flat_map(|p| &p.front.rows).map(|row| &row[0]).collect();
            let Some(longest) = lists.iter_mut().max_by_key(|list| list.len()) else { break };
            let is_alternative = |found: &&Found| !firsts.iter().any(|first| std::ptr::eq(*first, *found));
            let last = longest.iter().rposition(is_alternative).unwrap_or(longest.len() - 1);
            longest.remove(last);
            thinned = true;
        }
        let mut choices: Vec<Vec<&Found>> = vec![Vec::new()];
        for list in &lists {
            choices = choices
                .iter()
                .flat_map(|head| list.iter().map(move |&next| head.iter().copied().chain([next]).collect::<Vec<_>>()))
                .collect();
        }
        // What was found by the time of a stop is still combined, as far as that takes no time.
        let combine = |(i, found): (usize, &Vec<&Found>)| {
            if i < LEAST_COMBINATIONS || self.monitor.stop().is_none() { self.combination(found) } else { Vec::new() }
        };
        let combined: Vec<Vec<Combination>> = choices.par_iter().enumerate().map(combine).collect();
        let fails = combined.iter().any(Vec::is_empty);
        let mut combinations: Vec<Combination> = combined.into_iter().flatten().collect();
        if self.prepared.len() > 1 && self.problem.supply.has_stock() && fails {
            let mut further = Further { board: self, searches: 0, found: Vec::new() };
            let order: Vec<usize> = (0..self.prepared.len()).collect();
            further.search(&order, &self.problem.supply, &mut vec![None; order.len()]);
            let backwards: Vec<usize> = order.into_iter().rev().collect();
            further.search(&backwards, &self.problem.supply, &mut vec![None; backwards.len()]);
            // A search that was cut short may have left sets out too.
            thinned |= further.searches >= MOST_SEARCHES || self.monitor.stop().is_some();
            let again = further.found.par_iter().map(|found| self.combination(&found.iter().collect::<Vec<_>>()));
            combinations.extend(again.collect::<Vec<_>>().into_iter().flatten());
            combinations.sort_by(|a, b| (&a.sets, &a.boards).cmp(&(&b.sets, &b.boards)));
            combinations.dedup_by(|a, b| a.sets == b.sets && a.boards == b.boards);
        }
        (combinations, thinned)
    }

    pub fn responses(&self, sets: &[SetAtLevel]) -> Vec<Biquad> {
        let response = |(p, set): (&Prepared<'_>, &SetAtLevel)| {
            let form = &p.forms[set.form];
            form.biquad(&set.choices[..form.active])
        };
        self.prepared.iter().zip(sets).map(response).collect()
    }

    /// The parts of all sections: kind, choice and bodies.
    pub fn parts<'b>(&'b self, sets: &'b [SetAtLevel]) -> impl Iterator<Item = (Kind, Choice, u64)> + 'b {
        let all = self.prepared.iter().zip(sets);
        all.flat_map(|(p, set)| super::canonical::parts(&p.forms[set.form].groups, &set.choices))
    }

    /// One set of each section as a whole, in each way that takes less of something than the others; none where the stock
    /// does not suffice.
    fn combination(&self, found: &[&Found]) -> Vec<Combination> {
        if found.iter().any(|f| !f.boards.is_empty()) {
            return self.differing(found).into_iter().collect();
        }
        let cost_counts = self.problem.goals.rank == Rank::Cost;
        let levels: Vec<Vec<SetAtLevel>> =
            self.prepared.iter().zip(found).map(|(p, f)| self.at_levels(p, f)).collect();
        let count = |sets: &[SetAtLevel]| tally(&self.problem.supply, self.parts(sets));
        // The first level of each is the preferred one; others are taken only where they save something.
        let first: Vec<SetAtLevel> = levels.iter().filter_map(|list| list.first().cloned()).collect();
        let mut best: Vec<(Vec<SetAtLevel>, Tally)> = Vec::new();
        let mut take = |sets: Vec<SetAtLevel>| {
            let Some(tally) = count(&sets) else { return };
            if !best.iter().any(|(_, known)| known.is_within(&tally, cost_counts)) {
                best.retain(|(_, known)| !tally.is_within(known, cost_counts));
                best.push((sets, tally));
            }
        };
        take(first);
        if levels.len() > 1 && levels.iter().map(Vec::len).product::<usize>() <= MOST_LEVELS {
            let mut index = vec![0; levels.len()];
            'all: loop {
                for (place, list) in index.iter_mut().zip(&levels) {
                    *place += 1;
                    if *place < list.len() {
                        take(levels.iter().zip(&index).map(|(list, &i)| list[i].clone()).collect());
                        continue 'all;
                    }
                    *place = 0;
                }
                break;
            }
        }
        let whole = |(sets, tally): (Vec<SetAtLevel>, Tally)| {
            let key = ErrorKey::new(self.whole.deviation(&self.responses(&sets)).error);
            Combination { key, tally, sets, boards: Vec::new() }
        };
        best.into_iter().map(whole).collect()
    }

    /// Sets of which some differ from board to board: the boards of each section are taken in the order of their errors.
    fn differing(&self, found: &[&Found]) -> Option<Combination> {
        let boards = found.iter().map(|f| f.boards.len()).max()?;
        let set = |(p, f): (&Prepared<'_>, &&Found), board: usize| match f.boards.get(board) {
            Some(own) => Some(SetAtLevel { form: own.form, choices: own.choices.clone(), levels: vec![0], level: 0 }),
            None => self.at_levels(p, f).into_iter().next(),
        };
        let board = |index: usize| -> Option<Vec<SetAtLevel>> {
            self.prepared.iter().zip(found).map(|both| set(both, index)).collect()
        };
        let boards: Vec<Vec<SetAtLevel>> = (0..boards).map(board).collect::<Option<_>>()?;
        let mut whole: Option<Tally> = None;
        let mut unique = BTreeSet::new();
        for sets in &boards {
            let next = tally(&self.problem.supply, self.parts(sets))?;
            whole = Some(match whole {
                None => next,
                Some(Tally { takes, cost }) => {
                    Tally { takes: takes.largest(&next.takes), cost: cost.zip(next.cost).map(|(a, b)| a.max(b)) }
                }
            });
            let chosen = sets.iter().flat_map(|set| &set.choices);
            let measured =
                chosen.filter(|c| self.problem.supply.lot_of(**c).is_some_and(|lot| lot.measured.is_some()));
            if !measured.into_iter().all(|choice| unique.insert(*choice)) {
                return None;
            }
        }
        let key = |sets: &[SetAtLevel]| ErrorKey::new(self.whole.deviation(&self.responses(sets)).error);
        let worst = boards.iter().max_by_key(|sets| key(sets))?.clone();
        Some(Combination { key: key(&worst), tally: whole?, sets: worst, boards })
    }

    /// A set at each level at which it exists, the level nearest to the wanted impedance first.
    fn at_levels(&self, prepared: &Prepared<'_>, found: &Found) -> Vec<SetAtLevel> {
        let middle = preferred_impedance(&self.problem.goals);
        let form = &prepared.forms[found.form];
        let groups = form.active_groups();
        let cost_counts = self.problem.goals.rank == Rank::Cost;
        let own = |tally: &Tally| tally.takes == found.takes && (!cost_counts || tally.cost == found.cost);
        let at = |&level: &i32| {
            let shifted = shifted(groups, &found.choices[..groups.len()], level);
            let filled = shifted.map(|shifted| with_silent(form, prepared.supply, shifted, cost_counts));
            filled.unwrap_or_default().into_iter().map(move |(choices, tally)| (level, choices, tally))
        };
        // Other ways to fill the silent slots may be needed where several sections draw on one stock.
        let alone = self.prepared.len() == 1;
        let mut levels: Vec<(bool, SetAtLevel)> = (found.levels.iter().flat_map(at))
            .filter(|(_, _, tally)| !alone || own(tally))
            .map(|(level, choices, tally)| {
                (!own(&tally), SetAtLevel { form: found.form, choices, levels: found.levels.clone(), level })
            })
            .collect();
        let distance =
            |set: &SetAtLevel| impedance(groups, &in_ohms(&set.choices)).map_or(0.0, |z| (z / middle).ln().abs());
        levels.sort_by(|(other, a), (than, b)| {
            other.cmp(than).then(distance(a).total_cmp(&distance(b))).then_with(|| a.cmp(b))
        });
        levels.into_iter().map(|(_, set)| set).collect()
    }
}

/// How often sections are searched anew because others have used up the stock.
const MOST_SEARCHES: usize = 200;

/// Sets of sections that are searched one after the other, each with what those before it leave of the stock.
struct Further<'a> {
    board: &'a Board<'a>,
    searches: usize,
    found: Vec<Vec<Found>>,
}

impl Further<'_> {
    /// Goes through the sections in `order`, the first of them yet without a set.
    fn search(&mut self, order: &[usize], left: &Supply, sets: &mut Vec<Option<Found>>) {
        let Some((&index, rest)) = order.split_first() else {
            self.found.extend(sets.iter().cloned().collect::<Option<Vec<Found>>>());
            return;
        };
        let prepared = &self.board.prepared[index];
        let firsts: Vec<Found> = prepared.front.rows.iter().map(|row| row[0].clone()).collect();
        let still = |found: &Found| match found.boards.is_empty() {
            true => {
                tally(left, super::canonical::parts(&prepared.forms[found.form].groups, &found.choices)).is_some()
            }
            false => found.boards.iter().all(|board| {
                tally(left, super::canonical::parts(&prepared.forms[board.form].groups, &board.choices)).is_some()
            }),
        };
        let rows = if firsts.iter().all(still) {
            // With less to choose from, what was best still is.
            firsts
        } else if self.searches < MOST_SEARCHES && self.board.monitor.stop().is_none() {
            self.searches += 1;
            let goals = Goals { alternatives: 0, ..self.board.problem.goals.clone() };
            let forms = Model::forms(prepared.problem, left);
            let front = section::search(&forms, left, &prepared.yardstick, &goals, self.board.monitor);
            front.map_or(Vec::new(), |front| front.rows.into_iter().flatten().collect())
        } else {
            firsts.into_iter().filter(still).collect()
        };
        for found in rows {
            let taken = self.board.taken(prepared, &found);
            sets[index] = Some(found);
            self.search(rest, &left.less(&taken), sets);
        }
        sets[index] = None;
    }
}

impl Board<'_> {
    /// What a set of a section takes from the stock for each board, measured parts for all boards.
    fn taken(&self, prepared: &Prepared<'_>, found: &Found) -> Vec<(Choice, u64)> {
        let whole = [(found.form, &found.choices)];
        let boards = found.boards.iter().map(|board| (board.form, &board.choices));
        let mut most: BTreeMap<Choice, u64> = BTreeMap::new();
        for (form, choices) in whole.into_iter().chain(boards) {
            let mut here: BTreeMap<Choice, u64> = BTreeMap::new();
            for (_, choice, bodies) in super::canonical::parts(&prepared.forms[form].groups, choices) {
                *here.entry(choice).or_default() += bodies;
            }
            for (choice, bodies) in here {
                let kept = most.entry(choice).or_default();
                *kept = bodies.max(*kept);
            }
        }
        most.into_iter().collect()
    }
}
