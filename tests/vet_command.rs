//! `vet` as it is run: reading a shortlist back, masks, what is printed, bad input.

#![allow(clippy::unwrap_used)]

mod support;

use std::fs;
use std::path::Path;
use std::process::{Command, Output, Stdio};

use roundwell::analysis::BuiltPiece;
use roundwell::job::Listed;
use roundwell::report::{Record, write_json};
use roundwell::search::{Unwatched, shortlist};
use roundwell::target::{Criterion, Measure, Shape, Weights};
use roundwell::text::render;
use roundwell::units::{Kind, Value};
use serde_json::{Value as Json, json};
use tempfile::TempDir;

/// A problem of two sections, a notch among them, and its shortlist as JSON.
fn problem(measure: Measure) -> roundwell::search::Problem {
    let (r, c) = (support::ohms("1k 1k5 2k2 3k3 4k7 6k8 10k 15k 22k 33k"), support::farads("1n 2n2 4n7 10n 22n 47n"));
    let low =
        support::section(support::second(Shape::LowPass, 1e3, 0.8, 1.0), "sallen-key-low-pass", "low-pass", &r, &c);
    let mut notch = support::notch(700.0, 1.5, 1.0, 700.0);
    notch.name = "B".into();
    let notch = support::section(notch, "fliege-notch", "notch", &r, &c);
    let mut problem = support::problem(low, support::wide(6.0));
    problem.title = "two sections".into();
    problem.sections.push(notch);
    problem.criterion = Criterion { measure, ..problem.criterion };
    problem
}

fn written(problem: &roundwell::search::Problem) -> (roundwell::search::Outcome, String) {
    let outcome = shortlist(problem, &Unwatched);
    let mut bytes = Vec::new();
    write_json(&Record::new(problem, &outcome, 0.0), &mut bytes).unwrap();
    (outcome, String::from_utf8(bytes).unwrap())
}

/// What was written is what is read: targets, measure and every part, exactly.
#[test]
fn a_list_is_read_back_as_it_was_written() {
    let weighted = Measure::Weighted(Weights { f0: 1.0, q: 0.5, gain: 0.0, fz: 1.0 });
    for measure in [Measure::Decibel, Measure::Vector, weighted] {
        let problem = problem(measure);
        let (outcome, text) = written(&problem);
        let listed = Listed::parse(&text).unwrap();
        assert_eq!(listed.title, "two sections");
        assert_eq!(listed.criterion.measure, measure);
        assert!(outcome.rows.len() > 1 && listed.rows.len() == outcome.rows.len());
        for (section, listed) in problem.sections.iter().zip(&listed.sections) {
            let (wanted, found) = (&section.target, &listed.target);
            assert_eq!(
                (&wanted.name, wanted.shape, wanted.q, wanted.gain),
                (&found.name, found.shape, found.q, found.gain)
            );
            assert!((wanted.w0 / found.w0 - 1.0).abs() < 1e-12);
            assert_eq!(wanted.wz.is_some(), found.wz.is_some());
            assert_eq!((&section.circuit.id, &section.output().name), (&listed.circuit, &listed.output));
        }
        for (k, (row, listed)) in outcome.rows.iter().zip(&listed.rows).enumerate() {
            assert_eq!(listed.rank, k + 1);
            for ((chosen, parts), section) in row.sections.iter().zip(&listed.sections).zip(&problem.sections) {
                let wanted: Vec<(&str, Kind, Value, Vec<BuiltPiece>)> = (chosen.parts.iter())
                    .map(|part| {
                        let value = part.value.unwrap();
                        (section.circuit.slots[part.slot].name.as_str(), part.kind, value, vec![value.into()])
                    })
                    .collect();
                let found: Vec<_> =
                    parts.iter().map(|p| (p.slot.as_str(), p.kind, p.value, p.made_of.clone())).collect();
                assert_eq!(found, wanted);
            }
            let built = self::Listed::parse(&text).unwrap();
            let built = built.built(&built.rows[k], &mut |id| Ok(support::library(id))).unwrap();
            // The transfer functions of what was read are those that the search found.
            for ((section, h), chosen) in built.sections.iter().zip(built.nominal()).zip(&row.sections) {
                let found = section.target.figures_of(&h);
                assert!((found.w0 / chosen.achieved.w0 - 1.0).abs() < 1e-12);
                assert!((found.gain / chosen.achieved.gain - 1.0).abs() < 1e-12);
            }
        }
    }
}

