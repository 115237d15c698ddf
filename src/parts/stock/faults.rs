//! What can be wrong with a stock file, and what can be odd about it.

use std::fmt;

use thiserror::Error;

use super::temperature::TemperatureCoefficient;
use super::{StockLine, Tolerance, ToleranceError};
use crate::units::{Kind, NotationError, Value, format_part};

/// Something to say about a line of a file.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct AtLine<T> {
    /// The line, from 1, as an editor counts them.
    pub line: usize,
    /// The header of the column as it is written, or `None` for the line as a whole.
    pub column: Option<String>,
    /// What there is to say.
    pub what: T,
}

impl<T: fmt::Display> fmt::Display for AtLine<T> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let AtLine { line, column, what } = self;
        match column {
            Some(column) => write!(f, "line {line}, column \"{column}\": {what}"),
            None => write!(f, "line {line}: {what}"),
        }
    }
}

/// Why a file cannot be read as a stock list at all.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
pub enum StockError {
    /// No text, or blank lines only.
    #[error("the file is empty: begin with a line that names the columns, such as kind,value,quantity")]
    Empty,
    /// A packed workbook under another name.
    #[error("the file is a packed workbook and not CSV: save the sheet as CSV in UTF-8")]
    Workbook,
    /// Two bytes for each sign.
    #[error("the file is in UTF-16: save the sheet as CSV in UTF-8")]
    Utf16,
    /// Zero bytes.
    #[error("line {line} holds a zero byte, so the file is no text: save the sheet as CSV in UTF-8")]
    NoText {
        /// The line.
        line: usize,
    },
    /// A byte that no UTF-8 text has there.
    #[error(
        "line {line} holds the byte {byte:#04x}, which is not UTF-8 (the file may be in Latin-1 or Windows-1252): save the sheet as CSV in UTF-8"
    )]
    NotUtf8 {
        /// The line.
        line: usize,
        /// The byte.
        byte: u8,
    },
    /// The header names no kind or no value.
    #[error(
        "line {line} has no column for {missing}: it must name the columns, such as kind,value,quantity, with a comma, semicolon or tab between them; found \"{found}\""
    )]
    NoColumn {
        /// The line of the header.
        line: usize,
        /// The columns that are missing.
        missing: String,
        /// The header.
        found: String,
    },
    /// The CSV reader gave up.
    #[error("the file cannot be read as CSV: {0}")]
    Csv(String),
}

/// Why a line of a stock file cannot be used.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
pub enum StockFault {
    /// The kind is neither R nor C.
    #[error("\"{0}\" is no kind of part: write R or C")]
    Kind(String),
    /// The value, or the measured value.
    #[error(transparent)]
    Value(#[from] NotationError),
    /// No whole number, a negative one, or too many.
    #[error("\"{0}\" is no quantity: expected a whole number from 0 to {max}, for example 25", max = StockLine::MOST)]
    Quantity(String),
    /// The tolerance.
    #[error(transparent)]
    Tolerance(#[from] ToleranceError),
    /// The temperature coefficient.
    #[error("\"{0}\" is no temperature coefficient: expected ppm/K up to {max}, for example -200, ±50 or -750±120", max = TemperatureCoefficient::LARGEST)]
    TemperatureCoefficient(String),
    /// The ageing.
    #[error("\"{0}\" is no ageing: expected a percentage above 0 and below 100, for example 0.5 %")]
    Ageing(String),
    /// The price.
    #[error(
        "\"{0}\" is no price: expected an amount from 0 to 1000000 for one part with at most six decimals, for example 0.12, €0.12 or 0.12 EUR"
    )]
    Price(String),
    /// A number in which the mark may or may not be a decimal mark.
    #[error(
        "\"{0}\" could have decimals or a separator between thousands: write it without the sign, or with another count of decimals"
    )]
    DecimalOrThousands(String),
    /// A number with more than one comma or point.
    #[error("\"{0}\" has several commas or points: write one decimal mark, and no separator between thousands")]
    SeveralMarks(String),
    /// More cells than the header has.
    #[error(
        "the line has {cells} cells where the header has {columns}, and \"{text}\" stands beyond it: put a cell that holds the separator {separator:?} in quotes"
    )]
    TooManyCells {
        /// The cells of the line.
        cells: usize,
        /// The cells of the header.
        columns: usize,
        /// The first text beyond the header.
        text: String,
        /// The sign between the cells.
        separator: char,
    },
    /// A quote that is never closed.
    #[error("a quote is opened in line {line} and never closed: nothing behind it was read")]
    UnclosedQuote {
        /// The line of the quote.
        line: usize,
    },
}

