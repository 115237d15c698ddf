//! Watching a search: Ctrl-C, the time limit, and a bar on the terminal.

use std::sync::atomic::{AtomicBool, Ordering};
use std::time::{Duration, Instant};

use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};

use crate::report::error_in_words;
use crate::search::{Monitor, Progress, StopReason};
use crate::target::Measure;

/// Set by Ctrl-C.
static INTERRUPTED: AtomicBool = AtomicBool::new(false);

/// Watches one search.
#[derive(Debug)]
pub struct Watch {
    deadline: Option<Instant>,
    bar: ProgressBar,
    unit: &'static str,
}

/// Steps of the bar.
const STEPS: u64 = 1000;

impl Watch {
    /// Starts to watch: the time limit runs from now. The bar is drawn on standard error, and only if that is a
    /// terminal. The first Ctrl-C ends the search, the second one the program.
    pub fn start(time_limit: Option<Duration>, measure: &Measure) -> Watch {
        // A handler that cannot be set leaves the system's own way to interrupt.
        let _ = ctrlc::set_handler(|| {
            if INTERRUPTED.swap(true, Ordering::Relaxed) {
                std::process::exit(i32::from(super::INTERRUPTED));
            }
        });
        // The bar hides itself where there is no terminal.
        let bar = ProgressBar::with_draw_target(Some(STEPS), ProgressDrawTarget::stderr_with_hz(5));
        if let Ok(style) = ProgressStyle::with_template("{bar:20} {msg} [{elapsed}]") {
            bar.set_style(style.progress_chars("=> "));
        }
        let deadline = time_limit.and_then(|limit| Instant::now().checked_add(limit));
        Watch { deadline, bar, unit: measure.unit() }
    }

    /// Clears the bar.
    pub fn finish(&self) {
        self.bar.finish_and_clear();
    }
}

impl Monitor for Watch {
    fn stop(&self) -> Option<StopReason> {
        if INTERRUPTED.load(Ordering::Relaxed) {
            return Some(StopReason::Interrupted);
        }
        let late = self.deadline.is_some_and(|deadline| Instant::now() >= deadline);
        late.then_some(StopReason::TimeLimit)
    }

    fn progress(&self, progress: &Progress<'_>) {
        if self.bar.is_hidden() {
            return;
        }
        self.bar.set_position((progress.done.clamp(0.0, 1.0) * STEPS as f64) as u64);
        self.bar.set_message(message(progress, self.unit));
    }
}

/// Where the search stands, in words.
fn message(progress: &Progress<'_>, unit: &str) -> String {
    let best = progress.best.map_or("nothing yet".to_string(), |error| error_in_words(unit, error));
    let what = progress.section.map_or("all sections".to_string(), |name| format!("section {name}"));
    let bound = progress.bound.map_or(String::new(), |error| format!(", none below {}", error_in_words(unit, error)));
    format!("{what}, {} part numbers, best {best}{bound}", progress.part_numbers)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_time_limit_ends_a_search() {
        let stop = |limit| Watch::start(limit, &Measure::Decibel).stop();
        assert_eq!(stop(None), None);
        assert_eq!(stop(Some(Duration::from_secs(1000))), None);
        assert_eq!(stop(Some(Duration::ZERO)), Some(StopReason::TimeLimit));
        assert_eq!(stop(Some(Duration::MAX)), None);
    }

    #[test]
    fn progress_says_what_is_done_and_what_is_best() {
        let mut progress =
            Progress { section: Some("A"), part_numbers: 4, error_limit: 1.0, best: None, bound: None, done: 0.5 };
        assert_eq!(message(&progress, "dB"), "section A, 4 part numbers, best nothing yet");
        progress.best = Some(0.001_234);
        assert_eq!(message(&progress, "dB"), "section A, 4 part numbers, best 0.001234 dB");
        assert_eq!(message(&progress, ""), "section A, 4 part numbers, best 0.1234 %");
        (progress.section, progress.bound) = (None, Some(0.001));
        let expected = "all sections, 4 part numbers, best 0.001234 dB, none below 0.001 dB";
        assert_eq!(message(&progress, "dB"), expected);
    }
}
