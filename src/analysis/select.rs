//! Parts selected on test in place of a trimmer: which values of a shelf have to be at hand, and what they leave.

use super::trim::Trim;
use crate::units::Value;

/// The values from which one is fitted, after a look at the built board.
#[derive(Clone, Debug, PartialEq)]
pub struct Selection {
    /// The values, ascending, Ω: from one that reaches the low end of what is needed to one that reaches the high end, even
    /// where their own tolerance is against it.
    pub values: Vec<Value>,
    /// By how much the figure that is set can still be off, relative, to either side, with the best of exact values: half
    /// of the widest step, times the sensitivity.
    pub leaves: f64,
    /// The same where two neighbours are off by their tolerance, away from each other.
    pub leaves_with_tolerance: f64,
}

/// The values of a shelf that a trim needs where its resistor is selected on test; `tolerance` is that of the resistors.
/// `None` where the shelf does not reach that far.
///
/// A step is taken relative to the middle of its two values: whichever is fitted, the slot is off by half of it at most.
pub fn selection(trim: &Trim, nominal: Value, shelf: &[Value], tolerance: f64) -> Option<Selection> {
    let (low, high) = (nominal.to_f64() * (1.0 - trim.reach), nominal.to_f64() * (1.0 + trim.reach));
    let mut sorted = shelf.to_vec();
    sorted.sort_unstable();
    sorted.dedup();
    let first = sorted.iter().rposition(|value| value.to_f64() * (1.0 + tolerance) <= low)?;
    let last = sorted.iter().position(|value| value.to_f64() * (1.0 - tolerance) >= high)?;
    let values = sorted.get(first..=last)?.to_vec();
    let widest = |up: f64, down: f64| {
        let steps = values.windows(2).map(|pair| (pair[0].to_f64() * down, pair[1].to_f64() * up));
        steps.map(|(a, b)| (b - a) / (b + a)).fold(0.0, f64::max)
    };
    let sensitivity = trim.sensitivity.abs();
    let leaves = sensitivity * widest(1.0, 1.0);
    let leaves_with_tolerance = sensitivity * widest(1.0 + tolerance, 1.0 - tolerance);
    Some(Selection { values, leaves, leaves_with_tolerance })
}
