//! A stock list as it was read: one plain record, and its renderers.

use std::collections::{BTreeMap, BTreeSet};
use std::io::{self, Write};

use serde::Serialize;

use super::layout::{Column, grid, paragraph, printable, unbroken};
use super::numbers::count;
use crate::parts::{AtLine, DielectricClass, Stock, StockFault, StockLine, Tolerance, ToleranceError};
use crate::units::{Kind, NotationError, Value, format_part};

/// The name and version of the JSON format: keys may be added to it, none is renamed or removed.
pub const STOCK_FORMAT: &str = "roundwell-stock/1";

/// What was understood of a stock list, what is wrong with it and what is odd. Values are in ohms or farads; what is
/// not known is `None`, never a number.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct StockRecord {
    /// [`STOCK_FORMAT`].
    pub format: &'static str,
    /// The name of the file.
    pub name: String,
    /// The sign between the cells: comma, semicolon or tab.
    pub separator: char,
    /// The decimal mark: a comma where the file has numbers with a decimal comma, otherwise a point.
    pub decimal_mark: char,
    /// The columns that are kept but not used, each once.
    pub unknown_columns: Vec<String>,
    /// How many lines can be used.
    pub usable_lines: usize,
    /// How many lines cannot.
    pub faulty_lines: usize,
    /// What there is of each kind of part, resistors first.
    pub kinds: [KindOfStock; 2],
    /// The capacitors with a class 2 dielectric, by dielectric.
    pub class_2: Vec<DielectricOfStock>,
    /// The lines that can be used, in the order of the file.
    pub lines: Vec<LineOfStock>,
    /// Why the other lines cannot be used, in the order of the file.
    pub faults: Vec<StockRemark>,
    /// What is odd about the header and the lines that can be used, in the order of the file.
    pub oddities: Vec<StockRemark>,
}

/// How much there is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
pub struct AmountOfStock {
    /// Lines.
    pub lines: usize,
    /// Pieces in the lines that state a quantity; a measured part is one piece.
    pub pieces: u64,
    /// Lines that do not say how many pieces there are.
    pub lines_without_quantity: usize,
}

/// What there is of one kind of part.
#[derive(Clone, Debug, PartialEq, Eq, Serialize)]
pub struct KindOfStock {
    /// R or C.
    pub kind: Kind,
    /// How much.
    #[serde(flatten)]
    pub amount: AmountOfStock,
    /// Different nominal values.
    pub values: usize,
    /// Lines with a measured value.
    pub measured: usize,
}

/// What there is of one dielectric.
#[derive(Clone, Debug, PartialEq, Eq, Serialize)]
pub struct DielectricOfStock {
    /// The dielectric.
    pub dielectric: String,
    /// How much.
    #[serde(flatten)]
    pub amount: AmountOfStock,
}

/// A line of the list.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct LineOfStock {
    /// The line in the file, from 1.
    pub line: usize,
    /// R or C.
    pub kind: Kind,
    /// The nominal value, in ohms or farads.
    pub value: f64,
    /// The nominal value in IEC 60062 notation.
    pub notation: String,
    /// The quantity as it is stated.
    pub quantity: Option<u64>,
    /// How many can be taken: a measured part once at most.
    pub available: Option<u64>,
    /// How far a part may be from the nominal value.
    pub tolerance: Option<ToleranceRecord>,
    /// How the value follows the temperature.
    pub temperature_coefficient: Option<TemperatureCoefficientRecord>,
    /// The dielectric.
    pub dielectric: Option<String>,
    /// The class of a ceramic dielectric, 1 or 2.
    pub dielectric_class: Option<u8>,
    /// The price of one part.
    pub price: Option<PriceRecord>,
    /// What the part or its drawer is called.
    pub id: Option<String>,
    /// By how much a part may be off at the end of its life, a ratio, to either side.
    pub ageing: Option<f64>,
    /// The same for people, such as `±0.5 %`.
    pub ageing_notation: Option<String>,
    /// The measured value, in ohms or farads.
    pub measured: Option<f64>,
    /// The measured value in IEC 60062 notation.
    pub measured_notation: Option<String>,
    /// The cells of the unknown columns that are not empty.
    pub extra: BTreeMap<String, String>,
}

