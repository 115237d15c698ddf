//! The record of one board that was looked at, and its JSON.

use std::f64::consts::TAU;
use std::io::{self, Write};

use serde::Serialize;

use super::record::{Achieved, MeasureRecord, TargetRecord};
use super::vet_drift::DriftRecord;
use super::vet_levels::LevelsRecord;
use super::vet_real::RealRecord;
use super::vet_trim::TrimRecord;
use crate::analysis::{
    Built, BuiltPiece, Conditions, Distribution, Figure, FigureLimit, Limit, Mask, MaskResult, Quantiles, Sampling,
    Standing, Tolerances, Vetted, WorstCase, Yield,
};
use crate::target::{Figures, Section};
use crate::units::{Kind, format_part};

/// The name and version of the JSON format: keys may be added to it, none is renamed or removed.
pub const VET_FORMAT: &str = "roundwell-vet/1";

/// Everything about one board. Units are in the names of the fields; errors are in the unit of the measure; what is not
/// known is `None`.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct VetRecord {
    /// [`VET_FORMAT`].
    pub format: &'static str,
    /// The title of the job.
    pub title: String,
    /// The row of the shortlist.
    pub row: usize,
    /// How many boards of the row differ in their measured parts: what is looked at is the worst of them. 0 where all
    /// boards are alike.
    pub boards: usize,
    /// Whether the list was searched for with real op-amps or surroundings in mind: then only `real` judges what is built, and
    /// all else is off by their correction.
    pub is_compensated: bool,
    /// The sections in signal order.
    pub sections: Vec<VetSection>,
    /// What the error is.
    pub measure: MeasureRecord,
    /// The tolerances.
    pub tolerances: TolerancesRecord,
    /// The error of the nominal parts.
    pub nominal_error: Option<f64>,
    /// Where it is largest, Hz.
    pub nominal_error_at_hz: Option<f64>,
    /// How the board stands against its mask, where one is given.
    pub mask: Option<MaskOutcome>,
    /// How built boards are spread.
    pub spread: SpreadRecord,
    /// The worst error that the tolerances allow.
    pub worst_case: WorstRecord,
    /// What temperature and age do, where that was asked.
    pub drift: Option<DriftRecord>,
    /// What real op-amps and their surroundings do, where that was asked.
    pub real: Option<RealRecord>,
    /// Headroom and noise, where that was asked.
    pub levels: Option<LevelsRecord>,
    /// How it is trimmed, where that was asked.
    pub trims: Option<Vec<TrimRecord>>,
}

/// One section.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct VetSection {
    /// Its name.
    pub name: String,
    /// The circuit.
    pub circuit: String,
    /// The output taken.
    pub output: String,
    /// The ideal figures.
    pub target: TargetRecord,
    /// What the nominal parts give.
    pub nominal: Achieved,
    /// The parts in slot order.
    pub parts: Vec<VetPart>,
}

/// What one slot holds.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct VetPart {
    /// The slot.
    pub slot: String,
    /// Resistor or capacitor.
    pub kind: Kind,
    /// Its value, Ω or F.
    pub value: f64,
    /// The value in IEC 60062 notation, of a pair both with `+` between (in series) or `||` (in parallel).
    pub notation: String,
    /// The parts that it is made of, each with the tolerance that it is drawn with.
    pub made_of: Vec<VetPiece>,
}

/// One part to buy, or one that is there.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct VetPiece {
    /// Its value, Ω or F: as measured, else as labelled.
    pub value: f64,
    /// The value on its label, in IEC 60062 notation.
    pub notation: String,
    /// How far it may be off, as ratios: lowest and highest.
    pub tolerance: [f64; 2],
    /// From where that is: `flag` for that of all parts of the kind, `slot` for one given for this slot, `list` for the stock
    /// list, or `measured` for a measured part, which is off by nothing.
    pub tolerance_from: &'static str,
}

/// The tolerances, as ratios.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct TolerancesRecord {
    /// Of resistors for which the stock list gives none.
    pub resistors: f64,
    /// Of capacitors likewise.
    pub capacitors: f64,
    /// `uniform` or `normal`.
    pub distribution: &'static str,
    /// The share by which parts of one part number are off together.
    pub reel_share: f64,
}

