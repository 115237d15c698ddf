//! Sections adjusted for real op-amps: against a closed form, exact roots, and the command as it is run.

#![allow(missing_docs, clippy::unwrap_used)]

mod command;
mod support;

use std::path::Path;
use std::sync::atomic::{AtomicUsize, Ordering};

use command::{code, err, in_one_line, json, out, refused, run, without_time};
use num_complex::Complex64;
use roundwell::analysis::{Corrected, RealSection, Surroundings, compensated, correct, miss};
use roundwell::parts::Series;
use roundwell::search::{Monitor, Problem, Row, StopReason, Unwatched, ideal_parts, shortlist};
use roundwell::target::Shape;
use roundwell::units::Kind;
use support::{Slots, TAU, all_rows, ohms, second, section, series};

fn with_bandwidth(bandwidth: f64) -> Surroundings {
    Surroundings { bandwidth: Some(bandwidth), ..Surroundings::IDEAL }
}

const F0: f64 = 40e3;
const Q: f64 = 5.0;
const GBW: f64 = 10e6;

/// A fast low-pass of Sallen and Key with equal resistors.
fn fast() -> Problem {
    let resistors = series(Kind::Resistor, Series::E96, "1k", "100k");
    let capacitors = series(Kind::Capacitor, Series::E12, "47p", "22n");
    let low = section(second(Shape::LowPass, F0, Q, 1.0), "sallen-key-low-pass", "low-pass", &resistors, &capacitors);
    support::problem(low.equal(&["R1", "R2"]), all_rows())
}

/// With two equal resistors R the denominator is (1 + s t)(1 + (d + e) s + e d/2 s²) − e s, e = R C1, d = 2 R C2, t = 1/(2π GBW). It
/// shall be (1 + s/p)(1 + s/(Q w0) + s²/w0²). By comparing coefficients, with r = 1/p: d = r + 1/(Q w0) − t, e = 2 r/(d t w0²),
/// and 1/w0² + r/(Q w0) = e d/2 + (d + e) t, which is solved for r by bisection. Gives e and d.
fn equal_resistors() -> (f64, f64) {
    let (w0, t) = (TAU * F0, 1.0 / (TAU * GBW));
    let of = |r: f64| {
        let d = r + 1.0 / (Q * w0) - t;
        (2.0 * r / (d * t * w0 * w0), d)
    };
    let rest = |r: f64| {
        let (e, d) = of(r);
        0.5 * e * d + (d + e) * t - 1.0 / (w0 * w0) - r / (Q * w0)
    };
    let (mut low, mut high) = (0.5 * t, 1.5 * t);
    assert!(rest(low) < 0.0 && rest(high) > 0.0);
    for _ in 0..200 {
        let middle = 0.5 * (low + high);
        if rest(middle) < 0.0 { low = middle } else { high = middle }
    }
    of(0.5 * (low + high))
}

/// The pole of the same denominator by Newton's iteration, with another bandwidth: its frequency over F0, and its Q.
fn pole(e: f64, d: f64, bandwidth: f64) -> (f64, f64) {
    let t = 1.0 / (TAU * bandwidth);
    let c = [1.0, d + t, 0.5 * e * d + (d + e) * t, 0.5 * e * d * t];
    let mut s = Complex64::new(-0.1, 1.0) * TAU * F0;
    for _ in 0..50 {
        let value = c[0] + s * (c[1] + s * (c[2] + s * c[3]));
        s -= value / (c[1] + s * (2.0 * c[2] + s * 3.0 * c[3]));
    }
    (s.norm() / (TAU * F0), s.norm() / (-2.0 * s.re))
}

