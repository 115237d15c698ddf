//! Everything about one board in one go.

use super::built::Built;
use super::corners::{WorstCase, worst_case};
use super::drift::{Climate, Drift, drift};
use super::levels::{LevelConditions, Levels, levels};
use super::mask::{Gauge, Mask, Standing};
use super::real::{Real, RealConditions, real};
use super::select::{Selection, selection};
use super::spread::{Deviations, Spread, deviations, response_yardstick, spread};
use super::tolerance::Tolerances;
use super::trim::{Trim, trims};
use super::yields::{Sampling, Yield, estimate};
use crate::target::{Biquad, Criterion, Deviation, Figures, Section};
use crate::units::Value;

/// Under what a board is looked at.
#[derive(Clone, Debug, PartialEq)]
pub struct Conditions {
    /// The tolerances of its parts.
    pub tolerances: Tolerances,
    /// What it has to keep, where that is given.
    pub mask: Option<Mask>,
    /// Temperature and age, where they are to be looked at.
    pub climate: Option<Climate>,
    /// Op-amps and surroundings, where they are to be looked at.
    pub real: Option<RealConditions>,
    /// What is assumed for headroom and noise, where they are to be looked at.
    pub levels: Option<LevelConditions>,
    /// Whether a trim is to be planned.
    pub trim: bool,
    /// The resistor values from which one may be selected on test, where a trim is planned.
    pub select: Vec<Value>,
    /// How boards are drawn.
    pub sampling: Sampling,
}

/// How a board stands against its mask.
#[derive(Clone, Debug, PartialEq)]
pub struct MaskResult {
    /// How many frequencies are tested.
    pub frequencies: usize,
    /// The ideal target against each limit.
    pub target: Vec<Standing>,
    /// The nominal parts against each limit.
    pub nominal: Vec<Standing>,
    /// How many boards keep the mask.
    pub yields: Yield,
    /// The worst case of the limits of the magnitude: how far they are broken, dB; negative where they are kept.
    pub worst: Option<WorstCase>,
}

/// What was found about a board.
#[derive(Clone, Debug, PartialEq)]
pub struct Vetted {
    /// By what the response is judged; the weighted measure, which has no frequency, gives way to decibels.
    pub criterion: Criterion,
    /// The error of the nominal parts.
    pub nominal: Deviation,
    /// What the nominal parts give.
    pub figures: Vec<Figures>,
    /// The mask, where one is given.
    pub mask: Option<MaskResult>,
    /// What drawn boards are like.
    pub spread: Spread,
    /// What follows from the sensitivities.
    pub deviations: Deviations,
    /// The worst error that the tolerances allow.
    pub worst: WorstCase,
    /// What temperature and age do, where that was asked.
    pub drift: Option<Drift>,
    /// What real op-amps and their surroundings do, where that was asked.
    pub real: Option<Real>,
    /// Headroom and noise, where that was asked; `None` too where the network cannot be solved, or is not known to be stable.
    pub levels: Option<Levels>,
    /// How it is trimmed, where that was asked.
    pub trims: Option<Vec<Trim>>,
    /// For each trim the values to select from on test in place of a trimmer; `None` where they do not reach that far.
    pub selections: Vec<Option<Selection>>,
}

impl Vetted {
    /// Whether the nominal error is below a third of the spread that the tolerances cause: then a better nominal fit is
    /// lost in them.
    pub fn nominal_is_lost_in_spread(&self) -> bool {
        is_lost_in_spread(self.nominal.error, self.deviations.response.0)
    }
}

/// Whether a nominal error is below a third of a spread.
pub(super) fn is_lost_in_spread(error: f64, spread: f64) -> bool {
    error < spread / 3.0
}

/// How many boards are drawn for the spread.
const SPREAD_BOARDS: usize = 20_000;

/// Looks at a board under all aspects.
pub fn vet(built: &Built, conditions: &Conditions) -> Vetted {
    let yardstick = response_yardstick(&built.targets(), built.criterion);
    let criterion = Criterion { measure: yardstick.criterion().measure, ..built.criterion };
    let nominal = built.nominal();
    let tolerances = &conditions.tolerances;
    let mask = conditions.mask.as_ref().map(|mask| against(built, mask, criterion, &nominal, conditions));
    let reached = yardstick.samples().iter().filter(|sample| sample.power > yardstick.floor_power());
    let frequencies: Vec<f64> = reached.map(|sample| sample.w).collect();
    let error = |board: &[Biquad]| {
        let deviation = yardstick.deviation(board);
        (deviation.error, deviation.at)
    };
    let real = conditions.real.as_ref().map(|conditions| real(built, conditions, &yardstick));
    // An unstable network has no levels.
    let works = real.as_ref().is_none_or(|real| real.error.is_some());
    let levels =
        conditions.levels.as_ref().filter(|_| works).and_then(|conditions| levels(built, conditions, &yardstick));
    let trims = conditions.trim.then(|| trims(built, tolerances));
    let select = |trim: &Trim| {
        let part = built.sections[trim.section].parts.iter().find(|part| part.slot == trim.slot)?;
        selection(trim, part.value, &conditions.select, tolerances.resistors)
    };
    let selections = trims.iter().flatten().map(select).collect();
    Vetted {
        criterion,
        nominal: yardstick.deviation(&nominal),
        figures: built.sections.iter().zip(&nominal).map(|(section, h)| section.target.figures_of(h)).collect(),
        mask,
        spread: spread(built, tolerances, &yardstick, conditions.sampling.seed, SPREAD_BOARDS),
        deviations: deviations(built, tolerances, &yardstick),
        worst: worst_case(built, tolerances, &frequencies, &error),
        drift: conditions.climate.as_ref().map(|climate| drift(built, climate, &yardstick)),
        real,
        levels,
        trims,
        selections,
    }
}

fn against(
    built: &Built,
    mask: &Mask,
    criterion: Criterion,
    nominal: &[Biquad],
    conditions: &Conditions,
) -> MaskResult {
    let targets = built.targets();
    let gauge = Gauge::new(mask, &targets, criterion);
    let ideal: Vec<Biquad> = targets.iter().map(Section::ideal).collect();
    let tested = gauge.tested();
    let broken = |board: &[Biquad]| match gauge.least_margin(board) {
        Some((margin, at)) => (-margin, Some(at)),
        None => (f64::NAN, None),
    };
    let worst = (!mask.limits.is_empty()).then(|| worst_case(built, &conditions.tolerances, &tested, &broken));
    MaskResult {
        frequencies: gauge.frequencies(),
        target: gauge.standings(&ideal),
        nominal: gauge.standings(nominal),
        yields: estimate(built, &conditions.tolerances, &gauge, &conditions.sampling),
        worst,
    }
}
