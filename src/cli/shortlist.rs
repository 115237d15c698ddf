//! `roundwell shortlist`: from a job to a verified shortlist.

use std::time::Instant;

use super::args::{Format, ShortlistArgs};
use super::failure::Failure;
use super::output::Output;
use super::progress::Watch;
use super::settings::Settings;
use super::{FOUND, INTERRUPTED, NOTHING_WITHIN_LIMITS};
use crate::report::{Record, write_csv, write_json, write_table};
use crate::search::{Outcome, StopReason, shortlist};
use crate::verify::verify;

/// Runs the command and gives its exit code.
///
/// # Errors
/// Bad input, an output that cannot be written, a result that fails its check.
pub fn run(args: &ShortlistArgs) -> Result<u8, Failure> {
    let settings = Settings::new(args)?;
    let output = Output::open(args.output.out.as_deref())?;
    let problem = &settings.problem;

    let threads = args.output.threads.map_or(0, usize::from);
    let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build();
    let pool = pool.map_err(|error| Failure::Threads(error.to_string()))?;
    let watch = Watch::start(settings.time_limit, &problem.criterion.measure);
    let start = Instant::now();
    let outcome = pool.install(|| shortlist(problem, &watch));
    let seconds = start.elapsed().as_secs_f64();
    watch.finish();

    verify(problem, &outcome).map_err(Failure::Unverified)?;
    let record = Record::new(problem, &outcome, seconds);
    output.write(&written(&record, args.output.format, usize::from(args.output.width))?)?;
    Ok(exit_code(&outcome))
}

fn exit_code(outcome: &Outcome) -> u8 {
    match outcome.stopped {
        Some(StopReason::Interrupted) => INTERRUPTED,
        _ if outcome.within_limit && !outcome.rows.is_empty() => FOUND,
        _ => NOTHING_WITHIN_LIMITS,
    }
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
