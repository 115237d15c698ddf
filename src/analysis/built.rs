//! A board as it is built: the parts of every slot, and what small changes of them do.

use std::sync::Arc;

use num_complex::Complex64;

use crate::circuit::{Circuit, Output, Polynomial};
use crate::parts::{Choice, Lot};
use crate::search::{self, Chosen, Part, Problem, Row, SectionProblem};
use crate::target::{Biquad, Criterion, Section, Shape, Yardstick};
use crate::units::{Kind, Value, format_part};

/// How the pieces of a slot make up its value.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Joint {
    /// The values add: resistors in series, capacitors in parallel, or a single part.
    Sum,
    /// The reciprocals add: resistors in parallel, capacitors in series.
    Reciprocal,
}

/// One part to buy, or one that is there.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct BuiltPiece {
    /// Its value, ohms or farads: as measured, else as labelled.
    pub value: Value,
    /// The value on its label.
    pub label: Value,
    /// Whether it was measured: such a part is what it is, without a tolerance.
    pub is_measured: bool,
    /// Its lowest and its highest relative error by the stock list that it is taken from, such as −0.2 and 0.8; `None`
    /// where no list says.
    pub tolerance: Option<(f64, f64)>,
    /// The first line of the stock list that it is taken from.
    pub line: Option<usize>,
    /// Whether the tolerance was given for its slot: then it counts even where the part was measured, as the accuracy of
    /// that measurement.
    pub has_own_tolerance: bool,
    /// Its least and its largest temperature coefficient by the stock list, 1/K; `None` where no list says.
    pub coefficient: Option<(f64, f64)>,
    /// By how much it can be off at the end of its life by the stock list, relative, to either side; `None` where no list says.
    pub ageing: Option<f64>,
}

impl From<Value> for BuiltPiece {
    /// A part that is in no stock list.
    fn from(value: Value) -> BuiltPiece {
        BuiltPiece {
            value,
            label: value,
            is_measured: false,
            tolerance: None,
            line: None,
            has_own_tolerance: false,
            coefficient: None,
            ageing: None,
        }
    }
}

/// What the parts of one part number have in common: kind, label, and where a drawer holds the label in several sorts its
/// line. Measured parts of one label are one part number.
pub type Reel = (Kind, Value, Option<usize>);

impl BuiltPiece {
    /// The reel that it comes from.
    pub fn reel(&self, kind: Kind) -> Reel {
        (kind, self.label, self.line.filter(|_| !self.is_measured))
    }
}

/// What one slot holds.
#[derive(Clone, Debug, PartialEq)]
pub struct BuiltPart {
    /// The slot's index in the circuit.
    pub slot: usize,
    /// Resistor or capacitor.
    pub kind: Kind,
    /// The nominal value of the slot; that of joined parts to twelve digits.
    pub value: Value,
    /// The parts that make it up, at least one.
    pub pieces: Vec<BuiltPiece>,
    /// How they do.
    pub joint: Joint,
}

impl BuiltPart {
    /// The factor by which the slot's value changes when its pieces are off by the relative errors `errors`.
    pub fn factor(&self, errors: &[f64]) -> f64 {
        if let [error] = errors {
            return 1.0 + error;
        }
        let total = self.value.to_f64();
        let pieces = self.pieces.iter().map(|piece| piece.value.to_f64()).zip(errors);
        match self.joint {
            Joint::Sum => pieces.map(|(piece, error)| piece * (1.0 + error)).sum::<f64>() / total,
            Joint::Reciprocal => 1.0 / (total * pieces.map(|(piece, e)| 1.0 / (piece * (1.0 + e))).sum::<f64>()),
        }
    }

    /// The relative change of the slot's value per relative change of each piece, for small changes.
    pub fn shares(&self) -> Vec<f64> {
        let total = self.value.to_f64();
        let share = |piece: &BuiltPiece| match self.joint {
            Joint::Sum => piece.value.to_f64() / total,
            Joint::Reciprocal => total / piece.value.to_f64(),
        };
        self.pieces.iter().map(share).collect()
    }

