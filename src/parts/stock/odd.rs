//! What is odd about the lines of a stock file, taken one by one and together.

use std::collections::HashMap;

use super::columns::{Column, Layout};
use super::{AtLine, Dielectric, StockLine, StockOddity};
use crate::units::Kind;

/// All oddities of the lines, not in order.
pub(super) fn of(lines: &[StockLine], layout: &Layout, header_line: usize) -> Vec<AtLine<StockOddity>> {
    let of_file = about_file(lines, layout).into_iter().map(|what| (header_line, None, what));
    let of_lines = lines.iter().flat_map(|line| {
        let oddities = about_line(line, layout);
        oddities.into_iter().map(|(column, what)| (line.line, Some(column), what))
    });
    let all = of_file.chain(of_lines).chain(about_pairs(lines));
    let title = |column: Option<Column>| layout.title(column?).map(str::to_owned);
    all.map(|(line, column, what)| AtLine { line, column: title(column), what }).collect()
}

/// Whether a line needs a tolerance and has none; a measured value needs none.
fn lacks_tolerance(line: &StockLine) -> bool {
    line.kind == Kind::Capacitor && line.tolerance.is_none() && line.measured.is_none()
}

fn about_file(lines: &[StockLine], layout: &Layout) -> Vec<StockOddity> {
    let lacks = |column| layout.title(column).is_none();
    let checks = [
        (lines.is_empty(), StockOddity::NoParts),
        (
            lacks(Column::Quantity) && lines.iter().any(|line| line.available().is_none()),
            StockOddity::NoQuantityColumn,
        ),
        (lacks(Column::Tolerance) && lines.iter().any(lacks_tolerance), StockOddity::NoToleranceColumn),
    ];
    checks.into_iter().filter(|(holds, _)| *holds).map(|(_, what)| what).collect()
}

fn about_line(line: &StockLine, layout: &Layout) -> Vec<(Column, StockOddity)> {
    let has = |column| layout.title(column).is_some();
    let mut oddities = Vec::new();
    if has(Column::Quantity) && line.available().is_none() {
        oddities.push((Column::Quantity, StockOddity::QuantityMissing));
    }
    if has(Column::Tolerance) && lacks_tolerance(line) {
        oddities.push((Column::Tolerance, StockOddity::ToleranceMissing));
    }
    match (&line.dielectric, line.kind) {
        (Some(dielectric), Kind::Resistor) => {
            oddities.push((Column::Dielectric, StockOddity::DielectricOfResistor(dielectric.to_string())));
        }
        (Some(Dielectric::Other(name)), Kind::Capacitor) => {
            oddities.push((Column::Dielectric, StockOddity::UnknownDielectric(name.clone())));
        }
        _ => {}
    }
    if let Some(measured) = line.measured {
        if let Some(quantity) = line.quantity.filter(|quantity| *quantity > 1) {
            oddities.push((Column::Quantity, StockOddity::MeasuredSeveral(quantity)));
        }
        if line.id.is_none() {
            oddities.push((Column::PartId, StockOddity::MeasuredWithoutId));
        }
        let &StockLine { kind, value, tolerance, .. } = line;
        if is_off(measured.to_f64(), line) {
            let what = StockOddity::MeasuredOff { kind, value, measured, tolerance };
            oddities.push((Column::MeasuredValue, what));
        }
    }
    oddities
}

/// Whether a measured value is beyond the tolerance, or wrong by more than a factor of two where no tolerance is
/// stated (common practice: no part is that bad, so the unit or the line is wrong).
fn is_off(measured: f64, line: &StockLine) -> bool {
    let nominal = line.value.to_f64();
    let (low, high) = line.tolerance.map_or((nominal / 2.0, nominal * 2.0), |tolerance| tolerance.limits(line.value));
    // A value just at the limit is good; the limits carry a rounding.
    let rounding = 1e-12 * nominal;
    measured < low - rounding || measured > high + rounding
}

/// What is odd about a line beside an earlier one.
fn about_pairs(lines: &[StockLine]) -> Vec<(usize, Option<Column>, StockOddity)> {
    let mut oddities = Vec::new();
    let mut contents = HashMap::new();
    let mut measured_ids = HashMap::new();
    let mut first_price = None;
    for line in lines {
        let number = line.line;
        if let Some(id) = line.id.as_ref().filter(|_| line.measured.is_some()) {
            let first = *measured_ids.entry(id).or_insert(number);
            if first != number {
                oddities.push((number, Some(Column::PartId), StockOddity::SameId { id: id.clone(), first }));
            }
        }
        if let Some(currency) = line.price.as_ref().and_then(|price| price.currency.as_ref()) {
            let (first, first_currency) = *first_price.get_or_insert((number, currency));
            if currency != first_currency {
                let (currency, first_currency) = (currency.clone(), first_currency.clone());
                let what = StockOddity::OtherCurrency { currency, first, first_currency };
                oddities.push((number, Some(Column::Price), what));
            }
        }
        let first = *contents.entry(StockLine { line: 0, ..line.clone() }).or_insert(number);
        if first != number {
            oddities.push((number, None, StockOddity::Duplicate { first }));
        }
    }
    oddities
}