/// What is odd about a line that can be used.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
pub enum StockOddity {
    /// No quantity is stated where there is a column for it.
    #[error("the quantity is missing: it is not known how many there are")]
    QuantityMissing,
    /// The file has no column for the quantity.
    #[error("there is no column for the quantity: it is not known how many there are of anything")]
    NoQuantityColumn,
    /// No tolerance is stated for a capacitor.
    #[error("the tolerance of this capacitor is missing")]
    ToleranceMissing,
    /// The file has no column for the tolerance, and it has capacitors.
    #[error("there is no column for the tolerance: that of the capacitors is not known")]
    NoToleranceColumn,
    /// A measured value beyond the tolerance, or more than twice or less than half the value without one.
    #[error("measured {}, {} the nominal {}{}", format_part(*.measured, *.kind), if .measured > .value { "above" } else { "below" }, format_part(*.value, *.kind), in_brackets(*.tolerance, *.kind))]
    MeasuredOff {
        /// The kind of part.
        kind: Kind,
        /// The nominal value.
        value: Value,
        /// The measured value.
        measured: Value,
        /// The tolerance, if it is stated.
        tolerance: Option<Tolerance>,
    },
    /// A measured value with a quantity above one.
    #[error(
        "a measured value belongs to one part, but the quantity is {0}: only one is counted, give each part its own line"
    )]
    MeasuredSeveral(u64),
    /// A measured part without an id.
    #[error("this measured part has no id: it cannot be told from the others")]
    MeasuredWithoutId,
    /// Two measured parts of one id.
    #[error("the measured part \"{id}\" is already in line {first}: give every measured part its own id")]
    SameId {
        /// The id.
        id: String,
        /// The line that had it first.
        first: usize,
    },
    /// A line that repeats another one in everything.
    #[error("the same as line {first} in everything: both are counted, remove one if it was entered twice")]
    Duplicate {
        /// The line that is repeated.
        first: usize,
    },
    /// A dielectric that is not known.
    #[error("the dielectric \"{0}\" is not known, nor is its class: expected one such as C0G, X7R, PP or PET")]
    UnknownDielectric(String),
    /// A resistor with a dielectric.
    #[error("a resistor has no dielectric, but \"{0}\" is stated")]
    DielectricOfResistor(String),
    /// Prices in two currencies.
    #[error("the price is in {currency}, the one in line {first} in {first_currency}: nothing is converted")]
    OtherCurrency {
        /// The currency of this line.
        currency: String,
        /// The first line with another currency.
        first: usize,
        /// The currency of that line.
        first_currency: String,
    },
    /// Two columns for the same thing.
    #[error("means the same as \"{used}\" in column {place}, which is used; this one is only kept")]
    ColumnTwice {
        /// The header of the column that counts.
        used: String,
        /// Its place, from 1.
        place: usize,
    },
    /// The header stands again between the lines.
    #[error("repeats the header: it is skipped")]
    HeaderAgain,
    /// A cell over several lines.
    #[error("the cell goes on to line {until}: if it should not, a quote is missing")]
    SeveralLines {
        /// The last line of the cell.
        until: usize,
    },
    /// A header, and nothing that counts below it.
    #[error("no part is listed below the header")]
    NoParts,
}

fn in_brackets(tolerance: Option<Tolerance>, kind: Kind) -> String {
    tolerance.map_or(" by more than a factor of 2".into(), |tolerance| {
        format!(" by more than its tolerance of {}", tolerance.in_words(kind))
    })
}

/// The same error with another text in its quotes: the one that stands in the file, rather than the one that was read
/// in its place.
pub(super) fn requoted(error: NotationError, with: String) -> NotationError {
    match error {
        NotationError::Empty(kind) => NotationError::Empty(kind),
        NotationError::Comma(_) => NotationError::Comma(with),
        NotationError::Unreadable { kind, .. } => NotationError::Unreadable { text: with, kind },
        NotationError::OtherKind { kind, .. } => NotationError::OtherKind { text: with, kind },
        NotationError::Megafarad(_) => NotationError::Megafarad(with),
        NotationError::FemtoOrFarad(_) => NotationError::FemtoOrFarad(with),
        NotationError::NotPositive { kind, .. } => NotationError::NotPositive { text: with, kind },
        NotationError::TooManyDigits(_) => NotationError::TooManyDigits(with),
        NotationError::OutOfRange { kind, .. } => NotationError::OutOfRange { text: with, kind },
    }
}
