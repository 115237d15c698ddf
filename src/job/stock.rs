//! The stock of a job: how many boards it shall do for, what may be bought beside it, and which of it may go where.

use std::collections::BTreeSet;

use super::desk::{At, Checked, Desk, Place};
use super::file::{JobFile, PairsFile};
use super::goals::whole;
use crate::circuit::Circuit;
use crate::parts::{Buying, Choice, Lot, LotId, Shelf, Stock, Supply};
use crate::search::{Joint, Pairs, Rank};
use crate::units::{Kind, Value, format_part};

/// What may be taken from stock or bought; by default everything on a shelf.
#[derive(Default)]
pub(super) struct Source {
    pub supply: Supply,
    /// Whether ceramics of class 2 are left in the drawer.
    bar_class_2: bool,
}

impl Source {
    /// The source of a job; `stock` is its stock list as read.
    pub fn new(desk: &mut Desk, job: &JobFile, stock: Option<&Stock>) -> Checked<Source> {
        let root = Place::job();
        let most = Supply::MOST as usize;
        let boards = desk.optional(root.find("boards", &job.boards), whole("boards", 1, most));
        let spares = desk.optional(root.find("spares", &job.spares), whole("spares", 0, most));
        let buying = desk.optional(root.find("buy", &job.buy), buying);
        let mut supply = stock.map_or_else(Supply::default, Supply::of_stock);
        if let Some(stock) = stock {
            let place = root.of("stock", &job.stock);
            let skip = job.skip_bad_lines.as_ref().is_some_and(|given| given.value);
            if !stock.faults.is_empty() && !skip {
                let file = job.stock.as_ref().map_or("", |given| given.value.text());
                for fault in &stock.faults {
                    desk.note(&place, format!("{file}: {fault}"), "");
                }
                let help = "correct them, or leave them out with skip_bad_lines: true or --skip-bad-lines";
                return Err(desk.note(&place, "the stock list has lines that cannot be used", help));
            }
            if stock.lines.is_empty() {
                return Err(desk.note(&place, "no line of the stock list can be used", "list at least one part"));
            }
        } else {
            for (name, place) in [
                ("boards", job.boards.is_some().then(|| root.of("boards", &job.boards))),
                (
                    "own_set_per_board",
                    job.own_set_per_board.is_some().then(|| root.of("own_set_per_board", &job.own_set_per_board)),
                ),
                ("spares", job.spares.is_some().then(|| root.of("spares", &job.spares))),
                ("buy", job.buy.is_some().then(|| root.of("buy", &job.buy))),
                ("bar_class_2", job.bar_class_2.is_some().then(|| root.of("bar_class_2", &job.bar_class_2))),
                (
                    "skip_bad_lines",
                    job.skip_bad_lines.is_some().then(|| root.of("skip_bad_lines", &job.skip_bad_lines)),
                ),
            ] {
                if let Some(place) = place {
                    desk.note(
                        &place,
                        format!("{name} says nothing without a stock list"),
                        "name one with stock or --stock",
                    );
                }
            }
        }
        supply.boards = boards?.unwrap_or(1) as u64;
        supply.spares = spares?.unwrap_or(0) as u64;
        if stock.is_some() {
            (supply.buying, supply.buying_only) = buying?.unwrap_or_default();
        }
        Ok(Source { supply, bar_class_2: job.bar_class_2.as_ref().is_some_and(|given| given.value) })
    }

    /// The choices of a kind: from stock those whose label `is_wanted`, and of `series` what may be bought. Without a
    /// stock list all of `series`.
    pub fn choices(&self, kind: Kind, series: Vec<Value>, is_wanted: impl Fn(Value) -> bool) -> Vec<Choice> {
        if !self.supply.has_stock() {
            return series.into_iter().map(Choice::from).collect();
        }
        let usable =
            |lot: &Lot| lot.kind == kind && is_wanted(lot.nominal) && !(self.bar_class_2 && lot.is_class_2());
        let of_lot = |(id, lot): (LotId, &Lot)| Choice { value: lot.value(), lot: Some(id) };
        let mut choices: Vec<Choice> = self.supply.lots().filter(|(_, lot)| usable(lot)).map(of_lot).collect();
        if self.supply.buys(kind) {
            // What the list names, in stock or not, is bought by its line.
            let listed = |value: &Value| {
                self.supply.lots().any(|(_, lot)| usable(lot) && lot.measured.is_none() && lot.nominal == *value)
            };
            choices.extend(series.into_iter().filter(|value| !listed(value)).map(Choice::from));
        }
        choices
    }

    /// Whether parts of a kind stay in the drawer for being of class 2.
    pub fn has_barred(&self, kind: Kind) -> bool {
        self.bar_class_2 && self.supply.lots().any(|(_, lot)| lot.kind == kind && lot.is_class_2())
    }

    /// Whether parts of a value stay in the drawer for being of class 2.
    fn bars(&self, kind: Kind, value: Value) -> bool {
        let of_value = |lot: &Lot| lot.kind == kind && lot.nominal == value && lot.is_class_2();
        self.bar_class_2 && self.supply.lots().any(|(_, lot)| of_value(lot))
    }

    /// A shelf without the choices whose label is one of `excluded`.
    pub fn without(&self, shelf: &Shelf, excluded: &[Value]) -> Option<Shelf> {
        shelf.filtered(|&choice| !excluded.contains(&self.label(choice)))
    }

    fn label(&self, choice: Choice) -> Value {
        self.supply.lot_of(choice).map_or(choice.value, |lot| lot.nominal)
    }

