//! The record as a table for people: plain text without colour.

use std::io::{self, Write};

use super::detail::detail;
use super::drawn::{SupplyRecord, money};
use super::layout::{Column, grid, paragraph, printable, unbroken};
use super::numbers::{count, decimal_column, error_in_words, level, rounded_part, short, span_of_time};
use super::record::{ChosenRecord, MeasureRecord, PartRecord, Record, RowRecord, SectionSearch, TargetRecord};
use super::yields;

/// What the values do not hold for.
const CAUTION: &str = "Values are computed for ideal parts and ideal op-amps: tolerances, op-amp bandwidth and the layout come \
                       on top. Measure the build.";

/// The same where tolerances are counted.
const CAUTION_WITH_YIELDS: &str = "Values are computed for ideal parts and ideal op-amps, yield and spread for the tolerances \
                                   above: temperature, ageing, op-amp bandwidth and the layout come on top. Measure the build.";

/// Writes the record as text of at most `width` characters to the line (40 at least; a name that is longer is not
/// broken).
///
/// # Errors
/// Those of the writer.
pub fn write_table(record: &Record, width: usize, out: &mut dyn Write) -> io::Result<()> {
    let blocks = [
        if record.title.is_empty() { String::new() } else { paragraph("", &record.title, width) },
        searched(record, width),
        outcome(record, width),
        figures(record, &mark_in_words(record), width),
        values(record, width),
        detail(record, width),
        paragraph("", if record.yields.is_some() { CAUTION_WITH_YIELDS } else { CAUTION }, width),
    ];
    let filled: Vec<String> = blocks.into_iter().filter(|block| !block.is_empty()).collect();
    out.write_all(filled.join("\n").as_bytes())
}

/// What was searched, and what that proves.
pub(super) fn searched(record: &Record, width: usize) -> String {
    let mut text = String::new();
    for (section, search) in record.sections.iter().zip(&record.search.sections) {
        let target = target_in_words(&section.target);
        let line = format!("{target}; circuit {}, output {}", section.circuit, section.output);
        text += &paragraph(&format!("{}: ", section.name), &line, width);
        let indent = "   ";
        for shelf in &section.shelves {
            let slots = shelf.slots.join(" ");
            let line = match (shelf.values, &shelf.range) {
                (1, [value, _]) => format!("{slots}: {value} only"),
                (values, [from, to]) => format!("{slots}: {values} {} values, {from} to {to}", shelf.kind.name()),
            };
            let line = match shelf.choices > shelf.values {
                true => format!("{line}, {} choices", shelf.choices),
                false => line,
            };
            text += &paragraph(indent, &line, width);
        }
        for group in &section.equal {
            text += &paragraph(indent, &format!("{} carry the same value", group.join(" and ")), width);
        }
        for line in search_in_words(search) {
            text += &paragraph(indent, &line, width);
        }
    }
    if let Some(stock) = &record.stock {
        text += &paragraph("Stock:  ", &stock_in_words(stock), width);
    }
    let search = &record.search;
    let total = format!(
        "{} sets evaluated, {} nodes visited, {}",
        count(search.sets),
        count(search.nodes),
        span_of_time(search.seconds)
    );
    text += &paragraph("Search: ", &total, width);
    if let Some(together) = &search.together {
        text += &paragraph("Board:  ", &format!("all sections together, {}.", together.statement), width);
        if let Some(fewest) = &together.fewest {
            text += &paragraph("        ", &format!("{fewest}."), width);
        }
    } else if record.sections.len() > 1 {
        let caution = "The sections were chosen one at a time and only then combined, part numbers counted over the whole \
                       board: a better board may exist.";
        text += &paragraph("        ", caution, width);
    }
    if search.thinned && search.together.as_ref().is_none_or(|together| together.stop.is_some()) {
        let caution = "There were too many combinations of single sections: some of their sets were left out.";
        text += &paragraph("        ", caution, width);
    }
    if let Some(reason) = &search.reason {
        text += &paragraph("        ", &format!("Stopped: {reason}. What is not proved is marked ?."), width);
    }
    text += &paragraph("Error:  ", &measure_in_words(&record.measure), width);
    text + &yields::conditions(record, width)
}

