//! `roundwell shortlist`: from a job to a verified shortlist.

use std::time::Instant;

use super::args::{Format, ShortlistArgs};
use super::around::Around;
use super::failure::{Failure, Faulty};
use super::output::Output;
use super::progress::Watch;
use super::settings::Settings;
use super::{FOUND, INTERRUPTED, NOTHING_WITHIN_LIMITS};
use crate::analysis::{BuiltRow, compensated};
use crate::report::{
    CompensatedRecord, Record, write_compensated_csv, write_compensated_json, write_compensated_table, write_csv,
    write_json, write_table,
};
use crate::search::{Outcome, StopReason, shortlist};
use crate::target::Measure;
use crate::verify::verify;

/// Runs the command and gives its exit code.
///
/// # Errors
/// Bad input, an output that cannot be written, a result that fails its check.
pub fn run(args: &ShortlistArgs) -> Result<u8, Failure> {
    let around = around(args)?;
    let settings = Settings::new(args)?;
    let output = Output::open(args.output.out.as_deref())?;
    let problem = &settings.problem;

    let threads = args.output.threads.map_or(0, usize::from);
    let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build();
    let pool = pool.map_err(|error| Failure::Threads(error.to_string()))?;
    let watch = Watch::start(settings.time_limit, &problem.criterion.measure);
    let start = Instant::now();
    if let Some(Around { surroundings, spread }) = around {
        let found = pool.install(|| compensated(problem, &surroundings, spread, &watch));
        let seconds = start.elapsed().as_secs_f64();
        watch.finish();
        verify(&found.problem, &found.outcome).map_err(Failure::Unverified)?;
        let record = CompensatedRecord::new(problem, &surroundings, spread, &found, seconds);
        output.write(&compensated_bytes(&record, args.output.format, usize::from(args.output.width))?)?;
        let is_near = |error: f64| found.outcome.within_limit && error <= problem.goals.error_limit;
        // The limit of the weighted measure is no number of decibels: there it is enough that the row works.
        let weighted = matches!(problem.criterion.measure, Measure::Weighted(_));
        let works = |row: &BuiltRow| row.error.is_some_and(|(error, _)| weighted || is_near(error));
        return Ok(match exit_code(&found.outcome) {
            _ if found.stopped == Some(StopReason::Interrupted) => INTERRUPTED,
            FOUND if !found.rows.iter().any(works) => NOTHING_WITHIN_LIMITS,
            code => code,
        });
    }
    let outcome = pool.install(|| shortlist(problem, &watch));
    let seconds = start.elapsed().as_secs_f64();
    watch.finish();

    verify(problem, &outcome).map_err(Failure::Unverified)?;
    let record = Record::new(problem, &outcome, seconds);
    output.write(&written(&record, args.output.format, usize::from(args.output.width))?)?;
    Ok(exit_code(&outcome))
}

/// Op-amps and surroundings, where a flag for them is given.
fn around(args: &ShortlistArgs) -> Result<Option<Around>, Failure> {
    let mut faults = Vec::new();
    let around = args.around.is_given().then(|| args.around.read(&mut faults));
    match faults.is_empty() {
        true => Ok(around),
        false => Err(Failure::Input(vec![Faulty {
            file: String::new(),
            text: String::new(),
            faults,
            is_first_round: true,
        }])),
    }
}

fn exit_code(outcome: &Outcome) -> u8 {
    match outcome.stopped {
        Some(StopReason::Interrupted) => INTERRUPTED,
        _ if outcome.within_limit && !outcome.rows.is_empty() => FOUND,
        _ => NOTHING_WITHIN_LIMITS,
    }
}

/// The record of a search with real op-amps in mind in the wanted format.
fn compensated_bytes(record: &CompensatedRecord, format: Format, width: usize) -> Result<Vec<u8>, Failure> {
    let mut bytes = Vec::new();
    let result = match format {
        Format::Table => write_compensated_table(record, width, &mut bytes),
        Format::Json => write_compensated_json(record, &mut bytes),
        Format::Csv => write_compensated_csv(record, &mut bytes),
    };
    result.map(|()| bytes).map_err(|error| Failure::Unwritable(error.to_string()))
}

/// The record in the wanted format.
fn written(record: &Record, format: Format, width: usize) -> Result<Vec<u8>, Failure> {
    let mut bytes = Vec::new();
    let result = match format {
        Format::Table => write_table(record, width, &mut bytes),
        Format::Json => write_json(record, &mut bytes),
        Format::Csv => write_csv(record, &mut bytes),
    };
    result.map(|()| bytes).map_err(|error| Failure::Unwritable(error.to_string()))
}
