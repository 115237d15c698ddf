//! `roundwell swap` as it is run: what it lists, what it says, what it refuses.

#![allow(clippy::unwrap_used)]

mod command;

use std::collections::BTreeSet;
use std::fs;

use command::*;
use serde_json::Value;
use tempfile::TempDir;

/// A Sallen-Key low-pass as it has been built.
const BUILT: &str = r#"(
    title: "Tide gauge, input filter",
    circuit: "sallen-key-low-pass",
    capacitors: (values: ["10n", "15n", "22n", "33n", "47n"]),
    sections: [(
        name: "LP", shape: LowPass, f0: "1578 Hz", q: 0.7416,
        slots: {"R1": (pin: "6k8"), "R2": (pin: "6k8"), "C1": (pin: "22n"), "C2": (pin: "10n")},
    )],
)
"#;

/// RA and RB are tied.
const LOOP: &str = r#"(
    title: "Tide gauge, loop",
    circuit: "tow-thomas",
    sections: [(
        name: "TT", shape: LowPass, f0: "1 kHz", q: 1.2,
        slots: {
            "RG": (pin: "16k"), "RQ": (pin: "18k"), "RF": (pin: "16k"), "R2": (pin: "16k"), "RA": (pin: "10k"),
            "RB": (pin: "10k"), "C1": (pin: "10n"), "C2": (pin: "10n"),
        },
    )],
)
"#;

const TWO: &str = r#"(
    circuit: "sallen-key-low-pass",
    sections: [
        (name: "A", shape: LowPass, f0: "1 kHz", q: 0.5412,
            slots: {"R1": (pin: "10k"), "R2": (pin: "15k"), "C1": (pin: "15n"), "C2": (pin: "10n")}),
        (name: "B", shape: LowPass, f0: "1 kHz", q: 1.3066, slots: {"R1": (pin: "10k"), "C1": (pin: "47n")}),
    ],
)
"#;

const DRAWER: &str = "\
kind,value,quantity,tolerance,dielectric,id,measured
R,3k9,4,1 %,,R3.9,
R,4k7,9,1 %,,R4.7,
R,10k,2,1 %,,R10,
R,12k,9,1 %,,R12,
R,15k,3,1 %,,R15,
R,18k,6,1 %,,R18,
C,15n,3,5 %,PP,F15,
C,33n,2,5 %,PP,F33,
C,47n,9,10 %,X7R,Q47,
C,10n,1,5 %,PP,M1,9.92n
";

fn workshop() -> TempDir {
    folder_with(&[("built.ron", BUILT), ("loop.ron", LOOP), ("two.ron", TWO), ("drawer.csv", DRAWER)])
}

fn listed(folder: &TempDir, line: &str) -> Value {
    let output = run(folder.path(), &format!("{line} --format json"));
    assert!([0, 3].contains(&code(&output)), "{line}: {}", err(&output));
    assert!(err(&output).is_empty(), "{}", err(&output));
    json(&output)
}

fn rows(value: &Value) -> &Vec<Value> {
    value["replacements"].as_array().unwrap()
}

/// The new parts of a row: `C1 33n, R2 10k7`.
fn changes(row: &Value) -> String {
    let one = |change: &Value| format!("{} {}", change["slot"].as_str().unwrap(), change["to"].as_str().unwrap());
    row["changes"].as_array().unwrap().iter().map(one).collect::<Vec<_>>().join(", ")
}

#[test]
fn a_part_that_is_gone_is_replaced() {
    let folder = workshop();
    let output = run(folder.path(), "swap built.ron --gone C1 --others 3 --rows 2");
    assert_eq!(code(&output), 0, "{}", err(&output));
    assert!(err(&output).is_empty());
    insta::assert_snapshot!(without_time(&out(&output)));
}

