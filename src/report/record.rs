//! The one record from which every renderer works.

use std::f64::consts::TAU;

use serde::Serialize;

use super::drawn::{BoardRecord, SupplyRecord, TakenRecord, boards, class_2, piece, taken, tolerance};
use super::mask::MaskRecord;
use super::numbers::error_in_words;
use super::together::TogetherSearch;
use super::yields::{BuiltRecord, YieldsRecord};
use crate::parts::{Shelf, Supply};
use crate::search::{Chosen, End, Joint, Outcome, Part, Problem, Proof, Row, SectionProblem, SectionSummary};
use crate::target::{Criterion, Figures, Measure, Shape, Weights};
use crate::units::{Kind, format_part};

/// The name and version of the JSON format: keys may be added to it, none is renamed or removed.
pub const FORMAT: &str = "roundwell-shortlist/1";

/// A finished search: what was asked, how far it was searched, what was found. Units are in the names of the fields;
/// what is not known is `None`, never a number.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Record {
    /// [`FORMAT`].
    pub format: &'static str,
    /// The title of the job.
    pub title: String,
    /// How far it was searched, and what that proves.
    pub search: SearchRecord,
    /// What the error of a row is.
    pub measure: MeasureRecord,
    /// What was wanted.
    pub wanted: WantedRecord,
    /// The stock that was drawn on; `None` without a stock list.
    pub stock: Option<SupplyRecord>,
    /// What a board has to keep, where the job or a flag names a mask.
    pub mask: Option<MaskRecord>,
    /// What was asked of the tolerances; `None` where no yields were asked for.
    pub yields: Option<YieldsRecord>,
    /// The sections in signal order.
    pub sections: Vec<SectionRecord>,
    /// Rank of the row with the fewest part numbers within the wanted error.
    pub marked: Option<usize>,
    /// The rows in the order that was asked for, otherwise best error first.
    pub shortlist: Vec<RowRecord>,
    /// Rows to compare with: `ideal parts` (resistors unrounded) and `nearest value to each` (those, each rounded).
    pub references: Vec<RowRecord>,
}

/// How far it was searched.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct SearchRecord {
    /// `exhaustive` or `stopped`.
    pub proof: &'static str,
    /// Why it stopped, in words.
    pub reason: Option<String>,
    /// What the proof is about: `whole job` for one section, `whole board` for several that were searched together,
    /// otherwise `each section by itself`.
    pub scope: &'static str,
    /// Sets evaluated.
    pub sets: u64,
    /// Nodes of the search tree visited.
    pub nodes: u64,
    /// How long it took, s.
    pub seconds: f64,
    /// Whether anything lies within the error limit; otherwise the rows are the nearest that exist.
    pub within_limit: bool,
    /// How many more rows there are than were wanted.
    pub more_rows: usize,
    /// The fewest part numbers of what was found, where the limit on part numbers is below that.
    pub fewest_found: Option<usize>,
    /// Whether sets of the sections were left out when they were combined, being too many.
    pub thinned: bool,
    /// Each section's own search.
    pub sections: Vec<SectionSearch>,
    /// How all sections were searched together; `None` for one section, and where that is not offered.
    pub together: Option<TogetherSearch>,
}

/// How far one section was searched.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct SectionSearch {
    /// The section.
    pub name: String,
    /// `exhaustive` or `stopped`.
    pub proof: &'static str,
    /// Where an exhaustive search ended: `all-counts`, `resolution` or `count-limit`.
    pub end: Option<&'static str>,
    /// Every smaller number of part numbers was searched to its end, where the search was stopped.
    pub complete_below: Option<usize>,
    /// The proof in words.
    pub statement: String,
    /// How many combinations of values there are.
    pub combinations: Option<f64>,
    /// Sets evaluated.
    pub sets: u64,
    /// Nodes visited.
    pub nodes: u64,
    /// The error limit in force in the end, in the unit of the measure.
    pub error_limit: Option<f64>,
    /// The section's own front.
    pub front: Vec<FrontPoint>,
    /// Slots that do not reach the response.
    pub silent: Vec<String>,
    /// Slots that can be swapped without a change of the response.
    pub interchangeable: Vec<String>,
    /// Inequalities of the circuit that the shelf cannot meet for this target.
    pub unmet: Vec<String>,
}

/// A point of a section's own front.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct FrontPoint {
    /// Part numbers.
    pub part_numbers: usize,
    /// The best error with so many, in the unit of the measure.
    pub error: Option<f64>,
}

