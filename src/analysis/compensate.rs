//! Searching for a section that is not the wanted one, so that its network with real op-amps gives the wanted one.
//!
//! Op-amps of finite bandwidth, and what surrounds a board, move f0, Q, gain and the null of each section. For a network of
//! given ratios there is an adjusted ideal section whose parts, with such op-amps, give what is wanted; it is found by a
//! fixed-point iteration. That section is then searched for with ideal op-amps, exactly. How far op-amps move a section
//! depends on the ratios of its parts, so the adjustment is found anew for the ratios of the best row, as long as that helps.

use num_complex::Complex64;

use super::built::{Built, BuiltPart, BuiltSection, Joint};
use super::network::{Network, Surroundings};
use super::real::{
    RealEnd, RealSection, both_ends, each_section, own_surroundings, real_ends, real_section, whole_error,
};
use crate::search::{
    Chosen, Monitor, Outcome, Problem, Row, SectionProblem, StopReason, ideal_parts, ideal_parts_near, shortlist,
};
use crate::target::{Criterion, Measure, Section, Shape, Yardstick};
use crate::units::{Kind, Value, parse_part};

/// Whether an adjusted section was found.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Corrected {
    /// Its network gives what is wanted.
    Found,
    /// With these op-amps the section oscillates, and no adjustment was found that does not.
    Unstable,
    /// None was found: the circuit cannot give the adjusted figures, or the iteration did not settle.
    NotFound,
}

/// How one section is adjusted. The figures of unrounded parts, on whose ratios the adjustment rests, come with it.
#[derive(Clone, Debug, PartialEq)]
pub struct Correction {
    /// The ideal section that is searched for; the wanted one where no adjustment was found.
    pub searched: Section,
    /// Whether one was found.
    pub state: Corrected,
    /// What parts of the same ratios for the wanted section become.
    pub without: RealSection,
    /// What those for the adjusted section become.
    pub with: RealSection,
    /// The same with the least and with the largest gain-bandwidth product; empty without a spread.
    pub ends: Vec<RealSection>,
    /// The unrounded parts by slot, Ω and F; slots that stay empty carry 1. `None` where no ideal parts are found at all.
    pub values: Option<Vec<f64>>,
}

/// A row as it is built, with real op-amps, against the wanted sections.
#[derive(Clone, Debug, PartialEq)]
pub struct BuiltRow {
    /// The sections, each by itself.
    pub sections: Vec<RealSection>,
    /// The error of the whole board, in the unit of the measure (of the weighted measure: dB), and where, rad/s; `None` where
    /// a section is not known to be stable.
    pub error: Option<(f64, f64)>,
    /// The same at both ends of the spread.
    pub ends: Vec<RealEnd>,
}

/// A shortlist whose rows hit the wanted sections with real op-amps.
#[derive(Clone, Debug)]
pub struct Compensated {
    /// What was searched: the adjusted sections.
    pub problem: Problem,
    /// What was found. Its errors are those of ideal op-amps against the adjusted sections.
    pub outcome: Outcome,
    /// How each section was adjusted.
    pub corrections: Vec<Correction>,
    /// Each row as it is built.
    pub rows: Vec<BuiltRow>,
    /// The outcome's ideal parts, built.
    pub ideal: Option<BuiltRow>,
    /// The outcome's nearest values, built.
    pub nearest: Option<BuiltRow>,
    /// Index of the row with the fewest part numbers whose built error is within the wanted one; under the weighted measure,
    /// whose wanted error is no number of decibels, of that whose error with ideal op-amps is.
    pub marked: Option<usize>,
    /// Index of the row with the least built error.
    pub best: Option<usize>,
    /// How many searches were made, each for other ratios of the parts.
    pub searches: usize,
    /// Why a later one of them was stopped and is not counted, where one was.
    pub stopped: Option<StopReason>,
}

/// How many searches are made at most.
const SEARCHES: usize = 8;

