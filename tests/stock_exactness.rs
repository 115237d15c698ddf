//! Fronts of drawers against an independent brute force: quantities over boards, buying, cost, measured parts, pairs, and
//! their combinations.
//!
//! The brute force (`support/drawer.rs`) solves the netlists numerically and counts from the lines of the stock list; it
//! knows nothing of the search.
#![allow(clippy::unwrap_used)]

#[path = "support/drawer.rs"]
mod drawer;
mod support;

use std::sync::Arc;
use std::sync::atomic::{AtomicUsize, Ordering};

use drawer::{
    Drawer, Recipe, check_drawer_row, compare_drawer, lots_used, paired, rows_by_label, section_size, target_of,
};
use roundwell::circuit::Circuit;
use roundwell::parts::{Buying, Choice, Series};
use roundwell::search::{Goals, Joint, Outcome, Problem, Rank, Row, SectionProblem, Unwatched, shortlist};
use roundwell::target::{Section, Shape};
use roundwell::units::{Kind, Value, format_part};
use roundwell::verify::verify;
use support::*;

const R: Kind = Kind::Resistor;
const C: Kind = Kind::Capacitor;

fn sallen_key(drawer: &Drawer) -> roundwell::search::SectionProblem {
    drawer.section(second(Shape::LowPass, 1e3, 0.83, 1.0), "sallen-key-low-pass", "low-pass")
}

fn tow_thomas(drawer: &Drawer) -> roundwell::search::SectionProblem {
    drawer.section(second(Shape::LowPass, 1.03e3, 0.9, 1.1), "tow-thomas", "low-pass")
}

/// The best error of an outcome.
fn best(outcome: &Outcome) -> f64 {
    outcome.rows.iter().map(|row| row.deviation.error).fold(f64::INFINITY, f64::min)
}

// ---- quantities ---------------------------------------------------------------------------------------------------

#[test]
fn the_result_changes_with_the_number_of_boards() {
    let drawer = Drawer::lines(&[
        "R,8k2,6,1%,,",
        "R,10k,9,1%,,",
        "R,10k,40,5%,,",
        "R,15k,4,1%,,",
        "R,16k,7,1%,,",
        "R,22k,,5%,,",
        "C,10n,4,5%,,",
        "C,10n,3,10%,,",
        "C,15n,9,5%,,",
        "C,22n,2,5%,,",
    ]);
    for section in [sallen_key, tow_thomas] {
        let mut errors = Vec::new();
        for (boards, spares) in [(1, 0), (1, 2), (2, 0), (2, 1), (3, 0), (4, 1), (7, 0), (9, 0), (10, 0)] {
            let drawer = drawer.clone().boards(boards, spares);
            let outcome = compare_drawer("quantities", &drawer.problem(section(&drawer), wide(40.0)));
            if spares == 0 {
                errors.push(best(&outcome));
            }
        }
        // More boards: never better, and at last nothing.
        assert!(errors.windows(2).all(|two| two[0] <= two[1]), "{errors:?}");
        assert!(errors[0] < errors[2] && errors.last().unwrap().is_infinite(), "{errors:?}");
    }
}

#[test]
fn lines_of_one_choice_are_put_together_and_variants_are_not() {
    // Two lines of 10k 1 % suffice for R1 and R2 of two boards; with 5 % on one of them they are two part numbers.
    let of = |tolerance| {
        let line = format!("R,10k,2,{tolerance},,");
        let drawer = Drawer::lines(&["R,10k,2,1%,,", &line, "C,10n,,,,", "C,33n,,,,"]).boards(2, 0);
        compare_drawer("lines", &drawer.problem(sallen_key(&drawer), wide(40.0)))
    };
    let fewest = |outcome: &Outcome| outcome.rows.iter().map(|row| row.part_numbers.unwrap()).min();
    assert_eq!((fewest(&of("1%")), fewest(&of("5%"))), (Some(2), Some(3)));
}

#[test]
fn a_silent_pair_with_a_part_number_of_its_own_where_the_others_run_short() {
    // RG = RQ = RF = 15k leaves one 15k: RA = RB need the two 10k, the fifth part number.
    let drawer = Drawer::lines(&["R,8k2,1,,,", "R,10k,2,,,", "R,15k,4,,,", "C,10n,1,,,", "C,22n,1,,,"]);
    compare_drawer("tow-thomas", &drawer.problem(tow_thomas(&drawer), wide(40.0)));
}

/// An RC low-pass with resistors across source and output, which ideal parts do not notice.
fn loaded(drawer: &Drawer, loads: usize) -> SectionProblem {
    let slots: String = (0..loads).map(|i| format!("(\"RL{i}\", \"out\", \"0\"), ")).collect();
    let text = format!(
        r#"(id: "loaded", title: "Loaded", elements: [("R1", "in", "a"), ("C1", "a", "0"), {slots}],
        op_amps: [(name: "A1", plus: "a", minus: "out", out: "out")],
        outputs: [(name: "low-pass", node: "out", shape: FirstOrderLowPass)])"#
    );
    let circuit = Arc::new(Circuit::parse(&text).unwrap());
    let target = first(Shape::FirstOrderLowPass, 1.07e3, 1.0);
    SectionProblem::new(target, circuit, "low-pass", &drawer.shelf(R), &drawer.shelf(C)).unwrap()
}

