//! Files in every style, and files that are broken.
#![allow(clippy::unwrap_used)]
use std::collections::BTreeSet;

use csv::{QuoteStyle, Terminator, WriterBuilder};
use proptest::prelude::*;
use proptest::sample::{Index, select};

use super::*;
use crate::units::format_part;
use crate::units::test_support::deterministic;

/// How a file is written.
#[derive(Clone, Debug)]
struct Style {
    separator: char,
    end: &'static str,
    quotes: QuoteStyle,
    mark: bool,
    decimal_comma: bool,
    order: Vec<usize>,
}

fn styles() -> impl Strategy<Value = Style> {
    let quotes = select(vec![QuoteStyle::Necessary, QuoteStyle::Always, QuoteStyle::NonNumeric]);
    let order = Just((0..HEADER.len()).collect::<Vec<_>>()).prop_shuffle();
    (select(SEPARATORS.to_vec()), select(vec!["\n", "\r\n", "\r"]), quotes, any::<[bool; 2]>(), order).prop_map(
        |(separator, end, quotes, [mark, decimal_comma], order)| Style {
            separator,
            end,
            quotes,
            mark,
            decimal_comma,
            order,
        },
    )
}

const HEADER: [&str; 10] =
    ["kind", "value", "quantity", "tolerance", "tempco", "dielectric", "price", "id", "measured", "shelf"];

/// The cells of a line, in the order of the header and with decimal points.
fn cells() -> impl Strategy<Value = (StockLine, [String; 10])> {
    let part = (any::<bool>(), 1_u64..1000, -2..7_i32, 0..4_usize);
    let text = "[a-z\"][a-z ,;\t\"µΩ]{0,6}[a-z]";
    let details = (0_u64..50, 0..4_usize, 0..4_usize, 0_u64..300, 0..6_usize, 1..9_u64);
    (part, details, text, text).prop_map(|(part, details, id, shelf)| {
        let (is_resistor, mantissa, exponent, spelling) = part;
        let (kind, exponent) =
            if is_resistor { (Kind::Resistor, exponent) } else { (Kind::Capacitor, exponent - 12) };
        let value = Value::new(mantissa, exponent).unwrap();
        let prefix = if is_resistor { (3, "kΩ") } else { (-9, "nF") };
        let in_prefix = value.shifted(-prefix.0).unwrap().to_f64();
        let written = match spelling {
            0 => format_part(value, kind),
            1 => value.to_string(),
            2 => format!("{in_prefix} {}", prefix.1),
            _ => format!("{in_prefix}{}", &prefix.1[..1]),
        };
        let (quantity, tolerance, coefficient, cents, dielectric, digit) = details;
        let (tolerance, is_measured) = (["", "±5 %", "J", "2.5%"][tolerance], digit < 4);
        let coefficient = ["", "50", "-200 ppm/K", "-750±120.5"][coefficient];
        let dielectric = ["", "C0G", "X7R", "PP", "mica", "paper"][dielectric];
        let measured = value.sum(value.shifted(-4).unwrap()).filter(|_| is_measured);
        let measured_text = measured.map_or(String::new(), |measured| measured.to_string());
        let price = format!("{}.{:02}", cents / 100, cents % 100);
        let line = StockLine {
            line: 0,
            kind,
            value,
            quantity: Some(quantity),
            tolerance: Tolerance::read(&tolerance.replace('J', "5 %"), kind, value).ok(),
            temperature_coefficient: TemperatureCoefficient::read(coefficient),
            dielectric: Some(dielectric).filter(|name| !name.is_empty()).map(Dielectric::read),
            price: Some(Price { millionths: cents * 10_000, currency: None }),
            id: Some(id.clone()),
            measured,
            ageing: None,
            extra: BTreeMap::from([("shelf".to_owned(), shelf.clone())]),
        };
        let cells = [
            kind.letter().to_string(),
            written,
            quantity.to_string(),
            tolerance.to_owned(),
            coefficient.to_owned(),
            dielectric.to_owned(),
            price,
            id,
            measured_text,
            shelf,
        ];
        (line, cells)
    })
}

