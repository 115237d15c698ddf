//! Yield of a filter of four Tow-Thomas sections against a mask at 64 frequencies, and the whole of `vet` beside it.

#![allow(missing_docs)]

use std::f64::consts::TAU;
use std::sync::Arc;

use divan::Bencher;
use roundwell::analysis::{
    Built, BuiltPart, BuiltSection, Conditions, Distribution, Gauge, Joint, Limit, Mask, Reference, Sampling,
    Tolerances, estimate, vet,
};
use roundwell::circuit::find;
use roundwell::target::{Criterion, Section, Shape};
use roundwell::units::{Kind, Value};

fn main() {
    divan::main();
}

/// An eighth-order Butterworth low-pass at 1 kHz; the values are those of its design equations, to three digits.
fn filter() -> Built {
    let sections = [0.5098, 0.6013, 0.9, 2.5629].map(|q: f64| {
        let circuit = Arc::new(find("tow-thomas").expect("a circuit of the library").clone());
        let target = Section::new(format!("Q {q}"), Shape::LowPass, 1e3 * TAU, Some(q), 1.0, None);
        let value = |name: &str| match name {
            "C1" | "C2" => (100, -10),
            "RQ" => ((159.0 * q).round() as u64, 2),
            _ => (159, 2),
        };
        let part = |(slot, place): (usize, &roundwell::circuit::Slot)| {
            let (mantissa, exponent) = value(&place.name);
            let value = Value::new(mantissa, exponent).expect("a part value");
            let kind: Kind = place.kind;
            BuiltPart { slot, kind, value, pieces: vec![value.into()], joint: Joint::Sum }
        };
        let output = circuit.outputs.iter().position(|o| o.name == "low-pass").expect("an output of the circuit");
        let parts = circuit.slots.iter().enumerate().map(part).collect();
        BuiltSection { target: target.expect("a section"), circuit, output, parts }
    });
    Built { title: String::new(), criterion: Criterion::default(), sections: sections.into() }
}

fn mask() -> Mask {
    let limit = |from: f64, to: f64, lower, upper| Limit { from: from * TAU, to: to * TAU, lower, upper };
    let limits = vec![limit(10.0, 700.0, Some(-1.0), Some(1.0)), limit(2e3, 10e3, None, Some(-40.0))];
    Mask { reference: Reference::Dc, limits, delays: Vec::new(), figures: Vec::new() }
}

const TOLERANCES: Tolerances =
    Tolerances { resistors: 0.01, capacitors: 0.05, distribution: Distribution::Uniform, reel_share: 0.0 };

/// A million boards against 2 x 32 frequencies.
#[divan::bench(args = ["uniform", "normal", "reels"], sample_count = 3, sample_size = 1)]
fn a_million_boards(bencher: Bencher, how: &str) {
    let built = filter();
    let gauge = Gauge::with_points(&mask(), &built.targets(), 32);
    let tolerances = match how {
        "normal" => Tolerances { distribution: Distribution::TruncatedNormal, ..TOLERANCES },
        "reels" => Tolerances { reel_share: 0.7, ..TOLERANCES },
        _ => TOLERANCES,
    };
    let sampling = Sampling { boards: 1_000_000, half_width: 0.0, ..Sampling::default() };
    bencher.bench(|| estimate(&built, &tolerances, &gauge, &sampling));
}

/// Everything about that filter.
#[divan::bench(sample_count = 3, sample_size = 1)]
fn one_board_in_full(bencher: Bencher) {
    let conditions = Conditions {
        tolerances: TOLERANCES,
        mask: Some(mask()),
        climate: None,
        real: None,
        levels: None,
        trim: false,
        select: Vec::new(),
        sampling: Sampling::default(),
    };
    let built = filter();
    bencher.bench(|| vet(&built, &conditions));
}