/// How the board stands against its mask.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct MaskOutcome {
    /// To what the decibels relate: `absolute`, `dc`, `peak` or `frequency`.
    pub reference: &'static str,
    /// That frequency, Hz.
    pub reference_hz: Option<f64>,
    /// How many frequencies are tested.
    pub frequencies: usize,
    /// The first that fails: `target`, `nominal`, or, if some boards fail, `tolerance`.
    pub fails: Option<&'static str>,
    /// Each limit.
    pub limits: Vec<LimitRecord>,
    /// The share of boards that keep it.
    pub r#yield: YieldRecord,
    /// The worst case of the magnitude limits: `value` is how far they are broken, dB, negative where they are kept.
    pub worst_case: Option<WorstRecord>,
}

/// One limit of a mask.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct LimitRecord {
    /// `magnitude`, `delay` for the group delay, or the figure: `f0`, `q`, `fz` or `depth`.
    pub what: &'static str,
    /// The section of a figure.
    pub section: Option<String>,
    /// Where a limit of the magnitude or of the group delay begins, Hz.
    pub from_hz: Option<f64>,
    /// Where it ends, Hz.
    pub to_hz: Option<f64>,
    /// The lower side: dB for magnitudes and depths, s for group delays, Hz for frequencies, a plain ratio for Q.
    pub lower: Option<f64>,
    /// The upper side.
    pub upper: Option<f64>,
    /// The room that the ideal target leaves, dB, s for group delays, or relative for f0, Q and fz; negative where the limit is broken.
    pub target_margin: Option<f64>,
    /// Where it is least, Hz.
    pub target_margin_at_hz: Option<f64>,
    /// The room that the nominal parts leave.
    pub nominal_margin: Option<f64>,
    /// Where it is least, Hz.
    pub nominal_margin_at_hz: Option<f64>,
    /// How many of the drawn boards break it.
    pub broken: u64,
}

/// The share of boards that keep the mask.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct YieldRecord {
    /// The share found.
    pub share: f64,
    /// The interval for the true share.
    pub interval: [f64; 2],
    /// How often such an interval holds the true share.
    pub confidence: f64,
    /// How many boards were drawn.
    pub boards: u64,
    /// How many keep the mask.
    pub passed: u64,
    /// The seed.
    pub seed: u64,
}

/// How built boards are spread.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct SpreadRecord {
    /// How many boards were drawn.
    pub boards: usize,
    /// How many of them are unstable.
    pub unstable: usize,
    /// The figures of the sections.
    pub figures: Vec<FigureRecord>,
    /// The error against the target.
    pub error: Option<QuantileRecord>,
    /// The largest standard deviation of the response, from the sensitivities: dB, or a ratio under the vector measure.
    pub response_deviation: f64,
    /// Where that is, Hz.
    pub response_deviation_at_hz: f64,
    /// Whether the nominal error is below a third of it, so that a better nominal fit is lost in the spread.
    pub nominal_error_is_lost: bool,
}

/// The spread of one figure.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct FigureRecord {
    /// The section.
    pub section: String,
    /// `f0`, `q`, `gain` or `fz`; frequencies in Hz.
    pub figure: &'static str,
    /// The ideal value.
    pub target: f64,
    /// What the nominal parts give.
    pub nominal: f64,
    /// Where drawn boards lie.
    pub drawn: Option<QuantileRecord>,
    /// The standard deviation from the sensitivities, relative to the nominal value.
    pub sensitivity_deviation: f64,
}

/// Where the values of drawn boards lie.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct QuantileRecord {
    /// 2.5 % of the boards are not above this.
    pub low: f64,
    /// Half of them are not above this.
    pub median: f64,
    /// 2.5 % of them are above this.
    pub high: f64,
    /// The standard deviation.
    pub deviation: f64,
}

