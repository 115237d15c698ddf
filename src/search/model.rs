//! One section made ready for the search: groups of slots that carry one value, and which of them matter.

use std::collections::BTreeSet;
use std::ops::Range;

use crate::circuit::{Polynomial, Transfer};
use crate::parts::{Choice, Lot, Shelf, Supply};
use crate::target::Biquad;
use crate::units::Kind;

use super::problem::{Joint, SectionProblem};

/// Parts that are alike: those of slots that must be equal, or that of a single slot; where a slot holds a pair, one of
/// its two.
#[derive(Clone, Debug)]
pub(crate) struct Group {
    /// Slot indices, ascending.
    pub slots: Vec<usize>,
    /// Resistors or capacitors.
    pub kind: Kind,
    /// What may go into all of them.
    pub shelf: Shelf,
    /// For one of a pair: how it is joined with the group of the same slots.
    pub joint: Option<Joint>,
}

impl Group {
    /// How many bodies it places.
    pub fn bodies(&self) -> u64 {
        self.slots.len() as u64
    }
}

/// A section in terms of groups. The first [`Model::active`] groups reach the response, the others do not.
#[derive(Clone, Debug)]
pub(crate) struct Model {
    /// All groups of filled slots, those that reach the response first.
    pub groups: Vec<Group>,
    /// How many of them reach the response.
    pub active: usize,
    /// How many of them belong to each section, in order: all to one, but for whole boards.
    pub blocks: Vec<usize>,
    /// The transfer function in the admittances of the active groups.
    pub transfer: Transfer,
    /// Permutations of the active groups, the identity left out, that leave response and shelves as they are.
    pub symmetries: Vec<Vec<usize>>,
    /// Bodies on the board.
    pub placed_parts: usize,
    /// Part numbers that any set needs beside those of the active groups: 1 where a silent group's shelf shares no value
    /// with any active one, a lower bound where several do so.
    pub least_extra: usize,
    /// Whether several resistors, or several capacitors, of different value may be one part number: measured parts of one
    /// nominal value.
    pub measured: [bool; 2],
}

impl Model {
    /// The section with single parts, and with pairs in each way that is allowed, by placed parts; none if slots that must
    /// be equal share no value. Of ways that interchangeable slots make alike one is given.
    pub fn forms(section: &SectionProblem, supply: &Supply) -> Vec<Model> {
        let Some(single) = Model::new(section, supply) else { return Vec::new() };
        let allowed: Vec<Vec<Option<Joint>>> = (single.active_groups().iter())
            .map(|group| {
                let both = [Joint::Series, Joint::Parallel].into_iter();
                let everywhere = |joint: &Joint| {
                    group.slots.iter().all(|&s| section.pairs.joints.get(s).is_some_and(|j| j.contains(joint)))
                };
                [None].into_iter().chain(both.filter(everywhere).map(Some)).collect()
            })
            .collect();
        let mut ways: Vec<Vec<Option<Joint>>> = vec![Vec::new()];
        for choices in &allowed {
            ways =
                ways.iter().flat_map(|way| choices.iter().map(move |&j| [way.as_slice(), &[j]].concat())).collect();
            ways.retain(|way| {
                let pairs = way.iter().zip(single.active_groups()).filter(|(joint, _)| joint.is_some());
                pairs.map(|(_, group)| group.slots.len()).sum::<usize>() <= section.pairs.most
            });
        }
        ways.retain(|way| {
            !single.symmetries.iter().any(|order| {
                let image: Vec<Option<Joint>> = order.iter().map(|&k| way[k]).collect();
                image < *way && image.iter().zip(&allowed).all(|(joint, allowed)| allowed.contains(joint))
            })
        });
        let mut forms: Vec<Model> = ways.iter().map(|way| single.with_pairs(way)).collect();
        forms.sort_by_key(|form| form.placed_parts);
        forms
    }

