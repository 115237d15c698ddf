//! An error that a board may have, made ready for being tested on very many boards.

use num_complex::Complex64;

use super::spread::response_yardstick;
use crate::target::{Biquad, Criterion, Measure, Section, Yardstick};

/// An error against the target that a board may have: the measure of a [`Yardstick`] with a limit, without the logarithms and
/// divisions that only the error itself needs.
#[derive(Clone, Debug)]
pub struct Within {
    yardstick: Yardstick,
    orders: Vec<usize>,
    limit: f64,
    test: Test,
}

/// How it is tested.
#[derive(Clone, Debug)]
enum Test {
    /// Between two powers at each frequency.
    Powers {
        /// ω², (rad/s)².
        points: Vec<f64>,
        /// The least and the largest |H|² there.
        between: Vec<(f64, f64)>,
        /// Whether any one factor may be taken out of all of them.
        free_gain: bool,
    },
    /// Within a distance of the target at each frequency.
    Distances(Vec<Distance>),
    /// By the measure itself.
    Measure,
}

/// The target at one frequency.
#[derive(Clone, Copy, Debug)]
struct Distance {
    w: f64,
    ideal: Complex64,
    /// The square of how far H may be from it.
    square: f64,
}

impl Within {
    /// An error of at most `limit`, in the unit of the measure, of boards of these sections; under the weighted measure the
    /// response error, dB.
    pub fn new(limit: f64, targets: &[Section], criterion: Criterion) -> Within {
        let yardstick = response_yardstick(targets, criterion);
        let floor = yardstick.floor_power();
        let samples = yardstick.samples();
        let test = match yardstick.criterion().measure {
            Measure::Decibel => {
                let factor = 10f64.powf(limit / 10.0);
                let sides = |target: f64| {
                    let target = target.max(floor);
                    // What lies under the floor counts as the floor.
                    (if target / factor > floor { target / factor } else { 0.0 }, target * factor)
                };
                Test::Powers {
                    points: samples.iter().map(|sample| sample.x).collect(),
                    between: samples.iter().map(|sample| sides(sample.power)).collect(),
                    free_gain: criterion.ignore_gain,
                }
            }
            Measure::Vector if !criterion.ignore_gain => {
                let distance = |w: f64| {
                    let ideal = targets.iter().map(|section| section.ideal().value(w)).product::<Complex64>();
                    Distance { w, ideal, square: limit * limit * ideal.norm_sqr().max(floor) }
                };
                Test::Distances(samples.iter().map(|sample| distance(sample.w)).collect())
            }
            Measure::Vector | Measure::Weighted(_) => Test::Measure,
        };
        let orders = targets.iter().map(|section| section.shape.order()).collect();
        Within { yardstick, orders, limit, test }
    }

    /// The limit, in the unit of the measure.
    pub fn limit(&self) -> f64 {
        self.limit
    }

    /// Whether a board keeps it; an unstable one does not. `powers` is space that is kept from board to board.
    pub fn keeps(&self, board: &[Biquad], powers: &mut Vec<f64>) -> bool {
        if !board.iter().zip(&self.orders).all(|(h, order)| h.is_stable(*order)) {
            return false;
        }
        // What is not a number keeps nothing.
        match &self.test {
            Test::Powers { points, between, free_gain } => {
                powers_at(board, points, powers);
                let both = powers.iter().zip(between);
                if !free_gain {
                    return both.fold(true, |kept, (power, (low, high))| kept & (power >= low) & (power <= high));
                }
                // A factor must lift every power to its least and none above its largest.
                let factors = both.map(|(power, (low, high))| (low / power, high / power));
                let (least, most) = factors.fold((0.0, f64::INFINITY), |(least, most), (low, high)| {
                    (if low > least { low } else { least }, if high < most { high } else { most })
                });
                least.is_finite() && least <= most && powers.iter().all(|power| power.is_finite())
            }
            Test::Distances(list) => list.iter().all(|at| {
                let value = |p: [f64; 3]| Complex64::new(p[0] - p[2] * at.w * at.w, p[1] * at.w);
                let num = board.iter().map(|h| value(h.num)).product::<Complex64>();
                let den = board.iter().map(|h| value(h.den)).product::<Complex64>();
                (num - at.ideal * den).norm_sqr() <= at.square * den.norm_sqr()
            }),
            Test::Measure => self.yardstick.within(board, self.limit).is_some(),
        }
    }
}

/// |H|² of a cascade at these ω².
pub(super) fn powers_at(board: &[Biquad], points: &[f64], powers: &mut Vec<f64>) {
    powers.clear();
    powers.resize(points.len(), 1.0);
    for h in board {
        // One section after the other over all frequencies: the compiler can take several at a time.
        let ([n0, n1, n2], [d0, d1, d2]) = (h.num, h.den);
        for (power, x) in powers.iter_mut().zip(points) {
            let (even, below) = (n0 - n2 * x, d0 - d2 * x);
            *power *= (even * even + n1 * n1 * x) / (below * below + d1 * d1 * x);
        }
    }
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;
    use crate::target::Shape;

    /// The measure's own error against the limit, for boards near it and with each measure.
    #[test]
    fn a_board_keeps_a_limit_as_the_measure_says() {
        let low_pass = Section::new("A", Shape::LowPass, 1.0, Some(0.8), 2.0, None).unwrap();
        let notch = Section::new("B", Shape::Notch, 3.0, Some(2.0), 1.0, Some(3.0)).unwrap();
        let targets = [low_pass, notch];
        let (mut kept, mut broken) = (0, 0);
        for measure in [Measure::Decibel, Measure::Vector] {
            for ignore_gain in [false, true] {
                let criterion = Criterion { measure, ignore_gain, ..Criterion::default() };
                let yardstick = Yardstick::new(&targets, criterion);
                for k in 0..400 {
                    // Three relative errors on a lattice that is not in step with anything.
                    let off = |m: u32| 1.0 + 0.1 * (f64::from(k * m % 97) / 48.0 - 1.0);
                    let mut board = targets.clone().map(|section| section.ideal());
                    board[0].den[1] *= off(31);
                    board[0].num[0] *= off(17);
                    board[1].den[0] *= off(53);
                    board[1].num[1] = 0.01 * (off(11) - 1.0);
                    let error = yardstick.deviation(&board).error;
                    let mut powers = Vec::new();
                    for limit in [0.3 * error, 0.999_999 * error, 1.000_001 * error, 2.0 * error] {
                        let found = Within::new(limit, &targets, criterion).keeps(&board, &mut powers);
                        assert_eq!(found, error <= limit, "{measure:?} {ignore_gain} {k} {error} {limit}");
                        if found { kept += 1 } else { broken += 1 }
                    }
                }
                let mut unstable = targets.clone().map(|section| section.ideal());
                unstable[0].den[1] *= -1.0;
                assert!(!Within::new(100.0, &targets, criterion).keeps(&unstable, &mut Vec::new()));
                let nothing = [Biquad { num: [f64::NAN, 0.0, 0.0], ..unstable[1] }, unstable[1]];
                assert!(!Within::new(1.0, &targets, criterion).keeps(&nothing, &mut Vec::new()));
            }
        }
        assert_eq!(kept, broken);
    }
}
