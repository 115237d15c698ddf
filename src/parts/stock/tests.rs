//! The rules of reading, one by one.
#![allow(clippy::unwrap_used)]

use super::*;
use crate::units::{format_part, parse_part};

fn read(text: &str) -> Stock {
    Stock::read(text.as_bytes()).unwrap()
}

fn faults(text: &str) -> Vec<String> {
    read(text).faults.iter().map(ToString::to_string).collect()
}

fn oddities(text: &str) -> Vec<String> {
    read(text).oddities.iter().map(ToString::to_string).collect()
}

/// The faults of one cell below the header of its column, beside a sound resistor or capacitor.
fn fault_of(kind_and_value: &str, column: &str, cell: &str) -> String {
    let found = faults(&format!("kind;value;{column}\n{kind_and_value};{cell}\n"));
    assert_eq!(found.len(), 1, "{cell}: {found:?}");
    let prefix = format!("line 2, column \"{column}\": ");
    found[0].strip_prefix(&prefix).unwrap().to_owned()
}

fn value(text: &str, kind: Kind) -> Value {
    parse_part(text, kind).unwrap()
}

#[test]
fn a_drawer_is_read_with_all_that_it_states() {
    let stock = read(concat!(
        "Part-ID,Kind,Value,Qty,Tol,Tempco,Dielectric,Price,Measured,Shelf,Note\n",
        "A1,R,4k7,25,1%,±50,,\"$0.02\",,3,\n",
        "B7,capacitor,10 nF,0,J,-750±120,U2J,0.12 EUR,,,\"old, but \"\"good\"\"\"\n",
        "\n",
        "c-3,C,1e-8,1,0.5 %,,np0,,9.98712n,4,\n",
        "R,R,1\n",
    ));
    assert_eq!(stock.faults, []);
    assert_eq!((stock.separator, stock.decimal_comma), (',', false));
    assert_eq!(stock.unknown_columns, ["Shelf", "Note"]);
    let ohms = |text| value(text, Kind::Resistor);
    let farads = |text| value(text, Kind::Capacitor);
    let nothing = StockLine {
        line: 6,
        kind: Kind::Resistor,
        value: ohms("1"),
        quantity: None,
        tolerance: None,
        temperature_coefficient: None,
        dielectric: None,
        price: None,
        id: Some("R".to_owned()),
        measured: None,
        ageing: None,
        extra: BTreeMap::new(),
    };
    let extra = |pairs: &[(&str, &str)]| pairs.iter().map(|(k, v)| (k.to_string(), v.to_string())).collect();
    let price = |millionths, currency: &str| Some(Price { millionths, currency: Some(currency.to_owned()) });
    let percent = |text, value| Tolerance::read(text, Kind::Resistor, value).ok();
    let expected = [
        StockLine {
            line: 2,
            value: ohms("4.7k"),
            quantity: Some(25),
            tolerance: percent("1 %", ohms("4k7")),
            temperature_coefficient: TemperatureCoefficient::read("50"),
            price: price(20_000, "$"),
            id: Some("A1".to_owned()),
            extra: extra(&[("Shelf", "3")]),
            ..nothing.clone()
        },
        StockLine {
            line: 3,
            kind: Kind::Capacitor,
            value: farads("10n"),
            quantity: Some(0),
            tolerance: percent("5 %", farads("10n")),
            temperature_coefficient: TemperatureCoefficient::read("-750±120"),
            dielectric: Some(Dielectric::read("U2J")),
            price: price(120_000, "EUR"),
            id: Some("B7".to_owned()),
            extra: extra(&[("Note", "old, but \"good\"")]),
            ..nothing.clone()
        },
        StockLine {
            line: 5,
            kind: Kind::Capacitor,
            value: farads("10n"),
            quantity: Some(1),
            tolerance: percent("0.5 %", farads("10n")),
            dielectric: Some(Dielectric::read("C0G")),
            id: Some("c-3".to_owned()),
            measured: Some(farads("9.98712n")),
            extra: extra(&[("Shelf", "4")]),
            ..nothing.clone()
        },
        nothing,
    ];
    assert_eq!(stock.lines, expected);
}

