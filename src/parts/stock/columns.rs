//! The header of a stock file: which column holds what.

use csv::StringRecord;

use super::{AtLine, StockError, StockOddity, price, temperature};
use crate::units::{Kind, excerpt, parse_part};

/// What a stock file may state of a part, in the order of [`STOCK_COLUMNS`].
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Column {
    Kind,
    Value,
    Quantity,
    Tolerance,
    TemperatureCoefficient,
    Dielectric,
    Price,
    PartId,
    MeasuredValue,
    Ageing,
}

/// The columns of a stock file: the words that a header may have, the first of which is the name of the column, and
/// what the column holds. Only the first two columns are required.
///
/// Letter case does not count, and `_` and `-` are blanks. A unit may follow the word, alone or in brackets:
/// `tolerance %`, `measured (nF)`, `tempco [ppm/K]`, `price (EUR)`; it goes for the numbers that have none.
pub const STOCK_COLUMNS: [(&[&str], &str); 10] = [
    (&["kind", "type"], "R or C, resistor or capacitor"),
    (&["value"], "nominal value in IEC 60062 or SI notation: 4k7, 4700, 10n, 1e-8, 10 nF"),
    (&["quantity", "qty", "count"], "how many there are, a whole number from 0"),
    (&["tolerance", "tol"], "1%, ±5 %, -20/+80 %, a letter of IEC 60062 such as J, or an amount such as 0.25pF"),
    (&["temperature coefficient", "tempco", "tc", "ppm/k"], "in ppm/K: -200, ±50 or 50, -750±120"),
    (&["dielectric"], "of a capacitor: C0G, X7R, PP, PET"),
    (&["price", "unit price"], "for one part, with or without a currency: 0.12, €0.12, 0.12 EUR"),
    (&["part id", "id", "part", "part number"], "what the part or its drawer is called"),
    (&["measured value", "measured"], "true value of one physical part, in the notation of values"),
    (
        &["ageing", "aging", "end of life"],
        "by how much a part may be off at the end of its life, beside its tolerance: 0.5%",
    ),
];

/// Where the columns of a file are.
#[derive(Debug)]
pub(super) struct Layout {
    /// The header as it is written, without blanks around it.
    pub header: Vec<String>,
    /// The place of each of [`STOCK_COLUMNS`], and its unit or an empty text.
    places: [Option<(usize, String)>; STOCK_COLUMNS.len()],
    /// The place and the name of every other column that has one.
    pub others: Vec<(usize, String)>,
}

impl Layout {
    /// The layout of a header, and what is odd about it.
    pub fn of(header: &StringRecord, line: usize) -> Result<(Layout, Vec<AtLine<StockOddity>>), StockError> {
        let header: Vec<String> = header.iter().map(|cell| cell.trim().to_owned()).collect();
        let known: Vec<_> = header.iter().map(|cell| column_of(cell)).collect();
        let mut places = [const { None }; STOCK_COLUMNS.len()];
        for (index, place) in places.iter_mut().enumerate() {
            let same = known.iter().enumerate().filter_map(|(at, known)| {
                let (column, word, unit) = known.as_ref()?;
                (*column as usize == index).then_some((*word, at, unit))
            });
            *place = same.min().map(|(_, at, unit)| (at, unit.clone()));
        }
        let missing: Vec<&str> = [Column::Kind, Column::Value]
            .into_iter()
            .filter(|column| places[*column as usize].is_none())
            .map(Column::name)
            .collect();
        if !missing.is_empty() {
            let found = excerpt(&header.join(" | "));
            return Err(StockError::NoColumn { line, missing: missing.join(" and "), found });
        }

        let (mut others, mut oddities) = (Vec::new(), Vec::new());
        for (at, name) in header.iter().enumerate() {
            let unused = match &known[at] {
                Some((column, ..)) => places[*column as usize].as_ref().filter(|(used, _)| *used != at),
                None => None,
            };
            if let Some((used, _)) = unused {
                let what = StockOddity::ColumnTwice { used: header[*used].clone(), place: used + 1 };
                oddities.push(AtLine { line, column: Some(name.clone()), what });
            }
            if known[at].is_none() || unused.is_some() {
                let is_new = !name.is_empty() && header.iter().position(|first| first == name) == Some(at);
                let number = at + 1;
                let name = match name.as_str() {
                    _ if is_new => name.clone(),
                    "" => format!("column {number}"),
                    _ => format!("{name} (column {number})"),
                };
                others.push((at, name));
            }
        }
        Ok((Layout { header, places, others }, oddities))
    }

