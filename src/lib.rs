//! Ideal filter sections in (w0, Q, gain), buyable resistors and capacitors out, with a proof.
//!
//! # From a section to parts
//!
//! A [`target::Section`] says what is wanted, a [`circuit::Circuit`] what realises it, a [`parts::Shelf`] what can be
//! bought. [`search::shortlist`] finds the front over response error, part numbers and placed parts, and says how much of
//! it is proved; [`verify::verify`] rechecks every row by solving the netlist numerically.
//!
//! ```
//! use std::sync::Arc;
//!
//! use roundwell::circuit::find;
//! use roundwell::parts::{Series, Shelf, Supply};
//! use roundwell::search::{Goals, Problem, SectionProblem, Unwatched, shortlist};
//! use roundwell::target::{Criterion, Section, Shape};
//! use roundwell::units::{Kind, format_part, parse_part};
//! use roundwell::verify::verify;
//!
//! # fn main() -> Result<(), Box<dyn std::error::Error>> {
//! // A second-order low-pass: 1 kHz, Q 1.3, gain 1 ...
//! let target = Section::new("A", Shape::LowPass, std::f64::consts::TAU * 1e3, Some(1.3), 1.0, None)?;
//! // ... from one op-amp, E24 resistors and E6 capacitors.
//! let circuit = Arc::new(find("sallen-key-low-pass").ok_or("no such circuit")?.clone());
//! let shelf = |kind, series: Series, from, to| -> Result<Shelf, Box<dyn std::error::Error>> {
//!     Ok(Shelf::new(kind, series.values_between(parse_part(from, kind)?, parse_part(to, kind)?))?)
//! };
//! let resistors = shelf(Kind::Resistor, Series::E24, "1k", "100k")?;
//! let capacitors = shelf(Kind::Capacitor, Series::E6, "1n", "100n")?;
//! let section =
//!     SectionProblem::new(target, circuit, "low-pass", &resistors, &capacitors).ok_or("no such output")?;
//! let problem = Problem {
//!     title: "one section".into(),
//!     sections: vec![section],
//!     criterion: Criterion::default(),
//!     goals: Goals::default(),
//!     supply: Supply::default(),
//! };
//!
//! let outcome = shortlist(&problem, &Unwatched);
//! verify(&problem, &outcome)?;
//! let best = &outcome.rows[0];
//! let values: Vec<String> = (best.sections[0].parts.iter())
//!     .filter_map(|part| Some(format_part(part.value?, part.kind)))
//!     .collect();
//! assert_eq!(values, ["6k8", "75k", "33n", "1n5"]);
//! assert!(best.proved && best.deviation.error < 0.1);
//! # Ok(())
//! # }
//! ```
//!
//! # From a specification to sections
//!
//! A [`target::Specification`] says what is asked of a whole filter, its [`design`](target::Specification::design) gives
//! poles and zeros, and [`search::cascade`] puts them together into sections, with headroom in mind.
//!
//! ```
//! use roundwell::target::{Approximation, Band, EdgeAt, Parts, Reference, Specification, StopBand};
//!
//! # fn main() -> Result<(), Box<dyn std::error::Error>> {
//! // -3.01 dB at 1 rad/s, 24 dB from 2 rad/s on.
//! let design = Specification {
//!     approximation: Approximation::Butterworth,
//!     band: Band::LowPass(1.0),
//!     edge_at: EdgeAt::HalfPower,
//!     ripple: None,
//!     attenuation: None,
//!     reference: Reference::Peak,
//!     order: None,
//!     stop_band: Some(StopBand { edges: (2.0, 2.0), attenuation: 24.0 }),
//! }
//! .design()?;
//! let q: Vec<String> =
//!     Parts::new(&design.roots).poles.iter().filter_map(|poles| Some(format!("{:.4}", poles.q?))).collect();
//! assert_eq!((design.order, q), (4, vec!["0.5412".to_string(), "1.3066".to_string()]));
//! # Ok(())
//! # }
//! ```
//!
//! # The layers
//!
//! Imports run one way: [`cli`] → [`report`], [`job`] → [`analysis`] → [`verify`] → [`search`] → [`circuit`] → [`target`], [`parts`] →
//! [`units`]; [`text`] (faults and their places in a file) lies under all of them. Only [`cli`] opens files and prints.

pub mod analysis;
pub mod circuit;
pub mod cli;
pub mod job;
pub mod parts;
pub mod report;
pub mod search;
pub mod target;
pub mod text;
pub mod units;
pub mod verify;
