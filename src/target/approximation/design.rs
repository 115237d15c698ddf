//! A specification, and the filter that meets it.

use serde::{Deserialize, Serialize};
use thiserror::Error;

use super::band::{Band, Roots};
use super::prototype::{Approximation, HIGHEST_ORDER, Prototype, excess};

/// What holds at the pass-band edges.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum EdgeAt {
    /// Half the power of the reference, −3.01 dB.
    HalfPower,
    /// The end of the ripple band: the ripple under the largest magnitude.
    Ripple,
    /// The start of the stop band: its attenuation under the reference.
    Attenuation,
    /// So many dB under the reference.
    Decibels(f64),
    /// None of these: the delay at DC is the reciprocal of the edge in rad/s. For the Bessel low-pass.
    Delay,
}

/// The gain from which levels are counted.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub enum Reference {
    /// The largest gain in the pass band.
    #[default]
    Peak,
    /// The gain where the prototype has DC: at DC for low-pass and band-stop, far above for high-pass, at the centre for
    /// band-pass. It lies lower than the peak for Chebyshev and elliptic filters of even order.
    Dc,
}

/// What is demanded of the stop band.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct StopBand {
    /// Its edges, rad/s; both the same where there is one.
    pub edges: (f64, f64),
    /// The least attenuation beyond them, dB under the reference.
    pub attenuation: f64,
}

/// What is asked of a filter.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Specification {
    /// The approximation.
    pub approximation: Approximation,
    /// Response and pass-band edges, rad/s.
    pub band: Band,
    /// What holds at the edges.
    pub edge_at: EdgeAt,
    /// Ripple of the pass band, dB, where the approximation or the edge needs it.
    pub ripple: Option<f64>,
    /// Attenuation of the stop band, dB under the reference, where the approximation or the edge needs it.
    pub attenuation: Option<f64>,
    /// From which gain levels are counted.
    pub reference: Reference,
    /// The order of the low-pass prototype; otherwise the least that meets `stop_band`.
    pub order: Option<usize>,
    /// What the stop band must reach.
    pub stop_band: Option<StopBand>,
}

/// A filter: its prototype with the pass-band edge at 1, and what the specification asked of the stop band.
#[derive(Clone, Debug, PartialEq)]
pub struct Design {
    /// The prototype, its pass-band edge at 1.
    pub prototype: Prototype,
    /// Where its ripple band ends; 0 where there is none.
    pub ripple_end: f64,
    /// Poles and zeros, rad/s.
    pub roots: Roots,
    /// The order of the prototype.
    pub order: usize,
    /// The least attenuation beyond the stop-band edges that were asked for, dB under the reference.
    pub attenuation: Option<f64>,
    /// Where the attenuation that was asked for is reached, rad/s: one frequency, or two.
    pub reached: Vec<f64>,
    /// The next smaller order, and the attenuation that it would give there; `None` at the lowest order or where the
    /// order was given.
    pub smaller: Option<(usize, f64)>,
}

/// A specification that no filter meets.
#[derive(Clone, Debug, PartialEq, Error)]
pub enum DesignError {
    /// The approximation has no such order.
    #[error("there is no {approximation} filter of order {order}: {expected}")]
    Order {
        /// The name of the approximation.
        approximation: &'static str,
        /// The order.
        order: usize,
        /// What is allowed.
        expected: String,
    },
    /// A figure without which the poles are not determined.
    #[error("{approximation} needs {what}")]
    Missing {
        /// The name of the approximation.
        approximation: &'static str,
        /// What is missing.
        what: &'static str,
    },
    /// A level at the edge that does not lie between pass band and stop band.
    #[error("the edge cannot lie {level} dB under the reference: {problem}")]
    Edge {
        /// The level.
        level: f64,
        /// Why not.
        problem: String,
    },
    /// Edges of the stop band that lie in the pass band.
    #[error("the stop band begins within the pass band")]
    StopBand,
    /// The attenuation is not reached by the given order, or by none.
    #[error("{}", reached_too_little(*.order, *.is_given, *.gives, *.wanted))]
    Attenuation {
        /// The order given, or the highest.
        order: usize,
        /// Whether it was given.
        is_given: bool,
        /// What it gives, dB.
        gives: f64,
        /// What was wanted, dB.
        wanted: f64,
    },
}

fn reached_too_little(order: usize, is_given: bool, gives: f64, wanted: f64) -> String {
    let short = format!(
        "order {order} gives {gives:.4} dB in the stop band, {:.4} dB less than the {wanted} dB asked",
        wanted - gives
    );
    if is_given { short } else { format!("no order up to {order} will do: {short}") }
}