    /// The cell of a column, without blanks around it; empty where there is none.
    pub fn cell<'a>(&self, record: &'a StringRecord, column: Column) -> &'a str {
        let cell = self.places[column as usize].as_ref().and_then(|(at, _)| record.get(*at));
        cell.unwrap_or_default().trim()
    }

    /// The unit that the header gives for a column, or an empty text.
    pub fn unit(&self, column: Column) -> &str {
        self.places[column as usize].as_ref().map_or("", |(_, unit)| unit)
    }

    /// The header of a column as it is written, or `None` when the file has no such column.
    pub fn title(&self, column: Column) -> Option<&str> {
        self.places[column as usize].as_ref().map(|(at, _)| self.header[*at].as_str())
    }
}

impl Column {
    /// In the order of the declaration.
    const ALL: [Column; STOCK_COLUMNS.len()] = [
        Column::Kind,
        Column::Value,
        Column::Quantity,
        Column::Tolerance,
        Column::TemperatureCoefficient,
        Column::Dielectric,
        Column::Price,
        Column::PartId,
        Column::MeasuredValue,
        Column::Ageing,
    ];

    /// Those that hold numbers.
    pub const NUMBERS: [Column; 7] = [
        Column::Value,
        Column::Quantity,
        Column::Tolerance,
        Column::TemperatureCoefficient,
        Column::Price,
        Column::MeasuredValue,
        Column::Ageing,
    ];

    /// The name in [`STOCK_COLUMNS`].
    pub fn name(self) -> &'static str {
        STOCK_COLUMNS[self as usize].0[0]
    }

    /// Whether the header may give this unit for the column.
    fn takes_unit(self, unit: &str) -> bool {
        match self {
            Column::Value | Column::MeasuredValue => {
                [Kind::Resistor, Kind::Capacitor].iter().any(|kind| parse_part(&format!("1{unit}"), *kind).is_ok())
            }
            Column::Quantity => unit == "pcs",
            Column::Tolerance | Column::Ageing => unit == "%",
            Column::TemperatureCoefficient => temperature::is_unit(unit),
            Column::Price => price::is_currency(unit),
            Column::Kind | Column::Dielectric | Column::PartId => false,
        }
    }
}

/// How many cells of a header name a column.
pub(super) fn recognised(header: &StringRecord) -> usize {
    header.iter().filter(|cell| column_of(cell.trim()).is_some()).count()
}

