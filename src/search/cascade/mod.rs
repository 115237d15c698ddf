//! A filter as a cascade of sections: pairing, order and gains, chosen for headroom with every op-amp output counted.
//!
//! What is made small is the *swing*: the largest level that any op-amp output reaches at any frequency, over the least
//! level that a section output has anywhere in the pass band. The first limits what the filter can be driven with, the
//! second is what noise is compared with. So the textbooks (A. S. Sedra and P. O. Brackett, Filter Theory and Design,
//! 1978; R. Schaumann, M. S. Ghausi and K. R. Laker, Design of Analog Filters, 1990; both from memory), with the section
//! outputs replaced by all op-amp outputs.

mod builder;
mod grid;
mod table;
mod unit;

use thiserror::Error;

use crate::target::{Design, Parts, Section, Specification};

use super::problem::SectionProblem;
pub use builder::cascade;
pub use unit::{Stage, ideal_parts, ideal_parts_near};

/// Which zeros go with which poles.
#[derive(Clone, Debug, Default, PartialEq)]
pub enum Pairing {
    /// So that the swing is as small as it can be.
    #[default]
    Headroom,
    /// The poles of highest Q choose first and take the nearest pair of zeros.
    Nearest,
    /// For each set of poles of second order the number of its zeros, from 0, in the order of [`Parts`].
    Given(Vec<usize>),
}

/// In which order the signal passes the sections.
#[derive(Clone, Debug, Default, PartialEq)]
pub enum Sequence {
    /// So that the swing is as small as it can be.
    #[default]
    Headroom,
    /// By rising Q, first-order sections first.
    RisingQ,
    /// By falling Q, first-order sections last.
    FallingQ,
    /// The numbers of the poles, from 0, in the order of [`Parts`]: second order, then first order.
    Given(Vec<usize>),
}

/// The gains of the sections.
#[derive(Clone, Debug, Default, PartialEq)]
pub enum Gains {
    /// The largest op-amp output of each section peaks alike, where the circuits let it.
    #[default]
    Headroom,
    /// The same gain for each section whose circuit lets it be chosen.
    Equal,
    /// These, unsigned, in signal order.
    Given(Vec<f64>),
}

/// What is wanted of a cascade.
#[derive(Clone, Debug, Default)]
pub struct CascadeRequest {
    /// Which zeros go with which poles.
    pub pairing: Pairing,
    /// The order.
    pub sequence: Sequence,
    /// The gains.
    pub gains: Gains,
    /// The unsigned gain of the filter at its reference; `None` for 1, or for what the circuits give where they give only
    /// one, and for what follows from [`Gains::Given`].
    pub gain: Option<f64>,
}

/// A magnitude and the frequency of it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Level {
    /// |V/V_in| from the input of the filter.
    pub magnitude: f64,
    /// The frequency, rad/s.
    pub w: f64,
}

/// The peak of one op-amp output.
#[derive(Clone, Debug, PartialEq)]
pub struct OpAmpLevel {
    /// The name of the op-amp; empty where only the section's output is known.
    pub name: String,
    /// The peak.
    pub peak: Level,
}

/// One section of a cascade.
#[derive(Clone, Debug)]
pub struct CascadeSection {
    /// The section with its signed gain, named by its place from 1.
    pub section: Section,
    /// What realises it, where anything does.
    pub problem: Option<SectionProblem>,
    /// The number of its poles in [`Parts`], from 0: second order, then first order.
    pub poles: usize,
    /// The number of its zeros in [`Parts`], from 0, for second order.
    pub zeros: Option<usize>,
    /// Whether the circuit fixes the gain.
    pub is_fixed: bool,
    /// Whether every op-amp output was counted, or only the section's own.
    pub is_counted: bool,
    /// Op-amp outputs with their peaks.
    pub op_amps: Vec<OpAmpLevel>,
    /// The least magnitude at the section's output in the pass band.
    pub least: Level,
}

