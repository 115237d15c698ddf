//! One line of a stock file.

use csv::StringRecord;

use super::columns::{Column, Layout};
use super::decimal::Marks;
use super::faults::requoted;
use super::{AtLine, Dielectric, Price, StockFault, StockLine, TemperatureCoefficient, Tolerance};
use crate::units::{Kind, Value, excerpt, parse_part};

/// A record of the file, and where its faults are noted.
pub(super) struct Row<'a> {
    pub layout: &'a Layout,
    pub marks: Marks,
    pub cells: &'a StringRecord,
    pub line: usize,
    pub separator: char,
    pub faults: &'a mut Vec<AtLine<StockFault>>,
}

impl Row<'_> {
    /// The line, or `None` once its faults are noted.
    pub fn read(&mut self) -> Option<StockLine> {
        let before = self.faults.len();
        let columns = self.layout.header.len();
        if let Some(text) = self.cells.iter().skip(columns).map(str::trim).find(|cell| !cell.is_empty()) {
            // The cells may have moved, so none of them is trusted.
            let (cells, text, separator) = (self.cells.len(), excerpt(text), self.separator);
            let what = StockFault::TooManyCells { cells, columns, text, separator };
            self.faults.push(AtLine { line: self.line, column: None, what });
            return None;
        }
        let kind = self.kind();
        let value = kind.and_then(|kind| self.value(kind, Column::Value));
        let measured = match (kind, self.layout.cell(self.cells, Column::MeasuredValue)) {
            (None, _) | (_, "") => None,
            (Some(kind), _) => self.value(kind, Column::MeasuredValue),
        };
        let quantity = self.number(Column::Quantity, |text, quoted| {
            let is_plain = text.bytes().all(|byte| byte.is_ascii_digit());
            let count = text.parse().ok().filter(|count| is_plain && *count <= StockLine::MOST);
            count.ok_or(StockFault::Quantity(quoted))
        });
        let tolerance = kind.zip(value).and_then(|(kind, value)| {
            self.number(Column::Tolerance, |text, quoted| {
                Tolerance::read(text, kind, value).map_err(|error| error.requoted(quoted).into())
            })
        });
        let temperature_coefficient = self.number(Column::TemperatureCoefficient, |text, quoted| {
            TemperatureCoefficient::read(text).ok_or(StockFault::TemperatureCoefficient(quoted))
        });
        let price = self.number(Column::Price, |text, quoted| Price::read(text).ok_or(StockFault::Price(quoted)));
        let ageing = self.number(Column::Ageing, |text, quoted| ageing(text).ok_or(StockFault::Ageing(quoted)));
        let dielectric = self.text(Column::Dielectric).map(Dielectric::read);
        let id = self.text(Column::PartId).map(str::to_owned);
        let others = self.layout.others.iter();
        let extra = others.filter_map(|(at, name)| {
            let cell = self.cells.get(*at)?.trim();
            (!cell.is_empty()).then(|| (name.clone(), cell.to_owned()))
        });
        let extra = extra.collect();
        let (kind, value) = kind.zip(value).filter(|_| self.faults.len() == before)?;
        Some(StockLine {
            line: self.line,
            kind,
            value,
            quantity,
            tolerance,
            temperature_coefficient,
            dielectric,
            price,
            id,
            measured,
            ageing,
            extra,
        })
    }

    fn kind(&mut self) -> Option<Kind> {
        let text = self.layout.cell(self.cells, Column::Kind);
        match text.to_lowercase().as_str() {
            "r" | "resistor" => Some(Kind::Resistor),
            "c" | "capacitor" => Some(Kind::Capacitor),
            _ => self.note(Column::Kind, StockFault::Kind(excerpt(text))),
        }
    }

    /// A value in the notation of parts; an empty cell is a fault.
    fn value(&mut self, kind: Kind, column: Column) -> Option<Value> {
        let read = |text: &str, quoted| parse_part(text, kind).map_err(|error| requoted(error, quoted).into());
        match self.text(column) {
            Some(_) => self.number(column, read),
            None => read("", String::new()).map_or_else(|fault| self.note(column, fault), Some),
        }
    }

    /// The cell of a column, or `None` when it is empty.
    fn text(&self, column: Column) -> Option<&str> {
        Some(self.layout.cell(self.cells, column)).filter(|cell| !cell.is_empty())
    }

    /// The cell of a column that holds a number: read with a decimal point and the unit of the header, and quoted as it
    /// is written.
    fn number<T>(&mut self, column: Column, read: impl FnOnce(&str, String) -> Result<T, StockFault>) -> Option<T> {
        let text = self.text(column)?;
        let quoted = excerpt(text);
        let number = self.marks.plain(text).and_then(|plain| {
            let unit = self.layout.unit(column);
            if column != Column::Quantity && !unit.is_empty() && is_bare(&plain) {
                read(&format!("{plain} {unit}"), quoted)
            } else {
                read(&plain, quoted)
            }
        });
        number.map_or_else(|fault| self.note(column, fault), Some)
    }

    fn note<T>(&mut self, column: Column, what: StockFault) -> Option<T> {
        let column = self.layout.title(column).map(str::to_owned);
        self.faults.push(AtLine { line: self.line, column, what });
        None
    }
}

/// A percentage above 0 and below 100, such as `0.5 %` or `±0.5%`, as a ratio.
fn ageing(text: &str) -> Option<Value> {
    // Only a percentage is read, so that the value does not matter.
    let nominal = Value::new(1, 0).ok().filter(|_| text.trim_end().ends_with('%'))?;
    match Tolerance::read(text, Kind::Resistor, nominal).ok()? {
        Tolerance::Relative { below, above } if below == above => Some(above),
        _ => None,
    }
}

/// Whether a number has no unit.
fn is_bare(number: &str) -> bool {
    let is_sign = |sign: char| sign.is_ascii_digit() || sign.is_whitespace() || ".±+-/\u{2212}eE".contains(sign);
    number.chars().all(is_sign) && number.ends_with(|sign: char| sign.is_ascii_digit() || sign == '.')
}
