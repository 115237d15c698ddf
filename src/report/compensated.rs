//! The record of a shortlist that was searched for with real op-amps in mind, and its JSON and CSV.

use std::f64::consts::TAU;
use std::io::{self, Write};

use serde::Serialize;

use super::csv::{CSV_COLUMNS, write_csv};
use super::numbers::{level, percent, short};
use super::record::{Record, TargetRecord, hertz};
use super::vet_table::of_hundred;
use crate::analysis::{BuiltRow, Compensated, Corrected, Correction, RealSection, Surroundings, miss};
use crate::search::Problem;
use crate::target::Section;

/// A shortlist with what its rows become with real op-amps. The targets of its sections are the wanted ones, its errors those
/// of ideal op-amps against the sections searched for, its mark goes by the error as built.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct CompensatedRecord {
    /// The shortlist.
    #[serde(flatten)]
    pub record: Record,
    /// What was searched for in place of what is wanted, and each row as built.
    pub compensation: CompensationRecord,
}

/// How real op-amps were made up for.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct CompensationRecord {
    /// Gain-bandwidth product of the op-amps, Hz; `None` for ideal ones.
    pub bandwidth_hz: Option<f64>,
    /// How far it may lie from that, relative, to either side.
    pub bandwidth_spread: f64,
    /// Output resistance of the op-amps, Ω.
    pub output_resistance_ohm: f64,
    /// Resistance of the source, Ω.
    pub source_resistance_ohm: f64,
    /// Load, Ω.
    pub load_resistance_ohm: Option<f64>,
    /// Stray capacitance from every node to ground, F.
    pub stray_farad: f64,
    /// How many searches were made, each adjusted for other ratios of the parts; the best is shown.
    pub searches: usize,
    /// Why no further ratios were tried, where that was not for want of them.
    pub stopped: Option<String>,
    /// The sections in signal order.
    pub sections: Vec<CorrectionRecord>,
    /// The rows as built, in the order of the shortlist.
    pub rows: Vec<BuiltRowRecord>,
    /// The references as built, by name.
    pub references: Vec<BuiltRowRecord>,
    /// Rank of the row with the fewest part numbers whose error as built is within the wanted one.
    pub marked: Option<usize>,
    /// Rank of the row with the least error as built.
    pub best: Option<usize>,
    /// What has to be thought of, in words.
    pub warnings: Vec<String>,
}

/// How one section was adjusted.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct CorrectionRecord {
    /// Its name.
    pub name: String,
    /// `corrected`; `unstable` or `not-found` where it is searched for as wanted.
    pub state: &'static str,
    /// What is wanted of the built section.
    pub wanted: TargetRecord,
    /// What is searched for with ideal op-amps.
    pub searched: TargetRecord,
    /// By how much f0 of that differs from what is wanted, relative.
    pub f0_correction: f64,
    /// The same for Q.
    pub q_correction: Option<f64>,
    /// What unrounded parts for the wanted section become.
    pub without: BuiltSectionRecord,
    /// What unrounded parts of the same ratios for the section searched for become.
    pub with: BuiltSectionRecord,
    /// The same with the least and with the largest gain-bandwidth product.
    pub ends: Vec<BuiltSectionRecord>,
}

/// A section with real op-amps; misses are relative to what is wanted.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct BuiltSectionRecord {
    /// `stable`, `unstable`, or `unknown` where the poles cannot be found.
    pub state: &'static str,
    /// Pole frequency, Hz, if it is stable.
    pub f0_hz: Option<f64>,
    /// Its miss.
    pub f0_miss: Option<f64>,
    /// Pole quality factor.
    pub q: Option<f64>,
    /// Its miss.
    pub q_miss: Option<f64>,
}

/// A row as built.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct BuiltRowRecord {
    /// Its rank in the shortlist; references have none.
    pub rank: Option<usize>,
    /// The name of a reference.
    pub name: Option<&'static str>,
    /// With the nominal op-amps.
    pub nominal: BuiltErrorRecord,
    /// With the least and with the largest gain-bandwidth product; empty without a spread.
    pub ends: Vec<BuiltErrorRecord>,
}