/// A worst case.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct WorstRecord {
    /// How bad it is; `None` where a board can be unstable.
    pub value: Option<f64>,
    /// Where, Hz.
    pub at_hz: Option<f64>,
    /// Whether some board within the tolerances is unstable.
    pub unstable: bool,
    /// Whether every corner of the tolerances was tried.
    pub every_corner: bool,
    /// How many corners were tried.
    pub corners: usize,
    /// Whether the search inside the tolerances found worse than the corners.
    pub inside: bool,
    /// The parts that are off.
    pub parts: Vec<OffPart>,
}

/// A part that is off in a worst case.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct OffPart {
    /// The section.
    pub section: String,
    /// The slot.
    pub slot: String,
    /// The relative error.
    pub error: f64,
}

/// The frequency of an angular frequency, without what the detour over 2π left in the last digits.
pub(super) fn hertz(w: f64) -> f64 {
    let f = w / TAU;
    format!("{f:.13e}").parse().unwrap_or(f)
}

/// A number that is one.
fn known(number: f64) -> Option<f64> {
    number.is_finite().then_some(number)
}

impl VetRecord {
    /// The record of a row that was looked at; `boards` of it differ (see [`VetRecord::boards`]).
    pub fn new(built: &Built, row: usize, boards: usize, conditions: &Conditions, found: &Vetted) -> VetRecord {
        let criterion = found.criterion;
        let (low, high) = criterion.band_for(&built.targets());
        let tolerances = &conditions.tolerances;
        VetRecord {
            format: VET_FORMAT,
            title: built.title.clone(),
            row,
            boards,
            is_compensated: false,
            sections: built
                .sections
                .iter()
                .zip(&found.figures)
                .map(|(s, f)| VetSection::new(s, f, tolerances))
                .collect(),
            measure: MeasureRecord {
                name: if criterion.measure.unit().is_empty() { "vector" } else { "decibel" },
                definition: criterion.measure.describe(),
                unit: criterion.measure.unit(),
                weights: None,
                band_hz: [hertz(low), hertz(high)],
                floor_db: criterion.floor_db,
                ignore_gain: criterion.ignore_gain,
            },
            tolerances: TolerancesRecord::new(tolerances),
            nominal_error: known(found.nominal.error),
            nominal_error_at_hz: found.nominal.at.map(hertz),
            mask: conditions
                .mask
                .as_ref()
                .zip(found.mask.as_ref())
                .map(|(mask, result)| MaskOutcome::new(built, mask, result, conditions)),
            spread: SpreadRecord::new(built, found),
            worst_case: WorstRecord::new(built, &found.worst),
            drift: conditions.climate.as_ref().zip(found.drift.as_ref()).map(|(c, d)| DriftRecord::new(built, c, d)),
            real: conditions
                .real
                .as_ref()
                .zip(found.real.as_ref())
                .map(|(c, r)| RealRecord::new(built, c, r, &found.figures)),
            levels: conditions
                .levels
                .as_ref()
                .zip(found.levels.as_ref())
                .map(|(c, l)| LevelsRecord::new(built, c, l)),
            trims: found.trims.as_ref().map(|list| {
                let both = list.iter().zip(&found.selections);
                both.map(|(trim, select)| TrimRecord::new(built, trim, select.as_ref())).collect()
            }),
        }
    }
}

fn achieved(figures: &Figures) -> Achieved {
    Achieved {
        f0_hz: known(figures.w0).map(hertz),
        q: figures.q.and_then(known),
        gain: known(figures.gain),
        fz_hz: figures.wz.and_then(known).map(hertz),
    }
}

fn piece(kind: Kind, piece: &BuiltPiece, tolerances: &Tolerances) -> VetPiece {
    let (low, high) = tolerances.limits(kind, piece);
    VetPiece {
        value: piece.value.to_f64(),
        notation: format_part(piece.label, kind),
        tolerance: [low, high],
        tolerance_from: match piece.tolerance {
            _ if piece.has_own_tolerance => "slot",
            _ if piece.is_measured => "measured",
            Some(_) => "list",
            None => "flag",
        },
    }
}

