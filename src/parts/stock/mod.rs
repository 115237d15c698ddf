//! The stock list of a drawer: which parts are there, read from CSV as spreadsheets write it.

mod columns;
mod decimal;
mod dielectric;
mod faults;
mod odd;
mod price;
#[cfg(test)]
mod properties;
mod row;
mod temperature;
#[cfg(test)]
mod tests;
mod text;
mod tolerance;

use std::collections::BTreeMap;
use std::ops::Range;

use csv::{ReaderBuilder, StringRecord};

use crate::units::{Kind, Value};
use columns::{Column, Layout, recognised};
use decimal::Marks;
use row::Row;
use text::{Lines, breaks};

pub use columns::STOCK_COLUMNS;
pub use dielectric::{Dielectric, DielectricClass, Film};
pub use faults::{AtLine, StockError, StockFault, StockOddity};
pub use price::Price;
pub use temperature::TemperatureCoefficient;
pub use tolerance::{Tolerance, ToleranceError};

/// The signs that may stand between cells. The first counts where several fit a header equally well.
const SEPARATORS: [char; 3] = [',', ';', '\t'];

/// The parts of a drawer as they are listed in a file, and what is wrong and odd about the list.
///
/// ```
/// use roundwell::parts::Stock;
/// use roundwell::units::{Kind, format_part};
///
/// let file = "kind;value;quantity;tolerance;shelf\nR;4,7k;25;1 %;A3\nC;10n;-1;J;B1\n";
/// let stock = Stock::read(file.as_bytes())?;
/// let line = &stock.lines[0];
/// assert_eq!((format_part(line.value, line.kind).as_str(), line.quantity), ("4k7", Some(25)));
/// assert_eq!((stock.separator, stock.decimal_comma), (';', true));
/// assert_eq!(stock.unknown_columns, ["shelf"]);
/// assert_eq!(
///     stock.faults[0].to_string(),
///     "line 3, column \"quantity\": \"-1\" is no quantity: expected a whole number from 0 to 1000000000, for example 25"
/// );
/// # Ok::<(), roundwell::parts::StockError>(())
/// ```
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Stock {
    /// The lines that can be used, in the order of the file.
    pub lines: Vec<StockLine>,
    /// What is wrong with the lines that cannot be used, in the order of the file; several faults of one line
    /// one after the other. Whether the rest may be used is for the caller to decide.
    pub faults: Vec<AtLine<StockFault>>,
    /// What is odd about the header and the lines that can be used, in the order of the file.
    pub oddities: Vec<AtLine<StockOddity>>,
    /// The columns that mean nothing here or are not used, each once, in the order of the file.
    pub unknown_columns: Vec<String>,
    /// The sign between the cells: comma, semicolon or tab.
    pub separator: char,
    /// Whether the file has numbers with a decimal comma.
    pub decimal_comma: bool,
}

/// A line of a stock list: parts that are alike, or one physical part with its measured value.
#[derive(Clone, Debug, PartialEq, Eq, Hash)]
pub struct StockLine {
    /// The line in the file, from 1, as an editor counts them.
    pub line: usize,
    /// The kind of part.
    pub kind: Kind,
    /// The nominal value, in ohms or farads.
    pub value: Value,
    /// How many there are, at most [`StockLine::MOST`]; `None` when the file does not say.
    pub quantity: Option<u64>,
    /// How far a part may be from the nominal value.
    pub tolerance: Option<Tolerance>,
    /// How the value follows the temperature.
    pub temperature_coefficient: Option<TemperatureCoefficient>,
    /// What a capacitor is made of.
    pub dielectric: Option<Dielectric>,
    /// The price of one part.
    pub price: Option<Price>,
    /// What the part or its drawer is called.
    pub id: Option<String>,
    /// The true value of one physical part, in ohms or farads.
    pub measured: Option<Value>,
    /// By how much a part may be off at the end of its life, beside its tolerance, to either side: a ratio below 1.
    pub ageing: Option<Value>,
    /// The cells of the other columns that are not empty, by the name of their column.
    pub extra: BTreeMap<String, String>,
}

impl StockLine {
    /// The largest quantity of a line, 10^9: sums over a list and products with a number of boards stay exact.
    pub const MOST: u64 = 1_000_000_000;

    /// How many parts can be taken, or `None` when the file does not say. A measured part is there once unless its
    /// quantity is 0.
    pub fn available(&self) -> Option<u64> {
        match self.measured {
            Some(_) => Some(self.quantity.map_or(1, |quantity| quantity.min(1))),
            None => self.quantity,
        }
    }

    /// Whether the parts of two lines can stand in for each other: the same value, tolerance, temperature coefficient,
    /// dielectric and ageing, and neither measured. Id, price and other columns do not count.
    pub fn is_same_choice(&self, other: &StockLine) -> bool {
        let is_measured = self.measured.is_some() || other.measured.is_some();
        let of = |line: &StockLine| {
            (
                line.kind,
                line.value,
                line.tolerance,
                line.temperature_coefficient,
                line.dielectric.clone(),
                line.ageing,
            )
        };
        !is_measured && of(self) == of(other)
    }
}