/// A board with certain op-amps.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct BuiltErrorRecord {
    /// Their gain-bandwidth product, Hz.
    pub bandwidth_hz: Option<f64>,
    /// The error against what is wanted, in the unit of the measure, of the weighted measure in dB; `None` where a section is
    /// not known to be stable.
    pub error: Option<f64>,
    /// Where it is largest, Hz.
    pub error_at_hz: Option<f64>,
    /// The sections.
    pub sections: Vec<BuiltSectionRecord>,
}

/// A correction beyond this is warned of: it rests on how well the op-amps are known; common practice.
const LARGEST_CORRECTION: f64 = 0.1;

/// What a correction leaves of f0 and Q is said beyond this.
const LEFT_OVER: f64 = 1e-5;

fn target(section: &Section) -> TargetRecord {
    TargetRecord {
        shape: section.shape.name(),
        f0_hz: hertz(section.w0),
        q: section.q,
        gain: section.gain,
        fz_hz: section.wz.map(hertz),
    }
}

impl BuiltSectionRecord {
    fn new(found: &RealSection, wanted: &Section) -> BuiltSectionRecord {
        let state = match found {
            RealSection::Stable { .. } => "stable",
            RealSection::Unstable => "unstable",
            RealSection::Unknown => "unknown",
        };
        let figures = match found {
            RealSection::Stable { w0, q, .. } => Some((w0 / TAU, *q)),
            _ => None,
        };
        let misses = miss(found, wanted);
        BuiltSectionRecord {
            state,
            f0_hz: figures.map(|(f0, _)| f0),
            f0_miss: misses.map(|(f0, _)| f0),
            q: figures.and_then(|(_, q)| q),
            q_miss: misses.and_then(|(_, q)| q),
        }
    }

    /// The misses in words, such as `f0 -1.94 %, Q +1.90 %`, or the state.
    pub(super) fn misses_in_words(&self) -> String {
        match (self.f0_miss, self.q_miss) {
            (Some(f0), Some(q)) => format!("f0 {}, Q {}", percent(f0), percent(q)),
            (Some(f0), None) => format!("f0 {}", percent(f0)),
            _ if self.state == "unstable" => "unstable".to_string(),
            _ => "poles not found".to_string(),
        }
    }

    /// Whether f0 or Q miss by more than those of another, and by more than `least`.
    pub(super) fn misses_more_than(&self, other: &BuiltSectionRecord, least: f64) -> bool {
        self.worst_miss() > other.worst_miss().max(least)
    }

    fn worst_miss(&self) -> f64 {
        self.f0_miss.map_or(f64::INFINITY, f64::abs).max(self.q_miss.map_or(0.0, f64::abs))
    }
}

impl CorrectionRecord {
    fn new(wanted: &Section, correction: &Correction) -> CorrectionRecord {
        let (f0_correction, q_correction) = correction.shifts(wanted);
        let built = |found: &RealSection| BuiltSectionRecord::new(found, wanted);
        CorrectionRecord {
            name: wanted.name.clone(),
            state: match correction.state {
                Corrected::Found => "corrected",
                Corrected::Unstable => "unstable",
                Corrected::NotFound => "not-found",
            },
            wanted: target(wanted),
            searched: target(&correction.searched),
            f0_correction,
            q_correction,
            without: built(&correction.without),
            with: built(&correction.with),
            ends: correction.ends.iter().map(built).collect(),
        }
    }
}