/// The list with one value changed.
fn changed(text: &str, change: impl Fn(&mut Json)) -> String {
    let mut value: Json = serde_json::from_str(text).unwrap();
    change(&mut value);
    serde_json::to_string_pretty(&value).unwrap()
}

fn told(text: &str) -> String {
    let faults = match Listed::parse(text) {
        Err(faults) => faults,
        Ok(listed) => match listed.built(&listed.rows[0], &mut |id| match id {
            "none" => Err("there is no circuit `none`".to_string()),
            id => Ok(support::library(id)),
        }) {
            Err(faults) => roundwell::text::located(text, faults),
            Ok(_) => panic!("no fault"),
        },
    };
    assert!(!faults.is_empty());
    let shown = render(&faults, "list.json", text, false);
    // Line numbers say where; their size depends on what else is in the file.
    shown.lines().map(|line| line.trim_start_matches(|c: char| c.is_ascii_digit())).collect::<Vec<_>>().join("\n")
}

#[test]
fn every_fault_of_a_list_is_told_with_its_place() {
    let (_, text) = written(&problem(Measure::Decibel));
    let part = "/shortlist/0/sections/0/parts/0";
    let set = |pointer: &str, value: Json| {
        let text = changed(&text, |list| *list.pointer_mut(pointer).unwrap() = value.clone());
        format!("--- {pointer}\n{}", told(&text))
    };
    let mut shown = vec![
        format!("--- no JSON\n{}", told("{\n  \"format\": roundwell\n}")),
        format!("--- empty\n{}", told("")),
        format!("--- a list\n{}", told("[]")),
        set("/format", json!("roundwell-stock/1")),
        set("/measure/name", json!("decibels")),
        set("/measure/band_hz", json!([1000.0, 10.0])),
        set("/sections/0/target/shape", json!("lowpass")),
        set("/sections/0/target/q", json!(-1.0)),
        set("/sections/0/circuit", json!("none")),
        set("/sections/0/output", json!("high-pass")),
        set("/shortlist/1/rank", json!(1)),
        set("/shortlist/0/sections/0/name", json!("X")),
        set(&format!("{part}/kind"), json!("L")),
        set(&format!("{part}/kind"), json!("C")),
        set(&format!("{part}/slot"), json!("R9")),
        set(&format!("{part}/slot"), json!("R2")),
        set(&format!("{part}/notation"), json!("4k7k")),
        set(&format!("{part}/notation"), json!(4700)),
        set(&format!("{part}/made_of"), json!([])),
        set(&format!("{part}/made_of"), json!([{"value": 1.0}, {"value": 2.0}])),
        set("/shortlist/0/sections/0/parts", json!([])),
    ];
    let missing = changed(&text, |list| {
        list.pointer_mut("/shortlist/0").unwrap().as_object_mut().unwrap().remove("sections");
    });
    shown.push(format!("--- a missing key\n{}", told(&missing)));
    insta::assert_snapshot!(shown.join("\n"));
}

/// Pieces in series and in parallel make up a slot, by their exact values.
#[test]
fn pieces_make_up_a_slot() {
    let (_, text) = written(&problem(Measure::Decibel));
    for (pieces, notation) in [([1500.0, 3300.0], "4k8"), ([2200.0, 2200.0], "1k1")] {
        let text = changed(&text, |list| {
            let part = list.pointer_mut("/shortlist/0/sections/0/parts/0").unwrap();
            part["made_of"] = json!([{"value": pieces[0]}, {"value": pieces[1]}]);
            part["notation"] = json!(notation);
        });
        let listed = Listed::parse(&text).unwrap();
        let built = listed.built(&listed.rows[0], &mut |id| Ok(support::library(id))).unwrap();
        assert_eq!(built.sections[0].parts[0].pieces.len(), 2);
        let total = built.sections[0].parts[0].factor(&[0.01, 0.01]);
        assert!((total - 1.01).abs() < 1e-12);
    }
}

