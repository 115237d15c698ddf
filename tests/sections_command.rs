//! `roundwell sections` as it is run: output, formats, the job that goes to the shortlist, bad input.

#![allow(clippy::unwrap_used)]

use std::fs;
use std::path::Path;
use std::process::{Command, Output, Stdio};

use serde_json::Value;

fn run(folder: &Path, line: &str) -> Output {
    let mut command = Command::new(assert_cmd::cargo::cargo_bin!("roundwell"));
    command.current_dir(folder).args(line.split_whitespace()).stdin(Stdio::null()).output().unwrap()
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8(bytes.to_vec()).unwrap()
}

fn out(line: &str) -> String {
    let output = run(Path::new("."), line);
    assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
    assert!(output.stderr.is_empty());
    text(&output.stdout)
}

/// What is told about a refused line, in one line; nothing may be printed then.
fn refused(folder: &Path, line: &str) -> String {
    let output = run(folder, line);
    let told = text(&output.stderr);
    assert_eq!(output.status.code(), Some(2), "{line}: {told}");
    assert!(output.stdout.is_empty() && !told.contains("panicked"), "{line}: {told}");
    told.replace(['\n', '|'], " ").split_whitespace().collect::<Vec<_>>().join(" ")
}

const LOW_PASS: &str = "sections --approximation chebyshev --response low-pass --edge 1k --ripple 0.5";

#[test]
fn lines_have_80_characters_at_most() {
    for line in [
        format!("{LOW_PASS} --order 5"),
        "sections --approximation elliptic --response band-pass --edges 900..1k1 --ripple 0.5 --order 3 --attenuation 40".into(),
        "sections --approximation bessel --response low-pass --delay 1ms --order 4".into(),
        "sections --approximation linkwitz-riley --response high-pass --edge 2k2 --order 4".into(),
        "sections --approximation legendre --response band-stop --edges 45..55 --order 1 --reference dc".into(),
    ] {
        let text = out(&line);
        assert!(text.lines().all(|line| line.chars().count() <= 80 && line.trim_end() == line), "{text}");
        assert!(text.contains("Headroom:") && text.contains("Sequence:"), "{text}");
    }
}

/// Even-order Chebyshev: DC lies a ripple under the peak, and the gain is that of the reference.
#[test]
fn the_frequency_convention_is_stated() {
    let peak = out(&format!("{LOW_PASS} --order 4"));
    assert!(peak.contains("1 kHz: end of the ripple band, 0.5 dB under the peak"), "{peak}");
    assert!(peak.contains("1 (0 dB) at the peak of the pass band; at DC it lies 0.5 dB lower"), "{peak}");
    let dc = out(&format!("{LOW_PASS} --order 4 --reference dc --edge-at half-power"));
    assert!(dc.contains("1 kHz: half power, -3.0103 dB under the gain at DC"), "{dc}");
    assert!(dc.contains("1 (0 dB) at DC; the peak lies 0.5 dB higher"), "{dc}");
    let crossover = out("sections --approximation linkwitz-riley --response low-pass --edge 2k2 --order 4");
    assert!(crossover.contains("2.2 kHz: -6.0206 dB"), "{crossover}");
    let delay = out("sections --approximation bessel --response low-pass --delay 1ms --order 4");
    assert!(delay.contains("Delay:      1 ms at DC"), "{delay}");
    let band = out("sections --approximation butterworth --response band-pass --edges 900..1k1 --order 2");
    assert!(band.contains("order 2 (4 poles)") && band.contains("900 Hz and 1.1 kHz: half power"), "{band}");
}

#[test]
fn the_least_order_is_stated_with_its_margin() {
    let text = out(&format!("{LOW_PASS} --stop-edge 2k --attenuation 40"));
    // scipy.signal 1.17.1: cheb1ord(1, 2, 0.5, 40, analog=True) gives 5.
    assert!(text.starts_with("Chebyshev low-pass, order 5\n"), "{text}");
    let text = text.split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(text.contains("5 is the least that will do: order 4 gives"), "{text}");
    assert!(text.contains("dB more than the 40 dB asked; 40 dB is reached at"), "{text}");
}