/// A file in a style. In one with a decimal comma every price has two decimals, so that there is no doubt about it.
fn written(rows: &[[String; 10]], style: &Style) -> Vec<u8> {
    let terminator = if style.end == "\r" { Terminator::Any(b'\r') } else { Terminator::CRLF };
    let mut writer = WriterBuilder::new()
        .delimiter(style.separator as u8)
        .quote_style(style.quotes)
        .terminator(if style.end == "\n" { Terminator::Any(b'\n') } else { terminator })
        .from_writer(if style.mark { "\u{feff}".as_bytes().to_vec() } else { Vec::new() });
    writer.write_record(style.order.iter().map(|&at| HEADER[at])).unwrap();
    for row in rows {
        let is_text = |at: usize| HEADER[at] == "id" || HEADER[at] == "shelf";
        let cell = |at: usize| match style.decimal_comma && !is_text(at) {
            true => row[at].replace('.', ","),
            false => row[at].clone(),
        };
        writer.write_record(style.order.iter().map(|&at| cell(at))).unwrap();
    }
    writer.into_inner().unwrap()
}

/// Changes of a file as people, spreadsheets and broken disks make them.
fn mutated(mut file: Vec<u8>, changes: &[(u8, Index, Index)]) -> Vec<u8> {
    const SNIPPETS: [&[u8]; 24] = [
        b"\"",
        b"\"\"",
        b",",
        b";",
        b"\t",
        b"\r",
        b"\n",
        b"\r\n",
        b"\0",
        b"\xff",
        b"\xb5",
        b"\xc2",
        "\u{feff}".as_bytes(),
        "µΩ±−€".as_bytes(),
        b"-",
        b".",
        b",000",
        b"9999999999999999999999",
        b"e-999999999",
        b"%",
        b"sep=;\n",
        b"kind",
        b"value",
        b" ",
    ];
    for (kind, from, to) in changes {
        if file.is_empty() {
            break;
        }
        let (a, b) = (from.index(file.len()), to.index(file.len()));
        let (start, end) = (a.min(b), a.max(b));
        let snippet = SNIPPETS[to.index(SNIPPETS.len())];
        match kind % 8 {
            0 => file[a] = to.index(128) as u8,
            1 => drop(file.drain(start..end.min(start + 20))),
            2 => drop(file.splice(a..a, snippet.iter().copied())),
            3 => drop(file.splice(a..=a, snippet.iter().copied())),
            4 => file.truncate(a),
            5 => {
                let copy = file[start..end].to_vec();
                drop(file.splice(a..a, copy));
            }
            6 => file.swap(a, b),
            _ => drop(file.drain(..start.min(40))),
        }
    }
    file
}

proptest! {
    #![proptest_config(deterministic(1_000))]

    #[test]
    fn what_is_written_in_any_style_reads_back(rows in prop::collection::vec(cells(), 1..8), style in styles()) {
        let (lines, rows): (Vec<_>, Vec<_>) = rows.into_iter().unzip();
        let bytes = written(&rows, &style);
        let stock = Stock::read(&bytes).unwrap();
        prop_assert_eq!(&stock.faults, &[]);
        let expected: Vec<StockLine> =
            lines.into_iter().enumerate().map(|(at, line)| StockLine { line: at + 2, ..line }).collect();
        prop_assert_eq!(&stock.lines, &expected);
        prop_assert_eq!((stock.separator, stock.decimal_comma), (style.separator, style.decimal_comma));
        prop_assert_eq!(&stock.unknown_columns, &["shelf"]);

        // The same text in other encodings is never read as something else.
        let text = String::from_utf8(bytes).unwrap();
        let utf16: Vec<u8> = text.encode_utf16().flat_map(u16::to_be_bytes).collect();
        prop_assert_eq!(Stock::read(&utf16), Err(StockError::Utf16));
        let body = text.trim_start_matches('\u{feff}');
        let single: Option<Vec<u8>> = body.chars().map(|sign| u8::try_from(sign).ok()).collect();
        if let Some(latin) = single.filter(|bytes| !bytes.is_ascii()) {
            let is_refused = matches!(Stock::read(&latin), Err(StockError::NotUtf8 { .. }));
            prop_assert!(is_refused);
        }
    }
}