// ---- the command ---------------------------------------------------------------------------------------------------

const JOB: &str = r#"(
    title: "Vibration logger, anti-alias",
    sections: [
        (name: "A", shape: LowPass, f0: "1 kHz", q: 0.5412, gain: 1.0, circuit: "sallen-key-low-pass"),
        (name: "B", shape: LowPass, f0: "1 kHz", q: 1.3066, gain: 1.0, circuit: "sallen-key-low-pass"),
    ],
    resistors: (series: E24, from: "1k", to: "100k"),
    capacitors: (series: E6, from: "1n", to: "100n"),
)
"#;

const MASK: &str = r#"(
    reference: Dc,
    limits: [
        (from: "10 Hz", to: "600 Hz", lower: "-0.5 dB", upper: "0.5 dB"),
        (from: "4 kHz", to: "10 kHz", upper: "-45 dB"),
    ],
    figures: [(section: "B", f0: ("940 Hz", "1060 Hz"), q: (1.2, 1.4))],
)
"#;

fn run(folder: &Path, line: &str) -> Output {
    let mut command = Command::new(assert_cmd::cargo::cargo_bin!("roundwell"));
    command.current_dir(folder).args(line.split_whitespace()).stdin(Stdio::null()).output().unwrap()
}

fn out(output: &Output) -> String {
    String::from_utf8(output.stdout.clone()).unwrap()
}

fn err(output: &Output) -> String {
    String::from_utf8(output.stderr.clone()).unwrap()
}

/// A folder with the job, the mask and the shortlist.
fn prepared() -> TempDir {
    let folder = tempfile::tempdir().unwrap();
    fs::write(folder.path().join("job.ron"), JOB).unwrap();
    fs::write(folder.path().join("mask.ron"), MASK).unwrap();
    let output = run(folder.path(), "shortlist job.ron --format json --out list.json");
    assert_eq!(output.status.code(), Some(0), "{}", err(&output));
    folder
}

#[test]
fn a_row_is_shown_on_a_page() {
    let folder = prepared();
    let output = run(folder.path(), "vet list.json --row 2 --mask mask.ron");
    assert_eq!(output.status.code(), Some(0), "{}", err(&output));
    assert!(out(&output).lines().all(|line| line.chars().count() <= 80), "{}", out(&output));
    insta::assert_snapshot!(out(&output));
    let narrow = run(folder.path(), "vet list.json --row 2 --mask mask.ron --width 60");
    assert!(out(&narrow).lines().all(|line| line.chars().count() <= 60), "{}", out(&narrow));
}

#[test]
fn drift_is_shown_where_it_is_asked_for() {
    let folder = prepared();
    let page = |flags: &str| {
        let output = run(folder.path(), &format!("vet list.json --row 2 {flags}"));
        assert_eq!(output.status.code(), Some(0), "{}", err(&output));
        let text = out(&output);
        assert!(text.lines().all(|line| line.chars().count() <= 80), "{text}");
        text[text.find("Drift").unwrap_or(text.len())..].to_string()
    };
    assert_eq!(page(""), "");
    let full = "--temperature -20..60 --resistor-coefficient 50 --resistor-tracking 10 --capacitor-coefficient -200±100 \
                --resistor-ageing 0.5% --capacitor-ageing 1%";
    let shown = [page(full), page("--temperature 0..50"), page("--capacitor-ageing 2%")];
    insta::assert_snapshot!(shown.join("\n--------\n"));
    let output = run(folder.path(), &format!("vet list.json --row 2 --format json {full}"));
    let value: Json = serde_json::from_slice(&output.stdout).unwrap();
    assert_eq!(value["drift"]["kelvin"], json!([-45.0, 35.0]));
    assert_eq!(value["drift"]["capacitors"]["coefficient_ppm"], json!([-300.0, -100.0]));
    assert_eq!(value["drift"]["resistors"]["tracking_ppm"], 10.0);
}