/// Corrections that differ by less, relative, are not searched for twice.
const ALIKE: f64 = 1e-4;

/// Searches for sections adjusted so that the built board gives those of the problem, with op-amps and surroundings
/// `around`, whose gain-bandwidth product may be off by `spread`, relative.
///
/// The first search is for the ratios of the ideal parts, each further one for those of a row found before, the row with the
/// least error as built first, as long as they ask for another correction. The best search is kept: that with the fewest
/// part numbers within the wanted error as built, then with the least error.
pub fn compensated(problem: &Problem, around: &Surroundings, spread: f64, monitor: &dyn Monitor) -> Compensated {
    let first: Vec<Option<Vec<f64>>> = problem.sections.iter().map(ideal_parts).collect();
    let adjust = |starts: &[Option<Vec<f64>>]| adjusted(problem, around, spread, starts);
    let mut tried = vec![adjust(&first)];
    let mut best = searched(problem, around, spread, tried[0].clone(), monitor);
    let mut ahead = rows_to_try(problem, &best);
    while tried.len() < SEARCHES && best.outcome.stopped.is_none() && !ahead.is_empty() {
        let corrections = adjust(&ahead.remove(0));
        if tried.iter().any(|known| are_alike(known, &corrections)) {
            continue;
        }
        let found = searched(problem, around, spread, corrections.clone(), monitor);
        if let Some(reason @ (StopReason::TimeLimit | StopReason::Interrupted)) = found.outcome.stopped {
            best.stopped = Some(reason);
            break;
        }
        tried.push(corrections);
        if found.outcome.stopped.is_some() {
            continue;
        }
        if rank(&found) < rank(&best) {
            ahead.splice(0..0, rows_to_try(problem, &found));
            best = found;
        }
    }
    best.searches = tried.len();
    best
}

/// The ratios of the rows of a search, those with the least error as built first.
fn rows_to_try(problem: &Problem, found: &Compensated) -> Vec<Vec<Option<Vec<f64>>>> {
    let error = |row: &BuiltRow| row.error.map_or(f64::INFINITY, |(error, _)| error);
    let mut rows: Vec<(&Row, &BuiltRow)> = found.outcome.rows.iter().zip(&found.rows).collect();
    rows.sort_by(|a, b| error(a.1).total_cmp(&error(b.1)));
    rows.into_iter().map(|(row, _)| ratios(problem, row)).collect()
}

/// Whether two corrections ask for the same sections, but for what does not matter.
fn are_alike(a: &[Correction], b: &[Correction]) -> bool {
    let near = |x: f64, y: f64| (x / y - 1.0).abs() < ALIKE;
    let same = |(a, b): (&Correction, &Correction)| {
        let of_q = a.searched.q.zip(b.searched.q).is_none_or(|(a, b)| near(a, b));
        near(a.searched.w0, b.searched.w0) && of_q
    };
    a.iter().zip(b).all(same)
}

/// How each section has to be adjusted for the ratios of `starts`.
fn adjusted(problem: &Problem, around: &Surroundings, spread: f64, starts: &[Option<Vec<f64>>]) -> Vec<Correction> {
    let count = problem.sections.len();
    let one = |(k, (section, start)): (usize, (&SectionProblem, &Option<Vec<f64>>))| {
        let own = own_surroundings(around, k, count);
        correct(section, &own, spread, problem.criterion.ignore_gain, start.as_deref())
    };
    problem.sections.iter().zip(starts).enumerate().map(one).collect()
}

/// By what one search is better than another: the part numbers of the marked row, then the least error; errors in steps of
/// a millionth, so that rounding decides nothing.
fn rank(found: &Compensated) -> (bool, Option<usize>, u64) {
    let row = found.marked.and_then(|row| found.outcome.rows.get(row));
    let least = found.best.and_then(|row| found.rows.get(row)?.error);
    let steps = least.map_or(u64::MAX, |(error, _)| (error * 1e6) as u64);
    (row.is_none(), row.and_then(|row| row.part_numbers), steps)
}