/// What the error is.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct MeasureRecord {
    /// `decibel`, `vector` or `weighted`.
    pub name: &'static str,
    /// The definition in words.
    pub definition: &'static str,
    /// The unit of `ranking_error`: `dB`, or empty for a plain ratio.
    pub unit: &'static str,
    /// The weights of f0, Q, gain and fz of the weighted measure.
    pub weights: Option<[f64; 4]>,
    /// The band, Hz.
    pub band_hz: [f64; 2],
    /// How far under the largest |H*| in the band the floor lies, dB.
    pub floor_db: f64,
    /// Whether the best flat gain offset is taken out.
    pub ignore_gain: bool,
}

/// What was wanted; errors in the unit of the measure.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct WantedRecord {
    /// The error that is good enough.
    pub wanted_error: f64,
    /// Nothing worse is listed unless nothing better exists.
    pub error_limit: f64,
    /// The front ends where the best error falls below this.
    pub error_resolution: f64,
    /// No set may need more part numbers.
    pub max_part_numbers: Option<usize>,
    /// The range for the geometric mean of the resistances of each section, Ω.
    pub impedance_ohm: Option<[f64; 2]>,
}

/// A section as it was asked for.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct SectionRecord {
    /// Its name.
    pub name: String,
    /// The ideal figures.
    pub target: TargetRecord,
    /// The circuit.
    pub circuit: String,
    /// The output taken.
    pub output: String,
    /// What may go into the slots; slots with the same shelf together.
    pub shelves: Vec<ShelfRecord>,
    /// Groups of slots that carry one value.
    pub equal: Vec<Vec<String>>,
}

/// The ideal figures of a section.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct TargetRecord {
    /// The shape in words.
    pub shape: &'static str,
    /// Pole frequency, Hz.
    pub f0_hz: f64,
    /// Pole quality factor, for second order.
    pub q: Option<f64>,
    /// Signed gain.
    pub gain: f64,
    /// Zero frequency, Hz, of a notch.
    pub fz_hz: Option<f64>,
}

/// A shelf in short.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct ShelfRecord {
    /// The slots that it is for.
    pub slots: Vec<String>,
    /// Resistors or capacitors.
    pub kind: Kind,
    /// How many values it has.
    pub values: usize,
    /// How many choices there are: more than values where a stock holds one value in several sorts.
    pub choices: usize,
    /// The smallest value, Ω or F.
    pub from: f64,
    /// The largest value, Ω or F.
    pub to: f64,
    /// Both in IEC 60062 notation.
    #[serde(skip)]
    pub range: [String; 2],
}

/// One set for the whole job.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct RowRecord {
    /// The place in the shortlist, from 1; references have none.
    pub rank: Option<usize>,
    /// The name of a reference.
    pub name: Option<&'static str>,
    /// Response error, dB.
    pub response_error_db: Option<f64>,
    /// The error by which the row is ranked, in the unit of the measure.
    pub ranking_error: Option<f64>,
    /// Where that error is largest, Hz.
    pub error_at_hz: Option<f64>,
    /// The flat gain factor that was taken out, where one was.
    pub gain_offset: Option<f64>,
    /// The largest relative miss in f0, Q, gain and fz over all sections, a plain ratio.
    pub worst_miss: Option<f64>,
    /// How many different parts must be bought.
    pub part_numbers: Option<usize>,
    /// How many parts sit on the board.
    pub placed_parts: usize,
    /// How many different parts must be bought beside the stock; `None` without a stock list.
    pub to_buy: Option<usize>,
    /// What the parts of one board cost, in the currency of the stock list; `None` where a price is not known. Where
    /// boards differ, that of the dearest.
    pub cost: Option<f64>,
    /// The same in millionths.
    #[serde(skip)]
    pub cost_millionths: Option<u64>,
    /// What is taken for all boards.
    pub taken: Vec<TakenRecord>,
    /// Section and slot of each ceramic of class 2 that reaches the response: its value moves with temperature, voltage
    /// and age.
    pub class_2: Vec<[String; 2]>,
    /// Whether it is not on the front but listed because alternatives were asked for.
    pub alternative: bool,
    /// Whether the row is proved to be the best of its kind.
    pub proved: bool,
    /// What tolerances make of it; `None` where no yields were asked for, and for unrounded parts.
    pub built: Option<BuiltRecord>,
    /// The sections in signal order; where boards differ, those of the worst board.
    pub sections: Vec<ChosenRecord>,
    /// The boards, where measured parts make them differ.
    pub boards: Vec<BoardRecord>,
}