    /// The values of its pieces in the notation of IEC 60062, with `+` between those in series and `||` between those in
    /// parallel.
    pub fn notation(&self) -> String {
        let is_series = (self.joint == Joint::Sum) == (self.kind == Kind::Resistor);
        let pieces: Vec<String> = self.pieces.iter().map(|piece| format_part(piece.value, self.kind)).collect();
        pieces.join(if is_series { "+" } else { "||" })
    }
}

/// One section as it is built.
#[derive(Clone, Debug, PartialEq)]
pub struct BuiltSection {
    /// The ideal figures.
    pub target: Section,
    /// The circuit.
    pub circuit: Arc<Circuit>,
    /// Index of the output that is taken.
    pub output: usize,
    /// The parts of the filled slots, in slot order.
    pub parts: Vec<BuiltPart>,
}

impl BuiltSection {
    /// The output that is taken.
    pub fn output(&self) -> &Output {
        &self.circuit.outputs[self.output]
    }

    /// The nominal values by slot, ohms and farads; NaN for slots that stay empty.
    pub fn values(&self) -> Vec<f64> {
        let mut values = vec![f64::NAN; self.circuit.slots.len()];
        self.parts.iter().for_each(|part| values[part.slot] = part.value.to_f64());
        values
    }

    /// Name of a slot.
    pub fn slot_name(&self, slot: usize) -> &str {
        &self.circuit.slots[slot].name
    }
}

/// A board: a row of a shortlist with its circuits.
#[derive(Clone, Debug, PartialEq)]
pub struct Built {
    /// The title of the job.
    pub title: String,
    /// By what the response is judged.
    pub criterion: Criterion,
    /// The sections in signal order.
    pub sections: Vec<BuiltSection>,
}

/// The tolerance of a lot by its stock list: lowest and highest relative error. `None` where the list does not say, and for a
/// measured part.
pub fn listed_tolerance(lot: &Lot) -> Option<(f64, f64)> {
    let (low, high) = lot.lines.first().filter(|_| lot.measured.is_none())?.tolerance?.limits(lot.nominal);
    // What the way over ohms and farads leaves behind the twelfth place is taken out.
    let ratio = |limit: f64| ((limit / lot.nominal.to_f64() - 1.0) * 1e12).round() / 1e12;
    Some((ratio(low), ratio(high)))
}

/// The value of joined parts, as a shortlist is read back.
fn twelve_digits(value: f64) -> Option<Value> {
    let text = format!("{value:.11e}");
    let (digits, power) = text.split_once('e')?;
    Value::new(digits.replace('.', "").parse().ok()?, power.parse::<i32>().ok()? - 11).ok()
}

impl BuiltPart {
    /// What one slot of a row holds; `None` for a value that cannot be bought.
    fn of_row(problem: &Problem, part: &Part) -> Option<BuiltPart> {
        let piece = |&choice: &Choice| {
            let lot = problem.supply.lot_of(choice);
            let line = lot.and_then(|lot| lot.lines.first());
            let coefficient = line.and_then(|line| line.temperature_coefficient);
            BuiltPiece {
                value: choice.value,
                label: lot.map_or(choice.value, |lot| lot.nominal),
                is_measured: lot.is_some_and(|lot| lot.measured.is_some()),
                tolerance: lot.and_then(listed_tolerance),
                line: line.map(|line| line.line),
                has_own_tolerance: false,
                coefficient: coefficient.map(|c| (1e-6 * (c.mean() - c.spread()), 1e-6 * (c.mean() + c.spread()))),
                ageing: line.and_then(|line| line.ageing).map(|ageing| ageing.to_f64()),
            }
        };
        let value = match part.value {
            Some(value) => value,
            None => twelve_digits(part.ideal)?,
        };
        let adds = |joint| (joint == search::Joint::Series) == (part.kind == Kind::Resistor);
        let joint = if part.joint.is_none_or(adds) { Joint::Sum } else { Joint::Reciprocal };
        let pieces: Vec<BuiltPiece> = part.pieces.iter().map(piece).collect();
        (!pieces.is_empty()).then_some(BuiltPart { slot: part.slot, kind: part.kind, value, pieces, joint })
    }
}

