//! Levels within a cascade on a grid of frequencies, and the choices that follow from them.
//!
//! All levels are logarithms of magnitudes (nepers), so that a gain is a shift.

use super::grid::Grid;
use super::unit::Unit;

/// Levels of one section.
#[derive(Clone, Debug)]
pub(super) struct Levels {
    /// Of the section's output.
    pub output: Vec<f64>,
    /// Of the largest op-amp output.
    pub largest: Vec<f64>,
}

impl Levels {
    pub fn of(unit: &Unit, grid: &Grid) -> Levels {
        let response = unit.output();
        let level = |magnitude: f64| magnitude.max(f64::MIN_POSITIVE).ln();
        Levels {
            output: grid.frequencies.iter().map(|&w| level(response.power(w * w).sqrt())).collect(),
            largest: grid.frequencies.iter().map(|&w| level(unit.largest(w))).collect(),
        }
    }

    /// The swing of the section by itself: its largest op-amp output over its least output in the pass band.
    pub fn swing(&self, grid: &Grid) -> f64 {
        let largest = self.largest.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        largest - least(&self.output, grid)
    }
}

fn least(levels: &[f64], grid: &Grid) -> f64 {
    let inside = levels.iter().zip(&grid.in_pass_band).filter(|(_, inside)| **inside);
    inside.map(|(level, _)| *level).fold(f64::INFINITY, f64::min)
}

/// Two choices whose swings differ by less, in nepers, are alike; then the earlier one is taken, whatever the rounding.
pub(super) const ALIKE: f64 = 1e-7;

/// Which zeros each set of poles takes: the largest swing of a single section is as small as it can be, and among such
/// pairings the sum of the swings. `swing[pole][zero]`; at most twelve of each.
pub(super) fn best_pairing(swing: &[Vec<f64>]) -> Vec<usize> {
    let n = swing.len();
    let worst = over_subsets(n, |pole, zero, _| swing[pole][zero], f64::max, f64::INFINITY).0;
    over_subsets(n, |pole, zero, _| swing[pole][zero], |a, b| a + b, worst).1
}

/// The least total over all ways to give each of `n` places, in turn, one of `n` things, and those things by place.
///
/// `cost(place, thing, set)`: what it costs to give that place that thing once the things of `set` are given. No single
/// cost may be above `cap`. Dynamic programming over sets of things given.
fn over_subsets(
    n: usize,
    cost: impl Fn(usize, usize, usize) -> f64,
    joined: impl Fn(f64, f64) -> f64,
    cap: f64,
) -> (f64, Vec<usize>) {
    let mut best = vec![f64::INFINITY; 1 << n];
    let mut last = vec![0; 1 << n];
    best[0] = f64::NEG_INFINITY;
    for set in 1usize..1 << n {
        let place = set.count_ones() as usize - 1;
        for thing in (0..n).filter(|thing| set >> thing & 1 == 1) {
            let before = set & !(1 << thing);
            let own = cost(place, thing, before);
            if own > cap + ALIKE || best[before] == f64::INFINITY {
                continue;
            }
            let total = if before == 0 { own } else { joined(best[before], own) };
            if total < best[set] - ALIKE {
                (best[set], last[set]) = (total, thing);
            }
        }
    }
    let mut set = (1 << n) - 1;
    let mut things = Vec::new();
    while set > 0 {
        things.push(last[set]);
        set &= !(1 << last[set]);
    }
    things.reverse();
    (best[(1 << n) - 1], things)
}

/// Levels of every section behind every set of others.
pub(super) struct Table {
    /// The peak over frequency of the largest op-amp output of a section behind a set: `peak[set][section]`.
    peak: Vec<Vec<f64>>,
    /// The least level in the pass band behind a set.
    least: Vec<f64>,
    /// Which sections have a gain that can be chosen.
    free: Vec<bool>,
}

/// Up to this many sections all orders are tried where gains are fixed.
const ALL_ORDERS: usize = 8;

impl Table {
    pub fn new(levels: &[Levels], free: Vec<bool>, grid: &Grid) -> Table {
        let n = levels.len();
        let mut table = Table { peak: Vec::new(), least: Vec::new(), free };
        for set in 0usize..1 << n {
            let mut sum = vec![0.0; grid.frequencies.len()];
            for section in (0..n).filter(|section| set >> section & 1 == 1) {
                sum.iter_mut().zip(&levels[section].output).for_each(|(sum, level)| *sum += level);
            }
            let peak = |section: usize| {
                let behind = sum.iter().zip(&levels[section].largest).map(|(sum, level)| sum + level);
                if set >> section & 1 == 1 { f64::NAN } else { behind.fold(f64::NEG_INFINITY, f64::max) }
            };
            table.peak.push((0..n).map(peak).collect());
            table.least.push(least(&sum, grid));
        }
        table
    }

    fn count(&self) -> usize {
        self.free.len()
    }

    /// The order with the least swing; sections that come first in the list come first among equals.
    pub fn best_order(&self, total: f64) -> Vec<usize> {
        let n = self.count();
        if self.free.iter().all(|free| *free) || n > ALL_ORDERS {
            // With every gain free the swing is the largest of these costs, whatever the gains.
            let cost = |_: usize, section: usize, before: usize| {
                self.peak[before][section] - self.least[before | 1 << section]
            };
            let worst = over_subsets(n, cost, f64::max, f64::INFINITY).0;
            return over_subsets(n, cost, |a, b| a + b, worst).1;
        }
        let mut best: Option<(f64, Vec<usize>)> = None;
        let mut order = Vec::new();
        self.try_orders(&mut order, total, &mut best);
        best.map_or_else(|| (0..n).collect(), |(_, order)| order)
    }

