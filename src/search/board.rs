//! The whole job: each section's front, the fronts combined, and the reference rows beside them.

use std::collections::{BTreeMap, BTreeSet};

use rayon::prelude::*;

use crate::circuit::Need;
use crate::target::{Biquad, Deviation, Figures, Measure, Section, Yardstick};
use crate::units::{Kind, Value};

use super::canonical::{canonical, impedance, in_ohms, shifted, with_silent};
use super::front::{ErrorKey, Found, Proof};
use super::ideal::{self, Ideal};
use super::limits::{Monitor, StopReason};
use super::model::{Group, Model};
use super::problem::{Goals, Problem, SectionProblem};
use super::section::{self, SectionFront};

/// One part of a row.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Part {
    /// The slot's index in the circuit.
    pub slot: usize,
    /// Resistor or capacitor.
    pub kind: Kind,
    /// Its value in ohms or farads.
    pub ideal: f64,
    /// Its value as bought; `None` for an unrounded part of the ideal row.
    pub value: Option<Value>,
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
    /// The sections.
    pub sections: Vec<Chosen>,
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
    model: Model,
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
            let model = Model::new(section)?;
            let yardstick = Yardstick::new(std::slice::from_ref(&section.target), criterion);
            let front = section::search(&model, &yardstick, &problem.goals, monitor)?;
            let mut prepared = Prepared { problem: section, model, front };
            prepared.fall_back(&yardstick, &problem.goals);
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
        sections: prepared.iter().map(Prepared::summary).collect(),
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
    fn fall_back(&mut self, yardstick: &Yardstick, goals: &Goals) {
        if !self.front.rows.is_empty() || matches!(self.front.proof, Proof::Exhaustive(_)) {
            return;
        }
        let ignore_gain = yardstick.criterion().ignore_gain;
        let found = ideal::solve(&self.model, &self.problem.target, ignore_gain).and_then(|ideal| {
            let rounded = self.rounded(&ideal);
            let mut found = canonical(&self.model, goals, &rounded[..self.model.active])?;
            let response = self.model.biquad(&found.values[..self.model.active]);
            found.error = yardstick.deviation(&[response]).error;
            found.key = ErrorKey::new(found.error);
            found.error.is_finite().then_some(found)
        });
        self.front.rows.extend(found.map(|found| vec![found]));
    }

    fn summary(&self) -> SectionSummary {
        let circuit = &self.problem.circuit;
        let names =
            |slots: &[usize]| slots.iter().map(|&s| circuit.slots[s].name.as_str()).collect::<Vec<_>>().join("=");
        let silent = self.model.silent_groups().iter().flat_map(|g| &g.slots);
        let swap = |order: &Vec<usize>| {
            let moved = (0..order.len()).filter(|&k| k < order[k]);
            let pairs = moved.map(|k| {
                let groups = self.model.active_groups();
                format!("{} <-> {}", names(&groups[k].slots), names(&groups[order[k]].slots))
            });
            pairs.collect::<Vec<_>>().join(", ")
        };
        SectionSummary {
            name: self.problem.target.name.clone(),
            proof: self.front.proof.clone(),
            combinations: self.model.combinations(),
            sets: self.front.sets,
            nodes: self.front.nodes,
            error_limit: self.front.limit,
            front: self.front.rows.iter().map(|row| (row[0].part_numbers, row[0].error)).collect(),
            silent: silent.map(|&s| circuit.slots[s].name.clone()).collect(),
            interchangeable: self.model.symmetries.iter().map(swap).collect(),
            unmet: unmet(self.problem),
        }
    }
}