#[test]
fn silent_slots_take_from_the_same_stock() {
    for (boards, spares) in [(1, 0), (1, 1), (2, 0), (3, 0)] {
        for buying in [Buying::Forbidden, Buying::AtMost(1), Buying::Allowed] {
            for rank in [Rank::Error, Rank::ToBuy, Rank::Cost] {
                for loads in 1..4 {
                    let drawer = Drawer::lines(&[
                        "R,1k,1,,0.2,",
                        "R,1k5,2,,0.1,",
                        "R,2k2,3,,0.3,",
                        "R,4k7,4,,0.1,",
                        "C,47n,1,,0.2,",
                        "C,100n,9,,0.4,",
                    ]);
                    let drawer = drawer.boards(boards, spares).buying(buying);
                    let section = loaded(&drawer, loads);
                    // One load must be of a value that no other slot may have.
                    let own = section.clone().shelf("RL0", drawer.labelled(R, "4k7 2k2"));
                    for section in [section, own] {
                        compare_drawer("loaded", &drawer.problem(section, Goals { rank, ..wide(40.0) }));
                    }
                }
            }
        }
    }
}

// ---- pins and ties ------------------------------------------------------------------------------------------------

#[test]
fn what_the_stock_cannot_meet_is_said_with_both_sides() {
    let lines = ["R,8k2,40,,,", "R,10k,12,,,", "R,15k,3,,,", "C,10n,7,,,", "C,22n,,,,"];
    let drawer = Drawer::lines(&lines).boards(5, 3);
    let pinned = |section: SectionProblem, slots: &[&str], kind, value: &str| {
        slots.iter().fold(section, |section, slot| section.shelf(slot, drawer.labelled(kind, value)))
    };
    // From the requirement: bodies per board x boards + spares against what is there.
    for (label, section, needed, there) in [
        ("one pin", pinned(sallen_key(&drawer), &["R1"], R, "15k"), "1 x 5 boards + 3 spares = 8", "3 of 15k"),
        (
            "two pins",
            pinned(sallen_key(&drawer), &["R1", "R2"], R, "10k"),
            "2 x 5 boards + 3 spares = 13",
            "12 of 10k",
        ),
        ("a capacitor", pinned(sallen_key(&drawer), &["C2"], C, "10n"), "1 x 5 boards + 3 spares = 8", "7 of 10n"),
        ("a tie", pinned(tow_thomas(&drawer), &["RA", "RB"], R, "10k"), "2 x 5 boards + 3 spares = 13", "12 of 10k"),
        (
            "a tie without a pin",
            sallen_key(&drawer).equal(&["R1", "R2"]).shelf("R1", drawer.labelled(R, "10k 15k")),
            "2 x 5 boards + 3 spares = 13",
            "12 of 10k",
        ),
    ] {
        let outcome = compare_drawer(label, &drawer.problem(section.clone(), wide(40.0)));
        assert!(outcome.rows.is_empty(), "{label}");
        let unmet = &outcome.sections[0].unmet;
        assert!(unmet.iter().any(|text| text.contains(needed) && text.contains(there)), "{label}: {unmet:?}");
        // With one board and no spares it can be built, and nothing of the kind is said.
        let one = Drawer::lines(&lines);
        let outcome = compare_drawer(label, &one.problem(section.clone(), wide(40.0)));
        assert!(!outcome.rows.is_empty(), "{label}");
        // So it can when parts may be bought.
        let buying = drawer.clone().buying(Buying::AtMost(1));
        let outcome = compare_drawer(label, &buying.problem(section, wide(40.0)));
        assert!(!outcome.rows.is_empty() && outcome.rows.iter().all(|row| row.to_buy == Some(1)), "{label}");
    }
}

#[test]
fn pins_over_two_sections_are_added_up() {
    let drawer = Drawer::lines(&["R,8k2,,,,", "R,10k,7,,,", "C,10n,,,,", "C,22n,,,,"]).boards(4, 0);
    let section = |name: &str, f0| {
        let target = Section { name: name.into(), ..second(Shape::LowPass, f0, 0.7, 1.0) };
        drawer.section(target, "sallen-key-low-pass", "low-pass").shelf("R1", drawer.labelled(R, "10k"))
    };
    let mut problem = drawer.problem(section("A", 1e3), wide(40.0));
    problem.sections.push(section("B", 1.2e3));
    let outcome = shortlist(&problem, &Unwatched);
    assert!(outcome.rows.is_empty());
    let unmet = &outcome.sections[0].unmet;
    assert!(unmet.iter().any(|text| text.contains("2 x 4 boards = 8") && text.contains("7 of 10k")), "{unmet:?}");
    assert_eq!(verify(&problem, &outcome), Ok(()));
}

#[test]
fn pins_and_ties_with_stock() {
    let drawer = Drawer::lines(&[
        "R,8k2,6,1%,,",
        "R,10k,5,1%,,",
        "R,10k,9,5%,,",
        "R,15k,4,1%,,",
        "R,22k,3,5%,,",
        "C,10n,4,5%,,",
        "C,22n,4,5%,,",
    ]);
    for boards in 1..4 {
        let drawer = drawer.clone().boards(boards, 0);
        let tow_thomas = || tow_thomas(&drawer);
        for (label, section) in [
            ("RF = R2", tow_thomas().equal(&["RF", "R2"])),
            ("RG = RF = R2", tow_thomas().equal(&["RG", "RF", "R2"])),
            ("C1 = C2", tow_thomas().equal(&["C1", "C2"])),
            ("RQ pinned", tow_thomas().shelf("RQ", drawer.labelled(R, "15k"))),
            (
                "RA = RB pinned",
                tow_thomas().shelf("RA", drawer.labelled(R, "22k")).shelf("RB", drawer.labelled(R, "22k")),
            ),
        ] {
            compare_drawer(label, &drawer.problem(section, wide(40.0)));
        }
    }
}