impl Built {
    /// The board of a row, where boards differ the worst of them; `None` where a part cannot be bought.
    pub fn of_row(problem: &Problem, row: &Row) -> Option<Built> {
        let section = |(section, chosen): (&SectionProblem, &Chosen)| {
            let parts = chosen.parts.iter().map(|part| BuiltPart::of_row(problem, part)).collect::<Option<_>>()?;
            let SectionProblem { target, circuit, output, .. } = section;
            Some(BuiltSection { target: target.clone(), circuit: circuit.clone(), output: *output, parts })
        };
        Some(Built {
            title: problem.title.clone(),
            criterion: problem.criterion,
            sections: problem.sections.iter().zip(&row.sections).map(section).collect::<Option<_>>()?,
        })
    }

    /// The ideal sections.
    pub fn targets(&self) -> Vec<Section> {
        self.sections.iter().map(|section| section.target.clone()).collect()
    }

    /// Gives every part in a slot of that name a tolerance of its own, to either side, in the section of that name or in all.
    /// Whether there is such a slot with a part.
    pub fn set_tolerance(&mut self, section: Option<&str>, slot: &str, tolerance: f64) -> bool {
        let mut found = false;
        for of in self.sections.iter_mut().filter(|of| section.is_none_or(|name| of.target.name == name)) {
            let circuit = of.circuit.clone();
            for part in of.parts.iter_mut().filter(|part| circuit.slots[part.slot].name == slot) {
                found = true;
                for piece in &mut part.pieces {
                    (piece.tolerance, piece.has_own_tolerance) = (Some((-tolerance, tolerance)), true);
                }
            }
        }
        found
    }

    /// Whether the stock list says of some part how it ages.
    pub fn has_ageing(&self) -> bool {
        let parts = self.sections.iter().flat_map(|section| &section.parts);
        parts.flat_map(|part| &part.pieces).any(|piece| piece.ageing.is_some_and(|ageing| ageing > 0.0))
    }

    /// The measure, ready for use.
    pub fn yardstick(&self) -> Yardstick {
        Yardstick::new(&self.targets(), self.criterion)
    }

    /// The transfer functions of the nominal parts.
    pub fn nominal(&self) -> Vec<Biquad> {
        self.sections.iter().map(|section| Formula::of(section).biquad(&section.admittances())).collect()
    }
}

impl BuiltSection {
    /// The nominal admittances in the order of the parts: conductance of a resistor, capacitance of a capacitor.
    pub fn admittances(&self) -> Vec<f64> {
        let admittance = |part: &BuiltPart| match part.kind {
            Kind::Resistor => 1.0 / part.value.to_f64(),
            Kind::Capacitor => part.value.to_f64(),
        };
        self.parts.iter().map(admittance).collect()
    }
}

/// A product of admittances with an integer factor.
#[derive(Clone, Debug)]
struct Term {
    factor: f64,
    /// The parts that occur, each as often as its power says.
    parts: Vec<usize>,
}

/// The coefficients of a section as sums of products, prepared for fast repeated evaluation.
#[derive(Clone, Debug)]
pub struct Formula {
    /// The terms of the numerator's coefficients, then of the denominator's, by ascending powers of s.
    coefficients: [Vec<Term>; 6],
}

impl Formula {
    /// The formula of a section's output, in the admittances of its parts.
    pub fn of(section: &BuiltSection) -> Formula {
        let transfer = &section.output().transfer;
        let place = |slot: usize| section.parts.iter().position(|part| part.slot == slot);
        let terms = |polynomial: Option<&Polynomial>| -> Vec<Term> {
            let Some(polynomial) = polynomial else { return Vec::new() };
            let term = |(exponents, factor): (&[u8], i64)| {
                let powers = exponents.iter().enumerate();
                let parts = powers.flat_map(|(slot, &power)| std::iter::repeat_n(place(slot), usize::from(power)));
                // Slots that stay empty do not occur in the output's polynomials.
                Term { factor: factor as f64, parts: parts.flatten().collect() }
            };
            polynomial.terms().map(term).collect()
        };
        let n = |power: usize| terms(transfer.numerator.get(power));
        let d = |power: usize| terms(transfer.denominator.get(power));
        Formula { coefficients: [n(0), n(1), n(2), d(0), d(1), d(2)] }
    }

