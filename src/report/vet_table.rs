//! The record of one board as text for people: plain, without colour.

use std::io::{self, Write};

use super::layout::{Column, grid, paragraph, unbroken};
use super::numbers::{count, error_in_words, level, short};
use super::table::{measure_in_words, target_in_words};
use super::vet::{FigureRecord, LimitRecord, MaskOutcome, SpreadRecord, VetRecord, WorstRecord};
use super::vet_drift::drift_table;
use super::vet_levels::levels_table;
use super::vet_real::real_table;
use super::vet_trim::trim_table;
use crate::units::Kind;

/// Writes the record as text of at most `width` characters to the line (40 at least; a name that is longer is not
/// broken).
///
/// # Errors
/// Those of the writer.
pub fn write_vet_table(record: &VetRecord, width: usize, out: &mut dyn Write) -> io::Result<()> {
    let unit = record.measure.unit;
    let blocks = [
        board(record, width),
        record.mask.as_ref().map_or(String::new(), |mask| against(mask, width)),
        spread(&record.spread, record, width),
        worst(record, unit, width),
        record.drift.as_ref().map_or(String::new(), |drift| drift_table(drift, unit, width)),
        record.real.as_ref().map_or(String::new(), |real| real_table(real, unit, width)),
        record.levels.as_ref().map_or(String::new(), |levels| levels_table(levels, record.measure.band_hz, width)),
        record.trims.as_ref().map_or(String::new(), |trims| trim_table(trims, width)),
        paragraph("", &caution(record), width),
    ];
    let filled: Vec<String> = blocks.into_iter().filter(|block| !block.is_empty()).collect();
    out.write_all(filled.join("\n").as_bytes())
}

/// What the figures do not hold for.
fn caution(record: &VetRecord) -> String {
    let mut left = Vec::new();
    if record.drift.is_none() {
        left.extend(["temperature", "ageing"]);
    }
    if record.real.as_ref().is_none_or(|real| real.bandwidth_hz.is_none()) {
        left.push("op-amp bandwidth");
    }
    let left = if left.is_empty() { String::new() } else { format!("{} and ", left.join(", ")) };
    let come = if left.is_empty() { "comes" } else { "come" };
    let computed = match record.real {
        Some(_) => "But for the real network, all is computed for ideal op-amps",
        None => "Computed for ideal op-amps",
    };
    format!(
        "{computed} and for what is stated above alone: {left}the layout {come} on top. Measure the build. \
         Safety-relevant equipment needs the applicable codes and a qualified person."
    )
}

/// What is looked at, and under what conditions.
fn board(record: &VetRecord, width: usize) -> String {
    let title = if record.title.is_empty() { String::new() } else { format!("{}, ", record.title) };
    let boards = match record.boards {
        0 => String::new(),
        boards => format!(": the worst of its {boards} boards, which differ in their measured parts"),
    };
    let mut text = paragraph("", &format!("{title}row {}{boards}", record.row), width);
    text.push('\n');
    for section in &record.sections {
        let target = target_in_words(&section.target);
        let line = format!("{target}; circuit {}, output {}", section.circuit, section.output);
        text += &paragraph(&format!("{}: ", section.name), &line, width);
        let parts: Vec<String> =
            section.parts.iter().map(|part| unbroken(&format!("{} {}", part.slot, part.notation))).collect();
        text += &paragraph("   ", &parts.join(", "), width);
    }
    let tolerances = &record.tolerances;
    let spread = match tolerances.distribution {
        "uniform" => "spread evenly",
        _ => "spread normally with a standard deviation of a third of that, and cut off",
    };
    let reels = match tolerances.reel_share {
        share if share > 0.0 => format!("{} of it common to the parts of one part number", of_hundred(share)),
        _ => "each part by itself".to_string(),
    };
    let said = said_tolerances(record);
    let parts = record.sections.iter().flat_map(|section| &section.parts);
    let uses_flag = |kind: Kind| {
        let mut pieces = parts.clone().filter(|part| part.kind == kind).flat_map(|part| &part.made_of);
        pieces.any(|piece| piece.tolerance_from == "flag")
    };
    let other = if said.is_empty() { "" } else { "other " };
    let kinds = [
        (Kind::Resistor, format!("{other}resistors {}", unbroken(&of_hundred(tolerances.resistors)))),
        (Kind::Capacitor, format!("{other}capacitors {}", unbroken(&of_hundred(tolerances.capacitors)))),
    ];
    let kinds = kinds.into_iter().filter(|(kind, _)| said.is_empty() || uses_flag(*kind)).map(|(_, words)| words);
    let words: Vec<String> = kinds.chain([spread.to_string()]).collect();
    let line = format!("{}; {reels}", words.join(", "));
    text += &paragraph("Tolerances: ", &line, width);
    for line in said {
        text += &paragraph("            ", &line, width);
    }
    text += &paragraph("Error:      ", &measure_in_words(&record.measure), width);
    if record.is_compensated {
        text += &paragraph("! ", &compensated_in_words(record.real.is_some()), width);
    }
    text
}

