//! The flags of `sections` as typed.

use std::path::PathBuf;

use clap::builder::PossibleValuesParser;
use clap::{Args, ValueEnum};

use crate::job::Response;
use crate::target::Approximation;

/// The help that follows the flags.
pub const HELP: &str = "\
The edges are those of the pass band. Where nothing else is said, the response is 3.01 dB down there
(half power); with --ripple it is down by the ripple; a Linkwitz-Riley filter by 6.02 dB. --order is
that of the low-pass prototype: a band-pass or band-stop has twice as many poles. Without --order the
least is taken that gives --attenuation from --stop-edge on. Levels count from the peak of the pass
band, or with --reference dc from the gain at DC, far above (high-pass) or at the centre (band-pass).

Examples:
  roundwell sections --approximation butterworth --response low-pass --edge 1k --order 5
  roundwell sections --approximation elliptic --response band-pass --edges 900..1k1 --ripple 0.5 \\
      --stop-edges 700..1k4 --attenuation 40 --format job --out job.ron
  roundwell shortlist job.ron

Exit codes: 0 found, 1 internal fault, 2 bad input or usage, or a specification that no filter meets.";

/// How sections are written.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, ValueEnum)]
pub enum SectionsFormat {
    /// A table to read.
    #[default]
    Table,
    /// JSON for scripts.
    Json,
    /// A job file (RON) for the shortlist.
    Job,
}

/// `sections`.
#[derive(Debug, Default, Args)]
pub struct SectionsArgs {
    /// A job file (RON) with a filter, or - for standard input; flags win over its keys.
    pub job: Option<PathBuf>,

    #[command(flatten)]
    pub filter: FilterArgs,

    #[command(flatten)]
    pub choice: ChoiceArgs,

    /// How to write the sections.
    #[arg(long, value_enum, default_value_t, help_heading = "Output")]
    pub format: SectionsFormat,
    /// Write to this file in place of standard output; it is replaced only when all is written.
    #[arg(long, value_name = "FILE", help_heading = "Output")]
    pub out: Option<PathBuf>,
    /// Title of the filter.
    #[arg(long, help_heading = "Output")]
    pub title: Option<String>,
    /// Characters to the line of a table.
    #[arg(
        long, value_name = "COUNT", default_value_t = 80, help_heading = "Output",
        value_parser = clap::value_parser!(u16).range(40..=1000)
    )]
    pub width: u16,
}

/// What is asked of the filter.
#[derive(Debug, Default, Args)]
#[command(next_help_heading = "Filter")]
pub struct FilterArgs {
    /// The approximation.
    #[arg(long, value_parser = PossibleValuesParser::new(Approximation::ALL.map(approximation_flag)))]
    pub approximation: Option<String>,
    /// The response.
    #[arg(long, value_parser = PossibleValuesParser::new(Response::ALL.map(Response::name)))]
    pub response: Option<String>,
    /// Pass-band edge of a low-pass or high-pass, Hz.
    #[arg(long, value_name = "FREQUENCY")]
    pub edge: Option<String>,
    /// Pass-band edges of a band-pass or band-stop, Hz.
    #[arg(long, value_name = "FROM..TO")]
    pub edges: Option<String>,
    /// What holds at the edges: half-power, ripple, attenuation, or a level under the reference such as 1dB.
    #[arg(long, value_name = "LEVEL", allow_hyphen_values = true)]
    pub edge_at: Option<String>,
    /// Delay at DC of a Bessel low-pass, in place of its edge.
    #[arg(long, value_name = "TIME")]
    pub delay: Option<String>,
    /// Order of the low-pass prototype [default: the least that meets the stop band].
    #[arg(long, value_name = "COUNT")]
    pub order: Option<String>,
    /// Ripple of the pass band, dB.
    #[arg(long, value_name = "LEVEL")]
    pub ripple: Option<String>,
    /// Attenuation of the stop band, dB under the reference.
    #[arg(long, value_name = "LEVEL")]
    pub attenuation: Option<String>,
    /// Stop-band edge of a low-pass or high-pass, Hz.
    #[arg(long, value_name = "FREQUENCY")]
    pub stop_edge: Option<String>,
    /// Stop-band edges of a band-pass or band-stop, Hz.
    #[arg(long, value_name = "FROM..TO")]
    pub stop_edges: Option<String>,
    /// Gain at the reference, plain ratio without sign [default: 1].
    #[arg(long, allow_hyphen_values = true)]
    pub gain: Option<String>,
    /// The gain from which levels count [default: peak].
    #[arg(long, value_parser = ["peak", "dc"])]
    pub reference: Option<String>,
}

/// How the sections are put together.
#[derive(Debug, Default, Args)]
#[command(next_help_heading = "Sections")]
pub struct ChoiceArgs {
    /// Which zeros go with which poles: headroom, nearest, or the zeros' numbers by poles, such as 2,1 [default: headroom].
    #[arg(long, value_name = "CHOICE")]
    pub pairing: Option<String>,
    /// Order of the sections: headroom, rising-q, falling-q, or the poles' numbers, such as 2,1,3 [default: headroom].
    #[arg(long, value_name = "CHOICE")]
    pub sequence: Option<String>,
    /// Gains of the sections: headroom, equal, or a list in signal order, such as 1,2 [default: headroom].
    #[arg(long, value_name = "CHOICE", allow_hyphen_values = true)]
    pub gains: Option<String>,
    /// Circuits or circuit files (.ron), separated by commas; a section takes the first of its shape [default: by shape].
    #[arg(long, value_name = "CIRCUITS")]
    pub circuits: Option<String>,
}

/// The name of an approximation on the command line.
pub fn approximation_flag(approximation: Approximation) -> &'static str {
    match approximation {
        Approximation::Butterworth => "butterworth",
        Approximation::Chebyshev => "chebyshev",
        Approximation::InverseChebyshev => "inverse-chebyshev",
        Approximation::Elliptic => "elliptic",
        Approximation::Bessel => "bessel",
        Approximation::Gaussian => "gaussian",
        Approximation::Legendre => "legendre",
        Approximation::LinkwitzRiley => "linkwitz-riley",
    }
}
