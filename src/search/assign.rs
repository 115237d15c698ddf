//! Measured parts on several boards: each is there once, so every board gets others, and the worst board shall be best.
//!
//! All sets within an error limit are collected. Sets that may stand on different boards of one run are of one *design*:
//! they agree in everything but the measured parts, or, where each board may be its own, in nothing. Then the smallest
//! error is sought at which as many sets as there are boards share no measured part. With one or two measured parts a set
//! that is a maximum matching in a graph; with more a search through all ways, up to a limit that is reported.

use std::collections::{BTreeMap, BTreeSet};

use petgraph::algo::maximum_matching;
use petgraph::graph::{NodeIndex, UnGraph};

use crate::parts::{Choice, LotId, Supply};
use crate::units::Kind;

use super::front::{BoardSet, ErrorKey, Found};
use super::model::Group;

/// What all boards of a run have in common: the form, and the choices, with measured parts by their part number only.
/// `None` where each board may be its own.
type Design = Option<(usize, Vec<Standing>)>;

/// What stands in a group on every board of a run: kind, choice, and whether the choice names a part number of which each
/// board has another measured part.
pub(crate) type Standing = (Kind, Choice, bool);

/// The measured parts of a set, ascending.
type Items = Vec<LotId>;

/// The choices of a set with measured parts by their part number: what boards of one run have in common.
pub(crate) fn design(supply: &Supply, groups: &[Group], choices: &[Choice]) -> Vec<Standing> {
    let one = |(group, &choice): (&Group, &Choice)| match supply.lot_of(choice) {
        Some(lot) if lot.measured.is_some() => (group.kind, supply.part_number(group.kind, choice).1, true),
        _ => (group.kind, choice, false),
    };
    groups.iter().zip(choices).map(one).collect()
}

/// The measured parts among choices, ascending.
pub(crate) fn items(supply: &Supply, choices: &[Choice]) -> Items {
    let measured = |choice: &Choice| supply.lot_of(*choice).is_some_and(|lot| lot.measured.is_some());
    let found: BTreeSet<LotId> = choices.iter().filter(|c| measured(c)).filter_map(|c| c.lot).collect();
    found.into_iter().collect()
}

/// Sets collected for several boards: of each design, for each combination of measured parts the best.
#[derive(Clone, Debug, Default)]
pub(crate) struct Candidates(BTreeMap<Design, BTreeMap<Items, Found>>);

impl Candidates {
    /// Adds a set; `own` where each board may be its own.
    pub fn insert(&mut self, supply: &Supply, groups: &[Group], found: Found, own: bool) {
        let design = (!own).then(|| (found.form, design(supply, groups, &found.choices)));
        let items = items(supply, &found.choices);
        self.keep(design, items, found);
    }

    fn keep(&mut self, design: Design, items: Items, found: Found) {
        let sets = self.0.entry(design).or_default();
        match sets.get_mut(&items) {
            Some(kept) if *kept <= found => {}
            Some(kept) => *kept = found,
            None => {
                sets.insert(items, found);
            }
        }
    }

    /// Takes over the sets of another.
    pub fn merge(&mut self, other: Candidates) {
        for (design, sets) in other.0 {
            for (items, found) in sets {
                self.keep(design.clone(), items, found);
            }
        }
    }

    /// The best assignment of each design that has one; and whether one was left open for being too large.
    pub fn assigned(&self, boards: usize) -> (Vec<Found>, bool) {
        let mut open = false;
        let mut found = Vec::new();
        for sets in self.0.values() {
            let mut sets: Vec<(&Items, &Found)> = sets.iter().collect();
            sets.sort_by(|a, b| a.1.cmp(b.1));
            match bottleneck(
                &sets.iter().map(|(items, found)| (items.as_slice(), found.key)).collect::<Vec<_>>(),
                boards,
            ) {
                Packing::Found(chosen) => {
                    found.extend(together(&chosen.iter().map(|&index| sets[index].1).collect::<Vec<_>>()));
                }
                Packing::None => {}
                Packing::TooLarge => open = true,
            }
        }
        (found, open)
    }
}

/// The sets of all boards as one.
fn together(boards: &[&Found]) -> Option<Found> {
    let worst = boards.iter().max_by_key(|found| found.key)?;
    let mut whole = (*worst).clone();
    for found in boards {
        whole.takes = whole.takes.largest(&found.takes);
        whole.cost = whole.cost.zip(found.cost).map(|(a, b)| a.max(b));
    }
    whole.boards = boards
        .iter()
        .map(|found| BoardSet { key: found.key, form: found.form, choices: found.choices.clone() })
        .collect();
    whole.boards.sort();
    // Boards that all are the same are one set.
    whole.boards.dedup();
    if whole.boards.len() == 1 && boards.len() > 1 {
        whole.boards.clear();
    }
    Some(whole)
}

