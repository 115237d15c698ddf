//! What becomes of a board once it is built: limits it has to keep, what tolerances, temperature and age do to it, its
//! worst case.
//!
//! Nothing here prints, opens files or reads the clock, and every result is the same for any number of threads.

mod built;
mod compensate;
mod corners;
mod cost;
mod drift;
mod interval;
mod levels;
mod mask;
mod network;
mod real;
mod rows;
mod select;
mod spread;
mod tighten;
mod tolerance;
mod trim;
mod vetted;
mod within;
mod yields;

pub use built::{
    Built, BuiltPart, BuiltPiece, BuiltSection, FigureSensitivity, Formula, Joint, Reel, Sensitivities,
    listed_tolerance,
};
pub use compensate::{BuiltRow, Compensated, Corrected, Correction, compensated, correct, miss};
pub use corners::{Judge, WorstCase, worst_case};
pub use cost::{StepPrices, cheapest, costs};
pub use drift::{Climate, Drift, Extremes, FigureDrift, KindDrift, SectionDrift, drift};
pub use interval::clopper_pearson;
pub use levels::{LevelConditions, Levels, Noise, Peak, levels};
pub use mask::{Figure, FigureLimit, Gauge, Limit, Mask, Reference, Scratch, Standing, figure_of, has_reference};
pub use network::{Network, Reach, Surroundings};
pub use real::{Real, RealConditions, RealEnd, RealSection, Slew, real};
pub use rows::{Order, RowYield, YieldQuestion, Yields, with_yields};
pub use select::{Selection, selection};
pub use spread::{Deviations, Quantiles, SectionSpread, Spread, deviations, spread};
pub use tighten::{CAPACITOR_STEPS, RESISTOR_STEPS, Step, Steps, Wanted, coarsest, tighten};
pub use tolerance::{Boards, Distribution, Draw, Tolerances};
pub use trim::{Trim, Watch, trims};
pub use vetted::{Conditions, MaskResult, Vetted, vet};
pub use within::Within;
pub use yields::{Sampling, Yield, estimate};