#[test]
fn json_has_unrounded_figures() {
    let value: Value = serde_json::from_str(&out(&format!("{LOW_PASS} --order 3 --format json"))).unwrap();
    assert_eq!(value["format"], "roundwell-sections/1");
    assert_eq!(value["filter"]["edge_at"], "ripple");
    // scipy.signal 1.17.1: cheby1(3, 0.5, 1, analog=True): a pole at -0.6264564861...
    let real = value["poles"].as_array().unwrap().iter().find(|pole| pole["q"].is_null()).unwrap();
    let edge = std::f64::consts::TAU * 1000.0;
    assert!((real["real"][0].as_f64().unwrap() / edge + 0.626_456_486_1).abs() < 1e-9, "{real}");
    let first = &value["sections"][0];
    assert_eq!(first["shape"], "first-order low-pass");
    assert!(first["q"].is_null() && first["fz_hz"].is_null() && first["op_amps"][0]["db"].is_number(), "{first}");
    assert!(value["filter"]["stop_band"].is_null() && value["filter"]["delay_s"].is_null());
}

/// From the specification to a proved shortlist in two commands, for every kind of section.
#[test]
fn the_job_goes_to_the_shortlist() {
    let folder = tempfile::tempdir().unwrap();
    for (name, line) in [
        ("low-pass", "--approximation chebyshev --response low-pass --edge 1k --order 3 --ripple 0.5"),
        ("high-pass", "--approximation bessel --response high-pass --edge 1k --order 3"),
        ("band-pass", "--approximation butterworth --response band-pass --edges 900..1k1 --order 2"),
        (
            "elliptic",
            "--approximation elliptic --response low-pass --edge 1k --order 3 --ripple 0.5 --attenuation 30",
        ),
        ("band-stop", "--approximation butterworth --response band-stop --edges 45..55 --order 1"),
    ] {
        let written = run(folder.path(), &format!("sections {line} --format job --out {name}.ron"));
        assert_eq!(written.status.code(), Some(0), "{}", text(&written.stderr));
        let parts = "--resistors E24:1k..1M --max-part-numbers 6 --error-limit 6dB --rows 1";
        let listed = run(folder.path(), &format!("shortlist {name}.ron {parts} --format json"));
        assert_eq!(listed.status.code(), Some(0), "{name}: {}", text(&listed.stderr));
        let listed: Value = serde_json::from_slice(&listed.stdout).unwrap();
        let sections = run(folder.path(), &format!("sections {line} --format json"));
        let sections: Value = serde_json::from_slice(&sections.stdout).unwrap();
        let (a, b) = (sections["sections"].as_array().unwrap(), listed["sections"].as_array().unwrap());
        assert_eq!(a.len(), b.len());
        for (section, searched) in a.iter().zip(b) {
            let target = &searched["target"];
            assert_eq!(section["shape"], target["shape"], "{name}");
            for key in ["f0_hz", "q", "gain", "fz_hz"] {
                let [wanted, found] = [&section[key], &target[key]].map(Value::as_f64);
                assert_eq!(wanted.is_some(), found.is_some(), "{name} {key}");
                let miss = wanted.zip(found).map_or(0.0, |(a, b)| (a / b - 1.0).abs());
                assert!(miss < 1e-9, "{name} {key} {wanted:?} {found:?}");
            }
        }
        // The same filter within a job gives the same list.
        let keys = fs::read_to_string(folder.path().join(format!("{name}.ron"))).unwrap();
        assert!(keys.starts_with("// ") && keys.contains("sections: ["), "{keys}");
    }
}

