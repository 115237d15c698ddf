//! What there is of each part, and what may be bought beside it.

use super::shelf::Choice;
use super::stock::{DielectricClass, Price, Stock, StockLine};
use crate::units::{Kind, Value};

/// Names a [`Lot`] of a [`Supply`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct LotId(u32);

/// Parts of a stock list that can stand in for each other, from one line or several; or one measured part.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Lot {
    /// Resistors or capacitors.
    pub kind: Kind,
    /// The value on the label, in ohms or farads.
    pub nominal: Value,
    /// The true value of one physical part, in ohms or farads.
    pub measured: Option<Value>,
    /// How many there are; `None` where the list does not say, which counts as enough.
    pub available: Option<u64>,
    /// The price of one part, where every line of the lot has the same.
    pub price: Option<Price>,
    /// The lines of the list, the first with all that it says.
    pub lines: Vec<StockLine>,
    /// The lot that stands for all lots of this part number: measured parts of one nominal value, tolerance and
    /// dielectric are one part number, together with those that were not measured.
    pub part_number: LotId,
}

impl Lot {
    /// The value that counts in the response: as measured, else as labelled.
    pub fn value(&self) -> Value {
        self.measured.unwrap_or(self.nominal)
    }

    /// Whether this is a ceramic of class 2, whose value moves with temperature, voltage and age.
    pub fn is_class_2(&self) -> bool {
        let dielectric = self.lines.first().and_then(|line| line.dielectric.as_ref());
        dielectric.and_then(super::Dielectric::class) == Some(DielectricClass::Two)
    }

    /// What the part or its drawer is called, where a line says so.
    pub fn id(&self) -> Option<&str> {
        self.lines.iter().find_map(|line| line.id.as_deref())
    }
}

/// Whether parts may be bought beside the stock.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Buying {
    /// Nothing may be bought.
    #[default]
    Forbidden,
    /// At most so many part numbers.
    AtMost(usize),
    /// As many as it takes.
    Allowed,
}

impl Buying {
    /// How many part numbers may be bought at most.
    pub fn most(self) -> usize {
        match self {
            Buying::Forbidden => 0,
            Buying::AtMost(most) => most,
            Buying::Allowed => usize::MAX,
        }
    }
}

/// The stock that a job draws on, for how many boards, and whether more may be bought. Without a stock list everything on
/// a shelf can be had in any quantity.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Supply {
    lots: Vec<Lot>,
    has_stock: bool,
    /// Boards to build, at least 1.
    pub boards: u64,
    /// How many of each part used shall be left over.
    pub spares: u64,
    /// Whether parts may be bought beside the stock.
    pub buying: Buying,
    /// The only kind that may be bought; `None` for both.
    pub buying_only: Option<Kind>,
    /// Lines of the list that cannot be used.
    pub lines_left_out: usize,
}

impl Default for Supply {
    /// No stock list: everything can be had.
    fn default() -> Self {
        Supply {
            lots: Vec::new(),
            has_stock: false,
            boards: 1,
            spares: 0,
            buying: Buying::Allowed,
            buying_only: None,
            lines_left_out: 0,
        }
    }
}

impl Supply {
    /// The most boards, and the most spares: products with a stock line's quantity stay exact.
    pub const MOST: u64 = 1_000_000;

    /// The supply of a stock list, lines of the same choice put together; for one board, without spares, nothing bought.
    pub fn of_stock(stock: &Stock) -> Supply {
        let mut lots: Vec<Lot> = Vec::new();
        for line in &stock.lines {
            let alike = lots.iter_mut().find(|lot| lot.lines.first().is_some_and(|first| first.is_same_choice(line)));
            if let Some(lot) = alike {
                lot.available = lot.available.zip(line.available()).map(|(a, b)| a.saturating_add(b));
                if lot.price != line.price {
                    lot.price = None;
                }
                lot.lines.push(line.clone());
                continue;
            }
            let label = |l: &StockLine| {
                (l.kind, l.value, l.tolerance, l.temperature_coefficient, l.dielectric.clone(), l.ageing)
            };
            let same = lots.iter().find(|lot| lot.lines.first().is_some_and(|first| label(first) == label(line)));
            let part_number = same.map_or(LotId(lots.len() as u32), |lot| lot.part_number);
            lots.push(Lot {
                kind: line.kind,
                nominal: line.value,
                measured: line.measured,
                available: line.available(),
                price: line.price.clone(),
                lines: vec![line.clone()],
                part_number,
            });
        }
        let faulty: std::collections::BTreeSet<usize> = stock.faults.iter().map(|fault| fault.line).collect();
        Supply {
            lots,
            has_stock: true,
            boards: 1,
            spares: 0,
            buying: Buying::Forbidden,
            buying_only: None,
            lines_left_out: faulty.len(),
        }
    }

    /// Adds parts that are there already, as many as it takes, and gives the choice of them.
    pub fn keep(&mut self, kind: Kind, value: Value) -> Choice {
        let id = LotId(self.lots.len() as u32);
        self.lots.push(Lot {
            kind,
            nominal: value,
            measured: None,
            available: None,
            price: None,
            lines: Vec::new(),
            part_number: id,
        });
        Choice { value, lot: Some(id) }
    }

    /// Whether there is a stock list.
    pub fn has_stock(&self) -> bool {
        self.has_stock
    }

    /// All lots with their names, in the order of the list.
    pub fn lots(&self) -> impl Iterator<Item = (LotId, &Lot)> {
        self.lots.iter().enumerate().map(|(index, lot)| (LotId(index as u32), lot))
    }

