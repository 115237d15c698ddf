//! The share of boards that keep a mask, by drawing boards until it is known well enough.

use rayon::prelude::*;

use super::built::Built;
use super::interval::clopper_pearson;
use super::mask::{Gauge, Scratch};
use super::tolerance::{Boards, Draw, Tolerances};
use crate::target::Biquad;

/// How boards are drawn.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Sampling {
    /// From which stream of numbers.
    pub seed: u64,
    /// How many boards at most; at least one.
    pub boards: u64,
    /// No more are drawn once the interval is at most this wide to either side of its middle; 0 draws all.
    pub half_width: f64,
    /// The share of experiments in which the interval holds the true yield.
    pub confidence: f64,
}

impl Default for Sampling {
    fn default() -> Self {
        Sampling { seed: 1, boards: 100_000, half_width: 0.005, confidence: 0.95 }
    }
}

/// The share of boards that keep a mask.
#[derive(Clone, Debug, PartialEq)]
pub struct Yield {
    /// How many boards were drawn.
    pub boards: u64,
    /// How many of them keep all limits.
    pub passed: u64,
    /// The exact interval for the true share, see [`clopper_pearson`].
    pub interval: (f64, f64),
    /// How many boards break each limit, in the order of the gauge.
    pub broken: Vec<u64>,
}

impl Yield {
    /// The share found.
    pub fn share(&self) -> f64 {
        self.passed as f64 / self.boards as f64
    }
}

/// Boards that are drawn from one stream: few enough that threads share the work, many enough that a jump costs nothing.
const BLOCK: u64 = 1024;

/// Blocks between two looks at the interval. Fixed, so that the result does not depend on the number of threads.
const ROUND: usize = 8;

/// Estimates the yield.
///
/// Boards are drawn in blocks, each from its own stretch of one stream of numbers, and counted block by block: the result
/// is the same for any number of threads. After every eight blocks it is looked whether the interval is narrow enough.
pub fn estimate(built: &Built, tolerances: &Tolerances, gauge: &Gauge, sampling: &Sampling) -> Yield {
    counted(built, tolerances, sampling, gauge.len(), &|board, scratch, broken| gauge.passes(board, scratch, broken))
}

/// Whether a board passes; marks each limit that it breaks.
type Judge<'a> = dyn Fn(&[Biquad], &mut Scratch, &mut [bool]) -> bool + Sync + 'a;

/// The same for whatever a board is judged by, which has so many limits.
pub(super) fn counted(
    built: &Built,
    tolerances: &Tolerances,
    sampling: &Sampling,
    limits: usize,
    passes: &Judge,
) -> Yield {
    let boards = Boards::new(built, tolerances);
    let mut found = Yield { boards: 0, passed: 0, interval: (0.0, 1.0), broken: vec![0; limits] };
    let mut stream = Draw::new(sampling.seed, tolerances.distribution);
    while found.boards < sampling.boards {
        let mut blocks = Vec::new();
        let mut left = sampling.boards - found.boards;
        while left > 0 && blocks.len() < ROUND {
            let count = left.min(BLOCK);
            blocks.push((stream.clone(), count));
            stream = stream.next_block();
            left -= count;
        }
        let counted: Vec<(u64, Vec<u64>)> =
            blocks.into_par_iter().map(|(draw, count)| block(boards.clone(), draw, count, limits, passes)).collect();
        for (passed, broken) in counted {
            found.passed += passed;
            found.broken.iter_mut().zip(broken).for_each(|(sum, more)| *sum += more);
        }
        found.boards = sampling.boards - left;
        found.interval = clopper_pearson(found.passed, found.boards, sampling.confidence);
        if found.interval.1 - found.interval.0 <= 2.0 * sampling.half_width {
            break;
        }
    }
    found
}

/// How many boards of a block pass, and how many break each limit.
fn block(mut boards: Boards, mut draw: Draw, count: u64, limits: usize, passes: &Judge) -> (u64, Vec<u64>) {
    let (mut scratch, mut board) = (Scratch::default(), Vec::new());
    let mut broken = vec![false; limits];
    let (mut passed, mut sums) = (0, vec![0; limits]);
    for _ in 0..count {
        boards.draw(&mut draw, &mut board);
        if passes(&board, &mut scratch, &mut broken) {
            passed += 1;
        } else {
            sums.iter_mut().zip(&broken).for_each(|(sum, broken)| *sum += u64::from(*broken));
        }
    }
    (passed, sums)
}
