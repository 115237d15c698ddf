//! `vet` on rows from a stock list: pairs, measured parts, the tolerances of the list, boards that differ.

#![allow(missing_docs, clippy::unwrap_used)]

mod support;

use std::fs;
use std::path::Path;
use std::process::{Command, Output};

use roundwell::analysis::{Boards, Built, BuiltPiece, Distribution, Draw, Tolerances, worst_case};
use roundwell::job::Listed;
use roundwell::text::render;
use roundwell::units::Kind;
use serde_json::{Value as Json, json};
use tempfile::TempDir;

fn run(folder: &Path, line: &str) -> Output {
    let binary = env!("CARGO_BIN_EXE_roundwell");
    let output = Command::new(binary).args(line.split_whitespace()).current_dir(folder).output().unwrap();
    assert_eq!(output.status.code(), Some(0), "{line}\n{}", String::from_utf8_lossy(&output.stderr));
    output
}

/// A first-order low-pass at 1/(2π 30 kΩ 9.87 nF) = 537.5 Hz that only 10k + 20k and the measured capacitor give.
fn prepared(boards: usize, capacitors: &str) -> TempDir {
    let folder = tempfile::tempdir().unwrap();
    let drawer = format!("kind,value,quantity,tolerance,measured,id\nR,10k,9,1%,,\nR,20k,9,-2/+8 %,,\n{capacitors}");
    fs::write(folder.path().join("drawer.csv"), drawer).unwrap();
    let job = format!(
        "(circuit: \"rc-low-pass\", stock: \"drawer.csv\", boards: {boards}, pairs: (resistors: [Series, Parallel]),\n\
         sections: [(name: \"A\", shape: FirstOrderLowPass, f0: \"537.5 Hz\")])"
    );
    fs::write(folder.path().join("job.ron"), job).unwrap();
    run(folder.path(), "shortlist job.ron --format json --out list.json");
    folder
}

const MEASURED: &str = "C,10n,1,5%,9.87n,C7\n";

fn vetted(folder: &TempDir, flags: &str) -> (Json, String) {
    let json = run(folder.path(), &format!("vet list.json {flags} --format json")).stdout;
    let text = String::from_utf8(run(folder.path(), &format!("vet list.json {flags}")).stdout).unwrap();
    assert!(text.lines().all(|line| line.chars().count() <= 80), "{text}");
    let words = text.replace('\u{a0}', " ").split_whitespace().collect::<Vec<_>>().join(" ");
    (serde_json::from_slice(&json).unwrap(), words)
}

fn listed(folder: &TempDir) -> (String, Listed) {
    let text = fs::read_to_string(folder.path().join("list.json")).unwrap();
    let listed = Listed::parse(&text).unwrap();
    (text, listed)
}

fn built(listed: &Listed, row: usize) -> Built {
    listed.built(&listed.rows[row], &mut |id| Ok(support::library(id))).unwrap()
}

/// The standard deviation of f0 from its closed form: f0 goes with 1/R, each piece of R counts by its share, and an even
/// spread over a half-width t has the deviation t/√3. The flags do not count where the list says.
#[test]
fn a_pair_is_drawn_with_the_tolerances_of_the_list_and_a_measured_part_with_none() {
    let folder = prepared(1, MEASURED);
    let (json, text) = vetted(&folder, "--resistor-tolerance 40% --capacitor-tolerance 40%");
    let parts = json["sections"][0]["parts"].as_array().unwrap();
    let (pair, capacitor) = (&parts[0], &parts[1]);
    assert_eq!((&pair["notation"], &pair["value"]), (&json!("20k+10k"), &json!(30000.0)));
    let pieces: Vec<_> = pair["made_of"].as_array().unwrap().iter().map(|piece| piece["tolerance"].clone()).collect();
    assert_eq!(pieces, [json!([-0.02, 0.08]), json!([-0.01, 0.01])]);
    assert_eq!(pair["made_of"][0]["tolerance_from"], "list");
    assert_eq!(
        capacitor["made_of"],
        json!([{"value": 9.87e-9, "notation": "10n", "tolerance": [0.0, 0.0], "tolerance_from": "measured"}])
    );
    let expected = ((0.01f64 / 3.0).powi(2) + (0.05f64 * 2.0 / 3.0).powi(2)).sqrt() / 3f64.sqrt();
    let figure = &json["spread"]["figures"][0];
    let found = figure["sensitivity_deviation"].as_f64().unwrap();
    assert!((found / expected - 1.0).abs() < 1e-9, "{found} {expected}");
    // At the worst all are at one end: R off by (10k · 1 % + 20k · 8 %)/30k upwards, by (1 % + 2 · 2 %)/3 downwards.
    let off = json["worst_case"]["parts"][0]["error"].as_f64().unwrap();
    assert!((off - 0.17 / 3.0).abs() < 1e-9 || (off + 0.05 / 3.0).abs() < 1e-9, "{off}");
    assert!(text.contains("Tolerances: spread evenly"), "{text}");
    assert!(text.contains("-2 % to +8 % by the stock list: A R1 20k ±1 % by the stock list: A R1 10k"), "{text}");
    assert!(text.contains("measured, and taken without a tolerance: A C1"), "{text}");
    // The nominal board takes the measured value: 1/(2π · 30 kΩ · 9.87 nF).
    let f0 = figure["nominal"].as_f64().unwrap();
    assert!((f0 * std::f64::consts::TAU * 30e3 * 9.87e-9 - 1.0).abs() < 1e-12, "{f0}");
}

