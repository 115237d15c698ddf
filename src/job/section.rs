//! One section of a job: its figures, its circuit and the output taken.

use std::f64::consts::TAU;
use std::sync::Arc;

use super::desk::{At, Checked, Desk, Noted, Place};
use super::file::{JobFile, SectionFile, Sign};
use super::given::{Given, Scalar};
use crate::circuit::{Circuit, Output, Polynomial, Transfer, find, library};
use crate::search::SectionProblem;
use crate::target::{Section, SectionError, Shape};
use crate::text::{suggestion, with_article};
use crate::units::{parse_angular, parse_frequency, parse_number};

/// Finds a circuit by its identifier.
pub(super) type Circuits<'a> = &'a mut dyn FnMut(&str) -> Result<Arc<Circuit>, String>;

/// No section has a smaller Q.
const LOWEST_Q: f64 = 0.01;

/// A plain number between two bounds.
pub(super) fn number(name: &str, low: f64, high: f64) -> impl Fn(&str) -> Result<f64, String> {
    move |text| match parse_number(text) {
        Ok(number) if (low..=high).contains(&number) => Ok(number),
        Ok(_) => Err(format!("{name} must lie between {low} and {high}, found {text}")),
        Err(error) => Err(error.to_string()),
    }
}

/// A gain, of either sign.
fn gain(text: &str) -> Result<f64, String> {
    match parse_number(text) {
        Ok(gain) if (1e-6..=1e6).contains(&gain.abs()) => Ok(gain),
        Ok(_) => Err(format!("gain must lie between 1e-6 and 1e6 or between -1e6 and -1e-6, found {text}")),
        Err(error) => Err(error.to_string()),
    }
}

/// A section as it is written, and what the job says for all sections.
pub(super) struct Written<'a> {
    pub job: &'a JobFile,
    pub file: &'a SectionFile,
    /// Where the section stands.
    pub place: Place,
    /// Its name.
    pub name: String,
}