/// The highest order of the prototype for a response: no filter has more than 24 poles.
pub fn highest_order(band: Band) -> usize {
    if band.doubles() { HIGHEST_ORDER / 2 } else { HIGHEST_ORDER }
}

/// How much an attenuation may fall short by rounding, dB.
const ROUNDING: f64 = 1e-9;

impl Specification {
    /// The filter.
    ///
    /// # Errors
    /// An order that does not exist, figures that are missing or contradict each other, an attenuation that is not
    /// reached.
    pub fn design(&self) -> Result<Design, DesignError> {
        let name = self.approximation.name();
        let highest = highest_order(self.band);
        if let Some(order) = self.order {
            if order > highest || !self.approximation.has_order(order) {
                let even = if self.approximation.has_order(1) { "" } else { "even " };
                let expected = format!("it has {even}orders up to {highest} as {}", self.band.name());
                return Err(DesignError::Order { approximation: name, order, expected });
            }
            let design = self.of_order(order)?;
            return match (self.stop_band, design.attenuation) {
                (Some(stop), Some(gives)) if gives < stop.attenuation - ROUNDING => {
                    Err(DesignError::Attenuation { order, is_given: true, gives, wanted: stop.attenuation })
                }
                _ => Ok(design),
            };
        }
        let Some(stop) = self.stop_band else {
            let what = "an order, or the edge and the attenuation of a stop band";
            return Err(DesignError::Missing { approximation: name, what });
        };
        let mut smaller = None;
        for order in (1..=highest).filter(|order| self.approximation.has_order(*order)) {
            let design = self.of_order(order)?;
            let gives = design.attenuation.unwrap_or(f64::NAN);
            if gives >= stop.attenuation - ROUNDING {
                return Ok(Design { smaller, ..design });
            }
            smaller = Some((order, gives));
        }
        let (order, gives) = smaller.unwrap_or((highest, f64::NAN));
        Err(DesignError::Attenuation { order, is_given: false, gives, wanted: stop.attenuation })
    }

    /// How far the reference lies under the peak, dB.
    fn reference_under_peak(&self, prototype: &Prototype) -> f64 {
        if self.reference == Reference::Dc { prototype.peak_db } else { 0.0 }
    }

    /// The filter of an order, whatever its stop band reaches.
    fn of_order(&self, order: usize) -> Result<Design, DesignError> {
        let name = self.approximation.name();
        let missing = |what| DesignError::Missing { approximation: name, what };
        let ripple = match self.ripple {
            None if self.approximation.has_ripple() => return Err(missing("the ripple of the pass band in dB")),
            ripple => ripple.unwrap_or(0.0),
        };
        let attenuation = match self.attenuation {
            None if self.approximation.has_attenuation() => {
                return Err(missing("the attenuation of the stop band in dB"));
            }
            attenuation => attenuation.unwrap_or(0.0),
        };
        if self.approximation == Approximation::Elliptic && attenuation <= ripple {
            let problem = format!("the attenuation of {attenuation} dB is not larger than the ripple of {ripple} dB");
            return Err(DesignError::Edge { level: ripple, problem });
        }
        // Levels count from the reference, the prototype's own from the peak.
        let has_ripple_at_dc = self.approximation.has_ripple() && order.is_multiple_of(2);
        let offset = if self.reference == Reference::Dc && has_ripple_at_dc { ripple } else { 0.0 };
        let natural = self.approximation.prototype(order, ripple, attenuation + offset);
        let unit = self.edge_of(order, &natural, ripple, attenuation)?;
        let prototype = natural.scaled(unit);
        let mut design = Design {
            roots: self.band.transform(&prototype),
            prototype,
            ripple_end: if self.approximation.has_ripple() { 1.0 / unit } else { 0.0 },
            order,
            attenuation: None,
            reached: Vec::new(),
            smaller: None,
        };
        if let Some(stop) = self.stop_band {
            let [a, b] = [stop.edges.0, stop.edges.1].map(|w| self.band.to_prototype(w));
            if a.min(b) <= 1.0 || !self.stops_on_both_sides(stop.edges) {
                return Err(DesignError::StopBand);
            }
            let under = self.reference_under_peak(&design.prototype);
            design.attenuation = Some(design.prototype.attenuation_from(a.min(b)) - under);
            let wanted = stop.attenuation + under;
            let start = design.prototype.stop_edge.filter(|_| !design.prototype.zeros.is_empty());
            let found = match start {
                Some(edge) if design.prototype.attenuation(edge) <= wanted + ROUNDING => Some(edge),
                _ => design.prototype.frequency_at(wanted, design.ripple_end),
            };
            design.reached = found.map_or(Vec::new(), |frequency| self.band.from_prototype(frequency));
        }
        Ok(design)
    }

