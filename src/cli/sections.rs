//! `roundwell sections`: from the specification of a filter to sections.

use super::FOUND;
use super::failure::Failure;
use super::files::Circuits;
use super::output::Output;
use super::sections_args::{ChoiceArgs, FilterArgs, SectionsArgs, SectionsFormat, approximation_flag};
use super::settings::{Source, given, noted, scalar};
use crate::job::{FilterFile, Given, JobFile, Response, Scalar, Scalars, resolve_filter};
use crate::report::{SectionsRecord, write_sections_job, write_sections_json, write_sections_table};
use crate::target::{Approximation, Reference};
use crate::text::{CONTROL_HELP, Fault, control_character};

/// Runs the command and gives its exit code.
///
/// # Errors
/// Bad input, a specification that no filter meets, an output that cannot be written.
pub fn run(args: &SectionsArgs) -> Result<u8, Failure> {
    let source = args.job.as_deref().map(Source::read).transpose()?.unwrap_or_default();
    let mut job = source.job()?;
    let mut faults = lay_over(&mut job, args);
    if !faults.is_empty() {
        return Err(source.failure(faults, Vec::new(), true));
    }
    if let Some(sections) = &job.sections
        && job.filter.is_some()
        && !sections.value.is_empty()
    {
        let message = "the job has sections and a filter";
        faults.push(Fault::at("sections", message).help("leave out either the filter or the sections"));
    }
    if job.filter.is_none() {
        let help = "describe one, for example --approximation butterworth --response low-pass --edge 1k --order 4";
        let path = if source.path.is_some() { "" } else { "filter" };
        faults.push(Fault::at(path, "there is no filter").help(help));
        return Err(source.failure(faults, Vec::new(), false));
    }
    let title = job.title.as_ref().map_or("", |given| given.value.text()).to_string();
    if let Some(message) = control_character(&title) {
        let path = job.title.as_ref().and_then(|given| given.flag).unwrap_or("title");
        faults.push(Fault::at(path, message).help(CONTROL_HELP));
    }
    let mut circuits = Circuits::new(source.folder());
    let filter = match resolve_filter(&job, &mut |name| circuits.get(name)) {
        Ok(filter) if faults.is_empty() => filter,
        resolved => {
            faults.extend(resolved.err().unwrap_or_default());
            return Err(source.failure(faults, circuits.faulty, false));
        }
    };
    let record = SectionsRecord::new(&title, &filter, source.path.is_some());
    Output::open(args.out.as_deref())?.write(&written(&record, args.format, usize::from(args.width))?)?;
    Ok(FOUND)
}

/// The record in the wanted format.
fn written(record: &SectionsRecord, format: SectionsFormat, width: usize) -> Result<Vec<u8>, Failure> {
    let mut bytes = Vec::new();
    let result = match format {
        SectionsFormat::Table => write_sections_table(record, width, &mut bytes),
        SectionsFormat::Json => write_sections_json(record, &mut bytes),
        SectionsFormat::Job => write_sections_job(record, &mut bytes),
    };
    result.map(|()| bytes).map_err(|error| Failure::Unwritable(error.to_string()))
}

/// Lays the flags over the filter of the job.
fn lay_over(job: &mut JobFile, args: &SectionsArgs) -> Vec<Fault> {
    let mut faults = Vec::new();
    let FilterArgs {
        approximation,
        response,
        edge,
        edges,
        edge_at,
        delay,
        order,
        ripple,
        attenuation,
        stop_edge,
        stop_edges,
        gain,
        reference,
    } = &args.filter;
    let ChoiceArgs { pairing, sequence, gains, circuits } = &args.choice;
    let approximation = approximation
        .as_deref()
        .and_then(|name| Approximation::ALL.into_iter().find(|known| approximation_flag(*known) == name));
    let response = response.as_deref().and_then(|name| Response::ALL.into_iter().find(|known| known.name() == name));
    let reference = reference.as_deref().map(|name| if name == "dc" { Reference::Dc } else { Reference::Peak });
    let range = |flag, text: &Option<String>| text.as_deref().map(|text| Given::range(flag, text));
    let over = FilterFile {
        approximation: given("--approximation", approximation),
        response: given("--response", response),
        edge: scalar("--edge", edge),
        edges: noted(&mut faults, range("--edges", edges)),
        edge_at: scalar("--edge-at", edge_at),
        delay: scalar("--delay", delay),
        order: scalar("--order", order),
        ripple: scalar("--ripple", ripple),
        attenuation: scalar("--attenuation", attenuation),
        stop_edge: scalar("--stop-edge", stop_edge),
        stop_edges: noted(&mut faults, range("--stop-edges", stop_edges)),
        gain: scalar("--gain", gain),
        reference: given("--reference", reference),
        pairing: list("--pairing", pairing),
        sequence: list("--sequence", sequence),
        gains: list("--gains", gains),
        circuits: list("--circuits", circuits),
    };
    if job.filter.is_some() || over != FilterFile::default() || !faults.is_empty() {
        job.filter.get_or_insert_with(|| Given { value: FilterFile::default(), flag: None }).value.overlay(over);
    }
    if args.title.is_some() {
        job.title = scalar("--title", &args.title);
    }
    faults
}

/// Texts that are separated by commas.
fn list(flag: &'static str, text: &Option<String>) -> Option<Given<Scalars>> {
    let members = |text: &str| Scalars(text.split(',').map(|member| Scalar::from(member.trim())).collect());
    text.as_deref().map(|text| Given::flag(flag, members(text)))
}
