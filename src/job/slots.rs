//! What may go into each slot of a section, and which slots carry the same value.

use std::collections::BTreeSet;

use super::desk::{At, Checked, Desk, Place};
use super::file::{SectionFile, SlotFile, Slots, Untie};
use super::given::Scalar;
use super::shelf::shelf;
use super::stock::Source;
use crate::circuit::{Circuit, Output};
use crate::parts::{Shelf, ShelfError};
use crate::text::suggestion;
use crate::units::{Kind, parse_part};

/// The shelves of a section by kind of part.
pub(super) struct ByKind {
    pub resistors: Checked<Shelf>,
    pub capacitors: Checked<Shelf>,
}

impl ByKind {
    fn of(&self, kind: Kind) -> Checked<&Shelf> {
        let shelf = match kind {
            Kind::Resistor => &self.resistors,
            Kind::Capacitor => &self.capacitors,
        };
        shelf.as_ref().map_err(|noted| *noted)
    }
}

/// The slots of a section as its output fills them.
pub(super) struct Board<'a> {
    pub circuit: &'a Circuit,
    pub output: &'a Output,
    pub file: &'a SectionFile,
    /// Where the section stands.
    pub place: &'a Place,
    /// What its parts are taken from.
    pub source: &'a Source,
}

impl Board<'_> {
    fn name(&self, slot: usize) -> &str {
        &self.circuit.slots[slot].name
    }

    /// The slot of that name.
    fn slot(&self, desk: &mut Desk, place: &Place, name: &str) -> Checked<usize> {
        self.circuit.slot(name).ok_or_else(|| {
            let known: Vec<&str> = self.circuit.slots.iter().map(|slot| slot.name.as_str()).collect();
            let message = format!("{} has no slot `{name}`", self.circuit.id);
            desk.note(place, message, suggestion(name, "the slots are", &known))
        })
    }

    /// The slot of that name, which the output must fill.
    fn filled(&self, desk: &mut Desk, place: &Place, name: &str) -> Checked<usize> {
        let slot = self.slot(desk, place, name)?;
        if self.output.without.contains(&slot) {
            let message = format!("the slot `{name}` stays empty for the output `{}`", self.output.name);
            return Err(desk.note(place, message, "leave it out, or take another output"));
        }
        Ok(slot)
    }

    /// The shelf of each slot.
    pub fn shelves(&self, desk: &mut Desk, of_kind: &ByKind) -> Checked<Vec<Shelf>> {
        let mut shelves: Vec<Checked<Shelf>> =
            self.circuit.slots.iter().map(|slot| of_kind.of(slot.kind).cloned()).collect();
        if let Some(At { value: Slots(slots), place }) = self.place.find("slots", &self.file.slots) {
            for (name, file) in slots {
                let place = place.key(name);
                match self.filled(desk, &place, name) {
                    Ok(slot) => shelves[slot] = self.own(desk, &place, file, slot, of_kind),
                    // One more member, so that the whole list fails.
                    Err(noted) => shelves.push(Err(noted)),
                }
            }
        }
        shelves.into_iter().collect()
    }

    /// The shelf of a slot for which the section says something.
    fn own(&self, desk: &mut Desk, place: &Place, file: &SlotFile, slot: usize, of_kind: &ByKind) -> Checked<Shelf> {
        let kind = self.circuit.slots[slot].kind;
        let part = |text: &str| parse_part(text, kind);
        if let Some(pin) = place.find("pin", &file.pin) {
            if file.shelf.is_some() || file.exclude.is_some() {
                let message = format!("`{}` is pinned and has a shelf or exclusions too", self.name(slot));
                return Err(desk.note(&pin.place, message, "leave out either the pin or the others"));
            }
            let value = desk.value(&pin.place, pin.value, part)?;
            return self.source.pinned(desk, &pin.place, kind, value);
        }
        let exclude = desk.list(place.find("exclude", &file.exclude), part);
        let own = match place.find("shelf", &file.shelf) {
            Some(at) => shelf(desk, Some(at), kind, self.source)?,
            None => of_kind.of(kind)?.clone(),
        };
        self.source.without(&own, &exclude?).ok_or_else(|| {
            desk.note(&place.of("exclude", &file.exclude), ShelfError::NothingLeft(kind).to_string(), "")
        })
    }

    /// Groups of slots that must carry the same value: ties in force and the section's own, merged where they meet.
    pub fn equal(&self, desk: &mut Desk) -> Checked<Vec<Vec<usize>>> {
        let ties = self.ties(desk);
        let own = match self.place.find("equal", &self.file.equal) {
            Some(at) => self.own_groups(desk, &at),
            None => Ok(Vec::new()),
        };
        let mut merged: Vec<BTreeSet<usize>> = Vec::new();
        for group in ties?.into_iter().chain(own?) {
            let mut whole: BTreeSet<usize> =
                group.into_iter().filter(|slot| !self.output.without.contains(slot)).collect();
            merged.retain(|known| {
                let apart = known.is_disjoint(&whole);
                if !apart {
                    whole.extend(known);
                }
                apart
            });
            merged.push(whole);
        }
        Ok(merged.into_iter().filter(|group| group.len() > 1).map(|group| group.into_iter().collect()).collect())
    }

    /// The groups that the section names, each of one kind.
    fn own_groups(&self, desk: &mut Desk, at: &At<'_, Vec<Vec<Scalar>>>) -> Checked<Vec<Vec<usize>>> {
        let groups = self.groups(desk, &at.place, at.value, |desk, place, name| self.filled(desk, place, name))?;
        let kind = |slot: usize| self.circuit.slots[slot].kind;
        for (index, group) in groups.iter().enumerate() {
            if let Some(&odd) = group.iter().find(|slot| kind(**slot) != kind(group[0])) {
                let [first, odd] = [group[0], odd].map(|slot| self.name(slot));
                let message = format!("`{first}` and `{odd}` are different kinds of part");
                return Err(desk.note(&at.place.item(index), message, "name resistors only, or capacitors only"));
            }
        }
        Ok(groups)
    }

    /// The ties of the circuit that the section leaves in force.
    fn ties(&self, desk: &mut Desk) -> Checked<Vec<Vec<usize>>> {
        let ties = &self.circuit.ties;
        let Some(At { value, place }) = self.place.find("untie", &self.file.untie) else { return Ok(ties.clone()) };
        let groups = match value {
            Untie::All(true) => return Ok(Vec::new()),
            Untie::All(false) => return Ok(ties.clone()),
            Untie::Groups(groups) => {
                self.groups(desk, &place, groups, |desk, place, name| self.slot(desk, place, name))?
            }
        };
        let set = |group: &[usize]| group.iter().copied().collect::<BTreeSet<usize>>();
        let untied: Vec<BTreeSet<usize>> = groups.iter().map(|group| set(group)).collect();
        if let Some(index) = untied.iter().position(|group| !ties.iter().any(|tie| set(tie) == *group)) {
            let names = |group: &[usize]| group.iter().map(|&slot| self.name(slot)).collect::<Vec<_>>().join(" and ");
            let message = format!("{} does not tie {}", self.circuit.id, names(&groups[index]));
            let tied: Vec<String> = ties.iter().map(|tie| names(tie)).collect();
            let help = if tied.is_empty() { "it has no ties".into() } else { format!("it ties {}", tied.join("; ")) };
            return Err(desk.note(&place.item(index), message, help));
        }
        Ok(ties.iter().filter(|tie| !untied.contains(&set(tie))).cloned().collect())
    }

    /// The slots of groups of names.
    fn groups(
        &self,
        desk: &mut Desk,
        place: &Place,
        groups: &[Vec<Scalar>],
        slot: impl Fn(&mut Desk, &Place, &str) -> Checked<usize>,
    ) -> Checked<Vec<Vec<usize>>> {
        let mut found = Vec::new();
        for (i, group) in groups.iter().enumerate() {
            let place = place.item(i);
            found.push(group.iter().enumerate().map(|(k, name)| slot(desk, &place.item(k), name.text())).collect());
        }
        found.into_iter().collect()
    }

    /// Narrows the shelves of equal slots to the values that they have in common.
    pub fn narrow(&self, desk: &mut Desk, shelves: &mut [Shelf], equal: &[Vec<usize>]) -> Checked<()> {
        for group in equal {
            let mut others = group.iter().map(|&slot| &shelves[slot]);
            let first = others.next().cloned();
            let Some(common) = first.and_then(|first| others.try_fold(first, |all, shelf| all.intersection(shelf)))
            else {
                let names: Vec<&str> = group.iter().map(|&slot| self.name(slot)).collect();
                let names = names.join(" and ");
                let message = format!("{names} must carry the same value, but their shelves share none");
                let place = match self.file.equal {
                    Some(_) => self.place.of("equal", &self.file.equal),
                    None => self.place.of("slots", &self.file.slots),
                };
                return Err(desk.note(&place, message, "let their shelves or pins agree, or untie them"));
            };
            for &slot in group {
                shelves[slot] = common.clone();
            }
        }
        Ok(())
    }
}