impl CascadeSection {
    /// The largest of the op-amp outputs.
    pub fn peak(&self) -> Level {
        let none = Level { magnitude: 0.0, w: self.section.w0 };
        self.op_amps.iter().map(|o| o.peak).fold(none, |a, b| if b.magnitude > a.magnitude { b } else { a })
    }
}

/// The swing, as a plain ratio, of what was chosen and of what could have been.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Swing {
    /// Of the cascade.
    pub chosen: f64,
    /// The same ordered by rising Q, with gains for headroom where they were given.
    pub rising_q: f64,
    /// The same by falling Q.
    pub falling_q: f64,
    /// With the zeros that are nearest to the poles of highest Q, and the best order for them; `None` where all zeros are
    /// alike.
    pub nearest_zeros: Option<f64>,
}

/// Which pairings of poles with zeros were compared.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Pairings {
    /// One: all zeros are alike, or the pairing was asked for.
    One,
    /// All of them.
    All,
    /// Some: from the better of two rules, exchanges of two pairs of zeros as long as they help.
    Exchanges,
    /// Two: that of the nearest zeros, and that in which the largest swing of a single section is least.
    Two,
}

/// A filter with everything resolved: what was asked, poles and zeros, and the sections.
#[derive(Clone, Debug)]
pub struct Filter {
    /// What is asked; a delay stands as the edge 1/delay.
    pub specification: Specification,
    /// Poles and zeros.
    pub design: Design,
    /// How the sections were to be put together.
    pub request: CascadeRequest,
    /// The sections.
    pub cascade: Cascade,
    /// The names under which the user knows the circuits of the sections.
    pub circuits: Vec<Option<String>>,
}

/// A filter as sections in signal order.
#[derive(Clone, Debug)]
pub struct Cascade {
    /// Poles and zeros before they were put together.
    pub parts: Parts,
    /// The sections.
    pub sections: Vec<CascadeSection>,
    /// The unsigned gain at the reference.
    pub gain: f64,
    /// The swing.
    pub swing: Swing,
    /// How many pairings of poles with zeros were compared for headroom.
    pub pairings: Pairings,
    /// Whether all orders were solved for; otherwise the one that is best by the levels at gain 1, and those by rising and
    /// by falling Q.
    pub has_all_orders: bool,
    /// The peak of the last section's own output.
    pub output: Level,
}

impl Cascade {
    /// The section with the largest op-amp output.
    pub fn largest(&self) -> Option<&CascadeSection> {
        let larger = |a: &'_ CascadeSection, b: &'_ CascadeSection| a.peak().magnitude >= b.peak().magnitude;
        self.sections.iter().reduce(|a, b| if larger(a, b) { a } else { b })
    }

    /// Whether the filter inverts: the product of the signs of its gains is negative.
    pub fn inverts(&self) -> bool {
        self.sections.iter().filter(|s| s.section.gain < 0.0).count() % 2 == 1
    }
}

/// A cascade that cannot be.
#[derive(Clone, Debug, PartialEq, Error)]
pub enum CascadeError {
    /// A list that does not name every member once.
    #[error("{what} must name each of 1 to {count} once")]
    List {
        /// What the list gives.
        what: &'static str,
        /// How many members there are.
        count: usize,
    },
    /// A list of gains of another length.
    #[error("{found} gains are given for {count} sections")]
    Gains {
        /// How many there are.
        found: usize,
        /// How many there must be.
        count: usize,
    },
    /// The circuits give another gain.
    #[error("the circuits give the filter the gain {gives} for all part values, not {wanted}")]
    Gain {
        /// What they give.
        gives: f64,
        /// What was asked for.
        wanted: f64,
    },
    /// The circuit of a section gives only another gain.
    #[error("the circuit {circuit} of section {section} gives a gain of {gives} only, not {wanted}")]
    SectionGain {
        /// The section's place, from 1.
        section: usize,
        /// The circuit.
        circuit: String,
        /// What it gives.
        gives: f64,
        /// What was asked for.
        wanted: f64,
    },
    /// Figures that no section can have.
    #[error("{0}")]
    Section(String),
}
