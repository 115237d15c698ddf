//! The command line as typed: flags and their texts, nothing checked beyond what is a choice or a count.

use std::path::PathBuf;

use clap::builder::PossibleValuesParser;
use clap::{Args, Parser, Subcommand, ValueEnum};

use crate::parts::STOCK_COLUMNS;
use crate::report::{COMPENSATED_CSV_COLUMNS, CSV_COLUMNS};
use crate::target::Shape;

pub use super::around::AroundArgs;
pub use super::sections_args::SectionsArgs;
pub use super::tighten_args::TightenArgs;
pub use super::tolerance_args::YieldArgs;
pub use super::vet_args::VetArgs;

/// From ideal filter sections to resistors and capacitors that can be bought, with a proof.
#[derive(Debug, Parser)]
#[command(name = "roundwell", version, max_term_width = 100, after_help = AFTER_HELP)]
pub struct Arguments {
    /// What to do.
    #[command(subcommand)]
    pub command: Command,
}

const AFTER_HELP: &str = "\
Examples:
  roundwell shortlist --shape low-pass --f0 1k --q 0.7071 --circuit tow-thomas
  roundwell sections --approximation butterworth --response low-pass --edge 1k --order 5

Exit codes:
  0    found
  1    internal fault: a result failed its independent check and is not shown
  2    bad input or usage, or a file that cannot be read or written
  3    nothing lies within the limits; what comes nearest is shown
  130  interrupted; the best found so far is shown";

/// The commands.
#[derive(Debug, Subcommand)]
pub enum Command {
    /// Search a job for the sets of parts that come closest with the fewest part numbers.
    #[command(after_help = SHORTLIST_HELP, after_long_help = shortlist_long_help(), allow_negative_numbers = true)]
    Shortlist(Box<ShortlistArgs>),
    /// Replace parts of a built section that are gone, with as few other changes as possible.
    #[command(after_help = SWAP_HELP, allow_negative_numbers = true)]
    Swap(Box<SwapArgs>),
    /// Turn the specification of a filter into sections, ready for a shortlist.
    #[command(after_help = super::sections_args::HELP, allow_negative_numbers = true)]
    Sections(Box<SectionsArgs>),
    /// List the circuits, or show one: nodes, slots, outputs, what each slot sets.
    Circuits(CircuitsArgs),
    /// Show a series of preferred values, or the neighbours of values in it.
    #[command(allow_negative_numbers = true)]
    Values(ValuesArgs),
    /// Read back a stock list: what was understood, what is wrong, what is odd; or what a shortlist needs of it.
    #[command(after_help = STOCK_HELP, after_long_help = stock_long_help(), allow_negative_numbers = true)]
    Stock(StockArgs),
    /// Look at one row of a shortlist as it will be built: mask, tolerances and yield, worst case.
    #[command(after_help = VET_HELP, allow_negative_numbers = true)]
    Vet(Box<VetArgs>),
    /// What tighter parts would buy: the yield of the best row for each step of tolerances.
    #[command(after_help = super::tighten_args::HELP)]
    Tighten(Box<TightenArgs>),
}

const SHORTLIST_HELP: &str = "\
Shelves are written as series and single values, then a range: E24,E96:1k..1M or 10k,22k,47k.
Ranges are written FROM..TO. What is given here wins over the job file, in all its sections.
With op-amps or surroundings, sections are searched for whose built network gives what the job wants.

Examples:
  roundwell shortlist job.ron --format json --out shortlist.json
  roundwell shortlist --shape low-pass --f0 1k --q 0.7071 --gain 1 --circuit tow-thomas
  roundwell shortlist job.ron --yield --mask mask.ron --alternatives 3 --rank yield

Exit codes: 0 found, 1 internal fault, 2 bad input or usage, 3 nothing within the limits, 130 interrupted.
With --yield, 3 also where the target, or every row with its nominal parts, misses what is wanted.";

/// The long help of `shortlist`: with the columns of the CSV format.
fn shortlist_long_help() -> String {
    let lines = |columns: &[(&str, &str)]| {
        let lines: Vec<String> = columns.iter().map(|(name, meaning)| format!("  {name:<21} {meaning}")).collect();
        lines.join("\n")
    };
    format!(
        "{SHORTLIST_HELP}\n\nColumns of the CSV format; numbers in SI units, empty where not known:\n{}\n\
         With op-amps or surroundings also:\n{}",
        lines(&CSV_COLUMNS),
        lines(&COMPENSATED_CSV_COLUMNS)
    )
}