// Source: the closed form above, from the same netlist; uncorrected -1.94 % and +1.90 % as in tests/real.rs.
#[test]
fn the_adjusted_section_is_that_of_the_closed_form() {
    let problem = fast();
    let (e, d) = equal_resistors();
    // With ideal op-amps the parts give 1 + d s + e d/2 s^2.
    let (w0, q) = ((2.0 / (e * d)).sqrt(), (0.5 * e * d).sqrt() / d);
    let start = ideal_parts(&problem.sections[0]).unwrap();
    let found = correct(&problem.sections[0], &with_bandwidth(GBW), 0.3, false, Some(&start));
    assert_eq!(found.state, Corrected::Found);
    assert!((found.searched.w0 / w0 - 1.0).abs() < 1e-8, "{} {w0}", found.searched.w0);
    assert!((found.searched.q.unwrap() / q - 1.0).abs() < 1e-7, "{:?} {q}", found.searched.q);
    assert_eq!(found.searched.gain.to_bits(), 1f64.to_bits());
    let wanted = &problem.sections[0].target;
    let without = miss(&found.without, wanted).unwrap();
    assert!((without.0 + 0.0194).abs() < 1e-4 && (without.1.unwrap() - 0.0190).abs() < 1e-4, "{without:?}");
    let with = miss(&found.with, wanted).unwrap();
    assert!(with.0.abs() < 1e-8 && with.1.unwrap().abs() < 1e-7, "{with:?}");
    // What a spread of 30 % leaves: -0.82 % and +0.45 % of f0.
    for (end, bandwidth) in found.ends.iter().zip([0.7 * GBW, 1.3 * GBW]) {
        let (of_f0, of_q) = miss(end, wanted).unwrap();
        let (expected, quality) = pole(e, d, bandwidth);
        assert!((of_f0 - (expected - 1.0)).abs() < 1e-8, "{of_f0} {expected}");
        assert!((of_q.unwrap() - (quality / Q - 1.0)).abs() < 1e-7, "{of_q:?} {quality}");
    }
    let [low, high] = [0, 1].map(|end| miss(&found.ends[end], wanted).unwrap().0);
    assert!((low + 0.0082).abs() < 1e-4 && (high - 0.0045).abs() < 1e-4, "{low} {high}");
}

/// What is searched for the built board is as near to the target as the ideal search gets without op-amps, and nearer than what
/// a search that knows nothing of them gives.
#[test]
fn rows_hit_the_target_as_built() {
    let mut problem = fast();
    problem.sections[0].equal.clear();
    problem.goals.error_resolution = 1e-3;
    let around = with_bandwidth(GBW);
    let found = compensated(&problem, &around, 0.3, &Unwatched);
    assert!(found.searches > 1, "the rows of the first search have other ratios than the ideal parts");
    let marked = found.marked.unwrap();
    let (error, _) = found.rows[marked].error.unwrap();
    assert!(error < 0.05, "{error}");
    // The error as built is that of the exact response of the row's own parts: numerator 1, the cubic denominator.
    let exact = |row: &Row, bandwidth: f64| {
        let value = |name: &str| {
            let slot = problem.sections[0].circuit.slot(name).unwrap();
            row.sections[0].parts.iter().find(|part| part.slot == slot).unwrap().ideal
        };
        let (r1, r2, c1, c2) = (value("R1"), value("R2"), value("C1"), value("C2"));
        let decibels = |f: f64| {
            let s = Complex64::new(0.0, TAU * f);
            let p = 1.0 + s * (r1 * c1 + r1 * c2 + r2 * c2) + s * s * (r1 * r2 * c1 * c2);
            let built = (1.0 + s / (TAU * bandwidth)) * p - s * r1 * c1;
            let x = f / F0;
            20.0 * (Complex64::new(1.0 - x * x, x / Q).norm() / built.norm()).log10().abs()
        };
        (0..=40_000).map(|k| decibels(4e3 * 100f64.powf(f64::from(k) / 40_000.0))).fold(0.0, f64::max)
    };
    let row = &found.outcome.rows[marked];
    assert!((error / exact(row, GBW) - 1.0).abs() < 0.01, "{error} {}", exact(row, GBW));
    for (end, bandwidth) in found.rows[marked].ends.iter().zip([0.7 * GBW, 1.3 * GBW]) {
        let (error, _) = end.error.unwrap();
        assert!((error / exact(row, bandwidth) - 1.0).abs() < 0.01, "{error} {}", exact(row, bandwidth));
    }
    // A search that knows nothing of op-amps finds rows as near on paper, which are far off as built.
    let plain = shortlist(&problem, &Unwatched);
    assert!(plain.rows[0].deviation.error < 0.05);
    for row in &plain.rows {
        assert!(exact(row, GBW) > 10.0 * error, "{} {error}", exact(row, GBW));
    }
    // Ideal op-amps ask for no correction.
    let ideal = compensated(&problem, &Surroundings::IDEAL, 0.0, &Unwatched);
    assert_eq!((ideal.outcome.rows, ideal.searches), (plain.rows, 1));
}