    /// The same section with pairs in the active groups for which a joint is given.
    fn with_pairs(&self, joints: &[Option<Joint>]) -> Model {
        let mut form = self.clone();
        let silent = form.groups.split_off(self.active);
        for (index, &joint) in joints.iter().enumerate() {
            let Some(joint) = joint else { continue };
            form.transfer = form.transfer.paired(index, joint == Joint::Series);
            form.groups[index].joint = Some(joint);
            form.groups.push(form.groups[index].clone());
            form.placed_parts += form.groups[index].slots.len();
        }
        form.active = form.groups.len();
        form.blocks = vec![form.active];
        form.symmetries = symmetries(&form.transfer, &form.groups);
        form.groups.extend(silent);
        form
    }

    /// Groups the slots of a section; `None` if slots that must be equal share no value.
    pub fn new(section: &SectionProblem, supply: &Supply) -> Option<Model> {
        let output = section.output();
        let filled: Vec<usize> = output.filled(&section.circuit).collect();
        let mut lists: Vec<Vec<usize>> = Vec::new();
        for &slot in &filled {
            match section.equal.iter().find(|group| group.contains(&slot)) {
                Some(group) if lists.iter().any(|list| group.contains(&list[0])) => {
                    let list = lists.iter_mut().find(|list| group.contains(&list[0]))?;
                    list.push(slot);
                }
                _ => lists.push(vec![slot]),
            }
        }
        let mut groups = Vec::new();
        for slots in lists {
            let mut shelf = section.shelves[slots[0]].clone();
            for &slot in &slots[1..] {
                shelf = shelf.intersection(&section.shelves[slot])?;
            }
            groups.push(Group { kind: section.circuit.slots[slots[0]].kind, slots, shelf, joint: None });
        }
        let place = |groups: &[Group]| -> Vec<Option<usize>> {
            (0..section.circuit.slots.len()).map(|slot| groups.iter().position(|g| g.slots.contains(&slot))).collect()
        };
        let merged = output.transfer.substituted(&place(&groups), groups.len());
        let (mut active, silent): (Vec<_>, Vec<_>) =
            groups.into_iter().enumerate().partition(|(i, _)| merged.depends_on(*i));
        // A group that does not reach the response may still stand in N and D as a common factor: setting it to any
        // value leaves the ratio, so keep the leading coefficient in it.
        let mut transfer = merged;
        for (index, _) in &silent {
            transfer = without_factor(&transfer, *index);
        }
        let mut map = vec![None; active.len() + silent.len()];
        for (new, (old, _)) in active.iter().enumerate() {
            map[*old] = Some(new);
        }
        let transfer = transfer.substituted(&map, active.len());
        let count = active.len();
        active.extend(silent);
        let groups: Vec<Group> = active.into_iter().map(|(_, group)| group).collect();
        let symmetries = symmetries(&transfer, &groups[..count]);
        let apart = |silent: &Group| {
            let alike = groups[..count].iter().filter(|g| g.kind == silent.kind);
            alike.into_iter().all(|g| g.shelf.intersection(&silent.shelf).is_none())
        };
        let least_extra = usize::from(groups[count..].iter().any(apart));
        let measured = [Kind::Resistor, Kind::Capacitor].map(|kind| {
            let choices = groups[..count].iter().filter(|g| g.kind == kind).flat_map(|g| g.shelf.choices());
            let is_there = |lot: &Lot| lot.measured.is_some() && lot.available != Some(0);
            choices.into_iter().any(|&choice| supply.lot_of(choice).is_some_and(is_there))
        });
        Some(Model {
            groups,
            active: count,
            blocks: vec![count],
            transfer,
            symmetries,
            placed_parts: filled.len(),
            least_extra,
            measured,
        })
    }

    /// The active groups.
    pub fn active_groups(&self) -> &[Group] {
        &self.groups[..self.active]
    }

