//! An independent recheck of every set that is to be reported.
//!
//! The search judges sets by transfer-function coefficients from symbolic analysis. Here the same netlist is solved
//! numerically, frequency by frequency, and parts, counts and order are checked against the job itself. A set that
//! fails is a fault of the program and must not be shown.

use std::collections::{BTreeMap, BTreeSet};

use num_complex::Complex64;
use thiserror::Error;

use crate::circuit::{response, solve};
use crate::parts::Choice;
use crate::search::{
    Chosen, ErrorKey, Joint, Outcome, Part, Problem, Rank, Replacements, Row, SectionProblem, SwapProblem,
};
use crate::target::{Measure, Section, Yardstick};
use crate::units::Kind;

/// What does not hold of an outcome.
#[derive(Clone, Debug, PartialEq, Error)]
pub enum VerifyError {
    /// A slot without its part, or a part that is not on its slot's shelf.
    #[error("row {row}, section {section}: slot {slot} does not hold a part from its shelf")]
    Part {
        /// Row, counted from 1.
        row: usize,
        /// Section name.
        section: String,
        /// Slot name.
        slot: String,
    },
    /// Slots that must be equal are not.
    #[error("row {row}, section {section}: slots that must be equal carry different values")]
    Tie {
        /// Row, counted from 1.
        row: usize,
        /// Section name.
        section: String,
    },
    /// The response of the netlist is not what the search said.
    #[error("row {row}: the netlist's error is {found}, the search said {claimed}")]
    Response {
        /// Row, counted from 1.
        row: usize,
        /// What the numeric solve gives.
        found: f64,
        /// What the search said.
        claimed: f64,
    },
    /// Part numbers or placed parts are miscounted.
    #[error("row {row}: {found} {what} counted, the search said {claimed}")]
    Count {
        /// Row, counted from 1.
        row: usize,
        /// What was counted.
        what: &'static str,
        /// The recount.
        found: usize,
        /// What the search said.
        claimed: usize,
    },
    /// A limit of the job is not kept.
    #[error("row {row} does not keep the job's limit on {what}")]
    Limit {
        /// Row, counted from 1.
        row: usize,
        /// What is limited.
        what: &'static str,
    },
    /// Rows out of order, or one that another beats in everything.
    #[error("row {row} does not belong where it stands: {why}")]
    Order {
        /// Row, counted from 1.
        row: usize,
        /// Why.
        why: &'static str,
    },
}

/// Rechecks every row of an outcome.
///
/// # Errors
/// The first thing that does not hold.
pub fn verify(problem: &Problem, outcome: &Outcome) -> Result<(), VerifyError> {
    let targets: Vec<Section> = problem.sections.iter().map(|s| s.target.clone()).collect();
    let yardstick = Yardstick::new(&targets, problem.criterion);
    for (index, row) in outcome.rows.iter().enumerate() {
        check_row(problem, &yardstick, index + 1, row)?;
    }
    check_order(problem.goals.rank, outcome)
}

