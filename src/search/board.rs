//! The whole job: each section's front, the fronts combined, and the reference rows beside them.

use std::collections::{BTreeMap, BTreeSet};

use rayon::prelude::*;

use crate::circuit::Need;
use crate::parts::{Buying, Choice, Origin, Supply};
use crate::target::{Biquad, Deviation, Figures, Measure, Section, Yardstick};
use crate::units::{Kind, Value};

use super::canonical::{Tally, canonical, impedance, in_ohms, preferred_impedance, shifted, tally, with_silent};
use super::front::{ErrorKey, Found, Proof, Takes};
use super::ideal::{self, Ideal};
use super::limits::{Monitor, StopReason};
use super::model::{Group, Model};
use super::problem::{Goals, Joint, Problem, Rank, SectionProblem};
use super::section::{self, SectionFront};
use super::shortage::shortages;

/// What stands in one slot of a row.
#[derive(Clone, Debug, PartialEq)]
pub struct Part {
    /// The slot's index in the circuit.
    pub slot: usize,
    /// Resistor or capacitor.
    pub kind: Kind,
    /// Its value in ohms or farads; that of the whole for a pair.
    pub ideal: f64,
    /// The exact value of a single part; `None` for a pair, and for an unrounded part of the ideal row.
    pub value: Option<Value>,
    /// What it is made of: one part, two for a pair, none for an unrounded part.
    pub pieces: Vec<Choice>,
    /// How the two parts of a pair are joined.
    pub joint: Option<Joint>,
}

/// One board among several that differ in their measured parts.
#[derive(Clone, Debug, PartialEq)]
pub struct BuiltBoard {
    /// The error of its whole cascade, in the unit of the measure.
    pub error: f64,
    /// Its sections.
    pub sections: Vec<Chosen>,
}

/// What was chosen for one section.
#[derive(Clone, Debug, PartialEq)]
pub struct Chosen {
    /// The parts of the filled slots, in slot order.
    pub parts: Vec<Part>,
    /// What they give.
    pub achieved: Figures,
    /// Geometric mean of the resistances that set the response, ohms; `None` without such a resistor.
    pub impedance: Option<f64>,
    /// The impedance levels at which this set also exists on the shelves, this one included, ascending, ohms.
    pub levels: Vec<f64>,
}

/// One row of the shortlist.
#[derive(Clone, Debug, PartialEq)]
pub struct Row {
    /// The error of the whole cascade, in the unit of the measure.
    pub deviation: Deviation,
    /// Its response error in dB, whatever the measure.
    pub decibels: f64,
    /// Different values over the whole board, resistors and capacitors counted apart; `None` for unrounded parts.
    pub part_numbers: Option<usize>,
    /// Bodies on the board.
    pub placed_parts: usize,
    /// The largest relative miss in f0, Q, gain and fz over all sections.
    pub worst_miss: f64,
    /// Whether the row is not on the front, and listed because alternatives were asked for.
    pub alternative: bool,
    /// Whether it is proved that no set on these shelves in this circuit, but those of the rows before it, has a smaller
    /// error with as few part numbers. Never so for several sections, which are chosen one at a time.
    pub proved: bool,
    /// Part numbers that must be bought; `None` without a stock list.
    pub to_buy: Option<usize>,
    /// What the parts of one board cost, in millionths of the currency; `None` where a price is not known. Where boards
    /// differ, that of the dearest.
    pub cost: Option<u64>,
    /// The sections; where boards differ, those of the worst board.
    pub sections: Vec<Chosen>,
    /// The boards, where measured parts make them differ; empty where all are alike.
    pub boards: Vec<BuiltBoard>,
}