/// A tolerance: a pair of ratios, or an amount.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct ToleranceRecord {
    /// For people, such as `±5 %`.
    pub notation: String,
    /// How far below and above the nominal value, as ratios of it.
    pub relative: Option<[f64; 2]>,
    /// The same amount on either side, in ohms or farads.
    pub absolute: Option<f64>,
}

/// A temperature coefficient.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct TemperatureCoefficientRecord {
    /// For people, such as `-750±120 ppm/K`.
    pub notation: String,
    /// The mean, ppm/K.
    pub mean_ppm_per_kelvin: f64,
    /// The limit on either side of the mean, ppm/K.
    pub spread_ppm_per_kelvin: f64,
}

/// A price.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct PriceRecord {
    /// For people, such as `0.12 EUR`.
    pub notation: String,
    /// The amount.
    pub amount: f64,
    /// The currency as it is written.
    pub currency: Option<String>,
}

/// What is wrong or odd about a line.
#[derive(Clone, Debug, PartialEq, Eq, Serialize)]
pub struct StockRemark {
    /// The line in the file, from 1.
    pub line: usize,
    /// The header of the column; none for the line as a whole.
    pub column: Option<String>,
    /// The text that is wrong, shortened where it is long; none where no single text is wrong, and for oddities.
    pub text: Option<String>,
    /// What is wrong or odd, and what is expected.
    pub message: String,
}

impl StockRecord {
    /// The record of a list that was read from a file of this name.
    pub fn new(name: &str, stock: &Stock) -> StockRecord {
        let faulty: BTreeSet<usize> = stock.faults.iter().map(|fault| fault.line).collect();
        let faults = stock.faults.iter().map(|fault| StockRemark::new(fault, wrong_text(&fault.what)));
        let mut class_2: BTreeMap<String, Vec<&StockLine>> = BTreeMap::new();
        for line in stock.lines.iter().filter(|line| line.kind == Kind::Capacitor) {
            if let Some(dielectric) = line.dielectric.as_ref()
                && dielectric.class() == Some(DielectricClass::Two)
            {
                class_2.entry(dielectric.to_string()).or_default().push(line);
            }
        }
        let class_2 = class_2
            .into_iter()
            .map(|(dielectric, lines)| DielectricOfStock { dielectric, amount: AmountOfStock::of(&lines) });
        StockRecord {
            format: STOCK_FORMAT,
            name: name.to_string(),
            separator: stock.separator,
            decimal_mark: if stock.decimal_comma { ',' } else { '.' },
            unknown_columns: stock.unknown_columns.clone(),
            usable_lines: stock.lines.len(),
            faulty_lines: faulty.len(),
            kinds: [Kind::Resistor, Kind::Capacitor].map(|kind| KindOfStock::new(kind, &stock.lines)),
            class_2: class_2.collect(),
            lines: stock.lines.iter().map(LineOfStock::new).collect(),
            faults: faults.collect(),
            oddities: stock.oddities.iter().map(|oddity| StockRemark::new(oddity, None)).collect(),
        }
    }
}

impl AmountOfStock {
    fn of(lines: &[&StockLine]) -> AmountOfStock {
        let stated: Vec<u64> = lines.iter().filter_map(|line| line.available()).collect();
        AmountOfStock {
            lines: lines.len(),
            pieces: stated.iter().sum(),
            lines_without_quantity: lines.len() - stated.len(),
        }
    }
}

impl KindOfStock {
    fn new(kind: Kind, lines: &[StockLine]) -> KindOfStock {
        let lines: Vec<&StockLine> = lines.iter().filter(|line| line.kind == kind).collect();
        let values: BTreeSet<_> = lines.iter().map(|line| line.value).collect();
        KindOfStock {
            kind,
            amount: AmountOfStock::of(&lines),
            values: values.len(),
            measured: lines.iter().filter(|line| line.measured.is_some()).count(),
        }
    }
}