impl VetSection {
    fn new(section: &crate::analysis::BuiltSection, figures: &Figures, tolerances: &Tolerances) -> VetSection {
        let target = &section.target;
        let part = |part: &crate::analysis::BuiltPart| VetPart {
            slot: section.slot_name(part.slot).to_string(),
            kind: part.kind,
            value: part.value.to_f64(),
            notation: part.notation(),
            made_of: part.pieces.iter().map(|of| piece(part.kind, of, tolerances)).collect(),
        };
        VetSection {
            name: target.name.clone(),
            circuit: section.circuit.id.clone(),
            output: section.output().name.clone(),
            target: TargetRecord {
                shape: target.shape.name(),
                f0_hz: hertz(target.w0),
                q: target.q,
                gain: target.gain,
                fz_hz: target.wz.map(hertz),
            },
            nominal: achieved(figures),
            parts: section.parts.iter().map(part).collect(),
        }
    }
}

impl TolerancesRecord {
    pub(super) fn new(tolerances: &Tolerances) -> TolerancesRecord {
        TolerancesRecord {
            resistors: tolerances.resistors,
            capacitors: tolerances.capacitors,
            distribution: match tolerances.distribution {
                Distribution::Uniform => "uniform",
                Distribution::TruncatedNormal => "normal",
            },
            reel_share: tolerances.reel_share,
        }
    }
}

impl YieldRecord {
    pub(super) fn new(found: &Yield, sampling: &Sampling) -> YieldRecord {
        YieldRecord {
            share: found.share(),
            interval: [found.interval.0, found.interval.1],
            confidence: sampling.confidence,
            boards: found.boards,
            passed: found.passed,
            seed: sampling.seed,
        }
    }
}

impl MaskOutcome {
    fn new(built: &Built, mask: &Mask, result: &MaskResult, conditions: &Conditions) -> MaskOutcome {
        let (reference, reference_hz) = super::mask::reference(mask.reference);
        let rest = result.nominal.iter().zip(&result.yields.broken);
        let limits = limits(&built.targets(), mask, &result.target).into_iter().zip(rest);
        let limits = limits.map(|(limit, (nominal, broken))| LimitRecord {
            nominal_margin: known(nominal.margin),
            nominal_margin_at_hz: nominal.at.map(hertz),
            broken: *broken,
            ..limit
        });
        let all_met = |standings: &[Standing]| standings.iter().all(Standing::is_met);
        let Yield { boards, passed, .. } = result.yields;
        MaskOutcome {
            reference,
            reference_hz,
            frequencies: result.frequencies,
            fails: match (all_met(&result.target), all_met(&result.nominal), passed == boards) {
                (false, _, _) => Some("target"),
                (_, false, _) => Some("nominal"),
                (_, _, false) => Some("tolerance"),
                _ => None,
            },
            limits: limits.collect(),
            r#yield: YieldRecord::new(&result.yields, &conditions.sampling),
            worst_case: result.worst.as_ref().map(|worst| WorstRecord::new(built, worst)),
        }
    }
}

const BLANK: LimitRecord = LimitRecord {
    what: "magnitude",
    section: None,
    from_hz: None,
    to_hz: None,
    lower: None,
    upper: None,
    target_margin: None,
    target_margin_at_hz: None,
    nominal_margin: None,
    nominal_margin_at_hz: None,
    broken: 0,
};

/// The limits of a mask, and how the ideal target stands against each.
pub(super) fn limits(targets: &[Section], mask: &Mask, standings: &[Standing]) -> Vec<LimitRecord> {
    let limits = mask.limits.iter().map(|limit| over_frequency("magnitude", limit));
    let delays = mask.delays.iter().map(|limit| over_frequency("delay", limit));
    let figures = mask.figures.iter().map(|limit| figure_limit(targets, limit));
    let all = limits.chain(delays).chain(figures).zip(standings);
    let limit = |(limit, target): (LimitRecord, &Standing)| LimitRecord {
        target_margin: known(target.margin),
        target_margin_at_hz: target.at.map(hertz),
        ..limit
    };
    all.map(limit).collect()
}