/// The needs of a section's output that its shelves cannot meet, with both sides.
fn unmet(section: &SectionProblem) -> Vec<String> {
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
    part_numbers: usize,
    placed_parts: usize,
    /// For each section: the values of all groups at the chosen level.
    values: Vec<Vec<Value>>,
    /// For each section: the set it came from.
    origin: Vec<(usize, usize)>,
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

impl Board<'_> {
    /// The rows of the shortlist.
    fn rows(&self) -> Listed {
        let goals = &self.problem.goals;
        let (mut combinations, thinned) = self.combinations();
        let fewest = combinations.iter().map(|c| c.part_numbers).min();
        combinations.retain(|c| goals.max_part_numbers.is_none_or(|most| c.part_numbers <= most));
        combinations.sort_by(|a, b| {
            let rank = |c: &Combination| (c.key, c.part_numbers, c.placed_parts);
            rank(a).cmp(&rank(b)).then_with(|| a.values.cmp(&b.values))
        });
        let limit = ErrorKey::new(goals.error_limit);
        let within_limit = combinations.first().is_some_and(|best| best.key <= limit);
        combinations.retain(|c| !within_limit || c.key <= limit);
        // By ascending error, a combination is on the front if it needs fewer parts of some sort than all before it.
        let mut front: Vec<(usize, usize)> = Vec::new();
        let mut alternatives: BTreeMap<usize, usize> = BTreeMap::new();
        let mut picked: Vec<(&Combination, bool)> = Vec::new();
        for c in &combinations {
            let beaten = front.iter().any(|&(n, p)| n <= c.part_numbers && p <= c.placed_parts);
            if beaten {
                let used = alternatives.entry(c.part_numbers).or_insert(0);
                let same = front.iter().any(|&(n, _)| n == c.part_numbers);
                if !same || *used >= goals.alternatives {
                    continue;
                }
                *used += 1;
            } else {
                front.push((c.part_numbers, c.placed_parts));
            }
            picked.push((c, beaten));
        }
        let wanted = ErrorKey::new(goals.wanted_error);
        let marked = (0..picked.len())
            .filter(|&i| picked[i].0.key <= wanted)
            .min_by_key(|&i| (picked[i].0.part_numbers, picked[i].0.placed_parts, i));
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

    /// All combinations of one set of each section, or, where they are too many, of thinned lists; and whether they were.
    fn combinations(&self) -> (Vec<Combination>, bool) {
        let mut lists: Vec<Vec<(usize, usize)>> = (self.prepared.iter())
            .map(|p| {
                let rows = p.front.rows.iter().enumerate();
                rows.flat_map(|(i, row)| (0..row.len()).map(move |k| (i, k))).collect()
            })
            .collect();
        let size = |lists: &[Vec<(usize, usize)>]| lists.iter().map(Vec::len).fold(1usize, usize::saturating_mul);
        let mut thinned = false;
        while size(&lists) > MOST_COMBINATIONS {
            // The longest list gives up its last alternative, then its row with the most part numbers.
            let Some(longest) = lists.iter_mut().max_by_key(|list| list.len()) else { break };
            let last = longest.iter().rposition(|&(_, k)| k > 0).unwrap_or(longest.len() - 1);
            longest.remove(last);
            thinned = true;
        }
        let mut choices: Vec<Vec<(usize, usize)>> = vec![Vec::new()];
        for list in &lists {
            choices = choices
                .iter()
                .flat_map(|head| list.iter().map(move |&next| head.iter().copied().chain([next]).collect::<Vec<_>>()))
                .collect();
        }
        // What was found by the time of a stop is still combined, as far as that takes no time.
        let combine = |(i, origin): (usize, Vec<(usize, usize)>)| {
            (i < LEAST_COMBINATIONS || self.monitor.stop().is_none()).then(|| self.combination(origin))
        };
        (choices.into_par_iter().enumerate().filter_map(combine).collect(), thinned)
    }

    fn combination(&self, origin: Vec<(usize, usize)>) -> Combination {
        let found: Vec<&Found> = self.prepared.iter().zip(&origin).map(|(p, &(i, k))| &p.front.rows[i][k]).collect();
        let responses: Vec<Biquad> =
            self.prepared.iter().zip(&found).map(|(p, f)| p.model.biquad(&f.values[..p.model.active])).collect();
        let key = ErrorKey::new(self.whole.deviation(&responses).error);
        let levels: Vec<Vec<Vec<Value>>> =
            self.prepared.iter().zip(&found).map(|(p, f)| self.at_levels(p, f)).collect();
        let count = |values: &[&Vec<Value>]| {
            let all = self
                .prepared
                .iter()
                .zip(values)
                .flat_map(|(p, values)| p.model.groups.iter().map(|g| g.kind).zip(values.iter().copied()));
            all.collect::<BTreeSet<_>>().len()
        };
        // The first level of each is the preferred one; others are taken only where they save a part number.
        let mut best: Vec<&Vec<Value>> = levels.iter().filter_map(|list| list.first()).collect();
        let mut part_numbers = count(&best);
        if levels.len() > 1 && levels.iter().map(Vec::len).product::<usize>() <= MOST_LEVELS {
            let mut index = vec![0; levels.len()];
            'all: loop {
                for (place, list) in index.iter_mut().zip(&levels) {
                    *place += 1;
                    if *place < list.len() {
                        let values: Vec<&Vec<Value>> = levels.iter().zip(&index).map(|(list, &i)| &list[i]).collect();
                        let fewer = count(&values);
                        if fewer < part_numbers {
                            (best, part_numbers) = (values, fewer);
                        }
                        continue 'all;
                    }
                    *place = 0;
                }
                break;
            }
        }
        let values = best.into_iter().cloned().collect();
        let placed_parts = self.prepared.iter().map(|p| p.model.placed_parts).sum();
        Combination { key, part_numbers, placed_parts, values, origin }
    }

    /// The values of a set at each level at which it exists, the level nearest to the wanted impedance first.
    fn at_levels(&self, prepared: &Prepared<'_>, found: &Found) -> Vec<Vec<Value>> {
        const USUAL: f64 = 1e4;
        let middle = self.problem.goals.impedance.map_or(USUAL, |(from, to)| (from * to).sqrt());
        let groups = prepared.model.active_groups();
        let mut levels: Vec<Vec<Value>> = (found.levels.iter())
            .filter_map(|&level| {
                let shifted = shifted(groups, &found.values[..groups.len()], level)?;
                Some(with_silent(&prepared.model, shifted))
            })
            .collect();
        let distance =
            |values: &[Value]| impedance(groups, &in_ohms(values)).map_or(0.0, |z| (z / middle).ln().abs());
        levels.sort_by(|a, b| distance(a).total_cmp(&distance(b)).then_with(|| a.cmp(b)));
        levels
    }

    fn row(&self, combination: &Combination, alternative: bool) -> Row {
        let single = self.prepared.len() == 1;
        let proved = self.prepared.iter().all(|p| match p.front.proof {
            // Where a silent slot may cost a part number, further sets of a count can stem from fewer values than were
            // searched so far: then only the first of each count is proved.
            Proof::Exhaustive(_) => !alternative || p.model.silent_groups_are_free(),
            Proof::Stopped { complete_below, .. } => combination.part_numbers < complete_below,
        });
        let chosen =
            self.prepared.iter().zip(&combination.values).zip(&combination.origin).map(|((p, values), &(i, k))| {
                let groups = p.model.active_groups();
                let found = &p.front.rows[i][k];
                let level = |&level: &i32| {
                    impedance(groups, &in_ohms(&shifted(groups, &found.values[..groups.len()], level)?))
                };
                let values: Vec<(f64, Option<Value>)> = values.iter().map(|v| (v.to_f64(), Some(*v))).collect();
                p.chosen(&values, found.levels.iter().filter_map(level).collect())
            });
        let chosen = chosen.collect();
        self.assembled(chosen, Some(combination.part_numbers), alternative, single && proved)
    }

    /// A row from its sections.
    fn assembled(&self, sections: Vec<Chosen>, part_numbers: Option<usize>, alternative: bool, proved: bool) -> Row {
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
            part_numbers,
            placed_parts: self.prepared.iter().map(|p| p.model.placed_parts).sum(),
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
            self.prepared.iter().map(|p| ideal::solve(&p.model, &p.problem.target, ignore_gain)).collect();
        let Some(solved) = solved.filter(|s| s.len() == self.problem.sections.len()) else { return (None, None) };
        let exact = self.prepared.iter().zip(&solved).map(|(p, ideal)| {
            let mut values: Vec<(f64, Option<Value>)> =
                ideal.values.iter().copied().zip(ideal.on_shelf.iter().copied()).collect();
            let rounded = p.rounded(ideal);
            values.extend(rounded[p.model.active..].iter().map(|v| (v.to_f64(), Some(*v))));
            p.chosen(&values, Vec::new())
        });
        let exact = exact.collect();
        let mut numbers = BTreeSet::new();
        let nearest = self.prepared.iter().zip(&solved).map(|(p, ideal)| {
            let rounded = p.rounded(ideal);
            numbers.extend(p.model.groups.iter().map(|g| g.kind).zip(rounded.iter().copied()));
            let values: Vec<(f64, Option<Value>)> = rounded.iter().map(|v| (v.to_f64(), Some(*v))).collect();
            p.chosen(&values, Vec::new())
        });
        let nearest = nearest.collect();
        (
            Some(self.assembled(exact, None, false, false)),
            Some(self.assembled(nearest, Some(numbers.len()), false, false)),
        )
    }
}

