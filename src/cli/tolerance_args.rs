//! The flags for tolerances and for how boards are drawn: the same for every command that has them.

use std::path::PathBuf;

use clap::Args;

use super::vet_settings::{Percent, whole};
use crate::analysis::{Distribution, Sampling, Tolerances};
use crate::text::Fault;

/// How errors are spread and drawn.
#[derive(Debug, Default, Args)]
pub struct DrawArgs {
    /// How errors are spread: evenly, or normally with a third of the tolerance as standard deviation and cut off at it
    /// [default: uniform].
    #[arg(long, value_parser = ["uniform", "normal"])]
    pub distribution: Option<String>,
    /// The share of the tolerance by which all parts of one part number are off together, as from one reel [default: 0%].
    #[arg(long, value_name = "PERCENT", allow_hyphen_values = true)]
    pub reel_share: Option<String>,
    /// Seed of the draw [default: 1].
    #[arg(long, value_name = "NUMBER", allow_hyphen_values = true)]
    pub seed: Option<String>,
}

/// How far parts are off.
#[derive(Debug, Default, Args)]
pub struct ToleranceArgs {
    /// Tolerance of the resistors for which the stock list gives none, to either side [default: 1%].
    #[arg(long, value_name = "PERCENT", allow_hyphen_values = true)]
    pub resistor_tolerance: Option<String>,
    /// Tolerance of the capacitors for which the stock list gives none, to either side [default: 5%].
    #[arg(long, value_name = "PERCENT", allow_hyphen_values = true)]
    pub capacitor_tolerance: Option<String>,
    #[command(flatten)]
    pub draw: DrawArgs,
}

/// Yield and spread of the rows of a shortlist.
#[derive(Debug, Default, Args)]
#[command(next_help_heading = "Tolerances")]
pub struct YieldArgs {
    /// Add yield and spread to each row, and drop alternatives that are no better in yield either. The yield is computed for
    /// the rows found, it is not searched for.
    #[arg(long = "yield")]
    pub yields: bool,
    /// Mask file (RON) with the limits that a board has to keep, as for vet; it goes into the JSON too.
    #[arg(long, value_name = "FILE")]
    pub mask: Option<PathBuf>,
    /// In place of a mask: the error against the target that a board may have, such as 1dB.
    #[arg(long, value_name = "ERROR", allow_hyphen_values = true, conflicts_with = "mask")]
    pub within: Option<String>,
    #[command(flatten)]
    pub tolerances: ToleranceArgs,
    /// Boards to draw at most for the yield of each row [default: 100000].
    #[arg(long, value_name = "COUNT", allow_hyphen_values = true)]
    pub draws: Option<String>,
    /// Draw no more once the interval of a yield is this narrow to either side; 0 draws all [default: 0.5%].
    #[arg(long, value_name = "PERCENT", allow_hyphen_values = true)]
    pub interval: Option<String>,
}

impl DrawArgs {
    /// How errors are spread, and the share that parts of one reel have in common.
    pub fn read(&self, faults: &mut Vec<Fault>) -> (Distribution, f64) {
        let distribution = match self.distribution.as_deref() {
            Some("normal") => Distribution::TruncatedNormal,
            _ => Distribution::Uniform,
        };
        let share = Percent { name: "the share", most: 100.0, example: "70%" };
        (distribution, share.read("--reel-share", self.reel_share.as_deref().unwrap_or("0%"), faults))
    }

    /// How boards are drawn, at most `boards` of them, down to an interval of a half-width.
    pub fn sampling(&self, boards: u64, half_width: f64, faults: &mut Vec<Fault>) -> Sampling {
        let seed = whole("--seed", self.seed.as_deref().unwrap_or("1"), 0, u64::MAX, faults);
        Sampling { seed, boards, half_width, ..Sampling::default() }
    }
}

impl ToleranceArgs {
    /// The tolerances.
    pub fn read(&self, faults: &mut Vec<Fault>) -> Tolerances {
        let tolerance = Percent { name: "a tolerance", most: 90.0, example: "1%" };
        let mut read = |flag: &str, text: &Option<String>, usual: &str| {
            tolerance.read(flag, text.as_deref().unwrap_or(usual), faults)
        };
        let resistors = read("--resistor-tolerance", &self.resistor_tolerance, "1%");
        let capacitors = read("--capacitor-tolerance", &self.capacitor_tolerance, "5%");
        let (distribution, reel_share) = self.draw.read(faults);
        Tolerances { resistors, capacitors, distribution, reel_share }
    }
}

impl YieldArgs {
    /// The flags that are given but say nothing without `--yield`.
    pub fn idle(&self) -> Vec<&'static str> {
        if self.yields {
            return Vec::new();
        }
        let ToleranceArgs { resistor_tolerance, capacitor_tolerance, draw } = &self.tolerances;
        let DrawArgs { distribution, reel_share, seed } = draw;
        let given = [
            ("--within", &self.within),
            ("--resistor-tolerance", resistor_tolerance),
            ("--capacitor-tolerance", capacitor_tolerance),
            ("--distribution", distribution),
            ("--reel-share", reel_share),
            ("--seed", seed),
            ("--draws", &self.draws),
            ("--interval", &self.interval),
        ];
        given.into_iter().filter(|(_, text)| text.is_some()).map(|(flag, _)| flag).collect()
    }

    /// The tolerances, and how boards are drawn.
    pub fn read(&self, faults: &mut Vec<Fault>) -> (Tolerances, Sampling) {
        let tolerances = self.tolerances.read(faults);
        let half_width = Percent { name: "the half-width", most: 49.0, example: "0.5%" };
        let half_width = half_width.read("--interval", self.interval.as_deref().unwrap_or("0.5%"), faults);
        let boards = whole("--draws", self.draws.as_deref().unwrap_or("100000"), 1, 100_000_000, faults);
        (tolerances, self.tolerances.draw.sampling(boards, half_width, faults))
    }
}
