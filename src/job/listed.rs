//! Reading a shortlist back from its JSON: what was asked, and the parts of each row.

use std::f64::consts::TAU;
use std::ops::Range;
use std::sync::Arc;

use serde::Deserialize;

use super::mask::RawMask;
use crate::analysis::{Built, BuiltPart, BuiltPiece, BuiltSection, Joint, Mask};
use crate::circuit::Circuit;
use crate::parts::TemperatureCoefficient;
use crate::target::{Criterion, Measure, Section, Shape, Weights};
use crate::text::{Fault, located, suggestion};
use crate::units::{Kind, Value, parse_part};

/// The format that is read: `roundwell-shortlist/1`.
const FORMAT: &str = "roundwell-shortlist/1";

/// How to get a file of that format.
const FORMAT_HELP: &str = "write one with roundwell shortlist JOB --format json --out shortlist.json";

/// A shortlist read back from its JSON.
///
/// Keys that are not needed, and keys that are not known, are passed over: later versions of the format only add keys.
#[derive(Clone, Debug, PartialEq)]
pub struct Listed {
    /// The title of the job.
    pub title: String,
    /// By what the rows were judged; the band is always there.
    pub criterion: Criterion,
    /// What a board has to keep, where the job said so.
    pub mask: Option<Mask>,
    /// What was wanted, in signal order.
    pub sections: Vec<ListedSection>,
    /// The rows in the order of the file.
    pub rows: Vec<ListedRow>,
    /// Whether they were searched for with real op-amps or surroundings in mind: with ideal ones they miss their target.
    pub is_compensated: bool,
}

/// A section as it was asked for.
#[derive(Clone, Debug, PartialEq)]
pub struct ListedSection {
    /// The ideal figures.
    pub target: Section,
    /// Identifier of the circuit.
    pub circuit: String,
    /// Name of the output.
    pub output: String,
}

/// A row: the parts of each section, in the order of [`Listed::sections`].
#[derive(Clone, Debug, PartialEq)]
pub struct ListedRow {
    /// The number by which the list shows it, from 1.
    pub rank: usize,
    /// The parts of each section, in the order of the file; where boards differ, those of the worst board.
    pub sections: Vec<Vec<ListedPart>>,
    /// How many boards there are that differ in their measured parts; 0 where all boards are alike.
    pub boards: usize,
}

/// What one slot holds.
#[derive(Clone, Debug, PartialEq)]
pub struct ListedPart {
    /// Name of the slot.
    pub slot: String,
    /// Resistor or capacitor.
    pub kind: Kind,
    /// Its value; that of joined parts to twelve digits.
    pub value: Value,
    /// The parts that it is made of, at least one; a single part is its own only piece.
    pub made_of: Vec<BuiltPiece>,
    /// How they make up the value, where the list says.
    pub joint: Option<Joint>,
}

// ---- the file as it is written ------------------------------------------------------------------------------------

#[derive(Deserialize)]
struct RawList {
    title: String,
    measure: RawMeasure,
    #[serde(default)]
    mask: Option<RawMask>,
    sections: Vec<RawSection>,
    shortlist: Vec<RawRow>,
    compensation: Option<serde::de::IgnoredAny>,
}

#[derive(Deserialize)]
struct RawMeasure {
    name: String,
    weights: Option<[f64; 4]>,
    band_hz: [f64; 2],
    floor_db: f64,
    ignore_gain: bool,
}

#[derive(Deserialize)]
struct RawSection {
    name: String,
    target: RawTarget,
    circuit: String,
    output: String,
}

#[derive(Deserialize)]
struct RawTarget {
    shape: String,
    f0_hz: f64,
    q: Option<f64>,
    gain: f64,
    fz_hz: Option<f64>,
}

#[derive(Deserialize)]
struct RawRow {
    rank: usize,
    sections: Vec<RawChosen>,
    #[serde(default)]
    boards: Vec<serde::de::IgnoredAny>,
}

