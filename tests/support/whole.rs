//! Every board of several sections, one after the other.
//!
//! Nothing of the search is used here. From the requirements:
//! - a board is one choice for every group of equal slots of every section, slots without effect on the response included;
//! - part numbers are counted over the whole board, bodies too; what of the stock does not suffice for all bodies of all
//!   boards must be bought;
//! - the error is that of the whole cascade; a board is allowed if each section by itself, over the band of the whole,
//!   misses its own target by no more than the board's error or its own limit, whichever is larger; a section pinned to a
//!   limit stays within that;
//! - of all allowed boards that take no more part numbers, parts to buy and bodies, the one of the smallest error must be
//!   matched or beaten, up to the number of part numbers where the best error falls below the resolution.

#![allow(dead_code, reason = "each test program uses its own part of this module")]

use std::collections::{BTreeMap, BTreeSet};

use roundwell::parts::{Buying, Choice};
use roundwell::search::{
    Chosen, Goals, Outcome, Problem, Proof, Rank, Row, SectionProblem, StopReason, Unwatched, shortlist,
};
use roundwell::target::{Biquad, Criterion, Measure, Section, Yardstick};
use roundwell::units::Kind;
use roundwell::verify::verify;

use crate::drawer::{check_drawer_row, groups, in_words};
use crate::support::problem;

/// Errors closer than this count as equal: a step of 1e-7, and what rounding may add.
pub const STEP: f64 = 1.5e-7;

/// The most different choices on all shelves.
const IDS: usize = 40;

/// What a board takes: part numbers, part numbers to buy, bodies, and where rows are ranked by it the cost in millionths.
pub type Takes = [usize; 4];

pub fn no_more(a: &Takes, b: &Takes) -> bool {
    a.iter().zip(b).all(|(a, b)| a <= b)
}

/// An error in steps.
fn steps(error: f64) -> u64 {
    (error / 1e-7).round() as u64
}

/// One set of a section.
#[derive(Clone)]
pub struct Set {
    h: Biquad,
    /// How far it misses the section's own target.
    pub own: f64,
    /// The same where it is more than the section may miss it by anyhow, otherwise 0.
    over: f64,
    uses: [u8; IDS],
    numbers: u64,
    words: String,
}

/// A board that is the best of its sort.
#[derive(Clone, Debug)]
pub struct Best {
    pub error: f64,
    /// How far each section misses its own target.
    pub own: Vec<f64>,
    pub words: String,
}

/// All boards of a problem.
pub struct Whole<'a> {
    problem: &'a Problem,
    yardstick: Yardstick,
    owns: Vec<Yardstick>,
    ids: Vec<(Kind, Choice)>,
    /// The bit of each choice's part number.
    bits: Vec<u64>,
    sections: Vec<Vec<Set>>,
    /// Errors above this are not looked at.
    reach: f64,
    /// Boards that were gone through.
    pub boards: f64,
    /// The best allowed board by what it takes; those that another beats are left out.
    pub best: BTreeMap<Takes, Best>,
}

/// The transfer function of a section with these values in its slots.
fn biquad(section: &SectionProblem, slots: &[f64]) -> Biquad {
    let (n, d) = section.output().transfer.coefficients(slots);
    let fixed = |list: &[f64]| [0, 1, 2].map(|k| list.get(k).copied().unwrap_or(0.0));
    Biquad { num: fixed(&n), den: fixed(&d) }
}

