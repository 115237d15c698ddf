//! A filter as a job describes it: from its specification to sections, with all faults at once.

use std::f64::consts::TAU;
use std::sync::Arc;

use super::desk::{At, Checked, Desk, Noted, Place};
use super::file::{FilterFile, JobFile, Response, SectionFile};
use super::given::{Given, Scalar, Scalars};
use super::resolve::of_series;
use super::section::{Circuits, fixed_gain, has_sign, number, usual_circuit};
use super::slots::ByKind;
use crate::circuit::{Circuit, library};
use crate::search::{
    CascadeError, CascadeRequest, CascadeSection, Filter, Gains, Pairing, SectionProblem, Sequence, Stage, cascade,
    ideal_parts,
};
use crate::target::{
    Approximation, Band, Design, DesignError, EdgeAt, HIGHEST_ORDER, LOWEST_Q, Section, Specification, StopBand,
};
use crate::text::{Fault, suggestion};
use crate::units::{parse_decibels, parse_frequency, parse_number, parse_seconds, rounded};

/// The digits with which the figures of a filter's sections go into a job.
const DIGITS: usize = 10;

/// Resolves the filter of a job.
///
/// `circuits` gives the circuit of an identifier, or says what is wrong with it.
///
/// # Errors
/// All faults of the filter, and of the job's shelves, that can be told independently.
pub fn resolve_filter(
    job: &JobFile,
    circuits: &mut dyn FnMut(&str) -> Result<Arc<Circuit>, String>,
) -> Result<Filter, Vec<Fault>> {
    let mut desk = Desk::default();
    let of_kind = of_series(&mut desk, job);
    let Some(at) = Place::job().find("filter", &job.filter) else {
        let help = "write filter: (approximation: Butterworth, response: LowPass, edge: \"1 kHz\", order: 4)";
        desk.note(&Place::job(), "the job has no filter", help);
        return Err(desk.faults);
    };
    match plan(&mut desk, job, &at, &of_kind, circuits) {
        Ok(plan) if desk.faults.is_empty() => Ok(plan),
        _ => Err(desk.faults),
    }
}

/// The sections of a job's filter, as a job file says them.
pub(super) fn sections(
    desk: &mut Desk,
    job: &JobFile,
    at: &At<'_, FilterFile>,
    of_kind: &ByKind,
    circuits: Circuits,
) -> Checked<Vec<SectionFile>> {
    let plan = plan(desk, job, at, of_kind, circuits)?;
    fn given<T>(value: impl Into<T>) -> Option<Given<T>> {
        Some(Given { value: value.into(), flag: None })
    }
    let hertz = |w: f64| given::<Scalar>(rounded(w / TAU, DIGITS).as_str());
    let file = |(section, circuit): (&CascadeSection, &Option<String>)| {
        let target = &section.section;
        SectionFile {
            name: given(target.name.as_str()),
            shape: given(target.shape),
            f0: hertz(target.w0),
            q: target.q.and_then(|q| given(rounded(q, DIGITS).as_str())),
            fz: target.wz.and_then(hertz),
            gain: given(rounded(target.gain, DIGITS).as_str()),
            circuit: circuit.as_ref().and_then(|name| given(name.as_str())),
            ..SectionFile::default()
        }
    };
    Ok(plan.cascade.sections.iter().zip(&plan.circuits).map(file).collect())
}