impl LineOfStock {
    fn new(line: &StockLine) -> LineOfStock {
        let tolerance = |tolerance: Tolerance| {
            let (relative, absolute) = match tolerance {
                Tolerance::Relative { below, above } => (Some([below.to_f64(), above.to_f64()]), None),
                Tolerance::Absolute(amount) => (None, Some(amount.to_f64())),
            };
            ToleranceRecord { notation: tolerance.in_words(line.kind), relative, absolute }
        };
        let class = line.dielectric.as_ref().and_then(|dielectric| dielectric.class());
        LineOfStock {
            line: line.line,
            kind: line.kind,
            value: line.value.to_f64(),
            notation: format_part(line.value, line.kind),
            quantity: line.quantity,
            available: line.available(),
            tolerance: line.tolerance.map(tolerance),
            temperature_coefficient: line.temperature_coefficient.map(|coefficient| TemperatureCoefficientRecord {
                notation: coefficient.to_string(),
                mean_ppm_per_kelvin: coefficient.mean(),
                spread_ppm_per_kelvin: coefficient.spread(),
            }),
            dielectric: line.dielectric.as_ref().map(ToString::to_string),
            dielectric_class: class.map(|class| match class {
                DielectricClass::One => 1,
                DielectricClass::Two => 2,
            }),
            price: line.price.as_ref().map(|price| PriceRecord {
                notation: price.to_string(),
                amount: price.millionths as f64 / 1e6,
                currency: price.currency.clone(),
            }),
            id: line.id.clone(),
            ageing: line.ageing.map(|ageing| ageing.to_f64()),
            ageing_notation: line.ageing.map(ageing_in_words),
            measured: line.measured.map(|value| value.to_f64()),
            measured_notation: line.measured.map(|value| format_part(value, line.kind)),
            extra: line.extra.clone(),
        }
    }
}

impl StockRemark {
    fn new<T: ToString>(remark: &AtLine<T>, text: Option<&str>) -> StockRemark {
        StockRemark {
            line: remark.line,
            column: remark.column.clone(),
            text: text.map(str::to_string),
            message: remark.what.to_string(),
        }
    }
}

/// An ageing for people.
pub(super) fn ageing_in_words(ageing: Value) -> String {
    format!("±{} %", ageing.shifted(2).unwrap_or(ageing).to_f64())
}

/// The text that a fault is about.
fn wrong_text(fault: &StockFault) -> Option<&str> {
    match fault {
        StockFault::Kind(text)
        | StockFault::Quantity(text)
        | StockFault::TemperatureCoefficient(text)
        | StockFault::Price(text)
        | StockFault::Ageing(text)
        | StockFault::DecimalOrThousands(text)
        | StockFault::SeveralMarks(text)
        | StockFault::TooManyCells { text, .. } => Some(text),
        StockFault::Value(error) => Some(match error {
            NotationError::Empty(_) => "",
            NotationError::Comma(text)
            | NotationError::Megafarad(text)
            | NotationError::FemtoOrFarad(text)
            | NotationError::TooManyDigits(text)
            | NotationError::Unreadable { text, .. }
            | NotationError::OtherKind { text, .. }
            | NotationError::NotPositive { text, .. }
            | NotationError::OutOfRange { text, .. } => text,
        }),
        StockFault::Tolerance(error) => Some(match error {
            ToleranceError::Unreadable { text, .. }
            | ToleranceError::NoUnit(text)
            | ToleranceError::OutOfRange(text) => text,
        }),
        StockFault::UnclosedQuote { .. } => None,
    }
}

/// Writes the record as indented JSON with a line end. The keys are the fields of [`StockRecord`].
///
/// # Errors
/// Those of the writer.
pub fn write_stock_json(record: &StockRecord, out: &mut dyn Write) -> io::Result<()> {
    serde_json::to_writer_pretty(&mut *out, record).map_err(io::Error::from)?;
    writeln!(out)
}

/// Writes the record as text of at most `width` characters to the line (40 at least; a name that is longer is not
/// broken).
///
/// # Errors
/// Those of the writer.
pub fn write_stock_table(record: &StockRecord, width: usize, out: &mut dyn Write) -> io::Result<()> {
    let kinds = record.kinds.iter().map(|kind| lines_of(record, kind.kind, width));
    let blocks = [summary(record, width)].into_iter().chain(kinds).chain([
        remarks("Wrong, so the line is not used:", &record.faults, width),
        remarks("Odd:", &record.oddities, width),
    ]);
    let filled: Vec<String> = blocks.filter(|block| !block.is_empty()).collect();
    out.write_all(filled.join("\n").as_bytes())
}