/// Stops once it has been asked so many times.
struct Patience(AtomicUsize, usize);

impl Monitor for Patience {
    fn stop(&self) -> Option<StopReason> {
        let asked = self.0.fetch_add(1, Ordering::Relaxed);
        (asked >= self.1).then_some(StopReason::Interrupted)
    }
}

/// A further search that is stopped is not counted, and it is said; the best so far stays.
#[test]
fn a_search_for_better_ratios_can_be_stopped() {
    let mut problem = fast();
    problem.sections[0].equal.clear();
    problem.goals.error_resolution = 1e-3;
    let pool = rayon::ThreadPoolBuilder::new().num_threads(1).build().unwrap();
    let searched = |patience: usize| {
        let monitor = Patience(AtomicUsize::new(0), patience);
        let found = pool.install(|| compensated(&problem, &with_bandwidth(GBW), 0.0, &monitor));
        (found, monitor.0.into_inner())
    };
    let (whole, asked) = searched(usize::MAX);
    assert_eq!((whole.stopped, whole.outcome.stopped), (None, None));
    let (cut, _) = searched(asked - 1);
    assert_eq!((cut.stopped, cut.outcome.stopped), (Some(StopReason::Interrupted), None));
    assert_eq!(cut.searches, whole.searches - 1);
    let (first, _) = searched(0);
    assert_eq!((first.stopped, first.outcome.stopped), (None, Some(StopReason::Interrupted)));
    assert_eq!(first.searches, 1);
}

// Source: 1/Q becomes 1/Q - 4 f0/GBW in the Tow-Thomas circuit (Budak; from memory), to first order.
#[test]
fn a_section_that_would_oscillate_is_searched_for_with_less_q() {
    let (q, f0) = (20.0, 10e3);
    let (r, c) = (series(Kind::Resistor, Series::E96, "1k", "1M"), series(Kind::Capacitor, Series::E12, "1n", "1u"));
    let target = second(Shape::LowPass, f0, q, 1.0);
    let tow = section(target.clone(), "tow-thomas", "low-pass", &r, &c);
    let start = ideal_parts(&tow).unwrap();
    let ratio = 0.02;
    let found = correct(&tow, &with_bandwidth(f0 / ratio), 0.0, false, Some(&start));
    assert_eq!((found.state, found.without), (Corrected::Found, RealSection::Unstable));
    let with = miss(&found.with, &target).unwrap();
    assert!(with.0.abs() < 1e-8 && with.1.unwrap().abs() < 1e-6, "{with:?}");
    let searched = 1.0 / found.searched.q.unwrap();
    assert!((searched - (1.0 / q + 4.0 * ratio)).abs() < 0.01, "{searched}");
    // Where nothing helps, nothing is claimed.
    let hopeless = correct(&tow, &with_bandwidth(0.2 * f0), 0.0, false, Some(&start));
    assert_eq!((hopeless.state, &hopeless.searched), (Corrected::Unstable, &target));
    assert_eq!(hopeless.with, RealSection::Unstable);
}

/// A source adds to the first resistor (closed form): the resistor that is searched for is smaller by it.
#[test]
fn a_source_is_taken_out_of_the_first_resistor() {
    let (r, c) = (ohms("1k 100k"), series(Kind::Capacitor, Series::E12, "1n", "1u"));
    let target = support::first(Shape::FirstOrderLowPass, 1e3, 1.0);
    let low = section(target.clone(), "rc-low-pass", "low-pass", &r, &c).pin("C1", "15n");
    let start = ideal_parts(&low).unwrap();
    let around = Surroundings { source_resistance: 600.0, stray: 100e-12, ..Surroundings::IDEAL };
    let found = correct(&low, &around, 0.0, false, Some(&start));
    let slot = low.circuit.slot("R1").unwrap();
    let expected = 1.0 / (TAU * 1e3 * (15e-9 + 100e-12)) - 600.0;
    assert!((found.values.unwrap()[slot] / expected - 1.0).abs() < 1e-7, "{expected}");
    assert!((found.searched.w0 * expected * 15e-9 - 1.0).abs() < 1e-7);
}

