//! How sets are judged and what is wanted of them, for the job as a whole.

use std::f64::consts::TAU;
use std::fmt::Display;

use super::desk::{At, Checked, Desk, Place};
use super::file::{JobFile, MeasureFile};
use super::given::Scalar;
use super::section::number;
use crate::parts::Shelf;
use crate::search::{Goals, SectionProblem};
use crate::target::{Criterion, Measure, Weights};
use crate::units::{Kind, format_part, parse_decibels, parse_frequency, parse_number, parse_part};

/// A whole number between two bounds.
pub(super) fn whole(name: &str, low: usize, high: usize) -> impl Fn(&str) -> Result<usize, String> {
    move |text| {
        let number = text.parse().ok().filter(|number| (low..=high).contains(number));
        number.ok_or_else(|| format!("{name} must be a whole number from {low} to {high}, found {text}"))
    }
}

/// A number larger than zero and not above `high`.
fn positive<E: Display>(
    name: &str,
    high: f64,
    read: impl Fn(&str) -> Result<f64, E>,
) -> impl Fn(&str) -> Result<f64, String> {
    move |text| match read(text) {
        Ok(number) if number > 0.0 && number <= high => Ok(number),
        Ok(_) => Err(format!("{name} must be larger than 0 and at most {high}, found {text}")),
        Err(error) => Err(error.to_string()),
    }
}

/// Sections that not every measure can judge, each by the name of one, if the job has any.
#[derive(Clone, Copy, Debug, Default)]
pub(super) struct Delicate<'a> {
    /// An all-pass.
    pub all_pass: Option<&'a str>,
    /// A notch whose null depends on the part values.
    pub inexact_notch: Option<&'a str>,
}

/// The criterion.
pub(super) fn criterion(desk: &mut Desk, job: &JobFile, delicate: Delicate) -> Checked<Criterion> {
    let root = Place::job();
    let measure = measure(desk, root.find("measure", &job.measure), delicate);
    let band = desk.range(root.find("band", &job.band), parse_frequency);
    let floor = desk.optional(root.find("floor", &job.floor), positive("floor", 300.0, parse_decibels));
    let usual = Criterion::default();
    Ok(Criterion {
        measure: measure?,
        band: band?.map(|(low, high)| (low * TAU, high * TAU)),
        floor_db: floor?.unwrap_or(usual.floor_db),
        ignore_gain: job.ignore_gain.as_ref().map_or(usual.ignore_gain, |given| given.value),
    })
}

fn measure(desk: &mut Desk, found: Option<At<'_, MeasureFile>>, delicate: Delicate) -> Checked<Measure> {
    let Delicate { all_pass, inexact_notch } = delicate;
    let Some(At { value, place }) = found else {
        return Ok(if all_pass.is_some() { Measure::Vector } else { Measure::Decibel });
    };
    match (value, all_pass) {
        (MeasureFile::Decibel, Some(name)) => {
            let message = format!("the magnitude in dB says nothing about the all-pass section {name}");
            Err(desk.note(&place, message, "write measure: Vector"))
        }
        (MeasureFile::Decibel, None) => Ok(Measure::Decibel),
        (MeasureFile::Vector, _) => Ok(Measure::Vector),
        (MeasureFile::Weighted { f0, q, gain, fz }, _) => {
            let mut weight = |key: &str, scalar: &Option<Scalar>| {
                let found = scalar.as_ref().map(|value| At { value, place: place.key(key) });
                desk.optional(found, number("a weight", 0.0, 1e6))
            };
            let (f0, q, gain, fz) = (weight("f0", f0), weight("q", q), weight("gain", gain), weight("fz", fz));
            let f0 = f0?.unwrap_or(0.0);
            let [q, gain, fz] = [q?.unwrap_or(0.0), gain?.unwrap_or(0.0), fz?.unwrap_or(f0)];
            if f0 + q + gain + fz > 0.0 {
                return match (all_pass, inexact_notch) {
                    (Some(name), _) => {
                        let message =
                            format!("the weighted misses say nothing about the zeros of the all-pass section {name}");
                        Err(desk.note(&place, message, "write measure: Vector"))
                    }
                    (None, Some(name)) => {
                        let message = format!(
                            "the weighted misses say nothing about the depth of the null of section {name}, which \
                             depends on the part values"
                        );
                        let help = "keep the ties of the circuit, or write measure: Decibel or Vector";
                        Err(desk.note(&place, message, help))
                    }
                    (None, None) => Ok(Measure::Weighted(Weights { f0, q, gain, fz })),
                };
            }
            Err(desk.note(&place, "every weight is zero", "write Weighted(f0: 1, q: 0.2, gain: 1), for example"))
        }
    }
}

