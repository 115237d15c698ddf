//! One section of a job: its figures, its circuit and the output taken.

use std::f64::consts::TAU;
use std::sync::Arc;

use super::desk::{At, Checked, Desk, Noted, Place};
use super::file::{JobFile, SectionFile, Sign};
use super::given::Given;
use crate::circuit::{Circuit, Output, Polynomial, library};
use crate::target::{Section, Shape};
use crate::text::suggestion;
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
            return Err(desk.note(&at.place, format!("a {} section has one pole", shape.name()), "write f0 instead"));
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
            desk.note(&culprit, error.to_string(), "")
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

    /// The circuit: the one that is named, or the usual one for the shape.
    pub fn circuit(&self, desk: &mut Desk, circuits: Circuits) -> Checked<Arc<Circuit>> {
        let named = self.either("circuit", &self.file.circuit, &self.job.circuit);
        let (id, place) = match &named {
            Some(at) => (at.value.text(), &at.place),
            None => (usual_circuit(self.file.shape.as_ref().ok_or(Noted)?.value), &self.place),
        };
        circuits(id).map_err(|message| {
            let known: Vec<&str> = library().iter().map(|circuit| circuit.id.as_str()).collect();
            desk.note(place, message, suggestion(id, "the circuits are", &known))
        })
    }

    /// The index of the output to take. Gives the target the sign of the output where the sign does not matter.
    pub fn output(&self, desk: &mut Desk, circuit: &Circuit, target: &mut Section) -> Checked<usize> {
        let offers = self.offers(desk, circuit, target.shape)?;
        let either = self.either("sign", &self.file.sign, &self.job.sign).is_some_and(|at| *at.value == Sign::Either);
        let wanted = if target.gain > 0.0 { 1 } else { -1 };
        let sign = |&index: &usize| circuit.outputs[index].gain_sign();
        let fits = |index: &usize| either || sign(index).is_none_or(|sign| sign == wanted);
        let Some(index) = offers.iter().copied().find(fits) else {
            let place = self.place.of("gain", &self.file.gain);
            let given = if wanted > 0 { "inverted" } else { "without inversion" };
            let message = format!("{} gives a {} only {given}", circuit.id, target.shape.name());
            let help = format!("write gain: {} or sign: Either, or take another circuit", -target.gain);
            return Err(desk.note(&place, message, help));
        };
        if let (true, Some(sign)) = (either, sign(&index)) {
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
                let message =
                    format!("`{}` of {} gives a {given}, not a {}", at.value.text(), circuit.id, shape.name());
                desk.note(&at.place, message, format!("the outputs are {all}"))
            }
            (None, _) => {
                let place = self.place.of("shape", &self.file.shape);
                let message = format!("{} gives no {}", circuit.id, shape.name());
                let gives = |circuit: &&Circuit| circuit.outputs.iter().any(|output| output.shape == shape);
                let others: Vec<&str> = library().iter().filter(gives).map(|circuit| circuit.id.as_str()).collect();
                let others = others.join(", ");
                desk.note(&place, message, format!("its outputs are {all}; a {} comes from {others}", shape.name()))
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

/// The gain of an output as its shape defines it, where it is the same for all part values once the slots of each
/// group are equal.
fn fixed_gain(output: &Output, slots: usize, equal: &[Vec<usize>], target: &Section) -> Option<f64> {
    let leader = |slot| equal.iter().find(|group| group.contains(&slot)).map_or(slot, |group| group[0]);
    let map: Vec<Option<usize>> = (0..slots).map(|slot| Some(leader(slot))).collect();
    let transfer = output.transfer.substituted(&map, slots);
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

/// The circuit that is taken for a shape where a job names none; common practice.
fn usual_circuit(shape: Shape) -> &'static str {
    match shape {
        Shape::LowPass | Shape::BandPass => "tow-thomas",
        Shape::HighPass => "state-variable",
        Shape::Notch | Shape::AllPass => "feed-forward-biquad",
        Shape::FirstOrderLowPass => "rc-low-pass",
        Shape::FirstOrderHighPass => "rc-high-pass",
        Shape::FirstOrderAllPass => "first-order-all-pass",
    }
}