#[test]
fn real_op_amps_are_shown_where_they_are_asked_for() {
    let folder = prepared();
    let page = |flags: &str| {
        let output = run(folder.path(), &format!("vet list.json --row 2 {flags}"));
        assert_eq!(output.status.code(), Some(0), "{}", err(&output));
        let text = out(&output);
        assert!(text.lines().all(|line| line.chars().count() <= 80), "{text}");
        text[text.find("Real network").unwrap_or(text.len())..].to_string()
    };
    assert_eq!(page(""), "");
    let full = "--gbw 1MHz --output-resistance 75 --source-resistance 50 --load-resistance 2k --stray 3p --shift 0.5% \
                --output-level 5";
    let spread = "--gbw 1MHz --gbw-spread 30%";
    let shown =
        [page(full), page("--stray 10p"), page("--gbw 2kHz"), page(spread), page("--gbw 9k --gbw-spread 90%")];
    insta::assert_snapshot!(shown.join("\n--------\n"));
    let output = run(folder.path(), &format!("vet list.json --row 2 --format json {full}"));
    let value: Json = serde_json::from_slice(&output.stdout).unwrap();
    assert_eq!(value["real"]["sections"][0]["state"], "stable");
    assert_eq!(value["real"]["slew"]["op_amp"], "A1");
    assert_eq!((&value["real"]["bandwidth_spread"], &value["real"]["ends"]), (&json!(0.0), &json!([])));
    let output = run(folder.path(), &format!("vet list.json --row 2 --format json {spread}"));
    let value: Json = serde_json::from_slice(&output.stdout).unwrap();
    let ends = value["real"]["ends"].as_array().unwrap();
    assert_eq!(value["real"]["bandwidth_spread"], 0.3);
    assert_eq!((ends[0]["bandwidth_hz"].as_f64(), ends[1]["bandwidth_hz"].as_f64()), (Some(7e5), Some(1.3e6)));
    for end in ends {
        assert!(end["error"].as_f64().unwrap() > 0.0 && end["sections"][0]["f0_hz"].as_f64().unwrap() > 900.0);
    }
}

#[test]
fn headroom_and_noise_are_shown_where_they_are_asked_for() {
    let folder = prepared();
    let page = |flags: &str| {
        let output = run(folder.path(), &format!("vet list.json --row 2 {flags}"));
        assert_eq!(output.status.code(), Some(0), "{}", err(&output));
        let text = out(&output);
        assert!(text.lines().all(|line| line.chars().count() <= 80), "{text}");
        text[text.find("Headroom").unwrap_or(text.len())..].to_string()
    };
    assert_eq!(page(""), "");
    let full = "--swing 10 --voltage-noise 5 --current-noise 0.5";
    let shown = [page(full), page("--swing 10V --gbw 3MHz --source-resistance 50")];
    insta::assert_snapshot!(shown.join("\n--------\n"));
    let output = run(folder.path(), &format!("vet list.json --row 2 --format json {full}"));
    let value: Json = serde_json::from_slice(&output.stdout).unwrap();
    assert_eq!(value["levels"]["clips_first_op_amp"], "A1");
    assert_eq!(value["levels"]["voltage_noise"], 5e-9);
}

#[test]
fn a_trim_is_planned_where_it_is_asked_for() {
    let list = Path::new(env!("CARGO_MANIFEST_DIR")).join("data/examples/vibration-logger.json");
    let page = |file: &str, flags: &str| {
        let output = run(Path::new("."), &format!("vet {file} {flags}"));
        assert_eq!(output.status.code(), Some(0), "{}", err(&output));
        let text = out(&output);
        assert!(text.lines().all(|line| line.chars().count() <= 80), "{text}");
        text[text.find("\nTrim").unwrap_or(text.len())..].to_string()
    };
    let list = list.display().to_string();
    assert_eq!(page(&list, "--row 4"), "");
    insta::assert_snapshot!(page(&list, "--row 4 --trim"));
    // Two resistors that both move f0 and Q leave no step that disturbs no other but the first.
    let folder = prepared();
    let shown = page(&folder.path().join("list.json").display().to_string(), "--trim");
    assert!(shown.contains("f0 of A") && !shown.contains("Q of A"), "{shown}");
}