fn check_row(problem: &Problem, yardstick: &Yardstick, number: usize, row: &Row) -> Result<(), VerifyError> {
    let alike = [row.sections.as_slice()];
    let differing: Vec<&[Chosen]> = row.boards.iter().map(|board| board.sections.as_slice()).collect();
    let boards = if differing.is_empty() { &alike[..] } else { &differing };
    let mut counted = Counted::default();
    let mut measured = BTreeSet::new();
    for sections in boards {
        counted = counted.largest(&check_board(problem, number, sections, &mut measured)?);
    }
    let claimed =
        Counted { part_numbers: row.part_numbers, placed_parts: Some(row.placed_parts), to_buy: row.to_buy };
    for (what, found, claimed) in [
        ("part numbers", counted.part_numbers, claimed.part_numbers),
        ("placed parts", counted.placed_parts, claimed.placed_parts),
        ("part numbers to buy", counted.to_buy, claimed.to_buy.or(Some(0))),
    ] {
        let [found, claimed] = [found, claimed].map(|count| count.unwrap_or(0));
        if found != claimed {
            return Err(VerifyError::Count { row: number, what, found, claimed });
        }
    }
    if problem.goals.max_part_numbers.zip(counted.part_numbers).is_some_and(|(most, count)| count > most) {
        return Err(VerifyError::Limit { row: number, what: "part numbers" });
    }
    if counted.to_buy.is_some_and(|count| count > problem.supply.buying.most()) {
        return Err(VerifyError::Limit { row: number, what: "part numbers to buy" });
    }
    if let Some((low, high)) = problem.goals.impedance {
        // The level is a rounded mean; the range was compared with the same mean.
        let outside = |z: f64| z < low * (1.0 - 1e-9) || z > high * (1.0 + 1e-9);
        if boards.iter().any(|sections| sections.iter().any(|chosen| chosen.impedance.is_some_and(outside))) {
            return Err(VerifyError::Limit { row: number, what: "impedance" });
        }
    }
    let offset = row.deviation.offset.unwrap_or(1.0);
    let mut claims = vec![(row.sections.as_slice(), row.deviation.error, Some(offset))];
    claims.extend(row.boards.iter().map(|board| (board.sections.as_slice(), board.error, row.deviation.offset)));
    for (sections, claimed, offset) in claims {
        // The offset of a board that differs is its own: only the worst board's is known here.
        let Some(offset) = offset.or((!problem.criterion.ignore_gain).then_some(1.0)) else { continue };
        if problem.criterion.ignore_gain && sections != row.sections.as_slice() {
            continue;
        }
        let found = error(problem, yardstick, sections, offset);
        // Where Q is high both routes lose digits in the same proportion as the response itself is sensitive.
        const AGREEMENT: f64 = 1e-6;
        let agrees = (found - claimed).abs() <= AGREEMENT * (1.0 + claimed.abs());
        // The row's error is that of its worst board.
        if !agrees || found > row.deviation.error + AGREEMENT * (1.0 + claimed.abs()) {
            return Err(VerifyError::Response { row: number, found, claimed });
        }
    }
    for (section, chosen) in boards.iter().flat_map(|sections| problem.sections.iter().zip(*sections)) {
        if let Some(part) = chosen.parts.iter().find(|part| !is_made_of_its_pieces(part)) {
            let slot = section.circuit.slots[part.slot].name.clone();
            return Err(VerifyError::Part { row: number, section: section.target.name.clone(), slot });
        }
    }
    Ok(())
}

/// What a board takes.
#[derive(Clone, Copy, Debug, Default)]
struct Counted {
    part_numbers: Option<usize>,
    placed_parts: Option<usize>,
    to_buy: Option<usize>,
}

impl Counted {
    fn largest(&self, other: &Counted) -> Counted {
        Counted {
            part_numbers: self.part_numbers.max(other.part_numbers),
            placed_parts: self.placed_parts.max(other.placed_parts),
            to_buy: self.to_buy.max(other.to_buy),
        }
    }
}

/// Checks the parts of one board against the shelves, the ties and the stock, and counts them.
fn check_board(
    problem: &Problem,
    number: usize,
    sections: &[Chosen],
    measured: &mut BTreeSet<Choice>,
) -> Result<Counted, VerifyError> {
    let supply = &problem.supply;
    let mut used: BTreeMap<(Kind, Choice), u64> = BTreeMap::new();
    for (section, chosen) in problem.sections.iter().zip(sections) {
        let name = || section.target.name.clone();
        let mut pairs = 0;
        for slot in section.output().filled(&section.circuit) {
            let fits = |part: &&Part| {
                let pair = matches!((part.pieces.len(), part.joint), (2, Some(joint))
                    if section.pairs.joints.get(slot).is_some_and(|allowed| allowed.contains(&joint)));
                let single = part.pieces.len() == 1 && part.value == Some(part.pieces[0].value);
                (pair || single) && part.pieces.iter().all(|piece| section.shelves[slot].contains(*piece))
            };
            let Some(part) = chosen.parts.iter().find(|p| p.slot == slot).filter(fits) else {
                let slot = section.circuit.slots[slot].name.clone();
                return Err(VerifyError::Part { row: number, section: name(), slot });
            };
            pairs += usize::from(part.pieces.len() == 2);
            part.pieces.iter().for_each(|&piece| *used.entry((part.kind, piece)).or_default() += 1);
        }
        if pairs > section.pairs.most {
            return Err(VerifyError::Limit { row: number, what: "pairs" });
        }
        let of = |slot: &usize| chosen.parts.iter().find(|p| p.slot == *slot).map(|part| (&part.pieces, part.joint));
        if section.equal.iter().any(|group| group.windows(2).any(|two| of(&two[0]) != of(&two[1]))) {
            return Err(VerifyError::Tie { row: number, section: name() });
        }
    }
    let (mut numbers, mut bought) = (BTreeSet::new(), BTreeSet::new());
    for (&(kind, choice), &count) in &used {
        let lot = supply.lot_of(choice);
        let there = lot.map_or(u64::MAX, |lot| lot.available.unwrap_or(u64::MAX));
        // Without a list everything is there; with one, what is in no line must be bought.
        let missing = match lot {
            None => supply.has_stock(),
            Some(lot) if lot.measured.is_some() => {
                if count > 1 || there == 0 || !measured.insert(choice) {
                    return Err(VerifyError::Limit { row: number, what: "measured parts, each there once" });
                }
                false
            }
            Some(_) => count * supply.boards + supply.spares > there,
        };
        let part_number = supply.part_number(kind, choice);
        numbers.insert(part_number);
        if missing {
            if !supply.buys(kind) {
                return Err(VerifyError::Limit { row: number, what: "the stock" });
            }
            bought.insert(part_number);
        }
    }
    Ok(Counted {
        part_numbers: Some(numbers.len()),
        placed_parts: Some(used.values().sum::<u64>() as usize),
        to_buy: Some(bought.len()),
    })
}

