//! The flags of `vet` as typed.

use std::path::PathBuf;

use clap::Args;

use super::args::{AroundArgs, PageArgs};
use super::tolerance_args::ToleranceArgs;

/// `vet`.
#[derive(Debug, Args)]
pub struct VetArgs {
    /// A shortlist written by `shortlist --format json`, or - for standard input.
    pub list: PathBuf,
    /// The row to look at.
    #[arg(long, value_name = "NUMBER", default_value_t = 1)]
    pub row: usize,
    /// Circuit file (.ron), where the list uses a circuit of your own; repeatable.
    #[arg(long, value_name = "FILE")]
    pub circuit: Vec<PathBuf>,
    /// Mask file (RON) with the limits that the response has to keep [default: the mask of the list].
    #[arg(long, value_name = "FILE")]
    pub mask: Option<PathBuf>,
    #[command(flatten)]
    pub tolerances: ToleranceArgs,
    /// Tolerance of the part in one slot, such as R3=0.1% or A:R3=0.1%, whatever a stock list says; of a measured part the
    /// accuracy of the measurement. Repeatable.
    #[arg(long, value_name = "SLOT=PERCENT", value_delimiter = ',', allow_hyphen_values = true)]
    pub tolerance: Vec<String>,
    /// Temperatures between which the board has to work, °C; the nominal values hold at 25 °C.
    #[arg(long, value_name = "FROM..TO", allow_hyphen_values = true)]
    pub temperature: Option<String>,
    /// Temperature coefficient of the resistors for which the stock list gives none, such as 100 (to either side), -200 or -200±100 [default: 100].
    #[arg(long, value_name = "PPM/K", allow_hyphen_values = true)]
    pub resistor_coefficient: Option<String>,
    /// Temperature coefficient of the capacitors [default: 30, as for C0G].
    #[arg(long, value_name = "PPM/K", allow_hyphen_values = true)]
    pub capacitor_coefficient: Option<String>,
    /// How far the coefficients of two resistors of different part numbers are apart at most [default: all of the range].
    #[arg(long, value_name = "PPM/K", allow_hyphen_values = true)]
    pub resistor_tracking: Option<String>,
    /// The same for capacitors.
    #[arg(long, value_name = "PPM/K", allow_hyphen_values = true)]
    pub capacitor_tracking: Option<String>,
    /// By how much a resistor can be off at the end of its life, to either side, where the stock list does not say.
    #[arg(long, value_name = "PERCENT", allow_hyphen_values = true, default_value = "0%")]
    pub resistor_ageing: String,
    /// By how much a capacitor can be off at the end of its life, to either side.
    #[arg(long, value_name = "PERCENT", allow_hyphen_values = true, default_value = "0%")]
    pub capacitor_ageing: String,
    #[command(flatten)]
    pub around: AroundArgs,

    /// The largest shift of f0 and Q that is wanted from the op-amps, for the least gain-bandwidth product [default: 1%].
    #[arg(long, value_name = "PERCENT", allow_hyphen_values = true)]
    pub shift: Option<String>,
    /// The largest amplitude of a sine at the output, volts, for the slew rate.
    #[arg(long, value_name = "VOLTS", allow_hyphen_values = true)]
    pub output_level: Option<String>,
    /// The largest amplitude at the output of an op-amp, volts; shows headroom and noise.
    #[arg(long, value_name = "VOLTS", allow_hyphen_values = true)]
    pub swing: Option<String>,
    /// Voltage noise of the op-amps, nanovolts per root hertz [default: 0].
    #[arg(long, value_name = "NANOVOLTS", allow_hyphen_values = true)]
    pub voltage_noise: Option<String>,
    /// Current noise at each input of the op-amps, picoamperes per root hertz [default: 0].
    #[arg(long, value_name = "PICOAMPERES", allow_hyphen_values = true)]
    pub current_noise: Option<String>,
    /// Plan a trim: which resistor sets what, how far it has to reach, and what to look at.
    #[arg(long)]
    pub trim: bool,
    /// Resistor values of which one may be selected on test in place of a trimmer [default: E96:1..10M].
    #[arg(long, value_name = "SHELF", requires = "trim")]
    pub trim_values: Option<String>,
    /// Boards to draw at most for the yield.
    #[arg(long, visible_alias = "draws", value_name = "COUNT", allow_hyphen_values = true, default_value = "100000")]
    pub boards: String,
    /// Draw no more once the interval of the yield is this narrow to either side; 0 draws all.
    #[arg(long, value_name = "PERCENT", allow_hyphen_values = true, default_value = "0.5%")]
    pub interval: String,
    #[command(flatten)]
    pub page: PageArgs,
}
