//! From a job as written to a problem that can be searched.

use std::sync::Arc;
use std::time::Duration;

use super::desk::{At, Checked, Desk, Noted, Place};
use super::file::{JobFile, SectionFile};
use super::filter;
use super::goals::{Delicate, check_impedance, criterion, goals, own_error};
use super::section::{Circuits, Written, has_inexact_null};
use super::shelf::shelf;
use super::slots::{Board, ByKind};
use super::stock::{Source, check_rank, pairs};
use crate::analysis::Order;
use crate::circuit::Circuit;
use crate::parts::{Shelf, Stock};
use crate::search::{Problem, SectionProblem};
use crate::text::{CONTROL_HELP, Fault, control_character};
use crate::units::{Kind, parse_seconds};

/// The most characters that the name of a section may have: it stands before lines of the report.
const LONGEST_NAME: usize = 40;

/// A job with everything resolved and checked.
#[derive(Clone, Debug)]
pub struct Job {
    /// What is searched.
    pub problem: Problem,
    /// How long to search, where the job says so.
    pub time_limit: Option<Duration>,
    /// Whether the rows are ranked by what follows from tolerances.
    pub order: Order,
}

/// Resolves a job: fills in the defaults, finds the circuits, chooses the outputs, puts the shelves together.
///
/// `circuits` gives the circuit of an identifier, or says what is wrong with it; `stock` is the stock list that the job
/// names, as read.
///
/// # Errors
/// All faults that can be told independently, by their paths in the job file or their flags;
/// [`located`](crate::text::located) adds the places in the text and their order.
pub fn resolve(
    job: &JobFile,
    circuits: &mut dyn FnMut(&str) -> Result<Arc<Circuit>, String>,
    stock: Option<&Stock>,
) -> Result<Job, Vec<Fault>> {
    let mut desk = Desk::default();
    resolved(&mut desk, job, circuits, stock).map_err(|Noted| desk.faults)
}

fn resolved(desk: &mut Desk, job: &JobFile, circuits: Circuits, stock: Option<&Stock>) -> Checked<Job> {
    let root = Place::job();
    if let Some(At { value: title, place }) = root.find("title", &job.title)
        && let Some(message) = control_character(title.text())
    {
        desk.note(&place, message, CONTROL_HELP);
    }
    // A stock that cannot be used leaves nothing to say of the shelves; all else is still checked, as if there were none.
    let source = Source::new(desk, job, stock);
    let is_sound = source.is_ok();
    let source = match &source {
        Ok(source) => source,
        Err(Noted) => &Source::default(),
    };
    let of_kind = of_job(desk, job, source);
    let (files, place) = files(desk, job, circuits);

    let mut names: Vec<String> = Vec::new();
    let mut sections = Vec::new();
    for (index, file) in files.iter().enumerate() {
        let place = place.item(index);
        let name = file.name.as_ref().map_or_else(|| (index + 1).to_string(), |name| name.value.text().to_string());
        if let Some(message) = control_character(&name) {
            desk.note(&place.of("name", &file.name), message, CONTROL_HELP);
        }
        let length = name.chars().count();
        if length > LONGEST_NAME {
            let message = format!("the name has {length} characters, {LONGEST_NAME} at most are shown");
            desk.note(&place.of("name", &file.name), message, "shorten it; the title may be longer");
        }
        if names.contains(&name) {
            let message = format!("two sections are named {name}");
            desk.note(&place.of("name", &file.name), message, "give each section its own name");
        }
        names.push(name.clone());
        sections.push(section(desk, &Written { job, file, place, name }, (&of_kind, source), circuits));
    }

    let all_pass =
        files.iter().zip(&names).find(|(file, _)| file.shape.as_ref().is_some_and(|shape| shape.value.is_all_pass()));
    let inexact_notch = sections.iter().flatten().find(|section| has_inexact_null(section));
    let delicate = Delicate {
        all_pass: all_pass.map(|(_, name)| name.as_str()),
        inexact_notch: inexact_notch.map(|section| section.target.name.as_str()),
    };
    let criterion = criterion(desk, job, delicate);
    let measure = criterion.as_ref().map(|criterion| criterion.measure).map_err(|noted| *noted);
    if let Ok(measure) = &measure {
        for (index, (section, file)) in sections.iter_mut().zip(&files).enumerate() {
            let own = own_error(desk, place.item(index).find("own_error", &file.own_error), measure);
            if let (Ok(section), Ok(own)) = (section, own) {
                section.own_error = own;
            }
        }
    }
    let goals = goals(desk, job, measure, files.len());
    if let Ok(goals) = &goals {
        sections.iter().flatten().for_each(|section| check_impedance(desk, job, goals, section));
    }
    let shelves: Vec<&Shelf> = sections.iter().flatten().flat_map(|section| &section.shelves).collect();
    if is_sound {
        check_rank(desk, job, source, &shelves);
    }
    let seconds = |text: &str| {
        let seconds = parse_seconds(text).map_err(|error| error.to_string())?;
        Duration::try_from_secs_f64(seconds).map_err(|error| error.to_string())
    };
    let time_limit = desk.optional(root.find("time_limit", &job.time_limit), seconds);
    if !desk.faults.is_empty() {
        return Err(Noted);
    }
    Ok(Job {
        problem: Problem {
            title: job.title.as_ref().map_or("", |given| given.value.text()).to_string(),
            sections: sections.into_iter().collect::<Checked<_>>()?,
            criterion: criterion?,
            goals: goals?,
            supply: source.supply.clone(),
        },
        time_limit: time_limit?,
        order: job.rank.as_ref().map_or(Order::AsFound, |given| given.value.order()),
    })
}