/// Whether the value of a slot is that of its parts together: resistors add in series, capacitors in parallel, otherwise the
/// reciprocals do.
fn is_made_of_its_pieces(part: &Part) -> bool {
    let values: Vec<f64> = part.pieces.iter().map(|piece| piece.value.to_f64()).collect();
    let adds = matches!(
        (part.kind, part.joint),
        (_, None) | (Kind::Resistor, Some(Joint::Series)) | (Kind::Capacitor, Some(Joint::Parallel))
    );
    let whole = match adds {
        true => values.iter().sum::<f64>(),
        false => 1.0 / values.iter().map(|value| 1.0 / value).sum::<f64>(),
    };
    (whole / part.ideal - 1.0).abs() < 1e-12
}

/// The response of a chosen section's netlist.
fn numeric(problem: &Problem, index: usize, chosen: &Chosen, w: f64) -> Complex64 {
    let section = &problem.sections[index];
    let mut values = vec![f64::NAN; section.circuit.slots.len()];
    chosen.parts.iter().for_each(|part| values[part.slot] = part.ideal);
    response(&section.circuit, section.output(), &values, w).unwrap_or(Complex64::new(f64::NAN, f64::NAN))
}

/// Rechecks every replacement: its parts against the shelves, and both its errors by solving the netlist numerically.
///
/// # Errors
/// The first thing that does not hold.
pub fn verify_replacements(problem: &SwapProblem, found: &Replacements) -> Result<(), VerifyError> {
    let target = &problem.built.target;
    let whole = Yardstick::new(std::slice::from_ref(target), problem.criterion);
    let criterion = crate::target::Criterion { band: Some(whole.band()), ..problem.criterion };
    let against = |target: &Section| Problem {
        title: String::new(),
        sections: vec![SectionProblem { target: target.clone(), ..problem.built.clone() }],
        criterion,
        goals: Default::default(),
        supply: problem.supply.clone(),
    };
    let (built, wanted) = (against(&found.built_as_target), against(target));
    for (row, replacement) in (1..).zip(&found.rows) {
        let sections = std::slice::from_ref(&replacement.chosen);
        for change in &replacement.changes {
            if !problem.open[change.slot].contains(change.to) {
                let slot = problem.built.circuit.slots[change.slot].name.clone();
                return Err(VerifyError::Part { row, section: target.name.clone(), slot });
            }
        }
        if replacement.others > problem.others {
            return Err(VerifyError::Limit { row, what: "slots that may change" });
        }
        if problem.criterion.ignore_gain {
            continue;
        }
        for (problem, claimed) in [(&built, replacement.against_built), (&wanted, replacement.against_target)] {
            let targets = [problem.sections[0].target.clone()];
            let found = error(problem, &Yardstick::new(&targets, criterion), sections, 1.0);
            const AGREEMENT: f64 = 1e-6;
            if (found - claimed).abs() > AGREEMENT * (1.0 + claimed.abs()) || found.is_nan() {
                return Err(VerifyError::Response { row, found, claimed });
            }
        }
    }
    Ok(())
}

