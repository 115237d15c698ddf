//! `roundwell vet`: everything about one row of a shortlist.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use super::args::{ShowFormat, VetArgs};
use super::failure::{Failure, Faulty};
use super::files::{read_circuit, read_text};
use super::output::Output;
use super::vet_settings::VetSettings;
use super::{FOUND, NOTHING_WITHIN_LIMITS};
use crate::analysis::{Built, Conditions, Mask, vet};
use crate::circuit::{Circuit, find};
use crate::job::{Listed, read_mask};
use crate::report::{VetRecord, write_vet_json, write_vet_table};
use crate::target::Section;
use crate::text::{Fault, located};

/// Runs the command and gives its exit code.
///
/// # Errors
/// Bad input, an output that cannot be written.
pub fn run(args: &VetArgs) -> Result<u8, Failure> {
    let VetSettings { tolerances, sampling, climate, drifts, slots, select, real, levels } = VetSettings::new(args)?;
    let (mut built, boards, listed) = board(args)?;
    let is_compensated = listed.is_compensated;
    let missing: Vec<Fault> = slots.iter().filter_map(|slot| slot.apply(&mut built).err()).collect();
    if !missing.is_empty() {
        let (file, text) = (String::new(), String::new());
        return Err(Failure::Input(vec![Faulty { file, text, faults: missing, is_first_round: false }]));
    }
    let climate = (drifts || built.has_ageing()).then_some(climate);
    let mask = match args.mask.as_deref() {
        Some(path) => Some(mask(path, &built.targets())?),
        None => listed.mask,
    };
    let output = Output::open(args.page.out.as_deref())?;
    let pool = rayon::ThreadPoolBuilder::new().num_threads(args.page.threads.map_or(0, usize::from)).build();
    let pool = pool.map_err(|error| Failure::Threads(error.to_string()))?;
    let conditions = Conditions { tolerances, mask, climate, real, levels, trim: args.trim, select, sampling };
    let found = pool.install(|| vet(&built, &conditions));
    let mut record = VetRecord::new(&built, args.row, boards, &conditions, &found);
    record.is_compensated = is_compensated;
    output.write(&written(&record, args.page.format, usize::from(args.page.width))?)?;
    let missed = record.mask.as_ref().is_some_and(|mask| matches!(mask.fails, Some("target" | "nominal")));
    Ok(if missed { NOTHING_WITHIN_LIMITS } else { FOUND })
}

/// The faults of a file.
pub(super) fn faulty(path: &Path, text: &str, faults: Vec<Fault>) -> Faulty {
    let file = if path == Path::new("-") { "standard input".to_string() } else { path.display().to_string() };
    Faulty { file, text: text.to_string(), faults, is_first_round: false }
}

/// The board of the row that is asked for, of how many that differ it is the worst, and the list it stands in.
fn board(args: &VetArgs) -> Result<(Built, usize, Listed), Failure> {
    let text = read_text(&args.list)?;
    let failed = |faults| Failure::Input(vec![faulty(&args.list, &text, faults)]);
    let listed = Listed::parse(&text).map_err(failed)?;
    let mut circuits = circuits_with(&args.circuit)?;
    let row = listed
        .row(args.row)
        .map_err(|message| Failure::input(Fault::at("--row", message).help("choose a row of the list")))?;
    let built = listed.built(row, &mut circuits).map_err(|faults| failed(located(&text, faults)))?;
    let boards = row.boards;
    Ok((built, boards, listed))
}

/// Finds a circuit by its identifier: among the files that are given, then in the library.
pub(super) fn circuits_with(
    files: &[PathBuf],
) -> Result<impl FnMut(&str) -> Result<Arc<Circuit>, String> + use<>, Failure> {
    let read = |path: &PathBuf| {
        let circuit = read_circuit(path)?;
        Ok((circuit.id.clone(), Arc::new(circuit)))
    };
    let own: BTreeMap<String, Arc<Circuit>> = files.iter().map(read).collect::<Result<_, Failure>>()?;
    Ok(move |id: &str| {
        let found = own.get(id).cloned().or_else(|| find(id).cloned().map(Arc::new));
        found.ok_or_else(|| format!("there is no circuit `{id}`"))
    })
}

/// Reads a mask file.
pub(super) fn mask(path: &Path, sections: &[Section]) -> Result<Mask, Failure> {
    mask_of(path, &read_text(path)?, sections)
}

/// The mask of a text that was read from a file.
pub(super) fn mask_of(path: &Path, text: &str, sections: &[Section]) -> Result<Mask, Failure> {
    read_mask(text, sections).map_err(|faults| Failure::Input(vec![faulty(path, text, faults)]))
}

/// The record in the wanted format.
fn written(record: &VetRecord, format: ShowFormat, width: usize) -> Result<Vec<u8>, Failure> {
    let mut bytes = Vec::new();
    let result = match format {
        ShowFormat::Table => write_vet_table(record, width, &mut bytes),
        ShowFormat::Json => write_vet_json(record, &mut bytes),
    };
    result.map(|()| bytes).map_err(|error| Failure::Unwritable(error.to_string()))
}
