//! What a search found: sets in one total order, the front, and how much of it is proved.

use std::cmp::Ordering;
use std::collections::BTreeMap;

use crate::parts::Choice;

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

    /// The error in the middle of those that have this key.
    pub fn value(self) -> f64 {
        self.0 as f64 * STEP
    }

    /// The key just below, if there is one.
    pub fn below(self) -> Option<ErrorKey> {
        self.0.checked_sub(1).map(ErrorKey)
    }
}

/// What a set takes beside its error: of two sets, one is no worse if it takes no more of anything.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub(crate) struct Takes {
    /// Different part numbers.
    pub part_numbers: usize,
    /// Part numbers that must be bought.
    pub bought: usize,
    /// Bodies on the board.
    pub placed_parts: usize,
}

impl Takes {
    /// The larger of both in everything: what the most demanding of two boards takes.
    pub fn largest(&self, other: &Takes) -> Takes {
        Takes {
            part_numbers: self.part_numbers.max(other.part_numbers),
            bought: self.bought.max(other.bought),
            placed_parts: self.placed_parts.max(other.placed_parts),
        }
    }

    /// Whether this is no more than `other` in anything.
    pub fn is_within(&self, other: &Takes) -> bool {
        self.part_numbers <= other.part_numbers
            && self.bought <= other.bought
            && self.placed_parts <= other.placed_parts
    }
}

/// One set for one section. The order is that of the shortlist: error, then part numbers, what must be bought, cost, the
/// distance from a usual impedance where a stock gives no choice of it, and last the choices in slot order.
#[derive(Clone, Debug)]
pub(crate) struct Found {
    /// Its error in the unit of the measure; the largest over all boards where these differ.
    pub error: f64,
    /// The same as a key.
    pub key: ErrorKey,
    /// What it takes.
    pub takes: Takes,
    /// What the parts of one board cost, in millionths; `None` where a price is not known. The most where boards differ.
    pub cost: Option<u64>,
    /// How far the impedance is from a usual one: 0 for a set that exists in every decade.
    pub awkward: u32,
    /// Which form of the section it fills.
    pub form: usize,
    /// The choice of each group of slots, at the lowest impedance level at which the set exists; where boards differ, that
    /// of the worst.
    pub choices: Vec<Choice>,
    /// Decades by which it can be shifted upwards in impedance and still exists, 0 included.
    pub levels: Vec<i32>,
    /// Where boards differ: the form, the choices and the error of each.
    pub boards: Vec<BoardSet>,
}

/// The set of one board among several that differ.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(crate) struct BoardSet {
    /// Its error as a key.
    pub key: ErrorKey,
    /// Which form of the section it fills.
    pub form: usize,
    /// The choice of each group of slots.
    pub choices: Vec<Choice>,
}

impl Found {
    #[allow(clippy::type_complexity, reason = "compared, never stored")]
    fn rank(&self) -> (ErrorKey, Takes, bool, u64, u32, usize, &[Choice], &[BoardSet]) {
        let cost = (self.cost.is_none(), self.cost.unwrap_or(0));
        (self.key, self.takes, cost.0, cost.1, self.awkward, self.form, &self.choices, &self.boards)
    }