/// How one section was searched.
#[derive(Clone, Debug, PartialEq)]
pub struct SectionSummary {
    /// The section's name.
    pub name: String,
    /// What is proved of its front.
    pub proof: Proof,
    /// How many combinations of shelf values there are for the slots that reach the response.
    pub combinations: f64,
    /// Sets whose response was evaluated.
    pub sets: u64,
    /// Partial and whole sets visited.
    pub nodes: u64,
    /// The error limit in force in the end: larger than the job's where nothing lay within that.
    pub error_limit: f64,
    /// The section's own front: part numbers and error, the latter in the unit of the measure.
    pub front: Vec<(usize, f64)>,
    /// Names of the slots that do not reach the response.
    pub silent: Vec<String>,
    /// Slots that may be interchanged, such as `R1 <-> R2`: of two sets that differ by that, one is listed.
    pub interchangeable: Vec<String>,
    /// Inequalities that this target needs and these shelves cannot meet, with both sides.
    pub unmet: Vec<String>,
}

/// The result of a job.
#[derive(Clone, Debug, PartialEq)]
pub struct Outcome {
    /// The rows by error, then part numbers: the front, with alternatives where asked for.
    pub rows: Vec<Row>,
    /// How many more rows there are than the job wants listed.
    pub more_rows: usize,
    /// The fewest part numbers of any board that was found, where the job's limit is below that and so nothing is listed.
    pub fewest_found: Option<usize>,
    /// Whether some sets of the sections' fronts were left out when the sections were combined, being too many.
    pub thinned: bool,
    /// Unrounded parts: capacitors on the shelf where possible, resistors exact.
    pub ideal: Option<Row>,
    /// The ideal parts, each rounded to the nearest value of its shelf.
    pub nearest: Option<Row>,
    /// The sections.
    pub sections: Vec<SectionSummary>,
    /// Index of the row with the fewest part numbers within the wanted error.
    pub marked: Option<usize>,
    /// Whether the rows lie within the error limit; if not, they are the nearest that were found.
    pub within_limit: bool,
    /// Why the search ended early, if it did.
    pub stopped: Option<StopReason>,
    /// Sets whose response was evaluated, over all sections.
    pub sets: u64,
    /// Partial and whole sets visited, over all sections.
    pub nodes: u64,
}

/// A section ready to be combined.
struct Prepared<'a> {
    problem: &'a SectionProblem,
    supply: &'a Supply,
    yardstick: Yardstick,
    /// With single parts, and with pairs in every way that is allowed.
    forms: Vec<Model>,
    front: SectionFront,
}

/// Where several sections have more combinations of sets than this, their lists are thinned.
const MOST_COMBINATIONS: usize = 20_000;

/// How many combinations are formed even when the job was stopped meanwhile.
const LEAST_COMBINATIONS: usize = 500;

/// Where the sections of one combination can stand at more combinations of impedance levels, only the preferred is taken.
const MOST_LEVELS: usize = 256;

/// Searches a job. The outcome is the same for any number of threads.
///
/// A single section's front is exact. Several sections are searched one at a time, and the sets of their fronts
/// combined: then no more is claimed than that.
pub fn shortlist(problem: &Problem, monitor: &dyn Monitor) -> Outcome {
    let targets: Vec<Section> = problem.sections.iter().map(|s| s.target.clone()).collect();
    let whole = Yardstick::new(&targets, problem.criterion);
    let mut criterion = problem.criterion;
    criterion.band = Some(whole.band());
    let prepared: Vec<Prepared<'_>> = problem
        .sections
        .iter()
        .filter_map(|section| {
            let supply = &problem.supply;
            let forms = Model::forms(section, supply);
            let yardstick = Yardstick::new(std::slice::from_ref(&section.target), criterion);
            let front = section::search(&forms, supply, &yardstick, &problem.goals, monitor)?;
            let mut prepared = Prepared { problem: section, supply, yardstick, forms, front };
            prepared.fall_back(&problem.goals);
            Some(prepared)
        })
        .collect();
    let board = Board { problem, whole: &whole, prepared: &prepared, monitor };
    let listed = if prepared.len() == problem.sections.len() { board.rows() } else { Listed::default() };
    let (ideal, nearest) = board.references();
    let stopped = prepared.iter().find_map(|p| match p.front.proof {
        Proof::Stopped { reason, .. } => Some(reason),
        Proof::Exhaustive(_) => None,
    });
    Outcome {
        rows: listed.rows,
        more_rows: listed.more,
        fewest_found: listed.fewest_found,
        thinned: listed.thinned,
        ideal,
        nearest,
        sections: prepared.iter().enumerate().map(|(i, p)| p.summary(&shortages(problem, i))).collect(),
        marked: listed.marked,
        within_limit: listed.within_limit,
        stopped,
        sets: prepared.iter().map(|p| p.front.sets).sum(),
        nodes: prepared.iter().map(|p| p.front.nodes).sum(),
    }
}

