//! One representative for all sets that differ only by a decade of impedance or by interchangeable slots.

use std::collections::{BTreeMap, BTreeSet};

use crate::units::{Kind, Value};

use super::front::{ErrorKey, Found};
use super::model::{Group, Model};
use super::problem::Goals;

/// How many different values there are, resistors and capacitors counted apart.
pub(crate) fn distinct(groups: &[Group], values: &[Value]) -> usize {
    groups.iter().map(|g| g.kind).zip(values).collect::<BTreeSet<_>>().len()
}

/// The representative of all sets that differ from this one by a decade of impedance or by interchangeable slots, with
/// the silent groups filled; `None` if none of them lies in the wanted impedance range. Its error is not yet known.
pub(crate) fn canonical(model: &Model, goals: &Goals, values: &[Value]) -> Option<Found> {
    let groups = model.active_groups();
    // No shelf spans more decades than this.
    const DECADES: i32 = 40;
    let at_level = |level: i32| -> Option<Vec<Value>> {
        let shifted = shifted(groups, values, level)?;
        let wanted = goals.impedance.is_none_or(|(from, to)| {
            impedance(groups, &in_ohms(&shifted)).is_none_or(|level| (from..=to).contains(&level))
        });
        wanted.then(|| with_silent(model, shifted))
    };
    let levels: Vec<(i32, Vec<Value>)> = (-DECADES..=DECADES).filter_map(|k| Some((k, at_level(k)?))).collect();
    let count = |values: &[Value]| distinct(&model.groups, values);
    let part_numbers = levels.iter().map(|(_, values)| count(values)).min()?;
    let cheapest: Vec<&(i32, Vec<Value>)> = levels.iter().filter(|(_, v)| count(v) == part_numbers).collect();
    let (lowest, base) = cheapest.first()?;
    let levels = cheapest.iter().map(|(k, _)| k - lowest).collect();
    let image = |order: &Vec<usize>| {
        let mut image: Vec<Value> = order.iter().map(|&k| base[k]).collect();
        image.extend(&base[model.active..]);
        image
    };
    let values = model.symmetries.iter().map(image).chain([base.clone()]).min()?;
    let error = f64::INFINITY;
    Some(Found { error, key: ErrorKey::new(error), part_numbers, values, levels })
}

/// The impedance level: geometric mean of the resistances, ohms; `None` without a resistor. Values in ohms and farads.
pub(crate) fn impedance(groups: &[Group], values: &[f64]) -> Option<f64> {
    let logs: Vec<f64> = (groups.iter().zip(values))
        .filter(|(g, _)| g.kind == Kind::Resistor)
        .flat_map(|(g, v)| std::iter::repeat_n(v.ln(), g.slots.len()))
        .collect();
    (!logs.is_empty()).then(|| (logs.iter().sum::<f64>() / logs.len() as f64).exp())
}

/// Part values as ohms and farads.
pub(crate) fn in_ohms(values: &[Value]) -> Vec<f64> {
    values.iter().map(|v| v.to_f64()).collect()
}

/// The values at another impedance level: resistors times a power of ten, capacitors divided by it; `None` if the
/// shelves do not have them.
pub(crate) fn shifted(groups: &[Group], values: &[Value], level: i32) -> Option<Vec<Value>> {
    let shift = |(group, value): (&Group, &Value)| {
        let decades = if group.kind == Kind::Resistor { level } else { -level };
        value.shifted(decades).filter(|v| group.shelf.contains(*v))
    };
    groups.iter().zip(values).map(shift).collect()
}

/// Adds values for the groups that do not reach the response, with as few new part numbers as possible: a value already
/// there (the one nearest to the impedance level), else one of a smallest set of values that serves all that are left.
pub(crate) fn with_silent(model: &Model, active: Vec<Value>) -> Vec<Value> {
    let silent = model.silent_groups();
    let level = impedance(model.active_groups(), &in_ohms(&active));
    let distance = |group: &Group, v: &Value| {
        let (low, high) = group.shelf.span();
        let middle = (low.to_f64() * high.to_f64()).sqrt();
        let wanted = if group.kind == Kind::Resistor { level.unwrap_or(middle) } else { middle };
        (v.to_f64() / wanted).ln().abs()
    };
    let nearest = |group: &Group, values: &mut dyn Iterator<Item = Value>| {
        values
            .filter(|v| group.shelf.contains(*v))
            .min_by(|a, b| distance(group, a).total_cmp(&distance(group, b)).then(a.cmp(b)))
    };
    let there = |kind: Kind| {
        let alike = model.active_groups().iter().zip(&active).filter(move |(g, _)| g.kind == kind);
        alike.map(|(_, v)| *v)
    };
    let mut chosen: Vec<Option<Value>> = silent.iter().map(|g| nearest(g, &mut there(g.kind))).collect();
    for kind in [Kind::Resistor, Kind::Capacitor] {
        let left: Vec<usize> = (0..silent.len()).filter(|&i| chosen[i].is_none() && silent[i].kind == kind).collect();
        let fresh = fewest_values(&left.iter().map(|&i| &silent[i]).collect::<Vec<_>>(), &distance);
        left.into_iter().for_each(|i| chosen[i] = nearest(&silent[i], &mut fresh.iter().copied()));
    }
    active.into_iter().chain(chosen.into_iter().flatten()).collect()
}

/// A smallest set of values such that each group's shelf has one of them.
fn fewest_values(groups: &[&Group], distance: &dyn Fn(&Group, &Value) -> f64) -> Vec<Value> {
    // Values that serve the same groups are alike: of them the nearest to the first group's level is kept.
    let mut serving: BTreeMap<Vec<bool>, Value> = BTreeMap::new();
    for group in groups {
        for v in group.shelf.values() {
            let serves = groups.iter().map(|g| g.shelf.contains(*v)).collect();
            let kept = serving.entry(serves).or_insert(*v);
            if distance(groups[0], v) < distance(groups[0], kept) {
                *kept = *v;
            }
        }
    }
    let candidates: Vec<(Vec<bool>, Value)> = serving.into_iter().collect();
    (0..=groups.len()).find_map(|size| cover(&candidates, &vec![false; groups.len()], size)).unwrap_or_default()
}

/// At most `size` of the candidates that together serve all groups not yet served.
fn cover(candidates: &[(Vec<bool>, Value)], served: &[bool], size: usize) -> Option<Vec<Value>> {
    let Some(open) = served.iter().position(|s| !s) else { return Some(Vec::new()) };
    let size = size.checked_sub(1)?;
    candidates.iter().filter(|(serves, _)| serves[open]).find_map(|(serves, value)| {
        let now: Vec<bool> = served.iter().zip(serves).map(|(a, b)| a | b).collect();
        let mut rest = cover(candidates, &now, size)?;
        rest.push(*value);
        Some(rest)
    })
}
