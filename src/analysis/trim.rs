//! How a board is trimmed: which resistor sets what, in an order in which no later one disturbs an earlier one, and how far
//! each has to reach.

use super::built::{Built, BuiltPart, FigureSensitivity, Sensitivities};
use super::tolerance::Tolerances;
use crate::parts::Series;
use crate::target::{Section, Shape};
use crate::units::{Kind, Value};

/// One step of a trim.
#[derive(Clone, Debug, PartialEq)]
pub struct Trim {
    /// Index of the section.
    pub section: usize,
    /// The slot that is made adjustable.
    pub slot: usize,
    /// What it sets: `f0`, `Q`, `fz` or `gain`.
    pub figure: &'static str,
    /// Its relative reach to either side of the nominal value that the tolerances of the other parts require.
    pub reach: f64,
    /// How the figure follows the slot: relative change per relative change of its value.
    pub sensitivity: f64,
    /// A fixed part and a trimmer in series with it that cover this reach; `None` where no part of the series does.
    pub pair: Option<(Value, Value)>,
    /// What to look at while trimming, for a sine at the input of the section.
    pub watch: Watch,
}

/// How a figure is seen on the bench.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Watch {
    /// The phase from the section's input to its output at this angular frequency (rad/s) is to be that of the target, degrees.
    Phase {
        /// Where, rad/s.
        at: f64,
        /// The phase, degrees from −180 to 180.
        degrees: f64,
    },
    /// The magnitude at this angular frequency (rad/s) is to be that of the target, a plain ratio.
    Magnitude {
        /// Where, rad/s.
        at: f64,
        /// The gain.
        gain: f64,
    },
    /// The magnitude is to be least at this angular frequency, rad/s.
    Least {
        /// Where, rad/s.
        at: f64,
    },
}

/// How far a trimmer can be off its value; common practice.
const TRIMMER_TOLERANCE: f64 = 0.2;

/// How far from f0 a gain is looked at, as a factor: the rest of the section does less than a thousandth there.
const FAR: f64 = 100.0;

/// The trims of all sections, each by itself.
///
/// Which resistor can set what, and in which order, is an identity of the circuit (see [`crate::circuit::Circuit::trims`]).
/// The reach follows from the sensitivities: once a figure is set, its resistor has taken up what the others do to it, and
/// what that changes elsewhere counts for the trims after it.
pub fn trims(built: &Built, tolerances: &Tolerances) -> Vec<Trim> {
    built.sections.iter().enumerate().flat_map(|(k, _)| section_trims(built, k, tolerances)).collect()
}

fn of(figure: &str, s: &FigureSensitivity) -> f64 {
    match figure {
        "f0" => s.f0,
        "Q" => s.q,
        "fz" => s.fz,
        _ => s.gain,
    }
}

fn section_trims(built: &Built, index: usize, tolerances: &Tolerances) -> Vec<Trim> {
    let section = &built.sections[index];
    let sensitivities = Sensitivities::of(section);
    let order = section.circuit.trims(section.output());
    let place = |slot: usize| section.parts.iter().position(|part| part.slot == slot);
    // One line a figure, one column a part.
    let line = |figure: &str| -> Vec<f64> {
        (0..section.parts.len()).map(|part| of(figure, &sensitivities.figures(part))).collect()
    };
    let mut lines: Vec<Vec<f64>> = order.iter().map(|(_, figure)| line(figure)).collect();
    let mut found = Vec::new();
    for (k, (slot, figure)) in order.iter().enumerate() {
        let Some(part) = place(*slot) else { continue };
        let own = lines[k][part];
        let others = section.parts.iter().enumerate().filter(|(other, _)| *other != part);
        let farthest = |p: &BuiltPart| {
            let (low, high) = tolerances.slot_limits(p);
            low.abs().max(high.abs())
        };
        let reach: f64 = others.map(|(other, p)| (lines[k][other] / own).abs() * farthest(p)).sum();
        // The resistor takes up what the others do to this figure: in all later figures it is a sum of the others.
        let set = lines[k].clone();
        for later in lines.iter_mut().skip(k + 1) {
            let factor = later[part] / own;
            later.iter_mut().zip(&set).for_each(|(x, y)| *x -= factor * y);
            later[part] = 0.0;
        }
        let nominal = section.parts[part].value.to_f64();
        found.push(Trim {
            section: index,
            slot: *slot,
            figure,
            reach,
            sensitivity: own,
            pair: pair(nominal, reach, tolerances.resistors),
            watch: watch(&section.target, figure, sensitivities.figures(part).fz.abs() > 1e-9),
        });
    }
    found
}

/// A fixed part of E24 and a trimmer of the steps 1, 2, 5 in series: the largest fixed part that leaves the low end open, even
/// if it is off by its tolerance, and the smallest trimmer that reaches the high end even if both are off.
fn pair(nominal: f64, reach: f64, tolerance: f64) -> Option<(Value, Value)> {
    if reach >= 1.0 {
        return None;
    }
    let (low, high) = (nominal * (1.0 - reach), nominal * (1.0 + reach));
    let (least, most) = Kind::Resistor.range();
    let fixed = Series::E24.values_between(least, most);
    let fixed = fixed.into_iter().rfind(|value| value.to_f64() * (1.0 + tolerance) <= low)?;
    let steps = (-3..12).flat_map(|decade| [1, 2, 5].map(|mantissa| Value::new(mantissa, decade)));
    let enough =
        |value: &Value| fixed.to_f64() * (1.0 - tolerance) + value.to_f64() * (1.0 - TRIMMER_TOLERANCE) >= high;
    Some((fixed, steps.flatten().find(enough)?))
}

/// How the figure shows on the section by itself. At f0 the phase of every shape but a notch rests on f0 alone, and half a
/// bandwidth above it, once f0 is set, on Q alone; the gain is looked at where the rest of the section does not count.
fn watch(target: &Section, figure: &str, moves_null: bool) -> Watch {
    let ideal = target.ideal();
    let phase = |at: f64| Watch::Phase { at, degrees: ideal.value(at).arg().to_degrees() };
    let magnitude = |at: f64| Watch::Magnitude { at, gain: ideal.value(at).norm() };
    let beside = target.w0 * (1.0 + 0.5 / target.q.unwrap_or(0.5));
    let wz = target.wz.unwrap_or(target.w0);
    // At its own null a notch has no phase.
    let at_null = target.shape == Shape::Notch && (wz / target.w0 - 1.0).abs() < 1e-6;
    match (figure, target.shape) {
        ("fz", _) => Watch::Least { at: wz },
        ("f0", _) if at_null && moves_null => Watch::Least { at: wz },
        ("f0", _) if at_null => phase(beside),
        ("f0", _) => phase(target.w0),
        ("Q", _) => phase(beside),
        (_, Shape::BandPass) => magnitude(target.w0),
        (_, Shape::HighPass | Shape::FirstOrderHighPass) => magnitude(target.w0 * FAR),
        (_, Shape::Notch) if wz < target.w0 => magnitude(target.w0 * FAR),
        _ => magnitude(target.w0 / FAR),
    }
}
