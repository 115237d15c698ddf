//! What the parts of a board cost for each step of tolerances.

use super::built::{Built, BuiltPart};
use super::tighten::Step;
use crate::units::Kind;

/// What one part costs by its tolerance, in millionths of the currency.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct StepPrices {
    /// Of resistors, in the order of their steps; `None` where a step has no price.
    pub resistors: Vec<Option<u64>>,
    /// Of capacitors likewise.
    pub capacitors: Vec<Option<u64>>,
}

/// How many parts of a kind a board takes; measured parts, which are there, are not counted.
fn bought(built: &Built, kind: Kind) -> u64 {
    let parts = built.sections.iter().flat_map(|section| &section.parts).filter(|part| part.kind == kind);
    let pieces = |part: &BuiltPart| part.pieces.iter().filter(|piece| !piece.is_measured).count() as u64;
    parts.map(pieces).sum()
}

/// What the parts of one board of each step's row cost, millionths of the currency: parts of a kind times their price. `None`
/// where a price that is needed is not known. The steps lie in the order in which [`super::tighten()`] gives them.
pub fn costs(steps: &[Step], rows: &[Built], prices: &StepPrices) -> Vec<Option<u64>> {
    let price = |list: &[Option<u64>], step: usize, count: u64| match count {
        0 => Some(0),
        count => list.get(step).copied().flatten()?.checked_mul(count),
    };
    let width = prices.capacitors.len().max(1);
    let one = |(k, step): (usize, &Step)| {
        let built = rows.get(step.row)?;
        let resistors = price(&prices.resistors, k / width, bought(built, Kind::Resistor))?;
        let capacitors = price(&prices.capacitors, k % width, bought(built, Kind::Capacitor))?;
        resistors.checked_add(capacitors)
    };
    steps.iter().enumerate().map(one).collect()
}

/// The step that costs least among those that reach a yield for sure, by the low end of their interval; of equal ones that with
/// the higher yield, then the first.
pub fn cheapest(steps: &[Step], costs: &[Option<u64>], wanted: f64) -> Option<usize> {
    let reaching = (0..steps.len()).filter(|&k| steps[k].interval.0 >= wanted);
    let known = reaching.filter_map(|k| Some((k, (*costs.get(k)?)?)));
    let share = |k: usize| steps[k].passed as f64 / steps[k].boards as f64;
    known.min_by(|(a, x), (b, y)| x.cmp(y).then(share(*b).total_cmp(&share(*a)))).map(|(k, _)| k)
}