// ---- buying and cost ----------------------------------------------------------------------------------------------

#[test]
fn what_is_to_be_bought_takes_part_in_the_front() {
    let drawer = Drawer::lines(&[
        "R,8k2,1,1%,0.1,",
        "R,10k,2,1%,0.3,",
        "R,15k,4,1%,0.2,",
        "C,10n,1,5%,0.7,",
        "C,22n,2,5%,0.4,",
        "C,33n,0,5%,0.5,",
    ]);
    let mut most = Vec::new();
    for buying in [Buying::Forbidden, Buying::AtMost(1), Buying::AtMost(2), Buying::Allowed] {
        for boards in 1..3 {
            for rank in [Rank::Error, Rank::ToBuy, Rank::PartNumbers, Rank::Cost] {
                let drawer = drawer.clone().boards(boards, 0).buying(buying);
                let goals = Goals { rank, ..wide(40.0) };
                let outcome = compare_drawer("sallen-key", &drawer.problem(sallen_key(&drawer), goals.clone()));
                most.push(outcome.rows.iter().map(|row| row.to_buy.unwrap()).max().unwrap_or(0));
                compare_drawer("tow-thomas", &drawer.problem(tow_thomas(&drawer), goals));
            }
        }
    }
    assert!(
        most[..8].iter().all(|count| *count == 0) && most[8..16].contains(&1) && most[16..24].contains(&2),
        "{most:?}"
    );
}

#[test]
fn values_that_no_line_names_are_bought() {
    let lines = ["R,8k2,1,,,", "R,15k,4,,,", "C,10n,1,5%,,10.2n", "C,22n,2,,,"];
    for buying in [Buying::AtMost(1), Buying::AtMost(3), Buying::Allowed] {
        let drawer = Drawer::lines(&lines).beside(R, "9k1 12k").beside(C, "10n 33n").buying(buying);
        for boards in 1..3 {
            let drawer = drawer.clone().boards(boards, 0);
            compare_drawer("sallen-key", &drawer.problem(sallen_key(&drawer), wide(40.0)));
            let section = paired(sallen_key(&drawer), R, &[Joint::Series, Joint::Parallel], 1);
            compare_drawer("sallen-key with pairs", &drawer.problem(section, wide(40.0)));
        }
    }
}

// ---- pairs --------------------------------------------------------------------------------------------------------

#[test]
fn pairs_from_stock_and_from_series() {
    let joints = [&[Joint::Series][..], &[Joint::Parallel], &[Joint::Series, Joint::Parallel]];
    let lines = ["R,10k,6,1%,,", "R,15k,4,1%,,", "R,22k,,5%,,", "C,10n,,5%,,", "C,22n,4,5%,,"];
    let mut taken = 0;
    for drawer in [Drawer::lines(&lines), Drawer::lines(&lines).boards(2, 1), Drawer::of("10k 15k 22k", "10n 22n")] {
        for most in 0..4 {
            for joints in joints {
                for kinds in [&[R][..], &[C], &[R, C]] {
                    let section = kinds.iter().fold(sallen_key(&drawer), |s, kind| paired(s, *kind, joints, most));
                    let outcome = compare_drawer("sallen-key", &drawer.problem(section, wide(40.0)));
                    let pairs = |row: &Row| row.sections[0].parts.iter().filter(|p| p.joint.is_some()).count();
                    taken = taken.max(outcome.rows.iter().map(pairs).max().unwrap_or(0));
                }
            }
        }
    }
    assert_eq!(taken, 3);
}

#[test]
fn pairs_of_tied_and_of_silent_slots() {
    let joints = [Joint::Series, Joint::Parallel];
    let drawer = Drawer::lines(&["R,10k,8,,,", "R,27k,9,,,", "C,10n,,,,", "C,22n,,,,"]);
    for boards in 1..3 {
        let drawer = drawer.clone().boards(boards, 0);
        for most in 0..4 {
            let tied = sallen_key(&drawer).equal(&["R1", "R2"]);
            compare_drawer("R1 = R2", &drawer.problem(paired(tied, R, &joints, most), wide(40.0)));
            let tied = tow_thomas(&drawer).equal(&["RF", "R2"]).equal(&["RG", "RQ"]);
            compare_drawer("RF = R2, RG = RQ", &drawer.problem(paired(tied, R, &joints, most), wide(40.0)));
            let shelf = drawer.labelled(R, "27k");
            let own = sallen_key(&drawer).equal(&["R1", "R2"]).shelf("R1", shelf.clone()).shelf("R2", shelf);
            compare_drawer("R1 = R2 pinned", &drawer.problem(paired(own, R, &joints, most), wide(40.0)));
        }
    }
}

#[test]
fn an_impedance_range_with_pairs() {
    // What counts is the resistance in the slot.
    let joints = [Joint::Series, Joint::Parallel];
    for impedance in [(3e3, 1e4), (1.5e4, 5e4)] {
        for drawer in
            [Drawer::of("6k8 12k 27k", "4n7 47n"), Drawer::lines(&["R,6k8,3,,,", "R,12k,2,,,", "C,47n,9,,,"])]
        {
            let section = paired(sallen_key(&drawer), R, &joints, 2);
            let goals = Goals { impedance: Some(impedance), ..wide(40.0) };
            compare_drawer("impedance", &drawer.problem(section, goals));
        }
    }
}

