//! `tighten`: yields against closed forms, the choice of rows, the marks, and the command as it is run.

#![allow(missing_docs, clippy::unwrap_used)]

mod support;

use std::f64::consts::TAU;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use roundwell::analysis::{
    Built, Distribution, Gauge, Sampling, Step, Steps, Tolerances, Wanted, coarsest, estimate, tighten,
};
use roundwell::job::{Listed, read_mask};
use roundwell::report::{Record, write_json};
use roundwell::search::{Unwatched, shortlist};
use roundwell::target::{Criterion, Shape};
use serde_json::Value as Json;

fn data(name: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("data").join(name)
}

fn boards(text: &str) -> Vec<Built> {
    let listed = Listed::parse(text).unwrap();
    listed.rows.iter().map(|row| listed.built(row, &mut |id| Ok(support::library(id))).unwrap()).collect()
}

fn logger() -> (Vec<Built>, roundwell::analysis::Mask) {
    let rows = boards(&fs::read_to_string(data("examples/vibration-logger.json")).unwrap());
    let mask = fs::read_to_string(data("masks/vibration-logger.ron")).unwrap();
    let mask = read_mask(&mask, &rows[0].targets()).unwrap();
    (rows, mask)
}

fn steps(resistors: &[f64], capacitors: &[f64]) -> Steps {
    Steps {
        resistors: resistors.to_vec(),
        capacitors: capacitors.to_vec(),
        distribution: Distribution::Uniform,
        reel_share: 0.0,
    }
}

fn all(boards: u64) -> Sampling {
    Sampling { boards, half_width: 0.0, ..Sampling::default() }
}

/// A first-order low-pass whose parts are exact, in a band up to ten times its corner.
fn low_pass() -> (Built, f64) {
    let f0 = 1.0 / (TAU * 10e3 * 10e-9);
    let (r, c) = (support::ohms("10k"), support::farads("10n"));
    let target = support::first(Shape::FirstOrderLowPass, f0, 1.0);
    let mut problem =
        support::problem(support::section(target, "rc-low-pass", "low-pass", &r, &c), support::wide(1.0));
    problem.criterion = Criterion { band: Some((0.1 * f0 * TAU, 10.0 * f0 * TAU)), ..problem.criterion };
    let outcome = shortlist(&problem, &Unwatched);
    let mut bytes = Vec::new();
    write_json(&Record::new(&problem, &outcome, 0.0), &mut bytes).unwrap();
    (boards(&String::from_utf8(bytes).unwrap()).remove(0), 10.0)
}

/// Closed form: with R off by e the response moves most at the top of the band, x = f/f0 there, by
/// 10 log10((1 + x²)/(1 + x² (1 + e)²)) dB. Evenly spread errors keep a limit L while e lies between the two solutions.
#[test]
fn the_share_within_an_error_is_that_of_the_closed_form() {
    let (built, x) = low_pass();
    let square = x * x;
    for limit in [0.05, 0.1, 0.3] {
        let edge = |sign: f64| (((1.0 + square) * 10f64.powf(sign * limit / 10.0) - 1.0) / square).sqrt() - 1.0;
        let tolerances = [0.05, 0.02, 0.01];
        let wanted = Wanted::within(limit, &built);
        let found = tighten(std::slice::from_ref(&built), &wanted, &steps(&tolerances, &[0.0]), &all(40_000));
        for (step, t) in found.iter().zip(tolerances) {
            let expected = ((edge(1.0).min(t) - edge(-1.0).max(-t)) / (2.0 * t)).clamp(0.0, 1.0);
            let share = step.passed as f64 / 40_000.0;
            // Five standard errors.
            let room = 5.0 * (expected * (1.0 - expected) / 40_000.0).sqrt() + 1e-9;
            assert!((share - expected).abs() <= room, "{limit} dB, {t}: {share} {expected}");
            assert_eq!(step.boards, 40_000);
        }
    }
}