/// The column that a header means, which of its words was used, and the unit.
fn column_of(title: &str) -> Option<(Column, usize, String)> {
    let named = |title: &str| {
        let words: Vec<String> = title.split([' ', '_', '-', '\u{a0}']).map(str::to_lowercase).collect();
        let words: Vec<&str> = words.iter().map(String::as_str).filter(|word| !word.is_empty()).collect();
        let name = words.join(" ");
        Column::ALL.into_iter().find_map(|column| {
            let word = STOCK_COLUMNS[column as usize].0.iter().position(|word| *word == name)?;
            Some((column, word))
        })
    };
    if let Some((column, word)) = named(title) {
        return Some((column, word, String::new()));
    }
    let in_brackets = || {
        let (start, rest) = title.rsplit_once(['(', '['])?;
        Some((start, rest.strip_suffix([')', ']'])?.trim()))
    };
    let (start, unit) = in_brackets().or_else(|| title.rsplit_once(char::is_whitespace))?;
    let (column, word) = named(start)?;
    column.takes_unit(unit).then(|| (column, word, unit.to_owned()))
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use std::collections::BTreeSet;

    use super::*;

    fn layout(header: &[&str]) -> (Layout, Vec<String>) {
        let (layout, oddities) = Layout::of(&StringRecord::from(header.to_vec()), 1).unwrap();
        (layout, oddities.iter().map(ToString::to_string).collect())
    }

    #[test]
    fn every_word_means_one_column() {
        let words: Vec<&str> = STOCK_COLUMNS.iter().flat_map(|(words, _)| words.iter().copied()).collect();
        assert_eq!(words.iter().collect::<BTreeSet<_>>().len(), words.len());
        for column in Column::ALL {
            for word in STOCK_COLUMNS[column as usize].0 {
                for title in [word.to_string(), word.to_uppercase(), word.replace(' ', "_"), word.replace(' ', "-")] {
                    assert_eq!(column_of(&title).unwrap().0, column, "{title}");
                }
            }
        }
    }

    #[test]
    fn units_follow_the_word() {
        for (title, column, unit) in [
            ("Tolerance %", Column::Tolerance, "%"),
            ("tol (%)", Column::Tolerance, "%"),
            ("measured [nF]", Column::MeasuredValue, "nF"),
            ("Measured value kΩ", Column::MeasuredValue, "kΩ"),
            ("value (ohm)", Column::Value, "ohm"),
            ("price (EUR)", Column::Price, "EUR"),
            ("unit price €", Column::Price, "€"),
            ("tempco ppm/K", Column::TemperatureCoefficient, "ppm/K"),
            ("TC (ppm/°C)", Column::TemperatureCoefficient, "ppm/°C"),
            ("qty (pcs)", Column::Quantity, "pcs"),
        ] {
            let (found, _, written) = column_of(title).expect(title);
            assert_eq!((found, written.as_str()), (column, unit), "{title}");
        }
        for title in
            ["price per 100", "value code", "number", "", "id (old)", "count per reel", "tolerance ppm", "()", "x"]
        {
            assert_eq!(column_of(title), None, "{title}");
        }
    }

    #[test]
    fn columns_stand_in_any_order() {
        let (layout, oddities) = layout(&["Box", " Value ", "TYPE", "", "qty"]);
        let record = StringRecord::from(vec!["3", " 4k7", "R", "old"]);
        assert_eq!(layout.cell(&record, Column::Value), "4k7");
        assert_eq!(layout.cell(&record, Column::Kind), "R");
        assert_eq!(layout.cell(&record, Column::Quantity), "");
        assert_eq!(layout.cell(&record, Column::Price), "");
        assert_eq!((layout.title(Column::Kind), layout.title(Column::Price)), (Some("TYPE"), None));
        assert_eq!(layout.others, [(0, "Box".to_owned()), (3, "column 4".to_owned())]);
        assert_eq!(oddities, [] as [String; 0]);
    }

    #[test]
    fn of_two_columns_for_one_thing_the_plainer_word_counts() {
        let (layout, oddities) = layout(&["type", "value", "kind", "value", "note", "note", "part number", "id"]);
        let record = StringRecord::from(vec!["film", "1n", "C", "2n", "a", "b", "7", "8"]);
        assert_eq!(layout.cell(&record, Column::Kind), "C");
        assert_eq!(layout.cell(&record, Column::Value), "1n");
        assert_eq!(layout.cell(&record, Column::PartId), "8");
        let others: Vec<&str> = layout.others.iter().map(|(_, name)| name.as_str()).collect();
        assert_eq!(others, ["type", "value (column 4)", "note", "note (column 6)", "part number"]);
        assert_eq!(
            oddities,
            [
                "line 1, column \"type\": means the same as \"kind\" in column 3, which is used; this one is only kept",
                "line 1, column \"value\": means the same as \"value\" in column 2, which is used; this one is only kept",
                "line 1, column \"part number\": means the same as \"id\" in column 8, which is used; this one is only kept",
            ]
        );
    }
}
