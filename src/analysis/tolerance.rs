//! What the tolerances of parts do: how errors are spread, and boards drawn from that.

use rand_xoshiro::Xoshiro256PlusPlus;
use rand_xoshiro::rand_core::{RngCore, SeedableRng};

use super::built::{Built, BuiltPart, BuiltPiece, Formula, Reel};
use crate::target::Biquad;
use crate::units::Kind;

/// How the errors of parts are spread over their tolerance.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Distribution {
    /// Evenly.
    Uniform,
    /// Normally, with a standard deviation of a third of the tolerance, and cut off at the tolerance.
    TruncatedNormal,
}

impl Distribution {
    /// The variance of an error whose tolerance is 1.
    ///
    /// Uniform: 1/3. Normal, cut off at k = 3 standard deviations: σ² (1 − 2 k φ(k) / (2 Φ(k) − 1)) with σ = 1/3; closed
    /// forms.
    pub fn unit_variance(self) -> f64 {
        match self {
            Distribution::Uniform => 1.0 / 3.0,
            // k = 3: φ = 0.004431848411938, 2 Φ − 1 = 0.997300203936740.
            Distribution::TruncatedNormal => (1.0 - 6.0 * 0.004_431_848_411_938 / 0.997_300_203_936_74) / 9.0,
        }
    }
}

/// The tolerances of a board: those of parts whose stock list does not say.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tolerances {
    /// Of resistors: the largest relative error, 0 to below 1.
    pub resistors: f64,
    /// Of capacitors.
    pub capacitors: f64,
    /// How the errors are spread.
    pub distribution: Distribution,
    /// The share of the tolerance, 0 to 1, by which all parts of one part number are off together, as parts of one reel
    /// are; the rest is each part's own. Both are spread alike and independently.
    pub reel_share: f64,
}

impl Tolerances {
    /// The tolerance of a kind.
    pub fn of(&self, kind: Kind) -> f64 {
        match kind {
            Kind::Resistor => self.resistors,
            Kind::Capacitor => self.capacitors,
        }
    }

    /// The lowest and the highest relative error of a piece: what was given for its slot, else none of one that was measured,
    /// else those of its stock list, else those of its kind to either side.
    pub fn limits(&self, kind: Kind, piece: &BuiltPiece) -> (f64, f64) {
        match piece.tolerance {
            _ if piece.is_measured && !piece.has_own_tolerance => (0.0, 0.0),
            Some(limits) => limits,
            None => (-self.of(kind), self.of(kind)),
        }
    }

    /// Half of what lies between the lowest and the highest error of a piece: errors are spread about their middle.
    pub fn half_width(&self, kind: Kind, piece: &BuiltPiece) -> f64 {
        let (low, high) = self.limits(kind, piece);
        0.5 * (high - low)
    }

    /// The lowest and the highest relative error of a slot's value: with all its pieces at their lowest and highest, for
    /// the value rises with each.
    pub fn slot_limits(&self, part: &BuiltPart) -> (f64, f64) {
        let limits: Vec<(f64, f64)> = part.pieces.iter().map(|piece| self.limits(part.kind, piece)).collect();
        match limits.as_slice() {
            // Pieces that are off alike are off by that together.
            [first, others @ ..] if others.iter().all(|other| other == first) => *first,
            _ => {
                let off = |errors: Vec<f64>| part.factor(&errors) - 1.0;
                (off(limits.iter().map(|l| l.0).collect()), off(limits.iter().map(|l| l.1).collect()))
            }
        }
    }

    /// The standard deviation of a sum of errors over pieces, each given with its reel and with its half-width (see
    /// [`Tolerances::half_width`]) times what it does to the sum.
    pub fn deviation<R: PartialEq>(&self, parts: &[(R, f64)]) -> f64 {
        let (common, own) = (self.reel_share, 1.0 - self.reel_share);
        let mut reels: Vec<(&R, f64)> = Vec::new();
        let mut variance = 0.0;
        for (reel, full) in parts {
            variance += (own * full).powi(2);
            match reels.iter_mut().find(|(known, _)| *known == reel) {
                Some((_, sum)) => *sum += common * full,
                None => reels.push((reel, common * full)),
            }
        }
        variance += reels.iter().map(|(_, sum)| sum * sum).sum::<f64>();
        (variance * self.distribution.unit_variance()).sqrt()
    }
}