/// What has to be said of a list that was searched for with real op-amps in mind.
pub(super) fn compensated_in_words(is_real_shown: bool) -> String {
    let next = if is_real_shown { "" } else { " Add the op-amps, such as --gbw 10MHz, to see what is built." };
    format!(
        "The list was searched for with real op-amps or surroundings in mind: whatever is computed for ideal ones is off by \
         that correction.{next}"
    )
}

/// The tolerances that the flags do not give: those of the stock list, the largest first, and measured parts.
fn said_tolerances(record: &VetRecord) -> Vec<String> {
    let in_words = |[low, high]: [f64; 2]| match (low + high).abs() < 1e-9 {
        true => format!("±{}", of_hundred(high)),
        false => format!("{} to {}", signed(low), signed(high)),
    };
    // How far up, in words, and for which parts.
    let mut listed: Vec<(f64, String, Vec<String>)> = Vec::new();
    let mut own: Vec<(f64, String, Vec<String>)> = Vec::new();
    let mut measured: Vec<String> = Vec::new();
    for (section, part) in record.sections.iter().flat_map(|s| s.parts.iter().map(move |part| (s, part))) {
        for piece in &part.made_of {
            let of_pair = if part.made_of.len() > 1 { format!(" {}", piece.notation) } else { String::new() };
            let name = unbroken(&format!("{} {}{of_pair}", section.name, part.slot));
            match piece.tolerance_from {
                "measured" => measured.push(name),
                from @ ("list" | "slot") => {
                    let words = unbroken(&in_words(piece.tolerance));
                    let lines = if from == "list" { &mut listed } else { &mut own };
                    match lines.iter_mut().find(|(_, known, _)| *known == words) {
                        Some((_, _, names)) => names.push(name),
                        None => lines.push((piece.tolerance[1], words, vec![name])),
                    }
                }
                _ => {}
            }
        }
    }
    let mut lines = Vec::new();
    for (mut found, by) in [(listed, "by the stock list"), (own, "as given for")] {
        found.sort_by(|(a, ..), (b, ..)| b.total_cmp(a));
        let shown = found.into_iter();
        lines.extend(shown.map(|(_, words, names)| match by {
            "as given for" => format!("{words} {by} {}", names.join(", ")),
            _ => format!("{words} {by}: {}", names.join(", ")),
        }));
    }
    if !measured.is_empty() {
        lines.push(format!("measured, and taken without a tolerance: {}", measured.join(", ")));
    }
    lines
}

/// A ratio in percent, without a sign.
pub(super) fn of_hundred(ratio: f64) -> String {
    format!("{} %", short(100.0 * ratio, 4))
}

/// A share in percent, with the digits that many boards can give.
fn share(ratio: f64) -> String {
    format!("{:.2} %", 100.0 * ratio)
}

fn decibels(number: f64) -> String {
    format!("{} dB", short(number, 3))
}

/// The room to a limit.
fn room(limit: &LimitRecord, margin: Option<f64>) -> String {
    match margin {
        None => "none".to_string(),
        // A response that vanishes lies this far below its limit.
        Some(margin) if margin >= 999.0 => "all".to_string(),
        Some(margin) if matches!(limit.what, "magnitude" | "depth") => decibels(margin),
        Some(margin) if limit.what == "delay" => level(margin, 3, "s"),
        Some(margin) => format!("{} %", short(100.0 * margin, 3)),
    }
}

fn named(limit: &LimitRecord) -> String {
    let delay = if limit.what == "delay" { "delay, " } else { "" };
    match (limit.from_hz, limit.to_hz, &limit.section) {
        (Some(from), Some(to), _) if from < to => {
            format!("{delay}{} to {}", level(from, 5, "Hz"), level(to, 5, "Hz"))
        }
        (Some(from), ..) => format!("{delay}{}", level(from, 5, "Hz")),
        (None, _, section) => {
            let figure = if limit.what == "q" { "Q" } else { limit.what };
            format!("{figure} of {}", section.as_deref().unwrap_or_default())
        }
    }
}