    /// The active groups of each section.
    pub fn sections(&self) -> impl Iterator<Item = Range<usize>> + '_ {
        let mut next = 0;
        self.blocks.iter().map(move |&size| {
            next += size;
            next - size..next
        })
    }

    /// The groups that do not reach the response.
    pub fn silent_groups(&self) -> &[Group] {
        &self.groups[self.active..]
    }

    /// The transfer function for values of the active groups.
    pub fn biquad(&self, choices: &[Choice]) -> Biquad {
        let values: Vec<f64> = choices.iter().map(|choice| choice.value.to_f64()).collect();
        self.biquad_of(&values)
    }

    /// The transfer function for values of the active groups in ohms and farads.
    pub fn biquad_of(&self, values: &[f64]) -> Biquad {
        let (n, d) = self.transfer.coefficients(values);
        let fixed = |list: Vec<f64>| [0, 1, 2].map(|k| list.get(k).copied().unwrap_or(0.0));
        Biquad { num: fixed(n), den: fixed(d) }
    }

    /// Which numerator coefficients can be other than zero.
    pub fn numerator(&self) -> [bool; 3] {
        [0, 1, 2].map(|k| self.transfer.numerator.get(k).is_some_and(|p| !p.is_empty()))
    }

    /// The fewest and the most part numbers of sets with so many different choices of resistors and of capacitors.
    pub fn part_numbers_of(&self, resistors: usize, capacitors: usize) -> (usize, usize) {
        let least = |count: usize, measured: bool| if measured { count.min(1) } else { count };
        (least(resistors, self.measured[0]) + least(capacitors, self.measured[1]), resistors + capacitors)
    }

    /// How many active groups of resistors and of capacitors there are.
    pub fn kinds(&self) -> (usize, usize) {
        let resistors = self.active_groups().iter().filter(|g| g.kind == Kind::Resistor).count();
        (resistors, self.active - resistors)
    }

    /// The fewest and the most part numbers that any set needs.
    pub fn part_numbers(&self) -> (usize, usize) {
        let (resistors, capacitors) = self.kinds();
        let (fewest, _) = self.part_numbers_of(resistors.min(1), capacitors.min(1));
        (fewest + self.least_extra, resistors + capacitors + self.least_extra)
    }

    /// Whether measured parts may be among the active ones.
    pub fn is_measured(&self) -> bool {
        self.measured.contains(&true)
    }

    /// The ways to share so many choices of resistors and of capacitors among the active groups: the number of the choice
    /// of each group. Of ways that a symmetry maps onto each other one is given.
    pub fn members(&self, of_resistors: usize, of_capacitors: usize) -> Vec<Vec<usize>> {
        let (resistors, capacitors) = self.kinds();
        let mut members = Vec::new();
        for by_resistor in partitions(resistors, of_resistors) {
            for by_capacitor in partitions(capacitors, of_capacitors) {
                let (mut next_r, mut next_c) = (by_resistor.iter(), by_capacitor.iter());
                let next = |group: &Group| match group.kind {
                    Kind::Resistor => next_r.next().copied(),
                    Kind::Capacitor => next_c.next().map(|c| c + of_resistors),
                };
                let member: Vec<usize> = self.active_groups().iter().filter_map(next).collect();
                let own = renumbered(&member, of_resistors);
                let mirrored = self.symmetries.iter().any(|order| {
                    let image: Vec<usize> = order.iter().map(|&k| member[k]).collect();
                    renumbered(&image, of_resistors) < own
                });
                if !mirrored {
                    members.push(member);
                }
            }
        }
        members
    }

    /// Whether the silent groups can always take a value that is there already, so that they never cost a part number.
    pub fn silent_groups_are_free(&self) -> bool {
        self.silent_groups().iter().all(|silent| {
            let mut alike = self.active_groups().iter().filter(|g| g.kind == silent.kind).peekable();
            alike.peek().is_some() && alike.all(|g| g.shelf.choices().iter().all(|c| silent.shelf.contains(*c)))
        })
    }

    /// How many combinations of shelf values there are for the active groups.
    pub fn combinations(&self) -> f64 {
        self.active_groups().iter().map(|g| g.shelf.len() as f64).product()
    }
}

/// Removes a variable on which the ratio does not depend: the leading coefficient in it, of all coefficients alike.
fn without_factor(transfer: &Transfer, variable: usize) -> Transfer {
    let degree = |list: &[Polynomial]| list.iter().map(|p| p.degree_in(variable)).max().unwrap_or(0);
    let lead = |list: &[Polynomial]| {
        let top = degree(list);
        list.iter().map(|p| p.coefficient_of(variable, top)).collect()
    };
    Transfer {
        numerator: lead(&transfer.numerator),
        denominator: lead(&transfer.denominator),
        capacitors: transfer.capacitors.clone(),
    }
}

