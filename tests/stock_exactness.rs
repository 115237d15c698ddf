//! Fronts of drawers against an independent brute force: quantities over boards, buying, cost, measured parts, pairs, and
//! their combinations.
//!
//! The brute force (`support/drawer.rs`) solves the netlists numerically and counts from the lines of the stock list; it
//! knows nothing of the search.
#![allow(clippy::unwrap_used)]

#[path = "support/drawer.rs"]
mod drawer;
mod support;

use drawer::{Drawer, compare_drawer, paired, section_size, target_of};
use roundwell::parts::{Buying, Choice, Series};
use roundwell::search::{Goals, Joint, Outcome, Problem, Rank, SectionProblem};
use roundwell::target::{Section, Shape};
use roundwell::units::{Kind, Value, format_part};
use support::*;

const R: Kind = Kind::Resistor;
const C: Kind = Kind::Capacitor;

fn sallen_key(drawer: &Drawer) -> roundwell::search::SectionProblem {
    drawer.section(second(Shape::LowPass, 1e3, 0.83, 1.0), "sallen-key-low-pass", "low-pass")
}

fn tow_thomas(drawer: &Drawer) -> roundwell::search::SectionProblem {
    drawer.section(second(Shape::LowPass, 1.03e3, 0.9, 1.1), "tow-thomas", "low-pass")
}

#[test]
fn quantities_over_boards() {
    let drawer = Drawer::lines(&[
        "R,8k2,6,1%,,", "R,10k,9,1%,,", "R,10k,40,5%,,", "R,15k,4,1%,,", "R,16k,7,1%,,", "R,22k,,5%,,", "C,10n,4,5%,,",
        "C,10n,3,10%,,", "C,15n,9,5%,,", "C,22n,2,5%,,",
    ]);
    for (boards, spares) in [(1, 0), (1, 1), (1, 3), (2, 0), (2, 1), (3, 0), (4, 1), (7, 0), (9, 0), (10, 0)] {
        let drawer = drawer.clone().boards(boards, spares);
        compare_drawer("sallen-key", &drawer.problem(sallen_key(&drawer), wide(40.0)));
        compare_drawer("tow-thomas", &drawer.problem(tow_thomas(&drawer), wide(40.0)));
    }
}

#[test]
fn pairs_first() {
    let drawer = Drawer::lines(&["R,10k,6,1%,,", "R,15k,4,1%,,", "R,22k,,5%,,", "C,10n,,5%,,", "C,22n,4,5%,,"]);
    for most in 0..3 {
        for joints in [&[Joint::Series][..], &[Joint::Parallel], &[Joint::Series, Joint::Parallel]] {
            let section = paired(sallen_key(&drawer), R, joints, most);
            compare_drawer("sallen-key", &drawer.problem(section, wide(40.0)));
            let section = paired(sallen_key(&drawer), C, joints, most);
            compare_drawer("sallen-key", &drawer.problem(section, wide(40.0)));
        }
    }
}

#[test]
fn measured_first() {
    let drawer = Drawer::lines(&[
        "R,8k2,6,1%,,", "R,10k,9,1%,,", "R,15k,4,1%,,", "C,10n,1,5%,,10.1n", "C,10n,1,5%,,9.6n", "C,10n,1,5%,,10.4n",
        "C,22n,1,5%,,22.8n", "C,22n,1,5%,,21.3n", "C,22n,,5%,,",
    ]);
    for boards in 1..4 {
        for own in [false, true] {
            let drawer = drawer.clone().boards(boards, 0);
            let goals = Goals { each_board_its_own: own, ..wide(40.0) };
            compare_drawer("sallen-key", &drawer.problem(sallen_key(&drawer), goals));
        }
    }
}