/// Without tolerances all boards are the nominal one, whatever a stock list says of the parts.
#[test]
fn without_tolerances_all_boards_keep_a_limit_or_none() {
    let (mut rows, mask) = logger();
    let parts = rows.iter_mut().flat_map(|built| &mut built.sections).flat_map(|section| &mut section.parts);
    parts.flat_map(|part| &mut part.pieces).for_each(|piece| piece.tolerance = Some((-0.5, 0.5)));
    let errors = rows.iter().map(|built| built.yardstick().deviation(&built.nominal()).error);
    let best = errors.fold(f64::INFINITY, f64::min);
    for (wanted, passed) in [
        (Wanted::mask(&mask, &rows[0]), 2000),
        (Wanted::within(1.001 * best, &rows[0]), 2000),
        (Wanted::within(0.999 * best, &rows[0]), 0),
    ] {
        let found = tighten(&rows, &wanted, &steps(&[0.0], &[0.0]), &all(2000));
        assert_eq!((found.len(), found[0].passed, found[0].boards), (1, passed, 2000));
    }
    assert!(tighten(&[], &Wanted::mask(&mask, &rows[0]), &steps(&[0.0], &[0.0]), &all(1)).is_empty());
}

/// Each step shows the best of all rows, and of equal ones the first: the same numbers as one row alone gives, and as
/// `vet` counts.
#[test]
fn a_step_takes_the_row_with_the_highest_yield() {
    let (rows, mask) = logger();
    let gauge = Gauge::new(&mask, &rows[0].targets(), rows[0].criterion);
    let found = tighten(&rows, &Wanted::Mask(gauge.clone()), &steps(&[0.05, 0.01], &[0.1, 0.05]), &all(4096));
    let mut taken = std::collections::BTreeSet::new();
    for step in &found {
        let tolerances = Tolerances {
            resistors: step.resistors,
            capacitors: step.capacitors,
            distribution: Distribution::Uniform,
            reel_share: 0.0,
        };
        let alone: Vec<u64> =
            rows.iter().map(|built| estimate(built, &tolerances, &gauge, &all(4096)).passed).collect();
        let most = *alone.iter().max().unwrap();
        assert_eq!(
            (step.passed, Some(step.row)),
            (most, alone.iter().position(|passed| *passed == most)),
            "{alone:?}"
        );
        taken.insert(step.row);
    }
    assert!(taken.len() > 1, "{taken:?}");
}

#[test]
fn tighter_parts_never_give_less_beyond_the_interval() {
    let (rows, mask) = logger();
    let (r, c) = ([0.1, 0.03, 0.01, 0.001], [0.2, 0.08, 0.03, 0.01]);
    let lists = [Wanted::mask(&mask, &rows[0]), Wanted::within(0.5, &rows[0])];
    for wanted in lists {
        let found = tighten(&rows, &wanted, &steps(&r, &c), &Sampling { half_width: 0.02, ..all(4096) });
        assert_eq!(found.len(), 16);
        for coarse in &found {
            let tighter =
                found.iter().filter(|s| s.resistors <= coarse.resistors && s.capacitors <= coarse.capacitors);
            for step in tighter {
                assert!(step.interval.1 >= coarse.interval.0, "{coarse:?} {step:?}");
            }
        }
    }
}

#[test]
fn the_coarsest_steps_that_reach_a_yield_are_marked() {
    let step = |resistors: f64, capacitors: f64, low: f64| Step {
        resistors,
        capacitors,
        row: 0,
        boards: 1,
        passed: 1,
        interval: (low, 1.0),
    };
    // Resistors down, capacitors across, with the low ends of the intervals.
    let lows = [[0.1, 0.5, 0.9], [0.4, 0.96, 0.95], [0.95, 0.97, 0.99]];
    let tolerances = [0.05, 0.02, 0.01];
    let list: Vec<Step> = (0..9).map(|k| step(tolerances[k / 3], tolerances[k % 3], lows[k / 3][k % 3])).collect();
    let marked = |wanted: f64| (0..9).filter(|&k| coarsest(&list, wanted)[k]).collect::<Vec<_>>();
    assert_eq!(marked(0.95), [4, 6]);
    assert_eq!(marked(0.9), [2, 4, 6]);
    assert_eq!(marked(0.98), [8]);
    assert_eq!(marked(0.0), [0]);
    assert!(marked(0.999).is_empty());
}

fn run(folder: &Path, line: &str) -> Output {
    let binary = env!("CARGO_BIN_EXE_roundwell");
    Command::new(binary).args(line.split_whitespace()).current_dir(folder).output().unwrap()
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8(bytes.to_vec()).unwrap()
}

