//! `roundwell tighten`: what tighter parts would buy.

use super::args::{ShowFormat, TightenArgs};
use super::failure::{Failure, Faulty};
use super::files::read_text;
use super::output::Output;
use super::price_args::Prices;
use super::vet::{circuits_with, faulty, mask};
use super::vet_settings::{Percent, whole};
use super::{FOUND, NOTHING_WITHIN_LIMITS};
use crate::analysis::{
    Built, CAPACITOR_STEPS, RESISTOR_STEPS, Sampling, StepPrices, Steps, Wanted, cheapest, coarsest, costs, tighten,
};
use crate::job::Listed;
use crate::report::{StepCosts, TightenQuestion, TightenRecord, write_tighten_json, write_tighten_table};
use crate::target::Measure;
use crate::text::{Fault, located};
use crate::units::{parse_decibels, parse_number};

/// The flags as values.
struct Settings {
    steps: Steps,
    sampling: Sampling,
    wanted_yield: Option<f64>,
    prices: Option<Prices>,
    /// The rows that are asked for; `None` for all.
    rows: Option<Vec<usize>>,
}

/// There is neither a mask nor an error.
pub(super) const NOTHING_WANTED: &str = "nothing says what a board has to keep";

/// What to do about that.
pub(super) const WANTED_HELP: &str =
    "name a mask with --mask <FILE>, write one into the job, or give an error with --within";

/// Runs the command and gives its exit code.
///
/// # Errors
/// Bad input, an output that cannot be written.
pub fn run(args: &TightenArgs) -> Result<u8, Failure> {
    let Settings { steps, sampling, wanted_yield, prices, rows } = settings(args)?;
    let Boards { listed, rows, boards } = boards(args, rows)?;
    let Some(first) = boards.first() else {
        let fault = Fault::at("--rows", "the list has no rows");
        return Err(Failure::input(
            fault.help("there is nothing to build: widen the shelves or the limits of the job"),
        ));
    };
    let (wanted, within) = match (&args.mask, &args.within, &listed.mask) {
        (Some(path), ..) => (Wanted::mask(&mask(path, &first.targets())?, first), None),
        (None, Some(within), _) => {
            let (limit, unit) = limit(within, &first.criterion.measure).map_err(Failure::input)?;
            (Wanted::within(limit, first), Some((limit, unit)))
        }
        (None, None, Some(mask)) => (Wanted::mask(mask, first), None),
        (None, None, None) => return Err(Failure::input(Fault::at("", NOTHING_WANTED).help(WANTED_HELP))),
    };
    let output = Output::open(args.page.out.as_deref())?;
    let pool = rayon::ThreadPoolBuilder::new().num_threads(args.page.threads.map_or(0, usize::from)).build();
    let pool = pool.map_err(|error| Failure::Threads(error.to_string()))?;
    let found = pool.install(|| tighten(&boards, &wanted, &steps, &sampling));
    let marked = wanted_yield.map_or(vec![false; found.len()], |yielding| coarsest(&found, yielding));
    let target_keeps = wanted.target_keeps(&first.targets());
    let prices = prices.map(|Prices { resistors, capacitors, currency }| {
        let prices = StepPrices { resistors, capacitors };
        let costs = costs(&found, &boards, &prices);
        let cheapest = wanted_yield.and_then(|wanted| cheapest(&found, &costs, wanted));
        StepCosts { prices, currency, costs, cheapest }
    });
    let asked = TightenQuestion {
        title: &listed.title,
        rows: &rows,
        is_compensated: listed.is_compensated,
        within,
        target_keeps,
        steps: &steps,
        sampling: &sampling,
        wanted_yield,
        costs: prices.as_ref(),
    };
    let record = TightenRecord::new(&asked, &found, &marked);
    let mut bytes = Vec::new();
    let result = match args.page.format {
        ShowFormat::Table => write_tighten_table(&record, usize::from(args.page.width), &mut bytes),
        ShowFormat::Json => write_tighten_json(&record, &mut bytes),
    };
    result.map_err(|error| Failure::Unwritable(error.to_string()))?;
    output.write(&bytes)?;
    let reached = wanted_yield.is_none() || marked.contains(&true);
    Ok(if target_keeps && reached { FOUND } else { NOTHING_WITHIN_LIMITS })
}

