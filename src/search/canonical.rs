//! One representative for all sets that differ only by a decade of impedance or by interchangeable slots.

use std::collections::{BTreeMap, BTreeSet};
use std::ops::Range;

use crate::parts::{Choice, Origin, Supply};
use crate::units::Kind;

use super::assign::design;
use super::front::{ErrorKey, Found, Takes};
use super::model::{Group, Model};
use super::problem::{Goals, Rank};

/// What parts come to on one board.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub(crate) struct Tally {
    /// What they take.
    pub takes: Takes,
    /// What they cost, in millionths; `None` where a price is not known.
    pub cost: Option<u64>,
}

impl Tally {
    /// Whether this is no more than `other` in anything, the cost included where it counts.
    pub fn is_within(&self, other: &Tally, cost_counts: bool) -> bool {
        let cheaper = match (self.cost, other.cost) {
            _ if !cost_counts => true,
            (Some(one), Some(other)) => one <= other,
            (_, None) => true,
            (None, Some(_)) => false,
        };
        self.takes.is_within(&other.takes) && cheaper
    }
}

/// Counts the parts of a board, given by kind, choice and number of bodies; `None` where the stock does not suffice for all
/// boards and no more may be bought.
pub(crate) fn tally(supply: &Supply, parts: impl IntoIterator<Item = (Kind, Choice, u64)>) -> Option<Tally> {
    let mut used: BTreeMap<(Kind, Choice), u64> = BTreeMap::new();
    for (kind, choice, bodies) in parts {
        *used.entry((kind, choice)).or_default() += bodies;
    }
    let (mut numbers, mut bought) = (BTreeSet::new(), BTreeSet::new());
    for (&(kind, choice), &bodies) in &used {
        let number = supply.part_number(kind, choice);
        if supply.obtain(choice, bodies)? == Origin::Bought && supply.has_stock() {
            bought.insert(number);
        }
        numbers.insert(number);
    }
    let cost = used.iter().map(|((_, choice), bodies)| Some(supply.price(*choice)? * bodies)).sum();
    let takes = Takes {
        part_numbers: numbers.len(),
        bought: bought.len(),
        placed_parts: used.values().sum::<u64>() as usize,
    };
    (takes.bought <= supply.buying.most()).then_some(Tally { takes, cost })
}

/// The parts of a section: of each group its kind, its choice and how many bodies it places.
pub(crate) fn parts<'a>(
    groups: &'a [Group],
    choices: &'a [Choice],
) -> impl Iterator<Item = (Kind, Choice, u64)> + 'a {
    groups.iter().zip(choices).map(|(group, &choice)| (group.kind, choice, group.bodies()))
}

/// How many part numbers there are.
pub(crate) fn distinct(supply: &Supply, groups: &[Group], choices: &[Choice]) -> usize {
    let numbers = groups.iter().zip(choices).map(|(group, &choice)| supply.part_number(group.kind, choice));
    numbers.collect::<BTreeSet<_>>().len()
}

/// The impedance that is preferred where nothing else decides, ohms.
const USUAL: f64 = 1e4;

/// The middle of the wanted impedances, ohms.
pub(crate) fn preferred_impedance(goals: &Goals) -> f64 {
    goals.impedance.map_or(USUAL, |(from, to)| (from * to).sqrt())
}