#[test]
fn two_of_one_value_need_no_new_part_number() {
    // R/2, 2R or 2C meets f0 with one resistor and one capacitor value; no single parts do.
    for (kind, joint, rc) in [(R, Joint::Parallel, 5e3 * 10e-9), (R, Joint::Series, 2e-4), (C, Joint::Parallel, 2e-4)]
    {
        let drawer = Drawer::lines(&["R,10k,2,,,", "R,27k,9,,,", "C,10n,2,,,", "C,1n,9,,,"]);
        let target = first(Shape::FirstOrderLowPass, 1.0 / (TAU * rc * 1.001), 1.0);
        let section = paired(drawer.section(target, "rc-low-pass", "low-pass"), kind, &[joint], 1);
        let outcome = compare_drawer("equal pairs", &drawer.problem(section, wide(40.0)));
        let best = &outcome.rows[0];
        assert_eq!((best.part_numbers, best.placed_parts), (Some(2), 3));
        let pair = best.sections[0].parts.iter().find(|part| part.joint == Some(joint)).unwrap();
        assert!(pair.kind == kind && pair.pieces[0] == pair.pieces[1]);
    }
}

// ---- measured parts -----------------------------------------------------------------------------------------------

#[test]
fn measured_parts_on_boards() {
    let drawer = Drawer::lines(&[
        "R,8k2,6,1%,,",
        "R,10k,9,1%,,",
        "R,15k,4,1%,,",
        "C,10n,1,5%,,10.1n",
        "C,10n,1,5%,,9.6n",
        "C,10n,1,5%,,10.4n",
        "C,22n,1,5%,,22.8n",
        "C,22n,1,5%,,21.3n",
        "C,22n,,5%,,",
        "C,27n,1,5%,,27.1n",
        "C,27n,1,5%,,26.1n",
    ]);
    for boards in 1..4 {
        for own in [false, true] {
            let drawer = drawer.clone().boards(boards, 0);
            let goals = Goals { each_board_its_own: own, ..wide(40.0) };
            let outcome = compare_drawer("sallen-key", &drawer.problem(sallen_key(&drawer), goals.clone()));
            assert_eq!(outcome.rows.iter().any(|row| row.boards.len() as u64 == boards), boards > 1);
            compare_drawer("tow-thomas", &drawer.problem(tow_thomas(&drawer), goals.clone()));
            let section = paired(sallen_key(&drawer), C, &[Joint::Parallel], 1);
            compare_drawer("sallen-key with pairs", &drawer.problem(section, goals));
        }
    }
}

#[test]
fn boards_of_their_own_with_a_silent_pair_of_its_own() {
    // The measured 47k stand in R1, one on each board; RA = RB need two alike: the third part number.
    let drawer = Drawer::lines(&["R,22k,9,,,", "R,47k,,,,46.1k", "R,47k,,,,46.3k", "C,2n2,6,,,"]).boards(2, 0);
    for own in [false, true] {
        let section = drawer.section(first(Shape::FirstOrderAllPass, 1.6e3, 1.0), "first-order-all-pass", "all-pass");
        let goals = Goals { each_board_its_own: own, ..wide(2.0) };
        let outcome = compare_drawer("all-pass", &drawer.problem(section, goals));
        assert_eq!(outcome.rows[0].part_numbers, Some(3));
    }
}

// ---- problems drawn at random -------------------------------------------------------------------------------------

const CIRCUITS: [(&str, &str); 9] = [
    ("sallen-key-low-pass", "low-pass"),
    ("sallen-key-high-pass", "high-pass"),
    ("rc-low-pass", "low-pass"),
    ("inverting-low-pass", "low-pass"),
    ("first-order-all-pass", "all-pass"),
    ("multiple-feedback-low-pass", "low-pass"),
    ("multiple-feedback-band-pass", "band-pass"),
    ("tow-thomas", "low-pass"),
    ("tow-thomas", "band-pass"),
];

/// What the problems drawn shall have in them.
#[derive(Clone, Copy, Default)]
struct With {
    stock: bool,
    buying: bool,
    cost: bool,
    measured: bool,
    /// Parts of one label that were measured and parts that were not.
    mixed: bool,
    pairs: bool,
    demands: bool,
}

/// Values drawn at random; now and then some of them a decade apart.
fn drawn_values(numbers: &mut Numbers, kind: Kind, count: usize) -> Vec<Value> {
    let all = match kind {
        Kind::Resistor => series(kind, Series::E12, "4k7", "47k"),
        Kind::Capacitor => series(kind, Series::E6, "2n2", "47n"),
    };
    let mut taken = numbers.some_of(all.values(), count);
    if numbers.below(3) == 0 {
        let half = taken.len() / 2;
        let shift = [1, -1][numbers.below(2)];
        taken = taken.iter().take(half).flat_map(|value| [*value, value.shifted(shift).unwrap()]).collect();
        taken.truncate(count);
        taken.sort_unstable();
    }
    taken
}