/// Reference: exhaustive computation over all E96 resistors; 4 Q² = 2.20 is the least C1/C2 by the closed form.
#[test]
fn the_worked_job() {
    let folder = workshop();
    let value = listed(&folder, "swap built.ron --gone C1 --others 3 --rows 1");
    let best = rows(&value).last().unwrap();
    assert_eq!((changes(best).as_str(), best["others"].as_u64()), ("R1 4k53, R2 4k53, C1 33n, C2 15n", Some(3)));
    let percent = |index: usize| 100.0 * best["moves"][index].as_f64().unwrap();
    assert!((percent(0) - 0.07).abs() < 0.005 && percent(1).abs() < 0.005, "{best}");
    let impossible = value["impossible"].as_array().unwrap();
    let named: Vec<&str> = impossible.iter().map(|one| one["value"].as_str().unwrap()).collect();
    assert_eq!(named, ["10n", "15n"]);
    for one in impossible {
        assert_eq!(one["slot"], "C1");
        assert!(one["why"].as_str().unwrap().starts_with("C1/C2 >= 4 Q^2 = 2.2"), "{one}");
    }
    let text = in_one_line(&out(&run(folder.path(), "swap built.ron --gone C1")));
    assert!(text.contains("C1 = 15n") && text.contains("C1/C2 >= 4 Q^2"), "{text}");
}

#[test]
fn the_example_is_replaced() {
    let value = json(&plain("swap data/examples/built-preamplifier.ron --gone C1 --others 3 --format json"));
    assert_eq!(changes(rows(&value).last().unwrap()).split(", ").count(), 4);
    // With one change more nothing lies within 1 dB.
    assert_eq!(code(&plain("swap data/examples/built-preamplifier.ron --gone C1")), 3);
}

#[test]
fn more_changes_are_listed_only_where_they_are_better() {
    let folder = workshop();
    for line in [
        "swap built.ron --gone C1 --others 3",
        "swap built.ron --gone R1,C1 --others 2",
        "swap loop.ron --gone RQ --others 2",
    ] {
        for (by, key) in [("built", "against_built"), ("target", "against_target")] {
            let value = listed(&folder, &format!("{line} --rank {by} --rows 3"));
            assert_eq!((value["ranked_by"].as_str(), value["proof"].as_str()), (Some(by), Some("exhaustive")));
            let list: Vec<(u64, f64)> = rows(&value)
                .iter()
                .map(|row| (row["others"].as_u64().unwrap(), row[key].as_f64().unwrap()))
                .collect();
            assert!(!list.is_empty(), "{line}");
            assert!(list.is_sorted_by(|a, b| a.0 < b.0 || a.0 == b.0 && a.1 <= b.1), "{line}: {list:?}");
            for (others, error) in &list {
                let fewer = list.iter().filter(|(o, _)| o < others).map(|(_, e)| *e).fold(f64::INFINITY, f64::min);
                assert!(*error < fewer, "{line}: {list:?}");
            }
            for row in rows(&value) {
                for change in row["changes"].as_array().unwrap() {
                    assert_ne!(change["from"], change["to"], "{line}: {row}");
                }
            }
        }
    }
}

#[test]
fn tied_slots_change_together() {
    let folder = workshop();
    let value = listed(&folder, "swap loop.ron --gone RA --others 0");
    assert!(!rows(&value).is_empty());
    for row in rows(&value) {
        let changed = row["changes"].as_array().unwrap();
        assert_eq!((changed.len(), &changed[0]["to"]), (2, &changed[1]["to"]), "{row}");
        assert_eq!(row["others"], 0);
    }
}