impl Prepared<'_> {
    /// Gives a section for which a stopped search found nothing its rounded ideal parts, so that what was found for the
    /// other sections is not lost.
    fn fall_back(&mut self, goals: &Goals) {
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

    fn summary(&self, shortages: &[String]) -> SectionSummary {
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

/// A combination of one set for each section.
struct Combination {
    key: ErrorKey,
    tally: Tally,
    sets: Vec<SetAtLevel>,
    /// For each board that differs from others: a set of each section.
    boards: Vec<Vec<SetAtLevel>>,
}

/// A set of a section at one impedance level.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
struct SetAtLevel {
    form: usize,
    /// The choices of all groups.
    choices: Vec<Choice>,
    /// Levels at which the set exists, in decades from the lowest, and this one.
    levels: Vec<i32>,
    level: i32,
}

struct Board<'a> {
    problem: &'a Problem,
    whole: &'a Yardstick,
    prepared: &'a [Prepared<'a>],
    monitor: &'a dyn Monitor,
}

/// The rows of a shortlist and what is to be said of them; see [`Outcome`].
#[derive(Default)]
struct Listed {
    rows: Vec<Row>,
    more: usize,
    fewest_found: Option<usize>,
    thinned: bool,
    marked: Option<usize>,
    within_limit: bool,
}

impl Combination {
    /// Whether another takes no more of anything, the cost included where it counts.
    fn is_beaten_by(&self, other: &Combination, cost_counts: bool) -> bool {
        let cheaper = !cost_counts || other.tally.cost <= self.tally.cost;
        other.tally.takes.is_within(&self.tally.takes) && cheaper
    }

    /// The values without what they are taken from.
    fn values(&self) -> Vec<Value> {
        self.sets.iter().flat_map(|set| set.choices.iter().map(|choice| choice.value)).collect()
    }
}