#[test]
fn json_for_scripts_is_the_same_for_any_number_of_threads() {
    let folder = prepared();
    let line = "vet list.json --row 2 --mask mask.ron --format json --reel-share 50% --distribution normal \
                --capacitor-tolerance 10%";
    let one = run(folder.path(), &format!("{line} --threads 1"));
    let three = run(folder.path(), &format!("{line} --threads 3 --out vet.json"));
    assert_eq!(three.status.code(), Some(0), "{}", err(&three));
    assert_eq!(one.stdout, fs::read(folder.path().join("vet.json")).unwrap());
    let value: Json = serde_json::from_slice(&one.stdout).unwrap();
    assert_eq!(value["format"], "roundwell-vet/1");
    assert_eq!(value["row"], 2);
    assert_eq!(value["tolerances"]["reel_share"], 0.5);
    assert_eq!(value["mask"]["fails"], "tolerance");
    assert_eq!(value["mask"]["limits"][2]["what"], "f0");
    let found = &value["mask"]["yield"];
    let share = found["share"].as_f64().unwrap();
    let [low, high] = [0, 1].map(|k| found["interval"][k].as_f64().unwrap());
    assert!(low < share && share < high && high - low < 0.0101);
    let error = value["nominal_error"].as_f64().unwrap();
    let list: Json = serde_json::from_slice(&fs::read(folder.path().join("list.json")).unwrap()).unwrap();
    let listed = list["shortlist"][1]["response_error_db"].as_f64().unwrap();
    assert!((error - listed).abs() < 1e-9, "{error} {listed}");
    // Another seed, another draw.
    let other = run(folder.path(), &format!("{line} --seed 2"));
    assert_ne!(one.stdout, other.stdout);
}

/// Which of target, nominal parts and tolerances fails is said, and in the exit code.
#[test]
fn what_fails_first_is_told() {
    let folder = prepared();
    let fails = |mask: &str, flags: &str| {
        fs::write(folder.path().join("m.ron"), mask).unwrap();
        let output = run(folder.path(), &format!("vet list.json --row 2 --mask m.ron --format json {flags}"));
        let value: Json = serde_json::from_slice(&output.stdout).unwrap();
        (value["mask"]["fails"].clone(), output.status.code().unwrap())
    };
    let stop = |level: f64| format!("(limits: [(from: \"4 kHz\", to: \"10 kHz\", upper: \"{level} dB\")])");
    // Fourth-order Butterworth, closed form: -10 log10(1 + 4^8) = -48.16 dB at 4 kHz.
    assert_eq!(fails(&stop(-48.2), ""), (json!("target"), 3));
    assert_eq!(fails(&stop(-20.0), ""), (Json::Null, 0));
    assert_eq!(fails(&stop(-47.5), ""), (json!("tolerance"), 0));
    let exact = "(figures: [(section: \"A\", f0: (\"999.9999 Hz\", \"1000.0001 Hz\"))])";
    assert_eq!(fails(exact, ""), (json!("nominal"), 3));
    assert_eq!(fails(&stop(-47.5), "--resistor-tolerance 0% --capacitor-tolerance 0%"), (Json::Null, 0));
    let shown = run(folder.path(), "vet list.json --mask m.ron");
    assert!(out(&shown).contains("Mask, absolute"));
    fs::write(folder.path().join("m.ron"), stop(-60.0)).unwrap();
    let shown = out(&run(folder.path(), "vet list.json --mask m.ron"));
    let text = shown.split_whitespace().collect::<Vec<_>>().join(" ").replace('\u{a0}', " ");
    assert!(text.contains("the target itself misses it: 4 kHz to 10 kHz by 11.8 dB at 4 kHz"), "{text}");
}