fn plan(
    desk: &mut Desk,
    job: &JobFile,
    at: &At<'_, FilterFile>,
    of_kind: &ByKind,
    circuits: Circuits,
) -> Checked<Filter> {
    let reader = Reader { file: at.value, place: &at.place };
    let specification = reader.specification(desk);
    let request = reader.request(desk);
    let named = reader.circuits(desk, job, circuits);
    let specification = specification?;
    let design = specification.design().map_err(|error| reader.design_fault(desk, &specification, &error))?;
    reader.check_sections(desk, &design)?;
    let (request, named) = (request?, named?);
    let (Ok(resistors), Ok(capacitors)) = (&of_kind.resistors, &of_kind.capacitors) else { return Err(Noted) };
    let mut choice = Choice { named, output: job.output.as_ref(), used: Vec::new(), known: Vec::new() };
    let mut stage_of = |section: &Section| choice.stage(section, circuits, resistors, capacitors);
    let over_dc = specification.reference_over_dc(&design);
    let pass_end = specification.pass_end(&design);
    let cascade = cascade(&design, specification.band, over_dc, pass_end, &request, &mut stage_of)
        .map_err(|error| reader.cascade_fault(desk, &error))?;
    let settled = |name: &str| {
        let taken = |problem: &SectionProblem| choice.name_of(&problem.circuit).is_some_and(|known| known == name);
        cascade.sections.iter().filter_map(|section| section.problem.as_ref()).any(taken)
    };
    if let Some(unused) = choice.named.iter().find(|named| !settled(&named.name)) {
        let mut shapes: Vec<&str> = cascade.sections.iter().map(|section| section.section.shape.name()).collect();
        shapes.sort_unstable();
        shapes.dedup();
        let message = format!("no section of this filter can use {}", unused.name);
        let place = unused.place.clone();
        return Err(desk.note(&place, message, format!("its sections are of the shapes {}", shapes.join(", "))));
    }
    let name = |problem: &SectionProblem| choice.name_of(&problem.circuit).map(str::to_string);
    let circuits = cascade.sections.iter().map(|section| section.problem.as_ref().and_then(name)).collect();
    Ok(Filter { specification, design, request, cascade, circuits })
}

/// A circuit that the user names.
struct Named {
    name: String,
    place: Place,
    circuit: Arc<Circuit>,
}

/// Chooses what realises each section.
struct Choice<'a> {
    named: Vec<Named>,
    output: Option<&'a Given<Scalar>>,
    /// Circuits taken by default, with their names.
    used: Vec<(Arc<Circuit>, String)>,
    /// What was chosen for sections before.
    known: Vec<(Section, Option<Stage>)>,
}

impl Choice<'_> {
    fn name_of(&self, circuit: &Arc<Circuit>) -> Option<&str> {
        let named = self.named.iter().map(|named| (&named.circuit, &named.name));
        let mut all = named.chain(self.used.iter().map(|(circuit, name)| (circuit, name)));
        all.find(|(known, _)| Arc::ptr_eq(known, circuit)).map(|(_, name)| name.as_str())
    }

    fn stage(
        &mut self,
        section: &Section,
        circuits: &mut dyn FnMut(&str) -> Result<Arc<Circuit>, String>,
        resistors: &crate::parts::Shelf,
        capacitors: &crate::parts::Shelf,
    ) -> Option<Stage> {
        if let Some((_, known)) = self.known.iter().find(|(known, _)| known == section) {
            return known.clone();
        }
        let gives = |circuit: &Arc<Circuit>| self.stage_in(circuit, section, resistors, capacitors);
        let offers: Vec<Stage> = self.named.iter().filter_map(|named| gives(&named.circuit)).collect();
        let solvable = |stage: &&Stage| ideal_parts(&stage.problem).is_some();
        let chosen = match offers.as_slice() {
            [] => None,
            [only] => Some(only.clone()),
            [first, ..] => Some(offers.iter().find(solvable).unwrap_or(first).clone()),
        };
        let chosen = chosen.or_else(|| {
            let name = usual_circuit(section, false);
            let circuit = circuits(name).ok()?;
            let stage = self.stage_in(&circuit, section, resistors, capacitors);
            self.used.push((circuit, name.to_string()));
            stage
        });
        self.known.push((section.clone(), chosen.clone()));
        chosen
    }

    /// The section in a circuit, at its first output of the shape with positive gain, or otherwise with negative.
    fn stage_in(
        &self,
        circuit: &Arc<Circuit>,
        section: &Section,
        resistors: &crate::parts::Shelf,
        capacitors: &crate::parts::Shelf,
    ) -> Option<Stage> {
        let fitting = circuit.outputs.iter().filter(|output| {
            output.shape == section.shape && self.output.is_none_or(|named| named.value.text() == output.name)
        });
        let fitting: Vec<_> = fitting.collect();
        let output = fitting.iter().find(|output| has_sign(output, 1)).or(fitting.first())?;
        let mut target = section.clone();
        target.gain *= f64::from(output.gain_sign().unwrap_or(1));
        let problem = SectionProblem::new(target, Arc::clone(circuit), &output.name, resistors, capacitors)?;
        let fixed_gain = fixed_gain(problem.output(), circuit.slots.len(), &problem.equal, &problem.target);
        Some(Stage { problem, fixed_gain })
    }
}