/// The values of a row by slot, one list a section.
fn ratios(problem: &Problem, row: &Row) -> Vec<Option<Vec<f64>>> {
    let values = |(section, chosen): (&SectionProblem, &Chosen)| {
        let mut values = vec![1.0; section.circuit.slots.len()];
        chosen.parts.iter().for_each(|part| values[part.slot] = part.ideal);
        Some(values)
    };
    problem.sections.iter().zip(&row.sections).map(values).collect()
}

/// One search, for sections so adjusted.
fn searched(
    problem: &Problem,
    around: &Surroundings,
    spread: f64,
    corrections: Vec<Correction>,
    monitor: &dyn Monitor,
) -> Compensated {
    let targets: Vec<Section> = problem.sections.iter().map(|section| section.target.clone()).collect();
    let mut adjusted = problem.clone();
    // The band is that of what is wanted.
    adjusted.criterion.band = Some(problem.criterion.band_for(&targets));
    for (section, correction) in adjusted.sections.iter_mut().zip(&corrections) {
        section.target = correction.searched.clone();
    }
    let outcome = shortlist(&adjusted, monitor);
    let criterion = Criterion {
        measure: match adjusted.criterion.measure {
            Measure::Weighted(_) => Measure::Decibel,
            measure => measure,
        },
        ..adjusted.criterion
    };
    let yardstick = Yardstick::new(&targets, criterion);
    let built = |row: &Row| {
        let sections = problem.sections.iter().zip(ratios(problem, row));
        let sections = sections.filter_map(|(section, values)| built_section(section, &values?)).collect();
        let built = Built { title: problem.title.clone(), criterion, sections };
        let sections = each_section(&built, around);
        let error = whole_error(&built, around, &sections, &yardstick);
        BuiltRow { sections, error, ends: real_ends(&built, around, spread, &yardstick) }
    };
    let rows: Vec<BuiltRow> = outcome.rows.iter().map(built).collect();
    let error = |row: usize| rows[row].error.map_or(f64::INFINITY, |(error, _)| error);
    let stable = || (0..rows.len()).filter(|&row| rows[row].error.is_some());
    let best = stable().min_by(|&a, &b| error(a).total_cmp(&error(b)));
    let within = stable().filter(|&row| error(row) <= problem.goals.wanted_error);
    let marked = match adjusted.criterion.measure {
        // What is wanted is no number of decibels.
        Measure::Weighted(_) => outcome.marked.filter(|&row| rows[row].error.is_some()),
        _ => within.min_by(|&a, &b| {
            let parts = |row: usize| (outcome.rows[row].part_numbers, outcome.rows[row].placed_parts);
            parts(a).cmp(&parts(b)).then(error(a).total_cmp(&error(b)))
        }),
    };
    let (ideal, nearest) = (outcome.ideal.as_ref().map(built), outcome.nearest.as_ref().map(built));
    Compensated {
        problem: adjusted,
        outcome,
        corrections,
        rows,
        ideal,
        nearest,
        marked,
        best,
        searches: 1,
        stopped: None,
    }
}

/// A section with these values by slot, to twelve digits.
fn built_section(problem: &SectionProblem, values: &[f64]) -> Option<BuiltSection> {
    let part = |slot: usize| {
        let kind = problem.circuit.slots[slot].kind;
        let value = twelve_digits(values[slot], kind)?;
        Some(BuiltPart { slot, kind, value, pieces: vec![value.into()], joint: Joint::Sum })
    };
    let parts = problem.output().filled(&problem.circuit).map(part).collect::<Option<_>>()?;
    let (target, circuit) = (problem.target.clone(), problem.circuit.clone());
    Some(BuiltSection { target, circuit, output: problem.output, parts })
}

fn twelve_digits(value: f64, kind: Kind) -> Option<Value> {
    parse_part(&format!("{value:.11e}"), kind).ok()
}

