//! What tighter parts would buy: the yield of the best row for each step of tolerances.

use rayon::prelude::*;

use super::built::Built;
use super::interval::clopper_pearson;
use super::mask::{Gauge, Mask, Scratch};
use super::tolerance::{Boards, Distribution, Draw, Tolerances};
use super::within::Within;
use super::yields::{Sampling, Yield, counted, estimate};
use crate::target::{Biquad, Criterion, Section};

/// Tolerances in which resistors are sold, the coarsest first, as ratios; letters J to B of IEC 60062.
pub const RESISTOR_STEPS: [f64; 5] = [0.05, 0.02, 0.01, 0.005, 0.001];

/// Tolerances in which capacitors are sold, the coarsest first, as ratios; letters M to F of IEC 60062.
pub const CAPACITOR_STEPS: [f64; 5] = [0.2, 0.1, 0.05, 0.02, 0.01];

/// What a board has to keep.
#[derive(Clone, Debug)]
pub enum Wanted {
    /// All limits of a mask.
    Mask(Gauge),
    /// An error against the target.
    Within(Within),
}

impl Wanted {
    /// All limits of a mask, by the measure of a board.
    pub fn mask(mask: &Mask, built: &Built) -> Wanted {
        Wanted::Mask(Gauge::new(mask, &built.targets(), built.criterion))
    }

    /// An error of at most `limit` by the measure of a board; under the weighted measure the response error, dB.
    pub fn within(limit: f64, built: &Built) -> Wanted {
        Wanted::within_of(limit, &built.targets(), built.criterion)
    }

    /// The same for any board of these sections.
    pub fn within_of(limit: f64, targets: &[Section], criterion: Criterion) -> Wanted {
        Wanted::Within(Within::new(limit, targets, criterion))
    }

    /// Whether the ideal sections themselves keep it.
    pub fn target_keeps(&self, targets: &[Section]) -> bool {
        self.keeps(&targets.iter().map(Section::ideal).collect::<Vec<_>>(), &mut Scratch::default())
    }

    /// Whether the transfer functions of a board's sections keep it.
    pub fn keeps(&self, board: &[Biquad], scratch: &mut Scratch) -> bool {
        match self {
            Wanted::Mask(gauge) => gauge.passes(board, scratch, &mut vec![false; gauge.len()]),
            Wanted::Within(within) => within.keeps(board, scratch.powers()),
        }
    }

    /// The share of boards that keep it.
    pub fn estimate(&self, built: &Built, tolerances: &Tolerances, sampling: &Sampling) -> Yield {
        match self {
            Wanted::Mask(gauge) => estimate(built, tolerances, gauge, sampling),
            Wanted::Within(within) => counted(built, tolerances, sampling, 1, &|board, scratch, broken| {
                let kept = within.keeps(board, scratch.powers());
                broken.fill(!kept);
                kept
            }),
        }
    }
}

/// The tolerances that are compared.
#[derive(Clone, Debug, PartialEq)]
pub struct Steps {
    /// Of resistors, the coarsest first, as ratios.
    pub resistors: Vec<f64>,
    /// Of capacitors, the coarsest first, as ratios.
    pub capacitors: Vec<f64>,
    /// How the errors are spread.
    pub distribution: Distribution,
    /// See [`Tolerances::reel_share`].
    pub reel_share: f64,
}

/// What one step gives.
#[derive(Clone, Debug, PartialEq)]
pub struct Step {
    /// Tolerance of the resistors.
    pub resistors: f64,
    /// Tolerance of the capacitors.
    pub capacitors: f64,
    /// Index of the row with the highest yield; of equal ones the first.
    pub row: usize,
    /// How many boards of it were drawn.
    pub boards: u64,
    /// How many of them keep what is wanted.
    pub passed: u64,
    /// The exact interval for the true share, see [`clopper_pearson`].
    pub interval: (f64, f64),
}

