//! `roundwell stock` as it is run: what is read back, exit codes, files, pipes.

#![allow(clippy::unwrap_used)]

mod command;

use std::fs;
use std::path::Path;

use command::*;

const DRAWER: &str = "data/examples/bench-drawer.csv";

/// A list with two lines that cannot be used, and one that is odd.
const TIN: &str = "\
kind;value;quantity;tolerance;dielectric;price (EUR);id;measured;found in
R;4,7k;25;1 %;;0,03;;;tin
R;22k;dozens;1;;0,03;;;tin
C;10n;1;5 %;PP;0,18;C1;9,87n;old radio
C;100n;;10 %;X7R;0,04;;;bag
C;4k7;3;5 %;;;;;bag
";

#[test]
fn the_example_drawer_is_read_without_faults() {
    let output = run(Path::new("."), &format!("stock {DRAWER}"));
    assert_eq!(code(&output), 0, "{}", err(&output));
    assert!(err(&output).is_empty());
    insta::assert_snapshot!(out(&output));
}

/// Reference: the cells of the example, which has no quotes, taken apart at its commas.
#[test]
fn every_cell_of_the_example_comes_back() {
    let value = json(&run(Path::new("."), &format!("stock {DRAWER} --format json")));
    let text = fs::read_to_string(DRAWER).unwrap();
    let rows: Vec<Vec<&str>> = text.lines().skip(1).map(|line| line.split(',').collect()).collect();
    let lines = value["lines"].as_array().unwrap();
    assert_eq!(lines.len(), rows.len());
    for (at, (line, row)) in lines.iter().zip(&rows).enumerate() {
        assert_eq!(line["line"], at + 2);
        assert_eq!(line["kind"], row[0]);
        assert_eq!(line["notation"], row[1]);
        assert_eq!(line["quantity"], row[2].parse::<u64>().unwrap());
        assert_eq!(line["tolerance"]["notation"], format!("±{}", row[3]));
        let coefficient = &line["temperature_coefficient"];
        let stated = row[4].trim_start_matches('±').parse::<f64>();
        let figure = if row[4].starts_with('-') { "mean_ppm_per_kelvin" } else { "spread_ppm_per_kelvin" };
        assert_eq!(coefficient[figure].as_f64(), stated.ok());
        let or_empty = |key: &str| line[key].as_str().unwrap_or_default();
        assert_eq!(or_empty("dielectric"), row[5]);
        assert_eq!(line["price"]["amount"].as_f64(), row[6].parse().ok());
        assert_eq!(line["price"]["currency"], "EUR");
        assert_eq!(or_empty("id"), row[7]);
        let measured = row[8].strip_suffix('n').map(|number| format!("{number}e-9").parse::<f64>().unwrap());
        assert_eq!(line["measured"].as_f64(), measured);
        assert_eq!(line["extra"]["tray"], row[9]);
    }
    for (kind, letter) in value["kinds"].as_array().unwrap().iter().zip(["R", "C"]) {
        let rows: Vec<_> = rows.iter().filter(|row| row[0] == letter).collect();
        assert_eq!(kind["lines"], rows.len());
        assert_eq!(kind["pieces"], rows.iter().map(|row| row[2].parse::<u64>().unwrap()).sum::<u64>());
        assert_eq!(kind["measured"], rows.iter().filter(|row| !row[8].is_empty()).count());
    }
    assert_eq!(value["class_2"][0]["dielectric"], "X7R");
    assert_eq!((value["faults"].as_array(), value["oddities"].as_array()), (Some(&vec![]), Some(&vec![])));
    assert_eq!(value["unknown_columns"], serde_json::json!(["tray"]));
}

#[test]
fn sound_lines_are_shown_beside_faulty_ones() {
    let folder = folder_of(&[("tin.csv", TIN.as_bytes())]);
    let output = run(folder.path(), "stock tin.csv");
    assert_eq!(code(&output), 2);
    insta::assert_snapshot!(format!("{}\n--- standard error\n{}", out(&output), err(&output)));
    let value = json(&run(folder.path(), "stock tin.csv --format json"));
    assert_eq!((value["usable_lines"].as_u64(), value["faulty_lines"].as_u64()), (Some(3), Some(2)));
    let faults: Vec<_> = (value["faults"].as_array().unwrap().iter())
        .map(|fault| (fault["line"].as_u64().unwrap(), fault["column"].as_str().unwrap(), fault["text"].as_str()))
        .collect();
    assert_eq!(faults, [(3, "quantity", Some("dozens")), (3, "tolerance", Some("1")), (6, "value", Some("4k7"))]);
}

