//! `roundwell stock LIST --need SHORTLIST` as it is run: what a row takes from a stock list, what is left, what is short.

#![allow(clippy::unwrap_used)]

mod command;

use std::fs;

use command::*;
use serde_json::Value;
use tempfile::TempDir;

/// Enough for four boards of a row with 15k, 15k and 22n, not for five.
const DRAWER: &str = "kind,value,quantity,tolerance,id\nR,10k,40,1 %,R10\nR,12k,30,1 %,R12\nR,15k,8,1 %,R15\nC,10n,9,5 %,F10\nC,22n,,5 %,F22\n";

/// The parts are pinned, so that what is needed is known: 15k twice, 22n and 10n once a board.
const JOB: &str = r#"(
    title: "Hive scale",
    sections: [(
        name: "S", shape: LowPass, f0: "750 Hz", q: 0.7071, circuit: "sallen-key-low-pass",
        slots: {"R1": (pin: "15k"), "R2": (pin: "15k"), "C1": (pin: "22n"), "C2": (pin: "10n")},
    )],
    stock: "drawer.csv",
    error_limit: 6,
)
"#;

/// A folder with the drawer, the job and the shortlist that comes of it.
fn workshop(drawer: &str, job: &str, flags: &str) -> TempDir {
    let folder = folder_with(&[("drawer.csv", drawer), ("job.ron", job)]);
    let output = run(folder.path(), &format!("shortlist job.ron --format json --out list.json {flags}"));
    assert_eq!(code(&output), 0, "{}", err(&output));
    folder
}

fn parts(value: &Value) -> Vec<(String, u64, u64)> {
    let number = |part: &Value, key: &str| part[key].as_u64().unwrap();
    let parts = value["parts"].as_array().unwrap().iter();
    parts
        .map(|part| (part["value"].as_str().unwrap().to_string(), number(part, "need"), number(part, "short")))
        .collect()
}

fn expected(list: &[(&str, u64, u64)]) -> Vec<(String, u64, u64)> {
    list.iter().map(|&(value, need, short)| (value.to_string(), need, short)).collect()
}

#[test]
fn a_row_is_counted_for_any_number_of_boards() {
    let folder = workshop(DRAWER, JOB, "--boards 2");
    for (flags, exit, counted) in [
        // As the shortlist was made.
        ("", 0, [("15k", 4, 0), ("10n", 2, 0), ("22n", 2, 0)]),
        ("--boards 4", 0, [("15k", 8, 0), ("10n", 4, 0), ("22n", 4, 0)]),
        ("--boards 4 --spares 1", 3, [("15k", 9, 1), ("10n", 5, 0), ("22n", 5, 0)]),
        ("--spares 5", 3, [("15k", 9, 1), ("10n", 7, 0), ("22n", 7, 0)]),
        ("--boards 10", 3, [("15k", 20, 12), ("10n", 10, 1), ("22n", 10, 0)]),
    ] {
        let line = format!("stock drawer.csv --need list.json --row 1 {flags}");
        let output = run(folder.path(), &format!("{line} --format json"));
        assert_eq!(code(&output), exit, "{flags}: {}", err(&output));
        assert!(err(&output).is_empty());
        let value = json(&output);
        assert_eq!(parts(&value), expected(&counted), "{flags}");
        assert_eq!(value["format"], "roundwell-need/1");
        let short = counted.iter().filter(|(_, _, short)| *short > 0).count();
        assert_eq!(value["short"].as_u64(), Some(short as u64), "{flags}");
        let text = out(&run(folder.path(), &line));
        assert_eq!(text.contains("The stock suffices."), exit == 0, "{text}");
        // A list that does not say how many there are is enough for any number.
        assert!(value["parts"][2]["there"].is_null() && value["parts"][2]["left"].is_null());
        let left = value["parts"][1]["left"].as_u64().unwrap();
        assert_eq!(left, 9_u64.saturating_sub(counted[1].1));
    }
}