#[test]
fn new_parts_come_from_the_drawer() {
    let folder = workshop();
    for (line, boards) in [
        ("built.ron --gone C1 --others 3", 1),
        ("built.ron --gone C1 --others 3", 2),
        ("loop.ron --gone RQ --others 1", 3),
        ("loop.ron --gone RA --others 2", 2),
    ] {
        let value = listed(&folder, &format!("swap {line} --stock drawer.csv --boards {boards} --error-limit 12"));
        assert!(!rows(&value).is_empty(), "{line}");
        for row in rows(&value) {
            let list = row["changes"].as_array().unwrap();
            for change in list {
                let at = change["lines"][0].as_u64().unwrap() as usize;
                let cells: Vec<&str> = DRAWER.lines().nth(at - 1).unwrap().split(',').collect();
                assert_eq!(change["id"], cells[5], "{row}");
                let bodies = list.iter().filter(|other| other["lines"] == change["lines"]).count();
                assert!(bodies * boards <= cells[2].parse().unwrap(), "{line}: {row}");
            }
        }
    }
    // The number of boards changes what can be had: two of 33n, three of 15n.
    let found: BTreeSet<String> = (1..=4)
        .map(|boards| {
            let value = listed(&folder, &format!("swap built.ron --gone C1 --others 3 --stock drawer.csv --boards {boards} --error-limit 12 --bar-class-2"));
            rows(&value).iter().map(changes).collect::<Vec<_>>().join("; ")
        })
        .collect();
    assert!(found.len() >= 2, "{found:?}");
    // For three boards C1 must be 47n or 15n; the class 2 part barred, 15n is left.
    let value = listed(
        &folder,
        "swap built.ron --gone C1 --others 2 --stock drawer.csv --boards 3 --bar-class-2 --error-limit 12",
    );
    assert!(rows(&value).iter().all(|row| changes(row).contains("C1 15n")), "{value}");
    let output = run(folder.path(), "swap built.ron --gone C1 --stock drawer.csv --boards 10");
    assert_eq!(code(&output), 3, "{}", out(&output));
}

#[test]
fn what_must_be_bought_is_said() {
    let folder = workshop();
    let line = "swap built.ron --gone R1 --others 0 --stock drawer.csv --buy 1 --boards 2";
    let output = run(folder.path(), line);
    assert_eq!(code(&output), 0, "{}", err(&output));
    let found = listed(&folder, line);
    let best = &rows(&found)[0];
    assert!(changes(best).starts_with("R1 6k"), "{best}");
    let text = out(&output);
    assert!(text.contains("6k81 !") && text.contains("must be bought"), "{text}");
    // Nothing may be bought: only what is in the drawer.
    let value = listed(&folder, &format!("{} --error-limit 12", line.replace(" --buy 1", "")));
    assert!(
        rows(&value)
            .iter()
            .all(|row| ["R1 3k9", "R1 4k7", "R1 10k", "R1 12k", "R1 15k", "R1 18k"].contains(&changes(row).as_str()))
    );
}

#[test]
fn a_measured_part_does_for_one_board() {
    let folder = workshop();
    let line = "swap loop.ron --gone C1 --others 0 --stock drawer.csv --error-limit 12";
    // 10n is gone, so that M1, which is another 10n, is gone too.
    assert!(rows(&listed(&folder, line)).iter().all(|row| !changes(row).contains("9n92")));
    let drawer = DRAWER.replace("C,10n,1,5 %,PP,M1,9.92n", "C,12n,1,5 %,PP,M1,10.4n");
    fs::write(folder.path().join("drawer.csv"), drawer).unwrap();
    let names = |boards: usize| -> Vec<String> {
        let value = listed(&folder, &format!("{line} --boards {boards}"));
        rows(&value).iter().map(|row| row["changes"][0]["id"].as_str().unwrap().to_string()).collect()
    };
    assert!(names(1).contains(&"M1".to_string()), "{:?}", names(1));
    assert!(!names(2).contains(&"M1".to_string()), "{:?}", names(2));
}

#[test]
fn a_slot_of_one_of_several_sections_is_named_with_it() {
    let folder = workshop();
    let value = listed(&folder, "swap two.ron --gone A:R1");
    assert_eq!(value["gone"], serde_json::json!(["R1"]));
    assert_eq!(value["built"]["name"], "A");
}