#[test]
fn separators_quotes_and_line_ends_do_not_matter() {
    let file = "\"kind\",value,\"tolerance; tab\t\",qty\nR,\"4k7\",,5\n\"C\",10n,,6\n";
    let plain = read(file);
    assert_eq!((plain.lines.len(), plain.separator), (2, ','));
    for separator in [';', '\t'] {
        let own = format!("k{separator}t");
        let file = file.replace("; tab\t", &own).replace(",", &separator.to_string());
        for end in ["\n", "\r\n", "\r"] {
            for mark in ["", "\u{feff}"] {
                let stock = read(&format!("{mark}{file}").replace('\n', end));
                assert_eq!((&stock.lines, stock.separator), (&plain.lines, separator));
            }
        }
    }
    // The header decides, not the most frequent sign.
    assert_eq!(read("kind;value;a, b, c, d, e\nR;1k;1,2,3,4\n").separator, ';');
    // A declared separator decides even where another one fits better.
    let declared = read("sep=\t\r\nvalue\tkind\tqty,tol,id\r\n1k\tR\t\r\n");
    assert_eq!((declared.separator, declared.lines[0].line), ('\t', 3));
    assert_eq!(declared.unknown_columns, ["qty,tol,id"]);
}

#[test]
fn a_file_that_is_no_list_is_refused() {
    let told = |text: &str| Stock::read(text.as_bytes()).unwrap_err().to_string();
    let empty = "the file is empty: begin with a line that names the columns, such as kind,value,quantity";
    for text in ["", "\u{feff}", "\r\n\n", "  \n\t\n", "sep=;\n", "\""] {
        assert_eq!(told(text), empty, "{text:?}");
    }
    let no_column = |line: usize, missing: &str, found: &str| {
        format!(
            "line {line} has no column for {missing}: it must name the columns, such as kind,value,quantity, with a \
             comma, semicolon or tab between them; found \"{found}\""
        )
    };
    assert_eq!(told("R,4k7,10\nC,10n,5\n"), no_column(1, "kind and value", "R | 4k7 | 10"));
    assert_eq!(told("\n\nkind,wert\n"), no_column(3, "value", "kind | wert"));
    assert_eq!(told("kind|value\nR|1k\n"), no_column(1, "kind and value", "kind|value"));
    assert_eq!(Stock::read(b"kind,value\nC,10 \xb5F\n"), Err(StockError::NotUtf8 { line: 2, byte: 0xb5 }));
}

#[test]
fn bad_cells_are_named_with_what_was_expected() {
    let resistor = "R;4k7";
    assert_eq!(fault_of(resistor, "qty", "-5"), quantity("-5"));
    for text in ["2.5", "2,5", "+5", "1e3", "10 pcs", "1000000001", "99999999999999999999999", "many"] {
        assert_eq!(fault_of(resistor, "quantity", text), quantity(text));
    }
    assert_eq!(fault_of(resistor, "tol", "1,5"), "\"1,5\" has no unit: write 1,5 % if it is a percentage");
    assert_eq!(
        fault_of("C;10n", "tolerance", "5,5 %%"),
        "\"5,5 %%\" is no tolerance: expected a percentage, a letter of IEC 60062 or an amount in farads, for \
         example 5 %, J or 0.25 pF"
    );
    assert_eq!(
        fault_of(resistor, "tc", "50 ppb"),
        "\"50 ppb\" is no temperature coefficient: expected ppm/K up to 10000, for example -200, ±50 or -750±120"
    );
    assert_eq!(
        fault_of(resistor, "price", "5 ct"),
        "\"5 ct\" is no price: expected an amount from 0 to 1000000 for one part with at most six decimals, for \
         example 0.12, €0.12 or 0.12 EUR"
    );
    assert_eq!(
        fault_of("C;10n", "measured", "9,9x"),
        "cannot read \"9,9x\" as a capacitor value: expected a number in farads, or one with p, n, u, m or F, for \
         example 4n7, 330p or 1u"
    );
    assert_eq!(
        fault_of(resistor, "measured (kΩ)", "0"),
        "\"0\" is not positive: a resistor value is larger than zero, for example 4k7, 2R2 or 1M"
    );
    assert_eq!(
        fault_of(resistor, "quantity", "1,000"),
        "\"1,000\" could have decimals or a separator between thousands: write it without the sign, or with another \
         count of decimals"
    );
    assert_eq!(
        fault_of(resistor, "measured value", "1.234,5"),
        "\"1.234,5\" has several commas or points: write one decimal mark, and no separator between thousands"
    );
}