#[test]
fn buying_first() {
    let drawer = Drawer::lines(&[
        "R,8k2,1,1%,0.1,", "R,10k,2,1%,0.3,", "R,15k,4,1%,0.2,", "C,10n,1,5%,0.7,", "C,22n,2,5%,0.4,", "C,33n,0,5%,0.5,",
    ]);
    for buying in [Buying::Forbidden, Buying::AtMost(1), Buying::AtMost(2), Buying::Allowed] {
        for boards in 1..4 {
            for rank in [Rank::Error, Rank::ToBuy, Rank::PartNumbers, Rank::Cost] {
                let drawer = drawer.clone().boards(boards, 0).buying(buying);
                let goals = Goals { rank, ..wide(40.0) };
                compare_drawer("sallen-key", &drawer.problem(sallen_key(&drawer), goals.clone()));
                compare_drawer("tow-thomas", &drawer.problem(tow_thomas(&drawer), goals));
            }
        }
    }
}

#[test]
fn a_silent_pair_with_a_part_number_of_its_own_where_the_others_run_short() {
    // RG = RQ = RF = 15k leaves one 15k: RA = RB need the two 10k, the fifth part number.
    let drawer = Drawer::lines(&["R,8k2,1,,,", "R,10k,2,,,", "R,15k,4,,,", "C,10n,1,,,", "C,22n,1,,,"]);
    compare_drawer("tow-thomas", &drawer.problem(tow_thomas(&drawer), wide(40.0)));
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
        true => format!("0.{}", 1 + numbers.below(prices)),
        false => String::new(),
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
            let there = ["", "1", "1", "0"][numbers.below(4)];
            // With several boards at one price: what a board costs does not depend on which of them it has.
            let price = if boards > 1 { price_here.clone() } else { price(numbers) };
            lines.push(format!("{letter},{text},{there},1%,{price},{}", format_part(true_value, kind)));
        }
    }
    lines
}

/// A drawer drawn at random.
fn drawn_drawer(numbers: &mut Numbers, with: With) -> Drawer {
    let (nr, nc) = (2 + numbers.below(3), 2 + numbers.below(2));
    if !with.stock {
        return Drawer::of_values(drawn_values(numbers, R, nr), drawn_values(numbers, C, nc));
    }
    let boards = if with.measured { 1 + numbers.below(3) as u64 } else { [1, 1, 2, 2, 3, 4][numbers.below(6)] };
    let mut all = lines(numbers, R, nr, boards, with);
    all.extend(lines(numbers, C, nc, boards, with));
    let mut drawer = Drawer::lines(&all.iter().map(String::as_str).collect::<Vec<_>>());
    drawer = drawer.boards(boards, [0, 0, 1, 2][numbers.below(4)]);
    if with.buying {
        drawer.supply.buying =
            [Buying::AtMost(1), Buying::AtMost(2), Buying::AtMost(3), Buying::Allowed][numbers.below(4)];
        if !with.cost && numbers.below(2) == 0 {
            drawer = drawer.beside(R, ["13k", "13k 30k"][numbers.below(2)]);
        }
        if !with.cost && numbers.below(2) == 0 {
            // Labels of which only measured parts are there.
            for kind in [R, C] {
                let lots = || drawer.supply.lots().map(|(_, lot)| lot).filter(move |lot| lot.kind == kind);
                let is_plain = |value| lots().any(|lot| lot.nominal == value && lot.measured.is_none());
                let label = lots().map(|lot| lot.nominal).find(|label| !is_plain(*label));
                if let Some(label) = label {
                    drawer = drawer.beside(kind, &format_part(label, kind));
                }
            }
        }
    }
    drawer
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
    if std::env::var("EX_NOSILENT").is_ok() && (id.starts_with("tow") || id.starts_with("first-order-all")) { return None; } // EXPLORE
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
    (section_size(&section) < 30_000.0).then_some(section)
}