#[test]
fn the_table_says_what_is_left_and_what_is_short() {
    let folder = workshop(DRAWER, JOB, "--boards 2");
    let other = "kind;value;quantity;tolerance;id\nR;15k;7;5 %;K15\nC;22n;3;10 %;\n";
    fs::write(folder.path().join("other.csv"), other).unwrap();
    let mut all = String::new();
    for line in [
        "stock drawer.csv --need list.json",
        "stock drawer.csv --need list.json --boards 10 --spares 2",
        "stock other.csv --need list.json",
    ] {
        let output = run(folder.path(), line);
        all += &format!("$ roundwell {line}\n{}exit code {}\n\n", out(&output), code(&output));
    }
    insta::assert_snapshot!(all);
}

#[test]
fn the_keys_of_the_json_are_there() {
    let folder = workshop(DRAWER, JOB, "");
    let value = json(&run(folder.path(), "stock drawer.csv --need list.json --format json"));
    let keys = |value: &Value| value.as_object().unwrap().keys().cloned().collect::<std::collections::BTreeSet<_>>();
    let all = |list: &[&str]| list.iter().map(ToString::to_string).collect::<std::collections::BTreeSet<_>>();
    assert!(all(&["format", "title", "stock", "row", "boards", "spares", "parts", "short"]).is_subset(&keys(&value)));
    let part =
        ["kind", "value", "wanted_grade", "grade", "id", "lines", "per_board", "need", "there", "left", "short"];
    assert!(all(&part).is_subset(&keys(&value["parts"][0])));
    assert_eq!((&value["title"], &value["stock"]), (&"Hive scale".into(), &"drawer.csv".into()));
}

#[test]
fn parts_of_another_grade_stand_in_and_it_is_said() {
    let folder = workshop(DRAWER, JOB, "");
    fs::write(folder.path().join("other.csv"), DRAWER.replace("R,15k,8,1 %", "R,15k,8,5 %")).unwrap();
    let output = run(folder.path(), "stock other.csv --need list.json");
    assert_eq!(code(&output), 0);
    let text = in_one_line(&out(&output));
    assert!(text.contains("R 15k: the row has ±1 %, the list ±5 %"), "{text}");
}

/// Two grades of one value in the row, one lot in the list: 10 are needed, 5 are there.
#[test]
fn parts_that_fall_on_one_lot_are_added_up() {
    let drawer = "kind,value,quantity,tolerance\nR,15k,5,1 %\nR,15k,5,0.1 %\nC,10n,9,5 %\nC,22n,9,5 %\n";
    let folder = workshop(drawer, JOB, "--boards 5");
    for (quantity, exit) in [(5, 3), (9, 3), (10, 0)] {
        let list = format!("kind,value,quantity\nR,15k,{quantity}\nC,10n,9\nC,22n,9\n");
        fs::write(folder.path().join("plain.csv"), list).unwrap();
        let output = run(folder.path(), "stock plain.csv --need list.json");
        assert_eq!(code(&output), exit, "{quantity}:\n{}", out(&output));
    }
}

#[test]
fn measured_parts_do_for_no_more_boards_than_listed() {
    let drawer = "kind,value,quantity,tolerance,id,measured\nR,15k,40,1 %,,\nC,22n,40,5 %,,\nC,10n,1,5 %,M1,9.9n\nC,10n,1,5 %,M2,10.1n\n";
    let folder = workshop(drawer, JOB, "--boards 2");
    let output = run(folder.path(), "stock drawer.csv --need list.json --format json");
    assert_eq!(code(&output), 0, "{}", err(&output));
    let value = json(&output);
    let names = |value: &Value| -> Vec<String> {
        value["parts"].as_array().unwrap().iter().filter_map(|part| Some(part["id"].as_str()?.to_string())).collect()
    };
    assert_eq!(names(&value), ["M1", "M2"]);
    // Spares of a part that is there once are not asked for.
    assert_eq!(code(&run(folder.path(), "stock drawer.csv --need list.json --spares 3")), 0);
    // A third board has no such part.
    let output = run(folder.path(), "stock drawer.csv --need list.json --boards 3");
    assert_ne!(code(&output), 0, "{}", out(&output));
    // M2 has gone.
    fs::write(folder.path().join("less.csv"), drawer.replace("C,10n,1,5 %,M2,10.1n\n", "C,10n,9,5 %,,\n")).unwrap();
    let output = run(folder.path(), "stock less.csv --need list.json");
    assert_eq!(code(&output), 3, "{}", out(&output));
}

