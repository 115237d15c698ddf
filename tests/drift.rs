//! Drift with temperature and age, against closed forms and a brute force.

#![allow(clippy::unwrap_used)]

mod support;

use std::collections::BTreeSet;

use proptest::prelude::*;
use roundwell::analysis::{
    Boards, Built, BuiltPart, BuiltSection, Climate, Distribution, Drift, Joint, KindDrift, Tolerances, drift,
};
use roundwell::target::{Criterion, Measure, Section, Shape};
use roundwell::units::{Kind, Value, parse_part};

fn section(target: Section, id: &str, output: &str, values: &[(&str, &str)]) -> BuiltSection {
    let circuit = support::library(id);
    let part = |(slot, place): (usize, &roundwell::circuit::Slot)| {
        let text = values.iter().find(|(name, _)| *name == place.name)?.1;
        let value = parse_part(text, place.kind).unwrap();
        Some(BuiltPart { slot, kind: place.kind, value, pieces: vec![value.into()], joint: Joint::Sum })
    };
    let parts = circuit.slots.iter().enumerate().filter_map(part).collect();
    let output = circuit.outputs.iter().position(|o| o.name == output).unwrap();
    BuiltSection { target, circuit, output, parts }
}

fn board(section: BuiltSection) -> Built {
    Built { title: String::new(), criterion: Criterion::default(), sections: vec![section] }
}

fn first_order() -> Built {
    let target = Section::new("A", Shape::FirstOrderLowPass, 1e4, None, 1.0, None).unwrap();
    board(section(target, "rc-low-pass", "low-pass", &[("R1", "10k"), ("C1", "10n"), ("RA", "10k"), ("RB", "10k")]))
}

fn sallen_key() -> Built {
    let target = Section::new("A", Shape::LowPass, 1e4, Some(1.2), 1.0, None).unwrap();
    let values = [("R1", "6k8"), ("R2", "12k"), ("C1", "22n"), ("C2", "4n7")];
    board(section(target, "sallen-key-low-pass", "low-pass", &values))
}

fn exact(mean: f64) -> KindDrift {
    KindDrift { low: mean * 1e-6, high: mean * 1e-6, tracking: 0.0, ageing: 0.0 }
}

fn either(limit: f64, tracking: f64) -> KindDrift {
    KindDrift { low: -limit * 1e-6, high: limit * 1e-6, tracking: tracking * 1e-6, ageing: 0.0 }
}

fn climate(resistors: KindDrift, capacitors: KindDrift) -> Climate {
    Climate { coldest: -45.0, hottest: 35.0, resistors, capacitors }
}

fn drifted(built: &Built, climate: &Climate) -> Drift {
    drift(built, climate, &built.yardstick())
}

// Source: closed form, w0 = 1/(R C) with R and C proportional to 1 + coefficient x temperature difference.
#[test]
fn a_first_order_section_follows_its_closed_form() {
    let found = drifted(&first_order(), &climate(exact(100.0), exact(-200.0)));
    let change = |kelvin: f64| 1.0 / ((1.0 + 100e-6 * kelvin) * (1.0 - 200e-6 * kelvin)) - 1.0;
    let f0 = found.sections[0].f0.temperature;
    assert!((f0.low - change(-45.0)).abs() < 1e-12 && (f0.high - change(35.0)).abs() < 1e-12, "{f0:?}");
    // Resistors that rise as the capacitors fall leave f0 where it is, but for the product of both.
    let even = drifted(&first_order(), &climate(exact(200.0), exact(-200.0))).sections[0].f0.temperature;
    assert!(even.low.abs() < 1.1 * (200e-6f64 * 45.0).powi(2) && even.high < 1.1 * (200e-6f64 * 45.0).powi(2));
    // |H| falls by 20 dB per decade above f0: at the upper end of the band the change in dB is that of f0.
    let decibels = 20.0 * (1.0 / (1.0 + f0.low)).log10();
    assert!((found.temperature.0 / decibels - 1.0).abs() < 0.02, "{:?} {decibels}", found.temperature);
}

