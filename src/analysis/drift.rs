//! What temperature and age do to a board.

use std::collections::BTreeMap;

use num_complex::Complex64;

use super::built::{Built, BuiltPart, FigureSensitivity, Reel, Sensitivities};
use super::tolerance::{Boards, Distribution, Tolerances};
use crate::target::{Biquad, Measure, Yardstick};
use crate::units::Kind;

/// How the parts of one kind change.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct KindDrift {
    /// The least temperature coefficient that a part of this kind can have, 1/K.
    pub low: f64,
    /// The largest one, 1/K.
    pub high: f64,
    /// How far the coefficients of two part numbers of this kind can be apart, 1/K; no more than `high` − `low` counts.
    pub tracking: f64,
    /// By how much a part can be off at the end of its life, relative, to either side; each part by itself.
    pub ageing: f64,
}

/// Under what a board has to work.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Climate {
    /// The lowest temperature, K above that at which the nominal values hold.
    pub coldest: f64,
    /// The highest temperature, likewise.
    pub hottest: f64,
    /// How resistors change.
    pub resistors: KindDrift,
    /// How capacitors change.
    pub capacitors: KindDrift,
}

impl Climate {
    fn of(&self, kind: Kind) -> &KindDrift {
        match kind {
            Kind::Resistor => &self.resistors,
            Kind::Capacitor => &self.capacitors,
        }
    }
}

/// Between what a figure moves, relative to the nominal board.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Extremes {
    /// The lowest.
    pub low: f64,
    /// The highest.
    pub high: f64,
}

/// How one figure of a section drifts.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct FigureDrift {
    /// By temperature alone.
    pub temperature: Extremes,
    /// By temperature and age together.
    pub with_age: Extremes,
}

/// How one section drifts; `None` for what its shape has not.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SectionDrift {
    /// Pole frequency.
    pub f0: FigureDrift,
    /// Pole quality factor.
    pub q: Option<FigureDrift>,
    /// Gain.
    pub gain: FigureDrift,
    /// Zero frequency of a notch.
    pub fz: Option<FigureDrift>,
}

/// How a board drifts.
#[derive(Clone, Debug, PartialEq)]
pub struct Drift {
    /// The sections in signal order.
    pub sections: Vec<SectionDrift>,
    /// The largest change of the response by temperature alone, and where, rad/s: in dB, or, under the vector measure, of
    /// the vector, relative. Taken where the target lies above the floor.
    pub temperature: (f64, f64),
    /// The largest by temperature and age together.
    pub with_age: (f64, f64),
}

/// One part to buy: its slot's place in the list of all parts, its reel, its share in the slot.
struct Piece {
    part: usize,
    reel: Reel,
    share: f64,
    /// What the stock list says of it.
    coefficient: Option<(f64, f64)>,
    ageing: Option<f64>,
}

struct Drifting<'a> {
    climate: &'a Climate,
    parts: Vec<&'a BuiltPart>,
    pieces: Vec<Piece>,
    boards: Boards,
}

/// How far a board moves at the worst: coefficients and ages such that a figure, or the response at a frequency, moves most.
///
/// Parts of one part number have one coefficient. Those of different part numbers lie anywhere in the range of their kind,
/// but no further apart than its tracking: what depends on ratios of parts alike moves by the tracking alone. A part whose
/// stock list gives its coefficients lies anywhere between those, whatever the others do; its ageing counts likewise. Which
/// coefficients move a figure most follows from the signs of the sensitivities; the board with those is then computed in
/// full.
pub fn drift(built: &Built, climate: &Climate, yardstick: &Yardstick) -> Drift {
    // Only the evaluation of given errors is used: the tolerances do not matter.
    let none = Tolerances { resistors: 0.0, capacitors: 0.0, distribution: Distribution::Uniform, reel_share: 0.0 };
    let parts: Vec<&BuiltPart> = built.sections.iter().flat_map(|section| &section.parts).collect();
    let pieces = (parts.iter().enumerate())
        .flat_map(|(k, part)| {
            let shares = part.shares().into_iter();
            shares.zip(&part.pieces).map(move |(share, piece)| Piece {
                part: k,
                reel: piece.reel(part.kind),
                share,
                coefficient: piece.coefficient,
                ageing: piece.ageing,
            })
        })
        .collect();
    let drifting = Drifting { climate, parts, pieces, boards: Boards::new(built, &none) };
    let sensitivities: Vec<Sensitivities> = built.sections.iter().map(Sensitivities::of).collect();
    let nominal = built.nominal();
    let mut start = 0;
    let mut sections = Vec::new();
    for (k, section) in built.sections.iter().enumerate() {
        let figure = |of: fn(&FigureSensitivity) -> f64, value: &dyn Fn(&Biquad) -> f64| {
            let mut slopes = vec![0.0; drifting.parts.len()];
            (0..section.parts.len()).for_each(|part| slopes[start + part] = of(&sensitivities[k].figures(part)));
            let change = |board: &[Biquad]| value(&board[k]) / value(&nominal[k]) - 1.0;
            let extremes = |with_age: bool| {
                let side = |goal: f64| {
                    let boards = drifting.candidates(&slopes, goal, with_age);
                    boards.iter().map(|board| goal * change(board)).fold(f64::NEG_INFINITY, f64::max) * goal
                };
                let (low, high) = (side(-1.0), side(1.0));
                Extremes { low: low.min(high), high: low.max(high) }
            };
            FigureDrift { temperature: extremes(false), with_age: extremes(true) }
        };
        let figures = |h: &Biquad| section.target.figures_of(h);
        let nan = f64::NAN;
        sections.push(SectionDrift {
            f0: figure(|s| s.f0, &|h| figures(h).w0),
            q: section.target.q.map(|_| figure(|s| s.q, &|h| figures(h).q.unwrap_or(nan))),
            gain: figure(|s| s.gain, &|h| figures(h).gain),
            fz: section.target.wz.map(|_| figure(|s| s.fz, &|h| figures(h).wz.unwrap_or(nan))),
        });
        start += section.parts.len();
    }
    let response = |with_age: bool| drifting.response(&sensitivities, &nominal, yardstick, with_age);
    Drift { sections, temperature: response(false), with_age: response(true) }
}