#[derive(Deserialize)]
struct RawChosen {
    name: String,
    parts: Vec<RawPart>,
}

#[derive(Deserialize)]
struct RawPart {
    slot: String,
    kind: String,
    value: f64,
    notation: String,
    joint: Option<String>,
    made_of: Vec<RawPiece>,
}

#[derive(Deserialize)]
struct RawPiece {
    value: f64,
    notation: Option<String>,
    measured: Option<f64>,
    tolerance: Option<[f64; 2]>,
    temperature_coefficient_ppm: Option<[f64; 2]>,
    ageing: Option<f64>,
    #[serde(default)]
    lines: Vec<usize>,
}

/// The bytes on which a fault of the reader lies: it counts lines and bytes within them from one.
fn span_of(text: &str, error: &serde_json::Error) -> Option<Range<usize>> {
    let line = error.line().checked_sub(1)?;
    let start: usize = text.split_inclusive('\n').take(line).map(str::len).sum();
    let at = text.floor_char_boundary((start + error.column().saturating_sub(1)).min(text.len()));
    Some(at..text.ceil_char_boundary((at + 1).min(text.len())))
}

/// What the reader says, without the place, which is shown beside it.
fn in_words(error: &serde_json::Error) -> String {
    let text = error.to_string();
    text.split(" at line ").next().unwrap_or_default().to_string()
}

/// Reads a JSON text; a fault has its key or its place.
fn read<'a, T: Deserialize<'a>>(text: &'a str) -> Result<T, Vec<Fault>> {
    let mut reader = serde_json::Deserializer::from_str(text);
    serde_path_to_error::deserialize(&mut reader).map_err(|error| {
        let path = error.path().to_string();
        let inner = error.inner();
        if inner.is_data() {
            let path = if path == "." { String::new() } else { path };
            let message = if path.is_empty() { in_words(inner) } else { format!("{path}: {}", in_words(inner)) };
            return located(text, vec![Fault::at(path, message).help(FORMAT_HELP)]);
        }
        let fault =
            Fault { span: span_of(text, inner), ..Fault::at("", format!("this is no JSON: {}", in_words(inner))) };
        vec![fault.help(FORMAT_HELP)]
    })
}

impl Listed {
    /// Reads the JSON of a shortlist.
    ///
    /// # Errors
    /// A text that is no JSON or of another format: that alone. Otherwise every key with a value that cannot be, by its
    /// path and its place in the text.
    pub fn parse(text: &str) -> Result<Listed, Vec<Fault>> {
        if text.trim().is_empty() {
            return Err(vec![Fault::at("", "the file is empty").help(FORMAT_HELP)]);
        }
        let whole: serde_json::Value = read(text)?;
        let format = whole.get("format").and_then(serde_json::Value::as_str);
        if format != Some(FORMAT) {
            let found = format.map_or("it has no key `format`".to_string(), |found| format!("its format is {found}"));
            let message = format!("this is no shortlist: {found}, expected {FORMAT}");
            return Err(located(text, vec![Fault::at("format", message).help(FORMAT_HELP)]));
        }
        let raw: RawList = read(text)?;
        let mut faults = Vec::new();
        let criterion = criterion(&raw.measure, &mut faults);
        if raw.sections.is_empty() {
            faults.push(Fault::at("sections", "the list has no sections").help(FORMAT_HELP));
        }
        let sections: Vec<Option<ListedSection>> =
            raw.sections.iter().enumerate().map(|(k, s)| section(k, s, &mut faults)).collect();
        let rows: Vec<ListedRow> =
            raw.shortlist.iter().enumerate().map(|(k, row)| read_row(k, row, &raw.sections, &mut faults)).collect();
        for (k, row) in rows.iter().enumerate() {
            if rows[..k].iter().any(|other| other.rank == row.rank) {
                let message = format!("two rows have the rank {}", row.rank);
                faults.push(Fault::at(format!("shortlist[{k}].rank"), message).help("number the rows from 1"));
            }
        }
        let sections: Option<Vec<ListedSection>> = sections.into_iter().collect();
        let mut mask = None;
        if let (Some(raw), Some(sections)) = (&raw.mask, &sections) {
            let targets: Vec<Section> = sections.iter().map(|section| section.target.clone()).collect();
            match raw.read(&targets) {
                Ok(read) => mask = Some(read),
                Err(more) => faults.extend(more),
            }
        }
        match sections {
            Some(sections) if faults.is_empty() => {
                let is_compensated = raw.compensation.is_some();
                Ok(Listed { title: raw.title, criterion, mask, sections, rows, is_compensated })
            }
            _ => Err(located(text, faults)),
        }
    }