fn stock_in_words(stock: &SupplyRecord) -> String {
    let plural = |number: u64, what: &str| match number {
        1 => format!("1 {what}"),
        _ => format!("{} {what}s", count(number)),
    };
    let mut words = format!("{} of parts for {}", plural(stock.lots as u64, "sort"), plural(stock.boards, "board"));
    if stock.spares > 0 {
        words += &format!(", {} of each part used left over", stock.spares);
    }
    let only = stock.buying_only.map_or(String::new(), |kind| format!(", {}s only", kind.name()));
    words += &match stock.most_to_buy {
        Some(0) => "; nothing is bought".to_string(),
        Some(most) => format!("; at most {} bought{only}", plural(most as u64, "part number")),
        None => format!("; what is missing is bought{only}"),
    };
    if stock.lines_left_out > 0 {
        words += &format!("; {} left out: roundwell stock shows why", plural(stock.lines_left_out as u64, "line"));
    }
    words
}

pub(super) fn target_in_words(target: &TargetRecord) -> String {
    let mut words = format!("{}, {}", target.shape, unbroken(&format!("f0 {}", level(target.f0_hz, 6, "Hz"))));
    if let Some(q) = target.q {
        words += &format!(", {}", unbroken(&format!("Q {}", short(q, 6))));
    }
    words += &format!(", {}", unbroken(&format!("gain {}", short(target.gain, 6))));
    if let Some(fz) = target.fz_hz {
        words += &format!(", {}", unbroken(&format!("fz {}", level(fz, 6, "Hz"))));
    }
    words
}

fn search_in_words(search: &SectionSearch) -> Vec<String> {
    let mut lines = Vec::new();
    if !search.silent.is_empty() {
        lines.push(format!("without effect on the response: {}", search.silent.join(", ")));
    }
    if !search.interchangeable.is_empty() {
        let pairs: Vec<String> = search.interchangeable.iter().map(|pair| unbroken(pair)).collect();
        lines.push(format!("interchangeable, listed once: {}", pairs.join(", ")));
    }
    lines.extend(search.combinations.map(|combinations| match combinations {
        few if few < 1e9 => format!("{} combinations", count(few as u64)),
        many => format!("{many:.1e} combinations"),
    }));
    lines.push(search.statement.clone());
    lines
}

pub(super) fn measure_in_words(measure: &MeasureRecord) -> String {
    let [low, high] = measure.band_hz.map(|hertz| unbroken(&level(hertz, 4, "Hz")));
    let mut words = measure.definition.to_string();
    if let Some([f0, q, gain, fz]) = measure.weights {
        return format!("{words}: weights f0 {f0}, Q {q}, gain {gain}, fz {fz}; response error {low} to {high}");
    }
    words += &format!(" {low} to {high}; floor {} dB under the largest |H*|", measure.floor_db);
    if measure.ignore_gain {
        words += "; the best flat gain offset is taken out";
    }
    words
}