/// The error of a board from the netlist alone, by the definitions of [`Measure`], with a flat gain factor taken in.
fn error(problem: &Problem, yardstick: &Yardstick, sections: &[Chosen], offset: f64) -> f64 {
    let cascade = |w: f64| -> Complex64 {
        sections.iter().enumerate().map(|(k, chosen)| numeric(problem, k, chosen, w)).product()
    };
    let ideal = |w: f64| -> Complex64 { problem.sections.iter().map(|s| s.target.ideal().value(w)).product() };
    let largest = yardstick.frequencies().map(|w| ideal(w).norm()).fold(0.0, f64::max);
    let floor = largest * 10f64.powf(-problem.criterion.floor_db / 20.0);
    let at = |w: f64| {
        let (h, wanted) = (cascade(w) * offset, ideal(w));
        match problem.criterion.measure {
            Measure::Decibel => 20.0 * (h.norm().max(floor) / wanted.norm().max(floor)).log10().abs(),
            Measure::Vector => (h - wanted).norm() / wanted.norm().max(floor),
            Measure::Weighted(_) => 0.0,
        }
    };
    if let Measure::Weighted(weights) = problem.criterion.measure {
        let gain = if problem.criterion.ignore_gain { 0.0 } else { weights.gain };
        let weights = [weights.f0, weights.q, gain, weights.fz];
        let section = |(k, section): (usize, &crate::search::SectionProblem)| {
            let misses =
                fitted(problem, k, &sections[k]).map(|h| section.target.misses(&section.target.figures_of(&h)));
            misses.map_or(f64::NAN, |misses| {
                let terms = misses.into_iter().zip(weights).filter(|(_, weight)| *weight > 0.0);
                terms.filter_map(|(miss, weight)| Some(miss? * weight)).sum::<f64>()
            })
        };
        return problem
            .sections
            .iter()
            .enumerate()
            .map(section)
            .fold(0.0, |worst, e| if e > worst || e.is_nan() { e } else { worst });
    }
    yardstick.frequencies().map(at).fold(0.0, |worst, e| if e > worst || e.is_nan() { e } else { worst })
}

/// The transfer function of a chosen section, fitted to the numeric response: with D monic, N(jω) = H(jω) D(jω) is linear
/// in the coefficients, and three frequencies determine the five (two frequencies the three of order one).
fn fitted(problem: &Problem, index: usize, chosen: &Chosen) -> Option<crate::target::Biquad> {
    let order = problem.sections[index].target.shape.order();
    let w0 = chosen.achieved.w0;
    let unknowns = 2 * order + 1;
    let mut rows: Vec<Vec<f64>> = Vec::new();
    for ratio in [0.5, 1.0, 2.0].iter().take(order + 1) {
        let h = numeric(problem, index, chosen, ratio * w0);
        let s = |k: usize| Complex64::new(0.0, *ratio).powu(k as u32);
        let mut line: Vec<Complex64> = (0..=order).map(s).collect();
        line.extend((0..order).map(|k| -h * s(k)));
        line.push(h * s(order));
        rows.push(line.iter().map(|z| z.re).collect());
        rows.push(line.iter().map(|z| z.im).collect());
    }
    let x = least_squares(&rows, unknowns)?;
    let mut fit = crate::target::Biquad { num: [0.0; 3], den: [0.0; 3] };
    for k in 0..=order {
        // The fit is in ω/w0.
        fit.num[k] = x[k] / w0.powi(k as i32);
        fit.den[k] = if k < order { x[order + 1 + k] } else { 1.0 } / w0.powi(k as i32);
    }
    Some(fit)
}

/// Least squares by the normal equations, for a few well-scaled unknowns; each row ends in its right side.
fn least_squares(rows: &[Vec<f64>], unknowns: usize) -> Option<Vec<f64>> {
    let normal = |i: usize, j: usize| Complex64::from(rows.iter().map(|r| r[i] * r[j]).sum::<f64>());
    let system = (0..unknowns).map(|i| (0..=unknowns).map(|j| normal(i, j)).collect()).collect();
    Some(solve(system)?.into_iter().map(|z| z.re).collect())
}

