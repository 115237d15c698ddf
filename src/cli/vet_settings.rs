//! What the flags of `vet` say, checked, with all their faults.

use super::args::VetArgs;
use super::around::Around;
use super::failure::{Failure, Faulty};
use crate::analysis::{
    Built, Climate, KindDrift, LevelConditions, RealConditions, Sampling, Surroundings, Tolerances,
};
use crate::job::{ShelfFile, plain_shelf};
use crate::parts::TemperatureCoefficient;
use crate::text::Fault;
use crate::units::{Kind, Value, parse_number};

/// The flags of `vet` as values.
#[derive(Debug)]
pub struct VetSettings {
    /// The tolerances.
    pub tolerances: Tolerances,
    /// How boards are drawn.
    pub sampling: Sampling,
    /// Temperature and age.
    pub climate: Climate,
    /// Whether a flag asks for them.
    pub drifts: bool,
    /// Tolerances of single slots.
    pub slots: Vec<SlotTolerance>,
    /// The resistor values from which one may be selected on test.
    pub select: Vec<Value>,
    /// Op-amps and surroundings, where a flag for them is given.
    pub real: Option<RealConditions>,
    /// Headroom and noise, where the swing is given.
    pub levels: Option<LevelConditions>,
}

/// At which temperature the nominal values hold, °C; common practice.
const REFERENCE: f64 = 25.0;

impl VetSettings {
    /// Reads the flags.
    ///
    /// # Errors
    /// All flags that are wrong, each with the allowed range.
    pub fn new(args: &VetArgs) -> Result<VetSettings, Failure> {
        let mut faults = Vec::new();
        let settings = read(args, &mut faults);
        if faults.is_empty() {
            return Ok(settings);
        }
        Err(Failure::Input(vec![Faulty { file: String::new(), text: String::new(), faults, is_first_round: true }]))
    }
}

fn read(args: &VetArgs, faults: &mut Vec<Fault>) -> VetSettings {
    let tolerances = args.tolerances.read(faults);
    let half_width = Percent { name: "the half-width", most: 49.0, example: "0.5%" };
    let half_width = half_width.read("--interval", &args.interval, faults);
    let boards = whole("--boards", &args.boards, 1, 100_000_000, faults);
    let sampling = args.tolerances.draw.sampling(boards, half_width, faults);
    let ((climate, drifts), real) = (climate(args, faults), real(args, faults));
    let around = real.map_or(Surroundings::IDEAL, |real| real.around);
    let levels = levels(args, around, faults);
    let slots = args.tolerance.iter().filter_map(|text| slot_tolerance(text, faults)).collect();
    let select = if args.trim { select(args, faults) } else { Vec::new() };
    VetSettings { tolerances, sampling, climate, drifts, slots, select, real, levels }
}

/// The tolerance of the parts in one slot.
#[derive(Clone, Debug, PartialEq)]
pub struct SlotTolerance {
    /// As it was typed.
    text: String,
    section: Option<String>,
    slot: String,
    tolerance: f64,
}

/// Reads `R3=0.1%` or `A:R3=0.1%`.
fn slot_tolerance(text: &str, faults: &mut Vec<Fault>) -> Option<SlotTolerance> {
    let Some((place, percent)) = text.split_once('=') else {
        let fault = Fault::at("--tolerance", format!("\"{text}\" names no slot and tolerance"));
        faults.push(fault.help("write the slot, or section and slot, and a percentage: R3=0.1% or A:R3=0.1%"));
        return None;
    };
    let before = faults.len();
    let range = Percent { name: "a tolerance", most: 90.0, example: "R3=0.1%" };
    let tolerance = range.read("--tolerance", percent, faults);
    let (section, slot) = match place.rsplit_once(':') {
        Some((section, slot)) => (Some(section.trim().to_string()), slot.trim()),
        None => (None, place.trim()),
    };
    let slot = slot.to_string();
    (faults.len() == before).then(|| SlotTolerance { text: text.to_string(), section, slot, tolerance })
}

impl SlotTolerance {
    /// Gives the parts of the slot their tolerance.
    ///
    /// # Errors
    /// There is no such slot: those that there are.
    pub fn apply(&self, built: &mut Built) -> Result<(), Fault> {
        if built.set_tolerance(self.section.as_deref(), &self.slot, self.tolerance) {
            return Ok(());
        }
        let slots = built.sections.iter().map(|section| {
            let names: Vec<&str> = section.parts.iter().map(|part| section.slot_name(part.slot)).collect();
            format!("{} with {}", section.target.name, names.join(", "))
        });
        let known: Vec<String> = slots.collect();
        let fault = Fault::at("--tolerance", format!("\"{}\": there is no such slot", self.text));
        Err(fault.help(format!("the sections are {}", known.join("; "))))
    }
}