const SWAP_HELP: &str = "\
The job names the circuit and pins each slot to the value that is built in:
  slots: {\"R1\": (pin: \"10k\"), ...}
Its shelves, or a stock list, say what may take the place. Slots that must be equal change together.
For each number of other changes the best replacements are listed, where they improve on fewer.

Example:
  roundwell swap built.ron --gone C1 --others 2 --capacitors 10n,15n,33n,47n

Exit codes: 0 found, 1 internal fault, 2 bad input or usage, 3 nothing within the limit, 130 interrupted.";

const STOCK_HELP: &str = "\
A stock list is CSV in UTF-8, with comma, semicolon or tab between the cells. Its header names the
columns, in any order; only kind and value are required.

Examples:
  roundwell stock drawer.csv
  roundwell stock - --format json --out stock.json
  roundwell stock drawer.csv --need shortlist.json --row 2 --boards 10

Exit codes: 0 every line can be used, 2 bad input or usage, or a line that cannot be used;
the other lines are shown all the same. With --need: 0 the stock suffices, 3 it does not.";

/// The long help of `stock`: with the columns of a stock list.
fn stock_long_help() -> String {
    let columns = STOCK_COLUMNS.map(|(words, meaning)| format!("  {}\n      {meaning}", words.join(", ")));
    format!("{STOCK_HELP}\n\nColumns, each with the other words for it:\n{}", columns.join("\n"))
}

const VET_HELP: &str = "\
A mask file (RON) holds limits of the magnitude in dB, of the group delay and, for single sections, of
f0, q, fz and depth:
  (
      reference: Dc,
      limits: [(from: \"10 Hz\", to: \"700 Hz\", lower: \"-1 dB\", upper: \"1 dB\")],
      delays: [(from: \"10 Hz\", to: \"500 Hz\", lower: \"400 us\", upper: \"450 us\")],
      figures: [(section: \"A\", f0: (\"950 Hz\", \"1050 Hz\"), q: (0.5, 0.6))],
  )
The reference is Absolute (where none is written), Dc, Peak, or At(a frequency).

Examples:
  roundwell shortlist job.ron --format json --out shortlist.json
  roundwell vet shortlist.json --row 4 --mask mask.ron --capacitor-tolerance 2%

Exit codes: 0 done, 2 bad input or usage, 3 the target or the nominal parts miss the mask.";

/// How a shortlist is written.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, ValueEnum)]
pub enum Format {
    /// A table to read.
    #[default]
    Table,
    /// JSON for scripts.
    Json,
    /// CSV, one line a part.
    Csv,
}

/// How a circuit or a stock list is written.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, ValueEnum)]
pub enum ShowFormat {
    /// Text to read.
    #[default]
    Table,
    /// JSON for scripts.
    Json,
}

/// `shortlist`.
#[derive(Debug, Default, Args)]
pub struct ShortlistArgs {
    /// The job file (RON), or - for standard input; without it the section is described by flags.
    pub job: Option<PathBuf>,

    #[command(flatten)]
    pub section: SectionArgs,

    #[command(flatten)]
    pub parts: PartsArgs,

    #[command(flatten)]
    pub stock: DrawerArgs,

    #[command(flatten)]
    pub goals: GoalArgs,

    #[command(flatten)]
    pub yields: YieldArgs,
    #[command(flatten)]
    pub around: AroundArgs,

    #[command(flatten)]
    pub output: OutputArgs,
}

/// One section, in place of a job file.
#[derive(Debug, Default, Args)]
#[command(next_help_heading = "One section, in place of a job file")]
pub struct SectionArgs {
    /// Shape of the response.
    #[arg(long, value_parser = PossibleValuesParser::new(Shape::ALL.map(shape_flag)))]
    pub shape: Option<String>,
    /// Pole frequency, Hz.
    #[arg(long, value_name = "FREQUENCY")]
    pub f0: Option<String>,
    /// Angular pole frequency, rad/s, in place of f0.
    #[arg(long, value_name = "FREQUENCY")]
    pub w0: Option<String>,
    /// Two real poles, Hz, in place of f0 and Q.
    #[arg(long, num_args = 2, value_names = ["FIRST", "SECOND"])]
    pub poles: Option<Vec<String>>,
    /// Pole quality factor.
    #[arg(long)]
    pub q: Option<String>,
    /// Signed gain, plain ratio [default: 1].
    #[arg(long, allow_hyphen_values = true)]
    pub gain: Option<String>,
    /// Zero frequency of a notch, Hz [default: f0].
    #[arg(long, value_name = "FREQUENCY")]
    pub fz: Option<String>,
    /// Angular zero frequency of a notch, rad/s, in place of fz.
    #[arg(long, value_name = "FREQUENCY")]
    pub wz: Option<String>,
    /// Name of the section.
    #[arg(long)]
    pub name: Option<String>,
    /// What one slot may hold, such as R1=10k or C1=E6:1n..100n; repeatable.
    #[arg(long, value_name = "SLOT=SHELF")]
    pub slot: Vec<String>,
    /// Slots that must carry the same value; repeatable.
    #[arg(long, value_name = "SLOT=SLOT")]
    pub equal: Vec<String>,
    /// Lift the ties of the circuit: all, or those of the slots named; repeatable.
    #[arg(long, value_name = "SLOT=SLOT", num_args = 0..=1, require_equals = true, default_missing_value = "all")]
    pub untie: Vec<String>,
}

/// Circuit and shelves, for all sections.
#[derive(Debug, Default, Args)]
#[command(next_help_heading = "Circuit and parts")]
pub struct PartsArgs {
    /// Identifier of the circuit, or a circuit file (.ron).
    #[arg(long)]
    pub circuit: Option<String>,
    /// Output of the circuit [default: the first of the wanted shape and sign].
    #[arg(long)]
    pub output: Option<String>,
    /// Whether the sign of the gain is kept or either will do.
    #[arg(long, value_parser = ["kept", "either"])]
    pub sign: Option<String>,
    /// What may be used as resistors [default: E96:1k..1M].
    #[arg(long, value_name = "SHELF")]
    pub resistors: Option<String>,
    /// What may be used as capacitors [default: E12:1n..1u].
    #[arg(long, value_name = "SHELF")]
    pub capacitors: Option<String>,
    /// Resistor values taken off the shelves, separated by commas.
    #[arg(long, value_name = "VALUES")]
    pub exclude_resistors: Option<String>,
    /// Capacitor values taken off the shelves, separated by commas.
    #[arg(long, value_name = "VALUES")]
    pub exclude_capacitors: Option<String>,
    /// Range for the geometric mean of the resistances of a section, ohms.
    #[arg(long, value_name = "FROM..TO")]
    pub impedance: Option<String>,
}

/// The stock that is drawn on, and pairs.
#[derive(Debug, Default, Args)]
#[command(next_help_heading = "Stock and pairs")]
pub struct DrawerArgs {
    /// Stock list (CSV) to draw on: shelves then give the range, and the series that may be bought.
    #[arg(long, value_name = "FILE")]
    pub stock: Option<PathBuf>,
    /// Leave out lines of the stock list that cannot be used.
    #[arg(long, value_name = "BOOL", num_args = 0..=1, require_equals = true, default_missing_value = "true")]
    pub skip_bad_lines: Option<bool>,
    /// Boards that the stock must do for [default: 1].
    #[arg(long, value_name = "COUNT")]
    pub boards: Option<String>,
    /// How many of each part used shall be left over [default: 0].
    #[arg(long, value_name = "COUNT")]
    pub spares: Option<String>,
    /// What may be bought beside the stock: none, any, or at most so many part numbers; resistors, or resistors:2, of one
    /// kind only [default: none].
    #[arg(long, value_name = "[KIND:]COUNT")]
    pub buy: Option<String>,
    /// Leave ceramic capacitors of class 2 (X7R and the like) in the drawer.
    #[arg(long, value_name = "BOOL", num_args = 0..=1, require_equals = true, default_missing_value = "true")]
    pub bar_class_2: Option<bool>,
    /// Let each of several boards with measured parts have its own other parts too.
    #[arg(long, value_name = "BOOL", num_args = 0..=1, require_equals = true, default_missing_value = "true")]
    pub own_set_per_board: Option<bool>,
    /// Where two parts may take the place of one, separated by commas.
    #[arg(long, value_name = "KINDS", value_delimiter = ',', value_parser = ["resistors", "capacitors", "series-capacitors"])]
    pub pairs: Vec<String>,
    /// Slots of a section that may hold a pair [default: 1].
    #[arg(long, value_name = "COUNT", requires = "pairs")]
    pub pairs_at_most: Option<String>,
}

/// How sets are judged, and what is wanted.
#[derive(Debug, Default, Args)]
#[command(next_help_heading = "Error and goals")]
pub struct GoalArgs {
    /// What the error is: decibel, vector, or weighted:f0=1,q=0.2,gain=1 [default: decibel, or vector with an all-pass].
    #[arg(long)]
    pub measure: Option<String>,
    /// The band that counts, Hz [default: lowest f0 / 10 to highest f0 x 10].
    #[arg(long, value_name = "FROM..TO")]
    pub band: Option<String>,
    /// How far under the largest ideal magnitude the floor lies, dB [default: 60].
    #[arg(long)]
    pub floor: Option<String>,
    /// Take out the best flat gain offset before the error is measured.
    #[arg(long, value_name = "BOOL", num_args = 0..=1, require_equals = true, default_missing_value = "true")]
    pub ignore_gain: Option<bool>,
    /// Limit on part numbers.
    #[arg(long, value_name = "COUNT")]
    pub max_part_numbers: Option<String>,
    /// The error that is good enough: marks a row [default: 0.1 dB or 1 %].
    #[arg(long, value_name = "ERROR")]
    pub wanted_error: Option<String>,
    /// Nothing worse is listed unless nothing better exists [default: 1 dB or 12 %].
    #[arg(long, value_name = "ERROR")]
    pub error_limit: Option<String>,
    /// By how much each of several sections may miss its own target, where the board does not miss the whole by more: the
    /// others make good what one is off [default: the wanted error].
    #[arg(long, value_name = "ERROR")]
    pub own_error: Option<String>,
    /// Search several sections one at a time and combine their fronts: quick, but nothing is proved of the board.
    #[arg(long, value_name = "BOOL", num_args = 0..=1, require_equals = true, default_missing_value = "true")]
    pub one_at_a_time: Option<bool>,
    /// The front ends where the best error falls below this [default: 0.001 dB or 0.01 %, for
    /// several sections ten times that].
    #[arg(long, value_name = "ERROR")]
    pub error_resolution: Option<String>,
    /// Rows to list at most [default: 10].
    #[arg(long, value_name = "COUNT")]
    pub rows: Option<String>,
    /// Further sets to list for each number of part numbers; with --yield those of them that yield more [default: 0].
    #[arg(long, value_name = "COUNT")]
    pub alternatives: Option<String>,
    /// What the rows are ranked by first; cost then takes part in the front, yield and spread need --yield [default: error].
    #[arg(long, value_parser = ["error", "part-numbers", "to-buy", "cost", "placed-parts", "yield", "spread"])]
    pub rank: Option<String>,
    /// How long to search, such as 10s [default: to the end].
    #[arg(long, value_name = "TIME")]
    pub time_limit: Option<String>,
}

/// What becomes of the result.
#[derive(Debug, Default, Args)]
#[command(next_help_heading = "Output")]
pub struct OutputArgs {
    /// How to write the shortlist.
    #[arg(long, value_enum, default_value_t)]
    pub format: Format,
    /// Write to this file in place of standard output; it is replaced only when all is written.
    #[arg(long, value_name = "FILE")]
    pub out: Option<PathBuf>,
    /// Title of the report.
    #[arg(long)]
    pub title: Option<String>,
    /// Characters to the line of a table.
    #[arg(long, value_name = "COUNT", default_value_t = 80, value_parser = clap::value_parser!(u16).range(40..=1000))]
    pub width: u16,
    /// Threads to search with [default: one for each processor core].
    #[arg(long, value_name = "COUNT", value_parser = clap::value_parser!(u16).range(1..=1024))]
    pub threads: Option<u16>,
}

/// `swap`.
#[derive(Debug, Default, Args)]
pub struct SwapArgs {
    /// The job file (RON), or - for standard input: each slot of the section is pinned to what is built in.
    pub job: PathBuf,
    /// A slot whose part is gone, as SLOT or, in a job of several sections, SECTION:SLOT; repeatable.
    #[arg(long, value_name = "SLOT", required = true, value_delimiter = ',')]
    pub gone: Vec<String>,
    /// How many other slots may change.
    #[arg(long, value_name = "COUNT", default_value_t = 1, value_parser = clap::value_parser!(u8).range(0..=8))]
    pub others: u8,
    /// What replacements are ranked by: the change against the section as built, or the error against the target.
    #[arg(long, default_value = "built", value_parser = ["built", "target"])]
    pub rank: String,
    /// Replacements to list for each number of other changes.
    #[arg(long, value_name = "COUNT", default_value_t = 5, value_parser = clap::value_parser!(u16).range(1..=1000))]
    pub rows: u16,
    /// No replacement beyond this error is listed [default: 1 dB or 12 %].
    #[arg(long, value_name = "ERROR")]
    pub error_limit: Option<String>,
    /// What may be used as resistors [default: the job's, or E96:1k..1M].
    #[arg(long, value_name = "SHELF")]
    pub resistors: Option<String>,
    /// What may be used as capacitors [default: the job's, or E12:1n..1u].
    #[arg(long, value_name = "SHELF")]
    pub capacitors: Option<String>,
    /// Stock list (CSV) from which new parts are taken.
    #[arg(long, value_name = "FILE")]
    pub stock: Option<PathBuf>,
    /// Leave out lines of the stock list that cannot be used.
    #[arg(long, value_name = "BOOL", num_args = 0..=1, require_equals = true, default_missing_value = "true")]
    pub skip_bad_lines: Option<bool>,
    /// Boards for which new parts are needed [default: 1].
    #[arg(long, value_name = "COUNT")]
    pub boards: Option<String>,
    /// What may be bought beside the stock, as for shortlist [default: none].
    #[arg(long, value_name = "[KIND:]COUNT")]
    pub buy: Option<String>,
    /// Leave ceramic capacitors of class 2 (X7R and the like) in the drawer.
    #[arg(long, value_name = "BOOL", num_args = 0..=1, require_equals = true, default_missing_value = "true")]
    pub bar_class_2: Option<bool>,
    /// How long to search, such as 10s [default: to the end].
    #[arg(long, value_name = "TIME")]
    pub time_limit: Option<String>,
    /// How to write the replacements.
    #[arg(long, value_enum, default_value_t)]
    pub format: ShowFormat,
    /// Write to this file in place of standard output; it is replaced only when all is written.
    #[arg(long, value_name = "FILE")]
    pub out: Option<PathBuf>,
    /// Characters to the line of a table.
    #[arg(long, value_name = "COUNT", default_value_t = 80, value_parser = clap::value_parser!(u16).range(40..=1000))]
    pub width: u16,
}

/// `circuits`.
#[derive(Debug, Args)]
pub struct CircuitsArgs {
    /// Identifier of a circuit, or a circuit file (.ron); without it all circuits are listed.
    pub circuit: Option<String>,
    /// How to write it.
    #[arg(long, value_enum, default_value_t)]
    pub format: ShowFormat,
    /// Characters to the line.
    #[arg(long, value_name = "COUNT", default_value_t = 80, value_parser = clap::value_parser!(u16).range(40..=1000))]
    pub width: u16,
}

/// `values`.
#[derive(Debug, Args)]
pub struct ValuesArgs {
    /// Values whose neighbours are wanted, such as 4.8k or 4n8.
    pub values: Vec<String>,
    /// Series (E3 to E192), separated by commas [default: all].
    #[arg(long, value_delimiter = ',')]
    pub series: Vec<String>,
    /// What the values are: R for ohms, C for farads [default: what the unit or prefix says].
    #[arg(long, value_parser = ["R", "C"], ignore_case = true)]
    pub kind: Option<String>,
}

/// `stock`.
#[derive(Debug, Args)]
pub struct StockArgs {
    /// The stock list (CSV), or - for standard input.
    pub file: PathBuf,
    /// Tell what a row of this shortlist (JSON) takes from the stock, what is left and what is short.
    #[arg(long, value_name = "SHORTLIST")]
    pub need: Option<PathBuf>,
    /// The row of the shortlist.
    #[arg(long, value_name = "COUNT", default_value_t = 1, requires = "need", value_parser = row_number)]
    pub row: u64,
    /// Boards to build [default: those of the shortlist, or 1].
    #[arg(long, value_name = "COUNT", requires = "need", value_parser = board_count)]
    pub boards: Option<u64>,
    /// How many of each part used shall be left over [default: as in the shortlist, or 0].
    #[arg(long, value_name = "COUNT", requires = "need", value_parser = spare_count)]
    pub spares: Option<u64>,
    /// How to write it.
    #[arg(long, value_enum, default_value_t)]
    pub format: ShowFormat,
    /// Write to this file in place of standard output; it is replaced only when all is written.
    #[arg(long, value_name = "FILE")]
    pub out: Option<PathBuf>,
    /// Characters to the line of a table.
    #[arg(long, value_name = "COUNT", default_value_t = 80, value_parser = clap::value_parser!(u16).range(40..=1000))]
    pub width: u16,
}

/// What becomes of a page that takes some work.
#[derive(Debug, Args)]
pub struct PageArgs {
    /// How to write it.
    #[arg(long, value_enum, default_value_t)]
    pub format: ShowFormat,
    /// Write to this file in place of standard output; it is replaced only when all is written.
    #[arg(long, value_name = "FILE")]
    pub out: Option<PathBuf>,
    /// Characters to the line.
    #[arg(long, value_name = "COUNT", default_value_t = 80, value_parser = clap::value_parser!(u16).range(40..=1000))]
    pub width: u16,
    /// Threads to work with [default: one for each processor core].
    #[arg(long, value_name = "COUNT", value_parser = clap::value_parser!(u16).range(1..=1024))]
    pub threads: Option<u16>,
}

/// A whole number within a range.
fn whole(text: &str, low: u64, high: u64) -> Result<u64, String> {
    let number = text.parse().ok().filter(|number| (low..=high).contains(number));
    number.ok_or_else(|| format!("write a whole number from {low} to {high}, such as {}", low.max(2)))
}

fn row_number(text: &str) -> Result<u64, String> {
    whole(text, 1, 10_000)
}

fn board_count(text: &str) -> Result<u64, String> {
    whole(text, 1, crate::parts::Supply::MOST)
}

fn spare_count(text: &str) -> Result<u64, String> {
    whole(text, 0, crate::parts::Supply::MOST)
}

/// The name of a shape on the command line.
pub fn shape_flag(shape: Shape) -> &'static str {
    match shape {
        Shape::FirstOrderLowPass => "first-order-low-pass",
        Shape::FirstOrderHighPass => "first-order-high-pass",
        Shape::FirstOrderAllPass => "first-order-all-pass",
        other => other.name(),
    }
}

#[cfg(test)]
mod tests {
    use clap::CommandFactory;

    use super::*;
    use crate::job::JobFile;

    #[test]
    fn the_command_line_is_sound() {
        Arguments::command().debug_assert();
    }

    /// The keys that a job file knows at a place, as its own message lists them.
    fn keys(text: &str) -> Vec<String> {
        let Err(faults) = JobFile::parse(text) else { return Vec::new() };
        let help = faults.first().and_then(|fault| fault.help.clone()).unwrap_or_default();
        let list = help.split_once("the keys are ").map(|(_, list)| list.to_string()).unwrap_or_default();
        list.split(", ").map(str::to_string).collect()
    }

    #[test]
    fn every_key_of_a_filter_has_a_flag() {
        let command = Arguments::command();
        let sections = command.find_subcommand("sections");
        let flags: Vec<&str> = sections
            .map(|command| command.get_arguments().filter_map(|arg| arg.get_long()).collect())
            .unwrap_or_default();
        let all = keys("(filter: (zzzzzzzzz: 1))");
        assert!(all.len() > 15, "{all:?}");
        for key in &all {
            assert!(flags.contains(&key.replace('_', "-").as_str()), "--{key}");
        }
    }

    #[test]
    fn every_key_of_a_job_file_has_a_flag() {
        let command = Arguments::command();
        let shortlist = command.find_subcommand("shortlist");
        let flags: Vec<String> = shortlist
            .map(|command| command.get_arguments().filter_map(|arg| arg.get_long().map(str::to_string)).collect())
            .unwrap_or_default();
        let mut all = keys("(zzzzzzzzz: 1)");
        all.extend(keys("(sections: [(zzzzzzzzz: 1)])"));
        assert!(all.len() > 30, "{all:?}");
        for key in all.iter().filter(|key| !["sections", "filter"].contains(&key.as_str())) {
            let flag = if key == "slots" { "slot".to_string() } else { key.replace('_', "-") };
            assert!(flags.contains(&flag), "--{flag}");
        }
    }
}