/// Ratios track: where parts of a kind have one coefficient, Q does not move, and f0 does.
#[test]
fn q_moves_by_the_tracking_alone() {
    let q = |tracking: f64| {
        let found = drifted(&sallen_key(), &climate(either(100.0, tracking), either(30.0, tracking.min(60.0))));
        (found.sections[0].q.unwrap().temperature, found.sections[0].f0.temperature)
    };
    let (still, f0) = q(0.0);
    assert!(still.low.abs() < 1e-12 && still.high.abs() < 1e-12, "{still:?}");
    let expected = 1.0 / ((1.0 - 100e-6 * 45.0) * (1.0 - 30e-6 * 45.0)) - 1.0;
    assert!((f0.high - expected).abs() < 1e-12, "{f0:?} {expected}");
    // Q = sqrt(R1 R2 C1/C2)/(R1 + R2): capacitors 10 ppm/K apart move it by half of that, resistors by less.
    let (moved, _) = q(10.0);
    let capacitors = 0.5 * 10e-6 * 45.0;
    assert!(moved.high > capacitors && moved.high < 2.0 * capacitors, "{moved:?}");
}

#[test]
fn age_is_each_parts_own() {
    let aged = |r: f64, c: f64| Climate {
        coldest: 0.0,
        hottest: 0.0,
        resistors: KindDrift { ageing: r, ..exact(0.0) },
        capacitors: KindDrift { ageing: c, ..exact(0.0) },
    };
    let found = drifted(&sallen_key(), &aged(0.01, 0.02)).sections[0];
    // w0 = 1/sqrt(R1 R2 C1 C2); closed form.
    assert!((found.f0.with_age.low - (1.0 / (1.01 * 1.02) - 1.0)).abs() < 1e-12);
    assert!((found.f0.with_age.high - (1.0 / (0.99 * 0.98) - 1.0)).abs() < 1e-12);
    assert!(found.f0.temperature.low.abs() < 1e-12 && found.f0.temperature.high.abs() < 1e-12);
    // The gain of the follower rests on no part.
    assert!(found.gain.with_age.low.abs() < 1e-12 && found.gain.with_age.high.abs() < 1e-12);
}

/// Every choice of coefficients at the ends of a window at either end of the range, for both temperatures, by brute force.
#[test]
fn no_choice_of_coefficients_moves_a_figure_further() {
    let built = sallen_key();
    let none = Tolerances { resistors: 0.0, capacitors: 0.0, distribution: Distribution::Uniform, reel_share: 0.0 };
    let boards = Boards::new(&built, &none);
    let nominal = built.sections[0].target.figures_of(&built.nominal()[0]);
    for (resistors, capacitors) in [(100.0, 200.0), (100.0, 50.0), (50.0, 20.0)] {
        let climate = climate(either(100.0, resistors), either(30.0, capacitors));
        let found = drifted(&built, &climate).sections[0];
        let mut seen = (f64::INFINITY, f64::NEG_INFINITY, f64::INFINITY, f64::NEG_INFINITY);
        for kelvin in [-45.0, 35.0] {
            for bits in 0u32..1 << 6 {
                let up = |k: u32| bits >> k & 1 == 1;
                let errors: Vec<f64> = (built.sections[0].parts.iter().enumerate())
                    .map(|(k, part)| {
                        let (limit, width, window) = match part.kind {
                            Kind::Resistor => (100.0, f64::min(resistors, 200.0), up(4)),
                            Kind::Capacitor => (30.0, f64::min(capacitors, 60.0), up(5)),
                        };
                        let bottom = if window { limit - width } else { -limit };
                        kelvin * 1e-6 * (bottom + if up(k as u32) { width } else { 0.0 })
                    })
                    .collect();
                let figures = built.sections[0].target.figures_of(&boards.with_errors(&errors)[0]);
                let (w0, q) = (figures.w0 / nominal.w0 - 1.0, figures.q.unwrap() / nominal.q.unwrap() - 1.0);
                seen = (seen.0.min(w0), seen.1.max(w0), seen.2.min(q), seen.3.max(q));
            }
        }
        let (f0, q) = (found.f0.temperature, found.q.unwrap().temperature);
        for (found, brute) in [(f0.low, seen.0), (f0.high, seen.1), (q.low, seen.2), (q.high, seen.3)] {
            assert!((found - brute).abs() < 1e-6 * brute.abs(), "{found} {brute}");
        }
    }
}