/// The values to select from on test.
fn select(args: &VetArgs, faults: &mut Vec<Fault>) -> Vec<Value> {
    const FLAG: &str = "--trim-values";
    let text = args.trim_values.as_deref().unwrap_or("E96:1..10M");
    let shelf = ShelfFile::from_flag(FLAG, text).map_err(|fault| vec![fault]);
    match shelf.and_then(|given| plain_shelf(&given, Kind::Resistor)) {
        Ok(shelf) => shelf.values().to_vec(),
        Err(more) => {
            faults.extend(more);
            Vec::new()
        }
    }
}

/// A percentage from zero to `most`.
pub(super) struct Percent {
    pub(super) name: &'static str,
    pub(super) most: f64,
    pub(super) example: &'static str,
}

impl Percent {
    pub(super) fn read(&self, flag: &str, text: &str, faults: &mut Vec<Fault>) -> f64 {
        let Percent { name, most, example } = self;
        let help = format!("write it in percent, such as {example}");
        let fault = match parse_number(text) {
            Err(error) => Fault::at(flag, error.to_string()),
            Ok(_) if !text.contains('%') && text.trim() != "0" => {
                Fault::at(flag, format!("\"{text}\" has no unit")).help(help)
            }
            Ok(ratio) if (0.0..=most / 100.0).contains(&ratio) => return ratio,
            Ok(_) => Fault::at(flag, format!("{name} lies between 0 % and {most} %, found {text}")).help(help),
        };
        faults.push(fault);
        f64::NAN
    }
}

pub(super) fn whole(flag: &str, text: &str, low: u64, high: u64, faults: &mut Vec<Fault>) -> u64 {
    text.parse().ok().filter(|number| (low..=high).contains(number)).unwrap_or_else(|| {
        let message = format!("expected a whole number from {low} to {high}, found {text}");
        faults.push(Fault::at(flag, message).help("write it without separators"));
        low
    })
}

fn climate(args: &VetArgs, faults: &mut Vec<Fault>) -> (Climate, bool) {
    let ageing = Percent { name: "the ageing", most: 50.0, example: "0.5%" };
    let mut kind = |coefficient: Flag, tracking: Flag, age: (&str, &str), usual: &str| {
        let range = coefficient_of(coefficient.0, coefficient.1.unwrap_or(usual), faults);
        let (low, high) = range.map_or((0.0, 0.0), |c| (c.mean() - c.spread(), c.mean() + c.spread()));
        let tracking = match tracking.1.map(|text| coefficient_of(tracking.0, text, faults)) {
            Some(Some(found)) if found.mean().abs() > 0.0 => {
                let message = format!("{} is no distance", tracking.1.unwrap_or_default());
                faults.push(Fault::at(tracking.0, message).help("write one without a sign, such as 25"));
                0.0
            }
            Some(found) => found.map_or(0.0, TemperatureCoefficient::spread),
            None => high - low,
        };
        let [low, high, tracking] = [low, high, tracking].map(|ppm| ppm * 1e-6);
        KindDrift { low, high, tracking, ageing: ageing.read(age.0, age.1, faults) }
    };
    let resistors = kind(
        ("--resistor-coefficient", args.resistor_coefficient.as_deref()),
        ("--resistor-tracking", args.resistor_tracking.as_deref()),
        ("--resistor-ageing", &args.resistor_ageing),
        "100",
    );
    let capacitors = kind(
        ("--capacitor-coefficient", args.capacitor_coefficient.as_deref()),
        ("--capacitor-tracking", args.capacitor_tracking.as_deref()),
        ("--capacitor-ageing", &args.capacitor_ageing),
        "30",
    );
    let ages = resistors.ageing > 0.0 || capacitors.ageing > 0.0;
    let (coldest, hottest) = match &args.temperature {
        Some(text) => temperatures(text, faults),
        None => {
            let of_temperature = [
                ("--resistor-coefficient", &args.resistor_coefficient),
                ("--capacitor-coefficient", &args.capacitor_coefficient),
                ("--resistor-tracking", &args.resistor_tracking),
                ("--capacitor-tracking", &args.capacitor_tracking),
            ];
            for (flag, _) in of_temperature.into_iter().filter(|(_, given)| given.is_some()) {
                let fault = Fault::at(flag, "says nothing without a range of temperatures");
                faults.push(fault.help("add --temperature FROM..TO, such as --temperature 0..50"));
            }
            (0.0, 0.0)
        }
    };
    (Climate { coldest, hottest, resistors, capacitors }, ages || args.temperature.is_some())
}