/// Finds the section that has to be searched for, so that `around` makes the wanted one of it: for a network of the ratios
/// of `start` (by slot), moved no further than the section needs.
///
/// f0 is corrected by its ratio and Q by the difference of 1/Q, which is exact where op-amps only add to the damping; the
/// gain at DC, or for shapes without a gain there at f0; the null of a notch by its ratio. What the circuit fixes stays; where
/// it holds f0 and the null together, the null is what is corrected. The depth of a null and the symmetry of an all-pass are
/// what they become.
pub fn correct(
    problem: &SectionProblem,
    around: &Surroundings,
    spread: f64,
    ignore_gain: bool,
    start: Option<&[f64]>,
) -> Correction {
    let wanted = &problem.target;
    let uncorrected = Correction {
        searched: wanted.clone(),
        state: Corrected::NotFound,
        without: RealSection::Unknown,
        with: RealSection::Unknown,
        ends: Vec::new(),
        values: None,
    };
    let Some(plain) = start.and_then(|start| ideal_parts_near(problem, ignore_gain, start)) else {
        return uncorrected;
    };
    let real = |values: &[f64], around: &Surroundings| {
        built_section(problem, values).map_or(RealSection::Unknown, |section| real_section(&section, around))
    };
    let without = real(&plain, around);
    let moves_gain = problem.circuit.effects(problem.output()).iter().any(|effect| effect.gain);
    let with_gain = moves_gain && !ignore_gain && !wanted.shape.is_all_pass();
    let iteration = Iteration { problem, around, ignore_gain, plain: &plain };
    let gains: &[bool] = if with_gain { &[true, false] } else { &[false] };
    let nulls: &[bool] = if wanted.wz.is_some() { &[false, true] } else { &[false] };
    let found = nulls
        .iter()
        .flat_map(|&null_leads| gains.iter().map(move |&with_gain| Freedom { with_gain, null_leads }))
        .find_map(|freedom| iteration.settle(freedom));
    let ends = |values: &[f64]| both_ends(around, spread).iter().map(|end| real(values, end)).collect();
    match found {
        Some((searched, values)) => Correction {
            searched,
            state: Corrected::Found,
            without,
            with: real(&values, around),
            ends: ends(&values),
            values: Some(values),
        },
        None => Correction {
            state: if without == RealSection::Unstable { Corrected::Unstable } else { Corrected::NotFound },
            without,
            with: without,
            ends: ends(&plain),
            values: Some(plain),
            ..uncorrected
        },
    }
}

/// What one adjustment starts from.
struct Iteration<'a> {
    problem: &'a SectionProblem,
    around: &'a Surroundings,
    ignore_gain: bool,
    /// Parts of the wanted section.
    plain: &'a [f64],
}

/// What can be corrected.
#[derive(Clone, Copy)]
struct Freedom {
    /// Whether the gain can.
    with_gain: bool,
    /// Whether the null takes f0 along.
    null_leads: bool,
}

/// The figures of a real network: pole frequency, Q, gain where it counts, null.
struct Found {
    w0: f64,
    q: Option<f64>,
    gain: f64,
    wz: Option<f64>,
}

