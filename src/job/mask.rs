//! Mask files: limits that a response has to keep, as they are written (RON).

use std::f64::consts::TAU;

use serde::Deserialize;

use super::desk::{Checked, Desk, Noted, Place};
use super::given::Scalar;
use crate::analysis::{Figure, FigureLimit, Limit, Mask, Reference, has_reference};
use crate::target::{Section, Shape};
use crate::text::{self, Fault, located, suggestion};
use crate::units::{QuantityError, parse_decibels, parse_delay, parse_frequency, parse_number};

#[derive(Deserialize)]
#[serde(deny_unknown_fields, rename = "Mask")]
struct MaskFile {
    #[serde(default)]
    reference: ReferenceFile,
    #[serde(default)]
    limits: Vec<LimitFile>,
    #[serde(default)]
    delays: Vec<LimitFile>,
    #[serde(default)]
    figures: Vec<FigureFile>,
}

#[derive(Default, Deserialize)]
#[serde(rename = "Reference")]
enum ReferenceFile {
    #[default]
    Absolute,
    Dc,
    Peak,
    At(Scalar),
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, rename = "Limit")]
struct LimitFile {
    from: Scalar,
    to: Scalar,
    #[serde(default)]
    lower: Option<Scalar>,
    #[serde(default)]
    upper: Option<Scalar>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, rename = "Figures")]
struct FigureFile {
    section: Scalar,
    #[serde(default)]
    f0: Option<(Scalar, Scalar)>,
    #[serde(default)]
    q: Option<(Scalar, Scalar)>,
    #[serde(default)]
    fz: Option<(Scalar, Scalar)>,
    #[serde(default)]
    depth: Option<Scalar>,
}

/// Reads a mask file for a cascade of these sections.
///
/// # Errors
/// All faults that can be told independently, each with its place in the text: what cannot be read, limits that overlap or
/// contradict each other, ranges that hold nothing, figures that a section has not, a mask without a limit.
pub fn read_mask(source: &str, sections: &[Section]) -> Result<Mask, Vec<Fault>> {
    let file: MaskFile = text::parse(source)?;
    let mut desk = Desk::default();
    let mask = checked(&mut desk, &Place::job(), &file, sections);
    match mask {
        Ok(mask) if desk.faults.is_empty() => Ok(mask),
        _ => Err(located(source, desk.faults)),
    }
}

/// A mask as it stands in the JSON of a shortlist.
#[derive(Deserialize)]
pub(super) struct RawMask {
    reference: String,
    reference_hz: Option<f64>,
    limits: Vec<RawPiece>,
    #[serde(default)]
    delays: Vec<RawPiece>,
    #[serde(default)]
    figures: Vec<RawFigures>,
}

#[derive(Deserialize)]
struct RawPiece {
    from_hz: f64,
    to_hz: f64,
    lower: Option<f64>,
    upper: Option<f64>,
}

#[derive(Deserialize)]
struct RawFigures {
    section: String,
    f0_hz: Option<[f64; 2]>,
    q: Option<[f64; 2]>,
    fz_hz: Option<[f64; 2]>,
    depth_db: Option<f64>,
}

impl RawMask {
    /// The mask for a cascade of these sections, with the checks of a mask file.
    ///
    /// # Errors
    /// Those of [`read_mask`], by their paths under `mask`.
    pub(super) fn read(&self, sections: &[Section]) -> Result<Mask, Vec<Fault>> {
        // Written out without an exponent, and read back as the same number.
        let scalar = |number: f64| Scalar::from(number.to_string().as_str());
        let pair = |range: &Option<[f64; 2]>| range.map(|[low, high]| (scalar(low), scalar(high)));
        let piece = |raw: &RawPiece| LimitFile {
            from: scalar(raw.from_hz),
            to: scalar(raw.to_hz),
            lower: raw.lower.map(scalar),
            upper: raw.upper.map(scalar),
        };
        let figures = |raw: &RawFigures| FigureFile {
            section: raw.section.as_str().into(),
            f0: pair(&raw.f0_hz),
            q: pair(&raw.q),
            fz: pair(&raw.fz_hz),
            depth: raw.depth_db.map(scalar),
        };
        let mut desk = Desk::default();
        let place = Place::job().key("mask");
        let reference = match (self.reference.as_str(), self.reference_hz) {
            ("absolute", _) => ReferenceFile::Absolute,
            ("dc", _) => ReferenceFile::Dc,
            ("peak", _) => ReferenceFile::Peak,
            ("frequency", Some(hertz)) => ReferenceFile::At(scalar(hertz)),
            (other, _) => {
                let known = ["absolute", "dc", "peak", "frequency"];
                let help = suggestion(other, "the references are", &known) + "; frequency needs reference_hz";
                desk.note(&place.key("reference"), format!("`{other}` cannot be used as a reference"), help);
                ReferenceFile::Absolute
            }
        };
        let file = MaskFile {
            reference,
            limits: self.limits.iter().map(piece).collect(),
            delays: self.delays.iter().map(piece).collect(),
            figures: self.figures.iter().map(figures).collect(),
        };
        match checked(&mut desk, &place, &file, sections) {
            Ok(mask) if desk.faults.is_empty() => Ok(mask),
            _ => Err(desk.faults),
        }
    }
}

