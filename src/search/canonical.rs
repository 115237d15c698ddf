//! One representative for all sets that differ only by a decade of impedance or by interchangeable slots.

use std::collections::BTreeSet;

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
    Some(Found { key: ErrorKey::new(f64::INFINITY), part_numbers, values, levels })
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
/// there (the one nearest to the impedance level), else one that serves as many of the silent groups as possible.
pub(crate) fn with_silent(model: &Model, mut values: Vec<Value>) -> Vec<Value> {
    for (index, group) in model.silent_groups().iter().enumerate() {
        let groups = &model.groups[..model.active + index];
        let middle = impedance(groups, &in_ohms(&values)).filter(|_| group.kind == Kind::Resistor);
        let middle = middle.unwrap_or_else(|| {
            let (low, high) = group.shelf.span();
            (low.to_f64() * high.to_f64()).sqrt()
        });
        let distance = |v: &Value| (v.to_f64() / middle).ln().abs();
        let there = groups.iter().zip(&values).filter(|(g, _)| g.kind == group.kind).map(|(_, v)| *v);
        let reused = there
            .filter(|v| group.shelf.contains(*v))
            .min_by(|a, b| distance(a).total_cmp(&distance(b)).then(a.cmp(b)));
        let later = &model.silent_groups()[index + 1..];
        let serves = |v: &Value| later.iter().filter(|g| g.kind == group.kind && g.shelf.contains(*v)).count();
        let fresh = || {
            let rank = |v: &Value| (std::cmp::Reverse(serves(v)), (distance(v) * 1e9) as u64, *v);
            group.shelf.values().iter().copied().min_by_key(rank)
        };
        values.extend(reused.or_else(fresh));
    }
    values
}