    /// The row of that rank.
    ///
    /// # Errors
    /// There is none: what there is.
    pub fn row(&self, rank: usize) -> Result<&ListedRow, String> {
        self.rows.iter().find(|row| row.rank == rank).ok_or_else(|| {
            let (first, last) = (self.rows.first().map(|r| r.rank), self.rows.last().map(|r| r.rank));
            match (first, last) {
                (Some(first), Some(last)) if first != last => {
                    format!("there is no row {rank}: the list has the rows {first} to {last}")
                }
                (Some(only), _) => format!("there is no row {rank}: the list has the row {only} only"),
                _ => format!("there is no row {rank}: the list has no rows"),
            }
        })
    }

    /// A row with its circuits found: the board that it describes.
    ///
    /// `circuits` gives the circuit of an identifier, or says what is wrong. The faults are those of the whole file.
    ///
    /// # Errors
    /// Circuits or outputs that are not there, slots that the circuit has not, empty or doubled slots, parts of another
    /// kind, pieces that do not make up their slot's value; each by its path.
    pub fn built(
        &self,
        row: &ListedRow,
        circuits: &mut dyn FnMut(&str) -> Result<Arc<Circuit>, String>,
    ) -> Result<Built, Vec<Fault>> {
        let mut faults = Vec::new();
        let place = self.rows.iter().position(|other| other.rank == row.rank).unwrap_or(0);
        let mut sections = Vec::new();
        for (k, (section, parts)) in self.sections.iter().zip(&row.sections).enumerate() {
            let path = format!("shortlist[{place}].sections[{k}]");
            match built_section(k, &path, section, parts, circuits) {
                Ok(section) => sections.push(section),
                Err(more) => faults.extend(more),
            }
        }
        match faults.is_empty() {
            true => Ok(Built { title: self.title.clone(), criterion: self.criterion, sections }),
            false => Err(faults),
        }
    }
}

fn criterion(raw: &RawMeasure, faults: &mut Vec<Fault>) -> Criterion {
    let measure = match (raw.name.as_str(), raw.weights) {
        ("decibel", _) => Some(Measure::Decibel),
        ("vector", _) => Some(Measure::Vector),
        ("weighted", Some([f0, q, gain, fz])) if raw.weights.iter().flatten().all(|w| *w >= 0.0) => {
            Some(Measure::Weighted(Weights { f0, q, gain, fz }))
        }
        ("weighted", _) => {
            let message = "a weighted measure has four weights that are not negative";
            faults.push(Fault::at("measure.weights", message).help("give those of f0, Q, gain and fz"));
            None
        }
        (other, _) => {
            let known = ["decibel", "vector", "weighted"];
            let message = format!("there is no measure `{other}`");
            faults.push(Fault::at("measure.name", message).help(suggestion(other, "the measures are", &known)));
            None
        }
    };
    let [low, high] = raw.band_hz;
    if !(low > 0.0 && low < high && high <= 1e12) {
        let message = format!("{low} Hz to {high} Hz is no band: it runs upwards, from above 0 to 1e12 Hz at most");
        faults.push(Fault::at("measure.band_hz", message).help("write the smaller frequency first"));
    }
    if !(raw.floor_db > 0.0 && raw.floor_db <= 300.0) {
        let message = format!("floor_db must be larger than 0 and at most 300, found {}", raw.floor_db);
        faults.push(Fault::at("measure.floor_db", message).help("60 is usual"));
    }
    Criterion {
        measure: measure.unwrap_or(Measure::Decibel),
        band: Some((low * TAU, high * TAU)),
        floor_db: raw.floor_db,
        ignore_gain: raw.ignore_gain,
    }
}

