//! Boards of several sections, all chosen together, against an independent brute force: every board on small shelves.
//!
//! The brute force (`support/whole.rs`) knows the circuits' transfer functions and the definitions of error, part numbers,
//! stock and front, and nothing of the search.
#![allow(clippy::unwrap_used)]

#[allow(dead_code, reason = "only its drawers, groups and row checks are used here")]
#[path = "support/drawer.rs"]
mod drawer;
mod support;
#[path = "support/whole.rs"]
mod whole;

use drawer::{Drawer, paired};
use roundwell::parts::{Buying, Series};
use roundwell::search::{Goals, Joint, Outcome, Problem, Proof, Row, SectionProblem, Unwatched, shortlist};
use roundwell::target::{Measure, Shape, Weights};
use roundwell::units::Kind;
use support::*;
use whole::{Whole, board, compare_whole};

const R: Kind = Kind::Resistor;
const C: Kind = Kind::Capacitor;

// ---- building -----------------------------------------------------------------------------------------------------

fn low_pass(f0: f64, q: f64, r: &str, c: &str) -> SectionProblem {
    section(second(Shape::LowPass, f0, q, 1.0), "sallen-key-low-pass", "low-pass", &ohms(r), &farads(c))
}

fn high_pass(f0: f64, q: f64, r: &str, c: &str) -> SectionProblem {
    section(second(Shape::HighPass, f0, q, 1.0), "sallen-key-high-pass", "high-pass", &ohms(r), &farads(c))
}

fn feedback(f0: f64, q: f64, gain: f64, r: &str, c: &str) -> SectionProblem {
    let target = second(Shape::LowPass, f0, q, gain);
    section(target, "multiple-feedback-low-pass", "low-pass", &ohms(r), &farads(c))
}

fn tow_thomas(f0: f64, q: f64, gain: f64, r: &str, c: &str) -> SectionProblem {
    section(second(Shape::LowPass, f0, q, gain), "tow-thomas", "low-pass", &ohms(r), &farads(c))
}

fn rc_low_pass(f0: f64, r: &str, c: &str) -> SectionProblem {
    section(first(Shape::FirstOrderLowPass, f0, 1.0), "rc-low-pass", "low-pass", &ohms(r), &farads(c))
}

fn rc_high_pass(f0: f64, r: &str, c: &str) -> SectionProblem {
    section(first(Shape::FirstOrderHighPass, f0, 1.0), "rc-high-pass", "high-pass", &ohms(r), &farads(c))
}

fn inverter(f0: f64, gain: f64, r: &str, c: &str) -> SectionProblem {
    section(first(Shape::FirstOrderLowPass, f0, gain), "inverting-low-pass", "low-pass", &ohms(r), &farads(c))
}

fn all_pass(f0: f64, r: &str, c: &str) -> SectionProblem {
    section(first(Shape::FirstOrderAllPass, f0, 1.0), "first-order-all-pass", "all-pass", &ohms(r), &farads(c))
}

fn pinned_to(mut section: SectionProblem, own: f64) -> SectionProblem {
    section.own_error = Some(own);
    section
}

const R4: &str = "8k2 10k 12k 15k";
const C4: &str = "6n8 10n 15n 22n";

/// A fourth-order Butterworth low-pass at 1.1 kHz.
fn butterworth() -> [SectionProblem; 2] {
    [low_pass(1.1e3, 0.541, R4, "6n8 10n 12n 15n 22n"), low_pass(1.1e3, 1.307, R4, "4n7 10n 33n 47n")]
}

/// With limits of the sections' own and limits of the board from narrow to wide.
fn compare_all_limits(label: &str, sections: &[SectionProblem]) {
    for own in [None, Some(0.05), Some(0.5), Some(3.0), Some(20.0)] {
        for limit in [1.0, 6.0] {
            let goals = Goals { own_error: own, ..wide(limit) };
            compare_whole(&format!("{label}, own {own:?}"), &board(sections.to_vec(), goals));
        }
    }
}

// ---- circuits -----------------------------------------------------------------------------------------------------

#[test]
fn two_sallen_key_low_passes() {
    compare_all_limits("Butterworth", &butterworth());
}

