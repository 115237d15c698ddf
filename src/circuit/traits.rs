//! What the slots of a circuit do: which figures of an output each one moves, and in which order they can be trimmed.

use super::netlist::{Circuit, Output};
use super::polynomial::Polynomial;
use crate::target::Shape;
use crate::units::Kind;

/// The figures of an output that one slot moves.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct SlotEffect {
    /// The slot.
    pub slot: usize,
    /// Whether f0 depends on it.
    pub f0: bool,
    /// Whether Q depends on it.
    pub q: bool,
    /// Whether the gain depends on it; for a notch the gain on either side of it.
    pub gain: bool,
    /// Whether fz depends on it.
    pub fz: bool,
    /// Whether the shape itself rests on it: the null of a notch, or that the zeros of an all-pass mirror its poles.
    pub shape: bool,
}

/// Names of the figures, in the order in which they are trimmed where nothing speaks against it.
const FIGURES: [&str; 4] = ["f0", "Q", "fz", "gain"];

impl SlotEffect {
    /// Whether the slot moves each of [`FIGURES`].
    fn moves(&self) -> [bool; 4] {
        [self.f0, self.q, self.fz, self.gain]
    }

    /// The names of the figures that the slot moves: of `f0`, `Q`, `fz`, `gain`.
    pub fn figures(&self) -> Vec<&'static str> {
        FIGURES.into_iter().zip(self.moves()).filter(|(_, moves)| *moves).map(|(name, _)| name).collect()
    }
}

impl Circuit {
    /// What each filled slot of an output moves, in slot order.
    ///
    /// Each slot is taken by itself, ties apart. The answer is exact: a figure depends on a slot where the quotient of
    /// polynomials that gives it does.
    pub fn effects(&self, output: &Output) -> Vec<SlotEffect> {
        let figures = Dependences::of(output, self.slots.len());
        let effect = |slot| SlotEffect {
            slot,
            f0: figures.f0.on(slot),
            q: figures.q.as_ref().is_some_and(|q| q.on(slot)),
            gain: figures.gain.iter().any(|gain| gain.on(slot)),
            fz: figures.fz.as_ref().is_some_and(|fz| fz.on(slot)),
            shape: figures.shape.iter().any(|condition| condition.on(slot)),
        };
        output.filled(self).map(effect).collect()
    }

    /// An order in which resistors can be trimmed, each with the figure it sets (`f0`, `Q`, `fz` or `gain`): no later
    /// one disturbs a figure that was set before.
    ///
    /// As many figures as possible; a figure that no resistor sets in such an order is left out. Slots that are tied
    /// to others, or on which the shape itself rests, are not trimmed. Where several resistors can serve, the one that moves the fewest figures is named.
    pub fn trims(&self, output: &Output) -> Vec<(usize, &'static str)> {
        let tied = |slot: usize| self.ties.iter().any(|tie| tie.contains(&slot));
        let trimmable = |effect: &SlotEffect| {
            self.slots[effect.slot].kind == Kind::Resistor && !tied(effect.slot) && !effect.shape
        };
        let effects: Vec<SlotEffect> = self.effects(output).into_iter().filter(trimmable).collect();
        let mut best = Vec::new();
        longest(&effects, &mut Vec::new(), &mut best);
        best.into_iter().map(|(slot, figure)| (slot, FIGURES[figure])).collect()
    }
}

/// Extends an order of trims in every way and keeps the longest, the first of equals.
fn longest(effects: &[SlotEffect], order: &mut Vec<(usize, usize)>, best: &mut Vec<(usize, usize)>) {
    if order.len() > best.len() {
        best.clone_from(order);
    }
    for figure in 0..FIGURES.len() {
        if order.iter().any(|(_, set)| *set == figure) {
            continue;
        }
        let leaves_alone = |effect: &&SlotEffect| order.iter().all(|(_, set)| !effect.moves()[*set]);
        let serving = effects.iter().filter(|effect| effect.moves()[figure]).filter(leaves_alone);
        let fewest = serving.min_by_key(|effect| effect.moves().iter().filter(|moves| **moves).count());
        if let Some(effect) = fewest {
            order.push((effect.slot, figure));
            longest(effects, order, best);
            order.pop();
        }
    }
}