/// Boards between two looks at the interval.
const ROUND: u64 = 1024;

/// The yield of the best row for each step, all capacitors for the first tolerance of resistors, then for the next.
///
/// Every unmeasured part has the tolerance of its step, whatever a stock list says. All rows and all steps are drawn from the
/// same stream of numbers. After every round a row whose interval lies wholly below that of the best is left; the drawing
/// ends once the best row's interval is narrow enough. The same for any number of threads. `rows` are boards of one list, at
/// least one; without a row there is no step.
pub fn tighten(rows: &[Built], wanted: &Wanted, steps: &Steps, sampling: &Sampling) -> Vec<Step> {
    let mut rows = rows.to_vec();
    let parts = rows.iter_mut().flat_map(|built| &mut built.sections).flat_map(|section| &mut section.parts);
    parts.flat_map(|part| &mut part.pieces).for_each(|piece| piece.tolerance = None);
    let pairs = steps.resistors.iter().flat_map(|r| steps.capacitors.iter().map(move |c| (*r, *c)));
    let tolerances = pairs.map(|(resistors, capacitors)| {
        let Steps { distribution, reel_share, .. } = *steps;
        Tolerances { resistors, capacitors, distribution, reel_share }
    });
    let tolerances: Vec<Tolerances> = tolerances.collect();
    tolerances.into_par_iter().filter_map(|tolerances| step(&rows, wanted, &tolerances, sampling)).collect()
}

/// A row that may still be the best.
struct Candidate {
    row: usize,
    boards: Boards,
    passed: u64,
    interval: (f64, f64),
}

fn step(rows: &[Built], wanted: &Wanted, tolerances: &Tolerances, sampling: &Sampling) -> Option<Step> {
    let mut candidates: Vec<Candidate> = (rows.iter().enumerate())
        .map(|(row, built)| Candidate {
            row,
            boards: Boards::new(built, tolerances),
            passed: 0,
            interval: (0.0, 1.0),
        })
        .collect();
    let mut stream = Draw::new(sampling.seed, tolerances.distribution);
    let mut drawn = 0;
    loop {
        let count = ROUND.min(sampling.boards - drawn);
        drawn += count;
        candidates.par_iter_mut().for_each(|candidate| {
            let (mut numbers, mut board, mut scratch) = (stream.clone(), Vec::new(), Scratch::default());
            for _ in 0..count {
                candidate.boards.draw(&mut numbers, &mut board);
                candidate.passed += u64::from(wanted.keeps(&board, &mut scratch));
            }
            candidate.interval = clopper_pearson(candidate.passed, drawn, sampling.confidence);
        });
        stream = stream.next_block();
        // Of equal ones the first: only a larger number takes its place.
        let best = candidates.iter().reduce(|best, other| if other.passed > best.passed { other } else { best })?;
        let (low, high) = best.interval;
        if drawn >= sampling.boards || high - low <= 2.0 * sampling.half_width {
            let Tolerances { resistors, capacitors, .. } = *tolerances;
            let &Candidate { row, passed, interval, .. } = best;
            return Some(Step { resistors, capacitors, row, boards: drawn, passed, interval });
        }
        candidates.retain(|candidate| candidate.interval.1 >= low);
    }
}

/// Which steps reach a yield for sure, by the low end of their interval, while no step does that is coarser in one kind and
/// not tighter in the other.
pub fn coarsest(steps: &[Step], wanted: f64) -> Vec<bool> {
    let reaches = |step: &&Step| step.interval.0 >= wanted;
    let is_coarser = |other: &Step, step: &Step| {
        let (r, c) = (other.resistors - step.resistors, other.capacitors - step.capacitors);
        r >= 0.0 && c >= 0.0 && r + c > 0.0
    };
    let marked = |step: &Step| reaches(&step) && !steps.iter().filter(reaches).any(|other| is_coarser(other, step));
    steps.iter().map(marked).collect()
}