/// Numbers for boards: one stream that is cut into blocks which do not overlap, so that a block can be drawn by itself.
#[derive(Clone, Debug)]
pub struct Draw {
    numbers: Xoshiro256PlusPlus,
    distribution: Distribution,
    spare: Option<f64>,
}

impl Draw {
    /// The stream of a seed.
    pub fn new(seed: u64, distribution: Distribution) -> Draw {
        Draw { numbers: Xoshiro256PlusPlus::seed_from_u64(seed), distribution, spare: None }
    }

    /// The stream of the next block: 2^128 numbers further on.
    pub fn next_block(&self) -> Draw {
        let mut numbers = self.numbers.clone();
        numbers.jump();
        Draw { numbers, distribution: self.distribution, spare: None }
    }

    /// Evenly from −1 to 1, in steps of 2^-52.
    fn even(&mut self) -> f64 {
        (self.numbers.next_u64() >> 11) as f64 * (1.0 / (1u64 << 52) as f64) - 1.0
    }

    /// The error of a part whose tolerance is 1.
    pub fn error(&mut self) -> f64 {
        match self.distribution {
            Distribution::Uniform => self.even(),
            Distribution::TruncatedNormal => loop {
                let normal = self.normal();
                if normal.abs() <= 3.0 {
                    return normal / 3.0;
                }
            },
        }
    }

    /// By the polar method (G. Marsaglia, T. A. Bray, SIAM Review 6, 1964), which gives two at a time.
    fn normal(&mut self) -> f64 {
        if let Some(spare) = self.spare.take() {
            return spare;
        }
        loop {
            let (x, y) = (self.even(), self.even());
            let square = x * x + y * y;
            if square < 1.0 && square > 0.0 {
                let factor = (-2.0 * square.ln() / square).sqrt();
                self.spare = Some(y * factor);
                return x * factor;
            }
        }
    }
}

/// One part to buy, where a board is drawn.
#[derive(Clone, Copy, Debug)]
struct Piece {
    reel: usize,
    middle: f64,
    half_width: f64,
}

/// One section, where a board is drawn.
#[derive(Clone, Debug)]
struct Place {
    formula: Formula,
    parts: Vec<BuiltPart>,
    nominal: Vec<f64>,
}

/// A board made ready for being drawn many times with the errors of its parts.
#[derive(Clone, Debug)]
pub struct Boards {
    sections: Vec<Place>,
    pieces: Vec<Piece>,
    reels: usize,
    reel_share: f64,
    reel_errors: Vec<f64>,
    admittances: Vec<f64>,
}

impl Boards {
    /// A board with its tolerances. Pieces of one part number come from one reel.
    pub fn new(built: &Built, tolerances: &Tolerances) -> Boards {
        let mut reels: Vec<Reel> = Vec::new();
        let mut pieces = Vec::new();
        for part in built.sections.iter().flat_map(|section| &section.parts) {
            for piece in &part.pieces {
                let from = piece.reel(part.kind);
                let reel = reels.iter().position(|reel| *reel == from).unwrap_or_else(|| {
                    reels.push(from);
                    reels.len() - 1
                });
                let (low, high) = tolerances.limits(part.kind, piece);
                let half_width = tolerances.half_width(part.kind, piece);
                pieces.push(Piece { reel, middle: 0.5 * (low + high), half_width });
            }
        }
        let place = |section: &super::built::BuiltSection| Place {
            formula: Formula::of(section),
            parts: section.parts.clone(),
            nominal: section.admittances(),
        };
        Boards {
            sections: built.sections.iter().map(place).collect(),
            pieces,
            reels: reels.len(),
            reel_share: tolerances.reel_share,
            reel_errors: Vec::new(),
            admittances: Vec::new(),
        }
    }