/// The value of a pair in parallel is not a decimal: 1/(1/10k + 1/20k).
#[test]
fn a_pair_in_parallel_is_read_by_its_joint() {
    let folder = prepared(1, "C,10n,9,5%,,\n");
    let (text, _) = listed(&folder);
    let mut list: Json = serde_json::from_str(&text).unwrap();
    let part = list.pointer_mut("/shortlist/0/sections/0/parts/0").unwrap();
    assert_eq!(part["joint"], "series");
    part["joint"] = json!("parallel");
    part["notation"] = json!("20k||10k");
    part["value"] = json!(1.0 / (1.0 / 10e3 + 1.0 / 20e3));
    let built = built(&Listed::parse(&list.to_string()).unwrap(), 0);
    let part = &built.sections[0].parts[0];
    assert_eq!(part.notation(), "20k||10k");
    assert!((part.value.to_f64() / (20e3 / 3.0) - 1.0).abs() < 1e-11);
    // 10.1k || 20k by the product over the sum.
    assert!((part.factor(&[0.0, 0.01]) * 20e3 / 3.0 - 10.1e3 * 20e3 / 30.1e3).abs() < 1e-6);
}

#[test]
fn the_worst_of_boards_that_differ_is_looked_at() {
    let folder = prepared(2, "C,10n,1,5%,9.87n,C7\nC,10n,1,5%,10.4n,C8\n");
    let (json, text) = vetted(&folder, "");
    assert_eq!(json["boards"], 2);
    assert!(text.contains("row 1: the worst of its 2 boards, which differ in their measured parts"), "{text}");
    assert_eq!(json["sections"][0]["parts"][1]["value"], 1.04e-8);
    let (json, text) = vetted(&prepared(1, MEASURED), "");
    assert_eq!(json["boards"], 0);
    assert!(!text.contains("the worst of its"));
}

/// Lists from before the keys for pairs and tolerances read as they did.
#[test]
fn a_list_without_the_newer_keys_is_read() {
    let folder = prepared(1, "C,10n,9,5%,,\n");
    let (text, listed) = listed(&folder);
    let mut list: Json = serde_json::from_str(&text).unwrap();
    for row in list["shortlist"].as_array_mut().unwrap() {
        row.as_object_mut().unwrap().remove("boards");
        for part in row["sections"][0]["parts"].as_array_mut().unwrap() {
            for key in ["joint", "tolerance"] {
                part.as_object_mut().unwrap().remove(key);
            }
            // A list without pairs gave the value of the slot there.
            part["notation"] = json!(format!("{}", part["value"]));
            for piece in part["made_of"].as_array_mut().unwrap() {
                *piece = json!({"value": piece["value"]});
            }
        }
    }
    let old = built(&Listed::parse(&list.to_string()).unwrap(), 0);
    let new = built(&listed, 0);
    for (old, new) in old.sections[0].parts.iter().zip(&new.sections[0].parts) {
        assert_eq!((old.value, old.joint), (new.value, new.joint));
        assert!(old.pieces.iter().all(|piece| piece.tolerance.is_none() && piece.line.is_none()));
        assert!(new.pieces.iter().all(|piece| piece.tolerance.is_some() && piece.line.is_some()));
    }
}