/// Lines of a stock list drawn at random, for so many values.
fn lines(numbers: &mut Numbers, kind: Kind, count: usize, boards: u64, with: With) -> Vec<String> {
    let letter = if kind == Kind::Resistor { "R" } else { "C" };
    let mut lines = Vec::new();
    let quantity = |numbers: &mut Numbers| match numbers.below(10) {
        0 => String::new(),
        1..=3 => numbers.below(3).to_string(),
        _ => (1 + numbers.below(12)).to_string(),
    };
    let prices = 1 + numbers.below(4);
    let price = |numbers: &mut Numbers| match with.cost {
        false if numbers.below(3) == 0 => String::new(),
        _ => format!("0.{}", 1 + numbers.below(prices)),
    };
    for value in drawn_values(numbers, kind, count) {
        let text = format_part(value, kind);
        let variants = if numbers.below(4) == 0 { 2 } else { 1 };
        let measured = if with.measured && numbers.below(3) > 0 { 1 + numbers.below(3) } else { 0 };
        let price_here = price(numbers);
        for variant in 0..variants {
            let tolerance = ["1%", "5%"][variant];
            let price_here = if measured == 0 { price(numbers) } else { price_here.clone() };
            // Measured parts are of the first variant.
            if measured > 0 && variant == 0 && !(with.mixed && numbers.below(2) == 0) {
                continue;
            }
            lines.push(format!("{letter},{text},{},{tolerance},{price_here},", quantity(numbers)));
            if numbers.below(8) == 0 {
                lines.push(format!("{letter},{text},{},{tolerance},{price_here},", quantity(numbers)));
            }
        }
        for _ in 0..measured {
            let off = 970 + numbers.below(61);
            let true_value = Value::new(value.mantissa() * off as u64, value.exponent() - 3).unwrap();
            let there = ["", "1", "2", "0"][numbers.below(4)];
            // With several boards at one price: what a board costs does not depend on which of them it has.
            let price = if boards > 1 { price_here.clone() } else { price(numbers) };
            lines.push(format!("{letter},{text},{there},1%,{price},{}", format_part(true_value, kind)));
        }
    }
    lines
}

/// A drawer drawn at random.
fn drawn_drawer(numbers: &mut Numbers, with: With) -> Recipe {
    let (nr, nc) = (2 + numbers.below(3), 2 + numbers.below(2));
    let mut recipe =
        Recipe { lines: Vec::new(), beside: Vec::new(), boards: 1, spares: 0, buying: Buying::Forbidden };
    if !with.stock {
        recipe.beside = vec![(R, drawn_values(numbers, R, nr)), (C, drawn_values(numbers, C, nc))];
        return recipe;
    }
    recipe.boards = if with.measured { 1 + numbers.below(3) as u64 } else { [1, 1, 2, 2, 3, 4][numbers.below(6)] };
    recipe.spares = [0, 0, 1, 2][numbers.below(4)];
    recipe.lines = lines(numbers, R, nr, recipe.boards, with);
    recipe.lines.extend(lines(numbers, C, nc, recipe.boards, with));
    if with.buying {
        recipe.buying = [Buying::AtMost(1), Buying::AtMost(2), Buying::AtMost(3), Buying::Allowed][numbers.below(4)];
        if !with.cost && numbers.below(2) == 0 {
            recipe.beside.push((R, values(R, ["13k", "13k 30k"][numbers.below(2)])));
        }
        if !with.cost && numbers.below(2) == 0 {
            // Labels of which only measured parts are there.
            let drawer = recipe.drawer();
            for kind in [R, C] {
                let lots = || drawer.supply.lots().map(|(_, lot)| lot).filter(move |lot| lot.kind == kind);
                let is_plain = |value| lots().any(|lot| lot.nominal == value && lot.measured.is_none());
                let label = lots().map(|lot| lot.nominal).find(|label| !is_plain(*label));
                recipe.beside.extend(label.map(|label| (kind, vec![label])));
            }
        }
    }
    recipe
}

/// Pins, ties and shelves of their own for slots drawn at random.
fn demand_at_random(numbers: &mut Numbers, drawer: &Drawer, section: &mut SectionProblem) {
    let filled: Vec<usize> = section.output().filled(&section.circuit).collect();
    let label = |choice: &Choice| drawer.supply.lot_of(*choice).map_or(choice.value, |lot| lot.nominal);
    for _ in 0..numbers.below(3) {
        let slot = filled[numbers.below(filled.len())];
        let together = section.equal.iter().find(|e| e.contains(&slot)).cloned().unwrap_or(vec![slot]);
        match numbers.below(3) {
            0 => {
                let choices = section.shelves[slot].choices();
                let pin = label(&choices[numbers.below(choices.len())]);
                let shelf = section.shelves[slot].filtered(|choice| label(choice) == pin).unwrap();
                together.iter().for_each(|&s| section.shelves[s] = shelf.clone());
            }
            1 => {
                let other = filled[numbers.below(filled.len())];
                let free = |s| !section.equal.iter().any(|e| e.contains(&s));
                let kind = |s: usize| section.circuit.slots[s].kind;
                if slot != other && kind(slot) == kind(other) && free(slot) && free(other) {
                    section.shelves[other] = section.shelves[slot].clone();
                    section.equal.push(vec![slot, other]);
                }
            }
            _ => {
                let shelf = section.shelves[slot].clone();
                let dropped = shelf.choices()[numbers.below(shelf.len())];
                if let Some(shelf) = shelf.filtered(|choice| *choice != dropped) {
                    together.iter().for_each(|&s| section.shelves[s] = shelf.clone());
                }
            }
        }
    }
}