fn summary(record: &StockRecord, width: usize) -> String {
    let between = match record.separator {
        ',' => "comma",
        ';' => "semicolon",
        _ => "tab",
    };
    let mark = if record.decimal_mark == ',' { "comma" } else { "point" };
    let cells = format!("{between} between them, decimal {mark} in numbers");
    let total = record.usable_lines + record.faulty_lines;
    let usable = match record.faulty_lines {
        0 => String::new(),
        faulty => format!(", of which {} cannot be used", count(faulty as u64)),
    };
    let mut entries = vec![
        ("Stock list", printable(&record.name)),
        ("Cells", cells),
        ("Lines", format!("{}{usable}", count(total as u64))),
    ];
    for kind in record.kinds.iter().filter(|kind| kind.amount.lines > 0) {
        let mut words = amount_in_words(&kind.amount);
        words += &format!(", {}", unbroken(&counted(kind.values, "value")));
        if kind.measured > 0 {
            words += &format!(", {}", unbroken(&format!("{} measured", count(kind.measured as u64))));
        }
        let name = if kind.kind == Kind::Resistor { "Resistors" } else { "Capacitors" };
        entries.push((name, words));
    }
    if !record.class_2.is_empty() {
        let found =
            record.class_2.iter().map(|found| format!("{} ({})", found.dielectric, amount_in_words(&found.amount)));
        // Common practice.
        let caution = "the capacitance moves with temperature, voltage and age; such a capacitor does not belong \
                       where it sets the response";
        entries.push(("Class 2", format!("{}: {caution}", found.collect::<Vec<_>>().join(", "))));
    }
    if !record.unknown_columns.is_empty() {
        let names = record.unknown_columns.iter().map(|name| unbroken(&printable(name)));
        entries.push(("Columns", format!("kept, but not used: {}", names.collect::<Vec<_>>().join(", "))));
    }
    let shown =
        entries.into_iter().map(|(name, words)| paragraph(&format!("{:<12}", format!("{name}:")), &words, width));
    shown.collect()
}

/// `3 lines`, `1 line`.
fn counted(number: usize, word: &str) -> String {
    format!("{} {word}{}", count(number as u64), if number == 1 { "" } else { "s" })
}

/// `3 lines, 1 of unknown quantity, 25 pieces`.
fn amount_in_words(amount: &AmountOfStock) -> String {
    let lines = counted(amount.lines, "line");
    let pieces = format!("{} {}", count(amount.pieces), if amount.pieces == 1 { "piece" } else { "pieces" });
    let words = match amount.lines_without_quantity {
        0 => vec![lines, pieces],
        open if open == amount.lines => vec![lines, "quantity unknown".to_string()],
        open => vec![lines, format!("{} of unknown quantity", count(open as u64)), pieces],
    };
    words.iter().map(|words| unbroken(words)).collect::<Vec<_>>().join(", ")
}