#[test]
fn every_row_of_a_shortlist_can_be_counted() {
    let free = JOB.replace(
        "slots: {\"R1\": (pin: \"15k\"), \"R2\": (pin: \"15k\"), \"C1\": (pin: \"22n\"), \"C2\": (pin: \"10n\")},",
        "",
    );
    let folder = workshop(DRAWER, &free, "--boards 3 --spares 1 --pairs resistors");
    let list: Value = serde_json::from_str(&fs::read_to_string(folder.path().join("list.json")).unwrap()).unwrap();
    let rows = list["shortlist"].as_array().unwrap();
    assert!(rows.len() > 1);
    for row in rows {
        let output =
            run(folder.path(), &format!("stock drawer.csv --need list.json --row {} --format json", row["rank"]));
        // What the search took, the stock has.
        assert_eq!(code(&output), 0, "{}", out(&output));
        let value = json(&output);
        for (part, taken) in value["parts"].as_array().unwrap().iter().zip(row["taken"].as_array().unwrap()) {
            assert_eq!((&part["need"], &part["value"]), (&taken["need"], &taken["notation"]));
            assert_eq!(&part["there"], &taken["available"]);
        }
    }
}

#[test]
fn a_shortlist_without_a_stock_list_can_be_counted() {
    let folder = folder_with(&[("drawer.csv", DRAWER), ("job.ron", &JOB.replace("stock: \"drawer.csv\",", ""))]);
    let output = run(folder.path(), "shortlist job.ron --format json --out list.json");
    assert_eq!(code(&output), 0, "{}", err(&output));
    let value = json(&run(folder.path(), "stock drawer.csv --need list.json --boards 3 --format json"));
    assert_eq!(parts(&value), expected(&[("15k", 6, 0), ("10n", 3, 0), ("22n", 3, 0)]));
}

#[test]
fn bad_lines_are_as_if_they_were_not_there_and_it_is_told() {
    let folder = workshop(DRAWER, JOB, "");
    fs::write(folder.path().join("bad.csv"), DRAWER.replace("R,15k,8", "R,15k,many")).unwrap();
    let output = run(folder.path(), "stock bad.csv --need list.json");
    assert_eq!(code(&output), 2);
    assert!(out(&output).contains("short"), "{}", out(&output));
    let told = in_one_line(&err(&output));
    assert!(told.contains("bad.csv") && told.contains("roundwell stock bad.csv"), "{told}");
}

#[test]
fn either_comes_from_standard_input() {
    let folder = workshop(DRAWER, JOB, "");
    let expected = run(folder.path(), "stock drawer.csv --need list.json").stdout;
    assert_eq!(piped(folder.path(), "stock drawer.csv --need -", "list.json").stdout, expected);
    let output = piped(folder.path(), "stock - --need list.json", "drawer.csv");
    assert_eq!(out(&output), String::from_utf8(expected).unwrap().replace("drawer.csv", "standard input"));
    // Both cannot be.
    let told = in_one_line(&refused(&piped(folder.path(), "stock - --need -", "drawer.csv")));
    assert!(told.contains("standard input") && !told.contains("EOF"), "{told}");
}

#[test]
fn a_file_is_written_whole_and_a_reader_that_has_gone_is_no_failure() {
    let folder = workshop(DRAWER, JOB, "");
    let line = "stock drawer.csv --need list.json --format json";
    let output = run(folder.path(), &format!("{line} --out need.json"));
    assert_eq!((code(&output), output.stdout.len()), (0, 0));
    assert_eq!(fs::read(folder.path().join("need.json")).unwrap(), run(folder.path(), line).stdout);
    refused(&run(folder.path(), "stock drawer.csv --need missing.json --out need.json"));
    assert_eq!(fs::read(folder.path().join("need.json")).unwrap(), run(folder.path(), line).stdout);
    let output = unread(folder.path(), "stock drawer.csv --need list.json");
    assert_eq!((code(&output), err(&output)), (0, String::new()));
}