/// Reads the keys of a filter.
struct Reader<'a> {
    file: &'a FilterFile,
    place: &'a Place,
}

/// A level in dB between two bounds.
fn level(name: &str, low: f64, high: f64) -> impl Fn(&str) -> Result<f64, String> {
    move |text| match parse_decibels(text) {
        Ok(db) if (low..=high).contains(&db) => Ok(db),
        Ok(_) => Err(format!("{name} must lie between {low} and {high} dB, found {text}")),
        Err(error) => Err(error.to_string()),
    }
}

/// Smallest and largest ripple, dB: a thousandth of what can be measured, and what no pass band can be called any more.
const RIPPLE: (f64, f64) = (1e-4, 20.0);
/// Smallest and largest attenuation, dB: beyond 200 dB no circuit goes.
const ATTENUATION: (f64, f64) = (0.1, 200.0);

/// A choice as it is written: letters only, so that `rising-q`, `RisingQ` and `rising_q` are the same.
fn letters(text: &str) -> String {
    text.chars().filter(|c| c.is_alphanumeric()).flat_map(char::to_lowercase).collect()
}

impl Reader<'_> {
    fn missing<T>(&self, desk: &mut Desk, given: &Option<Given<T>>, what: &str, help: String) -> Checked<()> {
        match given {
            Some(_) => Ok(()),
            None => Err(desk.note(self.place, format!("the filter has no {what}"), help)),
        }
    }

    fn specification(&self, desk: &mut Desk) -> Checked<Specification> {
        let (file, place) = (self.file, self.place);
        let names = Approximation::ALL.map(|a| format!("{a:?}")).join(", ");
        let help = format!("write approximation: with one of {names}; as a flag in small letters");
        let has_approximation = self.missing(desk, &file.approximation, "approximation", help);
        let names = Response::ALL.map(|r| format!("{r:?}")).join(", ");
        let help = format!("write response: with one of {names}; as a flag low-pass, for example");
        let has_response = self.missing(desk, &file.response, "response", help);
        let ripple = desk.optional(place.find("ripple", &file.ripple), level("ripple", RIPPLE.0, RIPPLE.1));
        let attenuation = desk.optional(
            place.find("attenuation", &file.attenuation),
            level("attenuation", ATTENUATION.0, ATTENUATION.1),
        );
        let order = desk.optional(place.find("order", &file.order), |text: &str| {
            let order = text.parse().ok().filter(|order| (1..=HIGHEST_ORDER).contains(order));
            order.ok_or_else(|| format!("order must be a whole number from 1 to {HIGHEST_ORDER}, found {text}"))
        });
        let edge_at = desk.optional(place.find("edge_at", &file.edge_at), edge_at);
        has_approximation.and(has_response)?;
        let (Some(approximation), Some(response)) = (&file.approximation, &file.response) else { return Err(Noted) };
        let (approximation, response) = (approximation.value, response.value);
        if approximation == Approximation::LinkwitzRiley
            && matches!(response, Response::BandPass | Response::BandStop)
        {
            let message = format!("there is no Linkwitz-Riley {}", response.name());
            let help = "it is made for a low-pass and a high-pass that add up to an all-pass; take Butterworth";
            return Err(desk.note(&place.of("response", &file.response), message, help));
        }
        let band = self.band(desk, approximation, response);
        let stop = self.stop_edges(desk, response);
        let (ripple, attenuation, order, edge_at, band, stop) =
            (ripple?, attenuation?, order?, edge_at?, band?, stop?);
        let usual = match approximation {
            _ if file.delay.is_some() => EdgeAt::Delay,
            _ if ripple.is_some() => EdgeAt::Ripple,
            Approximation::LinkwitzRiley => EdgeAt::Decibels(20.0 * 2f64.log10()),
            _ => EdgeAt::HalfPower,
        };
        let edge_at = edge_at.unwrap_or(usual);
        let stop_band = match (stop, attenuation) {
            (Some(edges), Some(attenuation)) => Some(StopBand { edges, attenuation }),
            (Some(_), None) => {
                let at = self.stop_place();
                return Err(desk.note(&at, "the stop band has no attenuation", "write attenuation in dB"));
            }
            (None, _) => None,
        };
        self.check_use(desk, approximation, edge_at, stop_band.is_some())?;
        Ok(Specification {
            approximation,
            band,
            edge_at,
            ripple,
            attenuation,
            reference: file.reference.as_ref().map_or_else(Default::default, |given| given.value),
            order,
            stop_band,
        })
    }

    /// Notes figures that would have no effect.
    fn check_use(&self, desk: &mut Desk, approximation: Approximation, edge_at: EdgeAt, stops: bool) -> Checked<()> {
        let (file, place, name) = (self.file, self.place, approximation.name());
        let mut fine = Ok(());
        if let Some(at) = place.find("ripple", &file.ripple).filter(|_| !approximation.has_ripple())
            && edge_at != EdgeAt::Ripple
        {
            let message = format!("the ripple has no effect on a {name} filter whose edge lies elsewhere");
            fine = Err(desk.note(&at.place, message, "leave out the ripple or edge_at"));
        }
        if let Some(at) = place.find("attenuation", &file.attenuation).filter(|_| !approximation.has_attenuation())
            && edge_at != EdgeAt::Attenuation
            && !stops
        {
            let message = format!("the attenuation has no effect on a {name} filter without a stop band");
            fine = Err(desk.note(&at.place, message, "write the edge of the stop band too, or leave it out"));
        }
        if edge_at == EdgeAt::Attenuation && stops {
            let message = "the edge is that of the stop band, whose edge is given too";
            let help = "leave out the edge of the stop band, or give the edge of the pass band";
            fine = Err(desk.note(&place.of("edge_at", &file.edge_at), message, help));
        }
        fine
    }

    /// The response with its pass-band edges.
    fn band(&self, desk: &mut Desk, approximation: Approximation, response: Response) -> Checked<Band> {
        let (file, place) = (self.file, self.place);
        let name = response.name();
        if let Some(at) = place.find("delay", &file.delay) {
            let seconds = desk.value(&at.place, at.value, parse_seconds);
            if approximation != Approximation::Bessel || response != Response::LowPass {
                let message = "only a Bessel low-pass is designed by its delay";
                return Err(desk.note(&at.place, message, "give the edge instead"));
            }
            if file.edge.is_some() || file.edges.is_some() || file.edge_at.is_some() {
                let message = "the delay stands for the edge, which is given too";
                return Err(desk.note(&at.place, message, "leave one of them out"));
            }
            return Ok(Band::LowPass(1.0 / seconds?));
        }
        let one = desk.optional(place.find("edge", &file.edge), parse_frequency);
        let two = desk.range(place.find("edges", &file.edges), parse_frequency);
        let doubles = matches!(response, Response::BandPass | Response::BandStop);
        if let (true, Some(at)) = (doubles, place.find("edge", &file.edge)) {
            let help = "write edges: (lower, upper) in Hz; as a flag --edges LOWER..UPPER";
            return Err(desk.note(&at.place, format!("a {name} has two edges"), help));
        }
        if let (false, Some(at)) = (doubles, place.find("edges", &file.edges)) {
            return Err(desk.note(&at.place, format!("a {name} has one edge"), "write edge in Hz"));
        }
        match (response, one?, two?) {
            (Response::LowPass, Some(edge), _) => Ok(Band::LowPass(edge * TAU)),
            (Response::HighPass, Some(edge), _) => Ok(Band::HighPass(edge * TAU)),
            (Response::BandPass, _, Some((low, high))) => Ok(Band::BandPass(low * TAU, high * TAU)),
            (Response::BandStop, _, Some((low, high))) => Ok(Band::BandStop(low * TAU, high * TAU)),
            _ => {
                let what = if doubles { "edges" } else { "edge" };
                let help = match (doubles, approximation) {
                    (true, _) => "give its pass-band edges in Hz",
                    (false, Approximation::Bessel) => {
                        "give its pass-band edge in Hz, or the delay of a low-pass in s"
                    }
                    (false, _) => "give its pass-band edge in Hz",
                };
                Err(desk.note(place, format!("the {name} has no {what}"), help))
            }
        }
    }

    /// The edges of the stop band, where they are given.
    fn stop_edges(&self, desk: &mut Desk, response: Response) -> Checked<Option<(f64, f64)>> {
        let (file, place) = (self.file, self.place);
        let one = desk.optional(place.find("stop_edge", &file.stop_edge), parse_frequency);
        let two = desk.range(place.find("stop_edges", &file.stop_edges), parse_frequency);
        let doubles = matches!(response, Response::BandPass | Response::BandStop);
        let name = response.name();
        if let (true, Some(at)) = (doubles, place.find("stop_edge", &file.stop_edge)) {
            let help = "write stop_edges: (lower, upper) in Hz; as a flag --stop-edges LOWER..UPPER";
            return Err(desk.note(&at.place, format!("a {name} has two stop-band edges"), help));
        }
        if let (false, Some(at)) = (doubles, place.find("stop_edges", &file.stop_edges)) {
            return Err(desk.note(&at.place, format!("a {name} has one stop-band edge"), "write stop_edge in Hz"));
        }
        let edges = one?.map(|edge| (edge, edge)).or(two?);
        Ok(edges.map(|(low, high)| (low * TAU, high * TAU)))
    }

    fn stop_place(&self) -> Place {
        match self.file.stop_edges {
            Some(_) => self.place.of("stop_edges", &self.file.stop_edges),
            None => self.place.of("stop_edge", &self.file.stop_edge),
        }
    }

    fn design_fault(&self, desk: &mut Desk, asked: &Specification, error: &DesignError) -> Noted {
        let (file, place) = (self.file, self.place);
        let order = || place.of("order", &file.order);
        let (place, help) = match error {
            DesignError::Order { .. } => (order(), "choose another order"),
            DesignError::Missing { what, .. } => {
                let help = match *what {
                    what if what.contains("order") => "write order: 4, for example, or stop_edge and attenuation",
                    what if what.contains("ripple") => "write ripple: 0.5, for example",
                    _ => "write attenuation: 40, for example",
                };
                (place.clone(), help)
            }
            DesignError::Edge { .. } if file.edge_at.is_some() => {
                (place.of("edge_at", &file.edge_at), "choose another level for the edge")
            }
            DesignError::Edge { .. } => (place.of("attenuation", &file.attenuation), "ask for more attenuation"),
            DesignError::StopBand => {
                let help = match asked.band {
                    Band::LowPass(_) => "the stop-band edge of a low-pass lies above the edge",
                    Band::HighPass(_) => "the stop-band edge of a high-pass lies below the edge",
                    Band::BandPass(..) => {
                        "the stop-band edges of a band-pass lie outside its edges, one on each side"
                    }
                    Band::BandStop(..) => {
                        "the stop-band edges of a band-stop lie between its edges, about their middle"
                    }
                };
                (self.stop_place(), help)
            }
            DesignError::Attenuation { is_given: true, .. } => (order(), "raise the order, or leave it out"),
            DesignError::Attenuation { .. } => {
                let help = "ask for less attenuation, move the stop band away, or take a steeper approximation";
                (place.of("attenuation", &file.attenuation), help)
            }
        };
        desk.note(&place, error.to_string(), help)
    }

    /// Notes poles that no section of a job may have.
    fn check_sections(&self, desk: &mut Desk, design: &Design) -> Checked<()> {
        const HIGHEST_Q: f64 = 1000.0;
        let parts = crate::target::Parts::new(&design.roots);
        let place = || match self.file.edges {
            Some(_) => self.place.of("edges", &self.file.edges),
            None => self.place.clone(),
        };
        for poles in &parts.poles {
            let q = poles.q.unwrap_or(0.5);
            if !(LOWEST_Q..=HIGHEST_Q).contains(&q) {
                let message = format!("a section needs the Q {q:.4}: it must lie between {LOWEST_Q} and {HIGHEST_Q}");
                let help = if q < 1.0 {
                    "bring the edges closer together, or build the two sides as filters of their own"
                } else {
                    "move the edges apart, lower the order, or allow more ripple"
                };
                return Err(desk.note(&place(), message, help));
            }
        }
        Ok(())
    }

    fn cascade_fault(&self, desk: &mut Desk, error: &CascadeError) -> Noted {
        let (file, place) = (self.file, self.place);
        let (place, help) = match error {
            CascadeError::List { what: "pairing", .. } => {
                (place.of("pairing", &file.pairing), "number the pairs of zeros by the poles, from 1")
            }
            CascadeError::List { .. } => (place.of("sequence", &file.sequence), "number the poles from 1"),
            CascadeError::Gains { .. } => {
                (place.of("gains", &file.gains), "give each section its gain, in signal order")
            }
            CascadeError::Gain { .. } => {
                (place.of("gain", &file.gain), "leave out the gain, or name a circuit whose gain can be chosen")
            }
            CascadeError::SectionGain { .. } => {
                (place.of("gains", &file.gains), "write that gain, or name another circuit")
            }
            CascadeError::Section(_) => (place.clone(), "move the edges"),
        };
        desk.note(&place, error.to_string(), help)
    }

    /// How the sections are put together.
    fn request(&self, desk: &mut Desk) -> Checked<CascadeRequest> {
        let (file, place) = (self.file, self.place);
        let pairing = place.find("pairing", &file.pairing).map(|at| {
            word(&at, &[("headroom", Pairing::Headroom), ("nearest", Pairing::Nearest)])
                .map_or_else(|| numbers(desk, &at, "headroom, nearest").map(Pairing::Given), Ok)
        });
        let sequence = place.find("sequence", &file.sequence).map(|at| {
            let words =
                [("headroom", Sequence::Headroom), ("risingq", Sequence::RisingQ), ("fallingq", Sequence::FallingQ)];
            word(&at, &words)
                .map_or_else(|| numbers(desk, &at, "headroom, rising-q, falling-q").map(Sequence::Given), Ok)
        });
        let gains = place.find("gains", &file.gains).map(|at| {
            if let Some(gains) = word(&at, &[("headroom", Gains::Headroom), ("equal", Gains::Equal)]) {
                return Ok(gains);
            }
            let list = at.value.0.iter().enumerate();
            let list: Vec<Checked<f64>> = list
                .map(|(i, scalar)| {
                    let message = |text: &str| {
                        unsigned_gain("each gain", text).map_err(|e| {
                            if parse_number(text).is_ok() { e } else { format!("{e}; or write headroom or equal") }
                        })
                    };
                    desk.value(&at.place.item(i), scalar, message)
                })
                .collect();
            list.into_iter().collect::<Checked<_>>().map(Gains::Given)
        });
        let gain = desk.optional(place.find("gain", &file.gain), |text: &str| unsigned_gain("the gain", text));
        let (pairing, sequence, gains) = (pairing.transpose()?, sequence.transpose()?, gains.transpose()?);
        let (gain, gains) = (gain?, gains.unwrap_or_default());
        if let (Some(_), Gains::Given(_)) = (gain, &gains) {
            let message = "the gain of the filter follows from the gains of its sections, which are given";
            return Err(desk.note(&place.of("gain", &file.gain), message, "leave out the gain or the gains"));
        }
        Ok(CascadeRequest {
            pairing: pairing.unwrap_or_default(),
            sequence: sequence.unwrap_or_default(),
            gains,
            gain,
        })
    }

    /// The circuits that the filter names, and the one that the job names.
    fn circuits(&self, desk: &mut Desk, job: &JobFile, circuits: Circuits) -> Checked<Vec<Named>> {
        let mut written: Vec<(&Scalar, Place)> = Vec::new();
        match self.place.find("circuits", &self.file.circuits) {
            Some(At { value: Scalars(list), place }) => {
                written.extend(list.iter().enumerate().map(|(i, name)| (name, place.item(i))));
            }
            None => written.extend(Place::job().find("circuit", &job.circuit).map(|at| (at.value, at.place))),
        }
        let known: Vec<&str> = library().iter().map(|circuit| circuit.id.as_str()).collect();
        let found: Vec<Checked<Named>> = written
            .into_iter()
            .map(|(name, place)| match circuits(name.text()) {
                Ok(circuit) => Ok(Named { name: name.text().to_string(), place, circuit }),
                Err(message) => Err(desk.note(&place, message, suggestion(name.text(), "the circuits are", &known))),
            })
            .collect();
        found.into_iter().collect()
    }
}

