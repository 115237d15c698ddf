//! What a row takes: from stock, to be bought, and on which board.

use std::collections::BTreeMap;

use serde::Serialize;

use super::need::measured_notation;
use super::record::{ChosenRecord, PieceRecord, RowRecord};
use super::stock::ageing_in_words;
use crate::analysis::listed_tolerance;
use crate::parts::{Buying, Choice, Lot, Origin, Price, Supply};
use crate::search::{BuiltBoard, Chosen, Part, Problem, Row, SectionProblem};
use crate::units::{Kind, format_part};

/// The stock of a job.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct SupplyRecord {
    /// Boards that it must do for.
    pub boards: u64,
    /// How many of each part used are left over.
    pub spares: u64,
    /// How many different parts it holds, lines of the same choice counted once.
    pub lots: usize,
    /// Lines of the list that cannot be used and were left out.
    pub lines_left_out: usize,
    /// How many part numbers may be bought; `None` for as many as it takes.
    pub most_to_buy: Option<usize>,
    /// The only kind that may be bought, where it is one.
    pub buying_only: Option<Kind>,
    /// The currency of the costs, where there are prices and it is written.
    pub currency: Option<String>,
}

impl SupplyRecord {
    /// The record of a supply; `None` without a stock list.
    pub fn new(supply: &Supply) -> Option<SupplyRecord> {
        supply.has_stock().then(|| SupplyRecord {
            boards: supply.boards,
            spares: supply.spares,
            lots: supply.lots().count(),
            lines_left_out: supply.lines_left_out,
            most_to_buy: Some(supply.buying).filter(|buying| *buying != Buying::Allowed).map(Buying::most),
            buying_only: supply.buying_only,
            currency: supply.currency().flatten().map(str::to_owned),
        })
    }
}

/// Parts that a row takes, for all boards.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct TakenRecord {
    /// Resistor or capacitor.
    pub kind: Kind,
    /// The value on the label, Ω or F.
    pub value: f64,
    /// The same in IEC 60062 notation.
    pub notation: String,
    /// What tells it from others of its value: tolerance, temperature coefficient, dielectric, measured value.
    pub grade: Option<String>,
    /// The measured value of a single part, in IEC 60062 notation.
    pub measured: Option<String>,
    /// What the part or its drawer is called.
    pub id: Option<String>,
    /// The lines of the stock list; none for a part that is in no line.
    pub lines: Vec<usize>,
    /// Bodies on each board.
    pub per_board: u64,
    /// How many it takes for all boards, with the spares.
    pub need: u64,
    /// How many there are; `None` where the list does not say, or does not have it.
    pub available: Option<u64>,
    /// How many must be bought.
    pub to_buy: u64,
}

/// A board that differs from the others in its measured parts.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct BoardRecord {
    /// The number of the board, from 1.
    pub board: usize,
    /// The error of its cascade, in the unit of the measure.
    pub error: Option<f64>,
    /// Its sections.
    pub sections: Vec<ChosenRecord>,
}

/// The piece of a choice.
pub(super) fn piece(supply: &Supply, kind: Kind, choice: Choice) -> PieceRecord {
    let lot = supply.lot_of(choice);
    PieceRecord {
        value: choice.value.to_f64(),
        notation: format_part(lot.map_or(choice.value, |lot| lot.nominal), kind),
        measured: lot.and_then(|lot| lot.measured).map(|value| value.to_f64()),
        tolerance: lot.and_then(listed_tolerance).map(|(low, high)| [low, high]),
        temperature_coefficient_ppm: lot
            .and_then(|lot| lot.lines.first()?.temperature_coefficient)
            .map(|coefficient| [-1.0, 1.0].map(|side| coefficient.mean() + side * coefficient.spread())),
        ageing: lot.and_then(|lot| lot.lines.first()?.ageing).map(|ageing| ageing.to_f64()),
        id: lot.and_then(|lot| lot.id()).map(str::to_owned),
        lines: lot.map_or(Vec::new(), |lot| lot.lines.iter().map(|line| line.line).collect()),
    }
}

/// How far what stands in a slot may be from its value: the value of the whole with all its parts at their lowest, and at
/// their highest, for both joints rise with either part.
pub(super) fn tolerance(supply: &Supply, part: &Part) -> Option<[f64; 2]> {
    let limits = |&choice: &Choice| {
        let lot = supply.lot_of(choice).filter(|lot| lot.measured.is_none())?;
        Some(lot.lines.first()?.tolerance?.limits(lot.nominal))
    };
    let limits: Vec<(f64, f64)> = part.pieces.iter().map(limits).collect::<Option<_>>()?;
    let whole = |values: Vec<f64>| match (values.as_slice(), part.joint) {
        (&[only], None) => Some(only),
        (&[a, b], Some(joint)) => Some(joint.value(part.kind, a, b)),
        _ => None,
    };
    let low = whole(limits.iter().map(|(low, _)| *low).collect())?;
    let high = whole(limits.iter().map(|(_, high)| *high).collect())?;
    Some([low / part.ideal - 1.0, high / part.ideal - 1.0])
}

/// The parts of a board, with how many bodies of each.
fn used<'a>(sections: impl IntoIterator<Item = &'a Chosen>) -> BTreeMap<(Kind, Choice), u64> {
    let mut used = BTreeMap::new();
    for part in sections.into_iter().flat_map(|chosen| &chosen.parts) {
        part.pieces.iter().for_each(|&piece| *used.entry((part.kind, piece)).or_default() += 1);
    }
    used
}