/// The gain of a band-pass and the null of a notch are set right as well.
#[test]
fn gain_and_null_are_corrected_where_the_circuit_lets_them() {
    let (r, c) =
        (series(Kind::Resistor, Series::E96, "100", "1M"), series(Kind::Capacitor, Series::E12, "100p", "1u"));
    let band = second(Shape::BandPass, 40e3, 5.0, -2.0);
    let problem = support::problem(section(band, "multiple-feedback-band-pass", "band-pass", &r, &c), all_rows());
    let start = ideal_parts(&problem.sections[0]).unwrap();
    let found = correct(&problem.sections[0], &with_bandwidth(5e6), 0.0, false, Some(&start));
    assert_eq!(found.state, Corrected::Found);
    assert!((found.searched.gain / -2.0 - 1.0).abs() > 1e-3, "{}", found.searched.gain);
    let kept = correct(&problem.sections[0], &with_bandwidth(5e6), 0.0, true, Some(&start));
    assert_eq!((kept.state, kept.searched.gain.to_bits()), (Corrected::Found, (-2f64).to_bits()));
    let notch = section(support::notch(10e3, 5.0, -1.0, 14e3), "feed-forward-biquad", "notch", &r, &c);
    let start = ideal_parts(&notch).unwrap();
    let found = correct(&notch, &with_bandwidth(3e6), 0.0, false, Some(&start));
    assert_eq!(found.state, Corrected::Found);
    let with = miss(&found.with, &notch.target).unwrap();
    assert!(with.0.abs() < 1e-8 && with.1.unwrap().abs() < 1e-6, "{with:?}");
    let (wz, wanted) = (found.searched.wz.unwrap(), notch.target.wz.unwrap());
    assert!((wz / wanted - 1.0).abs() > 1e-4 && (wz / wanted - 1.0).abs() < 0.05, "{}", wz / wanted);
}

const FAST: &str =
    "shortlist --shape low-pass --f0 40k --q 5 --circuit sallen-key-low-pass --capacitors E12:47p..22n";

#[test]
fn the_page_says_what_was_searched_and_what_is_built() {
    let here = Path::new(".");
    let shown = run(here, &format!("{FAST} --gbw 10M --gbw-spread 30%"));
    assert_eq!(code(&shown), 0, "{}", err(&shown));
    let text = without_time(&out(&shown));
    assert!(text.lines().all(|line| line.chars().count() <= 80), "{text}");
    insta::assert_snapshot!(text);
    // The same bytes for any number of threads.
    let line = format!("{FAST} --gbw 10M --gbw-spread 30% --format json");
    let [one, four] = [1, 4].map(|threads| json(&run(here, &format!("{line} --threads {threads}"))));
    assert_eq!(one["compensation"], four["compensation"]);
    assert_eq!(one["shortlist"], four["shortlist"]);
    // The JSON names what is wanted, so that `vet` judges by that, and what was searched for.
    assert!((one["sections"][0]["target"]["f0_hz"].as_f64().unwrap() / 40e3 - 1.0).abs() < 1e-12);
    let section = &one["compensation"]["sections"][0];
    assert_eq!(section["state"], "corrected");
    assert!(section["searched"]["f0_hz"].as_f64().unwrap() > 40.2e3);
    assert_eq!(one["compensation"]["marked"], one["marked"]);
    assert_eq!(one["compensation"]["rows"].as_array().unwrap().len(), one["shortlist"].as_array().unwrap().len());
    let warned = one["compensation"]["warnings"][0].as_str().unwrap();
    assert!(warned.contains("the spread of the bandwidth moves it by more"), "{warned}");
}