/// What was found, in a sentence or two, where it is less than what was wanted.
pub(super) fn outcome(record: &Record, width: usize) -> String {
    let mut text = String::new();
    let [limit, wanted] = [record.wanted.error_limit, record.wanted.wanted_error]
        .map(|error| unbroken(&error_in_words(record.measure.unit, error)));
    if let (true, Some(fewest)) = (record.shortlist.is_empty(), record.search.fewest_found) {
        let most = record.wanted.max_part_numbers.map_or(String::new(), |most| format!(" of {most}"));
        let line = format!("Nothing found keeps the limit{most} on part numbers: the fewest found are {fewest}.");
        text += &paragraph("", &line, width);
    } else if record.shortlist.is_empty() {
        let line = match record.search.reason {
            Some(_) => "Nothing was found before the search ended.",
            None if record.stock.is_some() => {
                "No set for which the stock suffices gives this response in this circuit."
            }
            None => "No set exists on these shelves that gives this response in this circuit.",
        };
        text += &paragraph("", line, width);
    } else if !record.search.within_limit {
        let which = match (&record.search.reason, record.sections.len()) {
            (None, 1) => "the nearest that exist",
            (None, _) => "the nearest found, with the sections chosen one at a time",
            (Some(_), _) => "the nearest found",
        };
        let line = format!("Nothing lies within the error limit of {limit}: these are {which}.");
        text += &paragraph("", &line, width);
    } else if record.marked.is_none() {
        text += &paragraph("", &format!("No row lies within the wanted error of {wanted}."), width);
    }
    for search in &record.search.sections {
        for unmet in &search.unmet {
            text += &paragraph(&format!("{}: ", search.name), unmet, width);
        }
    }
    if (record.shortlist.is_empty() || !record.search.within_limit) && record.search.reason.is_none() {
        let advice = match &record.stock {
            None => "A wider or finer shelf, another circuit, or a larger error_limit may help.",
            Some(stock) if stock.most_to_buy == Some(0) => {
                "Leave to buy (--buy), pairs (--pairs), fewer boards or spares, another circuit, or a larger error_limit \
                 may help."
            }
            Some(_) => "Pairs (--pairs), fewer boards or spares, another circuit, or a larger error_limit may help.",
        };
        text += &paragraph("", advice, width);
    }
    text
}

/// The rows of the table: shortlist, then references.
pub(super) fn rows(record: &Record) -> impl Iterator<Item = &RowRecord> + Clone {
    record.shortlist.iter().chain(&record.references)
}

/// Rank and marks, or the name of a reference.
pub(super) fn label(record: &Record, row: &RowRecord) -> String {
    let Some(rank) = row.rank else { return row.name.unwrap_or_default().to_string() };
    let marks = [(row.rank == record.marked, '*'), (row.alternative, '+'), (is_open(record, row), '?')];
    let marks: String = marks.into_iter().filter(|(holds, _)| *holds).map(|(_, mark)| mark).collect();
    format!("{rank:>2} {marks}").trim_end().to_string()
}

/// Whether a row may be beaten because a search was stopped. Where sections were only searched one at a time, that holds for
/// all rows alike, and is said once.
fn is_open(record: &Record, row: &RowRecord) -> bool {
    let ended = record.search.together.as_ref().is_some_and(|together| together.stop.is_some());
    let front = record.search.together.is_some() && !row.alternative;
    (record.search.reason.is_some() || ended || front) && !row.proved
}

/// What the mark of a row means.
fn mark_in_words(record: &Record) -> String {
    let wanted = error_in_words(record.measure.unit, record.wanted.wanted_error);
    format!("fewest part numbers within the wanted error of {wanted}")
}