fn bound(limit: &LimitRecord, bound: Option<f64>) -> String {
    match (bound, limit.what) {
        (None, _) => "-".to_string(),
        (Some(bound), "magnitude" | "depth") => format!("{} dB", short(bound, 4)),
        (Some(bound), "delay") => level(bound, 4, "s"),
        (Some(bound), "q") => short(bound, 5),
        (Some(bound), _) => level(bound, 5, "Hz"),
    }
}

/// The limits that are broken, by how much and where.
pub(super) fn missed(limits: &[LimitRecord], of: fn(&LimitRecord) -> (Option<f64>, Option<f64>)) -> String {
    let broken = |limit: &&LimitRecord| of(limit).0.is_none_or(|margin| margin < 0.0);
    let list: Vec<String> = (limits.iter().filter(broken))
        .map(|limit| {
            let (margin, at) = of(limit);
            let by = margin.map_or("altogether".to_string(), |margin| format!("by {}", room(limit, Some(-margin))));
            let at = at.map_or(String::new(), |at| format!(" at {}", level(at, 5, "Hz")));
            format!("{} {}", unbroken(&named(limit)), unbroken(&format!("{by}{at}")))
        })
        .collect();
    list.join("; ")
}

/// To what the decibels of a mask relate.
pub(super) fn relation(reference: &str, hertz: Option<f64>) -> String {
    match (reference, hertz) {
        ("dc", _) => "relative to DC".to_string(),
        ("peak", _) => "relative to the peak".to_string(),
        (_, Some(f)) => format!("relative to {}", unbroken(&level(f, 5, "Hz"))),
        _ => "absolute".to_string(),
    }
}

/// The mask: which of target, nominal parts and tolerances fails, and each limit.
fn against(mask: &MaskOutcome, width: usize) -> String {
    let relation = relation(mask.reference, mask.reference_hz);
    let target = missed(&mask.limits, |limit| (limit.target_margin, limit.target_margin_at_hz));
    let nominal = missed(&mask.limits, |limit| (limit.nominal_margin, limit.nominal_margin_at_hz));
    let tested = match mask.frequencies {
        0 => String::new(),
        some => format!(", {relation}, tested at {} frequencies", count(some as u64)),
    };
    let mut text = paragraph("", &format!("Mask{tested}"), width);
    let verdict = match mask.fails {
        Some("target") => {
            format!("the target itself misses it: {target}. No parts mend that: change the target or the mask.")
        }
        _ => "the ideal response keeps it".to_string(),
    };
    text += &paragraph("   target:     ", &verdict, width);
    let verdict = if nominal.is_empty() {
        "the nominal parts keep it".to_string()
    } else {
        format!("the nominal parts miss it: {nominal}")
    };
    text += &paragraph("   nominal:    ", &verdict, width);
    let found = &mask.r#yield;
    let [low, high] = found.interval.map(share);
    let verdict = format!(
        "yield {} ({} interval {} to {}; {} of {} boards)",
        unbroken(&share(found.share)),
        unbroken(&of_hundred(found.confidence)),
        unbroken(&low),
        unbroken(&high),
        count(found.passed),
        count(found.boards)
    );
    text += &paragraph("   tolerances: ", &verdict, width);
    if let Some(worst) = &mask.worst_case {
        let verdict = match worst.value {
            None => "a board can be unstable".to_string(),
            Some(value) => {
                let at = worst.at_hz.map_or(String::new(), |at| format!(" at {}", level(at, 4, "Hz")));
                let by = unbroken(&format!("{}{at}", decibels(value.abs())));
                if value > 0.0 { format!("misses it by {by}") } else { format!("keeps it, with {by} to spare") }
            }
        };
        text += &paragraph("   worst case: ", &verdict, width);
    }
    text.push('\n');
    let limits = &mask.limits;
    let cells = |cell: &dyn Fn(&LimitRecord) -> String| limits.iter().map(cell).collect::<Vec<_>>();
    let columns = [
        Column::left("limit", cells(&named)),
        Column::right("lower", cells(&|l| bound(l, l.lower))),
        Column::right("upper", cells(&|l| bound(l, l.upper))),
        Column::right("room of\ntarget", cells(&|l| room(l, l.target_margin))),
        Column::right("room of\nnominal", cells(&|l| room(l, l.nominal_margin))),
        Column::right("boards that\nbreak it", cells(&|l| share(l.broken as f64 / found.boards as f64))),
    ];
    text + &grid(&columns, 1, width)
}

