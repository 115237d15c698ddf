//! How far the figures and the response of built boards are spread: by drawing boards, and from the sensitivities.

use rayon::prelude::*;

use super::built::{Built, BuiltPart, FigureSensitivity, Reel, Sensitivities};
use super::tolerance::{Boards, Draw, Tolerances};
use crate::target::{Biquad, Criterion, Figures, Measure, Section, Yardstick};

/// Where the values of drawn boards lie.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Quantiles {
    /// Not exceeded by one board in forty.
    pub low: f64,
    /// Not exceeded by half of the boards.
    pub median: f64,
    /// Exceeded by one board in forty.
    pub high: f64,
    /// The standard deviation.
    pub deviation: f64,
}

impl Quantiles {
    /// Of a list of numbers; `None` without one. Each quantile is one of the numbers, by its rank.
    fn of(mut values: Vec<f64>) -> Option<Quantiles> {
        values.sort_by(f64::total_cmp);
        let count = values.len();
        let at =
            |share: f64| values.get(((share * count as f64).ceil() as usize).clamp(1, count.max(1)) - 1).copied();
        let mean = values.iter().sum::<f64>() / count as f64;
        let squares: f64 = values.iter().map(|value| (value - mean).powi(2)).sum();
        let deviation = if count > 1 { (squares / (count - 1) as f64).sqrt() } else { 0.0 };
        Some(Quantiles { low: at(0.025)?, median: at(0.5)?, high: at(0.975)?, deviation })
    }
}

/// The spread of one section's figures, in their own units; `None` for what the shape has not.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SectionSpread {
    /// Pole frequency, rad/s.
    pub w0: Option<Quantiles>,
    /// Pole quality factor.
    pub q: Option<Quantiles>,
    /// Signed gain.
    pub gain: Option<Quantiles>,
    /// Zero frequency of a notch, rad/s.
    pub wz: Option<Quantiles>,
}

/// What drawn boards are like.
#[derive(Clone, Debug, PartialEq)]
pub struct Spread {
    /// How many boards were drawn.
    pub boards: usize,
    /// How many of them are unstable; they are in none of the quantiles.
    pub unstable: usize,
    /// The figures of each section.
    pub sections: Vec<SectionSpread>,
    /// The error against the target, in the unit of the measure.
    pub error: Option<Quantiles>,
}

const BLOCK: usize = 512;

/// Draws boards and looks where their figures lie. The same for any number of threads.
pub fn spread(built: &Built, tolerances: &Tolerances, yardstick: &Yardstick, seed: u64, boards: usize) -> Spread {
    let ready = Boards::new(built, tolerances);
    let mut streams = Vec::new();
    let mut stream = Draw::new(seed, tolerances.distribution);
    for start in (0..boards).step_by(BLOCK) {
        streams.push((stream.clone(), BLOCK.min(boards - start)));
        stream = stream.next_block();
    }
    let drawn: Vec<Vec<Option<Sample>>> = streams
        .into_par_iter()
        .map(|(mut draw, count)| {
            let (mut ready, mut board) = (ready.clone(), Vec::new());
            let one = |_| {
                ready.draw(&mut draw, &mut board);
                Sample::of(built, &board, yardstick)
            };
            (0..count).map(one).collect()
        })
        .collect();
    let stable: Vec<Sample> = drawn.into_iter().flatten().flatten().collect();
    let of = |value: &dyn Fn(&Sample) -> Option<f64>| -> Option<Quantiles> {
        Quantiles::of(stable.iter().map(value).collect::<Option<Vec<f64>>>()?)
    };
    let section = |k: usize| SectionSpread {
        w0: of(&|sample| Some(sample.figures[k].w0)),
        q: of(&|sample| sample.figures[k].q),
        gain: of(&|sample| Some(sample.figures[k].gain)),
        wz: of(&|sample| sample.figures[k].wz),
    };
    Spread {
        boards,
        unstable: boards - stable.len(),
        sections: (0..built.sections.len()).map(section).collect(),
        error: of(&|sample| Some(sample.error)),
    }
}

/// One board.
struct Sample {
    figures: Vec<Figures>,
    error: f64,
}

impl Sample {
    /// `None` for an unstable board.
    fn of(built: &Built, board: &[Biquad], yardstick: &Yardstick) -> Option<Sample> {
        let pairs = built.sections.iter().zip(board);
        let stable = pairs.clone().all(|(section, h)| h.is_stable(section.target.shape.order()));
        let figures = pairs.map(|(section, h)| section.target.figures_of(h)).collect();
        stable.then(|| Sample { figures, error: yardstick.deviation(board).error })
    }
}