/// A filter within a job: the shortlist takes it as it takes its sections, and flags win over its keys.
#[test]
fn a_job_may_hold_the_filter_itself() {
    let folder = tempfile::tempdir().unwrap();
    let filter = "filter: (approximation: Butterworth, response: LowPass, edge: \"1k\", order: 4, circuits: [\"sallen-key-low-pass\"])";
    fs::write(
        folder.path().join("job.ron"),
        format!(
            "({filter}, title: \"Tank gauge\",\n resistors: (series: E24, from: \"1k\", to: \"100k\"), \
             capacitors: (series: E6, from: \"1n\", to: \"100n\"), max_part_numbers: 4)"
        ),
    )
    .unwrap();
    let listed = run(folder.path(), "shortlist job.ron");
    let table = text(&listed.stdout);
    assert_eq!(listed.status.code(), Some(0), "{}", text(&listed.stderr));
    assert!(table.starts_with("Tank gauge") && table.contains("2: low-pass, f0 1 kHz, Q 1.30656"), "{table}");
    let shown = text(&run(folder.path(), "sections job.ron").stdout);
    assert!(shown.starts_with("Tank gauge\n\nFilter:     Butterworth low-pass, order 4\n"), "{shown}");
    assert!(shown.contains("section 1 stays at 1"), "{shown}");
    let job = text(&run(folder.path(), "sections job.ron --order 2 --format job").stdout);
    assert!(
        job.contains("order 2") && job.contains("q: 0.7071067812, gain: 1, circuit: \"sallen-key-low-pass\""),
        "{job}"
    );
    assert!(job.contains("are not repeated here"), "{job}");
    let other = text(&run(folder.path(), "shortlist job.ron --circuit tow-thomas --rows 1").stdout);
    assert!(other.contains("circuit tow-thomas"), "{other}");
}

#[test]
fn choices_can_be_given() {
    let line =
        "sections --approximation elliptic --response low-pass --edge 1k --order 4 --ripple 0.5 --attenuation 40";
    let rows = |extra: &str| {
        let text = out(&format!("{line} {extra}"));
        let rows: Vec<String> = text.lines().filter(|line| line.contains("notch  P")).map(str::to_string).collect();
        rows.iter()
            .map(|row| row.split_whitespace().take(4).skip(2).collect::<Vec<_>>().join(" "))
            .collect::<Vec<_>>()
    };
    assert_eq!(rows("--pairing 2,1 --sequence 2,1"), ["P2 Z1", "P1 Z2"]);
    assert_eq!(rows("--pairing 1,2 --sequence rising-q"), ["P1 Z1", "P2 Z2"]);
    assert_eq!(rows("--pairing nearest --sequence falling-q"), ["P2 Z1", "P1 Z2"]);
    assert!(out(&format!("{line} --gains 0.5,3")).contains("Gains:      as given"));
}

#[test]
fn extreme_figures_are_designed() {
    for line in [
        "--approximation butterworth --response low-pass --edge 1k --order 1",
        "--approximation bessel --response low-pass --edge 1k --order 12",
        "--approximation gaussian --response high-pass --edge 10 --order 12",
        "--approximation legendre --response low-pass --edge 20k --order 11",
        "--approximation chebyshev --response low-pass --edge 1k --order 6 --ripple 0.0001",
        "--approximation chebyshev --response high-pass --edge 1k --order 5 --ripple 20",
        "--approximation elliptic --response low-pass --edge 1k --order 2 --ripple 0.01 --attenuation 100",
        "--approximation butterworth --response band-stop --edges 1..1000 --order 3",
        "--approximation butterworth --response band-pass --edges 1..100k --order 1",
    ] {
        let text = out(&format!("sections {line}"));
        assert!(!text.contains("NaN") && !text.contains("inf"), "{text}");
    }
}

