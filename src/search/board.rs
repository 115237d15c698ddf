//! The whole job: each section's front, the fronts combined, and the reference rows beside them.

use std::collections::BTreeMap;

use crate::parts::{Buying, Choice};
use crate::target::{Biquad, Measure, Section, Yardstick};

use super::canonical::{Tally, tally};
use super::combine::{Board, Combination, SetAtLevel};
use super::front::{ErrorKey, Proof, Takes};
use super::ideal::{self, Ideal};
use super::limits::{Monitor, StopReason};
use super::model::Model;
use super::outcome::{BuiltBoard, Chosen, Outcome, Row, TogetherSummary};
use super::prepared::Prepared;
use super::problem::{Problem, Rank, SectionProblem};
use super::section;
use super::shortage::shortages;
use super::together::{self, Together};

/// Searches a job. The outcome is the same for any number of threads.
///
/// A single section's front is exact. Several sections are searched one at a time and the sets of their fronts combined;
/// then all are chosen together, which is exact for the boards that it allows for (see [`TogetherSummary`]).
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
    let together = together::together(&board);
    let complete = prepared.len() == problem.sections.len();
    let listed = if complete { board.rows(together.as_ref()) } else { Listed::default() };
    let (ideal, nearest) = board.references();
    let proofs = prepared.iter().map(|p| &p.front.proof).chain(together.iter().map(|t| &t.proof));
    let stopped = proofs.into_iter().find_map(|proof| match proof {
        // That all boards would take too long is no end that anybody asked for: it is said beside the boards.
        Proof::Exhaustive(_) | Proof::Stopped { reason: StopReason::Effort, .. } => None,
        Proof::Stopped { reason, .. } => Some(*reason),
    });
    let own = |section: &SectionProblem| section.own_error.unwrap_or(problem.goals.own_error());
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
        sets: prepared.iter().map(|p| p.front.sets).chain(together.iter().map(|t| t.sets)).sum(),
        nodes: prepared.iter().map(|p| p.front.nodes).chain(together.iter().map(|t| t.nodes)).sum(),
        together: together.map(|together| TogetherSummary {
            proof: together.proof,
            own_errors: problem.sections.iter().map(own).collect(),
            bounds: together.bounds,
            ended_at: together.ended_at,
            sets: together.sets,
            nodes: together.nodes,
            one_at_a_time: listed.one_at_a_time,
        }),
    }
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
    /// Part numbers and error of the best within the wanted error of the sections chosen one at a time.
    one_at_a_time: Option<(usize, f64)>,
}

impl Board<'_> {
    /// The rows of the shortlist.
    fn rows(&self, together: Option<&Together>) -> Listed {
        let goals = &self.problem.goals;
        let cost_counts = goals.rank == Rank::Cost;
        let (mut combinations, thinned) = self.combinations();
        let wanted = ErrorKey::new(goals.wanted_error);
        combinations.retain(|c| self.keeps_own_limits(c));
        let good = combinations.iter().filter(|c| c.key <= wanted);
        let one_at_a_time = good.map(|c| (c.tally.takes.part_numbers, c.key)).min();
        combinations.extend(together.iter().flat_map(|t| t.boards.iter().cloned()));
        combinations.iter_mut().for_each(|c| self.put_in_order(c));
        combinations.sort_by(|a, b| (&a.sets, &a.boards).cmp(&(&b.sets, &b.boards)));
        combinations.dedup_by(|a, b| a.sets == b.sets && a.boards == b.boards);
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
        if together.is_some() {
            // Beyond the end of the front nothing was searched together.
            let resolution = ErrorKey::new(goals.error_resolution);
            let good = combinations.iter().filter(|c| c.key < resolution);
            let ends: Vec<Takes> = good.map(|c| c.tally.takes).collect();
            let is_beyond =
                |takes: &Takes, end: &Takes| end.part_numbers < takes.part_numbers && end.is_within(takes);
            combinations.retain(|c| !ends.iter().any(|end| is_beyond(&c.tally.takes, end)));
        }
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
            Rank::PlacedParts => picked.sort_by_key(|(c, _)| c.tally.takes.placed_parts),
        }
        let marked =
            (0..picked.len()).filter(|&i| picked[i].0.key <= wanted).min_by_key(|&i| (picked[i].0.tally.takes, i));
        // Where there are too many, alternatives go first, then rows from the end, but never the marked one.
        let mut kept: Vec<usize> = (0..picked.len()).collect();
        kept.sort_by_key(|&i| (Some(i) != marked, picked[i].1, i));
        kept.truncate(goals.rows);
        kept.sort_unstable();
        Listed {
            rows: kept.iter().map(|&i| self.row(picked[i].0, picked[i].1, together)).collect(),
            more: picked.len() - kept.len(),
            fewest_found: fewest.filter(|_| combinations.is_empty()),
            thinned,
            marked: marked.and_then(|m| kept.iter().position(|&i| i == m)),
            within_limit,
            one_at_a_time: one_at_a_time.map(|(part_numbers, key)| (part_numbers, key.value())),
        }
    }

    /// Whether each section that is pinned to a limit of its own keeps it.
    fn keeps_own_limits(&self, combination: &Combination) -> bool {
        let all = std::iter::once(&combination.sets).chain(&combination.boards);
        all.into_iter().all(|sets| {
            let responses = self.responses(sets);
            let mut own = self.prepared.iter().zip(&responses);
            own.all(|(p, h)| p.problem.own_error.is_none_or(|own| p.yardstick.within(&[*h], own + 1e-12).is_some()))
        })
    }

    fn row(&self, combination: &Combination, alternative: bool, together: Option<&Together>) -> Row {
        let is_proved = |p: &Prepared<'_>| match p.front.proof {
            // Where a silent slot may cost a part number, further sets of a count can stem from fewer values than were
            // searched so far: then only the first of each count is proved.
            Proof::Exhaustive(_) => {
                !alternative || (p.forms[0].silent_groups_are_free() && !self.problem.supply.has_stock())
            }
            Proof::Stopped { complete_below, .. } => combination.tally.takes.part_numbers < complete_below,
        };
        let proved = match (together, self.prepared) {
            (_, [only]) => is_proved(only),
            (Some(together), _) => {
                let limit = ErrorKey::new(self.problem.goals.error_limit);
                !alternative && combination.key <= limit && together.proves(combination)
            }
            (None, _) => false,
        };
        let chosen = |sets: &[SetAtLevel]| -> Vec<Chosen> {
            self.prepared.iter().zip(sets).map(|(p, set)| p.chosen_at(set)).collect()
        };
        let boards = combination.boards.iter().map(|sets| BuiltBoard {
            error: self.whole.deviation(&self.responses(sets)).error,
            sections: chosen(sets),
        });
        let boards = boards.collect();
        let tally = Some(combination.tally);
        let row = self.assembled(chosen(&combination.sets), tally, alternative, proved);
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
