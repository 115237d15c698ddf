//! The job file as it is written (RON): every key may be missing, scalars are kept as text.

use std::collections::BTreeMap;
use std::fmt;

use serde::Deserialize;
use serde::de::value::SeqAccessDeserializer;
use serde::de::{Deserializer, Error, MapAccess, SeqAccess, Visitor};

use super::given::{Given, Scalar, Scalars};
use super::shelf::Shelves;
use crate::analysis::Order;
use crate::search::{Joint, Rank};
use crate::target::{Approximation, Reference, Shape};
use crate::text::{self, Fault};

/// Defines a structure of the job file: every key is optional and none is unknown.
macro_rules! written {
    ($(#[$meta:meta])* $name:ident as $shown:literal { $($(#[$doc:meta])* $key:ident: $type:ty,)* }) => {
        $(#[$meta])*
        #[derive(Clone, Debug, Default, PartialEq, Deserialize)]
        #[serde(default, deny_unknown_fields, rename = $shown)]
        pub struct $name {
            $($(#[$doc])* pub $key: Option<Given<$type>>,)*
        }

        impl $name {
            /// Lays another one over this: each key that is set in `over` wins as a whole.
            pub fn overlay(&mut self, over: $name) {
                $(if over.$key.is_some() { self.$key = over.$key; })*
            }
        }
    };
}

written! {
    /// A job file. A key of a section wins over the key of the same name here.
    JobFile as "Job" {
        /// The title.
        title: Scalar,
        /// The sections in signal order; a job has these or a filter.
        sections: Vec<SectionFile>,
        /// A filter from whose specification the sections follow.
        filter: FilterFile,
        /// Identifier of the circuit of each section that names none; otherwise shape and sign of the gain decide.
        circuit: Scalar,
        /// Name of the output to take; otherwise the first of the wanted shape and sign.
        output: Scalar,
        /// Whether the sign of the gains matters.
        sign: Sign,
        /// What may be used as resistors; E96 from 1 kΩ to 1 MΩ.
        resistors: Shelves,
        /// What may be used as capacitors; E12 from 1 nF to 1 µF.
        capacitors: Shelves,
        /// Lowest and highest frequency that count, Hz; lowest f0 / 10 to highest f0 × 10.
        band: (Scalar, Scalar),
        /// How far under the largest |H*| the floor lies, dB; 60.
        floor: Scalar,
        /// Whether a flat gain offset is ignored; false.
        ignore_gain: bool,
        /// What the error of a set is; decibels, for jobs with an all-pass section the vector error.
        measure: MeasureFile,
        /// No set may need more part numbers than this.
        max_part_numbers: Scalar,
        /// The error that is good enough, in dB or as a plain ratio or percentage; 0.1 dB or 1 %.
        wanted_error: Scalar,
        /// The error above which nothing is listed, likewise; 1 dB or 12 %.
        error_limit: Scalar,
        /// By how much each of several sections may miss its own target, where the board does not miss the whole by more,
        /// likewise; the wanted error.
        own_error: Scalar,
        /// Whether several sections are searched one at a time and their fronts combined, unproved; false.
        one_at_a_time: bool,
        /// The error below which nothing better is looked for, likewise; 0.001 dB or 0.01 %, for
        /// several sections ten times that.
        error_resolution: Scalar,
        /// How many rows to list at most; 10.
        rows: Scalar,
        /// How many further sets to list for each number of part numbers; 0.
        alternatives: Scalar,
        /// Range for the geometric mean of the resistances of each section, Ω.
        impedance: (Scalar, Scalar),
        /// How long to search.
        time_limit: Scalar,
        /// The stock list (CSV) that is drawn on, named from the folder of the job file.
        stock: Scalar,
        /// Whether lines of the stock list that cannot be used are left out; otherwise they are faults.
        skip_bad_lines: bool,
        /// How many boards the stock must do for; 1.
        boards: Scalar,
        /// How many of each part used shall be left over; 0.
        spares: Scalar,
        /// What may be bought beside the stock: `none`, `any`, or at most so many part numbers, where wanted of one kind
        /// only: `resistors` or `resistors:2`; none.
        buy: Scalar,
        /// Whether ceramic capacitors of class 2 stay in the drawer; false.
        bar_class_2: bool,
        /// Where two parts may take the place of one; nowhere.
        pairs: PairsFile,
        /// What the rows are ranked by; the error.
        rank: RankFile,
        /// Whether each of several boards with measured parts may have other parts beside them; false.
        own_set_per_board: bool,
        /// The mask file (RON) with the limits that a board has to keep, named from the folder of the job file.
        mask: Scalar,
    }
}

written! {
    /// Where two parts may take the place of one.
    PairsFile as "Pairs" {
        /// How two resistors may be joined.
        resistors: Joints,
        /// How two capacitors may be joined.
        capacitors: Joints,
        /// How the parts of single slots may be joined, by slot name; wins over the kind.
        slots: BTreeMap<String, Joints>,
        /// How many slots of a section may hold a pair; 1.
        at_most: Scalar,
    }
}

/// What the rows are ranked by: a figure that the search knows, or one that follows from tolerances.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Deserialize)]
#[serde(rename = "Rank")]
pub enum RankFile {
    /// The error.
    Error,
    /// Part numbers.
    PartNumbers,
    /// Part numbers that must be bought.
    ToBuy,
    /// The cost of the parts of a board.
    Cost,
    /// Placed parts.
    PlacedParts,
    /// The share of boards that keep what is wanted.
    Yield,
    /// The spread of the response.
    Spread,
}

impl RankFile {
    /// What the search ranks by; the error where the order comes from tolerances.
    pub fn searched(self) -> Rank {
        match self {
            RankFile::Error | RankFile::Yield | RankFile::Spread => Rank::Error,
            RankFile::PartNumbers => Rank::PartNumbers,
            RankFile::ToBuy => Rank::ToBuy,
            RankFile::Cost => Rank::Cost,
            RankFile::PlacedParts => Rank::PlacedParts,
        }
    }

    /// What follows from tolerances.
    pub fn order(self) -> Order {
        match self {
            RankFile::Yield => Order::Yield,
            RankFile::Spread => Order::Spread,
            _ => Order::AsFound,
        }
    }
}

/// The ways in which two parts may be joined.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Joints(pub Vec<Joint>);

impl<'de> Deserialize<'de> for Joints {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        #[derive(Deserialize)]
        #[serde(rename = "Joint")]
        enum Written {
            Series,
            Parallel,
        }
        let written: Vec<Written> = Vec::deserialize(deserializer)?;
        let joint = |written: &Written| match written {
            Written::Series => Joint::Series,
            Written::Parallel => Joint::Parallel,
        };
        let mut joints: Vec<Joint> = written.iter().map(joint).collect();
        joints.sort_unstable();
        joints.dedup();
        Ok(Joints(joints))
    }
}

written! {
    /// A filter: what is asked of it, and how its sections are put together.
    FilterFile as "Filter" {
        /// The approximation.
        approximation: Approximation,
        /// Low-pass, high-pass, band-pass or band-stop.
        response: Response,
        /// Pass-band edge of a low-pass or high-pass, Hz.
        edge: Scalar,
        /// Pass-band edges of a band-pass or band-stop, Hz.
        edges: (Scalar, Scalar),
        /// What holds at the edges: `half-power`, `ripple`, `attenuation`, or dB under the reference; the ripple where one
        /// is given, otherwise half power, for Linkwitz-Riley half amplitude.
        edge_at: Scalar,
        /// Delay at DC of a Bessel low-pass, in place of its edge.
        delay: Scalar,
        /// Order of the low-pass prototype; otherwise the least that meets the stop band.
        order: Scalar,
        /// Ripple of the pass band, dB.
        ripple: Scalar,
        /// Attenuation of the stop band, dB under the reference.
        attenuation: Scalar,
        /// Edge of the stop band of a low-pass or high-pass, Hz.
        stop_edge: Scalar,
        /// Edges of the stop bands of a band-pass, or of the stop band of a band-stop, Hz.
        stop_edges: (Scalar, Scalar),
        /// Gain at the reference, plain ratio without sign; 1.
        gain: Scalar,
        /// The gain from which levels count; the peak of the pass band.
        reference: Reference,
        /// Which zeros go with which poles: `headroom`, `nearest`, or the numbers of the zeros by poles.
        pairing: Scalars,
        /// The order of the sections: `headroom`, `rising-q`, `falling-q`, or the numbers of the poles.
        sequence: Scalars,
        /// The gains of the sections: `headroom`, `equal`, or a list in signal order.
        gains: Scalars,
        /// Circuits, of which each section takes the first that gives its shape; otherwise the usual one.
        circuits: Scalars,
    }
}

written! {
    /// A section of a job file.
    SectionFile as "Section" {
        /// The name; otherwise the number of the section, from 1.
        name: Scalar,
        /// The shape.
        shape: Shape,
        /// Pole frequency, Hz. A section has f0, w0 or poles.
        f0: Scalar,
        /// Angular pole frequency, rad/s.
        w0: Scalar,
        /// Two real poles, Hz: they stand for f0 and Q.
        poles: (Scalar, Scalar),
        /// Pole quality factor.
        q: Scalar,
        /// Signed gain, plain ratio; 1.
        gain: Scalar,
        /// Zero frequency of a notch, Hz; otherwise that of the poles.
        fz: Scalar,
        /// Angular zero frequency of a notch, rad/s.
        wz: Scalar,
        /// Identifier of the circuit.
        circuit: Scalar,
        /// Name of the output to take.
        output: Scalar,
        /// Whether the sign of the gain matters.
        sign: Sign,
        /// What may be used as resistors in this section.
        resistors: Shelves,
        /// What may be used as capacitors in this section.
        capacitors: Shelves,
        /// What may go into single slots.
        slots: Slots,
        /// Groups of slots that must carry the same value.
        equal: Vec<Vec<Scalar>>,
        /// Ties of the circuit that do not hold.
        untie: Untie,
        /// Where two parts may take the place of one.
        pairs: PairsFile,
        /// By how much this section may miss its own target at most, whatever the others make good.
        own_error: Scalar,
    }
}

written! {
    /// What may go into one slot: one value, or a shelf with exclusions.
    SlotFile as "Slot" {
        /// The only value.
        pin: Scalar,
        /// The shelf; otherwise that of the section.
        shelf: Shelves,
        /// Values that are taken off the shelf.
        exclude: Scalars,
    }
}

impl JobFile {
    /// Reads a job file.
    ///
    /// # Errors
    /// The faults of the text, with their spans: see [`text::parse`].
    pub fn parse(text: &str) -> Result<JobFile, Vec<Fault>> {
        text::parse(text)
    }
}

/// The response of a filter.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Deserialize)]
pub enum Response {
    /// Low-pass.
    LowPass,
    /// High-pass.
    HighPass,
    /// Band-pass.
    BandPass,
    /// Band-stop.
    BandStop,
}

impl Response {
    /// Every response.
    pub const ALL: [Response; 4] = [Response::LowPass, Response::HighPass, Response::BandPass, Response::BandStop];

    /// The name in running text.
    pub fn name(self) -> &'static str {
        match self {
            Response::LowPass => "low-pass",
            Response::HighPass => "high-pass",
            Response::BandPass => "band-pass",
            Response::BandStop => "band-stop",
        }
    }
}

/// Whether the sign of a gain matters.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Deserialize)]
pub enum Sign {
    /// The gain must have the sign that was written.
    #[default]
    Kept,
    /// Any sign will do: the circuit decides.
    Either,
}

/// What the error of a set is; see [`Measure`](crate::target::Measure).
#[derive(Clone, Debug, PartialEq, Deserialize)]
#[serde(deny_unknown_fields)]
pub enum MeasureFile {
    /// Response error in dB.
    Decibel,
    /// Vector error.
    Vector,
    /// Weighted sum of the relative misses; a weight that is missing is zero.
    Weighted {
        /// Weight of the miss in f0.
        f0: Option<Scalar>,
        /// Weight of the miss in Q.
        q: Option<Scalar>,
        /// Weight of the miss in gain.
        gain: Option<Scalar>,
        /// Weight of the miss in fz; where missing, that of f0.
        fz: Option<Scalar>,
    },
}

/// What may go into single slots, by slot name, in the order written.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Slots(pub Vec<(String, SlotFile)>);

impl<'de> Deserialize<'de> for Slots {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct Entries;
        impl<'de> Visitor<'de> for Entries {
            type Value = Slots;

            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("slots by name, such as {\"R1\": (pin: \"10k\")}")
            }

            fn visit_map<A: MapAccess<'de>>(self, mut map: A) -> Result<Slots, A::Error> {
                let mut slots: Vec<(String, SlotFile)> = Vec::new();
                while let Some(name) = map.next_key::<String>()? {
                    if slots.iter().any(|(known, _)| *known == name) {
                        return Err(A::Error::custom(format!("the slot `{name}` is there twice")));
                    }
                    slots.push((name, map.next_value()?));
                }
                Ok(Slots(slots))
            }
        }
        deserializer.deserialize_map(Entries)
    }
}

/// Which ties of the circuit do not hold.
#[derive(Clone, Debug, PartialEq)]
pub enum Untie {
    /// All of them, or none.
    All(bool),
    /// The ties of exactly these slots.
    Groups(Vec<Vec<Scalar>>),
}

impl<'de> Deserialize<'de> for Untie {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct Either;
        impl<'de> Visitor<'de> for Either {
            type Value = Untie;

            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("true, false or a list such as [[\"RA\", \"RB\"]]")
            }

            fn visit_bool<E>(self, all: bool) -> Result<Untie, E> {
                Ok(Untie::All(all))
            }

            fn visit_seq<A: SeqAccess<'de>>(self, list: A) -> Result<Untie, A::Error> {
                Vec::deserialize(SeqAccessDeserializer::new(list)).map(Untie::Groups)
            }
        }
        deserializer.deserialize_any(Either)
    }
}