/// A problem of one section drawn at random.
fn drawn(numbers: &mut Numbers, with: With) -> Option<Problem> {
    let drawer = drawn_drawer(numbers, with);
    let section = drawn_section(numbers, &drawer, with)?;
    let all_pass = section.target.shape.is_all_pass();
    let mut goals = wide(if all_pass { 2.0 } else { [40.0, 40.0, 10.0][numbers.below(3)] });
    if with.demands && numbers.below(4) == 0 {
        goals.max_part_numbers = Some(2 + numbers.below(4));
    }
    goals.rank = match with {
        With { cost: true, .. } => [Rank::Cost, Rank::Cost, Rank::Error][numbers.below(3)],
        With { buying: true, .. } => [Rank::Error, Rank::ToBuy, Rank::PartNumbers][numbers.below(3)],
        _ => Rank::Error,
    };
    goals.each_board_its_own = with.measured && numbers.below(2) == 0;
    let mut problem = drawer.problem(section, goals);
    let w0 = problem.sections[0].target.w0;
    problem.criterion.band = [None, Some((w0 / 3.0, w0 * 2.0)), Some((w0 / 2.0, w0 * 4.0))][numbers.below(3)];
    Some(problem)
}

/// Compares so many problems of each seed; says of all that fail, which.
fn compare_drawn(runs: &[(u64, usize, With)]) -> Vec<(Problem, Outcome)> {
    let (mut seen, mut failed) = (Vec::new(), Vec::new());
    for &(seed, count, with) in runs {
        let count = count * std::env::var("EX_COUNT").map_or(1, |c| c.parse::<usize>().unwrap()); // EXPLORE
        let seed = seed + std::env::var("EX_SEED").map_or(0, |c| c.parse::<u64>().unwrap()); // EXPLORE
        let mut numbers = Numbers(seed);
        let mut number = 0;
        while number < count {
            let Some(problem) = drawn(&mut numbers, with) else { continue };
            let label = format!("seed {seed}, problem {number}");
            number += 1;
            match std::panic::catch_unwind(|| compare_drawer(&label, &problem)) {
                Ok(outcome) => seen.push((problem, outcome)),
                Err(_) => failed.push(label),
            }
        }
    }
    assert!(failed.is_empty(), "{} failed: {failed:?}", failed.len());
    seen
}

#[test]
fn drawn_with_stock() {
    compare_drawn(&[
        (1, 60, With { stock: true, ..With::default() }),
        (2, 60, With { stock: true, demands: true, ..With::default() }),
    ]);
}

#[test]
fn drawn_with_buying() {
    compare_drawn(&[
        (3, 60, With { stock: true, buying: true, ..With::default() }),
        (4, 60, With { stock: true, buying: true, demands: true, ..With::default() }),
    ]);
}

#[test]
fn drawn_with_cost() {
    compare_drawn(&[
        (5, 60, With { stock: true, buying: true, cost: true, ..With::default() }),
        (6, 60, With { stock: true, cost: true, demands: true, ..With::default() }),
    ]);
}

#[test]
fn drawn_with_measured_parts() {
    compare_drawn(&[
        (7, 60, With { stock: true, measured: true, ..With::default() }),
        (8, 60, With { stock: true, measured: true, demands: true, ..With::default() }),
    ]);
}

#[test]
fn drawn_with_measured_and_unmeasured_parts_of_one_label() {
    compare_drawn(&[
        (16, 60, With { stock: true, measured: true, mixed: true, ..With::default() }),
        (17, 60, With { stock: true, measured: true, mixed: true, buying: true, ..With::default() }),
    ]);
}

#[test]
fn drawn_with_pairs() {
    compare_drawn(&[
        (9, 40, With { pairs: true, ..With::default() }),
        (10, 40, With { pairs: true, demands: true, ..With::default() }),
        (11, 40, With { stock: true, pairs: true, demands: true, ..With::default() }),
    ]);
}

#[test]
fn drawn_with_everything() {
    let all = With { stock: true, buying: true, cost: true, measured: true, mixed: false, pairs: true, demands: true };
    compare_drawn(&[
        (12, 40, With { stock: true, buying: true, pairs: true, ..With::default() }),
        (13, 40, With { stock: true, measured: true, pairs: true, ..With::default() }),
        (14, 40, With { stock: true, measured: true, buying: true, demands: true, ..With::default() }),
        (15, 40, all),
    ]);
}