/// A section drawn at random: a target near a set that exists, demands on slots.
fn drawn_section(numbers: &mut Numbers, drawer: &Drawer, with: With) -> Option<SectionProblem> {
    let (id, output) = CIRCUITS[numbers.below(CIRCUITS.len())];
    let shape = library(id).output(output).unwrap().shape;
    let placeholder = Section::new("A", shape, 1.0, (shape.order() == 2).then_some(1.0), 1.0, None);
    let mut section = drawer.section(placeholder.unwrap(), id, output);
    if with.demands {
        demand_at_random(numbers, drawer, &mut section);
    }
    if with.pairs {
        let joints = [&[Joint::Series][..], &[Joint::Parallel], &[Joint::Series, Joint::Parallel]];
        let most = 1 + numbers.below(3);
        for kind in [R, C] {
            if numbers.below(3) > 0 {
                section = paired(section, kind, joints[numbers.below(3)], most);
            }
        }
        if numbers.below(4) == 0 {
            // Not in one of the slots.
            let slot = numbers.below(section.circuit.slots.len());
            if let Some(joints) = section.pairs.joints.get_mut(slot) {
                joints.clear();
            }
        }
    }
    let mut planted: Vec<f64> = vec![1.0; section.circuit.slots.len()];
    for (value, shelf) in planted.iter_mut().zip(&section.shelves) {
        *value = shelf.values()[numbers.below(shelf.values().len())].to_f64() * numbers.between(1.0 / 1.2, 1.2);
    }
    section.equal.iter().for_each(|equal| equal.iter().for_each(|&s| planted[s] = planted[equal[0]]));
    section.target = target_of(&section, &planted)?;
    let most = if with.measured { 6_000.0 } else { 20_000.0 };
    (section_size(&section) < most).then_some(section)
}

/// A problem of one section drawn at random, and what its drawer is made of.
fn drawn(numbers: &mut Numbers, with: With) -> Option<(Recipe, Problem)> {
    let recipe = drawn_drawer(numbers, with);
    let drawer = recipe.drawer();
    let section = drawn_section(numbers, &drawer, with)?;
    let all_pass = section.target.shape.is_all_pass();
    let mut goals = wide(if all_pass { 2.0 } else { [40.0, 40.0, 10.0][numbers.below(3)] });
    if with.demands && numbers.below(4) == 0 {
        goals.max_part_numbers = Some(2 + numbers.below(4));
    }
    goals.error_resolution = [SAME, SAME, SAME, goals.error_limit / 20.0][numbers.below(4)];
    goals.rank = match with {
        With { cost: true, .. } => [Rank::Cost, Rank::Cost, Rank::Error][numbers.below(3)],
        With { buying: true, .. } => [Rank::Error, Rank::ToBuy, Rank::PartNumbers][numbers.below(3)],
        _ => Rank::Error,
    };
    goals.each_board_its_own = with.measured && numbers.below(2) == 0;
    goals.alternatives = [0, 0, 0, 2][numbers.below(4)];
    let silent = section.equal.iter().any(|equal| section.circuit.ties.contains(equal));
    if with.demands && !silent && numbers.below(4) == 0 {
        goals.impedance = Some([(8e3, 2e4), (3e3, 1e4), (1.5e4, 5e4)][numbers.below(3)]);
    }
    let mut problem = drawer.problem(section, goals);
    let w0 = problem.sections[0].target.w0;
    problem.criterion.band = [None, Some((w0 / 3.0, w0 * 2.0)), Some((w0 / 2.0, w0 * 4.0))][numbers.below(3)];
    problem.criterion.ignore_gain = !all_pass && numbers.below(6) == 0;
    Some((recipe, problem))
}

/// Does something with so many problems of each seed; says of all that fail, which.
fn each_drawn(runs: &[(u64, usize, With)], check: &(dyn Fn(&str, u64, Recipe, Problem) + std::panic::RefUnwindSafe)) {
    let mut failed = Vec::new();
    for &(seed, count, with) in runs {
        let mut numbers = Numbers(seed);
        let mut number = 0;
        while number < count {
            let Some((recipe, problem)) = drawn(&mut numbers, with) else { continue };
            let label = format!("seed {seed}, problem {number}");
            number += 1;
            let further = numbers.next();
            if std::panic::catch_unwind(|| check(&label, further, recipe, problem)).is_err() {
                failed.push(label);
            }
        }
    }
    assert!(failed.is_empty(), "{} failed: {failed:?}", failed.len());
}

/// What the rows of many outcomes have in them.
#[derive(Debug, Default)]
struct Seen {
    rows: AtomicUsize,
    pairs: AtomicUsize,
    bought: AtomicUsize,
    boards: AtomicUsize,
    measured: AtomicUsize,
    nothing: AtomicUsize,
}

impl Seen {
    fn note(&self, problem: &Problem, outcome: &Outcome) {
        let add = |count: &AtomicUsize, how_many: usize| count.fetch_add(how_many, Ordering::Relaxed);
        let rows = || outcome.rows.iter();
        let parts = |row: &Row| row.sections.iter().flat_map(|chosen| chosen.parts.clone()).collect::<Vec<_>>();
        let is_measured = |choice: &Choice| problem.supply.lot_of(*choice).is_some_and(|lot| lot.measured.is_some());
        add(&self.rows, outcome.rows.len());
        add(&self.pairs, rows().filter(|row| parts(row).iter().any(|part| part.joint.is_some())).count());
        add(&self.bought, rows().filter(|row| row.to_buy.is_some_and(|count| count > 0)).count());
        add(&self.boards, rows().filter(|row| !row.boards.is_empty()).count());
        let measured = |row: &&Row| parts(row).iter().any(|part| part.pieces.iter().any(is_measured));
        add(&self.measured, rows().filter(measured).count());
        add(&self.nothing, usize::from(outcome.rows.is_empty()));
    }