/// The choice that a single word names.
fn word<T: Clone>(at: &At<'_, Scalars>, words: &[(&str, T)]) -> Option<T> {
    let [only] = at.value.0.as_slice() else { return None };
    words.iter().find(|(word, _)| *word == letters(only.text())).map(|(_, choice)| choice.clone())
}

/// A list of numbers from 1, as indices.
fn numbers(desk: &mut Desk, at: &At<'_, Scalars>, words: &str) -> Checked<Vec<usize>> {
    let index = |text: &str| {
        let number = text.parse::<usize>().ok().and_then(|number| number.checked_sub(1));
        number.ok_or_else(|| format!("`{text}` is neither one of {words} nor a number from 1"))
    };
    let list: Vec<Checked<usize>> =
        at.value.0.iter().enumerate().map(|(i, scalar)| desk.value(&at.place.item(i), scalar, index)).collect();
    list.into_iter().collect()
}

/// A gain without sign.
fn unsigned_gain(name: &str, text: &str) -> Result<f64, String> {
    match parse_number(text) {
        Ok(gain) if gain < 0.0 => {
            Err(format!("{name} is written without sign, found {text}: the circuits decide it"))
        }
        _ => number(name, 1e-6, 1e6)(text),
    }
}

/// What holds at the edges.
fn edge_at(text: &str) -> Result<EdgeAt, String> {
    match letters(text).as_str() {
        "halfpower" => return Ok(EdgeAt::HalfPower),
        "ripple" => return Ok(EdgeAt::Ripple),
        "attenuation" => return Ok(EdgeAt::Attenuation),
        _ => {}
    }
    let words = "write half-power (-3.01 dB), ripple, attenuation, or a level under the reference such as 1 dB";
    match parse_decibels(text) {
        Ok(db) if (RIPPLE.0..=ATTENUATION.1).contains(&db.abs()) => Ok(EdgeAt::Decibels(db.abs())),
        Ok(_) => {
            Err(format!("the level at the edge must lie between {} and {} dB, found {text}", RIPPLE.0, ATTENUATION.1))
        }
        Err(_) => Err(format!("`{text}` says nothing about the edge: {words}")),
    }
}