#[test]
fn bad_input_is_told_with_the_next_step() {
    let folder = tempfile::tempdir().unwrap();
    fs::write(
        folder.path().join("job.ron"),
        "(filter: (approximation: Butterwort, response: BandPass, edge: \"1k\", order: 0, ripel: 1, attenuation: \"x\"))",
    )
    .unwrap();
    fs::write(folder.path().join("both.ron"), "(filter: (order: 2), sections: [(shape: LowPass, f0: 1, q: 1)])")
        .unwrap();
    fs::write(folder.path().join("none.ron"), "(sections: [(shape: LowPass, f0: 1, q: 1)])").unwrap();
    fs::write(
        folder.path().join("slips.ron"),
        "(filter: (approximation: Bessel, response: BandPass,\n  edge: \"1k\", edges: (2000, 1000), order: 0,\n  ripple: \"x\", \
         gain: -1, edge_at: \"up\",\n  circuits: [\"tow\"], pairing: [0], gains: [1, \"loud\"]))",
    )
    .unwrap();
    fs::write(
        folder.path().join("short.ron"),
        "(filter: (approximation: Elliptic, response: LowPass, edge: \"1k\", order: 3, ripple: 1,\n  attenuation: 60, \
         stop_edge: \"2k\"))",
    )
    .unwrap();
    let butterworth = "sections --approximation butterworth --response low-pass --edge 1k";
    let band = "sections --approximation butterworth --response band-pass";
    let lines = [
        "sections".to_string(),
        "sections --approximation butterworth".into(),
        "sections --response low-pass --edge 1k --order 0".into(),
        butterworth.into(),
        format!("{butterworth} --order 2.5 --ripple 30 --attenuation 0"),
        format!("{butterworth} --order 4 --attenuation 40"),
        format!("{butterworth} --order 4 --ripple 1 --edge-at half-power"),
        format!("{butterworth} --order 4 --edge-at sideways"),
        format!("{butterworth} --order 4 --edge-at 300dB"),
        format!("{butterworth} --order 4 --gain -2"),
        format!("{butterworth} --order 4 --gain 2 --gains 1,2"),
        format!("{butterworth} --order 4 --gains 1,2,3"),
        format!("{butterworth} --order 4 --gains loud"),
        format!("{butterworth} --order 4 --sequence 1,1"),
        format!("{butterworth} --order 4 --sequence upwards"),
        format!("{butterworth} --order 4 --pairing 3,1"),
        format!("{butterworth} --order 1 --gain 2"),
        format!("{butterworth} --order 4 --delay 1ms"),
        format!("{butterworth} --order 4 --edges 1k..2k"),
        format!("{butterworth} --order 4 --circuits tow-tomas,fliege-notch"),
        format!("{butterworth} --order 4 --circuits fliege-notch"),
        format!("{butterworth} --stop-edge 900 --attenuation 40"),
        format!("{butterworth} --stop-edge 2k"),
        format!("{butterworth} --stop-edge 1100 --attenuation 100"),
        format!("{butterworth} --order 3 --stop-edge 2k --attenuation 40"),
        format!("{band} --edge 1k --order 2"),
        format!("{band} --edges 1k..1k --order 2"),
        format!("{band} --edges 2k..1k"),
        format!("{band} --edges 1k"),
        format!("{band} --edges 1k..1000.1 --order 2"),
        format!("{band} --edges 1k..2k --order 13"),
        "sections --approximation butterworth --order 1 --response band-stop --edges 1..100k".into(),
        "sections --approximation linkwitz-riley --response low-pass --edge 1k --order 3".into(),
        "sections --approximation linkwitz-riley --response band-pass --edges 1k..2k --order 4".into(),
        "sections --approximation chebyshev --response low-pass --edge 1k --order 3".into(),
        "sections --approximation elliptic --response low-pass --edge 1k --order 3 --ripple 3 --attenuation 2".into(),
        format!("{LOW_PASS} --order 3 --edge-at 0.2dB"),
        "sections job.ron".into(),
        "sections slips.ron".into(),
        "shortlist short.ron".into(),
        "sections both.ron".into(),
        "shortlist both.ron".into(),
        "sections none.ron".into(),
    ];
    let told = lines.map(|line| format!("{line}\n    {}", refused(folder.path(), &line)));
    insta::assert_snapshot!(told.join("\n"));
}