#[test]
fn the_same_target_twice() {
    let one = || low_pass(1.1e3, 0.8, R4, C4);
    compare_all_limits("twice", &[one(), one()]);
    let first = || rc_low_pass(1e3, "8k2 10k 12k 15k 18k", "8n2 10n 12n 15n");
    compare_all_limits("three times", &[first(), first(), first()]);
    for alternatives in [1, 4] {
        let goals = Goals { alternatives, ..wide(6.0) };
        compare_whole("with alternatives", &board(vec![one(), one()], goals.clone()));
        compare_whole("with alternatives", &board(vec![first(), first(), first()], goals));
    }
}

#[test]
fn high_pass_and_low_pass() {
    compare_all_limits(
        "band",
        &[low_pass(3e3, 0.75, "3k3 4k7 5k6 8k2", C4), high_pass(600.0, 0.75, "8k2 15k 18k 22k", C4)],
    );
    compare_all_limits(
        "first and second order",
        &[
            low_pass(1.1e3, 1.0, R4, C4),
            rc_low_pass(1.1e3, R4, C4),
            rc_high_pass(80.0, "82k 100k 150k 200k", "10n 22n"),
        ],
    );
}

#[test]
fn multiple_feedback() {
    compare_all_limits(
        "with a follower",
        &[
            feedback(1.2e3, 0.6, -1.0, "8k2 10k 15k 18k", "4n7 10n 15n 33n"),
            low_pass(1.2e3, 1.0, "8k2 10k 15k", "6n8 10n 22n"),
        ],
    );
    compare_all_limits(
        "two",
        &[feedback(1.2e3, 0.6, -1.0, "8k2 10k 15k", "6n8 15n"), feedback(1.2e3, 0.9, -2.0, "8k2 10k 18k", "4n7 33n")],
    );
}

#[test]
fn tow_thomas_and_others() {
    let biquad = || tow_thomas(1.2e3, 1.1, 1.2, "10k 12k 15k", "10n 12n");
    compare_all_limits("with first order", &[biquad(), rc_low_pass(1.2e3, "8k2 10k 12k 15k", "10n 12n 15n")]);
    compare_all_limits("with a follower", &[biquad(), low_pass(1.2e3, 0.6, "10k 12k 15k", "10n 15n")]);
}

#[test]
fn silent_slots_take_what_is_on_the_board_anyhow() {
    // RA = RB of the biquad may be anything: with the other section's 22k it costs nothing.
    let biquad =
        tow_thomas(1.45e3, 1.0, 1.0, "10k 11k", "10n 11n").shelf("RA", ohms("22k 47k")).shelf("RB", ohms("22k 47k"));
    let outcome = compare_whole("silent", &board(vec![biquad, rc_low_pass(720.0, "22k 24k", "10n 11n")], wide(3.0)));
    assert_eq!(outcome.rows.iter().map(|row| row.part_numbers).min(), Some(Some(3)));
}

// ---- demands ------------------------------------------------------------------------------------------------------

#[test]
fn shelves_ties_and_pins() {
    let [a, b] = butterworth();
    compare_all_limits(
        "other shelves",
        &[a.clone().shelf("R1", ohms("9k1 11k 13k")), b.clone().shelf("C2", farads("3n9 4n7"))],
    );
    compare_all_limits("ties", &[a.clone().equal(&["R1", "R2"]), b.clone()]);
    compare_all_limits(
        "ties in both",
        &[a.clone().equal(&["R1", "R2"]).equal(&["C1", "C2"]), b.clone().equal(&["R1", "R2"])],
    );
    compare_all_limits("pins", &[a.clone().pin("C1", "15n"), b.clone().pin("R1", "10k")]);
    compare_all_limits("pins off the shelf", &[a.pin("C1", "18n"), b.pin("R1", "11k").pin("C1", "39n")]);
    let biquad = tow_thomas(1.2e3, 1.1, 1.2, "10k 12k 15k", "10n 12n").equal(&["RF", "R2"]);
    compare_all_limits("a biquad's", &[biquad.pin("RQ", "15k"), low_pass(1.2e3, 0.6, R4, C4)]);
}