/// The table of figures by row, and what its marks mean.
pub(super) fn figures(record: &Record, mark: &str, width: usize) -> String {
    if rows(record).next().is_none() {
        return String::new();
    }
    let collect = |figure: &dyn Fn(&RowRecord) -> Option<f64>| rows(record).map(figure).collect::<Vec<_>>();
    let mut columns = vec![Column::left("row", rows(record).map(|row| label(record, row)).collect())];
    if record.measure.name != "decibel" {
        let errors = collect(&|row| row.ranking_error.map(|error| 100.0 * error));
        columns.push(Column::right(format!("{}\nerror %", record.measure.name), decimal_column(&errors)));
    }
    let counted = |number: Option<usize>| number.map_or("-".to_string(), |number| number.to_string());
    columns.push(Column::right("response\nerror dB", decimal_column(&collect(&|row| row.response_error_db))));
    let mut detail = Vec::new();
    if rows(record).any(|row| row.error_at_hz.is_some()) {
        detail.push(Column::right("largest\nat", rows(record).map(worst_frequency).collect()));
    }
    let misses = collect(&|row| row.worst_miss.map(|miss| 100.0 * miss));
    detail.push(Column::right("worst\nmiss %", decimal_column(&misses)));
    // Where there are yields, what is decided by stands together, and the detail comes last.
    if record.yields.is_none() {
        columns.append(&mut detail);
    }
    columns.extend([
        Column::right("part\nnumbers", rows(record).map(|row| counted(row.part_numbers)).collect()),
        Column::right("placed\nparts", rows(record).map(|row| row.placed_parts.to_string()).collect()),
    ]);
    columns.extend(yields::columns(record, rows(record)));
    if record.stock.as_ref().is_some_and(|stock| stock.most_to_buy != Some(0)) {
        columns.push(Column::right("to\nbuy", rows(record).map(|row| counted(row.to_buy)).collect()));
    }
    if rows(record).any(|row| row.cost.is_some()) {
        let currency = record.stock.as_ref().and_then(|stock| stock.currency.as_deref()).unwrap_or_default();
        let costs = rows(record).map(|row| money(row.cost_millionths)).collect();
        columns.push(Column::right(format!("cost\n{}", printable(currency)), costs));
    }
    columns.append(&mut detail);
    let mut text = grid(&columns, 1, width);
    if record.marked.is_some() {
        text += &paragraph("* ", mark, width);
    }
    if record.shortlist.iter().any(|row| row.alternative) {
        let line = match record.yields {
            None => "an alternative: another row is as good or better in every respect",
            Some(_) => "an alternative: another row is as good or better in every respect but the yield",
        };
        text += &paragraph("+ ", line, width);
    }
    if record.search.more_rows > 0 {
        let line = format!("{} more, not listed: ask for more rows", record.search.more_rows);
        text += &paragraph("  ", &line, width);
    }
    if record.shortlist.iter().any(|row| is_open(record, row)) {
        text += &paragraph("? ", "not proved: the search ended before better sets were ruled out", width);
    }
    text + &yields::remarks(record, width)
}

/// Where the error is largest; nowhere in particular where it is nothing but rounding.
fn worst_frequency(row: &RowRecord) -> String {
    let hertz = row.error_at_hz.filter(|_| row.ranking_error.is_some_and(|error| error > 1e-9));
    hertz.map_or("-".to_string(), |hertz| level(hertz, 3, "Hz"))
}

/// The values by slot, one table a section.
pub(super) fn values(record: &Record, width: usize) -> String {
    if rows(record).next().is_none() {
        return String::new();
    }
    let mut blocks = Vec::new();
    for (index, section) in record.sections.iter().enumerate() {
        let with_boards: Vec<(&RowRecord, &ChosenRecord)> =
            rows(record).filter_map(|row| Some((row, row.sections.get(index)?))).collect();
        let chosen: Vec<(String, &ChosenRecord)> =
            with_boards.iter().map(|(row, chosen)| (label(record, row), *chosen)).collect();
        let Some((_, first)) = chosen.first() else { continue };
        let short_label = |label: &String| match label.as_str() {
            "ideal parts" => "ideal".to_string(),
            "nearest value to each" => "nearest".to_string(),
            label => label.to_string(),
        };
        let mut columns = vec![Column::left("row", chosen.iter().map(|(label, _)| short_label(label)).collect())];
        for slot in first.parts.iter().map(|part| &part.slot) {
            let cell = |(row, chosen): &(&RowRecord, &ChosenRecord)| {
                let part = chosen.parts.iter().find(|part| part.slot == *slot)?;
                Some(if row.boards.is_empty() { notation(part) } else { label_of(part) })
            };
            let cells = with_boards.iter().map(|both| cell(both).unwrap_or_default()).collect();
            columns.push(Column::right(slot.clone(), cells));
        }
        let ohms = |value: f64| level(value, 2, "").replace(' ', "");
        let here = |chosen: &ChosenRecord| chosen.impedance_ohm.map_or("-".to_string(), ohms);
        columns.push(Column::right("level", chosen.iter().map(|(_, chosen)| here(chosen)).collect()));
        // Levels are decades apart, so two digits tell them apart.
        let others = |chosen: &ChosenRecord| {
            let names = chosen.levels_ohm.iter().map(|&level| ohms(level)).filter(|name| *name != here(chosen));
            names.collect::<Vec<_>>().join(" ")
        };
        let others: Vec<String> = chosen.iter().map(|(_, chosen)| others(chosen)).collect();
        if others.iter().any(|names| !names.is_empty()) {
            columns.push(Column::left("also at", others));
        }
        let title = format!("Values of section {} ({}), level in ohms:", section.name, section.circuit);
        blocks.push(paragraph("", &title, width) + &grid(&columns, 1, width));
    }
    let mut text = blocks.join("\n");
    if record.shortlist.iter().any(|row| !row.boards.is_empty()) {
        text += &paragraph("~ ", "measured parts, another on each board: the value is that on the label", width);
    }
    let mut concerned: Vec<(&[[String; 2]], Vec<String>)> = Vec::new();
    for row in record.shortlist.iter().filter(|row| !row.class_2.is_empty()) {
        let rank = row.rank.map_or(String::new(), |rank| rank.to_string());
        match concerned.iter_mut().find(|(slots, _)| *slots == row.class_2.as_slice()) {
            Some((_, ranks)) => ranks.push(rank),
            None => concerned.push((&row.class_2, vec![rank])),
        }
    }
    for (slots, ranks) in &concerned {
        let slots: Vec<String> = slots.iter().map(|[section, slot]| unbroken(&format!("{section} {slot}"))).collect();
        let line = format!(
            "ceramics of class 2 in {} of row {}: their value moves with temperature, voltage and age; \
             --bar-class-2 leaves them out",
            slots.join(", "),
            ranks.join(", ")
        );
        text += &paragraph("! ", &line, width);
    }
    text
}