/// A flag and its value, where it is given.
type Flag<'a> = (&'a str, Option<&'a str>);

fn coefficient_of(flag: &str, text: &str, faults: &mut Vec<Fault>) -> Option<TemperatureCoefficient> {
    let found = TemperatureCoefficient::read(text);
    if found.is_none() {
        let most = TemperatureCoefficient::LARGEST;
        let message = format!("\"{text}\" is no temperature coefficient up to {most} ppm/K");
        faults.push(Fault::at(flag, message).help("write one such as 100 (to either side), -200 or -200±100"));
    }
    found
}

/// The coldest and the hottest, from the reference.
fn temperatures(text: &str, faults: &mut Vec<Fault>) -> (f64, f64) {
    let number = |text: &str| text.trim().trim_end_matches("°C").trim().parse::<f64>().ok();
    let range = text.split_once("..").and_then(|(from, to)| Some((number(from)?, number(to)?)));
    // Beyond these no part of a board is specified.
    let allowed = |(from, to): &(f64, f64)| *from >= -100.0 && from <= to && *to <= 250.0;
    match range.filter(allowed) {
        Some((from, to)) => (from - REFERENCE, to - REFERENCE),
        None => {
            let message = format!("\"{text}\" is no range of temperatures from -100 °C to 250 °C");
            faults.push(Fault::at("--temperature", message).help("write FROM..TO in °C, such as -20..60"));
            (0.0, 0.0)
        }
    }
}

fn real(args: &VetArgs, faults: &mut Vec<Fault>) -> Option<RealConditions> {
    if !args.around.is_given() && args.shift.is_none() && args.output_level.is_none() {
        return None;
    }
    let Around { surroundings: around, spread } = args.around.read(faults);
    if args.around.gbw.is_none() && args.shift.is_some() {
        let fault = Fault::at("--shift", "says nothing about ideal op-amps");
        faults.push(fault.help("add the gain-bandwidth product, such as --gbw 3MHz"));
    }
    let shift = args.shift.as_deref().map_or(0.01, |text| {
        let shift = Percent { name: "the shift", most: 50.0, example: "1%" }.read("--shift", text, faults);
        if shift <= 0.0 {
            let message = format!("the shift must be larger than 0 %, found {text}");
            faults.push(Fault::at("--shift", message).help("no op-amp leaves nothing: write one such as 1%"));
        }
        shift
    });
    let level = args.output_level.as_deref().and_then(|text| volts("--output-level", text, faults));
    Some(RealConditions { around, shift, level, spread })
}

/// An amplitude.
fn volts(flag: &str, text: &str, faults: &mut Vec<Fault>) -> Option<f64> {
    let number = text.trim().trim_end_matches('V').trim().parse::<f64>().ok();
    let level = number.filter(|volts| *volts > 0.0 && *volts <= 1000.0);
    if level.is_none() {
        let message = format!("\"{text}\" is no amplitude above 0 V and up to 1000 V");
        faults.push(Fault::at(flag, message).help("write one in volts, such as 10"));
    }
    level
}

fn levels(args: &VetArgs, around: Surroundings, faults: &mut Vec<Fault>) -> Option<LevelConditions> {
    let mut noise = |flag: &str, text: &Option<String>, unit: &str, scale: f64| -> f64 {
        let Some(text) = text else { return 0.0 };
        if args.swing.is_none() {
            let fault = Fault::at(flag, "says nothing without a swing, by which headroom and noise are asked for");
            faults.push(fault.help("add the largest amplitude at the op-amps, such as --swing 10"));
        }
        let number = text.trim().parse::<f64>().ok().filter(|number| (0.0..=1e6).contains(number));
        if number.is_none() {
            let message = format!("\"{text}\" is no noise from 0 to 1e6 {unit}");
            faults.push(Fault::at(flag, message).help(format!("write the number of {unit}, such as 5")));
        }
        number.unwrap_or(0.0) * scale
    };
    let voltage_noise = noise("--voltage-noise", &args.voltage_noise, "nV/√Hz", 1e-9);
    let current_noise = noise("--current-noise", &args.current_noise, "pA/√Hz", 1e-12);
    let swing = volts("--swing", args.swing.as_deref()?, faults)?;
    Some(LevelConditions { around, swing, voltage_noise, current_noise })
}

/// A value, or the fault of its flag.
pub(super) fn noted<T, E: std::fmt::Display>(read: Result<T, E>, flag: &str, faults: &mut Vec<Fault>) -> Option<T> {
    read.map_err(|error| faults.push(Fault::at(flag, error.to_string()))).ok()
}