impl Board<'_> {
    /// The rows of the shortlist.
    fn rows(&self) -> Listed {
        let goals = &self.problem.goals;
        let cost_counts = goals.rank == Rank::Cost;
        let (mut combinations, thinned) = self.combinations();
        let fewest = combinations.iter().map(|c| c.tally.takes.part_numbers).min();
        combinations.retain(|c| goals.max_part_numbers.is_none_or(|most| c.tally.takes.part_numbers <= most));
        let cost = |c: &Combination| (c.tally.cost.is_none(), c.tally.cost);
        combinations.sort_by(|a, b| {
            let rank = |c: &Combination| (c.key, c.tally.takes, cost(c));
            rank(a).cmp(&rank(b)).then_with(|| a.sets.cmp(&b.sets))
        });
        let limit = ErrorKey::new(goals.error_limit);
        let within_limit = combinations.first().is_some_and(|best| best.key <= limit);
        combinations.retain(|c| !within_limit || c.key <= limit);
        // By ascending error, a combination is on the front if it takes less of something than each before it.
        let mut front: Vec<&Combination> = Vec::new();
        let mut alternatives: BTreeMap<usize, usize> = BTreeMap::new();
        let mut picked: Vec<(&Combination, bool)> = Vec::new();
        for c in &combinations {
            let beaten = front.iter().any(|better| c.is_beaten_by(better, cost_counts));
            if beaten {
                let count = c.tally.takes.part_numbers;
                let used = alternatives.entry(count).or_insert(0);
                let same = front.iter().any(|better| better.tally.takes.part_numbers == count);
                let values = c.values();
                let again = || picked.iter().any(|(known, _)| known.values() == values && known.key == c.key);
                if !same || *used >= goals.alternatives || (self.problem.supply.has_stock() && again()) {
                    continue;
                }
                *used += 1;
            } else {
                front.push(c);
            }
            picked.push((c, beaten));
        }
        match goals.rank {
            Rank::Error => {}
            Rank::PartNumbers => picked.sort_by_key(|(c, _)| c.tally.takes.part_numbers),
            Rank::ToBuy => picked.sort_by_key(|(c, _)| c.tally.takes.bought),
            Rank::Cost => picked.sort_by_key(|(c, _)| cost(c)),
        }
        let wanted = ErrorKey::new(goals.wanted_error);
        let marked =
            (0..picked.len()).filter(|&i| picked[i].0.key <= wanted).min_by_key(|&i| (picked[i].0.tally.takes, i));
        // Where there are too many, alternatives go first, then rows from the end, but never the marked one.
        let mut kept: Vec<usize> = (0..picked.len()).collect();
        kept.sort_by_key(|&i| (Some(i) != marked, picked[i].1, i));
        kept.truncate(goals.rows);
        kept.sort_unstable();
        Listed {
            rows: kept.iter().map(|&i| self.row(picked[i].0, picked[i].1)).collect(),
            more: picked.len() - kept.len(),
            fewest_found: fewest.filter(|_| combinations.is_empty()),
            thinned,
            marked: marked.and_then(|m| kept.iter().position(|&i| i == m)),
            within_limit,
        }
    }

    /// All combinations of one set of each section that the stock allows, or, where they are too many, of thinned lists;
    /// and whether something was left out.
    fn combinations(&self) -> (Vec<Combination>, bool) {
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
            (i < LEAST_COMBINATIONS || self.monitor.stop().is_none()).then(|| self.combination(found)).flatten()
        };
        let mut combinations: Vec<Combination> = choices.par_iter().enumerate().filter_map(combine).collect();
        if self.prepared.len() > 1 && self.problem.supply.has_stock() && combinations.len() < choices.len() {
            let mut further = Further { board: self, searches: 0, found: Vec::new() };
            let order: Vec<usize> = (0..self.prepared.len()).collect();
            further.search(&order, &self.problem.supply, &mut vec![None; order.len()]);
            let backwards: Vec<usize> = order.into_iter().rev().collect();
            further.search(&backwards, &self.problem.supply, &mut vec![None; backwards.len()]);
            thinned |= further.searches >= MOST_SEARCHES;
            let again =
                further.found.par_iter().filter_map(|found| self.combination(&found.iter().collect::<Vec<_>>()));
            combinations.extend(again.collect::<Vec<_>>());
            combinations.sort_by(|a, b| (&a.sets, &a.boards).cmp(&(&b.sets, &b.boards)));
            combinations.dedup_by(|a, b| a.sets == b.sets && a.boards == b.boards);
        }
        (combinations, thinned)
    }

    fn responses(&self, sets: &[SetAtLevel]) -> Vec<Biquad> {
        let response = |(p, set): (&Prepared<'_>, &SetAtLevel)| {
            let form = &p.forms[set.form];
            form.biquad(&set.choices[..form.active])
        };
        self.prepared.iter().zip(sets).map(response).collect()
    }

    /// The parts of all sections: kind, choice and bodies.
    fn parts<'b>(&'b self, sets: &'b [SetAtLevel]) -> impl Iterator<Item = (Kind, Choice, u64)> + 'b {
        let all = self.prepared.iter().zip(sets);
        all.flat_map(|(p, set)| super::canonical::parts(&p.forms[set.form].groups, &set.choices))
    }

    /// One set of each section as a whole; `None` where the stock does not suffice for it.
    fn combination(&self, found: &[&Found]) -> Option<Combination> {
        if found.iter().any(|f| !f.boards.is_empty()) {
            return self.differing(found);
        }
        let levels: Vec<Vec<SetAtLevel>> =
            self.prepared.iter().zip(found).map(|(p, f)| self.at_levels(p, f)).collect();
        let count = |sets: &[SetAtLevel]| tally(&self.problem.supply, self.parts(sets));
        // The first level of each is the preferred one; others are taken only where they save something.
        let mut best: Vec<SetAtLevel> = levels.iter().filter_map(|list| list.first().cloned()).collect();
        let mut tallied = count(&best);
        if levels.len() > 1 && levels.iter().map(Vec::len).product::<usize>() <= MOST_LEVELS {
            let mut index = vec![0; levels.len()];
            'all: loop {
                for (place, list) in index.iter_mut().zip(&levels) {
                    *place += 1;
                    if *place < list.len() {
                        let sets: Vec<SetAtLevel> =
                            levels.iter().zip(&index).map(|(list, &i)| list[i].clone()).collect();
                        if let Some(next) = count(&sets)
                            && tallied.is_none_or(|best| next.takes < best.takes)
                        {
                            (best, tallied) = (sets, Some(next));
                        }
                        continue 'all;
                    }
                    *place = 0;
                }
                break;
            }
        }
        let key = ErrorKey::new(self.whole.deviation(&self.responses(&best)).error);
        Some(Combination { key, tally: tallied?, sets: best, boards: Vec::new() })
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
                Some(Tally { takes, cost }) => Tally {
                    takes: Takes {
                        part_numbers: takes.part_numbers.max(next.takes.part_numbers),
                        bought: takes.bought.max(next.takes.bought),
                        placed_parts: takes.placed_parts.max(next.takes.placed_parts),
                    },
                    cost: cost.zip(next.cost).map(|(a, b)| a.max(b)),
                },
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

    fn row(&self, combination: &Combination, alternative: bool) -> Row {
        let single = self.prepared.len() == 1;
        let proved = self.prepared.iter().all(|p| match p.front.proof {
            // Where a silent slot may cost a part number, further sets of a count can stem from fewer values than were
            // searched so far: then only the first of each count is proved.
            Proof::Exhaustive(_) => {
                !alternative || (p.forms[0].silent_groups_are_free() && !self.problem.supply.has_stock())
            }
            Proof::Stopped { complete_below, .. } => combination.tally.takes.part_numbers < complete_below,
        });
        let chosen = |sets: &[SetAtLevel]| -> Vec<Chosen> {
            self.prepared.iter().zip(sets).map(|(p, set)| p.chosen_at(set)).collect()
        };
        let boards = combination.boards.iter().map(|sets| BuiltBoard {
            error: self.whole.deviation(&self.responses(sets)).error,
            sections: chosen(sets),
        });
        let boards = boards.collect();
        let tally = Some(combination.tally);
        let row = self.assembled(chosen(&combination.sets), tally, alternative, single && proved);
        Row { boards, ..row }
    }

    /// A row from its sections.
    fn assembled(&self, sections: Vec<Chosen>, tally: Option<Tally>, alternative: bool, proved: bool) -> Row {
        let responses: Vec<Biquad> = self.prepared.iter().zip(&sections).map(|(p, c)| p.response(c)).collect();
        let mut deviation = self.whole.deviation(&responses);
        // What is left of exact parts is rounding, and that has no place.
        const ROUNDING: f64 = 1e-10;
        deviation.at = deviation.at.filter(|_| deviation.error > ROUNDING);
        let decibels = match self.problem.criterion.measure {
            Measure::Decibel => deviation.error,
            _ => {
                let criterion = crate::target::Criterion { measure: Measure::Decibel, ..*self.whole.criterion() };
                Yardstick::new(self.whole.sections(), criterion).deviation(&responses).error
            }
        };
        let miss = |(p, c): (&Prepared<'_>, &Chosen)| {
            let mut misses = p.problem.target.misses(&c.achieved);
            if self.problem.criterion.ignore_gain {
                misses[2] = None;
            }
            misses.into_iter().flatten().fold(0.0, f64::max)
        };
        Row {
            deviation,
            decibels,
            part_numbers: tally.map(|tally| tally.takes.part_numbers),
            placed_parts: match tally {
                Some(tally) => tally.takes.placed_parts,
                None => self.prepared.iter().map(|p| p.forms[0].placed_parts).sum(),
            },
            to_buy: tally.filter(|_| self.problem.supply.has_stock()).map(|tally| tally.takes.bought),
            cost: tally.and_then(|tally| tally.cost).filter(|_| self.problem.supply.currency().is_some()),
            boards: Vec::new(),
            worst_miss: self.prepared.iter().zip(&sections).map(miss).fold(0.0, f64::max),
            alternative,
            proved,
            sections,
        }
    }

    /// The rows "ideal parts" and "nearest value to each", where the solver finds ideal parts for every section.
    fn references(&self) -> (Option<Row>, Option<Row>) {
        let ignore_gain = self.problem.criterion.ignore_gain;
        let solved: Option<Vec<Ideal>> =
            self.prepared.iter().map(|p| ideal::solve(&p.forms[0], &p.problem.target, ignore_gain)).collect();
        let Some(solved) = solved.filter(|s| s.len() == self.problem.sections.len()) else { return (None, None) };
        let rounded: Vec<Vec<Choice>> = self.prepared.iter().zip(&solved).map(|(p, i)| p.rounded(i)).collect();
        let exact = self.prepared.iter().zip(&solved).zip(&rounded).map(|((p, ideal), rounded)| {
            let on_shelf = ideal.on_shelf.iter().map(|value| value.map(Choice::from));
            let mut values: Vec<(f64, Option<Choice>)> = ideal.values.iter().copied().zip(on_shelf).collect();
            values.extend(rounded[p.forms[0].active..].iter().map(|c| (c.value.to_f64(), Some(*c))));
            p.chosen(0, &values, Vec::new())
        });
        let exact = exact.collect();
        let nearest = self.prepared.iter().zip(&rounded).map(|(p, rounded)| {
            let values: Vec<(f64, Option<Choice>)> = rounded.iter().map(|c| (c.value.to_f64(), Some(*c))).collect();
            p.chosen(0, &values, Vec::new())
        });
        let nearest = nearest.collect();
        // Rounding asks neither for quantities nor for leave to buy: it is counted as if all could be bought.
        let parts = || {
            let all = self.prepared.iter().zip(&rounded);
            all.flat_map(|(p, rounded)| super::canonical::parts(&p.forms[0].groups, rounded))
        };
        let mut endless = self.problem.supply.clone();
        (endless.buying, endless.buying_only) = (Buying::Allowed, None);
        let tally = tally(&endless, parts());
        (
            Some(self.assembled(exact, None, false, false)),
            // Quantities were not asked for, so neither what must be bought nor what it costs means anything.
            tally.map(|tally| Row { to_buy: None, cost: None, ..self.assembled(nearest, Some(tally), false, false) }),
        )
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

impl Prepared<'_> {
    /// The ideal parts on their shelves, each to the nearest, the silent groups filled.
    fn rounded(&self, ideal: &Ideal) -> Vec<Choice> {
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
    fn chosen_at(&self, set: &SetAtLevel) -> Chosen {
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
    fn chosen(&self, form: usize, values: &[(f64, Option<Choice>)], levels: Vec<f64>) -> Chosen {
        chosen(self.problem, &self.forms[form], values, levels)
    }

    /// The transfer function of a chosen section.
    fn response(&self, chosen: &Chosen) -> Biquad {
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
