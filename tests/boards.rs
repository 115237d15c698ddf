//! Whole boards at the command line: limits that hold for the board, lists cut short, searches cut short.

#![allow(missing_docs, clippy::unwrap_used)]

use std::process::{Command, Output};

use serde_json::Value;

const JOB: &str = "data/examples/vibration-logger.ron";

fn run(arguments: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_roundwell"))
        .args(arguments)
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .output()
        .unwrap()
}

fn json(output: &Output) -> Value {
    serde_json::from_slice(&output.stdout).unwrap()
}

fn rows(record: &Value) -> Vec<(u64, u64)> {
    let number = |row: &Value, key: &str| row[key].as_u64().unwrap();
    let list = record["shortlist"].as_array().unwrap();
    list.iter().map(|row| (number(row, "rank"), number(row, "part_numbers"))).collect()
}

#[test]
fn a_short_list_keeps_the_marked_row() {
    let whole = json(&run(&["shortlist", JOB, "--format", "json"]));
    let short = json(&run(&["shortlist", JOB, "--format", "json", "--rows", "2"]));
    let marked = |record: &Value| {
        let rank = record["marked"].as_u64().unwrap();
        rows(record).into_iter().find(|(r, _)| *r == rank).unwrap().1
    };
    assert_eq!(marked(&whole), 5);
    assert_eq!(marked(&short), 5);
    assert_eq!(rows(&short).len(), 2);
    assert_eq!(short["search"]["more_rows"], rows(&whole).len() - 2);
    // Alternatives give way before rows of the front do.
    let many = json(&run(&["shortlist", JOB, "--format", "json", "--alternatives", "5", "--rows", "6"]));
    let fewest = |record: &Value| rows(record).into_iter().map(|(_, count)| count).min();
    assert!(fewest(&many) <= fewest(&whole));
}

#[test]
fn the_limit_on_part_numbers_holds_for_the_board() {
    let output = run(&["shortlist", JOB, "--max-part-numbers", "7", "--format", "json"]);
    assert_eq!(output.status.code(), Some(0));
    assert!(rows(&json(&output)).iter().all(|(_, count)| *count <= 7));
    let output = run(&["shortlist", JOB, "--max-part-numbers", "4"]);
    assert_eq!(output.status.code(), Some(3));
    let text = String::from_utf8(output.stdout).unwrap();
    assert!(text.contains("Nothing found keeps the limit of 4 on part numbers: the fewest found are 6."), "{text}");
}

/// The best board of 4 part numbers misses the target by little more than a section may: that must not keep the boards of 5
/// from being searched.
#[test]
fn a_front_is_proved_across_the_own_error() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("butterworth.ron");
    let section = |q| format!("(shape: LowPass, f0: 1000, q: {q}, circuit: \"tow-thomas\"),");
    let shelves =
        "resistors: (series: E96, from: \"100\", to: \"1M\"), capacitors: (series: E12, from: \"100p\", to: \"1u\")";
    let sections = [section("0.5411961"), section("1.306563")].concat();
    let job = format!("(sections: [{sections}], own_error: 0.06, error_limit: 0.12, {shelves})");
    std::fs::write(&path, job).unwrap();
    let record = json(&run(&["shortlist", path.to_str().unwrap(), "--max-part-numbers", "5", "--format", "json"]));
    let error = |row: &Value| row["ranking_error"].as_f64().unwrap();
    let list = record["shortlist"].as_array().unwrap();
    let four = list.iter().find(|row| row["part_numbers"] == 4).unwrap();
    assert!((0.06..0.09).contains(&error(four)), "{four}");
    let five = list.iter().find(|row| row["part_numbers"] == 5).unwrap();
    assert!(error(five) < error(four) && five["proved"] == true && four["proved"] == true, "{five}");
}

#[test]
fn a_search_that_left_something_out_is_not_called_exhaustive() {
    // No decade of R times C comes near 1 Hz: the error limit is widened until families become too large.
    let far = "shortlist --shape low-pass --f0 1 --q 0.7 --circuit tow-thomas --resistors E96:1k..10k --capacitors \
               E12:1n..10n --format json";
    let record = json(&run(&far.split_whitespace().collect::<Vec<_>>()));
    let left_out = record["search"]["sections"][0]["statement"].as_str().unwrap().contains("left out");
    assert_eq!(record["search"]["proof"] == "stopped", left_out);
    assert!(left_out);
    let complete_below = record["search"]["sections"][0]["complete_below"].as_u64().unwrap();
    for row in record["shortlist"].as_array().unwrap() {
        assert_eq!(row["proved"], row["part_numbers"].as_u64().unwrap() < complete_below);
    }
}

#[test]
fn what_was_found_for_some_sections_is_not_lost() {
    // Stopped before anything was searched: every section falls back on its rounded ideal parts.
    let output = run(&["shortlist", JOB, "--time-limit", "1us", "--format", "json"]);
    let record = json(&output);
    assert_eq!(record["search"]["proof"], "stopped");
    assert_eq!(record["shortlist"].as_array().unwrap().len(), 1);
    assert_eq!(record["shortlist"][0]["proved"], false);
}

#[test]
fn many_sections_with_many_alternatives_are_thinned_and_it_is_said() {
    let sections: String = (1..=32).map(|k| format!("(shape: FirstOrderLowPass, f0: {}),", 1000 + 10 * k)).collect();
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("many.ron");
    std::fs::write(&path, format!("(sections: [{sections}], alternatives: 3, error_limit: \"30 dB\")")).unwrap();
    let output = run(&["shortlist", path.to_str().unwrap()]);
    assert_eq!(output.status.code(), Some(0), "{}", String::from_utf8_lossy(&output.stderr));
    let text = String::from_utf8(output.stdout).unwrap();
    let text = text.split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(text.contains("some of their sets were left out"), "{text}");
}

/// Ten resistors in parallel can be interchanged in 3,628,800 ways: too many to list.
#[test]
fn many_interchangeable_slots_do_not_hang() {
    let resistors: String = (1..=10).map(|k| format!("(\"R{k}\", \"in\", \"a\"),")).collect();
    let circuit = format!(
        "(id: \"bundle\", title: \"Bundle\", elements: [{resistors} (\"C1\", \"a\", \"0\")], op_amps: [], \
         outputs: [(name: \"low-pass\", node: \"a\", shape: FirstOrderLowPass)])"
    );
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("bundle.ron");
    std::fs::write(&path, circuit).unwrap();
    let flags = "--shape first-order-low-pass --f0 1k --resistors E6:10k..100k --max-part-numbers 3 --time-limit 2s";
    let mut arguments = vec!["shortlist", "--circuit", path.to_str().unwrap()];
    arguments.extend(flags.split_whitespace());
    let output = run(&arguments);
    assert_eq!(output.status.code(), Some(0), "{}", String::from_utf8_lossy(&output.stdout));
}