fn section(index: usize, raw: &RawSection, faults: &mut Vec<Fault>) -> Option<ListedSection> {
    let RawTarget { shape, f0_hz, q, gain, fz_hz } = &raw.target;
    let Some(known) = Shape::ALL.into_iter().find(|known| known.name() == shape) else {
        let names = Shape::ALL.map(Shape::name);
        let fault = Fault::at(format!("sections[{index}].target.shape"), format!("there is no shape `{shape}`"));
        faults.push(fault.help(suggestion(shape, "the shapes are", &names)));
        return None;
    };
    match Section::new(raw.name.clone(), known, f0_hz * TAU, *q, *gain, fz_hz.map(|fz| fz * TAU)) {
        Ok(target) => Some(ListedSection { target, circuit: raw.circuit.clone(), output: raw.output.clone() }),
        Err(error) => {
            faults.push(Fault::at(format!("sections[{index}].target"), error.to_string()).help(FORMAT_HELP));
            None
        }
    }
}

fn read_row(index: usize, raw: &RawRow, sections: &[RawSection], faults: &mut Vec<Fault>) -> ListedRow {
    let path = format!("shortlist[{index}].sections");
    if raw.sections.len() != sections.len() {
        let message = format!("the row has {} sections, the list {}", raw.sections.len(), sections.len());
        faults.push(Fault::at(path.clone(), message).help("each row holds the parts of every section"));
    }
    for (k, (chosen, section)) in raw.sections.iter().zip(sections).enumerate() {
        if chosen.name != section.name {
            let message = format!("section {} stands where {} is expected", chosen.name, section.name);
            faults.push(Fault::at(format!("{path}[{k}].name"), message).help("keep the order of the sections"));
        }
    }
    let chosen = raw.sections.iter().enumerate();
    let sections = chosen.map(|(k, chosen)| {
        let parts = chosen.parts.iter().enumerate();
        parts.filter_map(|(i, part)| read_part(&format!("{path}[{k}].parts[{i}]"), part, faults)).collect()
    });
    ListedRow { rank: raw.rank, sections: sections.collect(), boards: raw.boards.len() }
}

fn read_part(path: &str, raw: &RawPart, faults: &mut Vec<Fault>) -> Option<ListedPart> {
    let kind = match raw.kind.as_str() {
        "R" => Kind::Resistor,
        "C" => Kind::Capacitor,
        other => {
            let message = format!("the kind `{other}` is neither R nor C");
            faults.push(Fault::at(format!("{path}.kind"), message).help("write R for a resistor, C for a capacitor"));
            return None;
        }
    };
    let joint = match raw.joint.as_deref() {
        None => None,
        Some("series") => Some(if kind == Kind::Resistor { Joint::Sum } else { Joint::Reciprocal }),
        Some("parallel") => Some(if kind == Kind::Resistor { Joint::Reciprocal } else { Joint::Sum }),
        Some(other) => {
            let message = format!("parts are joined in series or parallel, found `{other}`");
            faults.push(Fault::at(format!("{path}.joint"), message).help("write series or parallel"));
            return None;
        }
    };
    let value = match joint {
        None => value_of(format!("{path}.notation"), &raw.notation, kind, faults),
        // The value of joined parts is no decimal in general: as many digits as a value has.
        Some(_) => value_of(format!("{path}.value"), &format!("{:.11e}", raw.value), kind, faults),
    };
    let pieces = raw.made_of.iter().enumerate();
    let made_of: Vec<Option<BuiltPiece>> =
        pieces.map(|(k, piece)| read_piece(&format!("{path}.made_of[{k}]"), piece, kind, faults)).collect();
    if made_of.is_empty() {
        let message = format!("slot {} is made of nothing", raw.slot);
        faults.push(Fault::at(format!("{path}.made_of"), message).help("give the value of each part to buy"));
        return None;
    }
    let made_of = made_of.into_iter().collect::<Option<_>>()?;
    Some(ListedPart { slot: raw.slot.clone(), kind, value: value?, made_of, joint })
}