fn quantity(text: &str) -> String {
    format!("\"{text}\" is no quantity: expected a whole number from 0 to 1000000000, for example 25")
}

#[test]
fn every_fault_of_a_line_is_told_and_the_rest_is_read() {
    let text = concat!(
        "kind,value,quantity,price\n",
        "L,1m,x,0.1\n",
        "R,4k7,3,0.1\n",
        ",4k7,3,\n",
        "R,,3,\n",
        "C,4k7,-1,free\n",
        "R,4,7k,3,0.1\n",
        "R,10k,,\n",
    );
    assert_eq!(
        faults(text),
        [
            "line 2, column \"kind\": \"L\" is no kind of part: write R or C".to_owned(),
            format!("line 2, column \"quantity\": {}", quantity("x")),
            "line 4, column \"kind\": \"\" is no kind of part: write R or C".to_owned(),
            "line 5, column \"value\": the resistor value is empty: write one such as 4k7, 2R2 or 1M".to_owned(),
            "line 6, column \"value\": \"4k7\" is a resistor value where a capacitor value is needed: write one such \
             as 4n7, 330p or 1u"
                .to_owned(),
            format!("line 6, column \"quantity\": {}", quantity("-1")),
            "line 6, column \"price\": \"free\" is no price: expected an amount from 0 to 1000000 for one part with \
             at most six decimals, for example 0.12, €0.12 or 0.12 EUR"
                .to_owned(),
            "line 7: the line has 5 cells where the header has 4, and \"0.1\" stands beyond it: put a cell that holds \
             the separator ',' in quotes"
                .to_owned(),
        ]
    );
    let lines: Vec<usize> = read(text).lines.iter().map(|line| line.line).collect();
    assert_eq!(lines, [3, 8]);
    // Empty cells beyond the header are what spreadsheets leave behind.
    assert_eq!(faults("kind,value\nR,1k,,,\n,,,\n"), [] as [String; 0]);
}

#[test]
fn quotes_that_are_not_closed_do_not_swallow_lines_in_silence() {
    let text = "kind,value,note\nR,1k,a\nR,2k,\"b\nR,3k,c\nR,4k,d\n";
    assert_eq!(
        faults(text),
        ["line 3, column \"note\": a quote is opened in line 3 and never closed: nothing behind it was read"]
    );
    assert_eq!(read(text).lines.len(), 1);
    let in_header = read("kind,value,\"note\nR,1k,a\n");
    assert_eq!(
        in_header.faults[0].to_string(),
        "line 1: a quote is opened in line 1 and never closed: nothing behind it was read"
    );
    let at_the_end = read("kind,value\nR,1k\n\n\" \n");
    assert_eq!(
        at_the_end.faults[0].to_string(),
        "line 4: a quote is opened in line 4 and never closed: nothing behind it was read"
    );
    assert_eq!((at_the_end.lines.len(), at_the_end.faults.len()), (1, 1));
    // Closed by the next quote: no fault, but worth a word.
    let text = "kind,value,qty,note\nR,1k,1,\"b\nR,3k,1,c\nR,4k,1,\"d\"\nR,5k,1,e\n";
    assert_eq!(faults(text), [] as [String; 0]);
    assert_eq!(
        oddities(text),
        ["line 2, column \"note\": the cell goes on to line 4: if it should not, a quote is missing"]
    );
    assert_eq!(read(text).lines[1].line, 5);
}