    /// Rows of all, with pairs, with parts to buy, with boards that differ, with measured parts; and outcomes without row.
    fn counts(&self) -> [usize; 6] {
        let all = [&self.rows, &self.pairs, &self.bought, &self.boards, &self.measured, &self.nothing];
        all.map(|count| count.load(Ordering::Relaxed))
    }
}

/// Compares so many problems of each seed, and demands at least so many rows of each sort, in the order of
/// [`Seen::counts`].
fn compare_drawn(runs: &[(u64, usize, With)], least: [usize; 6]) {
    let seen = Seen::default();
    each_drawn(runs, &|label, _, _, problem| seen.note(&problem, &compare_drawer(label, &problem)));
    let counts = seen.counts();
    assert!(counts.iter().zip(least).all(|(count, least)| *count >= least), "{counts:?} seen, {least:?} wanted");
}

#[test]
fn drawn_with_stock() {
    compare_drawn(
        &[
            (1, 40, With { stock: true, ..With::default() }),
            (2, 40, With { stock: true, demands: true, ..With::default() }),
        ],
        [100, 0, 0, 0, 0, 1],
    );
}

#[test]
fn drawn_with_buying() {
    compare_drawn(
        &[
            (3, 40, With { stock: true, buying: true, ..With::default() }),
            (4, 40, With { stock: true, buying: true, demands: true, ..With::default() }),
        ],
        [150, 0, 80, 0, 0, 1],
    );
}

#[test]
fn drawn_with_cost() {
    compare_drawn(
        &[
            (5, 40, With { stock: true, buying: true, cost: true, ..With::default() }),
            (6, 30, With { stock: true, cost: true, demands: true, ..With::default() }),
        ],
        [150, 0, 60, 0, 0, 1],
    );
}

#[test]
fn drawn_with_measured_parts() {
    compare_drawn(
        &[
            (7, 40, With { stock: true, measured: true, ..With::default() }),
            (8, 30, With { stock: true, measured: true, demands: true, ..With::default() }),
        ],
        [40, 0, 0, 5, 30, 1],
    );
}

#[test]
fn drawn_with_measured_and_unmeasured_parts_of_one_label() {
    compare_drawn(
        &[
            (16, 25, With { stock: true, measured: true, mixed: true, ..With::default() }),
            (17, 25, With { stock: true, measured: true, mixed: true, buying: true, ..With::default() }),
        ],
        [60, 0, 15, 15, 40, 1],
    );
}

#[test]
fn drawn_with_pairs() {
    compare_drawn(
        &[
            (9, 25, With { pairs: true, ..With::default() }),
            (10, 25, With { pairs: true, demands: true, ..With::default() }),
            (11, 25, With { stock: true, pairs: true, demands: true, ..With::default() }),
        ],
        [100, 50, 0, 0, 0, 1],
    );
}

#[test]
fn drawn_with_everything() {
    let all =
        With { stock: true, buying: true, cost: true, measured: true, mixed: false, pairs: true, demands: true };
    compare_drawn(
        &[
            (12, 20, With { stock: true, buying: true, pairs: true, ..With::default() }),
            (13, 20, With { stock: true, measured: true, pairs: true, ..With::default() }),
            (14, 20, With { stock: true, measured: true, buying: true, demands: true, ..With::default() }),
            (15, 20, all),
        ],
        [100, 50, 60, 20, 40, 1],
    );
}

#[test]
fn variants_of_one_value_take_no_alternatives_place() {
    // 18k 1 % and 18k 5 % beside each other have the values of two 18k 1 %, and one part number more: no set of its own.
    let rows = |lines: &[&str]| {
        let drawer = Drawer::lines(lines);
        let section = drawer.section(second(Shape::HighPass, 152.0, 0.605, 1.0), "sallen-key-high-pass", "high-pass");
        let problem = drawer.problem(section, Goals { alternatives: 2, ..wide(40.0) });
        let outcome = compare_drawer("variants", &problem);
        outcome.rows.iter().map(|row| (row.part_numbers, (row.deviation.error * 1e6).round())).collect::<Vec<_>>()
    };
    let plain = ["R,18k,,1%,,", "R,27k,,1%,,", "C,15n,,,,", "C,47n,,,,"];
    let variant = [&plain[..], &["R,18k,,5%,,"]].concat();
    assert_eq!(rows(&plain), rows(&variant));
}

// ---- properties ---------------------------------------------------------------------------------------------------

/// A problem with another drawer and otherwise as before; shelves are those of the drawer.
fn with_drawer(problem: &Problem, drawer: &Drawer) -> Problem {
    let section = |section: &SectionProblem| {
        let output = &section.output().name;
        let other = drawer.section(section.target.clone(), &section.circuit.id, output);
        SectionProblem { pairs: section.pairs.clone(), equal: section.equal.clone(), ..other }
    };
    let sections = problem.sections.iter().map(section).collect();
    Problem { sections, supply: drawer.supply.clone(), ..problem.clone() }
}