/// The spread of the figures and of the error.
fn spread(spread: &SpreadRecord, record: &VetRecord, width: usize) -> String {
    let unit = record.measure.unit;
    let mut text = paragraph("", &format!("Spread of {} drawn boards", count(spread.boards as u64)), width);
    if spread.unstable > 0 {
        let line = format!("{} of them are unstable, and left out below", count(spread.unstable as u64));
        text += &paragraph("   ", &line, width);
    }
    text.push('\n');
    let shown = |figure: &FigureRecord, number: f64| match figure.figure {
        "f0" | "fz" => level(number, 5, "Hz"),
        _ => short(number, 5),
    };
    let cells = |cell: &dyn Fn(&FigureRecord) -> String| spread.figures.iter().map(cell).collect::<Vec<_>>();
    let drawn = |figure: &FigureRecord, of: fn(&super::vet::QuantileRecord) -> f64| {
        figure.drawn.as_ref().map_or("-".to_string(), |quantiles| shown(figure, of(quantiles)))
    };
    let relative = |figure: &FigureRecord| {
        let ratio = figure.drawn.as_ref().map(|quantiles| quantiles.deviation / figure.nominal.abs());
        ratio.map_or("-".to_string(), |ratio| format!("{:.2} %", 100.0 * ratio))
    };
    let columns = [
        Column::left("figure", cells(&|f| format!("{} {}", f.section, if f.figure == "q" { "Q" } else { f.figure }))),
        Column::right("target", cells(&|f| shown(f, f.target))),
        Column::right("nominal", cells(&|f| shown(f, f.nominal))),
        Column::right("2.5 % of\nboards under", cells(&|f| drawn(f, |q| q.low))),
        Column::right("2.5 %\nabove", cells(&|f| drawn(f, |q| q.high))),
        Column::right("standard\ndeviation", cells(&relative)),
        Column::right("from sen-\nsitivities", cells(&|f| format!("{:.2} %", 100.0 * f.sensitivity_deviation))),
    ];
    text += &grid(&columns, 1, width);
    text.push('\n');
    let words = |error: f64| unbroken(&rounded(unit, error));
    if let Some(error) = &spread.error {
        let line = format!(
            "error against the target: half of the boards within {}, all but 2.5 % within {}",
            words(error.median),
            words(error.high)
        );
        text += &paragraph("   ", &line, width);
    }
    let at = unbroken(&level(spread.response_deviation_at_hz, 4, "Hz"));
    let line = format!(
        "spread of the response: standard deviation {} at {at}, where it is largest",
        words(spread.response_deviation)
    );
    text += &paragraph("   ", &line, width);
    if let Some(nominal) = record.nominal_error {
        let nominal = words(nominal);
        let line = if spread.nominal_error_is_lost {
            format!(
                "the nominal error of {nominal} is below a third of that: it no longer matters. Prefer fewer part numbers \
                 or tighter parts to a better fit."
            )
        } else {
            format!("the nominal error of {nominal} is not small against that: a better fit still helps")
        };
        text += &paragraph("   ", &line, width);
    }
    text
}

pub(super) fn rounded(unit: &str, error: f64) -> String {
    let digits = format!("{error:.2e}").parse().unwrap_or(error);
    error_in_words(unit, digits)
}

/// The worst case of the error.
fn worst(record: &VetRecord, unit: &str, width: usize) -> String {
    let worst: &WorstRecord = &record.worst_case;
    let mut text = paragraph("", "Worst case, every part anywhere within its tolerance", width);
    let how = match (worst.every_corner, worst.inside) {
        (_, true) => "found inside the tolerances, beyond the corners tried",
        (true, false) => "the worst of all corners; a search inside found nothing worse",
        (false, false) => {
            "the worst of the corners that the sensitivities point to; a search inside found nothing worse"
        }
    };
    let line = match worst.value {
        None => "the board can be unstable".to_string(),
        Some(value) => {
            let at = worst.at_hz.map_or(String::new(), |at| format!(" at {}", unbroken(&level(at, 4, "Hz"))));
            format!("error {}{at}; {how} ({} corners)", unbroken(&rounded(unit, value)), count(worst.corners as u64))
        }
    };
    text += &paragraph("   ", &line, width);
    for section in &record.sections {
        let own = worst.parts.iter().filter(|part| part.section == section.name);
        let list: Vec<String> = own.map(|part| unbroken(&format!("{} {}", part.slot, signed(part.error)))).collect();
        if !list.is_empty() {
            text += &paragraph(&format!("   {}: ", section.name), &list.join(", "), width);
        }
    }
    text
}

fn signed(ratio: f64) -> String {
    let sign = if ratio < 0.0 { "-" } else { "+" };
    format!("{sign}{}", of_hundred(ratio.abs()))
}
