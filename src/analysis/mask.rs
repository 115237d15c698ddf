//! A mask: limits that a response has to keep, and how a board stands against them.

use super::within::powers_at;
use crate::target::{Biquad, Criterion, Section, Yardstick};

/// To what the decibels of a mask relate.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Reference {
    /// To nothing: 0 dB is a gain of 1.
    Absolute,
    /// To the board's own magnitude at DC.
    Dc,
    /// To the board's own largest magnitude, at the frequencies of the mask and of the band.
    Peak,
    /// To the board's own magnitude at this angular frequency, rad/s.
    At(f64),
}

/// A limit of the magnitude or of the group delay over a range of frequencies; at least one of both sides is given.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Limit {
    /// Where it begins, rad/s.
    pub from: f64,
    /// Where it ends, rad/s; not below `from`.
    pub to: f64,
    /// The magnitude must not be below this, dB; the group delay likewise, s.
    pub lower: Option<f64>,
    /// It must not be above this.
    pub upper: Option<f64>,
}

/// What a limit of a single section is about.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Figure {
    /// Pole frequency, rad/s.
    F0,
    /// Pole quality factor.
    Q,
    /// Zero frequency of a notch, rad/s.
    Fz,
    /// How far the magnitude at the null of a notch lies under that of its higher pass-band, dB.
    Depth,
}

/// A limit of a figure of one section; at least one of both sides is given.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct FigureLimit {
    /// Index of the section.
    pub section: usize,
    /// The figure.
    pub figure: Figure,
    /// It must not be below this.
    pub lower: Option<f64>,
    /// It must not be above this.
    pub upper: Option<f64>,
}

/// What a board has to keep.
#[derive(Clone, Debug, PartialEq)]
pub struct Mask {
    /// To what the decibels relate.
    pub reference: Reference,
    /// Limits of the magnitude.
    pub limits: Vec<Limit>,
    /// Limits of the group delay of the whole cascade.
    pub delays: Vec<Limit>,
    /// Limits of figures.
    pub figures: Vec<FigureLimit>,
}

/// How a board stands against one limit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Standing {
    /// Room to the limit: negative where it is broken. In dB for magnitudes and depths, in s for group delays, otherwise
    /// relative to the limit.
    /// NaN where the figure does not exist, such as the depth of a null that is none.
    pub margin: f64,
    /// Where the room is least, rad/s; `None` for figures.
    pub at: Option<f64>,
}

impl Standing {
    /// Whether the limit is kept.
    pub fn is_met(&self) -> bool {
        self.margin >= 0.0
    }
}

/// The most room to a limit that is told, dB: a response that vanishes lies infinitely far below its limit.
const MOST_ROOM: f64 = 1000.0;

/// Where the frequencies of one limit lie in the list, and its sides: ratios of power, or group delays in s.
#[derive(Clone, Debug)]
struct Piece {
    points: std::ops::Range<usize>,
    lower: f64,
    upper: f64,
}

/// A mask made ready for fast and repeated use.
///
/// A limit is tested at the frequencies at which the response error is taken in its range (see
/// [`Yardstick`]), both ends included, or at frequencies that are given.
#[derive(Clone, Debug)]
pub struct Gauge {
    reference: Reference,
    /// ω², limit after limit, then those that only serve to find the peak.
    points: Vec<f64>,
    pieces: Vec<Piece>,
    /// ω for the limits of the group delay, rad/s.
    delay_points: Vec<f64>,
    delays: Vec<Piece>,
    figures: Vec<FigureLimit>,
    orders: Vec<usize>,
}

/// Space for the powers and group delays at the frequencies of a gauge, kept from board to board.
#[derive(Clone, Debug, Default)]
pub struct Scratch {
    powers: Vec<f64>,
    delays: Vec<f64>,
}

impl Scratch {
    /// Space for powers.
    pub(super) fn powers(&mut self) -> &mut Vec<f64> {
        &mut self.powers
    }
}

impl Gauge {
    /// A mask for a cascade of these sections.
    pub fn new(mask: &Mask, sections: &[Section], criterion: Criterion) -> Gauge {
        let grid = |from: f64, to: f64| -> Vec<f64> {
            if to <= from {
                return vec![from];
            }
            Yardstick::new(sections, Criterion { band: Some((from, to)), ..criterion }).frequencies().collect()
        };
        let lists: Vec<Vec<f64>> =
            mask.limits.iter().chain(&mask.delays).map(|limit| grid(limit.from, limit.to)).collect();
        let band = criterion.band_for(sections);
        let extra = if mask.reference == Reference::Peak { grid(band.0, band.1) } else { Vec::new() };
        Gauge::at(mask, sections, &lists, &extra)
    }