/// One section of a row.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct ChosenRecord {
    /// Name of the section.
    pub name: String,
    /// Its circuit.
    pub circuit: String,
    /// The output taken.
    pub output: String,
    /// What the parts give.
    pub achieved: Achieved,
    /// Geometric mean of the resistances, Ω.
    pub impedance_ohm: Option<f64>,
    /// All impedance levels at which this set exists on the shelf, Ω, ascending.
    pub levels_ohm: Vec<f64>,
    /// The parts in slot order.
    pub parts: Vec<PartRecord>,
}

/// Figures that parts give.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Achieved {
    /// Pole frequency, Hz.
    pub f0_hz: Option<f64>,
    /// Pole quality factor.
    pub q: Option<f64>,
    /// Signed gain.
    pub gain: Option<f64>,
    /// Zero frequency, Hz, of a notch.
    pub fz_hz: Option<f64>,
}

/// One slot of a row.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct PartRecord {
    /// The slot.
    pub slot: String,
    /// Resistor or capacitor.
    pub kind: Kind,
    /// Its value, Ω or F.
    pub value: f64,
    /// The value in IEC 60062 notation, of a pair both with `+` between (in series) or `||` (in parallel); `None` for a
    /// value that cannot be bought.
    pub notation: Option<String>,
    /// How far it may be from that value by the tolerances of the stock list, as ratios less one: lowest and highest. Those
    /// of a pair follow from its parts. `None` where a tolerance is not known, and for a measured part.
    pub tolerance: Option<[f64; 2]>,
    /// How the two parts of a pair are joined: `series` or `parallel`.
    pub joint: Option<&'static str>,
    /// The unrounded value that belongs here, Ω or F.
    pub ideal: Option<f64>,
    /// What it is made of: one piece for a single part, two for a pair, none for a value that cannot be bought.
    pub made_of: Vec<PieceRecord>,
}

/// A part to buy.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct PieceRecord {
    /// Its value, Ω or F: as measured, else as labelled.
    pub value: f64,
    /// The value on its label, in IEC 60062 notation.
    pub notation: String,
    /// The measured value of this one part, Ω or F.
    pub measured: Option<f64>,
    /// How far it may be off its label by the tolerance of the stock list, as ratios: lowest and highest, such as −0.05 and
    /// 0.05. `None` where the list does not say, and for a measured part.
    pub tolerance: Option<[f64; 2]>,
    /// Its least and its largest temperature coefficient by the stock list, ppm/K; `None` where the list does not say.
    pub temperature_coefficient_ppm: Option<[f64; 2]>,
    /// By how much it may be off at the end of its life by the stock list, a ratio, to either side.
    pub ageing: Option<f64>,
    /// What the part or its drawer is called.
    pub id: Option<String>,
    /// The lines of the stock list that it is taken from.
    pub lines: Vec<usize>,
}

/// The frequency of an angular frequency that came from one: what the detour over 2π left in the last digits is taken
/// out, so that 1 kHz is 1000 and not 999.9999999999999.
pub(super) fn hertz(w: f64) -> f64 {
    let f = w / TAU;
    format!("{f:.13e}").parse().unwrap_or(f)
}

/// A number that is one.
pub(super) fn known(number: f64) -> Option<f64> {
    number.is_finite().then_some(number)
}

impl Record {
    /// The record of a search that took `seconds`.
    pub fn new(problem: &Problem, outcome: &Outcome, seconds: f64) -> Record {
        let references = [("ideal parts", &outcome.ideal), ("nearest value to each", &outcome.nearest)];
        let silent: Vec<Vec<String>> = outcome.sections.iter().map(|section| section.silent.clone()).collect();
        let row = |row: &Row, rank, name| RowRecord::new(problem, &silent, row, rank, name);
        Record {
            format: FORMAT,
            title: problem.title.clone(),
            search: SearchRecord::new(problem, outcome, seconds),
            measure: MeasureRecord::new(problem),
            wanted: WantedRecord {
                wanted_error: problem.goals.wanted_error,
                error_limit: problem.goals.error_limit,
                error_resolution: problem.goals.error_resolution,
                max_part_numbers: problem.goals.max_part_numbers,
                impedance_ohm: problem.goals.impedance.map(|(from, to)| [from, to]),
            },
            stock: SupplyRecord::new(&problem.supply),
            mask: None,
            yields: None,
            sections: problem.sections.iter().map(SectionRecord::new).collect(),
            marked: outcome.marked.map(|index| index + 1),
            shortlist: outcome.rows.iter().zip(1..).map(|(found, rank)| row(found, Some(rank), None)).collect(),
            references: references
                .into_iter()
                .filter_map(|(name, found)| Some(row(found.as_ref()?, None, Some(name))))
                .collect(),
        }
    }