fn check_order(rank: Rank, outcome: &Outcome) -> Result<(), VerifyError> {
    let error = |row: &Row| (ErrorKey::new(row.deviation.error), row.part_numbers, row.to_buy, row.placed_parts);
    let first = |row: &Row| match rank {
        Rank::Error => None,
        Rank::PartNumbers => row.part_numbers.map(|count| count as u64),
        Rank::ToBuy => row.to_buy.map(|count| count as u64),
        Rank::Cost => row.cost,
        Rank::PlacedParts => Some(row.placed_parts as u64),
    };
    let rank_of = |row: &Row| (first(row), error(row));
    for (index, row) in outcome.rows.iter().enumerate() {
        let number = index + 1;
        if index > 0 && rank_of(&outcome.rows[index - 1]) > rank_of(row) {
            return Err(VerifyError::Order { row: number, why: "the row before it is worse" });
        }
        let takes_no_more = |one: &Row, other: &Row| {
            error(one).0 <= error(other).0
                && one.part_numbers <= other.part_numbers
                && one.placed_parts <= other.placed_parts
                && one.to_buy <= other.to_buy
                && (rank != Rank::Cost || one.cost <= other.cost)
        };
        let mut others = outcome.rows.iter().enumerate().filter(|(i, _)| *i != index);
        // Of rows that are equal in everything the first counts.
        let beaten = others.any(|(i, other)| takes_no_more(other, row) && (i < index || !takes_no_more(row, other)));
        if beaten && !row.alternative {
            return Err(VerifyError::Order { row: number, why: "another row beats it in everything" });
        }
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use std::sync::Arc;

    use super::*;
    use crate::circuit::find;
    use crate::parts::{Series, Shelf, Supply};
    use crate::search::{Goals, Unwatched, shortlist};
    use crate::target::{Criterion, Shape, Weights};
    use crate::units::{Value, parse_part};

    fn problem(measure: Measure) -> Problem {
        let shelf = |kind, series: Series, from: &str, to: &str| {
            let end = |text| parse_part(text, kind).unwrap();
            Shelf::new(kind, series.values_between(end(from), end(to))).unwrap()
        };
        let target = Section::new("A", Shape::LowPass, 6283.0, Some(0.9), 2.0, None).unwrap();
        let resistors = shelf(Kind::Resistor, Series::E24, "1k", "100k");
        let capacitors = shelf(Kind::Capacitor, Series::E6, "1n", "100n");
        let circuit = Arc::new(find("tow-thomas").unwrap().clone());
        let section = SectionProblem::new(target, circuit, "low-pass", &resistors, &capacitors).unwrap();
        let criterion = Criterion { measure, ..Criterion::default() };
        Problem {
            title: String::new(),
            sections: vec![section],
            criterion,
            goals: Goals::default(),
            supply: Supply::default(),
        }
    }

    #[test]
    fn sound_outcomes_pass_and_tampered_ones_do_not() {
        for measure in
            [Measure::Decibel, Measure::Vector, Measure::Weighted(Weights { f0: 1.0, q: 0.5, gain: 0.2, fz: 0.0 })]
        {
            let problem = problem(measure);
            let good = shortlist(&problem, &Unwatched);
            assert!(good.rows.len() > 1, "{measure:?}");
            verify(&problem, &good).unwrap();
            let tampered = |change: &dyn Fn(&mut Outcome)| {
                let mut bad = good.clone();
                change(&mut bad);
                verify(&problem, &bad).unwrap_err().to_string()
            };
            let message = tampered(&|o| o.rows[0].deviation.error *= 1.01);
            assert!(message.starts_with("row 1: the netlist's error is"), "{message}");
            let message = tampered(&|o| o.rows[0].sections[0].parts[0].ideal *= 1.001);
            assert!(message.starts_with("row 1: the netlist's error is"), "{message}");
            let message = tampered(&|o| o.rows[0].sections[0].parts[0].value = Value::new(10001, 0).ok());
            assert_eq!(message, "row 1, section A: slot RG does not hold a part from its shelf");
            let message = tampered(&|o| o.rows[1].part_numbers = Some(1));
            assert!(message.contains("part numbers counted, the search said 1"), "{message}");
            let message = tampered(&|o| o.rows.reverse());
            assert!(message.ends_with("the row before it is worse"), "{message}");
            let message = tampered(&|o| o.rows.insert(0, o.rows[0].clone()));
            assert!(message.ends_with("another row beats it in everything"), "{message}");
        }
    }
}