fn value_of(path: String, text: &str, kind: Kind, faults: &mut Vec<Fault>) -> Option<Value> {
    parse_part(text, kind).map_err(|error| faults.push(Fault::at(path, error.to_string()))).ok()
}

fn read_piece(path: &str, raw: &RawPiece, kind: Kind, faults: &mut Vec<Fault>) -> Option<BuiltPiece> {
    // The shortest decimal that gives the float is the value that was written.
    let value = value_of(format!("{path}.value"), &format!("{:e}", raw.value), kind, faults)?;
    let label = match &raw.notation {
        None => value,
        Some(text) => value_of(format!("{path}.notation"), text, kind, faults)?,
    };
    if let Some(measured) = raw.measured {
        let measured = value_of(format!("{path}.measured"), &format!("{measured:e}"), kind, faults)?;
        if measured != value {
            let message = "the value of a measured part is what was measured";
            faults.push(Fault::at(format!("{path}.value"), message).help("give both the same number"));
            return None;
        }
    } else if label != value {
        let message = "the value on the label is another than the value, and the part was not measured";
        faults
            .push(Fault::at(format!("{path}.notation"), message).help("give the measured value, or mend the label"));
        return None;
    }
    let tolerance = raw.tolerance.map(|[low, high]| (low, high));
    if let Some((low, high)) = tolerance.filter(|(low, high)| !(*low > -1.0 && low <= high && *high <= 1.0)) {
        let message = format!("{low} to {high} is no tolerance: it runs upwards, from above -1 to 1 at most");
        faults.push(Fault::at(format!("{path}.tolerance"), message).help("write ratios: 5 % is -0.05 and 0.05"));
    }
    let is_measured = raw.measured.is_some();
    let coefficient = raw.temperature_coefficient_ppm.map(|[low, high]| (low, high));
    // Twice the largest that a stock list may state: mean and spread.
    let most = 2.0 * f64::from(TemperatureCoefficient::LARGEST);
    if let Some((low, high)) = coefficient.filter(|(low, high)| !(-most <= *low && low <= high && *high <= most)) {
        let message = format!("{low} to {high} ppm/K is no range of temperature coefficients up to {most} ppm/K");
        let fault = Fault::at(format!("{path}.temperature_coefficient_ppm"), message);
        faults.push(fault.help("write the smaller one first, such as -50 and 50"));
    }
    if let Some(ageing) = raw.ageing.filter(|ageing| !(0.0..1.0).contains(ageing)) {
        let message = format!("{ageing} is no ageing: it is a ratio from 0 to below 1");
        faults.push(Fault::at(format!("{path}.ageing"), message).help("write 0.005 for 0.5 %"));
    }
    Some(BuiltPiece {
        tolerance,
        line: raw.lines.first().copied(),
        label,
        is_measured,
        coefficient: coefficient.map(|(low, high)| (low * 1e-6, high * 1e-6)),
        ageing: raw.ageing,
        ..BuiltPiece::from(value)
    })
}

/// How pieces make up the value of a slot, if they do: one piece is the value itself.
fn joint(part: &ListedPart) -> Option<Joint> {
    let pieces: Vec<f64> = part.made_of.iter().map(|piece| piece.value.to_f64()).collect();
    let value = part.value.to_f64();
    let is = |joint: &Joint| {
        let found = match joint {
            Joint::Sum => pieces.iter().sum::<f64>(),
            Joint::Reciprocal => 1.0 / pieces.iter().map(|piece| 1.0 / piece).sum::<f64>(),
        };
        // Values of joined parts are written with up to twelve digits.
        (found / value - 1.0).abs() < 1e-9
    };
    // Where the list does not say how they are joined, their values do.
    let possible = part.joint.map_or(vec![Joint::Sum, Joint::Reciprocal], |joint| vec![joint]);
    possible.into_iter().find(is)
}