const PROPERTIES: [(u64, usize, With); 4] = {
    let plain =
        With { stock: true, buying: false, cost: false, measured: false, mixed: false, pairs: false, demands: false };
    [
        (21, 15, plain),
        (22, 15, With { buying: true, ..plain }),
        (23, 15, With { measured: true, mixed: true, ..plain }),
        (24, 10, With { pairs: true, ..plain }),
    ]
};

#[test]
fn a_line_that_no_row_uses_changes_nothing() {
    each_drawn(&PROPERTIES, &|label, _, recipe, problem| {
        let before = shortlist(&problem, &Unwatched);
        let rows = rows_by_label(&problem, &before);
        let used = lots_used(&before);
        for (id, lot) in problem.supply.lots().filter(|(id, _)| !used.contains(id)) {
            let mut fewer = recipe.clone();
            let gone: Vec<usize> = lot.lines.iter().map(|line| line.line - 2).collect();
            let mut index = 0;
            fewer.lines.retain(|_| {
                index += 1;
                !gone.contains(&(index - 1))
            });
            let kind = lot.kind;
            if !fewer.lines.iter().any(|line| line.starts_with(if kind == R { "R" } else { "C" })) {
                continue;
            }
            let less = with_drawer(&problem, &fewer.drawer());
            let after = shortlist(&less, &Unwatched);
            assert_eq!(verify(&less, &after), Ok(()));
            assert_eq!(
                rows,
                rows_by_label(&less, &after),
                "{label}: without {id:?}\n{recipe:?}\n{:?}",
                problem.sections
            );
        }
    });
}

#[test]
fn one_more_line_never_makes_the_best_error_worse() {
    each_drawn(&PROPERTIES, &|label, further, recipe, mut problem| {
        // Below the resolution the front may end before its best row.
        problem.goals.error_resolution = SAME;
        let before = best(&shortlist(&problem, &Unwatched));
        let mut numbers = Numbers(further);
        for _ in 0..3 {
            let mut more = recipe.clone();
            let with = With { stock: true, measured: numbers.below(2) == 0, ..With::default() };
            let kind = [R, C][numbers.below(2)];
            let added = lines(&mut numbers, kind, 1, recipe.boards, with);
            let Some(line) = added.first() else { continue };
            let place = numbers.below(more.lines.len() + 1);
            more.lines.insert(place, line.clone());
            let more = with_drawer(&problem, &more.drawer());
            let outcome = shortlist(&more, &Unwatched);
            assert_eq!(verify(&more, &outcome), Ok(()));
            let after = best(&outcome);
            assert!(
                after <= before + 1.5e-7,
                "{label}: {line}: {before} {after}\n{recipe:?}\n{:?}",
                problem.sections
            );
        }
    });
}

#[test]
fn two_sections_never_use_more_than_there_is() {
    let seen = Seen::default();
    let with =
        |measured, buying, pairs| With { stock: true, measured, mixed: measured, buying, pairs, ..With::default() };
    let runs = [
        (31, 20, with(false, false, false)),
        (32, 20, with(false, true, false)),
        (33, 20, with(true, false, false)),
        (34, 10, with(true, true, true)),
    ];
    each_drawn(&runs, &|label, further, recipe, mut problem| {
        let mut numbers = Numbers(further);
        let with = With { stock: true, pairs: problem.sections[0].pairs.most > 0, ..With::default() };
        let drawer = recipe.drawer();
        let other = loop {
            let section = drawn_section(&mut numbers, &drawer, with);
            // One measure serves both sections, and an all-pass is judged by another.
            let alike = |other: &SectionProblem| {
                other.target.shape.is_all_pass() == problem.sections[0].target.shape.is_all_pass()
            };
            if let Some(other) = section.filter(alike) {
                break other;
            }
        };
        problem
            .sections
            .push(SectionProblem { target: Section { name: "B".into(), ..other.target.clone() }, ..other });
        problem.goals.rows = 12;
        let outcome = shortlist(&problem, &Unwatched);
        for row in &outcome.rows {
            if let Err(what) = check_drawer_row(&problem, row) {
                panic!("{label}: {what}\n{row:?}\n{recipe:?}\n{:?}", problem.sections);
            }
        }
        assert_eq!(verify(&problem, &outcome), Ok(()), "{label}\n{recipe:?}\n{:?}", problem.sections);
        seen.note(&problem, &outcome);
    });
    let [rows, pairs, bought, ..] = seen.counts();
    assert!(rows > 100 && pairs > 10 && bought > 50, "{:?}", seen.counts());
}

#[test]
fn two_sections_share_what_each_would_take_alone() {
    // Both sections want 10k and 10n, of which there is one each.
    let drawer = Drawer::lines(&["R,10k,1,,,", "R,12k,1,,,", "C,10n,1,,,", "C,12n,1,,,"]);
    let section = |name: &str| {
        let target = Section { name: name.into(), ..first(Shape::FirstOrderLowPass, 1.0 / (TAU * 1.01e-4), 1.0) };
        drawer.section(target, "rc-low-pass", "low-pass")
    };
    let mut problem = drawer.problem(section("A"), wide(40.0));
    problem.sections.push(section("B"));
    let outcome = shortlist(&problem, &Unwatched);
    assert!(!outcome.rows.is_empty());
    for row in &outcome.rows {
        assert_eq!(check_drawer_row(&problem, row), Ok(()));
    }
    assert_eq!(verify(&problem, &outcome), Ok(()));
}