impl Written<'_> {
    /// The ideal section, with the gain as it is written.
    pub fn target(&self, desk: &mut Desk) -> Checked<Section> {
        let (file, place) = (self.file, &self.place);
        let shape = self.shape(desk);
        let w0 = self.frequency(desk, ["f0", "w0"], [&file.f0, &file.w0]);
        let wz = self.frequency(desk, ["fz", "wz"], [&file.fz, &file.wz]);
        let q = desk.optional(place.find("q", &file.q), number("q", LOWEST_Q, 1000.0));
        let gain = desk.optional(place.find("gain", &file.gain), gain);
        let poles = self.poles(desk);
        if file.f0.is_none() && file.w0.is_none() && file.poles.is_none() {
            let help = "write f0 in Hz, w0 in rad/s, or poles: (.., ..) in Hz";
            return Err(desk.note(place, format!("section {} has no frequency", self.name), help));
        }
        let (shape, w0, wz, gain) = (shape?, w0?, wz?, gain?.unwrap_or(1.0));
        if let Some(at) = place.find("poles", &file.poles).filter(|_| shape.order() == 1) {
            return Err(desk.note(
                &at.place,
                format!("{} section has one pole", with_article(shape.name())),
                "write f0 instead",
            ));
        }
        let (w0, q) = match poles? {
            Some((w0, q)) => (w0, Some(q)),
            None => (w0.ok_or(Noted)?, q?),
        };
        Section::new(self.name.clone(), shape, w0, q, gain, wz).map_err(|error| {
            // The figure that is one too many, if it is that.
            let culprit = match shape.order() {
                1 => place.of("q", &file.q),
                _ if file.fz.is_some() => place.of("fz", &file.fz),
                _ => place.of("wz", &file.wz),
            };
            let message = match error {
                SectionError::Mismatch { shape, problem } => format!("{} section {problem}", with_article(shape)),
                other => other.to_string(),
            };
            desk.note(&culprit, message, "")
        })
    }

    fn shape(&self, desk: &mut Desk) -> Checked<Shape> {
        self.file.shape.as_ref().map(|given| given.value).ok_or_else(|| {
            let help =
                format!("write shape: with one of {}", Shape::ALL.map(|shape| format!("{shape:?}")).join(", "));
            desk.note(&self.place, format!("section {} has no shape", self.name), help)
        })
    }

    /// The figures w0 and Q for which two real poles stand.
    fn poles(&self, desk: &mut Desk) -> Checked<Option<(f64, f64)>> {
        let file = self.file;
        let Some(At { value: (first, second), place }) = self.place.find("poles", &file.poles) else {
            return Ok(None);
        };
        let first = desk.value(&place.item(0), first, parse_frequency);
        let second = desk.value(&place.item(1), second, parse_frequency);
        if file.f0.is_some() || file.w0.is_some() || file.q.is_some() {
            let help = "leave out either the poles, or f0 (or w0) and q";
            return Err(desk.note(&place, "two poles stand for f0 and q, which are given too", help));
        }
        let (w0, q) = Section::from_real_poles(first? * TAU, second? * TAU);
        if q < LOWEST_Q {
            let message =
                format!("the poles are too far apart: they make q {q:.2e}, and it must be at least {LOWEST_Q}");
            return Err(desk.note(&place, message, "use two first-order sections"));
        }
        Ok(Some((w0, q)))
    }

    /// The angular frequency that stands under one of two keys, the first in Hz, the second in rad/s.
    fn frequency(&self, desk: &mut Desk, keys: [&str; 2], given: [&Option<Given>; 2]) -> Checked<Option<f64>> {
        let [hertz, angular] = [0, 1].map(|i| self.place.find(keys[i], given[i]));
        if let (Some(_), Some(at)) = (&hertz, &angular) {
            let message = format!("{} and {} are both given", keys[0], keys[1]);
            return Err(desk.note(&at.place, message, "leave one of them out"));
        }
        let hertz = desk.optional(hertz, |text| parse_frequency(text).map(|f| f * TAU))?;
        Ok(hertz.or(desk.optional(angular, parse_angular)?))
    }

    /// What the section says under a key, or otherwise the job.
    fn either<'a, T>(
        &'a self,
        key: &str,
        of_section: &'a Option<Given<T>>,
        of_job: &'a Option<Given<T>>,
    ) -> Option<At<'a, T>> {
        self.place.find(key, of_section).or_else(|| Place::job().find(key, of_job))
    }

    /// The circuit that is named.
    fn named_circuit(&self) -> Option<At<'_, Scalar>> {
        self.either("circuit", &self.file.circuit, &self.job.circuit)
    }

    /// Whether any sign of the gain will do.
    fn takes_either_sign(&self) -> bool {
        self.either("sign", &self.file.sign, &self.job.sign).is_some_and(|at| *at.value == Sign::Either)
    }

    /// The circuit: the one that is named, or the usual one for the target.
    pub fn circuit(&self, desk: &mut Desk, circuits: Circuits, target: &Checked<Section>) -> Checked<Arc<Circuit>> {
        let named = self.named_circuit();
        let (id, place) = match &named {
            Some(at) => (at.value.text(), &at.place),
            None => {
                let target = target.as_ref().map_err(|noted| *noted)?;
                (usual_circuit(target, self.takes_either_sign()), &self.place)
            }
        };
        circuits(id).map_err(|message| {
            let known: Vec<&str> = library().iter().map(|circuit| circuit.id.as_str()).collect();
            desk.note(place, message, suggestion(id, "the circuits are", &known))
        })
    }

    /// The index of the output to take. Gives the target the sign of the output where the sign does not matter, and where
    /// neither circuit nor gain is written and no usual circuit has a positive gain.
    pub fn output(&self, desk: &mut Desk, circuit: &Circuit, target: &mut Section) -> Checked<usize> {
        let offers = self.offers(desk, circuit, target.shape)?;
        let is_usual = self.named_circuit().is_none();
        let either = self.takes_either_sign();
        let free = either || is_usual && self.file.gain.is_none();
        let wanted = sign_of(target);
        let sign = |&index: &usize| circuit.outputs[index].gain_sign();
        let fits = |index: &usize| either || has_sign(&circuit.outputs[*index], wanted);
        let nearest = || offers.first().copied().filter(|_| free);
        let Some(index) = offers.iter().copied().find(fits).or_else(nearest) else {
            let place = self.place.of("gain", &self.file.gain);
            let only = if wanted > 0 { "negative" } else { "positive" };
            let usual = if is_usual { ", taken by default," } else { "" };
            let shape = with_article(target.shape.name());
            let message = format!("{}{usual} gives {shape} only with {only} gain", circuit.id);
            let help = format!("write gain: {} or sign: Either, or take another circuit", -target.gain);
            return Err(desk.note(&place, message, help));
        };
        if let (true, Some(sign)) = (free, sign(&index)) {
            target.gain = target.gain.abs() * f64::from(sign);
        }
        Ok(index)
    }

    /// The outputs of the wanted shape: all of them, or only the one that is named.
    fn offers(&self, desk: &mut Desk, circuit: &Circuit, shape: Shape) -> Checked<Vec<usize>> {
        let named = self.either("output", &self.file.output, &self.job.output);
        let outputs = circuit.outputs.iter().enumerate();
        let offers: Vec<usize> = outputs
            .filter(|(_, output)| named.as_ref().is_none_or(|at| at.value.text() == output.name))
            .map(|(index, _)| index)
            .collect();
        let fitting: Vec<usize> = offers.iter().copied().filter(|&i| circuit.outputs[i].shape == shape).collect();
        if !fitting.is_empty() {
            return Ok(fitting);
        }
        let all = circuit.outputs.iter().map(|output| format!("{} ({})", output.name, output.shape.name()));
        let all = all.collect::<Vec<_>>().join(", ");
        Err(match (named, offers.first()) {
            (Some(at), None) => {
                let names: Vec<&str> = circuit.outputs.iter().map(|output| output.name.as_str()).collect();
                let name = at.value.text();
                let message = format!("{} has no output `{name}`", circuit.id);
                desk.note(&at.place, message, suggestion(name, "the outputs are", &names))
            }
            (Some(at), Some(&index)) => {
                let given = circuit.outputs[index].shape.name();
                let [given, wanted] = [given, shape.name()].map(with_article);
                let message = format!("`{}` of {} gives {given}, not {wanted}", at.value.text(), circuit.id);
                desk.note(&at.place, message, format!("the outputs are {all}"))
            }
            (None, _) => {
                let place = self.place.of("shape", &self.file.shape);
                let message = format!("{} gives no {}", circuit.id, shape.name());
                let gives = |circuit: &&Circuit| circuit.outputs.iter().any(|output| output.shape == shape);
                let others: Vec<&str> = library().iter().filter(gives).map(|circuit| circuit.id.as_str()).collect();
                let others = others.join(", ");
                let wanted = with_article(shape.name());
                desk.note(&place, message, format!("its outputs are {all}; {wanted} comes from {others}"))
            }
        })
    }

    /// Notes a gain that the output cannot have because it is the same for all part values.
    pub fn check_gain(
        &self,
        desk: &mut Desk,
        circuit: &Circuit,
        output: &Output,
        equal: &[Vec<usize>],
        target: &Section,
    ) -> Checked<()> {
        let ignored = self.job.ignore_gain.as_ref().is_some_and(|given| given.value);
        match fixed_gain(output, circuit.slots.len(), equal, target) {
            Some(fixed) if !ignored && (fixed / target.gain - 1.0).abs() > 1e-9 => {
                let place = self.place.of("gain", &self.file.gain);
                let message = format!("the gain of {} is {fixed} for all part values", circuit.id);
                let help = format!("write gain: {fixed}, set ignore_gain: true for the job, or take another circuit");
                Err(desk.note(&place, message, help))
            }
            _ => Ok(()),
        }
    }
}