/// What `vet` finds of a row is what the shortlist said of it.
#[test]
fn vet_agrees_with_the_shortlist() {
    let folder = tempfile::tempdir().unwrap();
    let written = run(folder.path(), &format!("{FAST} --gbw 10M --gbw-spread 30% --format json --out list.json"));
    assert_eq!(code(&written), 0, "{}", err(&written));
    let list: serde_json::Value =
        serde_json::from_str(&std::fs::read_to_string(folder.path().join("list.json")).unwrap()).unwrap();
    let vetted =
        json(&run(folder.path(), "vet list.json --row 1 --gbw 10M --gbw-spread 30% --boards 100 --format json"));
    let near = |a: &serde_json::Value, b: &serde_json::Value| {
        let (a, b) = (a.as_f64().unwrap(), b.as_f64().unwrap());
        assert!((a / b - 1.0).abs() < 1e-6, "{a} {b}");
    };
    let row = &list["compensation"]["rows"][0];
    near(&row["nominal"]["error"], &vetted["real"]["error"]);
    near(&row["nominal"]["sections"][0]["f0_hz"], &vetted["real"]["sections"][0]["f0_hz"]);
    for end in 0..2 {
        near(&row["ends"][end]["error"], &vetted["real"]["ends"][end]["error"]);
        near(&row["ends"][end]["sections"][0]["q"], &vetted["real"]["ends"][end]["sections"][0]["q"]);
    }
    // What is computed for ideal op-amps is said to be off.
    assert_eq!(vetted["is_compensated"], true);
    let page = in_one_line(&out(&run(folder.path(), "vet list.json --row 1 --boards 100")));
    assert!(page.contains("off by that correction. Add the op-amps, such as --gbw 10MHz"), "{page}");
    let steps = in_one_line(&out(&run(folder.path(), "tighten list.json --within 3dB --boards 100")));
    assert!(steps.contains("off by that correction"), "{steps}");
}

#[test]
fn csv_has_further_columns() {
    let output = run(Path::new("."), &format!("{FAST} --gbw 10M --format csv"));
    assert_eq!(code(&output), 0, "{}", err(&output));
    let text = out(&output);
    let mut reader = csv::Reader::from_reader(text.as_bytes());
    let header = reader.headers().unwrap().clone();
    let place = |name: &str| header.iter().position(|column| column == name).unwrap();
    assert_eq!(header.iter().next_back(), Some("built_q"));
    for line in reader.records() {
        let line = line.unwrap();
        assert!(line[place("built_error")].parse::<f64>().unwrap() > 0.0);
        let f0: f64 = line[place("built_f0_hz")].parse().unwrap();
        assert!((f0 / 40e3 - 1.0).abs() < 0.2);
    }
}

#[test]
fn what_cannot_work_is_said() {
    let here = Path::new(".");
    let tow = "shortlist --shape low-pass --f0 10k --q 20 --circuit tow-thomas --max-part-numbers 4";
    // It would oscillate uncorrected: a correction of more than a tenth.
    let far = run(here, &format!("{tow} --gbw 500k"));
    let text = in_one_line(&out(&far));
    assert!(text.contains("without correction: unstable") && text.contains("Q by -6"), "{text}");
    assert!(text.contains("Beyond 10 % the result rests on how well the op-amps are known"), "{text}");
    // Nothing works: exit code 3, and no number where there is none.
    let hopeless = run(here, &format!("{tow} --gbw 2k"));
    let text = in_one_line(&out(&hopeless));
    assert_eq!(code(&hopeless), 3, "{text}");
    assert!(text.contains("section 1 oscillates with these op-amps") && text.contains("unstable"), "{text}");
    let value = json(&run(here, &format!("{tow} --gbw 2k --format json")));
    for row in value["compensation"]["rows"].as_array().unwrap() {
        assert_eq!(row["nominal"]["error"], serde_json::Value::Null);
        assert_eq!(row["nominal"]["sections"][0]["state"], "unstable");
        assert_eq!(row["nominal"]["sections"][0]["f0_hz"], serde_json::Value::Null);
    }
    assert_eq!(value["compensation"]["marked"], serde_json::Value::Null);
}

#[test]
fn wrong_flags_are_refused_with_what_is_allowed() {
    let mut shown = Vec::new();
    for flags in [
        "--gbw -10M",
        "--gbw 0",
        "--gbw 10M --gbw-spread 120%",
        "--gbw 10M --gbw-spread 30",
        "--gbw-spread 30%",
        "--gbw 10M --load-resistance 0 --stray x --source-resistance -50",
    ] {
        shown.push(format!("$ {flags}\n{}", refused(&run(Path::new("."), &format!("{FAST} {flags}")))));
    }
    insta::assert_snapshot!(shown.join("\n"));
}