    /// The transfer function for these admittances, in the order of the section's parts.
    pub fn biquad(&self, admittances: &[f64]) -> Biquad {
        let value = |terms: &Vec<Term>| {
            let product =
                |term: &Term| term.parts.iter().fold(term.factor, |product, &part| product * admittances[part]);
            terms.iter().map(product).sum::<f64>()
        };
        let c = &self.coefficients;
        Biquad { num: [value(&c[0]), value(&c[1]), value(&c[2])], den: [value(&c[3]), value(&c[4]), value(&c[5])] }
    }

    /// For each part the change of every coefficient per relative change of that part's *value*.
    fn slopes(&self, section: &BuiltSection) -> Vec<Biquad> {
        let admittances = section.admittances();
        let mut slopes = vec![[0.0; 6]; admittances.len()];
        for (place, terms) in self.coefficients.iter().enumerate() {
            for term in terms {
                let product = term.parts.iter().fold(term.factor, |product, &part| product * admittances[part]);
                term.parts.iter().for_each(|&part| slopes[part][place] += product);
            }
        }
        let by_part = slopes.into_iter().zip(&section.parts);
        by_part
            .map(|(slope, part)| {
                let sign = if part.kind == Kind::Resistor { -1.0 } else { 1.0 };
                let [n0, n1, n2, d0, d1, d2] = slope.map(|x| sign * x);
                Biquad { num: [n0, n1, n2], den: [d0, d1, d2] }
            })
            .collect()
    }
}

/// How the figures and the response of a section follow its parts: relative change per relative change of a part's value.
///
/// Exact derivatives at the nominal values: each coefficient is a sum of products, and a product changes by its exponent.
#[derive(Clone, Debug)]
pub struct Sensitivities {
    nominal: Biquad,
    slopes: Vec<Biquad>,
    target: Section,
}

/// The sensitivities of the figures to one part: relative change per relative change of its value.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct FigureSensitivity {
    /// Of f0.
    pub f0: f64,
    /// Of Q; zero for first order.
    pub q: f64,
    /// Of the gain.
    pub gain: f64,
    /// Of the zero of a notch; zero for other shapes.
    pub fz: f64,
}

impl Sensitivities {
    /// The sensitivities of a section at its nominal values.
    pub fn of(section: &BuiltSection) -> Sensitivities {
        let formula = Formula::of(section);
        let nominal = formula.biquad(&section.admittances());
        Sensitivities { nominal, slopes: formula.slopes(section), target: section.target.clone() }
    }

    /// Of the figures, to the part of that place.
    pub fn figures(&self, part: usize) -> FigureSensitivity {
        let (h, slope) = (&self.nominal, &self.slopes[part]);
        let n = |k: usize| slope.num[k] / h.num[k];
        let d = |k: usize| slope.den[k] / h.den[k];
        let shape = self.target.shape;
        let order = shape.order();
        let power = match shape {
            Shape::HighPass => 2,
            Shape::BandPass | Shape::FirstOrderHighPass => 1,
            Shape::Notch if self.target.wz.is_some_and(|wz| wz < self.target.w0) => 2,
            _ => 0,
        };
        FigureSensitivity {
            f0: if order == 2 { 0.5 * (d(0) - d(2)) } else { d(0) - d(1) },
            q: if order == 2 { 0.5 * (d(0) + d(2)) - d(1) } else { 0.0 },
            gain: n(power) - d(power),
            fz: if shape == Shape::Notch { 0.5 * (n(0) - n(2)) } else { 0.0 },
        }
    }

    /// Of H(jω), to each part: the real part is the relative change of the magnitude, the imaginary part that of the
    /// phase in radians.
    pub fn response(&self, w: f64) -> Vec<Complex64> {
        let poly = |p: &[f64; 3]| Complex64::new(p[0] - p[2] * w * w, p[1] * w);
        let (n, d) = (poly(&self.nominal.num), poly(&self.nominal.den));
        self.slopes.iter().map(|slope| poly(&slope.num) / n - poly(&slope.den) / d).collect()
    }
}