    /// A lot by its name.
    ///
    /// # Panics
    /// For a name from another supply.
    pub fn lot(&self, id: LotId) -> &Lot {
        &self.lots[id.0 as usize]
    }

    /// The lot of a choice; `None` for a choice that is in no stock list.
    pub fn lot_of(&self, choice: Choice) -> Option<&Lot> {
        choice.lot.map(|id| self.lot(id))
    }

    /// A part number as something to compare and count: kind, value on the label, and lot.
    pub fn part_number(&self, kind: Kind, choice: Choice) -> (Kind, Choice) {
        match self.lot_of(choice) {
            None => (kind, choice),
            Some(lot) => (kind, Choice { value: lot.nominal, lot: Some(lot.part_number) }),
        }
    }

    /// How many parts `per_board` of them on each board come to: for all boards, with the spares. Spares of a measured
    /// part, of which there is one, are not asked for.
    pub fn need(&self, choice: Choice, per_board: u64) -> u64 {
        if self.lot_of(choice).is_some_and(|lot| lot.measured.is_some()) {
            return per_board;
        }
        if per_board == 0 { 0 } else { per_board.saturating_mul(self.boards).saturating_add(self.spares) }
    }

    /// Whether the stock suffices for that many of a choice on each board.
    pub fn suffices(&self, choice: Choice, per_board: u64) -> bool {
        match self.lot_of(choice) {
            None => !self.has_stock,
            Some(lot) => lot.available.is_none_or(|there| self.need(choice, per_board) <= there),
        }
    }

    /// Whether a choice can be had in that number on each board, from stock or, where that is allowed, by buying; and
    /// whether it must be bought.
    pub fn obtain(&self, choice: Choice, per_board: u64) -> Option<Origin> {
        if self.suffices(choice, per_board) {
            return Some(Origin::Stock);
        }
        // A measured part is the only one of its sort. What is in no lot is on a shelf only where it may be bought.
        let to_be_had = self.lot_of(choice).is_none_or(|lot| lot.measured.is_none() && self.buys(lot.kind));
        (to_be_had && self.buying != Buying::Forbidden).then_some(Origin::Bought)
    }

    /// Whether parts of a kind may be bought.
    pub fn buys(&self, kind: Kind) -> bool {
        self.buying != Buying::Forbidden && self.buying_only.is_none_or(|only| only == kind)
    }

    /// The price of one part of a choice in millionths; `None` where it is not known.
    pub fn price(&self, choice: Choice) -> Option<u64> {
        Some(self.lot_of(choice)?.price.as_ref()?.millionths)
    }

    /// The currency of all prices; `None` where there is no price, or where currencies differ.
    pub fn currency(&self) -> Option<Option<&str>> {
        let mut all = self.lots.iter().filter_map(|lot| lot.price.as_ref()).map(|price| price.currency.as_deref());
        let first = all.next()?;
        all.all(|other| other == first).then_some(first)
    }

    /// The supply that is left when parts have been taken: for each choice so many per board. Spares stay asked for once.
    pub fn less(&self, taken: &[(Choice, u64)]) -> Supply {
        let mut left = self.clone();
        for &(choice, per_board) in taken {
            let Some(id) = choice.lot else { continue };
            let lot = &mut left.lots[id.0 as usize];
            let boards = if lot.measured.is_some() { 1 } else { self.boards };
            lot.available = lot.available.map(|there| there.saturating_sub(per_board.saturating_mul(boards)));
        }
        left
    }
}

/// Where a part comes from.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Origin {
    /// From the stock list, or, without one, from anywhere.
    Stock,
    /// To be bought.
    Bought,
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;

    fn supply(csv: &str) -> Supply {
        Supply::of_stock(&Stock::read(csv.as_bytes()).unwrap())
    }

    #[test]
    fn lines_of_one_choice_are_one_lot_and_measured_parts_stay_apart() {
        let supply = supply(
            "kind,value,quantity,tolerance,price,measured\nR,10k,3,1%,0.10,\nR,10k,4,1%,0.10,\nR,10k,9,5%,,\n\
             C,10n,1,5%,,10.1n\nC,10n,1,5%,,9.9n\nC,10n,40,5%,,\n",
        );
        let lots: Vec<&Lot> = supply.lots().map(|(_, lot)| lot).collect();
        assert_eq!(lots.iter().map(|lot| lot.available).collect::<Vec<_>>(), [7, 9, 1, 1, 40].map(Some));
        assert_eq!(lots[0].price.as_ref().unwrap().millionths, 100_000);
        let numbers: Vec<u32> = lots.iter().map(|lot| lot.part_number.0).collect();
        assert_eq!(numbers, [0, 1, 2, 2, 2]);
    }

    #[test]
    fn need_is_boards_times_parts_and_spares() {
        let mut supply = supply("kind,value,quantity\nR,10k,32\nR,22k,\n");
        (supply.boards, supply.spares) = (10, 2);
        let choices: Vec<Choice> =
            supply.lots().map(|(id, lot)| Choice { value: lot.value(), lot: Some(id) }).collect();
        assert_eq!(supply.need(choices[0], 3), 32);
        assert!(supply.suffices(choices[0], 3) && !supply.suffices(choices[0], 4));
        assert!(supply.suffices(choices[1], 1000));
        assert_eq!(supply.obtain(choices[0], 4), None);
        supply.buying = Buying::AtMost(1);
        assert_eq!(supply.obtain(choices[0], 4), Some(Origin::Bought));
        let left = supply.less(&[(choices[0], 2)]);
        assert!(left.suffices(choices[0], 1) && !left.suffices(choices[0], 2));
    }
}