/// Parts of one part number have one coefficient: an inverting amplifier of equal resistors keeps its gain.
#[test]
fn parts_of_one_number_track() {
    let target = Section::new("A", Shape::FirstOrderLowPass, 1e4, None, -1.0, None).unwrap();
    let gain = |r1: &'static str| {
        let values = [("R1", r1), ("R2", "10k"), ("C2", "10n"), ("C1", "10n")];
        let built = board(section(target.clone(), "inverting-low-pass", "low-pass", &values));
        assert_eq!(built.sections[0].parts.len(), 3, "the slots of the circuit have other names");
        let reels: BTreeSet<Value> = built.sections[0].parts.iter().map(|part| part.value).collect();
        assert_eq!(reels.len(), if r1 == "10k" { 2 } else { 3 });
        drifted(&built, &climate(either(100.0, 200.0), exact(0.0))).sections[0].gain.temperature
    };
    let (equal, other) = (gain("10k"), gain("10k2"));
    assert!(equal.low.abs() < 1e-12 && equal.high.abs() < 1e-12, "{equal:?}");
    // -R2/R1 with one up and the other down by 100 ppm/K x 45 K.
    let expected = (1.0 + 4.5e-3) / (1.0 - 4.5e-3) - 1.0;
    assert!((other.high - expected).abs() < 1e-9, "{other:?} {expected}");
}

/// Under the vector measure the phase counts: a first-order all-pass at f0, closed form |dH/H| = dx/x for x = 1.
#[test]
fn the_phase_of_an_all_pass_drifts() {
    let values = [("R1", "10k"), ("C1", "10n"), ("RA", "10k"), ("RB", "10k")];
    let target = Section::new("A", Shape::FirstOrderAllPass, 1e4, None, 1.0, None).unwrap();
    let mut built = board(section(target, "first-order-all-pass", "all-pass", &values));
    built.criterion.measure = Measure::Vector;
    let found = drifted(&built, &climate(exact(0.0), exact(100.0)));
    assert!((found.temperature.0 / 4.5e-3 - 1.0).abs() < 0.01, "{:?}", found.temperature);
    assert!((found.temperature.1 / 1e4 - 1.0).abs() < 0.02);
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 32, ..ProptestConfig::default() })]

    /// More freedom for the coefficients, wider temperatures and more age never move a figure less.
    #[test]
    fn more_freedom_never_drifts_less(
        limit in 1.0f64..300.0, tracking in 0.0f64..300.0, age in 0.0f64..0.02, more in 1.0f64..2.0,
    ) {
        let built = sallen_key();
        let with = |factor: f64| {
            let kind = KindDrift { ageing: age * factor, ..either(limit * factor, tracking * factor) };
            let wide = Climate { coldest: -40.0 * factor, hottest: 40.0 * factor, resistors: kind, capacitors: kind };
            drifted(&built, &wide)
        };
        let (less, more) = (with(1.0), with(more));
        let pairs = [
            (less.sections[0].f0.with_age, more.sections[0].f0.with_age),
            (less.sections[0].q.unwrap().with_age, more.sections[0].q.unwrap().with_age),
        ];
        for (less, more) in pairs {
            prop_assert!(more.low <= less.low + 1e-12 && more.high >= less.high - 1e-12);
        }
        prop_assert!(more.with_age.0 >= less.with_age.0 - 1e-12);
        prop_assert!(less.with_age.0 >= less.temperature.0 - 1e-12);
    }
}

// Source: closed form, w0 = 1/(R C); what the list says of the capacitor counts whatever the flags say of its kind.
#[test]
fn what_a_stock_list_says_of_a_part_counts_for_it() {
    let mut built = first_order();
    let capacitor = built.sections[0].parts.iter_mut().find(|part| part.kind == Kind::Capacitor).unwrap();
    (capacitor.pieces[0].coefficient, capacitor.pieces[0].ageing) = (Some((-870e-6, -630e-6)), Some(0.02));
    let mut around = climate(either(100.0, 200.0), exact(500.0));
    (around.resistors.ageing, around.capacitors.ageing) = (0.005, 0.3);
    let found = drifted(&built, &around).sections[0].f0;
    let change = |r: f64, c: f64, kelvin: f64, age: f64| {
        1.0 / ((1.0 + r * kelvin + 0.25 * age) * (1.0 + c * kelvin + age)) - 1.0
    };
    // Hot, the resistor may fall and the capacitor falls by 870 ppm/K at most; cold both rise.
    let (high, low) = (change(-100e-6, -870e-6, 35.0, 0.0), change(-100e-6, -870e-6, -45.0, 0.0));
    assert!(
        (found.temperature.high - high).abs() < 1e-12 && (found.temperature.low - low).abs() < 1e-12,
        "{found:?}"
    );
    let (high, low) = (change(-100e-6, -870e-6, 35.0, -0.02), change(-100e-6, -870e-6, -45.0, 0.02));
    assert!((found.with_age.high - high).abs() < 1e-12 && (found.with_age.low - low).abs() < 1e-12, "{found:?}");
}