#[test]
fn decimal_marks_are_those_of_the_file() {
    let values = |text: &str| -> Vec<String> {
        read(text).lines.iter().map(|line| format_part(line.measured.unwrap(), line.kind)).collect()
    };
    // The price shows that the comma is decimal.
    assert_eq!(values("kind;value;measured;price\nR;4,7k;4,712k;0,05\nR;1k;1.012k;\n"), ["4k712"]);
    assert_eq!(values("kind\tvalue\tmeasured\nR\t4k7\t4.712k\n"), ["4k712"]);
    assert_eq!(values("kind,value,measured\nR,4k7,\"4,71k\"\n"), ["4k71"]);
    assert!(read("kind;value\nR;4,7k\n").decimal_comma && !read("kind;value;note\nR;4.7k;1,5\n").decimal_comma);
}

#[test]
fn units_of_the_header_go_for_bare_numbers() {
    let text = "kind;value;tolerance %;measured [nF];price (EUR);tempco ppm/K\nC;10n;5;9,98;0,1;30\nC;10n;J;9,98 nF;$1;30 ppm/K\n";
    let stock = read(text);
    assert_eq!(stock.faults, []);
    let [first, second] = [&stock.lines[0], &stock.lines[1]];
    assert_eq!((first.tolerance, first.measured), (second.tolerance, second.measured));
    assert_eq!(first.measured, Some(value("9.98n", Kind::Capacitor)));
    assert_eq!(first.temperature_coefficient, second.temperature_coefficient);
    let currencies: Vec<_> = stock.lines.iter().map(|l| l.price.as_ref().unwrap().to_string()).collect();
    assert_eq!(currencies, ["0.10 EUR", "1.00 $"]);
    // A resistor below a header in nF.
    assert_eq!(
        fault_of("R;10k", "measured (nF)", "10"),
        "\"10\" is a capacitor value where a resistor value is needed: write one such as 4k7, 2R2 or 1M"
    );
}

#[test]
fn odd_lines_are_told() {
    let text = concat!(
        "kind,value,qty,tol,dielectric,price,id,measured,qty\n",
        "R,4k7,,1%,,0.1 EUR,a,,\n",
        "C,10n,5,,X7R,$0.1,b,,\n",
        "C,10n,5,J,stone,,c,,\n",
        "R,1k,5,J,metal film,,d,,\n",
        "C,10n,1,5%,C0G,,e1,10.6n,\n",
        "C,10n,3,5%,C0G,,e1,9.5n,\n",
        "C,10n,1,5%,C0G,,,10.5n,\n",
        "C,10n,,,C0G,,e4,4.9n,\n",
        "kind,value,qty,tol,dielectric,price,id,measured,qty\n",
        "R,4700,,1 %,,\"0.10 EUR\",a,,\n",
    );
    assert_eq!(
        oddities(text),
        [
            "line 1, column \"qty\": means the same as \"qty\" in column 3, which is used; this one is only kept",
            "line 2, column \"qty\": the quantity is missing: it is not known how many there are",
            "line 3, column \"tol\": the tolerance of this capacitor is missing",
            "line 3, column \"price\": the price is in $, the one in line 2 in EUR: nothing is converted",
            "line 4, column \"dielectric\": the dielectric \"stone\" is not known, nor is its class: expected one such \
             as C0G, X7R, PP or PET",
            "line 5, column \"dielectric\": a resistor has no dielectric, but \"metal film\" is stated",
            "line 6, column \"measured\": measured 10n6, above the nominal 10n by more than its tolerance of ±5 %",
            "line 7, column \"qty\": a measured value belongs to one part, but the quantity is 3: only one is \
             counted, give each part its own line",
            "line 7, column \"id\": the measured part \"e1\" is already in line 6: give every measured part its own id",
            "line 8, column \"id\": this measured part has no id: it cannot be told from the others",
            "line 9, column \"measured\": measured 4n9, below the nominal 10n by more than a factor of 2",
            "line 10: repeats the header: it is skipped",
            "line 11, column \"qty\": the quantity is missing: it is not known how many there are",
            "line 11: the same as line 2 in everything: both are counted, remove one if it was entered twice",
        ]
    );
    let available: Vec<_> = read(text).lines.iter().map(StockLine::available).collect();
    assert_eq!(available, [None, Some(5), Some(5), Some(5), Some(1), Some(1), Some(1), Some(1), None]);
    assert_eq!(
        oddities("kind,value\nR,1k\nC,1n\n"),
        [
            "line 1: there is no column for the quantity: it is not known how many there are of anything",
            "line 1: there is no column for the tolerance: that of the capacitors is not known",
        ]
    );
    assert_eq!(oddities("kind,value\n"), ["line 1: no part is listed below the header"]);
}