    /// Whether both have the same values everywhere, from whatever lots.
    fn has_values_of(&self, other: &Found) -> bool {
        let same_form = self.form == other.form && self.boards.is_empty() && other.boards.is_empty();
        same_form && self.choices.iter().map(|c| c.value).eq(other.choices.iter().map(|c| c.value))
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

/// The best sets by what they take, a limited number of each; and, where the cost counts, all that are cheaper than the
/// better ones.
#[derive(Clone, Debug)]
pub(crate) struct Best {
    capacity: usize,
    cost_counts: bool,
    by_takes: BTreeMap<Takes, Vec<Found>>,
}

impl Best {
    pub fn new(capacity: usize, cost_counts: bool) -> Best {
        Best { capacity, cost_counts, by_takes: BTreeMap::new() }
    }

    pub fn insert(&mut self, found: Found) {
        let list = self.by_takes.entry(found.takes).or_default();
        if let Some(alike) = list.iter().position(|kept| kept.has_values_of(&found)) {
            if list[alike] <= found && !(self.cost_counts && found.cost < list[alike].cost) {
                return;
            }
            list.remove(alike);
        }
        let place = list.partition_point(|kept| *kept < found);
        if list.get(place).is_some_and(|kept| *kept == found) {
            return;
        }
        list.insert(place, found);
        let mut cheapest = None;
        let (capacity, cost_counts, mut index) = (self.capacity, self.cost_counts, 0);
        list.retain(|kept| {
            index += 1;
            let cheaper = cheapest.is_none_or(|least| kept.cost < least);
            if cheaper {
                cheapest = Some(kept.cost);
            }
            index <= capacity || (cost_counts && cheaper)
        });
    }

    pub fn merge(&mut self, other: Best) {
        other.by_takes.into_values().flatten().for_each(|found| self.insert(found));
    }

    /// The largest key by which a set that takes this would still be kept; `None` while any would.
    pub fn worst_kept(&self, takes: &Takes) -> Option<ErrorKey> {
        let list = self.by_takes.get(takes)?;
        (list.len() >= self.capacity && !self.cost_counts).then(|| list.last().map(|f| f.key)).flatten()
    }

    /// The sets that take no more than this.
    fn within<'a>(&'a self, most: &'a Takes) -> impl Iterator<Item = &'a Found> {
        self.by_takes.iter().filter(|(takes, _)| takes.is_within(most)).flat_map(|(_, list)| list)
    }

    /// The best error among sets that take no more than this.
    pub fn error_within(&self, most: &Takes) -> Option<ErrorKey> {
        self.within(most).map(|found| found.key).min()
    }

    /// The lowest cost among sets that take no more than this and have at most this error.
    pub fn cost_within(&self, most: &Takes, key: ErrorKey) -> Option<u64> {
        self.within(most).filter(|found| found.key <= key).filter_map(|found| found.cost).min()
    }

    /// Whether a set that takes at least this, costs at least that and has at least this error is beaten in everything, or
    /// equalled.
    pub fn beats(&self, takes: &Takes, cost: u64, key: ErrorKey) -> bool {
        self.within(takes).any(|found| found.key <= key && found.cost.is_some_and(|known| known <= cost))
    }

    /// The best error of all.
    pub fn error(&self) -> Option<ErrorKey> {
        self.by_takes.values().filter_map(|list| Some(list.first()?.key)).min()
    }

    /// Whether there is no set.
    pub fn is_empty(&self) -> bool {
        self.by_takes.is_empty()
    }

    /// All sets kept, by what they take.
    pub fn all(&self) -> Vec<Vec<Found>> {
        self.by_takes.values().cloned().collect()
    }

    /// For each takings on the front its sets, best first: the first of each improves on all that take no more.
    pub fn front(&self) -> Vec<Vec<Found>> {
        let improves = |takes: &Takes, first: &Found| {
            let smaller = self.by_takes.iter().filter(|(other, _)| *other != takes && other.is_within(takes));
            smaller.filter_map(|(_, list)| list.first()).all(|other| first.key < other.key)
        };
        let rows = self.by_takes.iter().filter_map(|(takes, list)| Some((takes, list, list.first()?)));
        let kept = rows.filter(|(takes, _, first)| self.cost_counts || improves(takes, first));
        kept.map(|(_, list, _)| list.clone()).collect()
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

    fn found(error: f64, part_numbers: usize, placed_parts: usize, cost: Option<u64>) -> Found {
        Found {
            error,
            key: ErrorKey::new(error),
            takes: Takes { part_numbers, bought: 0, placed_parts },
            cost,
            awkward: 0,
            form: placed_parts,
            choices: Vec::new(),
            levels: vec![0],
            boards: Vec::new(),
        }
    }

    #[test]
    fn the_front_has_only_improvements() {
        let mut best = Best::new(1, false);
        for (error, count, placed) in
            [(0.5, 3, 6), (0.2, 4, 6), (0.4, 3, 6), (0.2, 5, 6), (0.1, 6, 6), (0.3, 3, 7), (0.3, 4, 7)]
        {
            best.insert(found(error, count, placed, None));
        }
        let rows = best.front();
        let rows: Vec<_> =
            rows.iter().map(|r| (r[0].takes.part_numbers, r[0].takes.placed_parts, r[0].error)).collect();
        assert_eq!(rows, [(3, 6, 0.4), (3, 7, 0.3), (4, 6, 0.2), (6, 6, 0.1)]);
    }

    #[test]
    fn cheaper_sets_are_kept_where_the_cost_counts() {
        let mut best = Best::new(1, true);
        for (form, (error, cost)) in [(0.1, 50), (0.3, 40), (0.2, 60), (0.4, 10)].into_iter().enumerate() {
            best.insert(Found { form, ..found(error, 3, 6, Some(cost)) });
        }
        let costs: Vec<_> = best.front()[0].iter().map(|f| f.cost).collect();
        assert_eq!(costs, [50, 40, 10].map(Some));
        let takes = Takes { part_numbers: 3, bought: 0, placed_parts: 6 };
        assert_eq!(best.cost_within(&takes, ErrorKey::new(0.35)), Some(40));
    }
}
