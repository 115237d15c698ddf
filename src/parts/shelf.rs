//! The shelf: which parts may go into a slot.

use thiserror::Error;

use super::closer;
use super::supply::LotId;
use crate::units::{Kind, Value, format_part, range_in_words};

/// What may be placed: a value of a series, or parts of a stock list.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Choice {
    /// The value that counts in the response, in ohms or farads: as measured, else as labelled.
    pub value: Value,
    /// The lot of the [`Supply`](super::Supply) it is taken from; `None` for any part of this value.
    pub lot: Option<LotId>,
}

impl From<Value> for Choice {
    /// Any part of this value.
    fn from(value: Value) -> Choice {
        Choice { value, lot: None }
    }
}

/// The choices of one kind of part that are allowed: ascending, distinct, and never none.
///
/// ```
/// use roundwell::parts::{Series, Shelf};
/// use roundwell::units::{Kind, parse_part};
///
/// let ohms = |text| parse_part(text, Kind::Resistor);
/// let shelf = Shelf::new(Kind::Resistor, Series::E12.values_between(ohms("1k")?, ohms("10k")?))?;
/// assert_eq!(shelf.len(), 13);
/// assert_eq!(shelf.nearest(4500.0), ohms("4k7")?);
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Shelf {
    kind: Kind,
    choices: Vec<Choice>,
    /// The values of the choices, each once.
    values: Vec<Value>,
}

/// Why values do not make a shelf.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum ShelfError {
    /// No value was given.
    #[error("the {} shelf is empty: widen its range, or add a series or single values", .0.name())]
    Empty(Kind),
    /// Every value was taken away.
    #[error("no {} is left on the shelf: exclude fewer values, or add a series or single values", .0.name())]
    NothingLeft(Kind),
    /// A value outside [`Kind::range`].
    #[error("{} is out of range: a {} value lies between {}", format_part(*.value, *.kind), .kind.name(), range_in_words(*.kind))]
    OutOfRange {
        /// The kind of part.
        kind: Kind,
        /// The value.
        value: Value,
    },
}

#[expect(clippy::len_without_is_empty, reason = "a shelf is never empty")]
impl Shelf {
    /// A shelf of these values, in any order; values given twice count once.
    ///
    /// # Errors
    /// [`ShelfError::Empty`] without a value, [`ShelfError::OutOfRange`] for the smallest value that
    /// is outside [`Kind::range`].
    pub fn new(kind: Kind, values: impl IntoIterator<Item = Value>) -> Result<Shelf, ShelfError> {
        Shelf::of_choices(kind, values.into_iter().map(Choice::from))
    }

    /// A shelf of these choices, in any order; those given twice count once.
    ///
    /// # Errors
    /// As for [`Shelf::new`].
    pub fn of_choices(kind: Kind, choices: impl IntoIterator<Item = Choice>) -> Result<Shelf, ShelfError> {
        let mut choices: Vec<Choice> = choices.into_iter().collect();
        choices.sort_unstable();
        choices.dedup();
        match choices.iter().find(|choice| !kind.allows(choice.value)) {
            Some(choice) => Err(ShelfError::OutOfRange { kind, value: choice.value }),
            None => Shelf::sorted(kind, choices).ok_or(ShelfError::Empty(kind)),
        }
    }

    fn sorted(kind: Kind, choices: Vec<Choice>) -> Option<Shelf> {
        let mut values: Vec<Value> = choices.iter().map(|choice| choice.value).collect();
        values.dedup();
        (!values.is_empty()).then_some(Shelf { kind, choices, values })
    }

    /// The kind of part.
    pub fn kind(&self) -> Kind {
        self.kind
    }

    /// The choices, ascending by value and distinct.
    pub fn choices(&self) -> &[Choice] {
        &self.choices
    }

    /// The values, ascending and distinct.
    pub fn values(&self) -> &[Value] {
        &self.values
    }

    /// The count of choices, at least one.
    pub fn len(&self) -> usize {
        self.choices.len()
    }

    /// The smallest and the largest value.
    pub fn span(&self) -> (Value, Value) {
        (self.values[0], self.values[self.values.len() - 1])
    }

    /// Whether the choice is on the shelf; a value alone means any part of that value.
    pub fn contains(&self, choice: impl Into<Choice>) -> bool {
        self.choices.binary_search(&choice.into()).is_ok()
    }

    /// The value with the smallest ratio to `ideal`, given in ohms or farads; the smaller of two that
    /// are equally far. A number that is not positive, or no number, gives the smallest value.
    pub fn nearest(&self, ideal: f64) -> Value {
        let (first, last) = self.span();
        let above = self.values.partition_point(|value| value.to_f64() < ideal);
        match self.values.get(above) {
            None => last,
            Some(_) if above == 0 => first,
            Some(&value) => closer(self.values[above - 1], value, ideal),
        }
    }

    /// The choices that are on both shelves, or `None` when there are none or the kinds differ.
    pub fn intersection(&self, other: &Shelf) -> Option<Shelf> {
        self.filtered(|choice| self.kind == other.kind && other.contains(*choice))
    }

