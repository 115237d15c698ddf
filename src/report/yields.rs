//! What tolerances make of the rows of a shortlist: its record, and how the table tells it.

use serde::Serialize;

use super::layout::{Column, paragraph, unbroken};
use super::mask::MaskRecord;
use super::numbers::{decimal_column, error_in_words};
use super::record::{Record, RowRecord};
use super::vet::{LimitRecord, TolerancesRecord, YieldRecord, hertz, limits};
use super::vet_table::{missed, of_hundred, relation};
use crate::analysis::{Mask, Order, RowYield, Wanted, YieldQuestion, Yields};
use crate::search::Problem;
use crate::target::{Measure, Section};

/// What was asked of the tolerances.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct YieldsRecord {
    /// The error that a board may have; `None` where it has to keep the mask.
    pub within: Option<f64>,
    /// The unit of that error and of the spread: `dB`, or empty for a plain ratio.
    pub unit: &'static str,
    /// Whether the ideal target itself keeps what is wanted: if not, no parts do.
    pub target_keeps: bool,
    /// The limits of the mask, and how the target stands against them.
    #[serde(skip)]
    pub target_limits: Vec<LimitRecord>,
    /// The tolerances.
    pub tolerances: TolerancesRecord,
    /// By what the rows were put in order: `yield`, `spread`, or nothing of these.
    pub order: Option<&'static str>,
    /// How many alternatives are not listed, being no better in yield either.
    pub dropped: usize,
}

/// What tolerances make of one row.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct BuiltRecord {
    /// The share of boards that keep what is wanted.
    pub r#yield: YieldRecord,
    /// The largest standard deviation of the response, from the sensitivities, in the unit of [`YieldsRecord::unit`].
    pub response_deviation: f64,
    /// Where that is, Hz.
    pub response_deviation_at_hz: f64,
    /// Whether the nominal parts keep what is wanted.
    pub nominal_keeps: bool,
    /// Whether the nominal error is below a third of the deviation, so that a better nominal fit is lost in it.
    pub nominal_error_is_lost: bool,
}

impl Record {
    /// Adds what a board has to keep.
    #[must_use]
    pub fn with_mask(mut self, mask: Option<&Mask>, problem: &Problem) -> Record {
        self.mask = mask.map(|mask| MaskRecord::new(mask, &targets(problem)));
        self
    }

    /// Adds what tolerances make of the rows, where the outcome was that of
    /// [`with_yields`](crate::analysis::with_yields); `mask` is what is wanted, where it is one.
    #[must_use]
    pub fn with_yields(
        mut self,
        problem: &Problem,
        mask: Option<&Mask>,
        asked: &YieldQuestion,
        found: &Yields,
    ) -> Record {
        let targets = targets(problem);
        let (within, target_limits) = match (&asked.wanted, mask) {
            (Wanted::Within(within), _) => (Some(within.limit()), Vec::new()),
            (Wanted::Mask(gauge), Some(mask)) => {
                let ideal: Vec<_> = targets.iter().map(Section::ideal).collect();
                (None, limits(&targets, mask, &gauge.standings(&ideal)))
            }
            (Wanted::Mask(_), None) => (None, Vec::new()),
        };
        self.yields = Some(YieldsRecord {
            within,
            unit: if matches!(problem.criterion.measure, Measure::Vector) { "" } else { "dB" },
            target_keeps: found.target_keeps,
            target_limits,
            tolerances: TolerancesRecord::new(&asked.tolerances),
            order: match asked.order {
                Order::AsFound => None,
                Order::Yield => Some("yield"),
                Order::Spread => Some("spread"),
            },
            dropped: found.dropped,
        });
        let record = |row: &RowYield| BuiltRecord {
            r#yield: YieldRecord::new(&row.keeping, &asked.sampling),
            response_deviation: row.spread.0,
            response_deviation_at_hz: hertz(row.spread.1),
            nominal_keeps: row.nominal_keeps,
            nominal_error_is_lost: row.nominal_is_lost,
        };
        for (row, found) in self.shortlist.iter_mut().zip(&found.rows) {
            row.built = Some(record(found));
        }
        let nearest = self.references.iter_mut().filter(|row| row.part_numbers.is_some());
        nearest.for_each(|row| row.built = found.nearest.as_ref().map(record));
        self
    }
}

fn targets(problem: &Problem) -> Vec<Section> {
    problem.sections.iter().map(|section| section.target.clone()).collect()
}