#[test]
fn pairs_in_one_section() {
    let two =
        || [low_pass(1.1e3, 0.72, "6k8 10k 12k", "6n8 10n 15n"), rc_low_pass(1.1e3, "6k8 10k 12k", "6n8 10n 15n")];
    for (kind, joints) in [(C, &[Joint::Parallel][..]), (R, &[Joint::Series]), (R, &[Joint::Series, Joint::Parallel])]
    {
        for most in [1, 2] {
            let [a, b] = two();
            compare_all_limits("pairs", &[paired(a, kind, joints, most), b]);
        }
    }
    let [a, b] = two();
    compare_all_limits("pairs in both", &[paired(a, C, &[Joint::Parallel], 1), paired(b, R, &[Joint::Series], 1)]);
}

#[test]
fn sections_pinned_to_limits_of_their_own() {
    let [a, b] = butterworth();
    for own in [0.02, 0.3, 1.0, 4.0] {
        compare_all_limits("the first", &[pinned_to(a.clone(), own), b.clone()]);
        compare_all_limits("both", &[pinned_to(a.clone(), own), pinned_to(b.clone(), 0.5)]);
    }
}

#[test]
fn limits_on_part_numbers_and_impedance() {
    let [a, b] = butterworth();
    for most in [1, 2, 3, 4, 6] {
        let goals = Goals { max_part_numbers: Some(most), own_error: Some(1.0), ..wide(6.0) };
        compare_whole("part numbers", &board(vec![a.clone(), b.clone()], goals));
    }
    for range in [(9e3, 11e3), (1.1e4, 1.6e4), (2e4, 3e4)] {
        let goals = Goals { impedance: Some(range), own_error: Some(1.0), ..wide(6.0) };
        compare_whole("impedance", &board(vec![a.clone(), b.clone()], goals));
    }
    let decades = |f0| rc_low_pass(f0, "1k 1k2 10k 12k 100k 120k", "1n 1n2 10n 12n 100n 120n");
    for impedance in [None, Some((5e3, 2e4)), Some((1e3, 1.15e3))] {
        let goals = Goals { impedance, alternatives: 2, ..wide(6.0) };
        compare_whole("decades", &board(vec![decades(1.4e3), decades(1.3e3)], goals));
    }
}

#[test]
fn resolutions_and_alternatives() {
    let [a, b] = butterworth();
    for (error_resolution, alternatives) in [(1.0, 0), (0.3, 0), (0.1, 3), (SAME, 1), (SAME, 5)] {
        let goals = Goals { error_resolution, alternatives, own_error: Some(2.0), ..wide(6.0) };
        compare_whole("resolution", &board(vec![a.clone(), b.clone()], goals));
    }
}

// ---- measures -----------------------------------------------------------------------------------------------------

#[test]
fn a_gain_that_is_ignored() {
    for (a, b) in [
        (inverter(1.2e3, -2.0, "6k8 10k 15k 22k", "6n8 10n 15n"), rc_low_pass(1.2e3, "6k8 10k 15k", "6n8 10n 15n")),
        (feedback(1.2e3, 0.7, -1.5, "8k2 12k 15k", "6n8 22n"), low_pass(1.2e3, 0.9, "8k2 12k 15k", "6n8 22n")),
    ] {
        for own in [None, Some(0.2), Some(2.0)] {
            let mut problem = board(vec![a.clone(), b.clone()], Goals { own_error: own, ..wide(1.0) });
            problem.criterion.ignore_gain = true;
            compare_whole("no gain", &problem);
        }
    }
}

#[test]
fn the_vector_measure() {
    let r = "8k2 10k 12k 15k";
    let delay = || all_pass(1.2e3, r, "8n2 10n 12n");
    for own in [None, Some(0.05), Some(0.3)] {
        let goals = || Goals { own_error: own, ..wide(0.5) };
        compare_whole("two all-passes", &board(vec![delay(), all_pass(1.4e3, r, "8n2 10n 12n")], goals()));
        compare_whole(
            "an all-pass and a low-pass",
            &board(vec![delay(), low_pass(1.1e3, 0.8, r, "6n8 10n 22n")], goals()),
        );
    }
    let mut problem = board(vec![delay(), inverter(1.2e3, -1.3, r, "8n2 10n 12n")], wide(0.3));
    problem.criterion.ignore_gain = true;
    compare_whole("no gain", &problem);
}