/// Notes an impedance range in which no resistor of a section lies.
pub(super) fn check_impedance(desk: &mut Desk, job: &JobFile, goals: &Goals, section: &SectionProblem) {
    let Some(At { value: (from, to), place }) = Place::job().find("impedance", &job.impedance) else { return };
    let Some((low, high)) = goals.impedance else { return };
    let resistors = section.output().filled(&section.circuit).map(|slot| &section.shelves[slot]);
    let spans = resistors.filter(|shelf| shelf.kind() == Kind::Resistor).map(Shelf::span);
    let whole = spans.reduce(|a, b| (a.0.min(b.0), a.1.max(b.1)));
    let Some((least, most)) = whole.filter(|(least, most)| high < least.to_f64() || most.to_f64() < low) else {
        return;
    };
    let [least, most] = [least, most].map(|value| format_part(value, Kind::Resistor));
    let name = &section.target.name;
    let message = format!(
        "no impedance from {} to {} is possible: the resistors of section {name} run from {least} to {most}",
        from.text(),
        to.text()
    );
    desk.note(&place, message, "choose a range among them, or other resistors");
}

/// The goals, for so many sections; errors are in the unit of the measure.
pub(super) fn goals(desk: &mut Desk, job: &JobFile, measure: Checked<Measure>, sections: usize) -> Checked<Goals> {
    let root = Place::job();
    let most =
        desk.optional(root.find("max_part_numbers", &job.max_part_numbers), whole("max_part_numbers", 1, 1000));
    let rows = desk.optional(root.find("rows", &job.rows), whole("rows", 1, 10_000));
    let alternatives = desk.optional(root.find("alternatives", &job.alternatives), whole("alternatives", 0, 10_000));
    let ohms = |text: &str| parse_part(text, Kind::Resistor);
    let impedance = desk.range(root.find("impedance", &job.impedance), ohms);
    let measure = measure?;
    let [wanted_error, error_limit, error_resolution] = errors(desk, job, &measure, sections)?;
    let own_error = own_error(desk, root.find("own_error", &job.own_error), &measure);
    let usual = Goals::default();
    Ok(Goals {
        max_part_numbers: most?,
        wanted_error,
        error_limit,
        own_error: own_error?,
        one_at_a_time: job.one_at_a_time.as_ref().is_some_and(|given| given.value),
        error_resolution,
        rows: rows?.unwrap_or(usual.rows),
        alternatives: alternatives?.unwrap_or(usual.alternatives),
        impedance: impedance?.map(|(low, high)| (low.to_f64(), high.to_f64())),
        rank: job.rank.as_ref().map_or(usual.rank, |given| given.value.searched()),
        each_board_its_own: job.own_set_per_board.as_ref().is_some_and(|given| given.value),
    })
}

/// An error in the unit of the measure.
fn read_error(desk: &mut Desk, key: &str, found: Option<At<'_, Scalar>>, measure: &Measure) -> Checked<Option<f64>> {
    match measure {
        Measure::Decibel => desk.optional(found, positive(key, 100.0, parse_decibels)),
        Measure::Vector | Measure::Weighted(_) => desk.optional(found, positive(key, 10.0, parse_number)),
    }
}

/// By how much sections may miss their own targets.
pub(super) fn own_error(desk: &mut Desk, found: Option<At<'_, Scalar>>, measure: &Measure) -> Checked<Option<f64>> {
    read_error(desk, "own_error", found, measure)
}

/// The wanted error, the limit and the resolution. What is not written gives way to what is.
fn errors(desk: &mut Desk, job: &JobFile, measure: &Measure, sections: usize) -> Checked<[f64; 3]> {
    let mut usual: [f64; 3] = match measure {
        Measure::Decibel => [0.1, 1.0, 0.001],
        Measure::Vector | Measure::Weighted(_) => [0.01, 0.12, 0.0001],
    };
    if sections > 1 {
        // Each digit more takes whole boards long, and what it gives is far below any tolerance.
        usual[2] *= 10.0;
    }
    let mut error = |key: &str, given| read_error(desk, key, Place::job().find(key, given), measure);
    let wanted = error("wanted_error", &job.wanted_error);
    let limit = error("error_limit", &job.error_limit);
    let resolution = error("error_resolution", &job.error_resolution);
    let (wanted, limit, resolution) = (wanted?, limit?, resolution?);
    let aim = wanted.unwrap_or(usual[0].min(limit.unwrap_or(f64::INFINITY)));
    let (limit, resolution) = (limit.unwrap_or(usual[1].max(aim)), resolution.unwrap_or(usual[2].min(aim)));
    if aim > limit {
        let place = Place::job().of("wanted_error", &job.wanted_error);
        let message = format!("wanted_error {aim} is above error_limit {limit}");
        return Err(desk.note(&place, message, "raise the limit, or want a smaller error"));
    }
    if resolution > aim {
        let place = Place::job().of("error_resolution", &job.error_resolution);
        let message = format!("error_resolution {resolution} is above wanted_error {aim}");
        return Err(desk.note(&place, message, "choose a finer resolution"));
    }
    Ok([aim, limit, resolution])
}