#[test]
fn no_line_is_longer_than_asked() {
    let folder = workshop(&DRAWER.replace("F10", "a drawer with a rather long name on the left"), JOB, "");
    for width in [40, 80, 120] {
        for flags in ["", "--boards 1000000 --spares 1000000"] {
            let text =
                out(&run(folder.path(), &format!("stock drawer.csv --need list.json {flags} --width {width}")));
            assert!(!text.is_empty());
            assert_eq!(text.lines().find(|line| line.chars().count() > width), None, "{text}");
        }
    }
}

/// Each wrong input with what the message must name: the value, what is allowed, what to do next.
#[test]
fn wrong_input_is_refused_with_what_is_allowed() {
    let folder = workshop(DRAWER, JOB, "");
    let list = fs::read_to_string(folder.path().join("list.json")).unwrap();
    let stock = out(&run(folder.path(), "stock drawer.csv --format json"));
    for (name, text) in [
        ("stock.json", stock.as_str()),
        ("later.json", &list.replace("roundwell-shortlist/1", "roundwell-shortlist/9")),
        ("cut.json", &list[..list.len() / 2]),
        ("list.csv", "row,rank\nshortlist,1\n"),
        ("empty.json", ""),
        ("other.json", "[1, 2]"),
        ("plain.json", "{\"rows\": []}"),
        ("escape.json", "{\"format\": \"a\\u001b[31mb\"}"),
    ] {
        fs::write(folder.path().join(name), text).unwrap();
    }
    let write_one = "roundwell shortlist JOB --format json";
    let mut all = String::new();
    for (flags, words) in [
        ("--need list.json --row 0", &["--row", "0", "1 to 10000"][..]),
        ("--need list.json --row 99", &["list.json", "no row 99", "--row"]),
        ("--need list.json --row -1", &["--row", "-1", "1 to 10000"]),
        ("--need list.json --row one", &["--row", "one", "1 to 10000"]),
        ("--need list.json --boards 0", &["--boards", "0", "1 to 1000000"]),
        ("--need list.json --boards 1000001", &["--boards", "1000001", "1 to 1000000"]),
        ("--need list.json --boards -1", &["--boards", "-1", "1 to 1000000"]),
        ("--need list.json --spares -1", &["--spares", "-1", "0 to 1000000"]),
        ("--need list.json --spares x", &["--spares", "x", "0 to 1000000"]),
        ("--row 2", &["--need"]),
        ("--boards 2", &["--need"]),
        ("--spares 2", &["--need"]),
        ("--need missing.json", &["missing.json", "check the path"]),
        ("--need .", &["is a directory", "name a file"]),
        ("--need list.csv", &["list.csv", "is no shortlist", write_one]),
        ("--need cut.json", &["cut.json", "is no shortlist", write_one]),
        ("--need empty.json", &["empty.json", "is no shortlist", write_one]),
        ("--need other.json", &["other.json", "is no shortlist", write_one]),
        ("--need plain.json", &["plain.json", "is no shortlist", write_one]),
        ("--need stock.json", &["stock.json", "roundwell-stock/1", write_one]),
        ("--need later.json", &["later.json", "roundwell-shortlist/9", "roundwell-shortlist/1", write_one]),
        ("--need escape.json", &["escape.json", write_one]),
    ] {
        let told = refused(&run(folder.path(), &format!("stock drawer.csv {flags}")));
        for word in words {
            assert!(in_one_line(&told).contains(word), "{flags}: {word:?} is missing\n{told}");
        }
        all += &format!("$ roundwell stock drawer.csv {flags}\n{told}\n");
    }
    insta::assert_snapshot!(all);
    refused(&run(folder.path(), "stock missing.csv --need list.json"));
    refused(&run(folder.path(), "stock job.ron --need list.json"));
}
