//! The program as it is run: exit codes, bad input, files, pipes, what is printed.

#![allow(clippy::unwrap_used)]

mod command;

use std::fs;
use std::path::Path;
use std::process::{Command, Stdio};
use std::time::Duration;

use command::*;

/// A section that is searched in no time.
const SMALL: &str = "shortlist --shape low-pass --f0 1k --q 0.7071 --circuit sallen-key-low-pass --resistors E24:1k..100k \
                     --capacitors E6:1n..100n";

const JOB: &str = r#"(
    title: "Vibration logger, anti-alias",
    sections: [
        (name: "A", shape: LowPass, f0: "1 kHz", q: 0.5412, gain: 1.0, circuit: "tow-thomas"),
        (name: "B", shape: LowPass, f0: "1 kHz", q: 1.3066, gain: 2.0, circuit: "tow-thomas"),
    ],
    resistors: (series: E24, from: "1k", to: "100k"),
    capacitors: (series: E6, from: "1n", to: "100n"),
)
"#;

#[test]
fn a_single_section_needs_no_file() {
    let output = plain(SMALL);
    assert_eq!(code(&output), 0, "{}", err(&output));
    assert!(err(&output).is_empty());
    insta::assert_snapshot!(without_time(&out(&output)));
}

#[test]
fn a_job_is_searched() {
    let folder = folder_with(&[("job.ron", JOB)]);
    let output = run(folder.path(), "shortlist job.ron --rows 3");
    assert_eq!(code(&output), 0, "{}", err(&output));
    insta::assert_snapshot!(without_time(&out(&output)));
}

/// The text with its unrounded numbers at eight significant digits: the last ones differ between machines.
fn rounded(text: &str, separators: &[char]) -> String {
    let shown = |word: &str| match word.trim_end_matches(separators).parse::<f64>() {
        Ok(x) if word.contains('.') => {
            let rest = &word[word.trim_end_matches(separators).len()..];
            let digits = (7.0 - x.abs().max(1e-9).log10().floor()).clamp(0.0, 12.0) as usize;
            format!("{x:.digits$}{rest}")
        }
        _ => word.to_string(),
    };
    text.split_inclusive(separators).map(shown).collect()
}

#[test]
fn json_and_csv_for_scripts() {
    let output = plain(&format!("{SMALL} --format json --rows 1"));
    let text = out(&output);
    let masked = text.lines().map(|line| match line.trim_start().starts_with("\"seconds\"") {
        true => "    \"seconds\": [time],".to_string(),
        false => rounded(line, &[' ', ',']),
    });
    insta::assert_snapshot!("json", masked.collect::<Vec<_>>().join("\n"));
    let output = plain(&format!("{SMALL} --format csv --rows 1"));
    insta::assert_snapshot!("csv", rounded(&out(&output), &[',', '\n']));
}

#[test]
fn lines_have_80_characters_at_most() {
    let folder = folder_with(&[("job.ron", JOB)]);
    for line in [SMALL, "shortlist job.ron", "circuits", "circuits feed-forward-biquad", "values 4.8k 4n7"] {
        let output = run(folder.path(), line);
        assert_eq!(code(&output), 0, "{}", err(&output));
        let text = out(&output);
        assert!(text.lines().all(|line| line.chars().count() <= 80), "{text}");
        assert!(!text.contains('\u{1b}'));
    }
}

#[test]
fn one_thread_and_two_give_the_same_bytes() {
    let folder = folder_with(&[("job.ron", JOB)]);
    let [one, two] = [1, 2].map(|n| run(folder.path(), &format!("shortlist job.ron --format csv --threads {n}")));
    assert_eq!(code(&one), 0);
    assert_eq!(one.stdout, two.stdout);
}

#[test]
fn what_cannot_be_met_is_shown_with_what_comes_nearest() {
    let line = "shortlist --shape low-pass --f0 1k --q 20 --circuit sallen-key-low-pass --resistors E12:10k..100k \
                --capacitors E3:1n..100n";
    let output = plain(line);
    assert_eq!(code(&output), 3, "{}", err(&output));
    assert!(out(&output).contains("C1/C2 >= 4 Q^2"), "{}", out(&output));
    let value = json(&plain(&format!("{line} --format json")));
    assert_eq!(value["search"]["within_limit"], false);
    assert!(!value["shortlist"].as_array().unwrap().is_empty());
}

