//! What is asked for: ideal filter sections, their response, and the measure by which a realisation is judged.

mod response;
mod section;

pub use response::{Criterion, Deviation, Measure, Weights, Yardstick};
pub use section::{Biquad, Figures, Section, SectionError, Shape};

pub(crate) use response::about;