/// Swaps of two groups, and pairs of disjoint swaps, that leave the response and the shelves unchanged.
fn symmetries(transfer: &Transfer, groups: &[Group]) -> Vec<Vec<usize>> {
    let n = groups.len();
    let swappable = |a: usize, b: usize| {
        groups[a].kind == groups[b].kind
            && groups[a].shelf == groups[b].shelf
            && groups[a].slots.len() == groups[b].slots.len()
    };
    let pairs: Vec<(usize, usize)> =
        (0..n).flat_map(|a| (a + 1..n).map(move |b| (a, b))).filter(|&(a, b)| swappable(a, b)).collect();
    let swapped = |list: &[(usize, usize)]| {
        let mut order: Vec<usize> = (0..n).collect();
        list.iter().for_each(|&(a, b)| order.swap(a, b));
        order
    };
    let mut found = Vec::new();
    for (i, &first) in pairs.iter().enumerate() {
        let single = swapped(&[first]);
        if transfer.is_invariant_under(&single) {
            found.push(single);
            continue;
        }
        for &second in &pairs[i + 1..] {
            let disjoint = ![first.0, first.1].iter().any(|k| [second.0, second.1].contains(k));
            let both = swapped(&[first, second]);
            if disjoint && transfer.is_invariant_under(&both) {
                found.push(both);
            }
        }
    }
    closure(found, n)
}

/// The group that the permutations generate, the identity left out, in a fixed order; or only the permutations
/// themselves where the group is very large. Any part of it is sound: it then lists some sets twice.
fn closure(generators: Vec<Vec<usize>>, n: usize) -> Vec<Vec<usize>> {
    const LARGEST: usize = 1_000;
    let identity: Vec<usize> = (0..n).collect();
    let mut all = BTreeSet::from([identity.clone()]);
    let mut open = vec![identity.clone()];
    while let Some(order) = open.pop() {
        for generator in &generators {
            let product: Vec<usize> = order.iter().map(|&k| generator[k]).collect();
            if all.insert(product.clone()) {
                open.push(product);
            }
        }
        if all.len() > LARGEST {
            return generators;
        }
    }
    all.remove(&identity);
    all.into_iter().collect()
}

/// The same partition with its blocks numbered by first appearance, resistors (blocks below `r`) and capacitors apart.
fn renumbered(member: &[usize], r: usize) -> Vec<usize> {
    let mut names: Vec<usize> = Vec::new();
    let mut number = |block: usize| {
        names.iter().position(|&n| n == block).unwrap_or_else(|| {
            names.push(block);
            names.len() - 1
        })
    };
    member.iter().map(|&block| 2 * number(block) + usize::from(block >= r)).collect()
}

/// Set partitions of `n` items into exactly `blocks` blocks, as block numbers by item: the first item is in block 0, each
/// new block takes the next number.
fn partitions(n: usize, blocks: usize) -> Vec<Vec<usize>> {
    fn extend(prefix: &mut Vec<usize>, used: usize, n: usize, blocks: usize, out: &mut Vec<Vec<usize>>) {
        let left = n - prefix.len();
        if used + left < blocks {
            return;
        }
        if left == 0 {
            out.push(prefix.clone());
            return;
        }
        for block in 0..(used + 1).min(blocks) {
            prefix.push(block);
            extend(prefix, used.max(block + 1), n, blocks, out);
            prefix.pop();
        }
    }
    let mut out = Vec::new();
    if blocks <= n {
        extend(&mut Vec::new(), 0, n, blocks, &mut out);
    }
    out
}

#[cfg(test)]
mod tests {
    use super::partitions;

    #[test]
    fn partitions_are_counted_by_stirling_numbers() {
        // Stirling numbers of the second kind S(6, k), Abramowitz & Stegun, table 24.4.
        let counts: Vec<usize> = (0..=6).map(|k| partitions(6, k).len()).collect();
        assert_eq!(counts, [0, 1, 31, 90, 65, 15, 1]);
        assert_eq!(partitions(0, 0), [Vec::<usize>::new()]);
        assert!(partitions(2, 0).is_empty() && partitions(0, 1).is_empty());
    }
}