#[test]
fn a_time_limit_says_what_stayed_open() {
    let output = plain(&format!("{SMALL} --time-limit 1us --format json"));
    assert!([0, 3].contains(&code(&output)), "{}", err(&output));
    let value = json(&output);
    assert_eq!(value["search"]["proof"], "stopped");
    assert_eq!(value["search"]["reason"], "the time limit was reached");
    assert!(value["search"]["sections"][0]["complete_below"].is_number());
}

#[cfg(unix)]
#[test]
fn an_interrupt_shows_the_best_so_far() {
    // A search of minutes, but for the interrupt.
    let line = "shortlist --shape low-pass --f0 1k --q 0.8618 --gain 2 --circuit state-variable --output low-pass \
                --resistors E192:10R..10M --capacitors E24:10p..10u --error-resolution 1e-9 --error-limit 3 \
                --time-limit 100s --format json";
    let child = command(Path::new("."), line).stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap();
    std::thread::sleep(Duration::from_secs(2));
    let killed = Command::new("kill").args(["-INT", &child.id().to_string()]).status().unwrap();
    assert!(killed.success());
    let output = child.wait_with_output().unwrap();
    assert_eq!(code(&output), 130, "{}", err(&output));
    let value = json(&output);
    assert_eq!(value["search"]["proof"], "stopped");
    assert_eq!(value["search"]["reason"], "it was interrupted");
}

#[test]
fn flags_win_over_the_job_and_its_sections() {
    let folder = folder_with(&[("job.ron", JOB)]);
    let line = "shortlist job.ron --format json --title Other --circuit akerberg-mossberg --resistors E12:2k..20k \
                --exclude-capacitors 10n,1n --band 10..10k --floor 40 --ignore-gain --max-part-numbers 12 \
                --wanted-error 0.5 --error-limit 2 --error-resolution 0.01 --rows 2 --impedance 1k..50k \
                --measure weighted:f0=1,q=0.5,gain=2";
    let value = json(&run(folder.path(), line));
    assert_eq!(value["title"], "Other");
    for section in value["sections"].as_array().unwrap() {
        assert_eq!(section["circuit"], "akerberg-mossberg");
        assert_eq!(section["shelves"][0]["from"].as_f64(), Some(2200.0));
        let capacitors = section["shelves"].as_array().unwrap().iter().find(|shelf| shelf["kind"] == "C").unwrap();
        assert_eq!((capacitors["from"].as_f64(), capacitors["values"].as_u64()), (Some(1.5e-9), Some(11)));
    }
    assert_eq!(value["measure"]["name"], "weighted");
    assert_eq!(value["measure"]["weights"], serde_json::json!([1.0, 0.5, 0.0, 1.0]));
    assert_eq!(value["measure"]["ignore_gain"], true);
    assert!((value["measure"]["band_hz"][0].as_f64().unwrap() - 10.0).abs() < 1e-9);
    let wanted = &value["wanted"];
    assert_eq!([&wanted["wanted_error"], &wanted["error_limit"], &wanted["error_resolution"]], [0.5, 2.0, 0.01]);
    assert_eq!(wanted["max_part_numbers"], 12);
    assert_eq!(wanted["impedance_ohm"], serde_json::json!([1000.0, 50000.0]));
    assert!(value["shortlist"].as_array().unwrap().len() <= 2);
}

#[test]
fn slots_of_a_single_section_are_pinned_tied_and_untied() {
    let line = "shortlist --shape low-pass --f0 1k --q 0.7071 --gain -1 --circuit tow-thomas --resistors E24:1k..100k \
                --capacitors E6:1n..100n --slot C1=10n --slot RG=E12:10k..20k --equal RF=R2 --untie --format json --rows 1";
    let output = plain(line);
    assert_eq!(code(&output), 0, "{}", err(&output));
    let value = json(&output);
    assert_eq!(value["sections"][0]["equal"], serde_json::json!([["RF", "R2"]]));
    let parts = value["shortlist"][0]["sections"][0]["parts"].as_array().unwrap();
    let of = |slot: &str| parts.iter().find(|part| part["slot"] == slot).unwrap()["value"].as_f64().unwrap();
    assert_eq!(of("C1").to_bits(), 10e-9_f64.to_bits());
    assert_eq!(of("RF").to_bits(), of("R2").to_bits());
    assert!([10e3, 12e3, 15e3, 18e3].contains(&of("RG")));
}