fn checked(desk: &mut Desk, root: &Place, file: &MaskFile, sections: &[Section]) -> Checked<Mask> {
    if file.limits.is_empty() && file.delays.is_empty() && file.figures.is_empty() {
        let help =
            "write limits: [(from: \"10 Hz\", to: \"700 Hz\", lower: \"-0.5 dB\", upper: \"0.5 dB\")], for example";
        return Err(desk.note(root, "the mask has no limits", help));
    }
    let reference = reference(desk, &root.key("reference"), &file.reference, sections);
    let limits = all_limits(desk, &root.key("limits"), &file.limits, &LEVELS);
    let delays = all_limits(desk, &root.key("delays"), &file.delays, &DELAYS);
    let mut figures = Vec::new();
    for (k, figure) in file.figures.iter().enumerate() {
        let place = root.key("figures").item(k);
        if file.figures[..k].iter().any(|other| other.section == figure.section) {
            let message = format!("section {} has figures twice", figure.section.text());
            desk.note(&place.key("section"), message, "put them into one entry");
        }
        figures.extend(figure_limits(desk, &place, figure, sections));
    }
    Ok(Mask { reference: reference?, limits: limits?, delays: delays?, figures })
}

fn reference(desk: &mut Desk, place: &Place, file: &ReferenceFile, sections: &[Section]) -> Checked<Reference> {
    let (reference, words) = match file {
        ReferenceFile::Absolute => (Reference::Absolute, String::new()),
        ReferenceFile::Dc => (Reference::Dc, "at DC".to_string()),
        ReferenceFile::Peak => (Reference::Peak, String::new()),
        ReferenceFile::At(f) => {
            let hertz = desk.value(place, f, parse_frequency)?;
            (Reference::At(hertz * TAU), format!("at {}", f.text()))
        }
    };
    if has_reference(reference, sections) {
        return Ok(reference);
    }
    let message = format!("the target has no response {words}, so nothing can relate to it");
    Err(desk.note(place, message, "relate the limits to Peak, or to At(a frequency that passes)"))
}

/// What limits are about.
struct Subject {
    unit: &'static str,
    /// Reads one.
    read: fn(&str) -> Result<f64, QuantityError>,
}

/// Limits of the magnitude.
const LEVELS: Subject = Subject { unit: "dB", read: parse_decibels };

/// Limits of the group delay.
const DELAYS: Subject = Subject { unit: "s", read: parse_delay };

/// All limits of one subject, none in the way of another.
fn all_limits(desk: &mut Desk, place: &Place, files: &[LimitFile], subject: &Subject) -> Checked<Vec<Limit>> {
    let limits: Vec<Checked<Limit>> =
        files.iter().enumerate().map(|(k, file)| limit(desk, &place.item(k), file, subject)).collect();
    for (k, one) in limits.iter().enumerate() {
        for (j, other) in limits[..k].iter().enumerate() {
            if let (Ok(one), Ok(other)) = (one, other) {
                compare(desk, place, (j, other), (k, one), subject.unit);
            }
        }
    }
    limits.into_iter().collect()
}

fn limit(desk: &mut Desk, place: &Place, file: &LimitFile, subject: &Subject) -> Checked<Limit> {
    let Subject { unit, read } = subject;
    let from = desk.value(&place.key("from"), &file.from, parse_frequency);
    let to = desk.value(&place.key("to"), &file.to, parse_frequency);
    let mut level = |key: &str, scalar: &Option<Scalar>| -> Checked<Option<f64>> {
        scalar.as_ref().map(|scalar| desk.value(&place.key(key), scalar, read)).transpose()
    };
    let (lower, upper) = (level("lower", &file.lower), level("upper", &file.upper));
    let (from, to, lower, upper) = (from?, to?, lower?, upper?);
    if from > to {
        let message = format!("the limit from {} to {} holds nothing", file.from.text(), file.to.text());
        return Err(desk.note(place, message, "write the smaller frequency first"));
    }
    match (lower, upper) {
        (None, None) => {
            Err(desk.note(place, "the limit limits nothing", format!("give lower, upper or both, in {unit}")))
        }
        (Some(lower), Some(upper)) if lower > upper => {
            let message = format!("the lower limit of {lower} {unit} lies above the upper limit of {upper} {unit}");
            Err(desk.note(place, message, "exchange the two"))
        }
        _ => Ok(Limit { from: from * TAU, to: to * TAU, lower, upper }),
    }
}