    fn try_orders(&self, order: &mut Vec<usize>, total: f64, best: &mut Option<(f64, Vec<usize>)>) {
        if order.len() == self.count() {
            let swing = self.swing(order, &self.gains(order, total));
            if best.as_ref().is_none_or(|(least, _)| swing < least - ALIKE) {
                *best = Some((swing, order.clone()));
            }
            return;
        }
        for section in 0..self.count() {
            if !order.contains(&section) {
                order.push(section);
                self.try_orders(order, total, best);
                order.pop();
            }
        }
    }

    /// The gains, in signal order, that let the largest op-amp output of every section peak alike where they can, as
    /// factors to those for which the levels hold; their sum is `total`. Fixed gains are 0.
    ///
    /// The level of the last section, and of those that stand before the first free gain, follows from `total`. Each
    /// other free gain lifts its section, and the fixed ones after it, to the highest of these: more would cost
    /// headroom, less would let the signal sink.
    pub fn gains(&self, order: &[usize], total: f64) -> Vec<f64> {
        let starts: Vec<usize> = (0..order.len()).filter(|&place| self.free[order[place]]).collect();
        let Some((&first, &last)) = starts.first().zip(starts.last()) else { return vec![0.0; order.len()] };
        let peaks = self.peaks(order);
        let highest = |places: &[f64]| places.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        let target = highest(&peaks[..first]).max(highest(&peaks[last..]) + total);
        let mut gains = vec![0.0; order.len()];
        let mut sum = 0.0;
        for (index, &start) in starts.iter().enumerate() {
            let shift = match starts.get(index + 1) {
                Some(&next) => target - highest(&peaks[start..next]),
                None => total,
            };
            gains[start] = shift - sum;
            sum = shift;
        }
        gains
    }

    /// The peak of each section in signal order, without gains.
    fn peaks(&self, order: &[usize]) -> Vec<f64> {
        let mut set = 0;
        let peak = |&section: &usize| {
            let peak = self.peak[set][section];
            set |= 1 << section;
            peak
        };
        order.iter().map(peak).collect()
    }

    /// The largest op-amp output over the least level of a section output in the pass band.
    pub fn swing(&self, order: &[usize], gains: &[f64]) -> f64 {
        let (mut set, mut sum) = (0, 0.0);
        let (mut largest, mut smallest) = (f64::NEG_INFINITY, f64::INFINITY);
        for (&section, gain) in order.iter().zip(gains) {
            sum += gain;
            largest = largest.max(self.peak[set][section] + sum);
            set |= 1 << section;
            smallest = smallest.min(self.least[set] + sum);
        }
        largest - smallest
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Draws without a random generator: the digits of a linear congruence.
    fn draw(state: &mut u64) -> f64 {
        *state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (*state >> 11) as f64 / (1u64 << 53) as f64
    }

    fn orders(n: usize) -> Vec<Vec<usize>> {
        if n == 0 {
            return vec![Vec::new()];
        }
        let shorter = orders(n - 1);
        let inserted = shorter.iter().flat_map(|order| {
            (0..n).map(move |place| {
                let mut order = order.clone();
                order.insert(place, n - 1);
                order
            })
        });
        inserted.collect()
    }

    fn drawn(n: usize, free: Vec<bool>, state: &mut u64) -> Table {
        let grid =
            Grid { frequencies: (0..30).map(f64::from).collect(), in_pass_band: (0..30).map(|i| i < 12).collect() };
        let mut levels = Vec::new();
        for _ in 0..n {
            let output: Vec<f64> = (0..30).map(|_| 2.0 * draw(state) - 1.0).collect();
            let largest = output.iter().map(|level| level + draw(state)).collect();
            levels.push(Levels { output, largest });
        }
        Table::new(&levels, free, &grid)
    }

    #[test]
    fn pairing_and_order_are_the_best_of_all() {
        let mut state = 7;
        for n in 1..=5 {
            let swing: Vec<Vec<f64>> = (0..n).map(|_| (0..n).map(|_| draw(&mut state)).collect()).collect();
            let worst = |order: &[usize]| (0..n).map(|k| swing[k][order[k]]).fold(0.0, f64::max);
            let least = orders(n).iter().map(|order| worst(order)).fold(f64::INFINITY, f64::min);
            assert!((worst(&best_pairing(&swing)) - least).abs() < 1e-6);
            for fixed in 0..=n {
                let table = drawn(n, (0..n).map(|k| k >= fixed).collect(), &mut state);
                let swing = |order: &[usize]| table.swing(order, &table.gains(order, 0.3));
                let least = orders(n).iter().map(|order| swing(order)).fold(f64::INFINITY, f64::min);
                assert!((swing(&table.best_order(0.3)) - least).abs() < 1e-6, "{n} {fixed}");
            }
        }
    }

    #[test]
    fn no_other_gains_swing_less() {
        let mut state = 11;
        for round in 0..40 {
            let n = 2 + round % 3;
            let table = drawn(n, (0..n).map(|k| k != round % 5).collect(), &mut state);
            let order: Vec<usize> = (0..n).collect();
            let gains = table.gains(&order, 0.2);
            let best = table.swing(&order, &gains);
            assert!((gains.iter().sum::<f64>() - 0.2).abs() < 1e-12);
            let free: Vec<usize> = (0..n).filter(|&k| table.free[k]).collect();
            for _ in 0..200 {
                let mut other = gains.clone();
                for pair in free.windows(2) {
                    let shift = 2.0 * draw(&mut state) - 1.0;
                    other[pair[0]] += shift;
                    other[pair[1]] -= shift;
                }
                assert!(table.swing(&order, &other) > best - 1e-12);
            }
        }
    }
}