/// The representatives of all sets that differ from this one by a decade of impedance or by interchangeable slots, with
/// the silent groups filled: one for each way to fill them that takes less of something than the others. None if none of
/// them lies in the wanted impedance range, or can be had. Their error is not yet known.
pub(crate) fn canonical(
    model: &Model,
    form: usize,
    supply: &Supply,
    goals: &Goals,
    choices: &[Choice],
) -> Vec<Found> {
    let groups = model.active_groups();
    // No shelf spans more decades than this.
    const DECADES: i32 = 40;
    let at_level = |level: i32| -> Vec<Filled> {
        let Some(shifted) = shifted(groups, choices, level) else { return Vec::new() };
        let wanted = goals.impedance.is_none_or(|(from, to)| {
            let level = |block: Range<usize>| impedance(&groups[block.clone()], &in_ohms(&shifted[block]));
            model.sections().filter_map(level).all(|level| (from..=to).contains(&level))
        });
        if wanted { with_silent(model, supply, shifted, goals.rank == Rank::Cost) } else { Vec::new() }
    };
    // What is in stock in one decade says nothing of another.
    let movable = choices.iter().all(|choice| choice.lot.is_none());
    let reach = if movable { -DECADES..=DECADES } else { 0..=0 };
    let levels: Vec<(i32, Filled)> =
        reach.flat_map(|k| at_level(k).into_iter().map(move |filled| (k, filled))).collect();
    let tallies: BTreeSet<Tally> = levels.iter().map(|(_, (_, tally))| *tally).collect();
    let beaten = |tally: &Tally| {
        let mut others = tallies.iter().filter(|other| *other != tally);
        others.any(|other| other.is_within(tally, goals.rank == Rank::Cost))
    };
    let one = |tally: &Tally| {
        let alike = || levels.iter().filter(|(_, (_, other))| other == tally);
        let (lowest, (base, _)) = alike().next()?;
        let image = |order: &Vec<usize>| {
            let mut image: Vec<Choice> = order.iter().map(|&k| base[k]).collect();
            image.extend(&base[model.active..]);
            image
        };
        // Sets that differ in measured parts only must end up with everything else in the same slots.
        let order = |choices: &Vec<Choice>| (design(supply, &model.groups, choices), choices.clone());
        let chosen = match model.symmetries.is_empty() {
            true => base.clone(),
            false => model.symmetries.iter().map(image).chain([base.clone()]).min_by_key(order)?,
        };
        let level = impedance(groups, &in_ohms(&chosen));
        let distance = level.map_or(0.0, |z| (z / preferred_impedance(goals)).ln().abs());
        let error = f64::INFINITY;
        Some(Found {
            error,
            key: ErrorKey::new(error),
            takes: tally.takes,
            cost: tally.cost,
            awkward: if movable { 0 } else { (distance * 1e3) as u32 },
            form,
            choices: chosen,
            levels: alike().map(|(k, _)| k - lowest).collect(),
            boards: Vec::new(),
        })
    };
    tallies.iter().filter(|tally| !beaten(tally)).filter_map(one).collect()
}

/// The impedance level: geometric mean of the resistances in the slots, ohms; `None` without a resistor. Values in ohms and
/// farads.
pub(crate) fn impedance(groups: &[Group], values: &[f64]) -> Option<f64> {
    let mut logs: Vec<f64> = Vec::new();
    for (index, (group, &value)) in groups.iter().zip(values).enumerate() {
        if group.kind != Kind::Resistor {
            continue;
        }
        // The other of a pair stands in the same slots; the pair counts once, where the first of it stands.
        let other = group.joint.and_then(|joint| {
            let other = (0..groups.len()).find(|&k| k != index && groups[k].slots == group.slots)?;
            Some((other, joint.value(group.kind, value, values[other])))
        });
        let resistance = match other {
            Some((other, _)) if other < index => continue,
            Some((_, whole)) => whole,
            None => value,
        };
        logs.extend(std::iter::repeat_n(resistance.ln(), group.slots.len()));
    }
    (!logs.is_empty()).then(|| (logs.iter().sum::<f64>() / logs.len() as f64).exp())
}

/// Part values as ohms and farads.
pub(crate) fn in_ohms(choices: &[Choice]) -> Vec<f64> {
    choices.iter().map(|choice| choice.value.to_f64()).collect()
}

/// The choices at another impedance level: resistors times a power of ten, capacitors divided by it; `None` if the
/// shelves do not have them.
pub(crate) fn shifted(groups: &[Group], choices: &[Choice], level: i32) -> Option<Vec<Choice>> {
    if level == 0 {
        return Some(choices.to_vec());
    }
    let shift = |(group, choice): (&Group, &Choice)| {
        let decades = if group.kind == Kind::Resistor { level } else { -level };
        let value = choice.value.shifted(decades)?;
        Some(Choice { value, lot: choice.lot }).filter(|choice| group.shelf.contains(*choice))
    };
    groups.iter().zip(choices).map(shift).collect()
}

/// The choices of all groups of a section, and what they come to.
pub(crate) type Filled = (Vec<Choice>, Tally);

/// Adds choices for the groups that do not reach the response, and counts the whole: with as few new part numbers as
/// possible, as little to buy, where that counts as cheaply, and then near to the impedance level. Where these wishes are
/// at odds, each way that takes less of something than the others; none where the stock does not suffice.
pub(crate) fn with_silent(model: &Model, supply: &Supply, active: Vec<Choice>, cost_counts: bool) -> Vec<Filled> {
    if model.silent_groups().is_empty() {
        let tally = tally(supply, parts(&model.groups, &active));
        return tally.map(|tally| (active, tally)).into_iter().collect();
    }
    let level = impedance(model.active_groups(), &in_ohms(&active));
    let mut filling = Filling { model, supply, level, cost_counts, best: Vec::new() };
    filling.fill(active, 0.0);
    filling.best.sort_by_key(|(_, _, tally)| *tally);
    filling.best.into_iter().map(|(_, choices, tally)| (choices, tally)).collect()
}