proptest! {
    #![proptest_config(deterministic(24_000))]

    #[test]
    fn no_file_makes_the_reader_fail_or_lose_a_line(
        rows in prop::collection::vec(cells(), 0..9),
        style in styles(),
        changes in prop::collection::vec((any::<u8>(), any::<Index>(), any::<Index>()), 1..5),
        keeps_header in prop::bool::weighted(0.7),
    ) {
        let rows: Vec<_> = rows.into_iter().map(|(_, row)| row).collect();
        let mut bytes = written(&rows, &style);
        let header_end = bytes.iter().position(|byte| b"\r\n".contains(byte)).unwrap();
        let below = bytes.split_off(if keeps_header { header_end } else { 0 });
        bytes.extend(mutated(below, &changes));
        match Stock::read(&bytes) {
            Err(error) => prop_assert!(!error.to_string().is_empty()),
            Ok(stock) => {
                let text = std::str::from_utf8(&bytes).unwrap();
                // Reference: what the CSV reader finds; every record is a line, a fault or the header again.
                let skipped = text::declared_separator(text.trim_start_matches('\u{feff}')).is_some();
                let body = text.trim_start_matches('\u{feff}');
                let body = if skipped { &body[body.find(['\r', '\n']).unwrap()..] } else { body };
                let found = records(body, stock.separator).unwrap().len() - 1;
                let faulty: BTreeSet<usize> = stock.faults.iter().map(|fault| fault.line).collect();
                let repeated = stock.oddities.iter().filter(|o| o.what == StockOddity::HeaderAgain).count();
                let unclosed = stock.faults.last().is_some_and(|f| matches!(f.what, StockFault::UnclosedQuote { .. }));
                // The quote may stand in the header, or open a cell that is blank to the end.
                let least = stock.lines.len() + faulty.len() + repeated - usize::from(unclosed);
                let range = least..=least + usize::from(unclosed);
                prop_assert!(range.contains(&found));

                let count = text.replace("\r\n", "\n").split(['\r', '\n']).count();
                for line in &stock.lines {
                    prop_assert!((2..=count).contains(&line.line) && !faulty.contains(&line.line));
                    prop_assert!(line.kind.allows(line.value));
                    prop_assert!(line.measured.is_none_or(|measured| line.kind.allows(measured)));
                    if let Some(tolerance) = line.tolerance {
                        let (low, high) = tolerance.limits(line.value);
                        prop_assert!(low > 0.0 && low <= high && high <= 2.0 * line.value.to_f64());
                    }
                }
                for (line, shown) in stock.faults.iter().map(|f| (f.line, f.to_string())).chain(
                    stock.oddities.iter().map(|o| (o.line, o.to_string()))) {
                    let start = format!("line {line}");
                    prop_assert!((1..=count).contains(&line) && shown.starts_with(&start));
                }
                prop_assert!(stock.oddities.is_sorted_by_key(|oddity| oddity.line));
                prop_assert!(stock.faults.is_sorted_by_key(|fault| fault.line));
            }
        }
    }
}

proptest! {
    #![proptest_config(deterministic(4_000))]

    #[test]
    fn no_text_makes_the_reader_fail(text in "(kind|value|[\",;\t\r\n]|[0-9.]{0,3}[kn%±\u{2212}/+eE-]?|[RC]|\\PC){0,40}") {
        let with_header = format!("kind;value;qty;tol;tc;dielectric;price;id;measured\n{text}");
        for text in [text, with_header] {
            let first = Stock::read(text.as_bytes());
            prop_assert_eq!(first, Stock::read(text.as_bytes()));
        }
    }
}
