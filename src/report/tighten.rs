//! What tighter parts would buy: the record, its JSON and its table.

use std::io::{self, Write};

use serde::Serialize;

use super::drawn::money;
use super::layout::{Column, grid, paragraph, printable, unbroken};
use super::numbers::{count, error_in_words};
use super::vet_table::{compensated_in_words, of_hundred};
use crate::analysis::{Distribution, Sampling, Step, StepPrices, Steps};

/// The name and version of the JSON format: keys may be added to it, none is renamed or removed.
pub const TIGHTEN_FORMAT: &str = "roundwell-tighten/1";

/// What tighter parts would buy. Tolerances and shares are ratios.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct TightenRecord {
    /// [`TIGHTEN_FORMAT`].
    pub format: &'static str,
    /// The title of the job.
    pub title: String,
    /// The rows of the list that were compared.
    pub rows: Vec<usize>,
    /// Whether the list was searched for with real op-amps or surroundings in mind: with the ideal ones that are assumed here
    /// its boards are off by that correction.
    pub is_compensated: bool,
    /// The error that a board may have, in the unit of the measure; `None` where it has to keep a mask.
    pub within: Option<f64>,
    /// The unit of that: `dB`, or empty for a plain ratio.
    pub unit: &'static str,
    /// Whether the ideal target itself keeps what is wanted: if not, no parts do.
    pub target_keeps: bool,
    /// `uniform` or `normal`.
    pub distribution: &'static str,
    /// The share by which parts of one part number are off together.
    pub reel_share: f64,
    /// The seed.
    pub seed: u64,
    /// How often an interval holds the true share.
    pub confidence: f64,
    /// The yield that is wanted.
    pub wanted_yield: Option<f64>,
    /// The currency of the costs, where one is written.
    pub currency: Option<String>,
    /// What one resistor costs, by the tolerances of the steps; empty without prices.
    pub resistor_prices: Vec<Option<f64>>,
    /// What one capacitor costs.
    pub capacitor_prices: Vec<Option<f64>>,
    /// The steps: for the coarsest resistors all capacitors from the coarsest on, then for the next.
    pub steps: Vec<StepRecord>,
}

/// One step.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct StepRecord {
    /// Tolerance of the resistors.
    pub resistors: f64,
    /// Tolerance of the capacitors.
    pub capacitors: f64,
    /// The row with the highest yield.
    pub row: usize,
    /// The yield of that row.
    pub share: f64,
    /// The interval for the true yield.
    pub interval: [f64; 2],
    /// How many boards of it were drawn.
    pub boards: u64,
    /// How many keep what is wanted.
    pub passed: u64,
    /// Whether the low end of the interval reaches the wanted yield while that of no coarser step does.
    pub marked: bool,
    /// What the parts of one board of the row cost; `None` where a price is not known.
    pub cost: Option<f64>,
    /// The same in millionths.
    #[serde(skip)]
    pub cost_millionths: Option<u64>,
    /// Whether it costs least among the steps whose cost is known and whose interval reaches the wanted yield.
    pub cheapest: bool,
}

/// What the steps cost.
#[derive(Clone, Debug, PartialEq)]
pub struct StepCosts {
    /// The prices of single parts.
    pub prices: StepPrices,
    /// Their currency, where one is written.
    pub currency: Option<String>,
    /// The cost of one board of each step, millionths of the currency.
    pub costs: Vec<Option<u64>>,
    /// Index of the step that costs least among those that reach the wanted yield.
    pub cheapest: Option<usize>,
}

/// What was asked.
#[derive(Clone, Debug, PartialEq)]
pub struct TightenQuestion<'a> {
    /// The title of the job.
    pub title: &'a str,
    /// The numbers of the rows.
    pub rows: &'a [usize],
    /// Whether the list was searched for with real op-amps in mind.
    pub is_compensated: bool,
    /// The error that a board may have, and its unit; `None` for a mask.
    pub within: Option<(f64, &'static str)>,
    /// Whether the target itself keeps it.
    pub target_keeps: bool,
    /// The tolerances.
    pub steps: &'a Steps,
    /// How boards were drawn.
    pub sampling: &'a Sampling,
    /// The yield that is wanted.
    pub wanted_yield: Option<f64>,
    /// What the steps cost, where prices are given.
    pub costs: Option<&'a StepCosts>,
}