impl Stock {
    /// Reads a stock list from the bytes of a file.
    ///
    /// The file is CSV in UTF-8, with or without byte-order mark, with any line ends, and cells in quotes where needed.
    /// Its first line names the columns, in any order (see [`STOCK_COLUMNS`]). Comma, semicolon or tab stands between
    /// the cells: the one that gives the most known columns, or that a line `sep=;` before the header names. Lines
    /// without text are skipped.
    ///
    /// A comma in a number is a decimal comma (in a file with commas between cells, such a cell is in quotes). A
    /// number such as `4,700` or `4.700` is refused where the file does not show which mark it uses: a decimal comma
    /// needs a number like `4,7` and none like `4.7` elsewhere.
    ///
    /// # Errors
    /// [`StockError`] for a file in another encoding, and for one without a header that names kind and value. Faults of
    /// single lines are in [`Stock::faults`].
    pub fn read(bytes: &[u8]) -> Result<Stock, StockError> {
        let text = text::decode(bytes)?;
        let lines = Lines::of(text);
        let declared = text::declared_separator(text);
        let start = declared.map_or(0, |(_, end)| end);
        let body = &text[start..];
        let separator = match declared {
            Some((separator, _)) => separator,
            None => likely_separator(body),
        };
        let mut records = records(body, separator)?;
        let header = if records.is_empty() { return Err(StockError::Empty) } else { records.remove(0) };
        let header_line = lines.number(start + header.bytes.start);
        let (layout, mut oddities) = Layout::of(&header.cells, header_line)?;

        let mut faults = Vec::new();
        let unclosed = text::unclosed_quote(body, separator).map(|open| {
            let line = lines.number(start + open);
            let what = StockFault::UnclosedQuote { line };
            // The cell reaches to the end of the file, so it can only be the last.
            match records.pop_if(|last| last.bytes.contains(&open)) {
                None => AtLine { line, column: None, what },
                Some(Record { bytes, cells }) => {
                    let column = layout.header.get(cells.len().saturating_sub(1)).cloned();
                    AtLine { line: lines.number(start + bytes.start), column, what }
                }
            }
        });

        let numbers =
            records.iter().flat_map(|record| Column::NUMBERS.map(|column| layout.cell(&record.cells, column)));
        let marks = Marks::of(numbers);
        let mut read = Vec::new();
        for Record { bytes, cells } in &records {
            let line = lines.number(start + bytes.start);
            if cells.iter().map(str::trim).eq(layout.header.iter().map(String::as_str)) {
                oddities.push(AtLine { line, column: None, what: StockOddity::HeaderAgain });
                continue;
            }
            oddities.extend(long_cell(cells, &layout, line));
            let mut row = Row { layout: &layout, marks, cells, line, separator, faults: &mut faults };
            read.extend(row.read());
        }
        faults.extend(unclosed);
        oddities.extend(odd::of(&read, &layout, header_line));
        oddities.sort_by_key(|oddity| oddity.line);
        let is_named =
            |name: &String| layout.header.contains(name) || read.iter().any(|l| l.extra.contains_key(name));
        let unknown_columns = layout.others.iter().map(|(_, name)| name).filter(|name| is_named(name)).cloned();
        Ok(Stock {
            unknown_columns: unknown_columns.collect(),
            lines: read,
            faults,
            oddities,
            separator,
            decimal_comma: marks.comma,
        })
    }
}

/// The cells between two line ends.
struct Record {
    /// Where it stands; begins with the line ends before it.
    bytes: Range<usize>,
    cells: StringRecord,
}

/// A reader of the records of a text.
fn reader(text: &str, separator: char) -> csv::Reader<&[u8]> {
    ReaderBuilder::new()
        .delimiter(u8::try_from(separator).unwrap_or(b','))
        .has_headers(false)
        .flexible(true)
        .from_reader(text.as_bytes())
}

/// The records of a text that are not blank.
fn records(text: &str, separator: char) -> Result<Vec<Record>, StockError> {
    let mut reader = reader(text, separator);
    let at = |reader: &csv::Reader<&[u8]>| usize::try_from(reader.position().byte()).unwrap_or(usize::MAX);
    let mut found = Vec::new();
    loop {
        let start = at(&reader);
        let mut cells = StringRecord::new();
        if !reader.read_record(&mut cells).map_err(|error| StockError::Csv(error.to_string()))? {
            return Ok(found);
        }
        if !is_blank(&cells) {
            found.push(Record { bytes: start..at(&reader), cells });
        }
    }
}

fn is_blank(record: &StringRecord) -> bool {
    record.iter().all(|cell| cell.trim().is_empty())
}

/// The separator by which the header names the most columns; the one that gives most cells where several do.
fn likely_separator(text: &str) -> char {
    let score = |separator: char| {
        let header = reader(text, separator).into_records().map_while(Result::ok).find(|record| !is_blank(record));
        header.map_or((0, 0), |header| (recognised(&header), header.len()))
    };
    let [mut best, others @ ..] = SEPARATORS;
    for separator in others {
        if score(separator) > score(best) {
            best = separator;
        }
    }
    best
}

/// A remark on the first cell of a record that has line breaks in it.
fn long_cell(cells: &StringRecord, layout: &Layout, line: usize) -> Option<AtLine<StockOddity>> {
    let first = cells.iter().position(|cell| breaks(cell) > 0)?;
    let until = line + cells.iter().map(breaks).sum::<usize>();
    Some(AtLine { line, column: layout.header.get(first).cloned(), what: StockOddity::SeveralLines { until } })
}