/// The lines of one kind, with the columns that hold anything.
fn lines_of(record: &StockRecord, kind: Kind, width: usize) -> String {
    let lines: Vec<&LineOfStock> = record.lines.iter().filter(|line| line.kind == kind).collect();
    if lines.is_empty() {
        return String::new();
    }
    let all = |cell: &dyn Fn(&LineOfStock) -> String| lines.iter().map(|line| cell(line)).collect::<Vec<_>>();
    let known = |cell: &dyn Fn(&LineOfStock) -> Option<String>| {
        let cells: Vec<Option<String>> = lines.iter().map(|line| cell(line)).collect();
        let any = cells.iter().any(Option::is_some);
        any.then(|| cells.into_iter().map(|cell| cell.map_or("-".to_string(), |text| printable(&text))).collect())
    };
    let currencies: BTreeSet<Option<&str>> =
        lines.iter().filter_map(|line| line.price.as_ref()).map(|price| price.currency.as_deref()).collect();
    // One currency for all goes into the header.
    let currency = currencies.first().copied().flatten().filter(|_| currencies.len() == 1);
    let behind = currency.map_or(String::new(), |currency| format!(" {currency}"));
    let price_header = currency.map_or("price".to_string(), |currency| format!("price\n{currency}"));
    let without = |text: &str, unit: &str| text.strip_suffix(unit).unwrap_or(text).to_string();

    let tolerance = known(&|line| line.tolerance.as_ref().map(|tolerance| tolerance.notation.clone()));
    let coefficient =
        known(&|line| line.temperature_coefficient.as_ref().map(|found| without(&found.notation, " ppm/K")));
    let price = known(&|line| line.price.as_ref().map(|price| without(&price.notation, &behind)));
    let further = [
        known(&|line| line.available.map(count)).map(|cells| Column::right("quantity", cells)),
        tolerance.map(|cells| Column::right("tolerance", cells)),
        coefficient.map(|cells| Column::right("tempco\nppm/K", cells)),
        known(&|line| line.ageing_notation.clone()).map(|cells| Column::right("ageing", cells)),
        known(&|line| line.dielectric.clone()).map(|cells| Column::left("dielectric", cells)),
        price.map(|cells| Column::right(price_header, cells)),
        known(&|line| line.id.clone()).map(|cells| Column::left("id", cells)),
        known(&|line| line.measured_notation.clone()).map(|cells| Column::right("measured", cells)),
    ];
    let mut columns = vec![
        Column::right("line", all(&|line| line.line.to_string())),
        Column::right("value", all(&|line| line.notation.clone())),
    ];
    columns.extend(further.into_iter().flatten());
    let name = if kind == Kind::Resistor { "Resistors, in ohms:" } else { "Capacitors, in farads:" };
    paragraph("", name, width) + &grid(&columns, 2, width)
}