    /// The same with `count` frequencies for each limit, in equal logarithmic steps, both ends included.
    pub fn with_points(mask: &Mask, sections: &[Section], count: usize) -> Gauge {
        let steps = count.saturating_sub(1).max(1) as f64;
        let list = |limit: &Limit| {
            (0..count).map(|k| limit.from * (limit.to / limit.from).powf(k as f64 / steps)).collect::<Vec<_>>()
        };
        Gauge::at(mask, sections, &mask.limits.iter().chain(&mask.delays).map(list).collect::<Vec<_>>(), &[])
    }

    /// `lists` has the frequencies of each limit of the magnitude, then of each of the group delay.
    fn at(mask: &Mask, sections: &[Section], lists: &[Vec<f64>], extra: &[f64]) -> Gauge {
        let mut points = Vec::new();
        let mut pieces = Vec::new();
        let power = |decibels: f64| 10f64.powf(decibels / 10.0);
        for (limit, list) in mask.limits.iter().zip(lists) {
            let start = points.len();
            points.extend(list.iter().map(|w| w * w));
            pieces.push(Piece {
                points: start..points.len(),
                lower: limit.lower.map_or(0.0, power),
                upper: limit.upper.map_or(f64::INFINITY, power),
            });
        }
        points.extend(extra.iter().map(|w| w * w));
        let (mut delay_points, mut delays) = (Vec::new(), Vec::new());
        for (limit, list) in mask.delays.iter().zip(&lists[mask.limits.len().min(lists.len())..]) {
            let start = delay_points.len();
            delay_points.extend(list);
            delays.push(Piece {
                points: start..delay_points.len(),
                lower: limit.lower.unwrap_or(f64::NEG_INFINITY),
                upper: limit.upper.unwrap_or(f64::INFINITY),
            });
        }
        let orders = sections.iter().map(|section| section.shape.order()).collect();
        let (reference, figures) = (mask.reference, mask.figures.clone());
        Gauge { reference, points, pieces, delay_points, delays, figures, orders }
    }

    /// How many limits there are: those of the magnitude, those of the group delay, then those of figures.
    pub fn len(&self) -> usize {
        self.pieces.len() + self.delays.len() + self.figures.len()
    }

    /// Whether there is no limit.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// The angular frequencies at which limits of the magnitude are tested, limit after limit, rad/s.
    pub fn tested(&self) -> Vec<f64> {
        let end = self.pieces.last().map_or(0, |piece| piece.points.end);
        self.points[..end].iter().map(|x| x.sqrt()).collect()
    }

    /// At how many frequencies limits are tested, those of the group delay included.
    pub fn frequencies(&self) -> usize {
        self.pieces.last().map_or(0, |piece| piece.points.end) + self.delay_points.len()
    }

    /// The power to which the decibels relate, once the powers at the points are known.
    fn reference_power(&self, board: &[Biquad], powers: &[f64]) -> f64 {
        match self.reference {
            Reference::Absolute => 1.0,
            Reference::Dc => board.iter().map(|h| h.power(0.0)).product(),
            Reference::Peak => powers.iter().copied().fold(0.0, f64::max),
            Reference::At(w) => board.iter().map(|h| h.power(w * w)).product(),
        }
    }

    /// Fills in the powers at the points and gives the reference.
    fn measure(&self, board: &[Biquad], scratch: &mut Scratch) -> f64 {
        powers_at(board, &self.points, &mut scratch.powers);
        self.reference_power(board, &scratch.powers)
    }

    /// Fills in the group delays at the points of their limits.
    fn measure_delays(&self, board: &[Biquad], scratch: &mut Scratch) {
        scratch.delays.clear();
        let delay = |w: &f64| board.iter().map(|h| h.group_delay(*w)).sum::<f64>();
        scratch.delays.extend(self.delay_points.iter().map(delay));
    }

    /// Whether all poles of all sections lie in the left half plane.
    pub fn is_stable(&self, board: &[Biquad]) -> bool {
        board.iter().zip(&self.orders).all(|(h, order)| h.is_stable(*order))
    }

