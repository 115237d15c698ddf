//! Fronts against an independent brute force on problems drawn at random with a fixed seed, and what must hold of every
//! front.
#![allow(clippy::unwrap_used)]

mod support;

use std::sync::Arc;

use roundwell::circuit::{self, Circuit};
use roundwell::parts::{Series, Shelf};
use roundwell::search::{Goals, Problem, SectionProblem, Unwatched, shortlist};
use roundwell::target::{Biquad, Section, Shape};
use roundwell::units::{Kind, Value};
use support::*;

/// The figures that a set gives, as a target: from the coefficients of the transfer function.
fn target_of(section: &SectionProblem, values: &[f64]) -> Option<Section> {
    let output = section.output();
    let (n, d) = output.transfer.coefficients(values);
    let fixed = |list: &[f64]| [0, 1, 2].map(|k| list.get(k).copied().unwrap_or(0.0));
    let h = Biquad { num: fixed(&n), den: fixed(&d) };
    let order = output.shape.order();
    let fz = (output.shape == Shape::Notch).then(|| (n[0] / n[2]).sqrt());
    let like = Section::new("A", output.shape, 1.0, (order == 2).then_some(1.0), 1.0, fz.map(|_| 1.0)).unwrap();
    let mut figures = like.figures_of(&h);
    if let Some(wz) = fz.filter(|wz| *wz < figures.w0) {
        figures = Section { w0: 2.0 * wz, wz: Some(wz), ..like }.figures_of(&h);
    }
    let q = figures.q;
    (h.is_stable(order) && q.is_none_or(|q| (0.2..40.0).contains(&q)))
        .then(|| Section::new("A", output.shape, figures.w0, q, figures.gain, figures.wz).ok())
        .flatten()
}

/// A problem drawn at random: a target near a set that exists, small shelves, now and then a demand.
fn drawn(numbers: &mut Numbers, circuit: &Arc<Circuit>, output: &str) -> (String, Problem) {
    let r = series(Kind::Resistor, Series::E24, "1k", "100k");
    let c = series(Kind::Capacitor, Series::E12, "1n", "100n");
    let taken = circuit.output(output).unwrap();
    // Few enough values for some ten thousand sets.
    let choices = taken.filled(circuit).count() as f64;
    let most = (numbers.between(2e3, 2e4).powf(1.0 / choices) as usize).max(2);
    loop {
        let shelf = |numbers: &mut Numbers, all: &Shelf, count| {
            let narrow = numbers.below(2) == 0;
            let start = if narrow { numbers.below(all.len() - 24) } else { 0 };
            let range = &all.values()[start..if narrow { start + 24 } else { all.len() }];
            Shelf::new(all.kind(), numbers.some_of(range, count)).unwrap()
        };
        let (rs, cs) = (shelf(numbers, &r, most + 1), shelf(numbers, &c, most));
        let placeholder = Section::new("A", taken.shape, 1.0, (taken.shape.order() == 2).then_some(1.0), 1.0, None);
        let mut section = SectionProblem::new(placeholder.unwrap(), circuit.clone(), output, &rs, &cs).unwrap();
        let mut label = format!("{} {output}", circuit.id);
        // The target: what some set gives, a little off.
        let mut planted: Vec<f64> = vec![1.0; circuit.slots.len()];
        for (value, shelf) in planted.iter_mut().zip(&section.shelves) {
            *value = shelf.values()[numbers.below(shelf.len())].to_f64();
        }
        for tie in &section.equal {
            tie.iter().for_each(|&s| planted[s] = planted[tie[0]]);
        }
        let Some(mut target) = target_of(&section, &planted) else { continue };
        let off = numbers.below(4);
        if off > 0 {
            let reach = [1.0, 1.0001, 1.01, 1.2][off];
            let mut nudge = |x: &mut f64| *x *= numbers.between(1.0 / reach, reach);
            nudge(&mut target.w0);
            nudge(&mut target.gain);
            target.q.as_mut().map(&mut nudge);
            target.wz.as_mut().map(&mut nudge);
        }
        let all_pass = target.shape.is_all_pass();
        section.target = target;
        // Demands on slots.
        let any = |numbers: &mut Numbers, section: &SectionProblem| {
            let filled: Vec<usize> = section.output().filled(&section.circuit).collect();
            filled[numbers.below(filled.len())]
        };
        let mut own_shelf = false;
        for _ in 0..numbers.below(3) {
            let slot = any(numbers, &section);
            let all = if circuit.slots[slot].kind == Kind::Resistor { &r } else { &c };
            match numbers.below(4) {
                0 => {
                    let pin = section.shelves[slot].values()[numbers.below(section.shelves[slot].len())];
                    let together = section.equal.iter().find(|e| e.contains(&slot)).cloned().unwrap_or(vec![slot]);
                    for s in together {
                        section.shelves[s] = Shelf::new(circuit.slots[s].kind, [pin]).unwrap();
                    }
                    own_shelf = true;
                    label += &format!(", {} pinned to {pin}", circuit.slots[slot].name);
                }
                1 => {
                    let other = any(numbers, &section);
                    let free = |s| !section.equal.iter().any(|e| e.contains(&s));
                    let alike = circuit.slots[slot].kind == circuit.slots[other].kind
                        && section.shelves[slot] == section.shelves[other];
                    if slot != other && alike && free(slot) && free(other) {
                        section.equal.push(vec![slot, other]);
                        label += &format!(", {} = {}", circuit.slots[slot].name, circuit.slots[other].name);
                    }
                }
                2 => {
                    let mut values: Vec<Value> = numbers.some_of(all.values(), most);
                    values.push(section.shelves[slot].values()[0]);
                    let free = |s| !section.equal.iter().any(|e| e.contains(&s));
                    if free(slot) {
                        section.shelves[slot] = Shelf::new(all.kind(), values).unwrap();
                        own_shelf = true;
                        label += &format!(", {} with its own shelf", circuit.slots[slot].name);
                    }
                }
                _ => {
                    let size: f64 = taken.filled(circuit).map(|s| section.shelves[s].len() as f64).product();
                    if size < 6e4 {
                        section.equal.clear();
                        label += ", untied";
                    }
                }
            }
        }
        let limits = if all_pass { [2.0, 0.3, 0.05, 1e-3] } else { [20.0, 3.0, 1.0, 0.05] };
        let mut goals = wide(limits[numbers.below(4)]);
        goals.alternatives = if own_shelf { 0 } else { [0, 0, 0, 2][numbers.below(4)] };
        goals.max_part_numbers = (numbers.below(6) == 0).then(|| 2 + numbers.below(4));
        goals.error_resolution = [SAME, SAME, goals.error_limit / 20.0][numbers.below(3)];
        let mut problem = problem(section, goals);
        if !all_pass {
            problem.criterion.ignore_gain = numbers.below(5) == 0;
            problem.criterion.floor_db = [60.0, 60.0, 30.0][numbers.below(3)];
        }
        let section = &problem.sections[0];
        let shelves: Vec<String> = taken
            .filled(circuit)
            .map(|s| {
                format!(
                    "\n  {}: {:?}",
                    circuit.slots[s].name,
                    section.shelves[s].values().iter().map(Value::to_string).collect::<Vec<_>>()
                )
            })
            .collect();
        label += &format!(
            "\n {:?}\n {:?}\n {:?}\n equal {:?}{}",
            section.target,
            problem.criterion,
            problem.goals,
            section.equal,
            shelves.concat()
        );
        return (label, problem);
    }
}