#[test]
fn nothing_to_be_found_ends_with_3() {
    let folder = workshop();
    let output = run(folder.path(), "swap built.ron --gone C1 --others 0 --error-limit 0.01");
    assert_eq!(code(&output), 3);
    let text = in_one_line(&out(&output));
    assert!(text.contains("Nothing within 0.01 dB") && text.contains("--others"), "{text}");
}

#[test]
fn a_time_limit_says_that_nothing_is_proved() {
    let folder = workshop();
    let value = listed(&folder, "swap built.ron --gone C1 --others 3 --time-limit 1us");
    assert_eq!((&value["proof"], &value["reason"]), (&"stopped".into(), &"the time limit was reached".into()));
}

#[test]
fn the_keys_of_the_json_are_there() {
    let folder = workshop();
    let value = listed(&folder, "swap built.ron --gone C1 --others 2");
    let keys = |value: &Value| value.as_object().unwrap().keys().cloned().collect::<BTreeSet<_>>();
    let all = |list: &[&str]| list.iter().map(ToString::to_string).collect::<BTreeSet<_>>();
    assert_eq!(value["format"], "roundwell-replacements/1");
    let top = [
        "format",
        "title",
        "target",
        "unit",
        "gone",
        "others",
        "ranked_by",
        "proof",
        "reason",
        "error_limit",
        "sets",
        "nodes",
        "seconds",
        "built",
        "built_error",
        "replacements",
        "impossible",
    ];
    assert!(all(&top).is_subset(&keys(&value)));
    let row = ["rank", "others", "changes", "against_built", "against_target", "moves", "section"];
    assert!(all(&row).is_subset(&keys(&rows(&value)[0])));
    assert!(all(&["slot", "from", "to", "id", "lines"]).is_subset(&keys(&rows(&value)[0]["changes"][0])));
}

#[test]
fn no_line_is_longer_than_asked() {
    let folder = workshop();
    let long = DRAWER.replace("R12", "the tray with a rather long name at the back of the bench");
    fs::write(folder.path().join("long.csv"), long).unwrap();
    for width in [40, 80, 120] {
        for line in [
            "built.ron --gone C1 --others 3",
            "loop.ron --gone C1,C2 --others 2 --rows 2",
            "loop.ron --gone RQ --others 1 --stock long.csv --error-limit 12",
            "built.ron --gone C1 --others 0 --error-limit 0.001",
        ] {
            let output = run(folder.path(), &format!("swap {line} --width {width}"));
            assert!([0, 3].contains(&code(&output)), "{line}: {}", err(&output));
            let text = out(&output);
            assert_eq!(text.lines().find(|line| line.chars().count() > width), None, "{line}\n{text}");
            assert!(!text.contains('\u{1b}'));
        }
    }
}

#[test]
fn a_job_comes_from_standard_input_and_a_result_goes_to_a_file() {
    let folder = workshop();
    let line = "--gone C1 --others 2 --rows 2";
    let expected = without_time(&out(&run(folder.path(), &format!("swap built.ron {line}"))));
    let output = piped(folder.path(), &format!("swap - {line}"), "built.ron");
    assert_eq!(without_time(&out(&output)), expected, "{}", err(&output));
    let output = run(folder.path(), &format!("swap built.ron {line} --out swap.txt"));
    assert_eq!((code(&output), output.stdout.len()), (0, 0), "{}", err(&output));
    assert_eq!(without_time(&fs::read_to_string(folder.path().join("swap.txt")).unwrap()), expected);
    refused(&run(folder.path(), "swap built.ron --gone C9 --out swap.txt"));
    assert_eq!(without_time(&fs::read_to_string(folder.path().join("swap.txt")).unwrap()), expected);
    let output = unread(folder.path(), &format!("swap built.ron {line}"));
    assert_eq!((code(&output), err(&output)), (0, String::new()));
}