/// A quotient of polynomials, reduced as far as dependence goes.
struct Quotient(Polynomial, Polynomial);

impl Quotient {
    fn new(above: &Polynomial, below: &Polynomial, slots: usize) -> Quotient {
        let (above, below) = Polynomial::reduced_ratio(above, below, slots);
        Quotient(above, below)
    }

    fn on(&self, slot: usize) -> bool {
        self.0.degree_in(slot) + self.1.degree_in(slot) > 0
    }
}

/// The figures of an output (or powers of them) as quotients.
struct Dependences {
    f0: Quotient,
    q: Option<Quotient>,
    gain: Vec<Quotient>,
    fz: Option<Quotient>,
    /// Quotients that are 1 where the shape holds.
    shape: Vec<Quotient>,
}

impl Dependences {
    fn of(output: &Output, slots: usize) -> Dependences {
        let zero = Polynomial::zero();
        let n = |power: usize| output.transfer.numerator.get(power).unwrap_or(&zero);
        let d = |power: usize| output.transfer.denominator.get(power).unwrap_or(&zero);
        let order = output.shape.order();
        let at = |power: usize| Quotient::new(n(power), d(power), slots);
        let notch = output.shape == Shape::Notch;
        // What must vanish for the shape to hold: positive terms against negative ones. Without either it holds, or
        // fails, for all values alike.
        let vanishing = match output.shape {
            Shape::Notch => vec![n(1).clone()],
            Shape::AllPass => {
                vec![n(0).times(d(2)).minus(&n(2).times(d(0))), n(1).times(d(2)).plus(&n(2).times(d(1)))]
            }
            Shape::FirstOrderAllPass => vec![n(0).times(d(1)).plus(&n(1).times(d(0)))],
            _ => Vec::new(),
        };
        let condition = |sum: &Polynomial| {
            let (positive, negative) = sum.by_sign();
            Quotient::new(&positive, &negative, slots)
        };
        Dependences {
            f0: Quotient::new(d(0), d(order), slots),
            q: (order == 2).then(|| Quotient::new(&d(0).times(d(2)), &d(1).times(d(1)), slots)),
            gain: match output.shape {
                Shape::LowPass | Shape::AllPass | Shape::FirstOrderLowPass | Shape::FirstOrderAllPass => vec![at(0)],
                Shape::BandPass | Shape::FirstOrderHighPass => vec![at(1)],
                Shape::HighPass => vec![at(2)],
                Shape::Notch => vec![at(0), at(2)],
            },
            fz: notch.then(|| Quotient::new(n(0), n(2), slots)),
            shape: vanishing.iter().map(condition).collect(),
        }
    }
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;
    use crate::circuit::{find, library};

    fn trims(id: &str, output: &str) -> String {
        let circuit = find(id).unwrap();
        let trims = circuit.trims(circuit.output(output).unwrap());
        let named = trims.iter().map(|(slot, figure)| format!("{} {figure}", circuit.slots[*slot].name));
        named.collect::<Vec<_>>().join(", ")
    }

    fn moved(id: &str, output: &str, slot: &str) -> String {
        let circuit = find(id).unwrap();
        let effects = circuit.effects(circuit.output(output).unwrap());
        let effect = effects.iter().find(|effect| circuit.slots[effect.slot].name == slot).unwrap();
        effect.figures().join(" ")
    }

    // Source: the design equations of Tow-Thomas (w0^2 = 1/(R2 RF C1 C2), Q = w0 RQ C1, gain RF/RG with RA = RB) and its
    // trimming order R2, RQ, RG; any textbook on active filters.
    #[test]
    fn tow_thomas_is_trimmed_one_figure_after_the_other() {
        assert_eq!(trims("tow-thomas", "low-pass-inverted"), "R2 f0, RQ Q, RG gain");
        assert_eq!(moved("tow-thomas", "low-pass-inverted", "RG"), "gain");
        assert_eq!(moved("tow-thomas", "low-pass-inverted", "RQ"), "Q");
        assert_eq!(moved("tow-thomas", "low-pass-inverted", "C1"), "f0 Q");
        assert_eq!(moved("tow-thomas", "low-pass-inverted", "RF"), "f0 Q gain");
        assert_eq!(moved("tow-thomas", "band-pass", "RQ"), "Q gain");
    }