/// What a row takes for all boards, by kind and value.
pub(super) fn taken(supply: &Supply, row: &Row) -> Vec<TakenRecord> {
    // For each part the most bodies on one board, and those on all boards together.
    let mut whole: BTreeMap<(Kind, Choice), (u64, u64)> = BTreeMap::new();
    let alike = row.boards.is_empty().then(|| (used(&row.sections), supply.boards));
    let differing = row.boards.iter().map(|board| (used(&board.sections), 1));
    for (parts, boards) in alike.into_iter().chain(differing) {
        for (key, bodies) in parts {
            let (most, all) = whole.entry(key).or_default();
            (*most, *all) = (bodies.max(*most), *all + bodies * boards);
        }
    }
    let record = |((kind, choice), (per_board, all)): ((Kind, Choice), (u64, u64))| {
        let lot = supply.lot_of(choice);
        let label = lot.map_or(choice.value, |lot| lot.nominal);
        let is_measured = lot.is_some_and(|lot| lot.measured.is_some());
        let need = if is_measured { per_board } else { all + supply.spares };
        let available = lot.and_then(|lot| lot.available);
        let bought = supply.has_stock() && supply.obtain(choice, per_board) != Some(Origin::Stock);
        TakenRecord {
            kind,
            value: label.to_f64(),
            notation: format_part(label, kind),
            grade: lot.and_then(grade),
            measured: lot.and_then(measured_notation),
            id: lot.and_then(|lot| lot.id()).map(str::to_owned),
            lines: lot.map_or(Vec::new(), |lot| lot.lines.iter().map(|line| line.line).collect()),
            per_board,
            need,
            available,
            to_buy: if bought { need - available.unwrap_or(0).min(need) } else { 0 },
        }
    };
    whole.into_iter().map(record).collect()
}

/// What a stock list says of its parts beside their value.
pub(super) fn grade(lot: &Lot) -> Option<String> {
    let line = lot.lines.first()?;
    let words = [
        line.tolerance.map(|tolerance| tolerance.in_words(lot.kind)),
        line.temperature_coefficient.map(|coefficient| coefficient.to_string()),
        line.dielectric.as_ref().map(ToString::to_string),
        line.ageing.map(|ageing| format!("ageing {}", ageing_in_words(ageing))),
        measured_notation(lot).map(|value| format!("measured {value}")),
    ];
    let words: Vec<String> = words.into_iter().flatten().collect();
    (!words.is_empty()).then(|| words.join(", "))
}

/// The slots of a row that hold a ceramic of class 2 and reach the response, as section and slot.
pub(super) fn class_2(problem: &Problem, silent: &[Vec<String>], row: &Row) -> Vec<[String; 2]> {
    let mut found = Vec::new();
    let boards = row.boards.iter().map(|board| board.sections.as_slice());
    for sections in boards.chain([row.sections.as_slice()]) {
        for (index, (section, chosen)) in problem.sections.iter().zip(sections).enumerate() {
            let concerned = |part: &&Part| {
                part.pieces.iter().any(|&piece| problem.supply.lot_of(piece).is_some_and(Lot::is_class_2))
            };
            for part in chosen.parts.iter().filter(concerned) {
                let place = [section.target.name.clone(), section.circuit.slots[part.slot].name.clone()];
                let is_silent = silent.get(index).is_some_and(|slots| slots.contains(&place[1]));
                if !is_silent && !found.contains(&place) {
                    found.push(place);
                }
            }
        }
    }
    found
}

/// The boards of a row that differ.
pub(super) fn boards(
    problem: &Problem,
    row: &Row,
    record: impl Fn(&SectionProblem, &Chosen) -> ChosenRecord,
) -> Vec<BoardRecord> {
    let board = |(board, built): (usize, &BuiltBoard)| BoardRecord {
        board,
        error: Some(built.error).filter(|error| error.is_finite()),
        sections: problem.sections.iter().zip(&built.sections).map(|(s, c)| record(s, c)).collect(),
    };
    (1..).zip(&row.boards).map(board).collect()
}

/// A cost in millionths as money; `-` where it is not known.
pub(super) fn money(millionths: Option<u64>) -> String {
    millionths.map_or("-".to_string(), |millionths| Price { millionths, currency: None }.to_string())
}

/// The measured parts that stand in the slots of a section, such as `C1 M07`; those without a name by their value.
pub(super) fn placed(chosen: &ChosenRecord) -> String {
    let name = |piece: &PieceRecord, kind: Kind| {
        piece.id.clone().unwrap_or_else(|| super::numbers::rounded_part(piece.value, kind))
    };
    let words = chosen.parts.iter().filter_map(|part| {
        let measured = part.made_of.iter().filter(|piece| piece.measured.is_some());
        let names: Vec<String> = measured.map(|piece| name(piece, part.kind)).collect();
        (!names.is_empty()).then(|| format!("{} {}", part.slot, names.join("+")))
    });
    words.collect::<Vec<_>>().join(", ")
}

impl RowRecord {
    /// Whether the boards of this row differ in more than their measured parts.
    pub(super) fn boards_differ_in_values(&self) -> bool {
        let plain = |board: &BoardRecord| -> Vec<Option<String>> {
            let parts = board.sections.iter().flat_map(|section| &section.parts);
            parts
                .filter(|part| part.made_of.iter().all(|p| p.measured.is_none()))
                .map(|p| p.notation.clone())
                .collect()
        };
        self.boards.windows(2).any(|two| plain(&two[0]) != plain(&two[1]))
    }
}