    /// The row with the fewest part numbers within the wanted error.
    pub fn marked_row(&self) -> Option<&RowRecord> {
        self.shortlist.iter().find(|row| row.rank == self.marked && row.rank.is_some())
    }
}

impl SearchRecord {
    fn new(problem: &Problem, outcome: &Outcome, seconds: f64) -> SearchRecord {
        let unit = problem.criterion.measure.unit();
        let reason = outcome.stopped.or(outcome.sections.iter().find_map(|section| match section.proof {
            Proof::Stopped { reason, .. } => Some(reason),
            Proof::Exhaustive(_) => None,
        }));
        SearchRecord {
            proof: if reason.is_some() { "stopped" } else { "exhaustive" },
            reason: reason.map(|reason| reason.describe().to_string()),
            scope: match (problem.sections.len(), &outcome.together) {
                (1, _) => "whole job",
                (_, Some(_)) => "whole board",
                (_, None) => "each section by itself",
            },
            sets: outcome.sets,
            nodes: outcome.nodes,
            seconds,
            within_limit: outcome.within_limit,
            more_rows: outcome.more_rows,
            fewest_found: outcome.fewest_found,
            thinned: outcome.thinned,
            sections: outcome.sections.iter().map(|section| SectionSearch::new(section, problem, unit)).collect(),
            together: TogetherSearch::new(problem, outcome),
        }
    }
}

impl SectionSearch {
    fn new(summary: &SectionSummary, problem: &Problem, unit: &str) -> SectionSearch {
        let (proof, end, complete_below) = match summary.proof {
            Proof::Exhaustive(End::AllCounts) => ("exhaustive", Some("all-counts"), None),
            Proof::Exhaustive(End::Resolution) => ("exhaustive", Some("resolution"), None),
            Proof::Exhaustive(End::CountLimit) => ("exhaustive", Some("count-limit"), None),
            Proof::Stopped { complete_below, .. } => ("stopped", None, Some(complete_below)),
        };
        SectionSearch {
            name: summary.name.clone(),
            proof,
            end,
            complete_below,
            statement: statement(summary, problem, unit),
            combinations: known(summary.combinations),
            sets: summary.sets,
            nodes: summary.nodes,
            error_limit: known(summary.error_limit),
            front: summary
                .front
                .iter()
                .map(|&(part_numbers, error)| FrontPoint { part_numbers, error: known(error) })
                .collect(),
            silent: summary.silent.clone(),
            interchangeable: summary.interchangeable.clone(),
            unmet: summary.unmet.clone(),
        }
    }
}

/// What was proved for a section, in words.
fn statement(summary: &SectionSummary, problem: &Problem, unit: &str) -> String {
    let within = format!("within {}", error_in_words(unit, summary.error_limit));
    let none = format!("no set {within} on these shelves, in this circuit, beats the front");
    match &summary.proof {
        Proof::Exhaustive(_) if summary.front.is_empty() => {
            "searched to the end: no set on these shelves, in this circuit, comes near this response".to_string()
        }
        Proof::Exhaustive(End::AllCounts) => format!("proved: {none}"),
        Proof::Exhaustive(End::Resolution) => {
            let resolution = error_in_words(unit, problem.goals.error_resolution);
            format!("proved: {none}, which ends once the error is below the resolution of {resolution}")
        }
        Proof::Exhaustive(End::CountLimit) => {
            let most = problem.goals.max_part_numbers.map_or(String::new(), |most| format!(" of {most}"));
            format!("proved: {none}, up to the limit{most} on part numbers")
        }
        Proof::Stopped { reason, complete_below } => {
            let done = match complete_below {
                // One resistor and one capacitor value at least: before that there is nothing to rule out.
                0..=2 => "nothing is proved yet".to_string(),
                below => format!("all sets with up to {} part numbers are searched or ruled out", below - 1),
            };
            format!("stopped, {}: {done}, better sets with {complete_below} or more may exist", reason.describe())
        }
    }
}

impl MeasureRecord {
    fn new(problem: &Problem) -> MeasureRecord {
        let Criterion { measure, floor_db, ignore_gain, .. } = problem.criterion;
        let targets: Vec<_> = problem.sections.iter().map(|section| section.target.clone()).collect();
        let (low, high) = problem.criterion.band_for(&targets);
        let (name, weights) = match measure {
            Measure::Decibel => ("decibel", None),
            Measure::Vector => ("vector", None),
            // A gain that is ignored has no weight.
            Measure::Weighted(Weights { f0, q, gain, fz }) => {
                ("weighted", Some([f0, q, if ignore_gain { 0.0 } else { gain }, fz]))
            }
        };
        MeasureRecord {
            name,
            definition: measure.describe(),
            unit: measure.unit(),
            weights,
            band_hz: [hertz(low), hertz(high)],
            floor_db,
            ignore_gain,
        }
    }
}