#[test]
fn the_command_is_the_same_for_any_number_of_threads() {
    let line = "tighten examples/vibration-logger.json --mask masks/vibration-logger.ron --wanted-yield 95% \
                --rows 4,2..3 --reel-share 50% --distribution normal --format json";
    let one = run(&data(""), &format!("{line} --threads 1"));
    assert_eq!(one.status.code(), Some(0), "{}", text(&one.stderr));
    assert_eq!(one.stdout, run(&data(""), &format!("{line} --threads 3")).stdout);
    assert_ne!(one.stdout, run(&data(""), &format!("{line} --seed 2")).stdout);
    let json: Json = serde_json::from_slice(&one.stdout).unwrap();
    assert_eq!((&json["format"], &json["rows"]), (&"roundwell-tighten/1".into(), &serde_json::json!([2, 3, 4])));
    assert_eq!(json["target_keeps"], true);
    let steps = json["steps"].as_array().unwrap();
    assert_eq!(steps.len(), 25);
    assert_eq!((&steps[1]["resistors"], &steps[1]["capacitors"]), (&0.05.into(), &0.1.into()));
    for step in steps {
        let [low, high] = [0, 1].map(|k| step["interval"][k].as_f64().unwrap());
        let share = step["share"].as_f64().unwrap();
        assert!(low <= share && share <= high && high - low <= 0.02, "{step}");
        assert!((2..=4).contains(&step["row"].as_u64().unwrap()));
        assert!(!step["marked"].as_bool().unwrap() || low >= 0.95);
    }
    assert!(steps.iter().any(|step| step["marked"] == true));
}

#[test]
fn what_cannot_be_reached_is_told() {
    let folder = tempfile::tempdir().unwrap();
    let list = data("examples/vibration-logger.json").display().to_string();
    let shown = |flags: &str| {
        let output = run(folder.path(), &format!("tighten {list} {flags}"));
        let page = text(&output.stdout);
        assert!(page.lines().all(|line| line.chars().count() <= 80), "{page}");
        let words = page.replace('\u{a0}', " ").split_whitespace().collect::<Vec<_>>().join(" ");
        (output.status.code().unwrap(), words)
    };
    let (code, page) = shown("--within 0.1dB --wanted-yield 99.9% --boards 2048");
    assert_eq!(code, 3);
    assert!(page.contains("No step reaches 99.9 % with the low end of its interval."), "{page}");
    let (code, page) = shown("--within 1dB --boards 2048");
    assert_eq!(code, 0);
    assert!(page.contains("keep an error of at most 1 dB") && !page.contains('*'), "{page}");
    // Fourth-order Butterworth, closed form: -48.16 dB at 4 kHz.
    let mask = "(reference: Dc, limits: [(from: \"4 kHz\", to: \"10 kHz\", upper: \"-60 dB\")])";
    fs::write(folder.path().join("mask.ron"), mask).unwrap();
    let (code, page) = shown("--mask mask.ron --rows 1 --boards 1000");
    assert_eq!(code, 3);
    assert!(page.contains("row 1 The target itself misses the mask: no parts mend that."), "{page}");
}

#[test]
fn bad_input_is_told_with_its_range() {
    let list = data("examples/vibration-logger.json").display().to_string();
    let told = |flags: &str| {
        let output = run(&data(""), &format!("tighten {list} {flags}"));
        assert_eq!(output.status.code(), Some(2), "{flags}");
        assert!(output.stdout.is_empty());
        text(&output.stderr).split_whitespace().collect::<Vec<_>>().join(" ")
    };
    for (flags, words) in [
        ("", "--mask <FILE>"),
        ("--mask masks/vibration-logger.ron --within 1dB", "cannot be used with"),
        ("--within 0dB", "the error must be larger than 0 and at most 100 dB, found 0dB"),
        ("--within 1kHz", "--within"),
        ("--within 1dB --rows 0", "\"0\" is no row"),
        ("--within 1dB --rows 3..2,x", "\"x\" is no row"),
        ("--within 1dB --rows 99", "there is no row 99"),
        ("--within 1dB --wanted-yield 120%", "the wanted yield lies between 0 % and 100 %, found 120%"),
        ("--within 1dB --wanted-yield 95", "has no unit"),
        ("--within 1dB --boards 0", "expected a whole number from 1 to 10000000, found 0"),
        ("--within 1dB --interval 60% --seed x --reel-share -1%", "the share lies between 0 % and 100 %"),
        ("--mask none.ron", "none.ron"),
    ] {
        let found = told(flags);
        assert!(found.contains(words), "{flags}: {found}");
    }
    let output = run(&data(""), "tighten examples/vibration-logger.ron --within 1dB");
    assert_eq!(output.status.code(), Some(2));
}