/// The value as it is on the label, marked where boards have measured parts of their own.
fn label_of(part: &PartRecord) -> String {
    if part.made_of.iter().all(|piece| piece.measured.is_none()) {
        return notation(part);
    }
    let between = if part.joint == Some("parallel") { "||" } else { "+" };
    let labels: Vec<&str> = part.made_of.iter().map(|piece| piece.notation.as_str()).collect();
    format!("~{}", labels.join(between))
}

/// The value as it is printed on parts; one that cannot be bought is rounded to four digits.
pub(super) fn notation(part: &PartRecord) -> String {
    part.notation.clone().unwrap_or_else(|| rounded_part(part.value, part.kind))
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;
    use crate::report::sample;

    fn shown(record: &Record, width: usize) -> String {
        let mut bytes = Vec::new();
        write_table(record, width, &mut bytes).unwrap();
        String::from_utf8(bytes).unwrap()
    }

    #[test]
    fn one_section() {
        insta::assert_snapshot!(shown(&sample::record(), 80));
    }

    #[test]
    fn two_sections() {
        insta::assert_snapshot!(shown(&sample::two_sections(), 80));
    }

    #[test]
    fn a_search_that_was_stopped() {
        insta::assert_snapshot!(shown(&sample::stopped(), 80));
    }

    #[test]
    fn another_measure() {
        insta::assert_snapshot!(shown(&sample::vector(), 80));
    }

    #[test]
    fn nothing_at_all_is_said_plainly() {
        let mut record = sample::stopped();
        record.shortlist.clear();
        record.references.clear();
        let text = shown(&record, 80);
        assert!(
            text.contains("Nothing was found before the search ended") && text.contains("C1/C2 >= 4 Q^2"),
            "{text}"
        );
        assert!(!text.contains("row"), "{text}");
    }

    #[test]
    fn lines_keep_the_width_and_are_plain() {
        for record in [sample::record(), sample::two_sections(), sample::stopped(), sample::vector()] {
            for width in [40, 60, 80, 132] {
                let text = shown(&record, width);
                assert!(text.lines().all(|line| line.chars().count() <= width), "{width}\n{text}");
                assert!(!text.contains('\u{1b}') && text.is_ascii(), "{text}");
                assert!(text.lines().all(|line| line.trim_end() == line), "{text}");
            }
        }
    }
}