#[test]
fn every_fault_of_a_job_is_told_with_its_place() {
    let job = r#"(
    sections: [
        (name: "A", shape: LowPass, f0: "10n", q: -1, gian: 1.0),
        (name: "A", shape: LowPass, f0: "1 kHz", q: 1e300, circuit: "tow-thomsa"),
    ],
    resistors: (series: E96, from: "10nF", to: "1M"),
)
"#;
    let folder = folder_with(&[("job.ron", job), ("other.ron", &job.replace(", gian: 1.0", ""))]);
    let mut told = refused(&run(folder.path(), "shortlist job.ron"));
    told += "\n";
    told += &refused(&run(folder.path(), "shortlist other.ron --wanted-error -3 --band 10"));
    insta::assert_snapshot!(told);
}

#[test]
fn faults_of_flags_are_told_by_their_flags() {
    let mut told = String::new();
    for line in [
        "shortlist",
        "shortlist --q 1",
        "shortlist --shape low-pass --f0 1k",
        "shortlist --shape low-pass --f0 10nF --q NaN --gain inf",
        "shortlist --shape low-pass --f0 1k --q 1 --circuit tow-thomsa",
        "shortlist --shape low-pass --f0 1k --q 1 --slot R1 --equal R2 --measure loudness --resistors 1k..2k..3k",
        "circuits tow-thomsa",
        "values --series E25 ten",
    ] {
        told += &format!("$ roundwell {line}\n{}\n", refused(&plain(line)));
    }
    insta::assert_snapshot!(told);
}

#[test]
fn a_job_file_and_a_section_by_flags_exclude_each_other() {
    let folder = folder_with(&[("job.ron", JOB)]);
    let told = refused(&run(folder.path(), "shortlist job.ron --f0 2k"));
    assert!(told.contains("--f0") && told.contains("job.ron"), "{told}");
}

#[test]
fn files_that_cannot_be_read_are_refused() {
    let folder = folder_with(&[("empty.ron", ""), ("latin.ron", "")]);
    fs::write(folder.path().join("latin.ron"), b"(title: \"\xb5\")").unwrap();
    for (file, word) in [
        ("missing.ron", "missing.ron"),
        (".", "is a directory"),
        ("empty.ron", "empty.ron:1:1"),
        ("latin.ron", "not UTF-8 text: see byte 10"),
        ("-", "standard input"),
    ] {
        let told = refused(&run(folder.path(), &format!("shortlist {file}")));
        assert!(told.contains(word), "{told}");
    }
    for file in ["missing.ron", "./", "latin.ron"] {
        refused(&run(folder.path(), &format!("circuits {file}")));
    }
}

#[test]
fn usage_is_refused_with_2_and_help_is_none() {
    for line in
        ["", "shorten", "shortlist --colour", "shortlist --format yaml", "shortlist --threads 0", "values --kind L"]
    {
        refused(&plain(line));
    }
    for line in ["--help", "--version", "help", "shortlist --help", "circuits -h", "values --help"] {
        let output = plain(line);
        assert_eq!(code(&output), 0);
        assert!(err(&output).is_empty() && !output.stdout.is_empty());
    }
    assert!(out(&plain("--help")).contains("130"));
    assert_eq!(out(&plain("--version")), format!("roundwell {}\n", env!("CARGO_PKG_VERSION")));
}

#[test]
fn a_file_is_written_whole_or_left_alone() {
    let folder = folder_with(&[("job.ron", JOB), ("list.csv", "old"), ("bad.ron", "(sections: [])")]);
    let list = || fs::read_to_string(folder.path().join("list.csv")).unwrap();
    refused(&run(folder.path(), "shortlist bad.ron --format csv --out list.csv"));
    assert_eq!(list(), "old");
    let to_file = run(folder.path(), "shortlist job.ron --format csv --out list.csv");
    assert_eq!((code(&to_file), to_file.stdout.len()), (0, 0), "{}", err(&to_file));
    assert_eq!(list().as_bytes(), run(folder.path(), "shortlist job.ron --format csv").stdout);
    assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 3);
    for place in [".", "no/such/list.csv"] {
        refused(&run(folder.path(), &format!("shortlist job.ron --out {place}")));
    }
}