#[test]
fn faults_of_pairs_and_measured_parts_are_told() {
    let (text, _) = listed(&prepared(1, MEASURED));
    let told = |pointer: &str, value: Json| {
        let mut list: Json = serde_json::from_str(&text).unwrap();
        *list.pointer_mut(&format!("/shortlist/0/sections/0/parts/{pointer}")).unwrap() = value;
        let text = list.to_string();
        let faults = Listed::parse(&text)
            .and_then(|listed| listed.built(&listed.rows[0], &mut |id| Ok(support::library(id))).map(|_| ()));
        let shown = render(&faults.unwrap_err(), "list.json", &text, false);
        shown.split_whitespace().collect::<Vec<_>>().join(" ")
    };
    for (pointer, value, words) in [
        ("0/joint", json!("crossed"), "parts are joined in series or parallel, found `crossed`"),
        ("0/joint", json!("parallel"), "the pieces of slot R1 make up another value"),
        ("0/value", json!(31e3), "the pieces of slot R1 make up another value"),
        ("0/value", json!(-1.0), "resistor"),
        ("0/made_of/0/notation", json!("11k"), "the value on the label is another than the value"),
        ("0/made_of/0/tolerance", json!([0.1, -0.1]), "0.1 to -0.1 is no tolerance"),
        ("0/made_of/0/tolerance", json!([-1.0, 0.5]), "-1 to 0.5 is no tolerance"),
        ("0/made_of/0/temperature_coefficient_ppm", json!([50.0, -50.0]), "50 to -50 ppm/K is no range"),
        ("0/made_of/0/temperature_coefficient_ppm", json!([-5e4, 0.0]), "-50000 to 0 ppm/K is no range"),
        ("0/made_of/0/ageing", json!(-0.1), "-0.1 is no ageing: it is a ratio from 0 to below 1"),
        ("1/made_of/0/measured", json!(9.9e-9), "the value of a measured part is what was measured"),
    ] {
        let found = told(pointer, value);
        assert!(found.contains(words), "{pointer}: {found}");
    }
}

/// A tolerance of two sides is spread evenly between them: mean (low + high)/2 and deviation (high − low)/√12 of the uniform
/// distribution; the worst case lies at its ends.
#[test]
fn a_tolerance_of_two_sides_keeps_to_them() {
    let (_, listed) = listed(&prepared(1, "C,10n,9,-20/+80 %,,\n"));
    let mut built = built(&listed, 0);
    for piece in &mut built.sections[0].parts[0].pieces {
        *piece = BuiltPiece { is_measured: true, ..*piece };
    }
    let tolerances =
        Tolerances { resistors: 0.9, capacitors: 0.9, distribution: Distribution::Uniform, reel_share: 0.0 };
    let (mut boards, mut board) = (Boards::new(&built, &tolerances), Vec::new());
    let mut numbers = Draw::new(3, Distribution::Uniform);
    let nominal = built.nominal()[0];
    let ratio = |h: &roundwell::target::Biquad| h.den[1] / h.den[0] / (nominal.den[1] / nominal.den[0]);
    let count = 20_000;
    let drawn: Vec<f64> = (0..count)
        .map(|_| {
            boards.draw(&mut numbers, &mut board);
            ratio(&board[0])
        })
        .collect();
    assert!(drawn.iter().all(|c| (0.8..=1.8).contains(c)));
    assert!(drawn.iter().any(|c| *c < 0.81) && drawn.iter().any(|c| *c > 1.79));
    let mean = drawn.iter().sum::<f64>() / f64::from(count);
    assert!((mean - 1.3).abs() < 5.0 / 12f64.sqrt() / f64::from(count).sqrt(), "{mean}");
    for (sign, limit) in [(1.0, 0.8), (-1.0, -0.2)] {
        let judge = |board: &[roundwell::target::Biquad]| (sign * ratio(&board[0]), None);
        let worst = worst_case(&built, &tolerances, &[1e3], &judge);
        assert_eq!(built.sections[0].parts[1].kind, Kind::Capacitor);
        assert!((worst.errors[1] - limit).abs() < 1e-12 && worst.errors[0].abs() < 1e-12, "{worst:?}");
    }
}