#[test]
fn lines_have_80_characters_at_most() {
    let folder = folder_of(&[("tin.csv", TIN.as_bytes()), ("drawer.csv", &fs::read(DRAWER).unwrap())]);
    for (line, width) in
        [("tin.csv", 80), ("drawer.csv", 80), ("tin.csv --width 40", 40), ("drawer.csv --width 40", 40)]
    {
        let text = out(&run(folder.path(), &format!("stock {line}")));
        assert!(!text.is_empty() && text.lines().all(|line| line.chars().count() <= width), "{text}");
    }
}

#[test]
fn the_way_a_list_is_written_does_not_matter() {
    let text = fs::read_to_string(DRAWER).unwrap();
    let semicolons = text.replace(',', ";").replace('.', ",");
    let quoted: String = text.lines().map(|line| format!("\"{}\"\r\n", line.replace(',', "\"\t\""))).collect();
    let folder = folder_of(&[
        ("drawer.csv", text.as_bytes()),
        ("semicolons.csv", semicolons.as_bytes()),
        ("quoted.csv", format!("\u{feff}{quoted}").as_bytes()),
    ]);
    let value = |name: &str| json(&run(folder.path(), &format!("stock {name} --format json")));
    let plain = value("drawer.csv");
    for (name, separator, mark) in [("semicolons.csv", ";", ","), ("quoted.csv", "\t", ".")] {
        let found = value(name);
        assert_eq!((&found["separator"], &found["decimal_mark"]), (&separator.into(), &mark.into()));
        assert_eq!((&found["lines"], &found["kinds"]), (&plain["lines"], &plain["kinds"]));
    }
}

#[test]
fn a_list_comes_from_standard_input() {
    let folder = folder_of(&[("tin.csv", TIN.as_bytes())]);
    let output = piped(folder.path(), "stock -", "tin.csv");
    assert_eq!(code(&output), 2);
    assert!(err(&output).contains("2 lines of standard input cannot be used"), "{}", err(&output));
    let from_file = out(&run(folder.path(), "stock tin.csv"));
    assert_eq!(out(&output), from_file.replace("tin.csv", "standard input"));
    assert!(refused(&run(folder.path(), "stock -")).contains("standard input: the file is empty"));
}

#[test]
fn a_file_is_written_whole_or_left_alone() {
    let folder = folder_of(&[("tin.csv", TIN.as_bytes()), ("no.csv", b"R,4k7\n"), ("list.json", b"old")]);
    let list = || fs::read(folder.path().join("list.json")).unwrap();
    refused(&run(folder.path(), "stock no.csv --format json --out list.json"));
    assert_eq!(list(), b"old");
    // Faulty lines do not keep the others from being written.
    refused(&run(folder.path(), "stock tin.csv --format json --out list.json"));
    assert_eq!(list(), run(folder.path(), "stock tin.csv --format json").stdout);
    assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 3);
    for place in [".", "no/such/list.json"] {
        refused(&run(folder.path(), &format!("stock tin.csv --out {place}")));
    }
}

#[test]
fn files_that_are_no_list_are_refused() {
    let utf16: Vec<u8> = "kind,value\n".encode_utf16().flat_map(u16::to_le_bytes).collect();
    let folder = folder_of(&[
        ("empty.csv", b""),
        ("workbook.csv", b"PK\x03\x04rest"),
        ("utf16.csv", &utf16),
        ("latin.csv", b"kind,value\nC,10 \xb5F\n"),
        ("headless.csv", b"R,4k7,10\n\x1b[31m"),
        ("binary.csv", b"kind,value\nR,\0\0\0k\n"),
        ("long.csv", &vec![b'x'; 4_000_001]),
    ]);
    let mut told = String::new();
    for name in ["empty", "workbook", "utf16", "latin", "headless", "binary", "long", "missing"] {
        told += &format!("$ roundwell stock {name}.csv\n");
        told += &refused(&run(folder.path(), &format!("stock {name}.csv")));
        told += "\n";
    }
    insta::assert_snapshot!(told);
    assert!(refused(&run(folder.path(), "stock .")).contains("is a directory"));
    assert!(!refused(&run(folder.path(), "stock headless.csv")).contains('\u{1b}'));
}

#[test]
fn usage_is_refused_with_2_and_help_names_the_columns() {
    for line in ["stock", "stock a.csv b.csv", "stock a.csv --format csv", "stock a.csv --width 10"] {
        refused(&run(Path::new("."), line));
    }
    let short = run(Path::new("."), "stock -h");
    let long = run(Path::new("."), "stock --help");
    assert_eq!((code(&short), code(&long)), (0, 0));
    assert!(out(&short).contains("Exit codes") && !out(&short).contains("tempco"));
    for (words, _) in roundwell::parts::STOCK_COLUMNS {
        assert!(out(&long).contains(&words.join(", ")), "{words:?}");
    }
}

#[test]
fn a_reader_that_has_gone_is_no_failure() {
    let output = unread(Path::new("."), &format!("stock {DRAWER}"));
    assert_eq!((code(&output), err(&output)), (0, String::new()));
}