    // Source: f0 and Q of the buffered RC section, and of the unity-gain Sallen-Key low-pass; closed forms.
    #[test]
    fn a_fixed_gain_rests_on_no_slot() {
        assert_eq!(trims("rc-low-pass", "low-pass"), "R1 f0");
        assert_eq!(moved("sallen-key-low-pass", "low-pass", "R1"), "f0 Q");
        assert!(!trims("sallen-key-low-pass", "low-pass").contains("gain"));
    }

    // Source: the notes of the circuit files: the Fliege null needs R6 R8 = R4 R7; the notch of the feed-forward biquad
    // needs no matching; its all-pass needs R6 = RQ RB/RF, the first-order all-pass RA = RB.
    #[test]
    fn what_a_shape_rests_on_is_not_trimmed() {
        let resting = |id: &str, output: &str| {
            let circuit = find(id).unwrap();
            let effects = circuit.effects(circuit.output(output).unwrap());
            let slots = effects.into_iter().filter(|effect| effect.shape);
            slots.map(|effect| circuit.slots[effect.slot].name.as_str()).collect::<Vec<_>>().join(" ")
        };
        assert_eq!(resting("fliege-notch", "notch"), "R7 R8 R6 R4");
        assert_eq!(resting("feed-forward-biquad", "notch"), "");
        assert_eq!(resting("first-order-all-pass", "all-pass"), "RA RB");
        assert!(resting("feed-forward-biquad", "all-pass").contains("R6"));
        assert_eq!(trims("fliege-notch", "notch"), "R1 f0");
    }

    /// A figure by the numbers: slots that do not move it leave it as it is, the others change it.
    #[test]
    fn effects_agree_with_the_numbers() {
        for circuit in library() {
            for output in &circuit.outputs {
                let figures = |values: &[f64]| {
                    let (n, d) = output.transfer.coefficients(values);
                    let of = |list: &[f64], k: usize| list.get(k).copied().unwrap_or(0.0);
                    let order = output.shape.order();
                    let gains = match output.shape {
                        Shape::HighPass => vec![of(&n, 2) / of(&d, 2)],
                        Shape::BandPass | Shape::FirstOrderHighPass => vec![of(&n, 1) / of(&d, 1)],
                        Shape::Notch => vec![of(&n, 0) / of(&d, 0), of(&n, 2) / of(&d, 2)],
                        _ => vec![of(&n, 0) / of(&d, 0)],
                    };
                    let q = if order == 2 { of(&d, 0) * of(&d, 2) / of(&d, 1).powi(2) } else { 0.0 };
                    let fz = if output.shape == Shape::Notch { of(&n, 0) / of(&n, 2) } else { 0.0 };
                    (of(&d, 0) / of(&d, order), q, gains, fz)
                };
                let values: Vec<f64> = (0..circuit.slots.len()).map(|k| 1.0 + 0.37 * k as f64).collect();
                let before = figures(&values);
                for effect in circuit.effects(output) {
                    let mut changed = values.clone();
                    changed[effect.slot] *= 1.21;
                    let after = figures(&changed);
                    let differs = |a: f64, b: f64| (a - b).abs() > 1e-9 * a.abs();
                    let gain = before.2.iter().zip(&after.2).any(|(a, b)| differs(*a, *b));
                    let found =
                        [differs(before.0, after.0), differs(before.1, after.1), differs(before.3, after.3), gain];
                    assert_eq!(effect.moves(), found, "{} {} {}", circuit.id, output.name, effect.slot);
                }
            }
        }
    }

    #[test]
    fn no_trim_disturbs_an_earlier_one() {
        for circuit in library() {
            for output in &circuit.outputs {
                let effects = circuit.effects(output);
                let order = circuit.trims(output);
                for (index, (slot, figure)) in order.iter().enumerate() {
                    let moved = effects.iter().find(|effect| effect.slot == *slot).unwrap().figures();
                    assert!(moved.contains(figure), "{} {}", circuit.id, output.name);
                    assert!(
                        order[..index].iter().all(|(_, set)| !moved.contains(set)),
                        "{} {}",
                        circuit.id,
                        output.name
                    );
                }
            }
        }
    }
}