    /// Draws the next board: the transfer functions of its sections.
    pub fn draw(&mut self, numbers: &mut Draw, board: &mut Vec<Biquad>) {
        let (common, own) = (self.reel_share, 1.0 - self.reel_share);
        let Boards { sections, pieces, reel_errors, admittances, .. } = self;
        reel_errors.clear();
        // Without a common part no number is spent on it.
        let drawn = if common > 0.0 { self.reels } else { 0 };
        reel_errors.extend((0..drawn).map(|_| numbers.error()));
        let mut pieces = pieces.iter();
        let mut error = || {
            let Some(piece) = pieces.next() else { return 0.0 };
            let reel = reel_errors.get(piece.reel).copied().unwrap_or(0.0);
            piece.middle + piece.half_width * (common * reel + own * numbers.error())
        };
        board.clear();
        for section in sections {
            admittances.clear();
            for (part, nominal) in section.parts.iter().zip(&section.nominal) {
                let factor = match part.pieces.len() {
                    1 => 1.0 + error(),
                    several => part.factor(&(0..several).map(|_| error()).collect::<Vec<_>>()),
                };
                admittances.push(match part.kind {
                    Kind::Resistor => nominal / factor,
                    Kind::Capacitor => nominal * factor,
                });
            }
            board.push(section.formula.biquad(admittances));
        }
    }

    /// The board whose slots are off by these relative errors, in the order of sections and parts.
    pub fn with_errors(&self, errors: &[f64]) -> Vec<Biquad> {
        let mut errors = errors.iter();
        let section = |section: &Place| -> Biquad {
            let off = |(part, nominal): (&BuiltPart, &f64)| {
                let factor = 1.0 + errors.next().copied().unwrap_or(0.0);
                if part.kind == Kind::Resistor { nominal / factor } else { nominal * factor }
            };
            let admittances: Vec<f64> = section.parts.iter().zip(&section.nominal).map(off).collect();
            section.formula.biquad(&admittances)
        };
        self.sections.iter().map(section).collect()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    // Source: numpy and scipy.stats.truncnorm(-3, 3).var() / 9, and 1/3 for the uniform distribution.
    #[test]
    fn errors_keep_their_tolerance_and_their_variance() {
        for (distribution, variance) in
            [(Distribution::Uniform, 1.0 / 3.0), (Distribution::TruncatedNormal, 0.108_148_547_177)]
        {
            assert!((distribution.unit_variance() - variance).abs() < 1e-6, "{}", distribution.unit_variance());
            let mut draw = Draw::new(7, distribution);
            let errors: Vec<f64> = (0..200_000).map(|_| draw.error()).collect();
            assert!(errors.iter().all(|e| (-1.0..=1.0).contains(e)));
            let mean = errors.iter().sum::<f64>() / errors.len() as f64;
            let found = errors.iter().map(|e| e * e).sum::<f64>() / errors.len() as f64;
            // Five standard errors of the mean and of the mean square.
            assert!(mean.abs() < 5.0 * (variance / 2e5).sqrt(), "{mean}");
            assert!((found / variance - 1.0).abs() < 5.0 * (2.0f64 / 2e5).sqrt(), "{found}");
        }
    }

    #[test]
    fn blocks_are_streams_of_their_own() {
        let first = Draw::new(1, Distribution::Uniform);
        let second = first.next_block();
        let list = |draw: &Draw| {
            let mut draw = draw.clone();
            (0..1000).map(|_| draw.numbers.next_u64()).collect::<Vec<_>>()
        };
        let (a, b) = (list(&first), list(&second));
        assert!(a.iter().all(|number| !b.contains(number)));
        assert_eq!(list(&first.next_block()), b);
    }
}