#[test]
fn the_weighted_measure() {
    for weights in [Weights { f0: 1.0, q: 1.0, gain: 1.0, fz: 1.0 }, Weights { f0: 3.0, q: 0.0, gain: 0.5, fz: 0.0 }]
    {
        for own in [None, Some(0.02), Some(0.5)] {
            let [a, b] = butterworth();
            let mut problem = board(vec![a, b], Goals { own_error: own, ..wide(0.5) });
            problem.criterion.measure = Measure::Weighted(weights);
            compare_whole("followers", &problem);
            let biquad = feedback(1.2e3, 0.7, -1.5, "8k2 12k 15k", "6n8 22n");
            let mut problem = board(vec![biquad, inverter(1e3, -2.0, "8k2 12k 15k", "10n 22n")], problem.goals);
            problem.criterion.measure = Measure::Weighted(weights);
            compare_whole("gains", &problem);
        }
    }
}

#[test]
fn notches_beside_other_sections() {
    let f0 = 1.0 / (TAU * 10e3 * 22e-9);
    let (r, c) = (ohms("10k 15k"), farads("10n 22n"));
    let notched = |q| section(notch(f0 * 1.001, q, 1.0, f0 * 1.001), "fliege-notch", "notch", &r, &c);
    for floor_db in [60.0, 30.0, 12.0] {
        for own in [None, Some(1.0), Some(40.0)] {
            let sections = vec![notched(1.1), low_pass(1.5 * f0, 0.7, "6k8 10k 15k", "6n8 10n 22n")];
            let mut problem = board(sections, Goals { own_error: own, ..wide(10.0) });
            problem.criterion.floor_db = floor_db;
            compare_whole("notch", &problem);
        }
    }
}

#[test]
fn high_q() {
    // Sharp poles have frequencies of the measure to themselves.
    let sharp = low_pass(1.0e3, 6.2, "10k 11k", "1n5 1n8 220n 270n");
    compare_all_limits("sharp", &[sharp.clone(), low_pass(1.6e3, 0.6, "10k 11k", "6n8 10n 15n")]);
    compare_all_limits("twice", &[sharp.clone(), sharp]);
}

#[test]
fn the_brute_force_notices_what_is_wrong() {
    let [a, b] = butterworth();
    let problem = board(vec![a, b], Goals { own_error: Some(2.0), ..wide(6.0) });
    let every = Whole::run(&problem);
    let right = compare_whole("right", &problem);
    let notices = |outcome: &Outcome| {
        let check = || {
            every.check_claims("wrong", outcome);
            every.check_complete("wrong", outcome);
        };
        std::panic::catch_unwind(std::panic::AssertUnwindSafe(check)).is_err()
    };
    assert!(right.rows.len() > 2 && !notices(&right));
    for i in 0..right.rows.len() {
        let mut missing = right.clone();
        missing.rows.remove(i);
        let within = |row: &Row| row.deviation.error <= problem.goals.wanted_error;
        let marked = (0..missing.rows.len()).filter(|&i| within(&missing.rows[i]));
        missing.marked = marked.min_by_key(|&i| missing.rows[i].part_numbers);
        assert!(notices(&missing), "row {i} is gone");
    }
    let bounds = &right.together.as_ref().unwrap().bounds;
    // A board that is not allowed for is listed too where it was found.
    let is_best = |row: &Row, k| (row.deviation.error - every.least_of(k)).abs() < 1.5e-7;
    let is_met = |k: usize| right.rows.iter().any(|row| row.part_numbers == Some(k) && is_best(row, k));
    assert!(bounds.iter().filter(|bound| is_met(bound.part_numbers)).count() > 2);
    for i in (0..bounds.len()).filter(|&i| is_met(bounds[i].part_numbers)) {
        for factor in [0.999, 1.001] {
            let mut off = right.clone();
            off.together.as_mut().unwrap().bounds[i].none_below *= factor;
            assert!(notices(&off), "bound {i} times {factor}");
        }
    }
}