    /// Whether the stop edges of a response with two lie on either side of the centre.
    fn stops_on_both_sides(&self, (low, high): (f64, f64)) -> bool {
        let centre = self.band.centre();
        !self.band.doubles() || low < centre && centre < high
    }

    /// The frequency of the natural prototype that becomes the edge.
    fn edge_of(&self, order: usize, natural: &Prototype, ripple: f64, attenuation: f64) -> Result<f64, DesignError> {
        let name = self.approximation.name();
        let under = self.reference_under_peak(natural);
        let level = match self.edge_at {
            EdgeAt::Delay => return Ok(1.0),
            EdgeAt::HalfPower => 10.0 * 2f64.log10(),
            EdgeAt::Decibels(level) => level,
            EdgeAt::Ripple if self.ripple.is_none() => {
                return Err(DesignError::Missing { approximation: name, what: "the ripple that the edge refers to" });
            }
            EdgeAt::Ripple => ripple - under,
            EdgeAt::Attenuation if self.attenuation.is_none() => {
                return Err(DesignError::Missing {
                    approximation: name,
                    what: "the attenuation that the edge refers to",
                });
            }
            EdgeAt::Attenuation => attenuation,
        };
        let (n, level) = (order as f64, level + under);
        let fault = |problem: String| DesignError::Edge { level: level - under, problem };
        let ends = |what: &str, db: f64| fault(format!("{what} {db} dB under the peak"));
        match self.approximation {
            Approximation::Butterworth => Ok(excess(level).powf(0.5 / n)),
            Approximation::LinkwitzRiley => Ok(excess(level / 2.0).powf(1.0 / n)),
            Approximation::Chebyshev | Approximation::Elliptic if level < ripple * (1.0 - 1e-12) => {
                Err(ends("the ripple band ends only", ripple))
            }
            Approximation::Chebyshev => Ok(((excess(level) / excess(ripple)).sqrt().max(1.0).acosh() / n).cosh()),
            Approximation::Elliptic if (level - ripple).abs() <= 1e-12 * ripple => Ok(1.0),
            Approximation::Elliptic | Approximation::InverseChebyshev if self.edge_at == EdgeAt::Attenuation => {
                Ok(natural.stop_edge.unwrap_or(1.0))
            }
            Approximation::InverseChebyshev if level > attenuation => {
                Err(ends("the stop band begins already", attenuation))
            }
            Approximation::InverseChebyshev => {
                Ok(1.0 / ((excess(attenuation) / excess(level)).sqrt().acosh() / n).cosh())
            }
            _ => {
                let from = if self.approximation == Approximation::Elliptic { 1.0 } else { 0.0 };
                natural
                    .frequency_at(level, from)
                    .ok_or_else(|| ends("the stop band begins already", attenuation + under))
            }
        }
    }

    /// The end of the pass band in the prototype as headroom counts it: where the response has fallen by 3.01 dB, or by
    /// the ripple if that is larger.
    pub fn pass_end(&self, design: &Design) -> f64 {
        let half_power = 10.0 * 2f64.log10();
        match self.ripple.filter(|_| self.approximation.has_ripple()) {
            Some(ripple) if ripple >= half_power => design.ripple_end,
            _ => design.prototype.frequency_at(half_power, design.ripple_end).unwrap_or(1.0),
        }
    }

    /// How far the reference lies over or under the gain where the prototype has DC, as a plain ratio.
    pub fn reference_over_dc(&self, design: &Design) -> f64 {
        match self.reference {
            Reference::Peak => 10f64.powf(design.prototype.peak_db / 20.0),
            Reference::Dc => 1.0,
        }
    }

    /// The frequencies, rad/s, at which the response has fallen by `db` under the reference.
    pub fn frequencies_at(&self, design: &Design, db: f64) -> Vec<f64> {
        let level = db + self.reference_under_peak(&design.prototype);
        let found = design.prototype.frequency_at(level, design.ripple_end);
        found.map_or(Vec::new(), |frequency| self.band.from_prototype(frequency))
    }
}