/// Each wrong input with what the message must name: the value, what is allowed, what to do next.
#[test]
fn wrong_input_is_refused_with_what_is_allowed() {
    let folder = workshop();
    let unstable = TWO
        .replace("sallen-key-low-pass", "sallen-key-low-pass-gain")
        .replace("\"C2\": (pin: \"10n\")}", "\"C2\": (pin: \"10n\"), \"RA\": (pin: \"10k\"), \"RB\": (pin: \"90k\")}")
        .replace("q: 0.5412", "q: 0.5412, gain: 2")
        .replace("q: 1.3066", "q: 1.3066, gain: 2");
    for (name, text) in [("unstable.ron", unstable.as_str()), ("bad.csv", "kind,value,quantity\nR,4q7,1\nR,10k,1\n")]
    {
        fs::write(folder.path().join(name), text).unwrap();
    }
    let mut all = String::new();
    for (line, words) in [
        ("built.ron", &["--gone"][..]),
        ("--gone C1", &["<JOB>"]),
        ("built.ron --gone C9", &["--gone", "C9", "R1, R2, C1, C2"]),
        ("built.ron --gone c1", &["--gone", "c1", "C1"]),
        ("built.ron --gone R", &["--gone", "`R`", "R1"]),
        ("built.ron --gone LP:C9", &["--gone", "C9"]),
        ("built.ron --gone HP:C1", &["--gone", "HP", "LP"]),
        ("two.ron --gone R1", &["--gone", "R1", "A:R1"]),
        ("two.ron --gone A:R1,B:R1", &["--gone", "several sections", "one section at a time"]),
        ("two.ron --gone B:R1", &["R2, C2", "B", "not pinned", "pin"]),
        ("unstable.ron --gone A:R1", &["A", "no stable low-pass", "check the pins"]),
        ("built.ron --gone C1 --others -1", &["--others", "-1", "0..=8"]),
        ("built.ron --gone C1 --others 9", &["--others", "9", "0..=8"]),
        ("built.ron --gone C1 --rows 0", &["--rows", "0", "1..=1000"]),
        ("built.ron --gone C1 --rank cost", &["--rank", "cost", "built, target"]),
        ("built.ron --gone C1 --error-limit 0", &["--error-limit", "found 0", "larger than 0"]),
        ("built.ron --gone C1 --error-limit -1", &["--error-limit", "-1", "larger than 0"]),
        ("built.ron --gone C1 --format csv", &["--format", "csv", "table, json"]),
        ("built.ron --gone C1 --width 20", &["--width", "20", "40"]),
        ("built.ron --gone C1 --resistors 10n", &["--resistors", "10n", "resistor"]),
        ("built.ron --gone C1 --boards 2", &["--boards", "stock list"]),
        ("built.ron --gone C1 --buy 2", &["--buy", "stock list"]),
        ("built.ron --gone C1 --stock drawer.csv --boards 0", &["--boards", "found 0", "1 to 1000000"]),
        ("built.ron --gone C1 --stock drawer.csv --boards -2", &["--boards", "-2", "1000000"]),
        ("built.ron --gone C1 --stock drawer.csv --buy coils", &["--buy", "coils", "resistors"]),
        ("built.ron --gone C1 --stock missing.csv", &["--stock", "missing.csv", "check the path"]),
        ("built.ron --gone C1 --stock bad.csv", &["bad.csv", "line 2", "--skip-bad-lines"]),
        ("missing.ron --gone C1", &["missing.ron", "check the path"]),
        (". --gone C1", &["is a directory", "name a file"]),
    ] {
        let told = refused(&run(folder.path(), &format!("swap {line}")));
        for word in words {
            assert!(in_one_line(&told).contains(word), "{line}: {word:?} is missing\n{told}");
        }
        all += &format!("$ roundwell swap {line}\n{told}\n");
    }
    insta::assert_snapshot!(all);
}