impl CompensatedRecord {
    /// The record of a search for `problem`, whose sections are the wanted ones, with op-amps and surroundings `around`, that
    /// took `seconds`.
    pub fn new(
        problem: &Problem,
        around: &Surroundings,
        spread: f64,
        found: &Compensated,
        seconds: f64,
    ) -> CompensatedRecord {
        let mut record = Record::new(&found.problem, &found.outcome, seconds);
        let wanted: Vec<&Section> = problem.sections.iter().map(|section| &section.target).collect();
        for (section, wanted) in record.sections.iter_mut().zip(&wanted) {
            section.target = target(wanted);
        }
        let marked = found.marked.map(|row| row + 1);
        record.marked = marked;
        let sections = |list: &[RealSection]| {
            list.iter().zip(&wanted).map(|(found, wanted)| BuiltSectionRecord::new(found, wanted)).collect()
        };
        let row = |rank: Option<usize>, name: Option<&'static str>, built: &BuiltRow| BuiltRowRecord {
            rank,
            name,
            nominal: BuiltErrorRecord {
                bandwidth_hz: around.bandwidth,
                error: built.error.map(|(error, _)| error),
                error_at_hz: built.error.map(|(_, w)| w / TAU),
                sections: sections(&built.sections),
            },
            ends: (built.ends.iter())
                .map(|end| BuiltErrorRecord {
                    bandwidth_hz: Some(end.bandwidth),
                    error: end.error.map(|(error, _)| error),
                    error_at_hz: end.error.map(|(_, w)| w / TAU),
                    sections: sections(&end.sections),
                })
                .collect(),
        };
        let references = [("ideal parts", &found.ideal), ("nearest value to each", &found.nearest)];
        let rows: Vec<BuiltRowRecord> =
            found.rows.iter().zip(1..).map(|(r, rank)| row(Some(rank), None, r)).collect();
        let mut compensation = CompensationRecord {
            bandwidth_hz: around.bandwidth,
            bandwidth_spread: spread,
            output_resistance_ohm: around.output_resistance,
            source_resistance_ohm: around.source_resistance,
            load_resistance_ohm: around.load_resistance,
            stray_farad: around.stray,
            searches: found.searches,
            stopped: found.stopped.map(|reason| reason.describe().to_string()),
            sections: wanted.iter().zip(&found.corrections).map(|(w, c)| CorrectionRecord::new(w, c)).collect(),
            rows,
            references: references.iter().filter_map(|(name, r)| Some(row(None, Some(name), r.as_ref()?))).collect(),
            marked,
            best: found.best.map(|row| row + 1),
            warnings: Vec::new(),
        };
        compensation.warnings = warnings(&compensation);
        CompensatedRecord { record, compensation }
    }

    /// The shortlist with the sections searched for as its targets.
    pub(super) fn as_searched(&self) -> Record {
        let mut record = self.record.clone();
        for (section, correction) in record.sections.iter_mut().zip(&self.compensation.sections) {
            section.target = correction.searched.clone();
        }
        record
    }
}

impl CompensationRecord {
    /// The row that is taken first: the marked one, else the best, else the first.
    pub fn first_row(&self) -> Option<&BuiltRowRecord> {
        let rank = self.marked.or(self.best).or(Some(1));
        self.rows.iter().find(|row| row.rank == rank)
    }
}

/// What has to be thought of.
fn warnings(compensation: &CompensationRecord) -> Vec<String> {
    let mut warnings = Vec::new();
    for section in &compensation.sections {
        let name = &section.name;
        match section.state {
            "unstable" => warnings.push(format!(
                "section {name} oscillates with these op-amps, and no adjusted section was found that does not: it is searched for as \
                 wanted. Take faster op-amps, another circuit, or a lower Q."
            )),
            "not-found" => warnings.push(format!(
                "section {name}: no adjusted section was found whose parts the circuit can give: it is searched for as wanted"
            )),
            _ => {}
        }
        if section.state == "corrected" && section.with.worst_miss() > LEFT_OVER {
            warnings.push(format!(
                "section {name}: the circuit holds figures together, so that not all can be set right: {} of unrounded parts \
                 stays",
                section.with.misses_in_words()
            ));
        }
        let (f0, q) = (section.f0_correction, section.q_correction);
        if f0.abs() > LARGEST_CORRECTION || q.is_some_and(|q| q.abs() > LARGEST_CORRECTION) {
            let of_q = q.map_or(String::new(), |q| format!(" and Q by {}", percent(q)));
            warnings.push(format!(
                "section {name}: f0 had to be changed by {}{of_q}. Beyond {} the result rests on how well the op-amps are known: take \
                 faster ones, or a circuit that depends on them less.",
                percent(f0),
                of_hundred(LARGEST_CORRECTION)
            ));
        }
    }
    let Some(row) = compensation.first_row() else { return warnings };
    let rank = row.rank.unwrap_or(1);
    for (k, section) in compensation.sections.iter().enumerate() {
        let Some(nominal) = row.nominal.sections.get(k) else { continue };
        if nominal.state == "unstable" {
            warnings.push(format!("section {} of row {rank} oscillates with these op-amps", section.name));
            continue;
        }
        let ends: Vec<(&BuiltErrorRecord, &BuiltSectionRecord)> =
            row.ends.iter().filter_map(|end| Some((end, end.sections.get(k)?))).collect();
        if ends.iter().any(|(_, end)| end.worst_miss() > nominal.worst_miss()) {
            let remains = |(end, section): &(&BuiltErrorRecord, &BuiltSectionRecord)| {
                let bandwidth = end.bandwidth_hz.map_or(String::new(), |b| level(b, 4, "Hz"));
                format!("{} with {bandwidth}", section.misses_in_words())
            };
            let remains: Vec<String> = ends.iter().map(remains).collect();
            warnings.push(format!(
                "section {} of row {rank}: the spread of the bandwidth moves it by more than the correction leaves ({}): what remains \
                 is {}",
                section.name,
                nominal.misses_in_words(),
                remains.join(", and ")
            ));
        }
    }
    warnings
}