fn settings(args: &TightenArgs) -> Result<Settings, Failure> {
    let mut faults = Vec::new();
    let half_width = Percent { name: "the half-width", most: 49.0, example: "2%" };
    let wanted = Percent { name: "the wanted yield", most: 100.0, example: "95%" };
    let (distribution, reel_share) = args.draw.read(&mut faults);
    let half_width = half_width.read("--interval", &args.interval, &mut faults);
    let boards = whole("--boards", &args.boards, 1, 10_000_000, &mut faults);
    let settings = Settings {
        steps: Steps {
            resistors: RESISTOR_STEPS.to_vec(),
            capacitors: CAPACITOR_STEPS.to_vec(),
            distribution,
            reel_share,
        },
        sampling: args.draw.sampling(boards, half_width, &mut faults),
        wanted_yield: args.wanted_yield.as_deref().map(|text| wanted.read("--wanted-yield", text, &mut faults)),
        prices: args.prices.read(&RESISTOR_STEPS, &CAPACITOR_STEPS, &mut faults),
        rows: args.rows.as_deref().map(|text| rows(text, &mut faults)),
    };
    if faults.is_empty() {
        return Ok(settings);
    }
    Err(Failure::Input(vec![Faulty { file: String::new(), text: String::new(), faults, is_first_round: true }]))
}

/// The most rows that one range can name.
const MOST_ROWS: usize = 10_000;

/// Row numbers and ranges of them, each once, in ascending order.
fn rows(text: &str, faults: &mut Vec<Fault>) -> Vec<usize> {
    let range = |word: &str| -> Option<std::ops::RangeInclusive<usize>> {
        let (from, to) = word.split_once("..").unwrap_or((word, word));
        let (from, to) = (from.trim().parse().ok()?, to.trim().parse().ok()?);
        (1 <= from && from <= to && to <= MOST_ROWS).then_some(from..=to)
    };
    let mut list: Vec<usize> = Vec::new();
    for word in text.split(',') {
        match range(word) {
            Some(range) => list.extend(range),
            None => {
                let message = format!("\"{word}\" is no row, and no range of rows");
                faults.push(Fault::at("--rows", message).help("write numbers from 1 and ranges, such as 1,3..5"));
            }
        }
    }
    list.sort_unstable();
    list.dedup();
    list
}

/// The rows of a list.
struct Boards {
    listed: Listed,
    /// The numbers of the rows that are asked for.
    rows: Vec<usize>,
    boards: Vec<Built>,
}

/// The rows of the list that are asked for.
fn boards(args: &TightenArgs, rows: Option<Vec<usize>>) -> Result<Boards, Failure> {
    let text = read_text(&args.list)?;
    let failed = |faults| Failure::Input(vec![faulty(&args.list, &text, faults)]);
    let listed = Listed::parse(&text).map_err(failed)?;
    let mut circuits = circuits_with(&args.circuit)?;
    let rows = rows.unwrap_or_else(|| listed.rows.iter().map(|row| row.rank).collect());
    let mut boards = Vec::new();
    for rank in &rows {
        let row = listed
            .row(*rank)
            .map_err(|message| Failure::input(Fault::at("--rows", message).help("choose rows of the list")))?;
        boards.push(listed.built(row, &mut circuits).map_err(|faults| failed(located(&text, faults)))?);
    }
    Ok(Boards { listed, rows, boards })
}

/// The error that a board may have, in the unit of the measure.
pub(super) fn limit(text: &str, measure: &Measure) -> Result<(f64, &'static str), Fault> {
    let (read, most, unit, example) = match measure {
        Measure::Vector => (parse_number(text), 1.0, "", "2% (the error is a vector error)"),
        _ => (parse_decibels(text), 100.0, "dB", "1dB"),
    };
    let help = format!("write one such as {example}");
    let fault = match read {
        Ok(limit) if limit > 0.0 && limit <= most => return Ok((limit, unit)),
        Ok(_) => {
            Fault::at("--within", format!("the error must be larger than 0 and at most {most} {unit}, found {text}"))
        }
        Err(error) => Fault::at("--within", error.to_string()),
    };
    Err(fault.help(help))
}
