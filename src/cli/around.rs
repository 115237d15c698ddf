//! The flags for op-amps and what surrounds a board, and their reading: shared by `vet` and `shortlist`.

use clap::Args;

use super::vet_settings::{Percent, noted};
use crate::analysis::Surroundings;
use crate::text::Fault;
use crate::units::{Kind, parse_frequency, parse_part};

/// Op-amps, source, load and strays.
#[derive(Clone, Debug, Default, Args)]
#[command(next_help_heading = "Op-amps and surroundings")]
pub struct AroundArgs {
    /// Gain-bandwidth product of the op-amps, Hz [default: ideal op-amps].
    #[arg(long, value_name = "FREQUENCY", allow_hyphen_values = true)]
    pub gbw: Option<String>,
    /// How far the gain-bandwidth product may lie from that to either side, such as 30% [default: not at all].
    #[arg(long, value_name = "PERCENT", allow_hyphen_values = true)]
    pub gbw_spread: Option<String>,
    /// Output resistance of the op-amps, ohms [default: 0].
    #[arg(long, value_name = "OHMS", allow_hyphen_values = true)]
    pub output_resistance: Option<String>,
    /// Resistance of the source, ohms [default: 0].
    #[arg(long, value_name = "OHMS", allow_hyphen_values = true)]
    pub source_resistance: Option<String>,
    /// Load from the output to ground, ohms [default: none].
    #[arg(long, value_name = "OHMS", allow_hyphen_values = true)]
    pub load_resistance: Option<String>,
    /// Stray capacitance from every node to ground, farads [default: none].
    #[arg(long, value_name = "FARADS", allow_hyphen_values = true)]
    pub stray: Option<String>,
}

/// The flags as values.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Around {
    /// The op-amps and what surrounds the board.
    pub surroundings: Surroundings,
    /// The relative spread of the gain-bandwidth product to either side; 0 for none.
    pub spread: f64,
}

/// No spread reaches so far: at 100 % an op-amp would not amplify at all.
const MOST_SPREAD: f64 = 90.0;

impl AroundArgs {
    /// Whether any of the flags is given.
    pub fn is_given(&self) -> bool {
        let AroundArgs { gbw, gbw_spread, output_resistance, source_resistance, load_resistance, stray } = self;
        let all = [gbw, gbw_spread, output_resistance, source_resistance, load_resistance, stray];
        all.into_iter().any(Option::is_some)
    }

    /// Reads the flags; what is wrong is added to the faults.
    pub fn read(&self, faults: &mut Vec<Fault>) -> Around {
        let bandwidth = self.gbw.as_deref().and_then(|text| noted(parse_frequency(text), "--gbw", faults));
        let spread = self.gbw_spread.as_deref().map_or(0.0, |text| {
            let percent = Percent { name: "the spread", most: MOST_SPREAD, example: "30%" };
            percent.read("--gbw-spread", text, faults)
        });
        if self.gbw.is_none() && self.gbw_spread.is_some() {
            let fault = Fault::at("--gbw-spread", "says nothing about ideal op-amps");
            faults.push(fault.help("add the gain-bandwidth product, such as --gbw 3MHz"));
        }
        let mut part = |flag: &str, text: &Option<String>, kind: Kind| -> Option<f64> {
            let text = text.as_deref().filter(|text| text.trim() != "0")?;
            noted(parse_part(text, kind), flag, faults).map(|value| value.to_f64())
        };
        let output_resistance = part("--output-resistance", &self.output_resistance, Kind::Resistor).unwrap_or(0.0);
        let source_resistance = part("--source-resistance", &self.source_resistance, Kind::Resistor).unwrap_or(0.0);
        let stray = part("--stray", &self.stray, Kind::Capacitor).unwrap_or(0.0);
        // A load of zero would be a short circuit: it is read as any other value, and refused.
        let load = self.load_resistance.as_deref();
        let load = load.and_then(|text| noted(parse_part(text, Kind::Resistor), "--load-resistance", faults));
        let load_resistance = load.map(|value| value.to_f64());
        let surroundings = Surroundings { bandwidth, output_resistance, source_resistance, load_resistance, stray };
        Around { surroundings, spread }
    }
}