impl SectionRecord {
    fn new(section: &SectionProblem) -> SectionRecord {
        let target = &section.target;
        let named = |slots: &[usize]| slots.iter().map(|&slot| section.circuit.slots[slot].name.clone()).collect();
        let mut shelves: Vec<(&Shelf, Vec<usize>)> = Vec::new();
        for slot in section.output().filled(&section.circuit) {
            let shelf = &section.shelves[slot];
            match shelves.iter_mut().find(|(known, _)| *known == shelf) {
                Some((_, slots)) => slots.push(slot),
                None => shelves.push((shelf, vec![slot])),
            }
        }
        let shelf = |(shelf, slots): (&Shelf, Vec<usize>)| {
            let (from, to) = shelf.span();
            let kind = shelf.kind();
            ShelfRecord {
                slots: named(&slots),
                kind,
                values: shelf.values().len(),
                choices: shelf.len(),
                from: from.to_f64(),
                to: to.to_f64(),
                range: [from, to].map(|value| format_part(value, kind)),
            }
        };
        SectionRecord {
            name: target.name.clone(),
            target: TargetRecord {
                shape: Shape::name(target.shape),
                f0_hz: hertz(target.w0),
                q: target.q,
                gain: target.gain,
                fz_hz: target.wz.map(hertz),
            },
            circuit: section.circuit.id.clone(),
            output: section.output().name.clone(),
            shelves: shelves.into_iter().map(shelf).collect(),
            equal: section.equal.iter().map(|group| named(group)).collect(),
        }
    }
}

impl RowRecord {
    fn new(
        problem: &Problem,
        silent: &[Vec<String>],
        row: &Row,
        rank: Option<usize>,
        name: Option<&'static str>,
    ) -> RowRecord {
        let chosen = |section: &SectionProblem, chosen: &Chosen| ChosenRecord::new(&problem.supply, section, chosen);
        RowRecord {
            rank,
            name,
            response_error_db: known(row.decibels),
            ranking_error: known(row.deviation.error),
            error_at_hz: row.deviation.at.map(|w| w / TAU).and_then(known),
            gain_offset: row.deviation.offset.and_then(known),
            worst_miss: known(row.worst_miss),
            part_numbers: row.part_numbers,
            placed_parts: row.placed_parts,
            alternative: row.alternative,
            proved: row.proved,
            built: None,
            to_buy: row.to_buy,
            cost: row.cost.map(|millionths| millionths as f64 / 1e6),
            cost_millionths: row.cost,
            taken: taken(&problem.supply, row),
            class_2: class_2(problem, silent, row),
            sections: problem.sections.iter().zip(&row.sections).map(|(s, c)| chosen(s, c)).collect(),
            boards: boards(problem, row, chosen),
        }
    }
}

/// The values of what stands in a slot as they are written on parts.
fn notation(part: &Part) -> Option<String> {
    let between = if part.joint == Some(Joint::Parallel) { "||" } else { "+" };
    let pieces: Vec<String> = part.pieces.iter().map(|piece| format_part(piece.value, part.kind)).collect();
    (!pieces.is_empty()).then(|| pieces.join(between))
}

impl ChosenRecord {
    pub(super) fn new(supply: &Supply, section: &SectionProblem, chosen: &Chosen) -> ChosenRecord {
        let Figures { w0, q, gain, wz } = chosen.achieved;
        let part = |part: &Part| PartRecord {
            slot: section.circuit.slots[part.slot].name.clone(),
            kind: part.kind,
            value: part.value.map_or(part.ideal, |value| value.to_f64()),
            notation: notation(part),
            tolerance: tolerance(supply, part),
            joint: part.joint.map(|joint| match joint {
                Joint::Series => "series",
                Joint::Parallel => "parallel",
            }),
            ideal: known(part.ideal),
            made_of: part.pieces.iter().map(|&choice| piece(supply, part.kind, choice)).collect(),
        };
        ChosenRecord {
            name: section.target.name.clone(),
            circuit: section.circuit.id.clone(),
            output: section.output().name.clone(),
            achieved: Achieved {
                f0_hz: known(w0 / TAU),
                q: q.and_then(known),
                gain: known(gain),
                fz_hz: wz.map(|wz| wz / TAU).and_then(known),
            },
            impedance_ohm: chosen.impedance.and_then(known),
            levels_ohm: chosen.levels.clone(),
            parts: chosen.parts.iter().map(part).collect(),
        }
    }
}