impl Drifting<'_> {
    /// The boards among which that lies on which a figure is largest (`goal` 1) or smallest (−1); slopes by part.
    ///
    /// For either temperature, and for a window of coefficients at either end of the range of each kind: to first order a
    /// figure is linear in the place of the window, so that no place between serves better.
    fn candidates(&self, slopes: &[f64], goal: f64, with_age: bool) -> Vec<Vec<Biquad>> {
        let mut sums: BTreeMap<Reel, f64> = BTreeMap::new();
        for piece in &self.pieces {
            *sums.entry(piece.reel).or_default() += slopes[piece.part] * piece.share;
        }
        let mut boards = Vec::new();
        for kelvin in [self.climate.coldest, self.climate.hottest] {
            for (resistors_high, capacitors_high) in [(false, false), (false, true), (true, false), (true, true)] {
                let error = |piece: &Piece| {
                    let drift = self.climate.of(piece.reel.0);
                    let width = drift.tracking.clamp(0.0, drift.high - drift.low);
                    let at_top = if piece.reel.0 == Kind::Resistor { resistors_high } else { capacitors_high };
                    let bottom = if at_top { drift.high - width } else { drift.low };
                    let sum = sums.get(&piece.reel).copied().unwrap_or(0.0);
                    let (least, largest) = piece.coefficient.unwrap_or((bottom, bottom + width));
                    let coefficient = if goal * sum * kelvin > 0.0 { largest } else { least };
                    let slope = goal * slopes[piece.part];
                    let ageing = piece.ageing.unwrap_or(drift.ageing);
                    let age = if with_age && slope.abs() > 0.0 { ageing * slope.signum() } else { 0.0 };
                    coefficient * kelvin + age
                };
                let errors: Vec<f64> = self.pieces.iter().map(error).collect();
                let mut left = errors.as_slice();
                let slot = |part: &&BuiltPart| {
                    let (own, rest) = left.split_at(part.pieces.len().min(left.len()));
                    left = rest;
                    part.factor(own) - 1.0
                };
                let by_slot: Vec<f64> = self.parts.iter().map(slot).collect();
                boards.push(self.boards.with_errors(&by_slot));
            }
        }
        boards
    }

    fn response(
        &self,
        sensitivities: &[Sensitivities],
        nominal: &[Biquad],
        yardstick: &Yardstick,
        with_age: bool,
    ) -> (f64, f64) {
        let vector = matches!(yardstick.criterion().measure, Measure::Vector);
        let value = |board: &[Biquad], w: f64| board.iter().map(|h| h.value(w)).product::<Complex64>();
        let above = yardstick.samples().iter().filter(|sample| sample.power > yardstick.floor_power());
        let mut most = (0.0, yardstick.band().0);
        for w in above.map(|sample| sample.w) {
            let all: Vec<Complex64> = sensitivities.iter().flat_map(|s| s.response(w)).collect();
            let directions: &[fn(&Complex64) -> f64] = if vector { &[|s| s.re, |s| s.im] } else { &[|s| s.re] };
            for direction in directions {
                let slopes: Vec<f64> = all.iter().map(direction).collect();
                for goal in [-1.0, 1.0] {
                    for board in self.candidates(&slopes, goal, with_age) {
                        let ratio = value(&board, w) / value(nominal, w);
                        let change = if vector { (ratio - 1.0).norm() } else { 20.0 * ratio.norm().log10().abs() };
                        if change > most.0 {
                            most = (change, w);
                        }
                    }
                }
            }
        }
        most
    }
}