impl TightenRecord {
    /// The record of what was found; `marked` tells of each step whether it is among the coarsest that reach the yield.
    pub fn new(asked: &TightenQuestion, found: &[Step], marked: &[bool]) -> TightenRecord {
        let money = |millionths: u64| millionths as f64 / 1e6;
        let prices = |of: fn(&StepPrices) -> &Vec<Option<u64>>| match asked.costs {
            Some(costs) => of(&costs.prices).iter().map(|price| price.map(money)).collect(),
            None => Vec::new(),
        };
        let cost = |index: usize| asked.costs.and_then(|costs| costs.costs.get(index).copied().flatten());
        let step = |(index, (step, marked)): (usize, (&Step, &bool))| StepRecord {
            resistors: step.resistors,
            capacitors: step.capacitors,
            row: asked.rows.get(step.row).copied().unwrap_or_default(),
            share: step.passed as f64 / step.boards as f64,
            interval: [step.interval.0, step.interval.1],
            boards: step.boards,
            passed: step.passed,
            marked: *marked,
            cost: cost(index).map(money),
            cost_millionths: cost(index),
            cheapest: asked.costs.is_some_and(|costs| costs.cheapest == Some(index)),
        };
        TightenRecord {
            format: TIGHTEN_FORMAT,
            title: asked.title.to_string(),
            rows: asked.rows.to_vec(),
            is_compensated: asked.is_compensated,
            within: asked.within.map(|(limit, _)| limit),
            unit: asked.within.map_or("", |(_, unit)| unit),
            target_keeps: asked.target_keeps,
            distribution: match asked.steps.distribution {
                Distribution::Uniform => "uniform",
                Distribution::TruncatedNormal => "normal",
            },
            reel_share: asked.steps.reel_share,
            seed: asked.sampling.seed,
            confidence: asked.sampling.confidence,
            wanted_yield: asked.wanted_yield,
            currency: asked.costs.and_then(|costs| costs.currency.clone()),
            resistor_prices: prices(|prices| &prices.resistors),
            capacitor_prices: prices(|prices| &prices.capacitors),
            steps: found.iter().zip(marked).enumerate().map(step).collect(),
        }
    }
}

/// Writes the record as JSON, with a line end.
///
/// # Errors
/// Those of the writer.
pub fn write_tighten_json(record: &TightenRecord, out: &mut dyn Write) -> io::Result<()> {
    serde_json::to_writer_pretty(&mut *out, record)?;
    writeln!(out)
}