    /// Whether a board keeps all limits; each limit that it breaks is marked in `broken`. An unstable board breaks all.
    pub fn passes(&self, board: &[Biquad], scratch: &mut Scratch, broken: &mut [bool]) -> bool {
        if !self.is_stable(board) {
            broken.fill(true);
            return false;
        }
        let reference = self.measure(board, scratch);
        let mut all = true;
        for (piece, broken) in self.pieces.iter().zip(broken.iter_mut()) {
            let (lower, upper) = (piece.lower * reference, piece.upper * reference);
            // What is not a number lies on no side.
            let kept = scratch.powers[piece.points.clone()]
                .iter()
                .fold(true, |kept, p| kept & (*p >= lower) & (*p <= upper));
            *broken = !kept;
            all &= kept;
        }
        self.measure_delays(board, scratch);
        for (piece, broken) in self.delays.iter().zip(&mut broken[self.pieces.len()..]) {
            let within = |delay: &f64| *delay >= piece.lower && *delay <= piece.upper;
            let kept = scratch.delays[piece.points.clone()].iter().all(within);
            *broken = !kept;
            all &= kept;
        }
        for (limit, broken) in self.figures.iter().zip(&mut broken[self.pieces.len() + self.delays.len()..]) {
            let kept = figure_margin(limit, &board[limit.section], self.orders[limit.section]) >= 0.0;
            *broken = !kept;
            all &= kept;
        }
        all
    }

    /// How a board stands against each limit: those of the magnitude, those of the group delay, then those of figures.
    pub fn standings(&self, board: &[Biquad]) -> Vec<Standing> {
        let mut scratch = Scratch::default();
        let reference = self.measure(board, &mut scratch);
        self.measure_delays(board, &mut scratch);
        let stable = self.is_stable(board);
        let decibels = |ratio: f64| 10.0 * ratio.log10();
        let least = |rooms: &mut dyn Iterator<Item = (f64, f64)>| {
            let least = rooms.reduce(|least, here| if here.0 < least.0 || here.0.is_nan() { here } else { least });
            let (margin, at) = least.unwrap_or((f64::NAN, f64::NAN));
            Standing { margin: if stable { margin } else { f64::NAN }, at: Some(at) }
        };
        let piece = |piece: &Piece| {
            let room = |power: f64| {
                let below =
                    if piece.upper < f64::INFINITY { decibels(piece.upper * reference / power) } else { MOST_ROOM };
                let above = if piece.lower > 0.0 { decibels(power / (piece.lower * reference)) } else { MOST_ROOM };
                if below.is_nan() || above.is_nan() {
                    f64::NAN
                } else {
                    below.min(above).clamp(-MOST_ROOM, MOST_ROOM)
                }
            };
            least(&mut piece.points.clone().map(|k| (room(scratch.powers[k]), self.points[k].sqrt())))
        };
        let delay = |piece: &Piece| {
            let room = |k: usize| (piece.upper - scratch.delays[k]).min(scratch.delays[k] - piece.lower);
            least(&mut piece.points.clone().map(|k| (room(k), self.delay_points[k])))
        };
        let figure = |limit: &FigureLimit| {
            let margin = figure_margin(limit, &board[limit.section], self.orders[limit.section]);
            Standing { margin: if stable { margin } else { f64::NAN }, at: None }
        };
        let delays = self.delays.iter().map(delay);
        self.pieces.iter().map(piece).chain(delays).chain(self.figures.iter().map(figure)).collect()
    }

    /// The smallest margin of the magnitude limits, dB, and where it is, rad/s; `None` where there is no such limit.
    pub fn least_margin(&self, board: &[Biquad]) -> Option<(f64, f64)> {
        let standings = self.standings(board);
        let margins = standings[..self.pieces.len()].iter().map(|s| (s.margin, s.at.unwrap_or(f64::NAN)));
        margins.reduce(|least, here| if here.0 < least.0 || here.0.is_nan() { here } else { least })
    }
}

/// A figure of a section's transfer function, in the unit of [`Figure`].
pub fn figure_of(figure: Figure, h: &Biquad, order: usize) -> f64 {
    let (n, d) = (h.num, h.den);
    match figure {
        Figure::F0 if order == 1 => d[0] / d[1],
        Figure::F0 => (d[0] / d[2]).sqrt(),
        Figure::Q => (d[0] * d[2]).sqrt() / d[1].abs(),
        Figure::Fz => (n[0] / n[2]).sqrt(),
        Figure::Depth => {
            let pass = (n[0] / d[0]).abs().max((n[2] / d[2]).abs());
            10.0 * (pass * pass / h.power(n[0] / n[2])).log10().min(MOST_ROOM)
        }
    }
}