impl Iteration<'_> {
    /// The adjusted section and its parts: at once, or, where that does not settle, with op-amps brought in by degrees.
    fn settle(&self, freedom: Freedom) -> Option<(Section, Vec<f64>)> {
        const DEGREES: u32 = 10;
        let start = || (self.problem.target.clone(), self.plain.to_vec());
        self.follow(start(), 1.0, freedom).or_else(|| {
            (1..=DEGREES)
                .try_fold(start(), |from, degree| self.follow(from, f64::from(degree) / f64::from(DEGREES), freedom))
        })
    }

    /// From an adjustment nearby to that for a share of the surroundings.
    fn follow(&self, from: (Section, Vec<f64>), share: f64, freedom: Freedom) -> Option<(Section, Vec<f64>)> {
        const ROUNDS: usize = 60;
        const CLOSE: f64 = 1e-9;
        let around = self.around.in_part(share);
        let wanted = &self.problem.target;
        let (mut searched, mut values) = from;
        for _ in 0..ROUNDS {
            let adjusted = SectionProblem { target: searched.clone(), ..self.problem.clone() };
            values = ideal_parts_near(&adjusted, self.ignore_gain, &values)?;
            let found = self.figures(&values, &around)?;
            let mut next = searched.clone();
            next.w0 *= wanted.w0 / found.w0;
            next.q = match (searched.q, wanted.q, found.q) {
                (Some(searched), Some(wanted), Some(found)) => {
                    Some(1.0 / (1.0 / searched + 1.0 / wanted - 1.0 / found))
                }
                (searched, ..) => searched,
            };
            next.wz = match (searched.wz, wanted.wz, found.wz) {
                (Some(searched), Some(wanted), Some(found)) => Some(searched * wanted / found),
                (searched, ..) => searched,
            };
            if let (true, Some(wz), Some(before)) = (freedom.null_leads, next.wz, searched.wz) {
                next.w0 = searched.w0 * wz / before;
            }
            if freedom.with_gain {
                next.gain *= self.wanted_gain() / found.gain;
            }
            let relative = |a: f64, b: f64| (a / b - 1.0).abs();
            let of = |a: Option<f64>, b: Option<f64>| a.zip(b).map_or(0.0, |(a, b)| relative(a, b));
            let moved = relative(next.w0, searched.w0)
                .max(of(next.q, searched.q))
                .max(of(next.wz, searched.wz))
                .max(relative(next.gain, searched.gain));
            if moved < CLOSE {
                return Some((searched, values));
            }
            let Section { name, shape, w0, q, gain, wz } = next;
            searched = Section::new(name, shape, w0, q, gain, wz).ok()?;
        }
        None
    }

    /// Where the gain is looked at, rad/s: near DC, or at f0 where the shape has no gain at DC.
    fn place_of_gain(&self) -> f64 {
        let target = &self.problem.target;
        match target.shape {
            Shape::HighPass | Shape::BandPass | Shape::FirstOrderHighPass => target.w0,
            Shape::Notch if target.wz.is_some_and(|wz| wz < target.w0) => target.w0,
            _ => 1e-6 * target.w0,
        }
    }

    fn wanted_gain(&self) -> f64 {
        self.problem.target.ideal().value(self.place_of_gain()).norm()
    }

    fn figures(&self, values: &[f64], around: &Surroundings) -> Option<Found> {
        let section = built_section(self.problem, values)?;
        let RealSection::Stable { w0, q, .. } = real_section(&section, around) else { return None };
        let network = Network::new(&[&section], around);
        let (h, _) = network.response(self.place_of_gain())?;
        let wz = match self.problem.target.wz {
            Some(wz) => Some(network.zero_near(Complex64::new(0.0, wz))?.norm()),
            None => None,
        };
        Some(Found { w0, q, gain: h.norm(), wz })
    }
}

impl Correction {
    /// By how much f0 and Q of what is searched for differ from what is wanted, relative.
    pub fn shifts(&self, wanted: &Section) -> (f64, Option<f64>) {
        let of_q = self.searched.q.zip(wanted.q).map(|(searched, wanted)| searched / wanted - 1.0);
        (self.searched.w0 / wanted.w0 - 1.0, of_q)
    }
}

/// By how much f0 and Q of a built section miss what is wanted, relative; `None` where it is not known to be stable.
pub fn miss(found: &RealSection, wanted: &Section) -> Option<(f64, Option<f64>)> {
    let RealSection::Stable { w0, q, .. } = found else { return None };
    Some((w0 / wanted.w0 - 1.0, q.zip(wanted.q).map(|(q, wanted)| q / wanted - 1.0)))
}