fn over_frequency(what: &'static str, limit: &Limit) -> LimitRecord {
    let Limit { from, to, lower, upper } = *limit;
    LimitRecord { what, from_hz: Some(hertz(from)), to_hz: Some(hertz(to)), lower, upper, ..BLANK }
}

fn figure_limit(targets: &[Section], limit: &FigureLimit) -> LimitRecord {
    let (what, is_frequency) = match limit.figure {
        Figure::F0 => ("f0", true),
        Figure::Q => ("q", false),
        Figure::Fz => ("fz", true),
        Figure::Depth => ("depth", false),
    };
    let shown = |bound: f64| if is_frequency { hertz(bound) } else { bound };
    let section = Some(targets[limit.section].name.clone());
    LimitRecord { what, section, lower: limit.lower.map(shown), upper: limit.upper.map(shown), ..BLANK }
}

impl SpreadRecord {
    fn new(built: &Built, found: &Vetted) -> SpreadRecord {
        let mut figures = Vec::new();
        let all =
            built.sections.iter().zip(&found.figures).zip(&found.spread.sections).zip(&found.deviations.sections);
        for (((section, nominal), drawn), deviation) in all {
            let target = &section.target;
            let name = &target.name;
            let mut add =
                |figure, scale: f64, values: Option<(f64, f64)>, drawn: Option<Quantiles>, deviation: f64| {
                    let Some((target, nominal)) = values else { return };
                    let shown = |value: f64| if scale < 1.0 { hertz(value) } else { value };
                    figures.push(FigureRecord {
                        section: name.clone(),
                        figure,
                        target: shown(target),
                        nominal: shown(nominal),
                        drawn: drawn.map(|quantiles| QuantileRecord {
                            low: quantiles.low * scale,
                            median: quantiles.median * scale,
                            high: quantiles.high * scale,
                            deviation: quantiles.deviation * scale,
                        }),
                        sensitivity_deviation: deviation,
                    });
                };
            let from_w = 1.0 / TAU;
            add("f0", from_w, Some((target.w0, nominal.w0)), drawn.w0, deviation.f0);
            add("q", 1.0, target.q.zip(nominal.q), drawn.q, deviation.q);
            add("gain", 1.0, Some((target.gain, nominal.gain)), drawn.gain, deviation.gain);
            add("fz", from_w, target.wz.zip(nominal.wz), drawn.wz, deviation.fz);
        }
        let quantiles =
            |q: Quantiles| QuantileRecord { low: q.low, median: q.median, high: q.high, deviation: q.deviation };
        let (response_deviation, at) = found.deviations.response;
        SpreadRecord {
            boards: found.spread.boards,
            unstable: found.spread.unstable,
            figures,
            error: found.spread.error.map(quantiles),
            response_deviation,
            response_deviation_at_hz: hertz(at),
            nominal_error_is_lost: found.nominal_is_lost_in_spread(),
        }
    }
}

impl WorstRecord {
    fn new(built: &Built, worst: &WorstCase) -> WorstRecord {
        let slots = built.sections.iter().flat_map(|section| {
            section.parts.iter().map(|part| (section.target.name.clone(), section.slot_name(part.slot).to_string()))
        });
        let parts = slots.zip(&worst.errors).filter(|(_, error)| error.abs() > 0.0);
        WorstRecord {
            value: known(worst.value),
            at_hz: worst.at.filter(|_| worst.value.is_finite()).and_then(known).map(hertz),
            unstable: !worst.value.is_finite(),
            every_corner: worst.every_corner,
            corners: worst.corners,
            inside: worst.inside,
            parts: parts.map(|((section, slot), error)| OffPart { section, slot, error: *error }).collect(),
        }
    }
}

/// Writes the record as indented JSON with a line end. The keys are the fields of [`VetRecord`].
///
/// # Errors
/// Those of the writer.
pub fn write_vet_json(record: &VetRecord, out: &mut dyn Write) -> io::Result<()> {
    serde_json::to_writer_pretty(&mut *out, record).map_err(io::Error::from)?;
    writeln!(out)
}