/// Runs `rounds` problems drawn at random through every output of the library.
fn every_output(seed: u64, rounds: usize, check: &mut dyn FnMut(&mut Numbers, &str, &Problem)) {
    for circuit in circuit::library() {
        let circuit = Arc::new(circuit.clone());
        for output in &circuit.outputs {
            let mut numbers = Numbers(seed);
            for round in 0..rounds {
                let (label, problem) = drawn(&mut numbers, &circuit, &output.name);
                check(&mut numbers, &format!("seed {seed}, round {round}: {label}"), &problem);
            }
        }
    }
}

#[test]
fn problems_drawn_at_random() {
    every_output(20_260_101, 8, &mut |_, label, problem| {
        compare(label, problem);
    });
}

#[test]
fn fronts_fall_strictly() {
    every_output(3, 6, &mut |_, label, problem| {
        let front = listed(&shortlist(problem, &Unwatched));
        for pair in front.windows(2) {
            assert!(pair[0].0 < pair[1].0 && pair[1].1 < pair[0].1, "{label}: {front:?}");
        }
    });
}

/// The best error with at most `count` part numbers.
fn best_up_to(front: &[(usize, f64)], count: usize) -> f64 {
    front.iter().filter(|(c, _)| *c <= count).map(|(_, e)| *e).fold(f64::INFINITY, f64::min)
}

#[test]
fn more_values_never_make_it_worse() {
    let r = series(Kind::Resistor, Series::E24, "1k", "100k");
    let c = series(Kind::Capacitor, Series::E12, "1n", "100n");
    every_output(11, 2, &mut |numbers, label, problem| {
        let mut problem = problem.clone();
        problem.goals =
            Goals { max_part_numbers: problem.goals.max_part_numbers, ..wide(problem.goals.error_limit.min(1.0)) };
        let before = shortlist(&problem, &Unwatched);
        for _ in 0..3 {
            let (more_r, more_c) = (numbers.some_of(r.values(), 3), numbers.some_of(c.values(), 2));
            for shelf in &mut problem.sections[0].shelves {
                let more = if shelf.kind() == Kind::Resistor { &more_r } else { &more_c };
                *shelf = Shelf::new(shelf.kind(), shelf.values().iter().chain(more).copied()).unwrap();
            }
        }
        let after = shortlist(&problem, &Unwatched);
        assert!(after.within_limit || !before.within_limit, "{label}");
        if before.within_limit {
            let (before, after) = (listed(&before), listed(&after));
            for &(count, error) in &before {
                assert!(best_up_to(&after, count) <= error + SAME, "{label}: {before:?} {after:?}");
            }
        }
    });
}

#[test]
fn one_thread_and_four_give_the_same() {
    let threads = |n| rayon::ThreadPoolBuilder::new().num_threads(n).build().unwrap();
    let (one, four) = (threads(1), threads(4));
    let same = |label: &str, problem: &Problem| {
        let run = |pool: &rayon::ThreadPool| pool.install(|| format!("{:?}", shortlist(problem, &Unwatched)));
        let (a, b) = (run(&one), run(&four));
        assert_eq!(a, b, "{label}");
    };
    every_output(5, 2, &mut |_, label, problem| same(label, problem));
    // Shelves large enough for the work to be divided, and a board of several sections.
    let r = series(Kind::Resistor, Series::E24, "1k", "100k");
    let c = series(Kind::Capacitor, Series::E12, "1n", "100n");
    let of = |name: &str, q| {
        let target = Section { name: name.into(), ..second(Shape::LowPass, 1e3, q, 1.0) };
        section(target, "tow-thomas", "low-pass", &r, &c)
    };
    let mut board = problem(of("A", 0.5412), Goals { alternatives: 2, ..Goals::default() });
    same("large", &board);
    board.sections.push(of("B", 1.3066));
    same("two sections", &board);
}