/// Notes limits that overlap on one side, and lower ones above upper ones where they overlap.
fn compare(
    desk: &mut Desk,
    place: &Place,
    (j, other): (usize, &Limit),
    (k, one): (usize, &Limit),
    unit: &str,
) -> Option<Noted> {
    let (from, to) = (one.from.max(other.from), one.to.min(other.to));
    // Pieces may touch: both hold at the frequency between them.
    if from > to || (from >= to && one.from < one.to && other.from < other.to) {
        return None;
    }
    let range = format!("from {} Hz to {} Hz", short_hertz(from), short_hertz(to));
    let both = |side: &str| format!("limits {} and {} both set the {side} limit {range}", j + 1, k + 1);
    let at = place.item(k);
    if one.lower.is_some() && other.lower.is_some() {
        return Some(desk.note(&at, both("lower"), "let one end where the other begins"));
    }
    if one.upper.is_some() && other.upper.is_some() {
        return Some(desk.note(&at, both("upper"), "let one end where the other begins"));
    }
    let crossed = |lower: Option<f64>, upper: Option<f64>| lower.zip(upper).filter(|(lower, upper)| lower > upper);
    let (lower, upper) = crossed(one.lower, other.upper).or(crossed(other.lower, one.upper))?;
    let message = format!(
        "limits {} and {} contradict each other {range}: the lower limit of {lower} {unit} lies above the upper limit \
         of {upper} {unit}",
        j + 1,
        k + 1
    );
    Some(desk.note(&at, message, "lower the one, raise the other, or take them apart"))
}

/// Hertz as they were given: what the detour over 2π left in the last digits is taken out.
fn short_hertz(w: f64) -> f64 {
    let f = w / TAU;
    format!("{f:.12e}").parse().unwrap_or(f)
}

fn figure_limits(desk: &mut Desk, place: &Place, file: &FigureFile, sections: &[Section]) -> Vec<FigureLimit> {
    let names: Vec<&str> = sections.iter().map(|section| section.name.as_str()).collect();
    let Some(section) = names.iter().position(|name| *name == file.section.text()) else {
        let message = format!("there is no section `{}`", file.section.text());
        desk.note(&place.key("section"), message, suggestion(file.section.text(), "the sections are", &names));
        return Vec::new();
    };
    let mut limits = Vec::new();
    let target = &sections[section];
    let notch = target.shape == Shape::Notch;
    let kinds = [
        ("f0", &file.f0, Figure::F0, true),
        ("q", &file.q, Figure::Q, target.q.is_some()),
        ("fz", &file.fz, Figure::Fz, notch),
    ];
    let mut given = file.depth.is_some();
    for (key, range, figure, exists) in kinds {
        let Some((low, high)) = range else { continue };
        given = true;
        let at = place.key(key);
        if !exists {
            let message = format!("the {} section {} has no {key}", target.shape.name(), target.name);
            desk.note(&at, message, "leave it out");
            continue;
        }
        let read = |text: &str| -> Result<f64, String> {
            if figure == Figure::Q {
                let q = parse_number(text).map_err(|error| error.to_string())?;
                return if q > 0.0 {
                    Ok(q)
                } else {
                    Err(format!("q must be larger than 0, found {text}: write one such as 0.7"))
                };
            }
            parse_frequency(text).map(|f| f * TAU).map_err(|error| error.to_string())
        };
        let (lower, upper) = (desk.value(&at.item(0), low, read), desk.value(&at.item(1), high, read));
        if let (Ok(lower), Ok(upper)) = (lower, upper) {
            if lower < upper {
                limits.push(FigureLimit { section, figure, lower: Some(lower), upper: Some(upper) });
            } else {
                let message = format!("the range from {} to {} holds nothing", low.text(), high.text());
                desk.note(&at, message, "write the smaller value first");
            }
        }
    }
    if let Some(depth) = &file.depth {
        let at = place.key("depth");
        match desk.value(&at, depth, parse_decibels) {
            _ if !notch => {
                let message = format!("the {} section {} has no null", target.shape.name(), target.name);
                desk.note(&at, message, "leave depth out");
            }
            Ok(decibels) if decibels > 0.0 => {
                limits.push(FigureLimit { section, figure: Figure::Depth, lower: Some(decibels), upper: None });
            }
            Ok(_) => {
                let message = format!("a depth is larger than 0 dB, found {}", depth.text());
                desk.note(&at, message, "write how far the null lies below the pass-band, 40 dB for example");
            }
            Err(Noted) => {}
        }
    }
    if !given {
        desk.note(place, "no figure is limited", "give f0, q, fz or depth, such as f0: (\"990 Hz\", \"1010 Hz\")");
    }
    limits
}
