//! How a search is watched and stopped: the search itself knows neither clock nor terminal.

use serde::Serialize;

/// Why a search ended before it was complete.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum StopReason {
    /// The time limit was reached.
    TimeLimit,
    /// The user interrupted it.
    Interrupted,
    /// Nothing lay within the job's error limit, and beyond it families that would take too long were left out.
    TooLarge,
    /// To go through all boards, all sections together, would take too long.
    Effort,
    /// There were too many ways to give measured parts to the boards.
    Assignment,
}

impl StopReason {
    /// The reason in words.
    pub fn describe(self) -> &'static str {
        match self {
            StopReason::TimeLimit => "the time limit was reached",
            StopReason::Interrupted => "it was interrupted",
            StopReason::TooLarge => {
                "nothing lies within the error limit, and very large families beyond it were left out"
            }
            StopReason::Effort => "to go through all boards would take too long",
            StopReason::Assignment => "there are too many ways to give the measured parts to the boards",
        }
    }
}

/// Where a search stands.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Progress<'a> {
    /// Name of the section being searched; `None` while the sections are put together.
    pub section: Option<&'a str>,
    /// Families with this many different values are being searched.
    pub part_numbers: usize,
    /// Sets up to this error are being sought, in the unit of the measure.
    pub error_limit: f64,
    /// Best error found so far, of this section or of whole boards.
    pub best: Option<f64>,
    /// For whole boards: the error below which there is none of at most so many part numbers.
    pub bound: Option<f64>,
    /// How much of the current level is done, 0 to 1.
    pub done: f64,
}

/// Told where a search stands, and asked whether it shall stop.
pub trait Monitor: Sync {
    /// A reason to stop now, if there is one. Asked often, from several threads.
    fn stop(&self) -> Option<StopReason> {
        None
    }

    /// Told now and then, from several threads.
    fn progress(&self, _progress: &Progress<'_>) {}
}

/// Lets the search run to its end, unseen.
#[derive(Clone, Copy, Debug, Default)]
pub struct Unwatched;

impl Monitor for Unwatched {}