#[test]
fn bands() {
    let [a, b] = butterworth();
    for (from, to) in [(100.0, 900.0), (900.0, 5e3), (1e3, 1.2e3)] {
        let mut problem = board(vec![a.clone(), b.clone()], Goals { own_error: Some(0.5), ..wide(3.0) });
        problem.criterion.band = Some((TAU * from, TAU * to));
        compare_whole("band", &problem);
    }
}

// ---- sections that make good for each other ------------------------------------------------------------------------

#[test]
fn gains_that_make_good_for_each_other() {
    // 18k/10k is 0.92 dB short of 2, 22k/10k 0.83 dB above it; f0 is met by 18k with 8n2 and 22k with 6n8 within 2 %.
    let f0 = 1.0 / (TAU * 18e3 * 8.2e-9);
    let amplifier = || inverter(f0, -2.0, "10k 18k 22k", "6n8 8n2");
    let problem = |own| board(vec![amplifier(), amplifier()], Goals { own_error: Some(own), ..wide(2.0) });
    let wide = problem(1.5);
    let every = Whole::run(&wide);
    let (_, best) = every.best.iter().min_by(|a, b| a.1.error.total_cmp(&b.1.error)).unwrap();
    assert!(best.own.iter().all(|own| *own > 0.8) && best.error < 0.3, "{best:?}");
    let found = compare_whole("gains", &wide);
    assert!((found.rows[0].deviation.error - best.error).abs() < 1.5e-7, "{best:?}");
    let narrow = problem(0.1);
    assert!(Whole::run(&narrow).best.values().all(|b| b.error > 0.5));
    compare_whole("gains, narrow", &narrow);
}

#[test]
fn frequencies_that_make_good_for_each_other() {
    // 9k1 and 11k with 10n stand 9 % above and below 1/(2 pi 10k 10n): the product has the target's w0² and nearly its
    // bandwidth. There is no 10k.
    let f0 = 1.0 / (TAU * 10e3 * 10e-9);
    let pole = || rc_low_pass(f0, "9k1 11k 13k", "10n 15n");
    let problem = board(vec![pole(), pole()], Goals { own_error: Some(1.0), ..wide(2.0) });
    let every = Whole::run(&problem);
    let (_, best) = every.best.iter().min_by(|a, b| a.1.error.total_cmp(&b.1.error)).unwrap();
    assert!(best.own.iter().all(|own| *own > 0.7) && best.error < 0.1, "{best:?}");
    let found = compare_whole("frequencies", &problem);
    assert!((found.rows[0].deviation.error - best.error).abs() < 1.5e-7, "{best:?}");
}

#[test]
fn a_board_that_is_off_as_far_as_its_only_inexact_section() {
    // The first section is exact, so the second one misses its target by just what the board misses the whole: allowed
    // whatever the sections' own limits. Alone the second would take 13k, and with it a third part number.
    let f0 = 1.0 / (TAU * 10e3 * 10e-9);
    for own in [0.0, 1e-6, 1.0] {
        for exact in [rc_low_pass(f0, "10k", "10n"), rc_high_pass(f0, "10k", "10n")] {
            let other = rc_low_pass(f0 / 1.25, "10k 13k", "10n");
            let problem = board(vec![exact, other], Goals { own_error: Some(own), ..wide(3.0) });
            let outcome = compare_whole("exact", &problem);
            assert!(outcome.rows.iter().any(|row| row.part_numbers == Some(2)), "{own}");
        }
    }
}

#[test]
fn four_sections() {
    let pole = |f0| rc_low_pass(f0, "8k2 10k 12k", "10n 12n 15n");
    compare_all_limits(
        "four",
        &[pole(1e3), pole(1.2e3), pole(1.2e3), rc_high_pass(90.0, "120k 150k 180k", "10n 12n")],
    );
}

// ---- stock --------------------------------------------------------------------------------------------------------

