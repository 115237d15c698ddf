//! Shelves as they are written, and their values.

use std::fmt;

use serde::Deserialize;
use serde::de::value::{MapAccessDeserializer, SeqAccessDeserializer};
use serde::de::{Deserializer, MapAccess, SeqAccess, Visitor};

use super::desk::{At, Checked, Desk, Place};
use super::given::{Given, Scalar, Scalars};
use super::stock::Source;
use crate::parts::{Choice, Series, Shelf};
use crate::text::Fault;
use crate::units::{Kind, Value, format_part, parse_part};

/// Values of one kind: those of series within a range, and single ones, less exclusions.
#[derive(Clone, Debug, Default, PartialEq, Deserialize)]
#[serde(default, deny_unknown_fields, rename = "Shelf")]
pub struct ShelfFile {
    /// The series; with neither series nor values E96 for resistors and E12 for capacitors.
    pub series: Option<Given<Scalars>>,
    /// Single values.
    pub values: Option<Given<Scalars>>,
    /// The smallest value; for series 1 kΩ or 1 nF.
    pub from: Option<Given>,
    /// The largest value; for series 1 MΩ or 1 µF.
    pub to: Option<Given>,
    /// Values that are left out.
    pub exclude: Option<Given<Scalars>>,
}

/// One shelf, or a list of shelves in brackets that are put together.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Shelves(pub Vec<ShelfFile>);

impl<'de> Deserialize<'de> for Shelves {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct OneOrMany;
        impl<'de> Visitor<'de> for OneOrMany {
            type Value = Shelves;

            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("a shelf such as (series: E24, from: \"1k\", to: \"1M\"), or a list of shelves")
            }

            fn visit_map<A: MapAccess<'de>>(self, map: A) -> Result<Shelves, A::Error> {
                ShelfFile::deserialize(MapAccessDeserializer::new(map)).map(|shelf| Shelves(vec![shelf]))
            }

            fn visit_seq<A: SeqAccess<'de>>(self, list: A) -> Result<Shelves, A::Error> {
                Vec::deserialize(SeqAccessDeserializer::new(list)).map(Shelves)
            }
        }
        deserializer.deserialize_any(OneOrMany)
    }
}

impl ShelfFile {
    /// A shelf that a flag gives: series and single values separated by commas, then a range where wanted, such as
    /// `E24,E96 1k..1M`, `E12:1n..1u` or `10k,22k,47k`.
    ///
    /// # Errors
    /// Neither series nor value nor range, or more than one range.
    pub fn from_flag(flag: &'static str, text: &str) -> Result<Given<Shelves>, Fault> {
        let (mut series, mut values, mut ranges) = (Vec::new(), Vec::new(), Vec::new());
        let words = text.split(|c: char| c == ',' || c == ':' || c.is_whitespace());
        for word in words.filter(|word| !word.is_empty()) {
            if let Some(range) = word.split_once("..") {
                ranges.push(range);
            } else if word.starts_with(['E', 'e']) {
                series.push(Scalar::from(word));
            } else {
                values.push(Scalar::from(word));
            }
        }
        if series.len() + values.len() + ranges.len() == 0 || ranges.len() > 1 {
            let help = "write series and values, then a range where wanted: E24,E96 1k..1M or 10k,22k,47k";
            return Err(Fault::at(flag, format!("`{text}` is no shelf")).help(help));
        }
        let list = |scalars: Vec<Scalar>| (!scalars.is_empty()).then(|| Given::flag(flag, Scalars(scalars)));
        let end = |text: &str| (!text.is_empty()).then(|| Given::flag(flag, text));
        let (from, to) = ranges.pop().unwrap_or_default();
        let shelf =
            ShelfFile { series: list(series), values: list(values), from: end(from), to: end(to), exclude: None };
        Ok(Given::flag(flag, Shelves(vec![shelf])))
    }