    /// The shelf without the given values; those that are not on it are ignored.
    ///
    /// # Errors
    /// [`ShelfError::NothingLeft`] when no value remains.
    pub fn without(&self, excluded: &[Value]) -> Result<Shelf, ShelfError> {
        self.filtered(|choice| !excluded.contains(&choice.value)).ok_or(ShelfError::NothingLeft(self.kind))
    }

    /// A shelf of the same kind with this one choice; `None` where its value is out of range.
    pub fn replaced(&self, only: Choice) -> Option<Shelf> {
        Shelf::of_choices(self.kind, [only]).ok()
    }

    /// The choices for which `keep` holds, or `None` when there are none.
    pub fn filtered(&self, keep: impl Fn(&Choice) -> bool) -> Option<Shelf> {
        Shelf::sorted(self.kind, self.choices.iter().copied().filter(keep).collect())
    }
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use proptest::prelude::*;

    use super::*;
    use crate::units::parse_part;
    use crate::units::test_support::deterministic;

    fn values(kind: Kind, texts: &str) -> Vec<Value> {
        let parts = texts.split_whitespace();
        parts.map(|text| parse_part(text, kind).unwrap()).collect()
    }

    fn shelf(texts: &str) -> Shelf {
        Shelf::new(Kind::Resistor, values(Kind::Resistor, texts)).unwrap()
    }

    #[test]
    fn values_are_sorted_and_counted_once() {
        let shelf = shelf("10k 4k7 4.7k 1k 4700");
        assert_eq!(shelf.values(), values(Kind::Resistor, "1k 4k7 10k"));
        assert_eq!((shelf.kind(), shelf.len()), (Kind::Resistor, 3));
        let ends = values(Kind::Resistor, "1k 10k");
        assert_eq!(shelf.span(), (ends[0], ends[1]));
        assert!(shelf.contains(ends[0]) && !shelf.contains(ends[0].shifted(-1).unwrap()));
    }

    #[test]
    fn refusals_say_what_is_wrong_and_what_to_do() {
        let message = |kind, values: &[Value]| {
            let error = Shelf::new(kind, values.iter().copied()).unwrap_err();
            error.to_string()
        };
        assert_eq!(
            message(Kind::Capacitor, &[]),
            "the capacitor shelf is empty: widen its range, or add a series or single values"
        );
        let wild = [Value::ONE, Value::new(47, 12).unwrap(), Value::new(1, 15).unwrap()];
        assert_eq!(
            message(Kind::Resistor, &wild),
            "47T is out of range: a resistor value lies between 1 mΩ and 1 TΩ"
        );
        let one = shelf("1k");
        assert_eq!(
            one.without(one.values()).unwrap_err().to_string(),
            "no resistor is left on the shelf: exclude fewer values, or add a series or single values"
        );
    }

    #[test]
    fn shelves_are_cut() {
        let (left, right) = (shelf("1k 2k2 4k7"), shelf("2k2 4k7 10k"));
        assert_eq!(left.intersection(&right), Some(shelf("2k2 4k7")));
        assert_eq!(left.intersection(&shelf("3k3")), None);
        let farads = Shelf::new(Kind::Capacitor, [Value::ONE]).unwrap();
        let ohms = shelf("1R");
        assert_eq!(farads.values(), ohms.values());
        assert_eq!(ohms.intersection(&farads), None);
        let excluded = values(Kind::Resistor, "2.2k 33k");
        assert_eq!(left.without(&excluded), Ok(shelf("1k 4k7")));
        assert_eq!(left.without(&[]), Ok(left));
    }

    #[test]
    fn nearest_is_by_ratio_and_ends_at_the_ends() {
        let shelf = shelf("1R 4R 100R");
        for (ideal, text) in [
            (2.0, "1R"), // as far from 1 as from 4
            (2.0_f64.next_up(), "4R"),
            (4.0, "4R"),
            (19.0, "4R"),
            (21.0, "100R"),
            (1e9, "100R"),
            (f64::INFINITY, "100R"),
            (1e-9, "1R"),
            (0.0, "1R"),
            (-5.0, "1R"),
            (f64::NAN, "1R"),
        ] {
            assert_eq!(shelf.nearest(ideal), values(Kind::Resistor, text)[0], "{ideal}");
        }
    }

    proptest! {
        #![proptest_config(deterministic(2048))]

        // Reference: a scan of the whole shelf.
        #[test]
        fn nearest_agrees_with_a_scan(
            mantissas in prop::collection::vec((1_u64..1000, -3..6_i32), 1..40),
            power in -4.0..9.0_f64,
        ) {
            let ideal = 10_f64.powf(power);
            let given = mantissas.iter().map(|(m, e)| Value::new(*m, *e).unwrap());
            let shelf = Shelf::new(Kind::Resistor, given).unwrap();
            let distance = |value: Value| (value.to_f64() / ideal).ln().abs();
            let least = shelf.values().iter().copied().map(distance).fold(f64::INFINITY, f64::min);
            prop_assert!(distance(shelf.nearest(ideal)) <= least + 1e-12);
        }
    }
}
