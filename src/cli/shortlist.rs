//! `roundwell shortlist`: from a job to a verified shortlist.

use std::time::Instant;

use super::args::{Format, ShortlistArgs, YieldArgs};
use super::around::Around;
use super::failure::{Failure, Faulty};
use super::output::Output;
use super::progress::Watch;
use super::settings::Settings;
use super::tighten::{NOTHING_WANTED, WANTED_HELP, limit};
use super::{FOUND, INTERRUPTED, NOTHING_WITHIN_LIMITS};
use crate::analysis::{BuiltRow, Gauge, Wanted, YieldQuestion, compensated, with_yields};
use crate::report::{
    CompensatedRecord, Record, write_compensated_csv, write_compensated_json, write_compensated_table, write_csv,
    write_json, write_table,
};
use crate::search::{Outcome, StopReason, shortlist};
use crate::target::{Measure, Section};
use crate::text::Fault;
use crate::verify::verify;

/// Runs the command and gives its exit code.
///
/// # Errors
/// Bad input, an output that cannot be written, a result that fails its check.
pub fn run(args: &ShortlistArgs) -> Result<u8, Failure> {
    let around = around(args)?;
    let settings = Settings::new(args)?;
    let asked = question(&args.yields, &settings)?;
    if asked.is_some() && around.is_some() {
        let fault = Fault::at("--yield", "is computed for ideal op-amps, not beside --gbw and its companions");
        return Err(Failure::inputs(vec![fault.help("leave out one of them; vet shows both for a row")]));
    }
    let output = Output::open(args.output.out.as_deref())?;
    let mut problem = settings.problem;
    if asked.is_some() {
        // The yield decides which rows are listed.
        problem.goals.rows = MOST_ROWS;
    }
    let problem = &problem;

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
    let mask = settings.mask.as_ref();
    let (record, code) = match asked {
        None => (Record::new(problem, &outcome, seconds).with_mask(mask, problem), exit_code(&outcome)),
        Some(asked) => {
            let (outcome, yields) = pool.install(|| with_yields(problem, outcome, &asked));
            let record = Record::new(problem, &outcome, seconds).with_mask(mask, problem);
            let keeps = yields.target_keeps && yields.rows.iter().any(|row| row.nominal_keeps);
            let code = match exit_code(&outcome) {
                FOUND if !keeps => NOTHING_WITHIN_LIMITS,
                code => code,
            };
            (record.with_yields(problem, mask, &asked, &yields), code)
        }
    };
    output.write(&written(&record, args.output.format, usize::from(args.output.width))?)?;
    Ok(code)
}

/// As many rows as a job can ask for.
const MOST_ROWS: usize = 10_000;

/// What is asked of the tolerances, where yields are.
fn question(args: &YieldArgs, settings: &Settings) -> Result<Option<YieldQuestion>, Failure> {
    let idle = |flag| Fault::at(flag, "says nothing without --yield").help("add --yield, or leave it out");
    let mut faults: Vec<Fault> = args.idle().into_iter().map(idle).collect();
    let mut asked = None;
    if args.yields {
        let (tolerances, sampling) = args.read(&mut faults);
        let problem = &settings.problem;
        let targets: Vec<Section> = problem.sections.iter().map(|section| section.target.clone()).collect();
        let wanted = match (args.within.as_deref(), &settings.mask) {
            (Some(within), _) => limit(within, &problem.criterion.measure)
                .map(|(limit, _)| Wanted::within_of(limit, &targets, problem.criterion)),
            (None, Some(mask)) => Ok(Wanted::Mask(Gauge::new(mask, &targets, problem.criterion))),
            (None, None) => Err(Fault::at("--yield", NOTHING_WANTED).help(WANTED_HELP)),
        };
        let wanted = wanted.map_err(|fault| faults.push(fault)).ok();
        let (order, rows) = (settings.order, problem.goals.rows);
        asked = wanted.map(|wanted| YieldQuestion { wanted, tolerances, sampling, order, rows });
    }
    if faults.is_empty() { Ok(asked) } else { Err(Failure::inputs(faults)) }
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