/// The transfer function of an output with one variable for the slots of each group.
fn merged(output: &Output, slots: usize, equal: &[Vec<usize>]) -> Transfer {
    let leader = |slot| equal.iter().find(|group| group.contains(&slot)).map_or(slot, |group| group[0]);
    let map: Vec<Option<usize>> = (0..slots).map(|slot| Some(leader(slot))).collect();
    output.transfer.substituted(&map, slots)
}

/// Whether a section is a notch whose null depends on the part values, with its equal slots being equal.
pub(super) fn has_inexact_null(section: &SectionProblem) -> bool {
    let transfer = merged(section.output(), section.circuit.slots.len(), &section.equal);
    section.target.shape == Shape::Notch && transfer.numerator.get(1).is_some_and(|middle| !middle.is_empty())
}

/// The gain of an output as its shape defines it, where it is the same for all part values once the slots of each
/// group are equal.
pub(super) fn fixed_gain(output: &Output, slots: usize, equal: &[Vec<usize>], target: &Section) -> Option<f64> {
    let transfer = merged(output, slots, equal);
    let power = match target.shape {
        Shape::HighPass => 2,
        Shape::BandPass | Shape::FirstOrderHighPass => 1,
        Shape::Notch if target.wz.is_some_and(|wz| wz < target.w0) => 2,
        _ => 0,
    };
    let (n, d) = (transfer.numerator.get(power)?, transfer.denominator.get(power)?);
    let (n, d) = Polynomial::reduced_ratio(n, d, slots);
    let constant = |p: &Polynomial| (0..slots).all(|variable| p.degree_in(variable) == 0);
    let ones = vec![1.0; slots];
    (constant(&n) && constant(&d)).then(|| n.value(&ones) / d.value(&ones))
}