#[test]
fn a_line_that_both_sections_would_use_up() {
    for (boards, buying) in [
        (1, Buying::Forbidden),
        (2, Buying::Forbidden),
        (2, Buying::AtMost(1)),
        (3, Buying::Allowed),
        (3, Buying::AtMost(2)),
    ] {
        let lines = [
            "R,10k,3,,,",
            "R,12k,9,,,",
            "R,15k,2,,,",
            "R,18k,,,,",
            "C,6n8,3,,,",
            "C,10n,6,,,",
            "C,15n,3,,,",
            "C,22n,4,,,",
        ];
        let drawer = Drawer::lines(&lines).boards(boards, boards - 1).buying(buying);
        let section = |q| drawer.section(second(Shape::LowPass, 1e3, q, 1.0), "sallen-key-low-pass", "low-pass");
        let one = drawer.section(first(Shape::FirstOrderLowPass, 1e3, 1.0), "rc-low-pass", "low-pass");
        for own in [None, Some(1.0)] {
            let stocked = |sections| {
                let board = board(sections, Goals { own_error: own, ..wide(6.0) });
                Problem { supply: drawer.supply.clone(), ..board }
            };
            compare_whole("two of a kind", &stocked(vec![section(0.8), section(0.8)]));
            compare_whole("three", &stocked(vec![one.clone(), one.clone(), one.clone()]));
            compare_whole("of two orders", &stocked(vec![section(0.7), one.clone()]));
        }
    }
}

#[test]
fn two_sections_and_one_part_each() {
    let drawer = Drawer::lines(&["R,10k,1,,,", "R,12k,1,,,", "C,10n,1,,,", "C,12n,1,,,"]);
    let one = drawer.section(first(Shape::FirstOrderLowPass, 1.0 / (TAU * 1.01e-4), 1.0), "rc-low-pass", "low-pass");
    let problem = Problem { supply: drawer.supply.clone(), ..board(vec![one.clone(), one], wide(40.0)) };
    let outcome = compare_whole("one each", &problem);
    assert!(outcome.rows.iter().all(|row| row.part_numbers == Some(4)));
}

// ---- faults found ----------------------------------------------------------------------------------------------------

#[test]
fn rows_beyond_the_limit_are_not_said_to_be_proved() {
    // Alone, the second section is best with 8k2; beside 9k1 it is better off with 13k.
    let f0 = 1.0 / (TAU * 10e3 * 10e-9);
    let goals = Goals { own_error: Some(3.0), ..wide(1.0) };
    let problem = board(vec![rc_low_pass(f0, "9k1", "10n"), rc_low_pass(f0, "8k2 13k", "10n")], goals);
    let outcome = compare_whole("beyond", &problem);
    Whole::run(&problem).check_proved("beyond", &outcome, &|_| true);
}

#[test]
fn like_sections_exchanged_are_no_alternative() {
    let f0 = 1.0 / (TAU * 10e3 * 10e-9);
    let pole = || rc_low_pass(f0, "9k1 11k", "10n");
    let problem = board(vec![pole(), pole()], Goals { alternatives: 2, own_error: Some(1.0), ..wide(2.0) });
    let outcome = compare_whole("exchanged", &problem);
    Whole::run(&problem).check_exchanged("exchanged", &outcome, &|_| true);
}

#[test]
fn the_best_board_of_the_last_number_of_part_numbers_is_listed() {
    // 33n with 6k8, with two 12k side by side, and with 12k beside 18k: three part numbers, five or six bodies, both below
    // the resolution.
    let f0 = 741.683;
    let pole = || paired(rc_high_pass(f0, "6k8 12k 18k", "33n"), R, &[Joint::Parallel], 1);
    let goals = Goals { own_error: Some(2.0), error_resolution: 0.5, ..wide(10.0) };
    let problem = board(vec![pole(), pole()], goals);
    let outcome = compare_whole("resolution", &problem);
    let every = Whole::run(&problem);
    let rows = || outcome.rows.iter().filter(|row| row.part_numbers == Some(3));
    let least = rows().map(|row| row.deviation.error).fold(f64::INFINITY, f64::min);
    let claims: Vec<_> = rows().map(|row| (row.placed_parts, row.deviation.error, row.proved)).collect();
    assert!((least - every.least_of(3)).abs() < 1.5e-7, "{claims:?}, there is {}", every.least_of(3));
}

