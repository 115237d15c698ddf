//! What a search found: sets in one total order, the front, and how much of it is proved.

use std::cmp::Ordering;
use std::collections::{BTreeMap, BTreeSet};

use crate::units::Value;

use super::limits::StopReason;

/// An error as a whole number of steps of 1e-7 of the measure's unit (dB, or a plain ratio): a total order in which sets
/// of mathematically equal response are equal, whatever the rounding, and no row is listed for less than a step.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct ErrorKey(u64);

/// The smallest difference in error that counts.
const STEP: f64 = 1e-7;

impl ErrorKey {
    /// The key of an error, in the unit of the measure; the largest key if it is not finite.
    pub fn new(error: f64) -> ErrorKey {
        // A float cast saturates; NaN must not become the best.
        ErrorKey(if error.is_nan() { u64::MAX } else { (error / STEP).round() as u64 })
    }

    /// The largest error that has this key or a smaller one, rounded outwards.
    pub fn ceiling(self) -> f64 {
        (self.0 as f64 + 0.5) * STEP * (1.0 + 1e-12)
    }

    /// The key just below, if there is one.
    pub fn below(self) -> Option<ErrorKey> {
        self.0.checked_sub(1).map(ErrorKey)
    }
}

/// One set for one section. The order is that of the shortlist: error, then part numbers, then the values in slot order.
#[derive(Clone, Debug)]
pub(crate) struct Found {
    /// Its error in the unit of the measure.
    pub error: f64,
    /// The same as a key.
    pub key: ErrorKey,
    /// How many different values it needs, resistors and capacitors counted apart.
    pub part_numbers: usize,
    /// The value of each group of slots, at the lowest impedance level at which the set exists.
    pub values: Vec<Value>,
    /// Decades by which it can be shifted upwards in impedance and still exists, 0 included.
    pub levels: Vec<i32>,
}

impl Found {
    fn rank(&self) -> (ErrorKey, usize, &[Value]) {
        (self.key, self.part_numbers, &self.values)
    }
}

impl Ord for Found {
    fn cmp(&self, other: &Self) -> Ordering {
        self.rank().cmp(&other.rank())
    }
}

impl PartialOrd for Found {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}

impl PartialEq for Found {
    fn eq(&self, other: &Self) -> bool {
        self.cmp(other).is_eq()
    }
}

impl Eq for Found {}

/// The best sets by number of part numbers, a limited number of each.
#[derive(Clone, Debug)]
pub(crate) struct Best {
    capacity: usize,
    by_count: BTreeMap<usize, BTreeSet<Found>>,
}

impl Best {
    pub fn new(capacity: usize) -> Best {
        Best { capacity, by_count: BTreeMap::new() }
    }

    pub fn insert(&mut self, found: Found) {
        let list = self.by_count.entry(found.part_numbers).or_default();
        list.insert(found);
        if list.len() > self.capacity {
            list.pop_last();
        }
    }

    pub fn merge(&mut self, other: Best) {
        other.by_count.into_values().flatten().for_each(|found| self.insert(found));
    }

    /// The largest key by which a set of this count would still be kept; `None` while any would.
    pub fn worst_kept(&self, count: usize) -> Option<ErrorKey> {
        let list = self.by_count.get(&count)?;
        (list.len() >= self.capacity).then(|| list.last().map(|f| f.key)).flatten()
    }

    /// The best error among sets with at most `count` part numbers.
    pub fn error_up_to(&self, count: usize) -> Option<ErrorKey> {
        self.by_count.range(..=count).filter_map(|(_, list)| Some(list.first()?.key)).min()
    }

    /// For each count on the front its sets, best first: the first improves on every smaller count.
    pub fn front(&self) -> Vec<Vec<Found>> {
        let mut rows: Vec<Vec<Found>> = Vec::new();
        let mut best: Option<ErrorKey> = None;
        for list in self.by_count.values() {
            let Some(first) = list.first() else { continue };
            if best.is_none_or(|best| first.key < best) {
                best = Some(first.key);
                rows.push(list.iter().cloned().collect());
            }
        }
        rows
    }
}

/// How much of a front is proved.
#[derive(Clone, Debug, PartialEq)]
pub enum Proof {
    /// No set on these shelves in this circuit beats the front, within the stated end.
    Exhaustive(End),
    /// The search was stopped; rows with fewer part numbers than `complete_below` are proved.
    Stopped {
        /// Why.
        reason: StopReason,
        /// Every smaller number of part numbers was searched to its end.
        complete_below: usize,
    },
}

/// Where an exhaustive front ends.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum End {
    /// All numbers of part numbers were searched.
    AllCounts,
    /// The best error fell below the error resolution; more part numbers were not searched.
    Resolution,
    /// The limit on part numbers was reached.
    CountLimit,
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn keys_are_a_total_order_without_rounding_noise() {
        assert_eq!(ErrorKey::new(1.6426e-3), ErrorKey::new(1.6426e-3 + 1e-11));
        assert!(ErrorKey::new(1.0) < ErrorKey::new(1.000_000_2));
        assert!(ErrorKey::new(f64::NAN) > ErrorKey::new(1e6));
        let key = ErrorKey::new(0.25);
        assert_eq!(ErrorKey::new(key.ceiling() * (1.0 - 1e-11)), key);
    }

    #[test]
    fn the_front_has_only_improvements() {
        let found = |error, part_numbers| Found {
            error,
            key: ErrorKey::new(error),
            part_numbers,
            values: Vec::new(),
            levels: vec![0],
        };
        let mut best = Best::new(1);
        for (error, count) in [(0.5, 3), (0.2, 4), (0.4, 3), (0.2, 5), (0.1, 6)] {
            best.insert(found(error, count));
        }
        let rows: Vec<_> = best.front().iter().map(|row| (row[0].part_numbers, row[0].key)).collect();
        assert_eq!(rows, [(3, ErrorKey::new(0.4)), (4, ErrorKey::new(0.2)), (6, ErrorKey::new(0.1))]);
    }
}
