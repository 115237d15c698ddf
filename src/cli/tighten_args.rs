//! The flags of `tighten` as typed.

use std::path::PathBuf;

use clap::Args;

use super::args::PageArgs;
use super::price_args::PriceArgs;
use super::tolerance_args::DrawArgs;

/// The help that follows the flags.
pub const HELP: &str = "\
Each step gives all resistors one tolerance, all capacitors another; the tolerances of a stock list do
not count here. Measured parts stay as they are, and cost nothing.

Example:
  roundwell tighten shortlist.json --mask mask.ron --wanted-yield 95% \
      --resistor-price 5%=0.005,1%=0.01,0.1%=0.08 --capacitor-price 5%=0.04,2%=0.09,1%=0.15

Exit codes: 0 done, 2 bad input or usage, 3 the target misses what is wanted, or no step reaches the
wanted yield.";

/// `tighten`.
#[derive(Debug, Args)]
pub struct TightenArgs {
    /// A shortlist written by `shortlist --format json`, or - for standard input.
    pub list: PathBuf,
    /// The rows to compare, such as 1,3..5 [default: all].
    #[arg(long, value_name = "NUMBERS", allow_hyphen_values = true)]
    pub rows: Option<String>,
    /// Circuit file (.ron), where the list uses a circuit of your own; repeatable.
    #[arg(long, value_name = "FILE")]
    pub circuit: Vec<PathBuf>,
    /// Mask file (RON) with the limits that a board has to keep [default: the mask of the list].
    #[arg(long, value_name = "FILE", conflicts_with = "within")]
    pub mask: Option<PathBuf>,
    /// In place of a mask: the error against the target that a board may have, such as 1dB.
    #[arg(long, value_name = "ERROR", allow_hyphen_values = true)]
    pub within: Option<String>,
    /// Mark the coarsest steps that reach this yield.
    #[arg(long, value_name = "PERCENT", allow_hyphen_values = true)]
    pub wanted_yield: Option<String>,
    #[command(flatten)]
    pub draw: DrawArgs,
    #[command(flatten)]
    pub prices: PriceArgs,
    /// Boards to draw at most for each row and step.
    #[arg(long, visible_alias = "draws", value_name = "COUNT", allow_hyphen_values = true, default_value = "100000")]
    pub boards: String,
    /// Draw no more once the interval of the best row is this narrow to either side; 0 draws all.
    #[arg(long, value_name = "PERCENT", allow_hyphen_values = true, default_value = "1%")]
    pub interval: String,
    #[command(flatten)]
    pub page: PageArgs,
}