#[cfg(target_os = "linux")]
#[test]
fn a_full_disk_is_told() {
    let told = refused(&plain(&format!("{SMALL} --out /dev/full")));
    assert!(told.contains("/dev/full") && told.contains("no space"), "{told}");
    let full = fs::OpenOptions::new().write(true).open("/dev/full").unwrap();
    let output = command(Path::new("."), "circuits").stdout(full).output().unwrap();
    assert!(refused(&output).contains("standard output"));
}

#[test]
fn a_reader_that_has_gone_is_no_failure() {
    for line in [SMALL, "circuits --format json", "values", "--help"] {
        let output = unread(Path::new("."), line);
        assert_eq!(code(&output), 0, "{line}: {}", err(&output));
        assert!(err(&output).is_empty(), "{}", err(&output));
    }
}

#[test]
fn a_job_comes_from_standard_input() {
    let folder = folder_with(&[("job.ron", JOB)]);
    let output = piped(folder.path(), "shortlist - --format csv", "job.ron");
    assert_eq!(code(&output), 0, "{}", err(&output));
    assert_eq!(output.stdout, run(folder.path(), "shortlist job.ron --format csv").stdout);
}

/// An RC low-pass that nobody has published.
const OWN: &str = r#"(
    id: "own-low-pass",
    title: "Own low-pass",
    elements: [("R1", "in", "a"), ("C1", "a", "0")],
    op_amps: [(name: "A1", plus: "a", minus: "out", out: "out")],
    outputs: [(name: "low-pass", node: "out", shape: FirstOrderLowPass)],
)
"#;

#[test]
fn control_characters_of_a_circuit_file_are_refused() {
    let folder = tempfile::tempdir().unwrap();
    for (what, hostile) in [("Own low-pass", "Own\\u{1b}[31m"), ("\"A1\"", "\"A1\\n\""), ("\"a\"", "\"a\\t\"")] {
        fs::write(folder.path().join("own.ron"), OWN.replace(what, hostile)).unwrap();
        let told = refused(&run(folder.path(), "circuits own.ron"));
        assert!(told.contains("own.ron:") && told.contains("control character"), "{told}");
        assert!(!told.contains('\u{1b}'), "{told:?}");
    }
}

#[test]
fn a_circuit_file_is_taken_like_any_circuit() {
    let job = r#"(sections: [(shape: FirstOrderLowPass, f0: "1 kHz", circuit: "own.ron")])"#;
    let folder = tempfile::tempdir().unwrap();
    fs::create_dir(folder.path().join("jobs")).unwrap();
    fs::write(folder.path().join("jobs/job.ron"), job).unwrap();
    fs::write(folder.path().join("jobs/own.ron"), OWN).unwrap();
    fs::write(folder.path().join("jobs/bad.ron"), OWN.replace("\"a\", \"0\"", "\"a\", \"a\"")).unwrap();
    // Named from the job's own folder.
    let value = json(&run(folder.path(), "shortlist jobs/job.ron --format json"));
    assert_eq!(value["sections"][0]["circuit"], "own-low-pass");
    // Named from the working folder by a flag, with and without a job.
    for line in ["shortlist jobs/job.ron", "shortlist --shape first-order-low-pass --f0 1k"] {
        let output = run(folder.path(), &format!("{line} --circuit jobs/own.ron --format json"));
        assert_eq!(json(&output)["sections"][0]["circuit"], "own-low-pass");
        let told = refused(&run(folder.path(), &format!("{line} --circuit jobs/bad.ron")));
        assert!(told.contains("bad.ron:4:") && told.contains("both ends"), "{told}");
    }
    let output = run(folder.path(), "circuits jobs/own.ron");
    assert_eq!(code(&output), 0);
    assert!(out(&output).contains("R1 sets f0"), "{}", out(&output));
}