/// What makes two new choices alike: which open groups they serve, for how many bodies the stock suffices, whether more can
/// be had, and whether the part number is there.
type Alike = (Vec<bool>, u64, bool, bool);

/// Whether the price is not known, the price, and the distance from the impedance level.
type Rated = ((bool, Option<u64>), f64);

/// The search for the best choices of the silent groups.
struct Filling<'a> {
    model: &'a Model,
    supply: &'a Supply,
    level: Option<f64>,
    cost_counts: bool,
    /// None takes more of everything than another: distance from the level, choices, what they come to.
    best: Vec<(f64, Vec<Choice>, Tally)>,
}

impl Filling<'_> {
    fn distance(&self, group: &Group, choice: &Choice) -> f64 {
        let (low, high) = group.shelf.span();
        let middle = (low.to_f64() * high.to_f64()).sqrt();
        let wanted = if group.kind == Kind::Resistor { self.level.unwrap_or(middle) } else { middle };
        (choice.value.to_f64() / wanted).ln().abs()
    }

    /// Fills the groups that are left in every way that could be the best.
    fn fill(&mut self, choices: Vec<Choice>, distance: f64) {
        let groups = &self.model.groups;
        let Some(group) = groups.get(choices.len()) else {
            let Some(tally) = tally(self.supply, parts(groups, &choices)) else { return };
            let same = |known: &Tally| match self.cost_counts {
                true => *known == tally,
                false => known.takes == tally.takes,
            };
            if let Some((least, values, known)) = self.best.iter_mut().find(|(_, _, known)| same(known)) {
                let cost = |tally: &Tally| (tally.cost.is_none(), tally.cost);
                let nearer = distance.total_cmp(least).then_with(|| choices.cmp(values));
                if cost(&tally).cmp(&cost(known)).then(nearer).is_lt() {
                    (*least, *values, *known) = (distance, choices, tally);
                }
                return;
            }
            let cost_counts = self.cost_counts;
            if !self.best.iter().any(|(_, _, known)| known.is_within(&tally, cost_counts)) {
                self.best.retain(|(_, _, known)| !tally.is_within(known, cost_counts));
                self.best.push((distance, choices, tally));
            }
            return;
        };
        let there = groups.iter().zip(&choices).filter(|(g, _)| g.kind == group.kind).map(|(_, c)| *c);
        let there: BTreeSet<Choice> = there.collect();
        let mut candidates: Vec<Choice> =
            there.iter().copied().filter(|choice| group.shelf.contains(*choice)).collect();
        // A new one costs a part number. Only a stock can make that worth while: by leaving something unbought.
        if candidates.is_empty() || self.supply.has_stock() {
            candidates.extend(self.fresh(choices.len(), &there));
        }
        for choice in candidates {
            let mut longer = choices.clone();
            longer.push(choice);
            self.fill(longer, distance + self.distance(group, &choice));
        }
    }

    /// New choices for a group, beside those that are there: of those that serve the same of the groups still open, of
    /// which the stock holds enough for as many bodies and whose part number is alike there or not, the cheapest, and of
    /// these the nearest to the impedance level.
    fn fresh(&self, index: usize, there: &BTreeSet<Choice>) -> Vec<Choice> {
        let open = &self.model.groups[index..];
        let alike: Vec<&Group> = open.iter().filter(|g| g.kind == open[0].kind).collect();
        let bodies = alike.iter().map(|g| g.bodies()).sum::<u64>();
        let numbers: BTreeSet<(Kind, Choice)> =
            there.iter().map(|&choice| self.supply.part_number(open[0].kind, choice)).collect();
        let mut nearest: BTreeMap<Alike, (Rated, Choice)> = BTreeMap::new();
        for choice in open[0].shelf.choices().iter().filter(|choice| !there.contains(choice)) {
            let serves = alike.iter().map(|g| g.shelf.contains(*choice)).collect();
            let enough = (1..=bodies).take_while(|&b| self.supply.suffices(*choice, b)).count() as u64;
            let endless = self.supply.obtain(*choice, bodies).is_some();
            let known = numbers.contains(&self.supply.part_number(open[0].kind, *choice));
            let price = self.supply.price(*choice);
            let rank = ((price.is_none(), price), self.distance(&open[0], choice));
            let kept = nearest.entry((serves, enough, endless, known)).or_insert((rank, *choice));
            if rank < kept.0 {
                *kept = (rank, *choice);
            }
        }
        nearest.into_values().map(|(_, choice)| choice).collect()
    }
}