fn figure_margin(limit: &FigureLimit, h: &Biquad, order: usize) -> f64 {
    let value = figure_of(limit.figure, h, order);
    let decibels = limit.figure == Figure::Depth;
    let room = |bound: f64, sign: f64| sign * (bound - value) / if decibels { 1.0 } else { bound };
    let (upper, lower) = (limit.upper.map(|bound| room(bound, 1.0)), limit.lower.map(|bound| room(bound, -1.0)));
    // Not f64::min, which passes over what is not a number.
    let rooms = upper.into_iter().chain(lower);
    rooms.reduce(|least, here| if here < least || here.is_nan() { here } else { least }).unwrap_or(f64::NAN)
}

/// Whether a target has any response at all where its mask takes the reference.
pub fn has_reference(reference: Reference, sections: &[Section]) -> bool {
    let power = |w: f64| sections.iter().map(|section| section.ideal().power(w * w)).product::<f64>();
    match reference {
        Reference::Absolute | Reference::Peak => true,
        Reference::Dc => power(0.0) > 0.0,
        // A millionth of the gain is left of a null that rounding fills.
        Reference::At(w) => power(w) > 1e-24 * sections.iter().map(|s| s.gain * s.gain).product::<f64>(),
    }
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use std::f64::consts::TAU;

    use super::*;
    use crate::target::Shape;

    fn limit(from: f64, to: f64, lower: Option<f64>, upper: Option<f64>) -> Limit {
        Limit { from: from * TAU, to: to * TAU, lower, upper }
    }

    // Source: |H| of a notch near fz is about 2 Q |f - fz|/fz (first order of its closed form): 40 dB within 0.2 Hz of 50 Hz asks
    // for Q of 1.25 or less, and Q of 5 gives 28 dB.
    #[test]
    fn a_notch_that_is_too_narrow_is_told_with_its_margin() {
        let mask = Mask {
            reference: Reference::Dc,
            limits: vec![limit(49.8, 50.2, None, Some(-40.0))],
            delays: Vec::new(),
            figures: Vec::new(),
        };
        let margin = |q: f64| {
            let section = Section::new("N", Shape::Notch, 50.0 * TAU, Some(q), 1.0, None).unwrap();
            let gauge = Gauge::new(&mask, std::slice::from_ref(&section), Criterion::default());
            let standing = gauge.standings(&[section.ideal()])[0];
            (standing.margin, standing.at.unwrap() / TAU)
        };
        let (found, at) = margin(5.0);
        assert!((found + 12.04).abs() < 0.05, "{found}");
        assert!((at - 49.8).abs() < 1e-9 || (at - 50.2).abs() < 1e-9);
        assert!(margin(1.3).0 < 0.0 && margin(1.2).0 > 0.0);
    }

    // Source: Butterworth magnitude, 1/sqrt(1 + (f/fc)^4) in second order; closed form.
    #[test]
    fn references_and_margins_follow_the_closed_form() {
        let section = Section::new("A", Shape::LowPass, 1e3 * TAU, Some(0.5f64.sqrt()), 10.0, None).unwrap();
        let h = |f: f64| -10.0 * (1.0 + (f / 1e3).powi(4)).log10();
        for (reference, zero) in [
            (Reference::Absolute, 20.0),
            (Reference::Dc, 0.0),
            (Reference::At(2e3 * TAU), -h(2e3)),
            (Reference::Peak, -h(100.0)),
        ] {
            let mask = Mask {
                reference,
                limits: vec![limit(100.0, 500.0, Some(-3.0), Some(25.0)), limit(5e3, 5e3, None, Some(1.0))],
                delays: Vec::new(),
                figures: vec![
                    FigureLimit {
                        section: 0,
                        figure: Figure::F0,
                        lower: Some(900.0 * TAU),
                        upper: Some(1100.0 * TAU),
                    },
                    FigureLimit { section: 0, figure: Figure::Q, lower: Some(0.8), upper: None },
                ],
            };
            let gauge = Gauge::new(&mask, std::slice::from_ref(&section), Criterion::default());
            let found = gauge.standings(&[section.ideal()]);
            let pass = (25.0 - h(100.0) - zero).min(h(500.0) + zero + 3.0);
            assert!((found[0].margin - pass).abs() < 1e-9, "{reference:?} {} {pass}", found[0].margin);
            assert!((found[1].margin - (1.0 - h(5e3) - zero)).abs() < 1e-9, "{reference:?}");
            assert!((found[2].margin - 100.0 / 1100.0).abs() < 1e-9);
            assert!((found[3].margin - (0.5f64.sqrt() / 0.8 - 1.0)).abs() < 1e-9);
            let mut broken = vec![false; gauge.len()];
            assert!(!gauge.passes(&[section.ideal()], &mut Scratch::default(), &mut broken));
            let expected: Vec<bool> = found.iter().map(|standing| !standing.is_met()).collect();
            assert_eq!(broken, expected);
            assert!(broken[3]);
        }
    }

    #[test]
    fn what_is_unstable_or_no_number_breaks_every_limit() {
        let section = Section::new("A", Shape::LowPass, 1e3 * TAU, Some(2.0), 1.0, None).unwrap();
        let mask = Mask {
            reference: Reference::Absolute,
            limits: vec![limit(1.0, 10.0, Some(-10.0), Some(10.0))],
            delays: Vec::new(),
            figures: Vec::new(),
        };
        let gauge = Gauge::new(&mask, std::slice::from_ref(&section), Criterion::default());
        let passes = |h: Biquad| gauge.passes(&[h], &mut Scratch::default(), &mut [false]);
        let good = section.ideal();
        assert!(passes(good));
        assert!(!passes(Biquad { den: [good.den[0], -good.den[1], good.den[2]], ..good }));
        assert!(!passes(Biquad { num: [f64::NAN, 0.0, 0.0], ..good }));
        let unstable = gauge.standings(&[Biquad { den: [good.den[0], -good.den[1], good.den[2]], ..good }]);
        assert!(!unstable[0].is_met());
    }

    // Closed forms: two equal first-order low-passes have the group delay 2/w0 / (1 + (w/w0)²), which falls with frequency.
    #[test]
    fn group_delays_are_those_of_the_whole_cascade() {
        let w0 = 1e3 * TAU;
        let section = Section::new("A", Shape::FirstOrderLowPass, w0, None, 3.0, None).unwrap();
        let sections = [section.clone(), section];
        let board = sections.clone().map(|section| section.ideal());
        let delay = |f: f64| 2.0 / w0 / (1.0 + (f / 1e3).powi(2));
        let mask = |lower: f64, upper: f64| Mask {
            reference: Reference::Peak,
            limits: vec![limit(100.0, 200.0, Some(-3.0), None)],
            delays: vec![limit(200.0, 800.0, Some(lower), Some(upper)), limit(3e3, 3e3, None, Some(1e-3))],
            figures: vec![FigureLimit { section: 1, figure: Figure::F0, lower: Some(1.0), upper: None }],
        };
        for (lower, upper, kept) in [
            (0.999 * delay(800.0), 1.001 * delay(200.0), true),
            (1.001 * delay(800.0), 1.001 * delay(200.0), false),
            (0.999 * delay(800.0), 0.999 * delay(200.0), false),
        ] {
            let gauge = Gauge::new(&mask(lower, upper), &sections, Criterion::default());
            let found = gauge.standings(&board);
            assert_eq!(found.len(), gauge.len());
            let expected = (upper - delay(200.0)).min(delay(800.0) - lower);
            assert!((found[1].margin - expected).abs() < 1e-15, "{found:?} {expected}");
            assert!((found[2].margin - (1e-3 - delay(3e3))).abs() < 1e-15);
            assert!((found[2].at.unwrap() / TAU - 3e3).abs() < 1e-9);
            let mut broken = vec![true; gauge.len()];
            assert_eq!(gauge.passes(&board, &mut Scratch::default(), &mut broken), kept);
            assert_eq!(broken, [false, !kept, false, false]);
            assert!(gauge.frequencies() > gauge.tested().len() + 100);
        }
    }

    // Source: the null of a notch with a leftover term a s: |H(j wz)| = |a| wz / |D(j wz)|, closed form.
    #[test]
    fn the_depth_of_a_null_follows_its_leftover() {
        let (w, q, a) = (1e3, 2.0, 5.0);
        let h = Biquad { num: [w * w, a, 1.0], den: [w * w, w / q, 1.0] };
        let expected = -20.0 * (a * q / w).log10();
        assert!((figure_of(Figure::Depth, &h, 2) - expected).abs() < 1e-9);
        let perfect = Biquad { num: [w * w, 0.0, 1.0], ..h };
        assert!(figure_of(Figure::Depth, &perfect, 2) > 200.0);
    }
}