/// A drawer that says how its parts change: page and JSON say so, and the drift is that of the closed form 1/(R C).
#[test]
fn drift_goes_by_the_columns_of_the_list() {
    let folder = tempfile::tempdir().unwrap();
    let drawer = "kind,value,quantity,tempco,ageing\nR,30k,9,±25,0.2%\nC,10n,9,-750±120,\n";
    fs::write(folder.path().join("drawer.csv"), drawer).unwrap();
    let job = "(circuit: \"rc-low-pass\", stock: \"drawer.csv\", error_limit: 3, sections: [(name: \"A\", \
               shape: FirstOrderLowPass, f0: \"537.5 Hz\")])";
    fs::write(folder.path().join("job.ron"), job).unwrap();
    run(folder.path(), "shortlist job.ron --format json --out list.json");
    let (text, _) = listed(&folder);
    let list: Json = serde_json::from_str(&text).unwrap();
    let parts = &list["shortlist"][0]["sections"][0]["parts"];
    assert_eq!(parts[0]["made_of"][0]["temperature_coefficient_ppm"], json!([-25.0, 25.0]));
    assert_eq!(parts[0]["made_of"][0]["ageing"], json!(0.002));
    assert_eq!(parts[1]["made_of"][0]["temperature_coefficient_ppm"], json!([-870.0, -630.0]));
    assert_eq!(parts[1]["made_of"][0]["ageing"], Json::Null);
    // The list alone asks for the drift by age; capacitors do not age unless a flag says so.
    let (json, text) = vetted(&folder, "");
    let f0 = |json: &Json, key: &str| {
        let of = &json["drift"]["figures"][0];
        assert_eq!(of["figure"], "f0");
        [of[key][0].as_f64().unwrap(), of[key][1].as_f64().unwrap()]
    };
    let [low, high] = f0(&json, "with_age");
    assert!((low - (1.0 / 1.002 - 1.0)).abs() < 1e-12 && (high - (1.0 / 0.998 - 1.0)).abs() < 1e-12, "{low} {high}");
    assert!(
        text.contains("Drift by age") && text.contains("0.2 % over their life by the stock list: A R1"),
        "{text}"
    );
    let (json, text) = vetted(&folder, "--temperature -20..60 --capacitor-coefficient 9000 --capacitor-ageing 1%");
    let [low, high] = f0(&json, "by_temperature");
    let change = |r: f64, c: f64, kelvin: f64| 1.0 / ((1.0 + r * kelvin) * (1.0 + c * kelvin)) - 1.0;
    assert!((high - change(-25e-6, -870e-6, 35.0)).abs() < 1e-12, "{high}");
    assert!((low - change(-25e-6, -870e-6, -45.0)).abs() < 1e-12, "{low}");
    let [_, high] = f0(&json, "with_age");
    let aged = 1.0 / ((1.0 - 25e-6 * 35.0 - 0.002) * (1.0 - 870e-6 * 35.0 - 0.01)) - 1.0;
    assert!((high - aged).abs() < 1e-12, "{high} {aged}");
    assert!(text.contains("-870 to -630 ppm/K by the stock list: A C1"), "{text}");
    assert!(text.contains("-25 to 25 ppm/K; 0.2 % over their life by the stock list: A R1"), "{text}");
    assert_eq!(json["drift"]["parts"][1]["coefficient_ppm"], json!([-870.0, -630.0]));
}

/// A tolerance for one slot wins over the list; for a measured part it is the accuracy of the measurement.
#[test]
fn a_slot_has_a_tolerance_of_its_own() {
    let folder = prepared(1, MEASURED);
    let (json, text) = vetted(&folder, "--tolerance R1=0.1%,A:C1=0.3%");
    let made_of = |part: usize, piece: usize| json["sections"][0]["parts"][part]["made_of"][piece].clone();
    for (part, piece, tolerance) in [(0, 0, 0.001), (0, 1, 0.001), (1, 0, 0.003)] {
        let found = made_of(part, piece);
        assert_eq!(
            (&found["tolerance"], &found["tolerance_from"]),
            (&json!([-tolerance, tolerance]), &json!("slot"))
        );
    }
    // f0 = 1/(2π R C); 20k and 10k in series count by their shares, each spread evenly.
    let expected = ((0.001f64 / 3.0).powi(2) + (0.002f64 / 3.0).powi(2) + 0.003f64.powi(2)).sqrt() / 3f64.sqrt();
    let found = json["spread"]["figures"][0]["sensitivity_deviation"].as_f64().unwrap();
    assert!((found / expected - 1.0).abs() < 1e-9, "{found} {expected}");
    assert!(text.contains("±0.3 % as given for A C1 ±0.1 % as given for A R1 20k, A R1 10k"), "{text}");
    let refused = |flags: &str| {
        let binary = env!("CARGO_BIN_EXE_roundwell");
        let mut command = Command::new(binary);
        command.args(["vet", "list.json"]).args(flags.split_whitespace()).current_dir(folder.path());
        let output = command.output().unwrap();
        assert_eq!(output.status.code(), Some(2), "{flags}");
        String::from_utf8(output.stderr).unwrap()
    };
    let flags = [
        "--tolerance R3=0.1%",
        "--tolerance B:R1=0.1%",
        "--tolerance R1",
        "--tolerance R1=95%,C1=5",
        "--tolerance R1=-1%",
    ];
    let shown: Vec<String> = flags.iter().map(|flags| format!("$ {flags}\n{}", refused(flags))).collect();
    insta::assert_snapshot!(shown.join("\n"));
}