/// What became of the search for disjoint sets.
#[derive(Debug, PartialEq, Eq)]
enum Packing {
    /// So many disjoint sets, by index.
    Found(Vec<usize>),
    /// There are none.
    None,
    /// It was given up.
    TooLarge,
}

/// The disjoint sets, as many as there are boards, whose largest error is smallest. The sets are given by ascending error.
fn bottleneck(sets: &[(&[LotId], ErrorKey)], boards: usize) -> Packing {
    // A set without a measured part may stand on any number of boards.
    let free = sets.iter().position(|(items, _)| items.is_empty());
    let (mut low, mut high) = (0, sets.len());
    let mut best = Packing::None;
    // The smallest number of leading sets that suffices, by halving: more sets never do worse.
    while low < high {
        let middle = low.midpoint(high);
        // All sets of one error belong together.
        let end = middle + sets[middle..].iter().take_while(|(_, key)| *key == sets[middle].1).count();
        match disjoint(&sets[..end], free.filter(|&f| f < end), boards) {
            Packing::Found(chosen) => {
                best = Packing::Found(chosen);
                high = middle;
            }
            Packing::None => low = end,
            Packing::TooLarge => return Packing::TooLarge,
        }
    }
    best
}

/// So many disjoint sets out of these.
fn disjoint(sets: &[(&[LotId], ErrorKey)], free: Option<usize>, boards: usize) -> Packing {
    if let Some(free) = free {
        return Packing::Found(vec![free; boards]);
    }
    if sets.iter().all(|(items, _)| items.len() <= 2) {
        return matched(sets, boards);
    }
    const MOST_STEPS: u64 = 2_000_000;
    let mut packer = Packer { sets, boards, taken: BTreeSet::new(), chosen: Vec::new(), steps: 0, most: MOST_STEPS };
    match packer.pack(0) {
        true => Packing::Found(packer.chosen),
        false if packer.steps > MOST_STEPS => Packing::TooLarge,
        false => Packing::None,
    }
}

/// Disjoint sets of one or two parts: a maximum matching, in which a set of one part is an edge to a node of its own.
fn matched(sets: &[(&[LotId], ErrorKey)], boards: usize) -> Packing {
    let mut graph: UnGraph<(), usize> = UnGraph::default();
    let mut nodes: BTreeMap<LotId, NodeIndex> = BTreeMap::new();
    for (index, (items, _)) in sets.iter().enumerate() {
        let mut ends = [None, None];
        for (end, item) in ends.iter_mut().zip(*items) {
            *end = Some(*nodes.entry(*item).or_insert_with(|| graph.add_node(())));
        }
        let [first, second] = ends.map(|end| end.unwrap_or_else(|| graph.add_node(())));
        graph.add_edge(first, second, index);
    }
    let matching = maximum_matching(&graph);
    if matching.len() < boards {
        return Packing::None;
    }
    // Of parallel edges the first, which has the smaller error.
    let set = |(a, b)| graph.edges_connecting(a, b).map(|edge| *edge.weight()).min();
    let mut chosen: Vec<usize> = matching.edges().filter_map(set).collect();
    chosen.sort_unstable();
    chosen.truncate(boards);
    Packing::Found(chosen)
}

/// A search through all ways to choose disjoint sets.
struct Packer<'a> {
    sets: &'a [(&'a [LotId], ErrorKey)],
    boards: usize,
    taken: BTreeSet<LotId>,
    chosen: Vec<usize>,
    steps: u64,
    most: u64,
}

impl Packer<'_> {
    /// Chooses the sets that are still wanted among those from `first` on.
    fn pack(&mut self, first: usize) -> bool {
        if self.chosen.len() == self.boards {
            return true;
        }
        for index in first..self.sets.len() {
            self.steps += 1;
            if self.steps > self.most || self.sets.len() - index < self.boards - self.chosen.len() {
                return false;
            }
            let (items, _) = self.sets[index];
            if items.iter().any(|item| self.taken.contains(item)) {
                continue;
            }
            self.taken.extend(items);
            self.chosen.push(index);
            if self.pack(index + 1) {
                return true;
            }
            self.chosen.pop();
            items.iter().for_each(|item| {
                self.taken.remove(item);
            });
        }
        false
    }
}