fn built_section(
    index: usize,
    path: &str,
    section: &ListedSection,
    parts: &[ListedPart],
    circuits: &mut dyn FnMut(&str) -> Result<Arc<Circuit>, String>,
) -> Result<BuiltSection, Vec<Fault>> {
    let at_section = |key: &str| format!("sections[{index}].{key}");
    let circuit = circuits(&section.circuit).map_err(|message| {
        let help = "a circuit of your own is given with --circuit FILE";
        vec![Fault::at(at_section("circuit"), message).help(help)]
    })?;
    let names: Vec<&str> = circuit.outputs.iter().map(|output| output.name.as_str()).collect();
    let Some(output) = names.iter().position(|name| *name == section.output) else {
        let message = format!("{} has no output `{}`", circuit.id, section.output);
        let help = suggestion(&section.output, "its outputs are", &names);
        return Err(vec![Fault::at(at_section("output"), message).help(help)]);
    };
    let shape = circuit.outputs[output].shape;
    if shape != section.target.shape {
        let message = format!("output {} of {} is a {}", section.output, circuit.id, shape.name());
        let help = format!("a {} is wanted: is this the circuit of the list?", section.target.shape.name());
        return Err(vec![Fault::at(at_section("output"), message).help(help)]);
    }
    let mut faults = Vec::new();
    let mut built: Vec<BuiltPart> = Vec::new();
    for (k, part) in parts.iter().enumerate() {
        let mut fault = |key: &str, message: String, help: String| {
            faults.push(Fault::at(format!("{path}.parts[{k}].{key}"), message).help(help));
        };
        let filled: Vec<&str> =
            circuit.outputs[output].filled(&circuit).map(|slot| circuit.slots[slot].name.as_str()).collect();
        let Some(slot) = circuit.slot(&part.slot).filter(|_| filled.contains(&part.slot.as_str())) else {
            let message = format!("output {} of {} has no slot `{}`", section.output, circuit.id, part.slot);
            fault("slot", message, suggestion(&part.slot, "its slots are", &filled));
            continue;
        };
        if built.iter().any(|other| other.slot == slot) {
            fault("slot", format!("slot {} is filled twice", part.slot), "leave one of the two out".to_string());
            continue;
        }
        if circuit.slots[slot].kind != part.kind {
            let message = format!("slot {} holds a {}", part.slot, circuit.slots[slot].kind.name());
            fault("kind", message, "put a part of that kind there".to_string());
            continue;
        }
        let Some(joint) = joint(part) else {
            let how = if part.joint.is_none() { ", in series as in parallel" } else { "" };
            let message = format!("the pieces of slot {} make up another value{how}", part.slot);
            fault("made_of", message, "give the pieces whose sum, or sum of reciprocals, is the value".to_string());
            continue;
        };
        built.push(BuiltPart { slot, kind: part.kind, value: part.value, pieces: part.made_of.clone(), joint });
    }
    let slots = circuit.outputs[output].filled(&circuit);
    let empty: Vec<&str> = slots
        .filter(|slot| !parts.iter().any(|part| part.slot == circuit.slots[*slot].name))
        .map(|slot| circuit.slots[slot].name.as_str())
        .collect();
    if !empty.is_empty() {
        let message = format!("nothing is given for {}", empty.join(", "));
        faults.push(Fault::at(format!("{path}.parts"), message).help("fill every slot of the output"));
    }
    if !faults.is_empty() {
        return Err(faults);
    }
    built.sort_by_key(|part| part.slot);
    Ok(BuiltSection { target: section.target.clone(), circuit, output, parts: built })
}