/// Remarks below a title, each with its line and column.
fn remarks(title: &str, remarks: &[StockRemark], width: usize) -> String {
    if remarks.is_empty() {
        return String::new();
    }
    let digits = remarks.iter().map(|remark| remark.line.to_string().len()).max().unwrap_or(1);
    let shown = remarks.iter().map(|remark| {
        let column = remark.column.as_ref().map_or(String::new(), |column| format!("column \"{column}\": "));
        let text = printable(&format!("{column}{}", remark.message));
        paragraph(&format!("  line {:>digits$}: ", remark.line), &text, width)
    });
    paragraph("", title, width) + &shown.collect::<String>()
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;

    fn record(text: &str) -> StockRecord {
        StockRecord::new("drawer.csv", &Stock::read(text.as_bytes()).unwrap())
    }

    fn table(text: &str, width: usize) -> String {
        let mut bytes = Vec::new();
        write_stock_table(&record(text), width, &mut bytes).unwrap();
        String::from_utf8(bytes).unwrap()
    }

    fn json(text: &str) -> serde_json::Value {
        let mut bytes = Vec::new();
        write_stock_json(&record(text), &mut bytes).unwrap();
        serde_json::from_slice(&bytes).unwrap()
    }

    const DRAWER: &str = "\
kind,value,qty,tol,tc,dielectric,price,id,measured,note
R,4k7,1500,1%,±50,,$0.02,a,,
C,10n,3,J,-200,PP,$0.2,m1,9.93n,old
C,4p7,,0.25pF,,np0,0.05 EUR,,,
C,100n,40,K,,X7R,,,,
C,1u,,M,,Y5V,,,,
C,10n,-1,5,,PP,,,,
R,1k,1,1%,,,,,,,1
";

    #[test]
    fn what_was_read_is_shown_with_what_is_wrong_and_odd() {
        insta::assert_snapshot!(table(DRAWER, 80), @r#"
        Stock list: drawer.csv
        Cells:      comma between them, decimal point in numbers
        Lines:      7, of which 2 cannot be used
        Resistors:  1 line, 1,500 pieces, 1 value
        Capacitors: 4 lines, 2 of unknown quantity, 41 pieces, 4 values, 1 measured
        Class 2:    X7R (1 line, 40 pieces), Y5V (1 line, quantity unknown): the
                    capacitance moves with temperature, voltage and age; such a
                    capacitor does not belong where it sets the response
        Columns:    kept, but not used: note

        Resistors, in ohms:
        line  value  quantity  tolerance  tempco  price  id
                                           ppm/K      $
        ---------------------------------------------------
           2    4k7     1,500       ±1 %     ±50   0.02  a

        Capacitors, in farads:
        line  value  quantity  tolerance  tempco  dielectric     price  id  measured
                                           ppm/K
        ----------------------------------------------------------------------------
           3    10n         1       ±5 %    -200  PP            0.20 $  m1      9n93
           4    4p7         -   ±0.25 pF       -  C0G         0.05 EUR  -          -
           5   100n        40      ±10 %       -  X7R                -  -          -
           6     1u         -      ±20 %       -  Y5V                -  -          -

        Wrong, so the line is not used:
          line 7: column "qty": "-1" is no quantity: expected a whole number from 0 to
                  1000000000, for example 25
          line 7: column "tol": "5" has no unit: write 5 % if it is a percentage
          line 8: the line has 11 cells where the header has 10, and "1" stands beyond
                  it: put a cell that holds the separator ',' in quotes

        Odd:
          line 3: column "qty": a measured value belongs to one part, but the quantity
                  is 3: only one is counted, give each part its own line
          line 4: column "qty": the quantity is missing: it is not known how many there
                  are
          line 4: column "price": the price is in EUR, the one in line 2 in $: nothing
                  is converted
          line 6: column "qty": the quantity is missing: it is not known how many there
                  are
        "#);
    }

    #[test]
    fn columns_that_hold_nothing_are_left_out() {
        insta::assert_snapshot!(table("kind;value\nR;4,7\n", 80), @r"
        Stock list: drawer.csv
        Cells:      semicolon between them, decimal comma in numbers
        Lines:      1
        Resistors:  1 line, quantity unknown, 1 value

        Resistors, in ohms:
        line  value
        -----------
           2    4R7

        Odd:
          line 1: there is no column for the quantity: it is not known how many there
                  are of anything
        ");
        insta::assert_snapshot!(table("kind\tvalue\n", 80), @r"
        Stock list: drawer.csv
        Cells:      tab between them, decimal point in numbers
        Lines:      0

        Odd:
          line 1: no part is listed below the header
        ");
    }

    #[test]
    fn quantities_are_summed_as_far_as_they_are_known() {
        let amount = |text: &str| record(text).kinds[0].amount;
        let text = "kind,value,qty,measured,id\nR,1k,7,,\nR,1k,,,\nR,1k,5,1.01k,a\nR,1k,,1.02k,b\nR,2k,0,,\n";
        assert_eq!(amount(text), AmountOfStock { lines: 5, pieces: 9, lines_without_quantity: 1 });
        assert_eq!((record(text).kinds[0].values, record(text).kinds[0].measured), (2, 2));
        let most =
            "kind,value,qty\nR,1k,1000000000\nR,1k,1000000000\nR,1k,1000000000\nR,1k,1000000000\nR,1k,1000000000\n";
        assert_eq!(amount(most).pieces, 5_000_000_000);
        let words = |lines, pieces, lines_without_quantity| {
            amount_in_words(&AmountOfStock { lines, pieces, lines_without_quantity }).replace('\u{a0}', " ")
        };
        assert_eq!(words(1, 1, 0), "1 line, 1 piece");
        assert_eq!(words(2, 0, 2), "2 lines, quantity unknown");
        assert_eq!(words(2, 0, 1), "2 lines, 1 of unknown quantity, 0 pieces");
    }

    #[test]
    fn class_2_counts_capacitors_alone() {
        let found =
            record("kind,value,qty,dielectric\nC,1n,2,x7r\nC,2n,3,X7R\nR,1k,9,X7R\nC,1n,5,C0G\nC,1u,,Z5U\n").class_2;
        let shown: Vec<_> =
            found.iter().map(|one| (one.dielectric.as_str(), one.amount.lines, one.amount.pieces)).collect();
        assert_eq!(shown, [("X7R", 2, 5), ("Z5U", 1, 0)]);
    }

    #[test]
    fn json_is_in_si_units_and_unrounded() {
        let value = json(DRAWER);
        assert_eq!((&value["format"], &value["name"]), (&"roundwell-stock/1".into(), &"drawer.csv".into()));
        assert_eq!((&value["separator"], &value["decimal_mark"]), (&",".into(), &".".into()));
        assert_eq!((&value["usable_lines"], &value["faulty_lines"]), (&5.into(), &2.into()));
        let resistor = &value["lines"][0];
        assert_eq!((&resistor["kind"], &resistor["value"]), (&"R".into(), &4700.0.into()));
        assert_eq!(resistor["tolerance"]["relative"], serde_json::json!([0.01, 0.01]));
        assert_eq!(resistor["tolerance"]["absolute"], serde_json::Value::Null);
        assert_eq!(resistor["temperature_coefficient"]["spread_ppm_per_kelvin"], 50.0);
        assert_eq!((&resistor["price"]["amount"], &resistor["price"]["currency"]), (&0.02.into(), &"$".into()));
        assert_eq!(resistor["extra"], serde_json::json!({}));
        let measured = &value["lines"][1];
        // More than one of a measured part is not there.
        assert_eq!((&measured["quantity"], &measured["available"]), (&3.into(), &1.into()));
        assert_eq!((&measured["measured"], &measured["measured_notation"]), (&9.93e-9.into(), &"9n93".into()));
        assert_eq!(measured["temperature_coefficient"]["mean_ppm_per_kelvin"], -200.0);
        assert_eq!(measured["extra"], serde_json::json!({"note": "old"}));
        let small = &value["lines"][2];
        assert_eq!((&small["quantity"], &small["id"]), (&serde_json::Value::Null, &serde_json::Value::Null));
        assert_eq!(small["tolerance"]["absolute"], 0.25e-12);
        assert_eq!((&small["dielectric"], &small["dielectric_class"]), (&"C0G".into(), &1.into()));
        assert_eq!(value["lines"][3]["dielectric_class"], 2);
        assert_eq!(value["kinds"][1]["lines_without_quantity"], 2);
    }

    /// Every fault carries the very text of the file, wherever one text is wrong.
    #[test]
    fn faults_carry_the_wrong_text() {
        let header = "kind;value;quantity;tolerance;tc;price;measured";
        for (line, text) in [
            ("L;1k", Some("L")),
            (";1k", Some("")),
            ("R;", Some("")),
            ("R;4,k7", Some("4,k7")),
            ("R;1,000", Some("1,000")),
            ("R;1,000.5", Some("1,000.5")),
            ("R;10nF", Some("10nF")),
            ("R;0", Some("0")),
            ("R;1e99", Some("1e99")),
            ("R;12345678901234567890123", Some("12345678901234567890123")),
            ("C;1M", Some("1M")),
            ("C;1f", Some("1f")),
            ("R;1k;2.5", Some("2.5")),
            ("R;1k;;5", Some("5")),
            ("R;1k;;0 %", Some("0 %")),
            ("R;1k;;good", Some("good")),
            ("R;1k;;;cold", Some("cold")),
            ("R;1k;;;;free", Some("free")),
            ("R;1k;;;;;ten", Some("ten")),
            ("R;1k;;;;;;more", Some("more")),
            ("R;\"1k", None),
        ] {
            let faults = record(&format!("{header}\n{line}\n")).faults;
            assert_eq!(faults.len(), 1, "{line}: {faults:?}");
            assert_eq!((faults[0].line, faults[0].text.as_deref()), (2, text), "{line}: {faults:?}");
            if let Some(text) = text.filter(|text| !text.is_empty()) {
                assert!(faults[0].message.contains(text), "{faults:?}");
            }
        }
    }

    #[test]
    fn lines_keep_to_the_width_and_control_characters_out() {
        let text = "kind,value,qty,tol,tc,dielectric,price,\"id\",measured,\"\u{1b}[31m\nnote\"\n\
                    C,10n,1,-20/+80%,-750±120,\"old\npaper \u{1b}[0m\",0.000125 EUR,\"a \u{7}long name of a part\",9.87654n,x\n\
                    C,10n,1,-20/+80%,-750±120,X7R,1 $,b,\"bad\u{1b}[2J\",x\n";
        for width in [40, 80] {
            let shown = table(text, width);
            assert!(shown.lines().all(|line| line.chars().count() <= width), "{shown}");
            assert!(shown.chars().all(|sign| sign == '\n' || !sign.is_control()), "{shown:?}");
            assert!(shown.contains("9n87654") && shown.contains("class"), "{shown}");
        }
    }
}