/// Writes the record as text of at most `width` characters to the line (40 at least).
///
/// # Errors
/// Those of the writer.
pub fn write_tighten_table(record: &TightenRecord, width: usize, out: &mut dyn Write) -> io::Result<()> {
    let title = if record.title.is_empty() { "Tighter parts".to_string() } else { record.title.clone() };
    let rows: Vec<String> = record.rows.iter().map(usize::to_string).collect();
    let plural = if rows.len() == 1 { "row" } else { "rows" };
    let mut text = paragraph("", &format!("{title}, {plural} {}", rows.join(", ")), width);
    let wanted = match record.within {
        Some(limit) => format!("an error of at most {}", unbroken(&error_in_words(record.unit, limit))),
        None => "the mask".to_string(),
    };
    if !record.target_keeps {
        let line =
            format!("The target itself misses {wanted}: no parts mend that. Change the target or what is wanted.");
        text += &paragraph("", &line, width);
    }
    if record.is_compensated {
        text += &paragraph("! ", &compensated_in_words(true), width);
    }
    let spread = if record.distribution == "uniform" { "evenly" } else { "normally, cut off at the tolerance" };
    let reels = match record.reel_share {
        share if share > 0.0 => format!("{} of it common to the parts of one part number", of_hundred(share)),
        _ => "each part by itself".to_string(),
    };
    let most = record.steps.iter().map(|step| step.boards).max().unwrap_or(0);
    let line = format!(
        "Share of boards that keep {wanted}, with its {} interval and the row that gives it, for the tolerances of \
         resistors (across) and capacitors (down); errors spread {spread}, {reels}; up to {} boards a step",
        unbroken(&of_hundred(record.confidence)),
        count(most)
    );
    text += &paragraph("", &line, width);
    text.push('\n');
    text += &table(record, width);
    if let Some(yielding) = record.wanted_yield {
        let wanted = unbroken(&of_hundred(yielding));
        let marked = record.steps.iter().any(|step| step.marked);
        let line = match marked {
            true => format!("reaches {wanted} with the low end of its interval, while no coarser step does"),
            false => format!("No step reaches {wanted} with the low end of its interval."),
        };
        text.push('\n');
        text += &paragraph(if marked { "* " } else { "" }, &line, width);
        if let Some(step) = record.steps.iter().find(|step| step.cheapest) {
            let line = format!(
                "costs least of those that reach {wanted}: {} a board",
                unbroken(&cost_in_words(record, step.cost_millionths))
            );
            text += &paragraph("# ", &line, width);
        } else if marked && record.has_prices() {
            text += &paragraph("", "No step that reaches it has a price for all its parts.", width);
        }
    }
    if record.has_prices() {
        let line = "Costs are those of the parts of one board of the row shown, each part at the price of its tolerance; \
                    measured parts cost nothing.";
        text.push('\n');
        text += &paragraph("", line, width);
    }
    text.push('\n');
    let caution = "The row of a step is chosen on the boards that give its yield; one that comes close may be as good. \
                   Computed for new parts and ideal op-amps: temperature, ageing, op-amp bandwidth and the layout come on \
                   top. Measure the build.";
    text += &paragraph("", caution, width);
    out.write_all(text.as_bytes())
}

impl TightenRecord {
    fn has_prices(&self) -> bool {
        !self.resistor_prices.is_empty()
    }
}

fn cost_in_words(record: &TightenRecord, millionths: Option<u64>) -> String {
    let currency = record.currency.as_deref().filter(|_| millionths.is_some()).unwrap_or_default();
    format!("{} {}", money(millionths), printable(currency)).trim_end().to_string()
}

/// Different numbers in the order in which they come.
fn different(numbers: impl Iterator<Item = f64>) -> Vec<f64> {
    let mut list: Vec<f64> = Vec::new();
    for number in numbers {
        if !list.iter().any(|known| known.to_bits() == number.to_bits()) {
            list.push(number);
        }
    }
    list
}

/// A column for each tolerance of resistors, some lines for each of capacitors.
fn table(record: &TightenRecord, width: usize) -> String {
    let resistors = different(record.steps.iter().map(|step| step.resistors));
    let capacitors = different(record.steps.iter().map(|step| step.capacitors));
    let percent = |ratio: f64| format!("{:.1}", 100.0 * ratio);
    let cells = |step: &StepRecord| {
        let [low, high] = step.interval.map(percent);
        let marks: String =
            [(step.marked, '*'), (step.cheapest, '#')].iter().filter(|(is, _)| *is).map(|(_, mark)| mark).collect();
        let mark = if marks.is_empty() { marks } else { format!("{marks} ") };
        let mut lines =
            vec![format!("{mark}{} %", percent(step.share)), format!("{low} to {high}"), format!("row {}", step.row)];
        if record.has_prices() {
            lines.push(cost_in_words(record, step.cost_millionths));
        }
        lines
    };
    let blank = if record.has_prices() { 3 } else { 2 };
    let lead = |c: &f64| std::iter::once(of_hundred(*c)).chain(std::iter::repeat_n(String::new(), blank));
    let lead = capacitors.iter().flat_map(lead).collect();
    let mut columns = vec![Column::right("", lead)];
    for (r, chunk) in resistors.iter().zip(record.steps.chunks(capacitors.len().max(1))) {
        columns.push(Column::right(format!("R {}", of_hundred(*r)), chunk.iter().flat_map(cells).collect()));
    }
    columns[0].header = "C".to_string();
    grid(&columns, 1, width)
}