#[test]
fn a_measured_part_is_there_once_unless_it_is_not() {
    let stock = read("kind,value,qty,measured,id\nR,1k,0,1.01k,a\nR,1k,,1.01k,b\nR,1k,7,1.01k,c\n");
    let available: Vec<_> = stock.lines.iter().map(StockLine::available).collect();
    assert_eq!(available, [Some(0), Some(1), Some(1)]);
}

#[test]
fn lines_that_differ_in_what_matters_are_different_choices() {
    let stock = read(concat!(
        "kind,value,tol,dielectric,tc,qty,id,measured\n",
        "C,10n,5%,C0G,,5,a,\n",
        "C,1e-8,J,NP0,,7,b,\n",
        "C,10n,1%,C0G,,5,a,\n",
        "C,10n,5%,X7R,,5,a,\n",
        "C,10n,5%,C0G,30,5,a,\n",
        "C,10n,5%,C0G,,1,a,10.01n\n",
    ));
    let first = &stock.lines[0];
    let same: Vec<bool> = stock.lines.iter().map(|line| line.is_same_choice(first)).collect();
    assert_eq!(same, [true, true, false, false, false, false]);
    assert!(!stock.lines[5].is_same_choice(&stock.lines[5]));
    assert!(stock.oddities.is_empty());
}

#[test]
fn ageing_is_a_percentage_to_either_side() {
    for (text, ratio) in [("0.5 %", "0.005"), ("±2%", "0.02"), ("10 %", "0.1")] {
        let stock = read(&format!("kind;value;ageing\nC;10n;{text}\n"));
        assert_eq!(stock.faults, []);
        assert_eq!(stock.lines[0].ageing.map(|ageing| ageing.to_f64()), ratio.parse().ok(), "{text}");
    }
    assert_eq!(read("kind;value;end of life (%)\nC;10n;1,5\n").lines[0].ageing.map(|a| a.to_f64()), Some(0.015));
    assert_eq!(read("kind;value;ageing\nC;10n;\n").lines[0].ageing, None);
    for text in ["0.5", "J", "-5/+1 %", "0 %", "100 %", "1pF", "some"] {
        let told = fault_of("C;10n", "ageing", text);
        let expected = "is no ageing: expected a percentage above 0 and below 100, for example 0.5 %";
        assert_eq!(told, format!("\"{text}\" {expected}"));
    }
    // Parts that age otherwise are another choice.
    let stock = read("kind;value;ageing\nC;10n;1%\nC;10n;2%\nC;10n;1.0 %\n");
    assert!(!stock.lines[0].is_same_choice(&stock.lines[1]) && stock.lines[0].is_same_choice(&stock.lines[2]));
}