/// What a board has to keep, and how it is judged.
pub(super) fn conditions(record: &Record, width: usize) -> String {
    let Some(yields) = &record.yields else { return String::new() };
    let mut text = String::new();
    let wanted = match (yields.within, &record.mask) {
        (None, Some(mask)) => {
            let misses = missed(&yields.target_limits, |limit| (limit.target_margin, limit.target_margin_at_hz));
            let verdict = match yields.target_keeps {
                true => "the ideal response keeps it".to_string(),
                false => format!(
                    "the target itself misses it: {misses}. No parts mend that: change the target or the mask."
                ),
            };
            let line = format!("{}; {verdict}", relation(mask.reference, mask.reference_hz));
            text += &paragraph("Mask:   ", &line, width);
            "that keep the mask".to_string()
        }
        (limit, _) => {
            let limit = error_in_words(yields.unit, limit.unwrap_or_default());
            format!("within {} of the target", unbroken(&limit))
        }
    };
    let TolerancesRecord { resistors, capacitors, distribution, reel_share } = &yields.tolerances;
    let spread = match *distribution {
        "uniform" => "spread evenly",
        _ => "spread normally with a standard deviation of a third of that, and cut off",
    };
    let reels = match *reel_share {
        share if share > 0.0 => format!("{} of it common to the parts of one part number", of_hundred(share)),
        _ => "each part by itself".to_string(),
    };
    let boards = match record.shortlist.iter().any(|row| !row.boards.is_empty()) {
        true => ", of the worst where boards differ in their measured parts",
        false => "",
    };
    let unless = if record.stock.is_some() { " where the stock list gives none" } else { "" };
    let line = format!(
        "share of boards {wanted}{boards}, with resistors {}, capacitors {}{unless}, {spread}; {reels}; the same draws for every \
         row. Computed for the rows that were found, not searched for.",
        unbroken(&of_hundred(*resistors)),
        unbroken(&of_hundred(*capacitors))
    );
    text += &paragraph("Yield:  ", &line, width);
    text + &paragraph("Spread: ", "largest standard deviation of the response, from the sensitivities", width)
}

/// The columns of yield and spread for these rows.
pub(super) fn columns<'a>(record: &Record, rows: impl Iterator<Item = &'a RowRecord> + Clone) -> Vec<Column> {
    let Some(yields) = &record.yields else { return Vec::new() };
    let percent = |ratio: f64| format!("{:.1}", 100.0 * ratio);
    let cells = |cell: &dyn Fn(&BuiltRecord) -> String| {
        rows.clone().map(|row| row.built.as_ref().map_or("-".to_string(), cell)).collect::<Vec<_>>()
    };
    let interval = |built: &BuiltRecord| {
        let [low, high] = built.r#yield.interval.map(percent);
        format!("{low} to {high}")
    };
    let confidence = rows.clone().find_map(|row| Some(row.built.as_ref()?.r#yield.confidence)).unwrap_or_default();
    let (unit, scale) = if yields.unit.is_empty() { ("%", 100.0) } else { (yields.unit, 1.0) };
    let spread: Vec<Option<f64>> =
        rows.clone().map(|row| row.built.as_ref().map(|built| scale * built.response_deviation)).collect();
    vec![
        Column::right("yield\n%", cells(&|built| percent(built.r#yield.share))),
        Column::right(format!("{}\ninterval", of_hundred(confidence)), cells(&interval)),
        Column::right(format!("spread\n{unit}"), decimal_column(&spread)),
    ]
}

/// How rows stand that are ranked by yield.
const RANKED_BY_YIELD: &str = "Ranked by yield: rows whose interval reaches into that of the first of them are not told apart by \
                               it, and stand by part numbers, what must be bought, placed parts and error.";

/// What is to be said below the table.
pub(super) fn remarks(record: &Record, width: usize) -> String {
    let Some(yields) = &record.yields else { return String::new() };
    let mut text = String::new();
    let mut say = |line: String| text += &paragraph("", &line, width);
    match yields.order {
        Some("yield") => say(RANKED_BY_YIELD.to_string()),
        Some(order) => say(format!("Ranked by {order}.")),
        None => {}
    }
    if yields.dropped > 0 {
        let are = if yields.dropped == 1 { "alternative is" } else { "alternatives are" };
        say(format!("{} {are} no better in yield either, and not listed.", yields.dropped));
    }
    let of = |holds: fn(&BuiltRecord) -> bool| -> Vec<String> {
        let rows = record.shortlist.iter().filter(|row| row.built.as_ref().is_some_and(holds));
        rows.filter_map(|row| row.rank).map(|rank| rank.to_string()).collect()
    };
    let rows = |list: &[String]| match list {
        [only] => format!("row {only}"),
        _ if list.len() == record.shortlist.len() => "every row".to_string(),
        _ => format!("rows {}", list.join(", ")),
    };
    let missing = of(|built| !built.nominal_keeps);
    if !missing.is_empty() {
        let what = if yields.within.is_some() { "are further off than that" } else { "miss the mask" };
        say(format!("The nominal parts of {} {what}.", rows(&missing)));
    }
    let lost = of(|built| built.nominal_error_is_lost);
    if !lost.is_empty() {
        say(format!(
            "The nominal error of {} is below a third of the spread: it no longer matters. Prefer fewer part numbers or \
             tighter parts to a better fit.",
            rows(&lost)
        ));
    }
    text
}