    /// The shelf of a slot that is pinned to one value.
    pub fn pinned(&self, desk: &mut Desk, place: &Place, kind: Kind, value: Value) -> Checked<Shelf> {
        let choices = self.choices(kind, vec![value], |label| label == value);
        if choices.is_empty() && kind.allows(value) && self.bars(kind, value) {
            let message =
                format!("{} is in stock in class 2 ceramics only, which are barred", format_part(value, kind));
            return Err(desk.note(place, message, "lift the bar on class 2, pin to another value, or allow buying"));
        }
        if choices.is_empty() && kind.allows(value) {
            let message = format!("{} is not in stock, and nothing may be bought", format_part(value, kind));
            return Err(desk.note(place, message, "pin to a value in stock, or allow buying with buy or --buy"));
        }
        Shelf::of_choices(kind, choices).map_err(|error| desk.note(place, error.to_string(), ""))
    }
}

/// How much may be bought, and of which kind only.
fn buying(text: &str) -> Result<(Buying, Option<Kind>), String> {
    let (kind, count) = match text.split_once(':') {
        Some((kind, count)) => (kind, count),
        None if ["resistors", "capacitors"].contains(&text) => (text, "any"),
        None => ("", text),
    };
    let only = match kind {
        "" => None,
        "resistors" => Some(Kind::Resistor),
        "capacitors" => Some(Kind::Capacitor),
        _ => return Err(format!("`{kind}` is no kind of part: write resistors or capacitors, as in resistors:2")),
    };
    let most = match count {
        "none" | "0" => Buying::Forbidden,
        "any" => Buying::Allowed,
        _ => match count.parse() {
            Ok(most) if most <= 1000 => Buying::AtMost(most),
            _ => {
                return Err(format!(
                    "buy must be none, any, resistors, capacitors, or a number of part numbers up to 1000, found {text}"
                ));
            }
        },
    };
    Ok((most, only))
}

/// Checks that rows can be ranked as wanted.
pub(super) fn check_rank(desk: &mut Desk, job: &JobFile, source: &Source, shelves: &[&Shelf]) {
    let Some(At { value: rank, place }) = Place::job().find("rank", &job.rank) else { return };
    let supply = &source.supply;
    match rank.searched() {
        Rank::Error | Rank::PartNumbers | Rank::PlacedParts => {}
        Rank::ToBuy if supply.has_stock() && supply.buying != Buying::Forbidden => {}
        Rank::ToBuy => {
            let help = if supply.has_stock() {
                "allow buying with buy or --buy"
            } else {
                "name a stock list with stock or --stock"
            };
            desk.note(&place, "there is nothing to buy by which to rank", help);
        }
        Rank::Cost if supply.currency().is_none() => {
            let prices = || supply.lots().filter_map(|(_, lot)| lot.price.as_ref());
            let currencies: BTreeSet<&str> =
                prices().map(|price| price.currency.as_deref().unwrap_or("none written")).collect();
            let (message, help) = match (supply.has_stock(), currencies.len()) {
                (false, _) => {
                    ("the cost is not known without a stock list".to_string(), "name one with stock or --stock")
                }
                (true, 0) => {
                    ("the cost is not known: the stock list has no prices".to_string(), "give each line one")
                }
                (true, _) => {
                    let names = currencies.into_iter().collect::<Vec<_>>().join(" and ");
                    (format!("the cost is not known: the prices are in several currencies, {names}"), "use one")
                }
            };
            desk.note(&place, message, help);
        }
        Rank::Cost => {
            let priceless = shelves.iter().find_map(|shelf| {
                let choice = shelf.choices().iter().find(|choice| supply.price(**choice).is_none())?;
                Some((shelf.kind(), *choice))
            });
            if let Some((kind, choice)) = priceless {
                let line = supply.lot_of(choice).and_then(|lot| lot.lines.first());
                let prices =
                    supply.lot_of(choice).into_iter().flat_map(|lot| &lot.lines).filter(|line| line.price.is_some());
                let from = match (line, prices.count()) {
                    (None, _) => "which may be bought) has no price".to_string(),
                    (Some(line), 0 | 1) => format!("line {}) has no price", line.line),
                    (Some(line), several) => format!("line {} and others) has {several} prices", line.line),
                };
                let value = format_part(source.label(choice), kind);
                let message = format!("the cost is not known: the {} {value} ({from}", kind.name());
                desk.note(&place, message, "give it a price, exclude it, or rank by something else");
            }
        }
    }
}

/// Where pairs may stand in a section: what the section says, else what the job says.
pub(super) fn pairs(desk: &mut Desk, found: Option<At<'_, PairsFile>>, circuit: &Circuit) -> Checked<Pairs> {
    let Some(At { value: file, place }) = found else { return Ok(Pairs::default()) };
    let most = desk.optional(place.find("at_most", &file.at_most), whole("at_most", 0, 100));
    let of_kind = |kind: Kind| -> Vec<Joint> {
        let given = match kind {
            Kind::Resistor => &file.resistors,
            Kind::Capacitor => &file.capacitors,
        };
        given.as_ref().map_or(Vec::new(), |given| given.value.0.clone())
    };
    let mut joints: Vec<Vec<Joint>> = circuit.slots.iter().map(|slot| of_kind(slot.kind)).collect();
    let mut faulty = None;
    if let Some(At { value: slots, place }) = place.find("slots", &file.slots) {
        for (name, allowed) in slots {
            match circuit.slot(name) {
                Some(slot) => joints[slot] = allowed.0.clone(),
                None => {
                    let known: Vec<&str> = circuit.slots.iter().map(|slot| slot.name.as_str()).collect();
                    let help = crate::text::suggestion(name, "the slots are", &known);
                    faulty = Some(desk.note(&place, format!("{} has no slot `{name}`", circuit.id), help));
                }
            }
        }
    }
    match faulty {
        Some(noted) => Err(noted),
        None => Ok(Pairs { joints, most: most?.unwrap_or(1) }),
    }
}