/// Writes the record as indented JSON with a line end: the keys of the shortlist, and `compensation`.
///
/// # Errors
/// Those of the writer.
pub fn write_compensated_json(record: &CompensatedRecord, out: &mut dyn Write) -> io::Result<()> {
    serde_json::to_writer_pretty(&mut *out, record).map_err(io::Error::from)?;
    writeln!(out)
}

/// The columns that follow those of a plain shortlist ([`CSV_COLUMNS`]), in order, with what each holds.
pub const COMPENSATED_CSV_COLUMNS: [(&str, &str); 3] = [
    (
        "built_error",
        "error of the row as built with the nominal op-amps, in the unit of the measure; empty if unstable",
    ),
    ("built_f0_hz", "pole frequency of the section as built, Hz"),
    ("built_q", "Q of the section as built"),
];

/// Writes the record as CSV, as a plain shortlist with further columns.
///
/// # Errors
/// Those of the writer.
pub fn write_compensated_csv(record: &CompensatedRecord, out: &mut dyn Write) -> io::Result<()> {
    let mut plain = Vec::new();
    write_csv(&record.record, &mut plain)?;
    let mut reader = ::csv::Reader::from_reader(plain.as_slice());
    let mut writer = ::csv::Writer::from_writer(out);
    let names = CSV_COLUMNS.iter().chain(&COMPENSATED_CSV_COLUMNS).map(|(name, _)| *name);
    writer.write_record(names).map_err(io::Error::other)?;
    let place = |name: &str| CSV_COLUMNS.iter().position(|(column, _)| *column == name).unwrap_or(0);
    let (row_at, rank_at, section_at) = (place("row"), place("rank"), place("section"));
    let compensation = &record.compensation;
    for line in reader.records() {
        let line = line.map_err(io::Error::other)?;
        let rank: Option<usize> = line[rank_at].parse().ok();
        let named = |row: &&BuiltRowRecord| row.rank == rank && row.name.is_none_or(|name| name == &line[row_at]);
        let built = compensation.rows.iter().chain(&compensation.references).find(named).map(|row| &row.nominal);
        let section = compensation.sections.iter().position(|section| section.name == line[section_at]);
        let section = built.zip(section).and_then(|(built, index)| built.sections.get(index));
        let number = |value: Option<f64>| value.map_or(String::new(), |value| format!("{value:?}"));
        let further = [
            number(built.and_then(|built| built.error)),
            number(section.and_then(|section| section.f0_hz)),
            number(section.and_then(|section| section.q)),
        ];
        writer.write_record(line.iter().chain(further.iter().map(String::as_str))).map_err(io::Error::other)?;
    }
    writer.flush()
}

/// f0 and Q of a target with their distance from another.
pub(super) fn figures_in_words(target: &TargetRecord, wanted: &TargetRecord) -> String {
    let figure = |name: &str, shown: String, value: f64, wanted: f64| match percent(value / wanted - 1.0).as_str() {
        "0 %" => format!("{name} {shown}"),
        change => format!("{name} {shown} ({change})"),
    };
    let mut words = vec![figure("f0", level(target.f0_hz, 6, "Hz"), target.f0_hz, wanted.f0_hz)];
    if let (Some(q), Some(wanted)) = (target.q, wanted.q) {
        words.push(figure("Q", short(q, 6), q, wanted));
    }
    words.push(figure("gain", short(target.gain, 6), target.gain, wanted.gain));
    if let (Some(fz), Some(wanted)) = (target.fz_hz, wanted.fz_hz) {
        words.push(figure("fz", level(fz, 6, "Hz"), fz, wanted));
    }
    words.join(", ")
}
