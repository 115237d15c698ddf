//! What is asked for: ideal filter sections, their response, and the measure by which a realisation is judged; and the
//! way from a specification to the sections.

mod approximation;
mod pairing;
mod response;
mod section;

pub use approximation::{
    Approximation, Band, Design, DesignError, EdgeAt, HIGHEST_ORDER, Pole, Prototype, Reference, Roots,
    Specification, StopBand, highest_order,
};
pub use pairing::{LOWEST_Q, Parts, PoleFigures, Zeros, magnitude_at_reference, section_of};
pub use response::{Criterion, Deviation, Measure, Weights, Yardstick};
pub use section::{Biquad, Figures, Section, SectionError, Shape};

pub(crate) use response::about;