impl<'a> Whole<'a> {
    /// Makes the sets of all sections.
    pub fn new(problem: &'a Problem) -> Whole<'a> {
        let targets: Vec<Section> = problem.sections.iter().map(|s| s.target.clone()).collect();
        let yardstick = Yardstick::new(&targets, problem.criterion);
        let criterion = Criterion { band: Some(yardstick.band()), ..problem.criterion };
        let owns = targets.iter().map(|t| Yardstick::new(std::slice::from_ref(t), criterion)).collect();
        let mut whole = Whole {
            problem,
            yardstick,
            owns,
            ids: Vec::new(),
            bits: Vec::new(),
            sections: Vec::new(),
            reach: 1.5 * problem.goals.error_limit,
            boards: 1.0,
            best: BTreeMap::new(),
        };
        for index in 0..problem.sections.len() {
            let sets = whole.sets(index);
            whole.boards *= sets.len() as f64;
            whole.sections.push(sets);
        }
        whole
    }

    /// Makes all sets and goes through all boards.
    pub fn run(problem: &'a Problem) -> Whole<'a> {
        let mut whole = Whole::new(problem);
        assert!(whole.boards <= 1e6, "{} boards", whole.boards);
        let mut best = BTreeMap::new();
        whole.each_board(&mut |takes, over, chosen| {
            let within = best.iter().filter(|(t, _): &(&Takes, &Best)| no_more(t, &takes));
            let limit = within.map(|(_, b)| b.error).fold(whole.reach, f64::min);
            if over > limit {
                return;
            }
            let hs: Vec<Biquad> = chosen.iter().map(|set| set.h).collect();
            let Some(found) = whole.yardstick.within(&hs, limit) else { return };
            if over <= found.error + 1e-9 && found.error < limit - 1e-9 {
                let own = chosen.iter().map(|set| set.own).collect();
                let words = chosen.iter().map(|set| set.words.as_str()).collect::<Vec<_>>().join("; ");
                best.insert(takes, Best { error: found.error, own, words });
            }
        });
        let beaten = |takes: &Takes, error: f64| {
            best.iter().any(|(t, b)| t != takes && no_more(t, takes) && steps(b.error) <= steps(error))
        };
        whole.best = best.iter().filter(|(t, b)| !beaten(t, b.error)).map(|(t, b)| (*t, b.clone())).collect();
        whole
    }

    fn id(&mut self, kind: Kind, choice: Choice) -> usize {
        if let Some(known) = self.ids.iter().position(|id| *id == (kind, choice)) {
            return known;
        }
        let supply = &self.problem.supply;
        let number = |(kind, choice): (Kind, Choice)| supply.part_number(kind, choice);
        let same = self.ids.iter().position(|id| number(*id) == number((kind, choice)));
        self.bits.push(same.map_or(1 << self.ids.len(), |i| self.bits[i]));
        self.ids.push((kind, choice));
        assert!(self.ids.len() <= IDS, "too many choices");
        self.ids.len() - 1
    }

    fn sets(&mut self, index: usize) -> Vec<Set> {
        let section = &self.problem.sections[index];
        let all = groups(section);
        let mut ways: Vec<Vec<usize>> = vec![Vec::new()];
        for group in &all {
            let further = ways.iter().flat_map(|way| (0..group.held.len()).map(move |i| [&way[..], &[i]].concat()));
            ways = further.collect();
            assert!(ways.len() <= 200_000, "{} ways to fill a section", ways.len());
        }
        let goals = &self.problem.goals;
        let mut seen = BTreeSet::new();
        let mut sets = Vec::new();
        for way in ways {
            let held = || all.iter().zip(&way).map(|(group, &i)| (group, &group.held[i]));
            let pairs: usize = held().filter(|(_, h)| h.joint.is_some()).map(|(g, _)| g.slots.len()).sum();
            let sets_level = || held().filter(|(g, _)| g.kind == Kind::Resistor && !g.silent);
            let resistors: usize = sets_level().map(|(g, _)| g.slots.len()).sum();
            let logs: f64 = sets_level().map(|(g, h)| h.value.ln() * g.slots.len() as f64).sum();
            let level = (logs / resistors as f64).exp();
            let in_range = resistors == 0 || goals.impedance.is_none_or(|(from, to)| (from..=to).contains(&level));
            if pairs > section.pairs.most || !in_range {
                continue;
            }
            let mut slots = vec![1.0; section.circuit.slots.len()];
            held().for_each(|(g, h)| g.slots.iter().for_each(|&slot| slots[slot] = h.value));
            let h = biquad(section, &slots);
            if !h.is_stable(section.target.shape.order()) {
                continue;
            }
            let (mut uses, mut numbers) = ([0; IDS], 0);
            for (group, held) in held() {
                for piece in &held.pieces {
                    let id = self.id(group.kind, *piece);
                    uses[id] += group.slots.len() as u8;
                    numbers |= self.bits[id];
                }
            }
            // Slots that may change places give the same set twice.
            let figures = section.target.figures_of(&h);
            let response = format!(
                "{:.10e} {:.10e} {:.10e} {:.10e}",
                figures.w0,
                figures.q.unwrap_or(0.0),
                figures.gain,
                figures.wz.unwrap_or(0.0)
            );
            if !seen.insert((uses, response)) {
                continue;
            }
            let own = self.owns[index].deviation(&[h]).error;
            let may = section.own_error.unwrap_or(goals.own_error.unwrap_or(goals.wanted_error));
            if section.own_error.is_some() && own > may + 1e-9 {
                continue;
            }
            let over = if own <= may + 1e-9 { 0.0 } else { own };
            let word = |(g, h): (&crate::drawer::Group, &crate::drawer::Held)| {
                let names: Vec<&str> = g.slots.iter().map(|&s| section.circuit.slots[s].name.as_str()).collect();
                let pieces: Vec<String> = h.pieces.iter().map(|piece| piece.value.to_string()).collect();
                format!("{}={}", names.join("="), pieces.join(if h.joint.is_some() { "&" } else { "" }))
            };
            let words = held().map(word).collect::<Vec<_>>().join(" ");
            sets.push(Set { h, own, over, uses, numbers, words });
        }
        // Good sets first make everything shorter.
        sets.sort_by(|a, b| a.own.total_cmp(&b.own));
        sets
    }

    /// What a row says that it takes.
    fn said(&self, row: &Row) -> Takes {
        let cost = row.cost.filter(|_| self.problem.goals.rank == Rank::Cost);
        [row.part_numbers.unwrap_or(0), row.to_buy.unwrap_or(0), row.placed_parts, cost.unwrap_or(0) as usize]
    }

    /// What a board takes; `None` where the stock or the job does not allow it.
    fn takes(&self, uses: &[u8; IDS], numbers: u64) -> Option<Takes> {
        let supply = &self.problem.supply;
        let mut bought = 0u64;
        if supply.has_stock() {
            // A measured part is there once, and is never bought.
            let measured = |choice: &Choice| supply.lot_of(*choice).filter(|lot| lot.measured.is_some());
            let spent = |(i, (_, choice)): (usize, &(Kind, Choice))| {
                measured(choice).is_some_and(|lot| uses[i] > 1 || uses[i] == 1 && lot.available == Some(0))
            };
            if self.ids.iter().enumerate().any(spent) {
                return None;
            }
            for (i, (_, choice)) in self.ids.iter().enumerate().filter(|(i, _)| uses[*i] > 0) {
                let there = choice.lot.map(|id| supply.lot(id).available);
                let need = u64::from(uses[i]) * supply.boards + supply.spares;
                let enough =
                    measured(choice).is_some() || there.is_some_and(|there| there.is_none_or(|there| need <= there));
                if !enough {
                    bought |= self.bits[i];
                }
            }
        }
        let to_buy = bought.count_ones() as usize;
        let most = match supply.buying {
            Buying::Forbidden => 0,
            Buying::AtMost(most) => most,
            Buying::Allowed => usize::MAX,
        };
        let count = numbers.count_ones() as usize;
        let allowed = (!supply.has_stock() || to_buy <= most)
            && self.problem.goals.max_part_numbers.is_none_or(|most| count <= most);
        let price = |(i, (_, choice)): (usize, &(Kind, Choice))| {
            usize::from(uses[i]) * supply.price(*choice).map_or(0, |price| price as usize)
        };
        let by_cost = self.problem.goals.rank == Rank::Cost;
        let cost = if by_cost { self.ids.iter().enumerate().map(price).sum() } else { 0 };
        allowed.then(|| [count, to_buy, uses.iter().map(|&n| usize::from(n)).sum(), cost])
    }

    /// Calls with each board that can be built: what it takes, the largest miss of a section beyond its own limit, its sets.
    fn each_board(&self, call: &mut dyn FnMut(Takes, f64, &[&Set])) {
        fn step<'s>(
            whole: &'s Whole<'_>,
            chosen: &mut Vec<&'s Set>,
            uses: &[u8; IDS],
            numbers: u64,
            call: &mut dyn FnMut(Takes, f64, &[&Set]),
        ) {
            let Some(sets) = whole.sections.get(chosen.len()) else {
                let Some(takes) = whole.takes(uses, numbers) else { return };
                let over = chosen.iter().map(|set| set.over).fold(0.0, f64::max);
                return call(takes, over, chosen);
            };
            for set in sets {
                let mut sum = *uses;
                sum.iter_mut().zip(&set.uses).for_each(|(a, b)| *a += b);
                chosen.push(set);
                step(whole, chosen, &sum, numbers | set.numbers, call);
                chosen.pop();
            }
        }
        step(self, &mut Vec::new(), &[0; IDS], 0, call);
    }

    /// The smallest error among the allowed boards that take no more.
    pub fn least(&self, takes: &Takes) -> f64 {
        let within = self.best.iter().filter(|(t, _)| no_more(t, takes));
        within.map(|(_, b)| b.error).fold(f64::INFINITY, f64::min)
    }

    /// The smallest error among the allowed boards of at most so many part numbers.
    pub fn least_of(&self, part_numbers: usize) -> f64 {
        self.least(&[part_numbers, usize::MAX, usize::MAX, usize::MAX])
    }

    /// The smallest error below `error` of a board of at most so many part numbers whose sections miss their own targets by
    /// no more than their limits or `error`.
    fn below(&self, part_numbers: usize, error: f64) -> Option<f64> {
        let mut least: Option<f64> = None;
        self.each_board(&mut |takes, over, chosen| {
            if takes[0] > part_numbers || over > error {
                return;
            }
            let hs: Vec<Biquad> = chosen.iter().map(|set| set.h).collect();
            let limit = least.unwrap_or(error - STEP);
            if let Some(found) = self.yardstick.within(&hs, limit) {
                least = Some(found.error);
            }
        });
        least
    }

    /// The number of part numbers at which the front ends: the first whose best error is below the resolution.
    fn end(&self) -> usize {
        let fine = steps(self.problem.goals.error_resolution);
        let ends = self.best.iter().filter(|(_, b)| steps(b.error) < fine).map(|(t, _)| t[0]);
        ends.min().unwrap_or(usize::MAX)
    }

    /// What the sections of a row or a combination are made of: what they take, the error, the own misses.
    fn recount(&self, sections: &[Chosen]) -> (Option<Takes>, f64, Vec<f64>) {
        let (mut uses, mut numbers, mut hs) = ([0; IDS], 0, Vec::new());
        for (section, chosen) in self.problem.sections.iter().zip(sections) {
            let mut slots = vec![1.0; section.circuit.slots.len()];
            for part in &chosen.parts {
                slots[part.slot] = part.ideal;
                for piece in &part.pieces {
                    let id =
                        self.ids.iter().position(|id| *id == (part.kind, *piece)).expect("a choice of the shelves");
                    uses[id] += 1;
                    numbers |= self.bits[id];
                }
            }
            hs.push(biquad(section, &slots));
        }
        let own = self.owns.iter().zip(&hs).map(|(y, h)| y.deviation(&[*h]).error).collect();
        (self.takes(&uses, numbers), self.yardstick.deviation(&hs).error, own)
    }

    /// Whether all that a row says of itself holds.
    fn check_row(&self, row: &Row) -> Result<(), String> {
        let problem = self.problem;
        let (takes, error, own) = self.recount(&row.sections);
        let takes = takes.ok_or("more than the job or the stock allows")?;
        let said = self.said(row);
        if takes != said {
            return Err(format!("takes {takes:?}, {said:?} is said"));
        }
        if (error - row.deviation.error).abs() > 1e-9 * (1.0 + error) {
            return Err(format!("error {error}, {} is said", row.deviation.error));
        }
        for (section, own) in problem.sections.iter().zip(&own) {
            if section.own_error.is_some_and(|most| *own > most + 2e-9) {
                return Err(format!("a section is off by {own}, pinned to {:?}", section.own_error));
            }
        }
        let vector_without_gain = problem.criterion.measure == Measure::Vector && problem.criterion.ignore_gain;
        if !matches!(problem.criterion.measure, Measure::Weighted(_)) && !vector_without_gain {
            check_drawer_row(problem, row)?;
        }
        Ok(())
    }

    /// Whether nothing that is claimed of all boards is wrong: rows, proofs and bounds; also for a stopped search.
    pub fn check_claims(&self, label: &str, outcome: &Outcome) {
        let say = || self.say(label, outcome);
        for row in &outcome.rows {
            if let Err(what) = self.check_row(row) {
                panic!("a listed row is wrong: {what}: {}\n {}", in_words(self.problem, &row.sections), say());
            }
        }
        assert_eq!(verify(self.problem, outcome), Ok(()), "{}", say());
        let Some(together) = &outcome.together else {
            // Ranked by cost, the sections are only chosen one at a time.
            assert!(self.problem.goals.rank == Rank::Cost && outcome.rows.iter().all(|row| !row.proved), "{}", say());
            return;
        };
        self.check_proved(label, outcome, &|row| row.deviation.error <= self.problem.goals.error_limit);
        for bound in &together.bounds {
            let least = self.least_of(bound.part_numbers);
            assert!(bound.none_below <= least + STEP, "{bound:?}, there is {least}: {}", say());
        }
        let ascending = together
            .bounds
            .windows(2)
            .all(|two| two[0].part_numbers < two[1].part_numbers && two[0].none_below >= two[1].none_below - STEP);
        assert!(ascending, "bounds: {}", say());
        self.check_exchanged(label, outcome, &|row| !row.alternative);
    }

    /// Whether no allowed board beats these rows where they are said to be proved.
    pub fn check_proved(&self, label: &str, outcome: &Outcome, which: &dyn Fn(&Row) -> bool) {
        let say = || self.say(label, outcome);
        for row in outcome.rows.iter().filter(|row| row.proved && which(row)) {
            let takes = self.said(row);
            let (error, least) = (row.deviation.error, self.least(&takes));
            assert!(error <= least + STEP, "said to be proved: {takes:?} {error}, there is {least}: {}", say());
            // Also none with more bodies or more to buy, but those of rows listed before.
            let listed = |limit: f64| {
                let rows = outcome.rows.iter().filter(|other| other.part_numbers <= row.part_numbers);
                rows.map(|other| other.deviation.error).any(|error| error <= limit + STEP)
            };
            // Below the resolution that is left open.
            let fine = steps(error) < steps(self.problem.goals.error_resolution);
            if let Some(better) = self.below(takes[0], error).filter(|_| !fine) {
                assert!(listed(better), "said to be proved: {takes:?} {error}, there is {better}: {}", say());
            }
        }
    }

    /// Whether none of these rows is another with sections that are alike exchanged.
    pub fn check_exchanged(&self, label: &str, outcome: &Outcome, which: &dyn Fn(&Row) -> bool) {
        for (i, row) in outcome.rows.iter().enumerate().filter(|(_, row)| which(row)) {
            let words = in_words(self.problem, &row.sections);
            let same = |other: &Row| self.exchanged(other).contains(&words);
            assert!(!outcome.rows[..i].iter().any(same), "listed twice: {}", self.say(label, outcome));
        }
    }

    /// A row in words, in all orders of sections that are alike.
    fn exchanged(&self, row: &Row) -> Vec<String> {
        let sections = &self.problem.sections;
        let mut ways = vec![in_words(self.problem, &row.sections)];
        for a in 0..sections.len() {
            for b in a + 1..sections.len() {
                let alike = |x: &SectionProblem, y: &SectionProblem| {
                    let target = Section { name: y.target.name.clone(), ..x.target.clone() };
                    target == y.target
                        && (&x.circuit.id, x.output, &x.shelves, &x.equal)
                            == (&y.circuit.id, y.output, &y.shelves, &y.equal)
                        && (&x.pairs, x.own_error) == (&y.pairs, y.own_error)
                };
                if alike(&sections[a], &sections[b]) {
                    let mut other = row.sections.clone();
                    other.swap(a, b);
                    ways.push(in_words(self.problem, &other));
                }
            }
        }
        ways
    }

    /// Whether all that must be listed is.
    pub fn check_complete(&self, label: &str, outcome: &Outcome) {
        let say = || self.say(label, outcome);
        let goals = &self.problem.goals;
        assert_eq!(outcome.stopped, None, "{}", say());
        let fine = steps(goals.error_resolution);
        let end = self.end();
        let is_there = |takes: &Takes, error: f64| {
            outcome.rows.iter().any(|row| {
                no_more(&self.said(row), takes)
                    && (row.deviation.error <= error + STEP || steps(row.deviation.error) < fine)
            })
        };
        self.check_one_at_a_time(outcome, end, &is_there, &say);
        let Some(together) = &outcome.together else { return };
        if matches!(together.proof, Proof::Stopped { reason: StopReason::Effort, .. }) {
            // Too many boards: with alternatives from a stock a small problem may have that. What is claimed was checked.
            assert!(goals.alternatives > 0 && self.problem.supply.has_stock(), "{}", say());
            return;
        }
        assert!(matches!(together.proof, Proof::Exhaustive(_)), "{}", say());
        for (takes, best) in self.best.iter().filter(|(t, b)| t[0] <= end && b.error <= goals.error_limit) {
            assert!(is_there(takes, best.error), "not listed: {takes:?} {best:?}: {}", say());
            assert!(outcome.within_limit, "{}", say());
        }
        for row in outcome.rows.iter().filter(|row| !row.alternative && row.deviation.error <= goals.error_limit) {
            let takes = self.said(row);
            let least = self.least(&takes);
            assert!(
                row.deviation.error <= least + STEP,
                "{takes:?} {}, there is {least}: {}",
                row.deviation.error,
                say()
            );
        }
        for row in outcome.rows.iter().filter(|row| row.alternative) {
            let count = outcome.rows.iter().filter(|r| r.alternative && r.part_numbers == row.part_numbers).count();
            assert!(count <= goals.alternatives, "{}", say());
        }
        for row in outcome.rows.iter().filter(|row| !row.alternative && row.deviation.error <= goals.error_limit) {
            let mut fewer = outcome.rows.iter().filter(|other| other.part_numbers <= row.part_numbers);
            let best = fewer.all(|other| steps(other.deviation.error) >= steps(row.deviation.error));
            assert!(row.proved || !best, "all was searched, and {:?} is not proved: {}", self.said(row), say());
        }
        for bound in &together.bounds {
            let listed = outcome.rows.iter().filter(|row| row.part_numbers <= Some(bound.part_numbers));
            let least = listed.map(|row| row.deviation.error).fold(goals.error_limit, f64::min);
            assert!(
                bound.none_below >= least - STEP || steps(least) < fine,
                "all was searched, and {bound:?} stays below {least}: {}",
                say()
            );
        }
        let wanted = outcome.rows.iter().filter(|row| steps(row.deviation.error) <= steps(goals.wanted_error));
        let marked = outcome.marked.map(|i| outcome.rows[i].part_numbers);
        assert_eq!(marked, wanted.map(|row| row.part_numbers).min(), "the wrong row is marked: {}", say());
        let fewest = self.best.iter().filter(|(_, b)| b.error <= goals.wanted_error - STEP).map(|(t, _)| t[0]).min();
        assert!(fewest.is_none_or(|k| marked.flatten().is_some_and(|m| m <= k)), "{}", say());
    }

    /// Every combination of the sets of the sections' own fronts must be matched or beaten.
    fn check_one_at_a_time(
        &self,
        outcome: &Outcome,
        end: usize,
        is_there: &dyn Fn(&Takes, f64) -> bool,
        say: &dyn Fn() -> String,
    ) {
        let goals = &self.problem.goals;
        let alone = |section: &SectionProblem| {
            let criterion = Criterion { band: Some(self.yardstick.band()), ..self.problem.criterion };
            let problem = Problem { sections: vec![section.clone()], criterion, ..self.problem.clone() };
            let rows = shortlist(&problem, &Unwatched).rows;
            rows.into_iter().map(|row| row.sections[0].clone()).collect::<Vec<Chosen>>()
        };
        let mut combined: Vec<Vec<Chosen>> = vec![Vec::new()];
        for section in &self.problem.sections {
            let rows = alone(section);
            combined = combined
                .iter()
                .flat_map(|c| rows.iter().map(|row| [&c[..], std::slice::from_ref(row)].concat()))
                .collect();
        }
        for sections in combined.iter().take(2_000) {
            let (takes, error, own) = self.recount(sections);
            let Some(takes) = takes.filter(|t| t[0] <= end) else { continue };
            let keeps =
                self.problem.sections.iter().zip(&own).all(|(s, own)| s.own_error.is_none_or(|most| *own <= most));
            if keeps && error <= goals.error_limit {
                assert!(
                    outcome.within_limit && is_there(&takes, error),
                    "one at a time gives {takes:?} {error} {}: {}",
                    in_words(self.problem, sections),
                    say()
                );
            }
        }
    }

    /// Problem, brute force and outcome in words.
    fn say(&self, label: &str, outcome: &Outcome) -> String {
        let problem = self.problem;
        let mut text = format!("{label}\n {:?}\n {:?}", problem.criterion, problem.goals);
        let supply = &problem.supply;
        if supply.has_stock() {
            text += &format!("\n boards {} spares {} buying {:?}:", supply.boards, supply.spares, supply.buying);
            supply.lots().for_each(|(_, lot)| text += &format!(" {}x{:?}", lot.nominal, lot.available));
        }
        for section in &problem.sections {
            text += &format!(
                "\n {} {:?} own {:?} equal {:?} pairs {:?}",
                section.circuit.id, section.target, section.own_error, section.equal, section.pairs
            );
            for slot in section.output().filled(&section.circuit) {
                let shelf: Vec<String> =
                    section.shelves[slot].choices().iter().map(|c| c.value.to_string()).collect();
                text += &format!("\n    {}: {}", section.circuit.slots[slot].name, shelf.join(" "));
            }
        }
        text += "\n every board:";
        self.best.iter().for_each(|(takes, best)| {
            text += &format!("\n    {takes:?} {} own {:?} {}", best.error, best.own, best.words)
        });
        text += "\n listed:";
        for row in &outcome.rows {
            let said = self.said(row);
            let own = self.recount(&row.sections).2;
            let (proved, other) = (row.proved, row.alternative);
            text += &format!(
                "\n    {said:?} {} own {own:?} proved {proved} alternative {other} {}",
                row.deviation.error,
                in_words(problem, &row.sections)
            );
        }
        text += &format!(
            "\n within the limit {} stopped {:?}\n {:?}",
            outcome.within_limit, outcome.stopped, outcome.together
        );
        text
    }
}

/// A problem of several sections without a stock list; judged by the vector error if one of them is an all-pass.
pub fn board(sections: Vec<SectionProblem>, goals: Goals) -> Problem {
    let mut sections = sections.into_iter();
    let mut board = problem(sections.next().expect("a section"), goals);
    board.sections.extend(sections);
    for (section, name) in board.sections.iter_mut().zip(["A", "B", "C", "D"]) {
        section.target.name = name.into();
    }
    if board.sections.iter().any(|s| s.target.shape.is_all_pass()) {
        board.criterion.measure = Measure::Vector;
    }
    board
}

/// Searches a problem of several sections and compares with all its boards.
pub fn compare_whole(label: &str, problem: &Problem) -> Outcome {
    let whole = Whole::run(problem);
    let outcome = shortlist(problem, &Unwatched);
    whole.check_claims(label, &outcome);
    if !problem.supply.has_stock() || matches!(problem.goals.rank, Rank::ToBuy | Rank::Cost) {
        whole.check_complete(label, &outcome);
    } else {
        // Boards that buy less at a larger error are all searched only where that is what rows are ranked by.
        let goals = Goals { rank: Rank::ToBuy, ..problem.goals.clone() };
        let ranked = Problem { goals, ..problem.clone() };
        let outcome = shortlist(&ranked, &Unwatched);
        let whole = Whole { problem: &ranked, ..whole };
        whole.check_claims(label, &outcome);
        whole.check_complete(label, &outcome);
    }
    outcome
}