    /// The choices, at least one.
    fn resolve(&self, desk: &mut Desk, place: &Place, kind: Kind, source: &Source) -> Checked<Vec<Choice>> {
        let part = |text: &str| parse_part(text, kind);
        let series = desk.list(place.find("series", &self.series), str::parse::<Series>);
        let listed = desk.list(place.find("values", &self.values), part);
        let from = desk.optional(place.find("from", &self.from), part);
        let to = desk.optional(place.find("to", &self.to), part);
        let exclude = desk.list(place.find("exclude", &self.exclude), part);
        let (mut series, listed, from, to, exclude) = (series?, listed?, from?, to?, exclude?);

        if let (Some(low), Some(high)) = (from, to)
            && low > high
        {
            let message =
                format!("the range from {} to {} is reversed", format_part(low, kind), format_part(high, kind));
            return Err(desk.note(place, message, "write the smaller value first"));
        }
        let [usual, low, high] = usual(kind).map(Scalar::from);
        if self.series.is_none() && self.values.is_none() {
            series.push(desk.value(place, &usual, str::parse)?);
        }
        // A range that is not written holds for series only.
        let has_series = !series.is_empty();
        let ranged = |value: Value, from: Value, to: Value| has_series && from <= value && value <= to;
        let mut values = listed.clone();
        values.retain(|value| from.is_none_or(|from| from <= *value) && to.is_none_or(|to| *value <= to));
        let from = from.map_or_else(|| desk.value(place, &low, part), Ok)?;
        let to = to.map_or_else(|| desk.value(place, &high, part), Ok)?;
        values.extend(series.iter().flat_map(|series| series.values_between(from, to)));
        if values.is_empty() {
            let what = match series.iter().map(|series| series.name()).collect::<Vec<_>>().join(" or ") {
                names if names.is_empty() => "none of its values lies in its range".to_string(),
                names => format!("no {names} value from {} to {}", format_part(from, kind), format_part(to, kind)),
            };
            let message = format!("the {} shelf is empty: {what}", kind.name());
            return Err(desk.note(place, message, "widen the range, or name another series or other values"));
        }
        values.retain(|value| !exclude.contains(value));
        if values.is_empty() {
            let message = format!("the {} shelf is empty: every value is excluded", kind.name());
            return Err(desk.note(&place.key("exclude"), message, "exclude fewer values, or widen the range"));
        }
        let is_wanted =
            |label: Value| (ranged(label, from, to) || listed.contains(&label)) && !exclude.contains(&label);
        Ok(source.choices(kind, values, is_wanted))
    }
}

/// The series and its range where a job names none: common practice at audio frequencies.
fn usual(kind: Kind) -> [&'static str; 3] {
    match kind {
        Kind::Resistor => ["E96", "1k", "1M"],
        Kind::Capacitor => ["E12", "1n", "1u"],
    }
}

/// A shelf by itself, without a stock list.
///
/// # Errors
/// What cannot be read, and a shelf without values.
pub fn plain_shelf(given: &Given<Shelves>, kind: Kind) -> Result<Shelf, Vec<Fault>> {
    let mut desk = Desk::default();
    let place = given.flag.map_or_else(Place::job, Place::Flag);
    let found = At { value: &given.value, place };
    shelf(&mut desk, Some(found), kind, &Source::default()).map_err(|_| desk.faults)
}

/// The shelf of a kind, by default the usual one.
pub(super) fn shelf(desk: &mut Desk, found: Option<At<'_, Shelves>>, kind: Kind, source: &Source) -> Checked<Shelf> {
    let usual = Shelves(vec![ShelfFile::default()]);
    let At { value: Shelves(files), place } = found.unwrap_or(At { value: &usual, place: Place::job() });
    let members = files.iter().enumerate();
    let choices: Vec<Checked<Vec<Choice>>> =
        members.map(|(i, file)| file.resolve(desk, &place.item(i), kind, source)).collect();
    let choices: Vec<Choice> = choices.into_iter().collect::<Checked<Vec<_>>>()?.into_iter().flatten().collect();
    if choices.is_empty() && source.supply.has_stock() {
        let single = files.iter().all(|file| file.series.is_none() && file.values.is_some());
        let texts: Vec<&str> = files
            .iter()
            .filter_map(|file| file.values.as_ref())
            .flat_map(|given| &given.value.0)
            .map(Scalar::text)
            .collect();
        let missing = match texts.as_slice() {
            [only] if single => format!("the {} {only} is not in stock", kind.name()),
            [first, .., last] if single => format!("the {}s {first} to {last} are not in stock", kind.name()),
            _ => format!("no {} in the range is in stock", kind.name()),
        };
        let why = match source.has_barred(kind) {
            true => "unless as ceramics of class 2, and these are barred",
            false => "and nothing may be bought",
        };
        let help = match (source.has_barred(kind), single) {
            (true, _) => "lift the bar on class 2, or allow buying with buy or --buy",
            (_, true) => "name values that are, or allow buying with buy or --buy",
            (_, false) => {
                "widen the range (by default it is 1k to 1M and 1n to 1u), or allow buying with buy or --buy"
            }
        };
        let message = format!("{missing}, {why}");
        return Err(desk.note(&place, message, help));
    }
    Shelf::of_choices(kind, choices).map_err(|error| desk.note(&place, error.to_string(), ""))
}