/// A measure of the response, by which tolerances can be judged: the weighted one, which has no frequency, gives way to
/// decibels.
pub(super) fn response_yardstick(targets: &[Section], mut criterion: Criterion) -> Yardstick {
    if matches!(criterion.measure, Measure::Weighted(_)) {
        criterion.measure = Measure::Decibel;
    }
    Yardstick::new(targets, criterion)
}

/// Standard deviations that follow from the sensitivities.
#[derive(Clone, Debug, PartialEq)]
pub struct Deviations {
    /// Relative, of the figures of each section; zero for what the shape has not.
    pub sections: Vec<FigureSensitivity>,
    /// The largest of the response, and where it is, rad/s: of the magnitude in dB, or, under the vector measure, of the
    /// relative error vector. Taken where the target lies above the floor.
    pub response: (f64, f64),
}

/// The reel of each piece of a part, and what its half-width does, for a slope of the slot's value.
fn pieces<'a>(part: &'a BuiltPart, tolerances: &'a Tolerances, slope: f64) -> impl Iterator<Item = (Reel, f64)> + 'a {
    let shares = part.shares();
    part.pieces
        .iter()
        .zip(shares)
        .map(move |(piece, share)| (piece.reel(part.kind), slope * share * tolerances.half_width(part.kind, piece)))
}

/// The standard deviations that small errors cause: exact to first order, without a draw.
pub fn deviations(built: &Built, tolerances: &Tolerances, yardstick: &Yardstick) -> Deviations {
    let sensitivities: Vec<Sensitivities> = built.sections.iter().map(Sensitivities::of).collect();
    let figures = |(section, sensitivities): (&super::built::BuiltSection, &Sensitivities)| {
        let deviation = |figure: fn(&FigureSensitivity) -> f64| {
            let parts = section.parts.iter().enumerate();
            let list: Vec<_> =
                parts.flat_map(|(k, part)| pieces(part, tolerances, figure(&sensitivities.figures(k)))).collect();
            tolerances.deviation(&list)
        };
        FigureSensitivity {
            f0: deviation(|s| s.f0),
            q: deviation(|s| s.q),
            gain: deviation(|s| s.gain),
            fz: deviation(|s| s.fz),
        }
    };
    let sections = built.sections.iter().zip(&sensitivities).map(figures).collect();
    Deviations { sections, response: largest_response(built, tolerances, yardstick, &sensitivities) }
}

fn largest_response(
    built: &Built,
    tolerances: &Tolerances,
    yardstick: &Yardstick,
    sensitivities: &[Sensitivities],
) -> (f64, f64) {
    let vector = matches!(yardstick.criterion().measure, Measure::Vector);
    let parts: Vec<&BuiltPart> = built.sections.iter().flat_map(|section| &section.parts).collect();
    let samples: Vec<_> = yardstick.samples().iter().filter(|s| s.power > yardstick.floor_power()).collect();
    let mut slopes: Vec<Vec<[f64; 2]>> = Vec::new();
    for sample in &samples {
        let all = sensitivities.iter().flat_map(|s| s.response(sample.w));
        slopes.push(all.map(|s| [s.re, if vector { s.im } else { 0.0 }]).collect());
    }
    if yardstick.criterion().ignore_gain {
        // What a part does to all frequencies alike is taken out with the best flat gain.
        for part in 0..parts.len() {
            let column = slopes.iter().map(|line| line[part][0]);
            let (low, high) = column.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), s| (l.min(s), h.max(s)));
            slopes.iter_mut().for_each(|line| line[part][0] -= 0.5 * (low + high));
        }
    }
    let unit = if vector { 1.0 } else { 20.0 / std::f64::consts::LN_10 };
    let deviation = |line: &Vec<[f64; 2]>| {
        let component = |axis: usize| {
            let list: Vec<_> =
                parts.iter().zip(line).flat_map(|(part, slope)| pieces(part, tolerances, slope[axis])).collect();
            tolerances.deviation(&list)
        };
        unit * component(0).hypot(component(1))
    };
    let found = samples.iter().zip(&slopes).map(|(sample, line)| (deviation(line), sample.w));
    // A part that makes the response vanish has no relative sensitivity there.
    let finite = found.filter(|(deviation, _)| deviation.is_finite());
    finite.fold((0.0, yardstick.band().0), |most, here| if here.0 > most.0 { here } else { most })
}
