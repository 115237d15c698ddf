//! Why a stock cannot suffice, whatever the response: what pinned and tied slots need of one part beside what there is.

use std::collections::BTreeMap;

use crate::parts::{Choice, Supply};
use crate::units::{Kind, format_part};

use super::model::{Group, Model};
use super::problem::Problem;

/// The needs of a section that the stock cannot meet, each as the inequality that fails.
///
/// A group of slots that carries one value needs all its bodies from one lot. A value to which slots are pinned is needed
/// by all of them together, over the whole filter; such a shortage is told at the first section concerned.
pub(crate) fn shortages(problem: &Problem, section: usize) -> Vec<String> {
    let supply = &problem.supply;
    if !supply.has_stock() {
        return Vec::new();
    }
    let models: Vec<Option<Model>> = problem.sections.iter().map(|s| Model::new(s, supply)).collect();
    let mut found = Vec::new();
    let mut pinned: BTreeMap<(Kind, Choice), Vec<(usize, &Group)>> = BTreeMap::new();
    for (index, model) in models.iter().enumerate() {
        let paired = |group: &Group| {
            let joints = &problem.sections[index].pairs.joints;
            group.slots.iter().all(|&slot| joints.get(slot).is_some_and(|joints| !joints.is_empty()))
        };
        for group in
            model.iter().flat_map(|model| &model.groups).filter(|group| !paired(group) && !supply.buys(group.kind))
        {
            match group.shelf.choices() {
                &[only] => pinned.entry((group.kind, only)).or_default().push((index, group)),
                choices if index == section && !choices.iter().any(|&c| supply.suffices(c, group.bodies())) => {
                    let most = choices.iter().max_by_key(|&&c| supply.lot_of(c).and_then(|lot| lot.available));
                    let Some(&most) = most else { continue };
                    let names = names(problem, index, group);
                    let what = if group.slots.len() > 1 { format!("{names} alike") } else { names };
                    found.push(inequality(supply, &what, most, group.kind, group.bodies()));
                }
                _ => {}
            }
        }
    }
    for ((kind, choice), places) in pinned {
        let bodies = places.iter().map(|(_, group)| group.bodies()).sum();
        if places[0].0 == section && !supply.suffices(choice, bodies) {
            let place = |&(index, group): &(usize, &Group)| match index != section {
                true => format!("{} {}", problem.sections[index].target.name, names(problem, index, group)),
                false => names(problem, index, group),
            };
            let what = places.iter().map(place).collect::<Vec<_>>().join(", ");
            found.push(inequality(supply, &what, choice, kind, bodies));
        }
    }
    found
}

fn names(problem: &Problem, section: usize, group: &Group) -> String {
    let slots = &problem.sections[section].circuit.slots;
    group.slots.iter().map(|&slot| slots[slot].name.as_str()).collect::<Vec<_>>().join("=")
}

/// Such as `R1=R2 alike: 2 x 10 boards + 3 spares = 23 of one part needed, 12 of 10k in stock`.
fn inequality(supply: &Supply, what: &str, choice: Choice, kind: Kind, bodies: u64) -> String {
    let boards = match supply.boards {
        1 => "1 board".to_string(),
        boards => format!("{boards} boards"),
    };
    let spares = match supply.spares {
        0 => String::new(),
        1 => " + 1 spare".to_string(),
        spares => format!(" + {spares} spares"),
    };
    let need = supply.need(choice, bodies);
    let there = supply.lot_of(choice).and_then(|lot| lot.available).unwrap_or(0);
    let value = format_part(choice.value, kind);
    format!("{what}: {bodies} x {boards}{spares} = {need} of one part needed, {there} of {value} in stock")
}