/// The shelves of the job.
pub(super) fn of_job(desk: &mut Desk, job: &JobFile, source: &Source) -> ByKind {
    let root = Place::job();
    ByKind {
        resistors: shelf(desk, root.find("resistors", &job.resistors), Kind::Resistor, source),
        capacitors: shelf(desk, root.find("capacitors", &job.capacitors), Kind::Capacitor, source),
    }
}

/// The shelves of the job as if all could be bought: levels within a filter do not ask what is in stock.
pub(super) fn of_series(desk: &mut Desk, job: &JobFile) -> ByKind {
    of_job(desk, job, &Source::default())
}

/// The sections as they are written, or as the filter gives them, and where they stand.
fn files(desk: &mut Desk, job: &JobFile, circuits: Circuits) -> (Vec<SectionFile>, Place) {
    let root = Place::job();
    let files = job.sections.as_ref().map_or(Vec::new(), |given| given.value.clone());
    if let Some(at) = root.find("filter", &job.filter) {
        if !files.is_empty() {
            let help = "leave out either the filter or the sections";
            desk.note(&at.place, "the job has a filter and sections", help);
        }
        let of_kind = of_series(desk, job);
        return (filter::sections(desk, job, &at, &of_kind, circuits).unwrap_or_default(), at.place);
    }
    let place = root.key("sections");
    if files.is_empty() {
        let help = "write sections: [(shape: LowPass, f0: \"1 kHz\", q: 0.7071)], for example";
        desk.note(&place, "the job has no sections", help);
    }
    (files, place)
}

fn section(
    desk: &mut Desk,
    written: &Written,
    (of_kind, source): (&ByKind, &Source),
    circuits: Circuits,
) -> Checked<SectionProblem> {
    let (file, place) = (written.file, &written.place);
    let target = written.target(desk);
    let circuit = written.circuit(desk, circuits, &target);
    let mut own = |found: Option<At<'_, _>>, kind, of_job: &Checked<_>| match found {
        Some(at) => shelf(desk, Some(at), kind, source),
        None => of_job.clone(),
    };
    let of_kind = ByKind {
        resistors: own(place.find("resistors", &file.resistors), Kind::Resistor, &of_kind.resistors),
        capacitors: own(place.find("capacitors", &file.capacitors), Kind::Capacitor, &of_kind.capacitors),
    };
    let (mut target, circuit) = (target?, circuit?);
    let output = written.output(desk, &circuit, &mut target)?;

    let board = Board { circuit: &circuit, output: &circuit.outputs[output], file, place, source };
    let of_section = place.find("pairs", &file.pairs);
    let pairs = pairs(desk, of_section.or_else(|| Place::job().find("pairs", &written.job.pairs)), &circuit);
    let shelves = board.shelves(desk, &of_kind);
    let equal = board.equal(desk)?;
    let gain = written.check_gain(desk, &circuit, board.output, &equal, &target);
    let mut shelves = shelves?;
    board.narrow(desk, &mut shelves, &equal)?;
    gain?;
    Ok(SectionProblem { target, circuit, output, shelves, equal, pairs: pairs?, own_error: None })
}