#[test]
fn a_circuit_of_ones_own_is_given_by_its_file() {
    let folder = prepared();
    let own = include_str!("../data/circuits/sallen-key-low-pass.ron").replace("\"sallen-key-low-pass\"", "\"mine\"");
    fs::write(folder.path().join("mine.ron"), own).unwrap();
    let list = fs::read_to_string(folder.path().join("list.json")).unwrap();
    fs::write(folder.path().join("list.json"), list.replace("\"sallen-key-low-pass\"", "\"mine\"")).unwrap();
    let without = run(folder.path(), "vet list.json");
    assert_eq!(without.status.code(), Some(2));
    assert!(err(&without).contains("there is no circuit `mine`") && err(&without).contains("--circuit FILE"));
    let with = run(folder.path(), "vet list.json --circuit mine.ron");
    assert_eq!(with.status.code(), Some(0), "{}", err(&with));
    assert!(out(&with).contains("circuit mine"));
}

#[test]
fn bad_input_is_told_with_its_range() {
    let folder = prepared();
    let mut shown = Vec::new();
    let flags =
        "--resistor-tolerance 120% --capacitor-tolerance 5 --reel-share -1% --boards 0 --interval 60% --seed x";
    for line in [
        format!("vet list.json {flags}"),
        "vet list.json --row 99".to_string(),
        "vet list.json --temperature 60..0 --resistor-coefficient x --capacitor-tracking -5 --capacitor-ageing 1"
            .to_string(),
        "vet list.json --resistor-coefficient 50".to_string(),
        "vet list.json --gbw -1MHz --load-resistance 0 --stray 10k --shift 0% --output-level 0".to_string(),
        "vet list.json --shift 1%".to_string(),
        "vet list.json --gbw 1MHz --gbw-spread 130%".to_string(),
        "vet list.json --gbw 1MHz --gbw-spread -30%".to_string(),
        "vet list.json --gbw 1MHz --gbw-spread 30".to_string(),
        "vet list.json --gbw-spread 30%".to_string(),
        "vet list.json --swing 0 --voltage-noise -1 --current-noise x".to_string(),
        "vet list.json --voltage-noise 5".to_string(),
        "vet list.json --trim --trim-values E7:1k..1M".to_string(),
        "vet list.json --trim --trim-values E24:1M..1k".to_string(),
        "vet list.json --trim-values E24".to_string(),
        "vet job.ron".to_string(),
        "vet none.json".to_string(),
        "vet list.json --mask none.ron".to_string(),
    ] {
        let output = run(folder.path(), &line);
        assert_eq!(output.status.code(), Some(2), "{line}");
        assert!(output.stdout.is_empty());
        shown.push(format!("$ {line}\n{}", err(&output)));
    }
    let masks = [
        "()",
        "(limits: [(from: \"1 kHz\", to: \"2 kHz\")], figures: [(section: \"A\")])",
        "(limits: [(from: \"2 kHz\", to: \"1 kHz\", upper: 0), (from: \"1k\", to: 2000, lower: 2, upper: \"1 dB\")])",
        "(reference: At(\"1 kHz\"), limits: [\n  (from: 10, to: 100, upper: 0),\n  (from: 50, to: 200, upper: 1),\n  (from: 20, to: 60, lower: 3),\n])",
        "(figures: [(section: \"A\", f0: (2, 1), q: (0, 1), fz: (1, 2), depth: 40), (section: \"A\", q: (1, 2)), (section: \"Z\")])",
        "(reference: Dx, limits: [])",
    ];
    for mask in masks {
        fs::write(folder.path().join("m.ron"), mask).unwrap();
        let output = run(folder.path(), "vet list.json --mask m.ron");
        assert_eq!(output.status.code(), Some(2), "{mask}");
        shown.push(format!("$ cat m.ron\n{mask}\n{}", err(&output)));
    }
    insta::assert_snapshot!(shown.join("\n"));
}

/// The mask and the list of the README are examples that hold.
#[test]
fn the_example_list_is_that_of_its_job() {
    let folder = tempfile::tempdir().unwrap();
    let job = Path::new(env!("CARGO_MANIFEST_DIR")).join("data/examples/vibration-logger.ron");
    let line =
        format!("shortlist {} --one-at-a-time --error-resolution 0.001 --format json --out new.json", job.display());
    assert_eq!(run(folder.path(), &line).status.code(), Some(0));
    let read = |path: &Path| Listed::parse(&fs::read_to_string(path).unwrap()).unwrap();
    assert_eq!(read(&job.with_extension("json")), read(&folder.path().join("new.json")));
}