impl Prepared<'_> {
    /// The ideal parts on their shelves, each to the nearest, the silent groups filled.
    fn rounded(&self, ideal: &Ideal) -> Vec<Value> {
        let nearest = self.model.active_groups().iter().zip(&ideal.values).map(|(g, &v)| g.shelf.nearest(v));
        with_silent(&self.model, nearest.collect())
    }

    /// A chosen section from the values of all its groups.
    fn chosen(&self, values: &[(f64, Option<Value>)], mut levels: Vec<f64>) -> Chosen {
        let active: Vec<f64> = values[..self.model.active].iter().map(|(v, _)| *v).collect();
        let achieved = self.problem.target.figures_of(&self.model.biquad_of(&active));
        let mut parts: Vec<Part> = (self.model.groups.iter().zip(values))
            .flat_map(|(group, &(ideal, value))| {
                group.slots.iter().map(move |&slot| Part { slot, kind: group.kind, ideal, value })
            })
            .collect();
        parts.sort_by_key(|part| part.slot);
        let impedance = impedance(self.model.active_groups(), &active);
        if levels.is_empty() {
            levels.extend(impedance);
        }
        Chosen { parts, achieved, impedance, levels }
    }

    /// The transfer function of a chosen section.
    fn response(&self, chosen: &Chosen) -> Biquad {
        let value = |group: &Group| {
            let part = chosen.parts.iter().find(|part| part.slot == group.slots[0]);
            part.map_or(f64::NAN, |part| part.ideal)
        };
        let values: Vec<f64> = self.model.active_groups().iter().map(value).collect();
        self.model.biquad_of(&values)
    }
}
