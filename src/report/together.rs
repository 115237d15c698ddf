//! How far whole boards were searched, for the record and in words.

use serde::Serialize;

use super::numbers::error_in_words;
use super::record::known;
use crate::search::{End, Outcome, Problem, Proof, StopReason, TogetherSummary};
use crate::target::Measure;

/// How far all sections were searched together.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct TogetherSearch {
    /// `exhaustive` or `stopped`.
    pub proof: &'static str,
    /// Where an exhaustive search ended: `all-counts`, `resolution` or `count-limit`.
    pub end: Option<&'static str>,
    /// Why it was stopped: `time-limit`, `interrupted` or `effort`.
    pub stop: Option<StopReason>,
    /// Every smaller number of part numbers was searched to its end, where the search was stopped.
    pub complete_below: Option<usize>,
    /// By how much each section may miss its own target, if the board does not miss the whole by more; in the unit of the
    /// measure.
    pub own_errors: Vec<f64>,
    /// What is known of all boards with so many part numbers.
    pub bounds: Vec<BoundRecord>,
    /// Of boards with so many part numbers or more, only some were looked at beyond what the bounds say.
    pub ended_at: Option<usize>,
    /// What the sections give when they are chosen one at a time, within the wanted error.
    pub one_at_a_time: Option<BestRecord>,
    /// The proof, in words.
    pub statement: String,
    /// What the wanted error takes, in words.
    pub fewest: Option<String>,
    /// Sets evaluated.
    pub sets: u64,
    /// Nodes visited.
    pub nodes: u64,
}

/// What is known of all boards with at most so many part numbers.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct BoundRecord {
    /// At most so many part numbers.
    pub part_numbers: usize,
    /// None has a smaller error than this, in the unit of the measure.
    pub none_below: Option<f64>,
    /// All with an error up to this have been gone through.
    pub searched_to: Option<f64>,
}

/// Part numbers and the error they give.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct BestRecord {
    /// Part numbers.
    pub part_numbers: usize,
    /// The error, in the unit of the measure.
    pub error: Option<f64>,
}

impl TogetherSearch {
    pub(super) fn new(problem: &Problem, outcome: &Outcome) -> Option<TogetherSearch> {
        let summary = outcome.together.as_ref()?;
        let (end, stop, complete_below) = match summary.proof {
            Proof::Exhaustive(End::AllCounts) => (Some("all-counts"), None, None),
            Proof::Exhaustive(End::Resolution) => (Some("resolution"), None, None),
            Proof::Exhaustive(End::CountLimit) => (Some("count-limit"), None, None),
            Proof::Stopped { reason, complete_below } => (None, Some(reason), Some(complete_below)),
        };
        let bounds = summary.bounds.iter();
        Some(TogetherSearch {
            proof: if stop.is_some() { "stopped" } else { "exhaustive" },
            end,
            stop,
            complete_below,
            own_errors: summary.own_errors.clone(),
            bounds: bounds
                .map(|b| BoundRecord {
                    part_numbers: b.part_numbers,
                    none_below: known(b.none_below),
                    searched_to: known(b.searched_to),
                })
                .collect(),
            ended_at: summary.ended_at,
            one_at_a_time: summary
                .one_at_a_time
                .map(|(part_numbers, error)| BestRecord { part_numbers, error: known(error) }),
            statement: statement(problem, summary),
            fewest: fewest(problem, outcome, summary),
            sets: summary.sets,
            nodes: summary.nodes,
        })
    }
}

/// What is proved of which boards.
fn statement(problem: &Problem, summary: &TogetherSummary) -> String {
    let unit = problem.criterion.measure.unit();
    let least = summary.own_errors.iter().copied().fold(f64::INFINITY, f64::min);
    let most = summary.own_errors.iter().copied().fold(0.0, f64::max);
    let own = match most > least {
        true => format!("{} to {}", error_in_words(unit, least), error_in_words(unit, most)),
        false => error_in_words(unit, most),
    };
    let pinned = problem.sections.iter().any(|section| section.own_error.is_some());
    let or = if pinned { "or, where not pinned to that," } else { "or" };
    let allowed = match problem.criterion.measure {
        Measure::Weighted(_) => String::new(),
        _ => {
            format!(
                ", of all whose sections by themselves miss their targets by {own} at most, {or} by no more than the board does"
            )
        }
    };
    match summary.proof {
        Proof::Exhaustive(End::CountLimit) => {
            let most = problem
                .goals
                .max_part_numbers
                .map_or(String::new(), |most| format!(" with up to {most} part numbers"));
            format!("proved: no board{most} beats a row{allowed}")
        }
        Proof::Exhaustive(End::AllCounts) => format!("proved: no board beats a row{allowed}"),
        Proof::Exhaustive(End::Resolution) => {
            let resolution = error_in_words(unit, problem.goals.error_resolution);
            format!("proved: no board beats a row{allowed}; the search ends once the error is below {resolution}")
        }
        Proof::Stopped { reason, .. } => {
            let why = match (reason, gaps(problem, summary)) {
                (StopReason::Effort, gaps) => format!("too many to go through: {gaps}"),
                (other, gaps) => format!("{}, and left: {gaps}", other.describe()),
            };
            format!("proved, but for rows marked ?: no board beats a row{allowed}; {why}")
        }
    }
}

/// The boards that were not gone through, in words.
fn gaps(problem: &Problem, summary: &TogetherSummary) -> String {
    let unit = problem.criterion.measure.unit();
    let mut cap = problem.goals.error_limit;
    let mut gaps = Vec::new();
    for bound in &summary.bounds {
        let found = bound.none_below < bound.searched_to;
        let ended = summary.ended_at.is_some_and(|end| end <= bound.part_numbers);
        if !found && bound.searched_to < cap && !ended {
            let beyond = error_in_words(unit, bound.searched_to);
            gaps.push(format!("boards of {} part numbers beyond {beyond}", bound.part_numbers));
        }
        if found {
            cap = cap.min(bound.none_below);
        }
    }
    gaps.extend(summary.ended_at.map(|end| format!("boards of {end} part numbers or more")));
    gaps.join(", ")
}

/// How few part numbers the wanted error takes, and what it takes with the sections one at a time.
fn fewest(problem: &Problem, outcome: &Outcome, summary: &TogetherSummary) -> Option<String> {
    let wanted = error_in_words(problem.criterion.measure.unit(), problem.goals.wanted_error);
    let marked = outcome.marked.and_then(|index| outcome.rows.get(index)?.part_numbers)?;
    // No board of one part number less is good enough.
    let excluded =
        |b: &crate::search::Bound| b.part_numbers + 1 == marked && b.none_below >= problem.goals.wanted_error;
    let least = summary.bounds.iter().map(|b| b.part_numbers).min();
    let proved = summary.bounds.iter().any(excluded) || least == Some(marked);
    let together = match proved {
        true => format!("{wanted} takes {marked} part numbers, and no such board has fewer"),
        false => format!("{wanted} takes {marked} part numbers; whether fewer suffice is open"),
    };
    Some(match summary.one_at_a_time {
        Some((alone, _)) if alone > marked => format!("{together}; with the sections one at a time it takes {alone}"),
        Some(_) => format!("{together}; choosing the sections one at a time gives no fewer"),
        None => format!("{together}; with the sections one at a time nothing comes within it"),
    })
}