// ---- from practice ------------------------------------------------------------------------------------------------

/// Four unity-gain sections as one chain, one series or parallel pair each.
fn crossover(goals: Goals) -> Problem {
    // Fourth-order Linkwitz-Riley at 2200 Hz: common practice, computed. Equal parts R, R, 2C, C make the low-pass and
    // C, C, R, 2R the high-pass of Q = 1/sqrt 2 at f0 = 1/(2 pi sqrt 2 R C).
    let (r, c) = (series(R, Series::E24, "1k", "100k"), series(C, Series::E6, "1n", "100n"));
    let q = std::f64::consts::FRAC_1_SQRT_2;
    let of = |shape, id, output| {
        let plain = section(second(shape, 2200.0, q, 1.0), id, output, &r, &c);
        let mut pairs = paired(plain.clone(), R, &[Joint::Series], 1);
        let capacitors = paired(plain, C, &[Joint::Parallel], 1).pairs.joints;
        for (joints, more) in pairs.pairs.joints.iter_mut().zip(capacitors) {
            joints.extend(more);
        }
        pairs
    };
    let low = || of(Shape::LowPass, "sallen-key-low-pass", "low-pass");
    let high = || of(Shape::HighPass, "sallen-key-high-pass", "high-pass");
    board(vec![low(), low(), high(), high()], goals)
}

#[test]
fn a_crossover_of_one_resistor_and_one_capacitor() {
    let q = std::f64::consts::FRAC_1_SQRT_2;
    let job = crossover(Goals { max_part_numbers: Some(4), ..Goals::default() });
    let outcome = shortlist(&job, &Unwatched);
    let row: &Row = outcome.rows.iter().find(|row| row.part_numbers == Some(2)).unwrap();
    let f0 = |chosen: &roundwell::search::Chosen| chosen.achieved.w0 / TAU;
    let product = 51e-6;
    assert!((1.0 / (TAU * 2f64.sqrt() * product) - 2206.7).abs() < 0.05);
    for chosen in &row.sections {
        assert!((f0(chosen) - 2206.7).abs() < 0.05, "{}", f0(chosen));
        assert!((chosen.achieved.q.unwrap() - q).abs() < 1e-9);
        let piece = |kind| chosen.parts.iter().find(|p| p.kind == kind).unwrap().pieces[0].value;
        let values = (piece(R).to_string(), piece(C).to_string());
        assert!((piece(R).to_f64() * piece(C).to_f64() / product - 1.0).abs() < 1e-9, "{values:?}");
        assert_eq!(chosen.parts.iter().filter(|p| p.joint.is_some()).count(), 1);
    }
    assert_eq!(row.placed_parts, 20);
    assert!(row.proved, "{:?}", outcome.together);
    // Every board of one resistor and one capacitor value; with f0 off by an octave there is none within the limit.
    let mut least = f64::INFINITY;
    for r in job.sections[0].shelves[0].choices() {
        for c in job.sections[0].shelves[2].choices() {
            let mut one = job.clone();
            for section in &mut one.sections {
                section.shelves = section
                    .shelves
                    .iter()
                    .map(|s| s.replaced(if s.kind() == R { *r } else { *c }).unwrap())
                    .collect();
            }
            let f0 = 1.0 / (TAU * 2f64.sqrt() * r.value.to_f64() * c.value.to_f64());
            if (1100.0..4400.0).contains(&f0) {
                least = least.min(Whole::run(&one).least_of(2));
            }
        }
    }
    assert!((row.deviation.error - least).abs() < 1.5e-7, "{} {least}", row.deviation.error);
    let claims: Vec<_> = outcome.rows.iter().map(|row| (row.part_numbers, row.deviation.error, row.proved)).collect();
    assert!(claims.iter().any(|(count, error, proved)| *count == Some(3) && *error < 0.03 && *proved), "{claims:?}");
    assert!(matches!(outcome.together.unwrap().proof, Proof::Exhaustive(_)));
}