/// The sign of a target's gain.
fn sign_of(target: &Section) -> i8 {
    if target.gain > 0.0 { 1 } else { -1 }
}

/// Whether an output can have a gain of that sign.
pub(super) fn has_sign(output: &Output, wanted: i8) -> bool {
    output.gain_sign().is_none_or(|sign| sign == wanted)
}

/// The circuit that is taken where a job names none: the first usual one with a gain of the wanted sign, or otherwise
/// the first.
pub(super) fn usual_circuit(target: &Section, either: bool) -> &'static str {
    let usual = usual_circuits(target);
    let wanted = sign_of(target);
    let fits = |id: &&&str| {
        let mut outputs = find(id).into_iter().flat_map(|circuit| &circuit.outputs);
        outputs.any(|output| output.shape == target.shape && (either || has_sign(output, wanted)))
    };
    usual.iter().find(fits).unwrap_or(&usual[0])
}

/// The circuits that are usual for a target, the most general first; common practice.
fn usual_circuits(target: &Section) -> &'static [&'static str] {
    // A Fliege notch has its zero at the pole frequency.
    let symmetric = target.wz.is_some_and(|wz| (wz / target.w0 - 1.0).abs() < 1e-9);
    match target.shape {
        Shape::LowPass | Shape::BandPass => &["tow-thomas"],
        Shape::HighPass => &["state-variable"],
        Shape::Notch if symmetric => &["feed-forward-biquad", "fliege-notch"],
        Shape::Notch | Shape::AllPass => &["feed-forward-biquad"],
        Shape::FirstOrderLowPass => &["rc-low-pass", "inverting-low-pass"],
        Shape::FirstOrderHighPass => &["rc-high-pass"],
        Shape::FirstOrderAllPass => &["first-order-all-pass", "first-order-all-pass-lead"],
    }
}
