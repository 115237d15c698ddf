//! The record as text.

use std::io::{self, Write};

use super::super::layout::{Column, grid, paragraph, printable, unbroken};
use super::super::numbers::{level, short};
use super::record::{SectionOfFilter, SectionsRecord, hertz};

/// Writes the filter as text of `width` characters.
///
/// # Errors
/// Those of the writer.
pub fn write_sections_table(record: &SectionsRecord, width: usize, out: &mut dyn Write) -> io::Result<()> {
    writeln!(out, "{}\n", printable(&record.title))?;
    for (label, text) in asked(record) {
        write!(out, "{}", paragraph(&format!("{label:<12}"), &text, width))?;
    }
    writeln!(out, "\n{}", poles(record, width))?;
    if !record.zeros.is_empty() {
        writeln!(out, "{}", zeros(record, width))?;
    }
    writeln!(out, "{}", sections(record, width))?;
    writeln!(out, "{}", levels(record, width))?;
    for (label, text) in explained(record) {
        write!(out, "{}", paragraph(&format!("{label:<12}"), &text, width))?;
    }
    let caution = "Levels inside are those of ideal op-amps and of unrounded parts near the middle of the shelves: other \
                   part values of the same response may shift them.";
    write!(out, "\n{}", paragraph("", caution, width))
}

/// What was asked and what it led to, with a label to each line.
fn asked(record: &SectionsRecord) -> Vec<(&'static str, String)> {
    let filter = &record.filter;
    let mut lines = Vec::new();
    if record.title != filter.name() {
        lines.push(("Filter:", filter.name()));
    }
    lines.push(if filter.delay_s.is_some() { ("Delay:", filter.edge()) } else { ("Edge:", filter.edge()) });
    let figures = [(filter.ripple_db, "pass-band ripple"), (filter.attenuation_db, "stop-band attenuation")];
    let shown = [filter.approximation.has_ripple(), filter.approximation.has_attenuation()];
    let figures = figures
        .iter()
        .zip(shown)
        .filter(|(_, shown)| *shown)
        .filter_map(|((db, name), _)| db.map(|db| unbroken(&format!("{name} {} dB", short(db, 5)))));
    let figures: Vec<String> = figures.collect();
    if !figures.is_empty() {
        lines.push(("Levels:", figures.join(", ")));
    }
    if filter.edge_at != "half-power" && !filter.half_power_hz.is_empty() {
        lines.push(("Half power:", format!("-3.01 dB at {}", unbroken(&hertz(&filter.half_power_hz)))));
    }
    lines.push(("Gain:", filter.gain_in_words()));
    if let Some(stop) = &filter.stop_band {
        let edges = hertz(&stop.edges_hz);
        let from = match (filter.response, stop.edges_hz.len()) {
            ("low-pass", _) => format!("from {edges} upwards"),
            ("high-pass", _) => format!("up to {edges}"),
            ("band-pass", _) => {
                format!("up to {} and from {}", hertz(&stop.edges_hz[..1]), hertz(&stop.edges_hz[1..]))
            }
            _ => format!("between {edges}"),
        };
        let margin = if stop.margin_db.abs() < 5e-7 {
            "exactly what is asked".to_string()
        } else {
            format!("{} dB more than the {} dB asked", short(stop.margin_db, 3), short(stop.asked_db, 5))
        };
        let reached = match stop.reached_hz.as_slice() {
            [] => String::new(),
            list => format!("; {} dB is reached at {}", short(stop.asked_db, 5), unbroken(&hertz(list))),
        };
        lines.push(("Stop band:", format!("at least {} dB {from}, {margin}{reached}", short(stop.least_db, 5))));
        let order = match (stop.order_is_least, stop.smaller_order.zip(stop.smaller_order_least_db)) {
            (true, Some((smaller, gives))) => {
                format!("{} is the least that will do: order {smaller} gives {} dB", filter.order, short(gives, 5))
            }
            (true, None) => format!("{} is the least that there is", filter.order),
            (false, _) => format!("{} as given", filter.order),
        };
        lines.push(("Order:", order));
    }
    lines
}

fn poles(record: &SectionsRecord, width: usize) -> String {
    let all = &record.poles;
    let q = |q: Option<f64>| q.map_or("-".to_string(), |q| format!("{q:.4}"));
    let real = |list: &[f64]| list.iter().map(|re| short(*re, 7)).collect::<Vec<_>>().join(", ");
    grid(
        &[
            Column::left("poles", all.iter().map(|p| format!("P{}", p.number)).collect()),
            Column::right("f0", all.iter().map(|p| level(p.f0_hz, 6, "Hz")).collect()),
            Column::right("Q", all.iter().map(|p| q(p.q)).collect()),
            Column::right("real\nrad/s", all.iter().map(|p| real(&p.real)).collect()),
            Column::right(
                "imaginary\nrad/s",
                all.iter()
                    .map(|p| if p.imaginary > 0.0 { format!("±{}", short(p.imaginary, 7)) } else { "0".into() })
                    .collect(),
            ),
        ],
        1,
        width,
    )
}

fn zeros(record: &SectionsRecord, width: usize) -> String {
    grid(
        &[
            Column::left("zeros", record.zeros.iter().map(|z| format!("Z{}", z.number)).collect()),
            Column::right("fz", record.zeros.iter().map(|z| level(z.fz_hz, 6, "Hz")).collect()),
        ],
        1,
        width,
    )
}

/// A level with two decimals, zero without a sign.
fn two(db: f64) -> String {
    let text = format!("{db:.2}");
    if text == "-0.00" { "0.00".to_string() } else { text }
}

fn sections(record: &SectionsRecord, width: usize) -> String {
    let all = &record.sections;
    let column = |text: &dyn Fn(&SectionOfFilter) -> String| all.iter().map(text).collect::<Vec<_>>();
    let mut columns = vec![
        Column::left("section", column(&|s| s.name.clone())),
        Column::left("shape", column(&|s| s.shape.name().to_string())),
        Column::left(
            "from",
            column(&|s| format!("P{}{}", s.poles, s.zeros.map_or(String::new(), |z| format!(" Z{z}")))),
        ),
    ];
    columns.push(Column::right("f0", column(&|s| level(s.f0_hz, 6, "Hz"))));
    columns.push(Column::right("Q", column(&|s| s.q.map_or("-".into(), |q| format!("{q:.4}")))));
    if all.iter().any(|s| s.fz_hz.is_some()) {
        columns.push(Column::right("fz", column(&|s| s.fz_hz.map_or("-".into(), |f| level(f, 6, "Hz")))));
    }
    columns.push(Column::right("gain", column(&|s| short(s.gain, 5))));
    grid(&columns, 1, width)
}

/// Where a peak lies; beyond two decades from all poles a level has settled.
fn place(record: &SectionsRecord, hertz: f64) -> String {
    let lowest = record.poles.iter().map(|pole| pole.f0_hz).fold(f64::INFINITY, f64::min);
    let highest = record.poles.iter().map(|pole| pole.f0_hz).fold(0.0, f64::max);
    match hertz {
        f if f < lowest / 100.0 => "DC".to_string(),
        f if f > highest * 100.0 => "far above".to_string(),
        f => level(f, 4, "Hz"),
    }
}

fn levels(record: &SectionsRecord, width: usize) -> String {
    let all = &record.sections;
    let peaks: Vec<Option<f64>> = all.iter().map(|s| s.largest().map(|amp| amp.peak.db)).collect();
    let least: Vec<Option<f64>> = all.iter().map(|s| Some(s.least_in_pass_band.db)).collect();
    let two_decimals =
        |list: &[Option<f64>]| -> Vec<String> { list.iter().map(|db| db.map_or("-".into(), two)).collect() };
    let at = |s: &SectionOfFilter| s.largest().map_or("-".into(), |amp| place(record, amp.peak.at_hz));
    let name = |s: &SectionOfFilter| s.largest().and_then(|amp| amp.name.clone()).unwrap_or("output".into());
    grid(
        &[
            Column::left("section", all.iter().map(|s| s.name.clone()).collect()),
            Column::left("circuit", all.iter().map(|s| s.circuit.clone().unwrap_or("-".into())).collect()),
            Column::left("largest\nop-amp", all.iter().map(name).collect()),
            Column::right("peak\ndB", two_decimals(&peaks)),
            Column::right("at", all.iter().map(at).collect()),
            Column::right("least in\nband, dB", two_decimals(&least)),
        ],
        1,
        width,
    )
}

/// Why the sections are put together as they are, with a label to each line.
fn explained(record: &SectionsRecord) -> Vec<(&'static str, String)> {
    let (choice, swing) = (&record.choice, &record.choice.swing);
    let db = |db: f64| format!("{} dB", two(db));
    let mut lines = Vec::new();
    let largest = record.sections.iter().filter_map(|s| Some((s, s.largest()?)));
    let largest = largest.reduce(|a, b| if b.1.peak.db > a.1.peak.db + 1e-6 { b } else { a });
    if let Some((section, amp)) = largest {
        let name = amp.name.as_ref().map_or("its output".to_string(), |name| format!("op-amp {name}"));
        let inside = amp.peak.db - choice.output_peak.db;
        let than = if inside > 0.005 {
            format!("{} above the peak of the output, {}", db(inside), db(choice.output_peak.db))
        } else {
            "no more than the peak of the output".to_string()
        };
        lines.push((
            "Headroom:",
            format!(
                "no op-amp output goes above {} of the filter's input (section {}, {name}, at {}): {than}",
                db(amp.peak.db),
                section.name,
                unbroken(&place(record, amp.peak.at_hz)),
            ),
        ));
    }
    let mut others =
        vec![format!("by rising Q {}", db(swing.rising_q_db)), format!("by falling Q {}", db(swing.falling_q_db))];
    others.extend(swing.nearest_zeros_db.map(|nearest| format!("with the nearest zeros {}", db(nearest))));
    lines.push((
        "Swing:",
        format!(
            "{} from the least section output in the pass band to the largest op-amp output ({})",
            db(swing.chosen_db),
            others.join(", ")
        ),
    ));
    lines.push((
        "Pairing:",
        match choice.pairing {
            "none" => "all zeros are alike, so there is nothing to choose",
            "headroom" => match choice.pairings {
                "all" => "the zeros with the least swing of all pairings",
                "exchanges" => "the zeros with the least swing found; no exchange of two lessens it",
                _ => "the better of the nearest zeros and those for which the largest swing of one section is least",
            },
            "nearest" => "the poles of highest Q take the nearest zeros",
            _ => "as given",
        }
        .to_string(),
    ));
    lines.push((
        "Sequence:",
        match choice.sequence {
            "headroom" if choice.all_orders_compared => "the order with the least swing of all",
            "headroom" => {
                "the least swing of three: the best order by the levels at gain 1, by rising Q, by falling Q"
            }
            "rising-q" => "by rising Q, as asked",
            "falling-q" => "by falling Q, as asked",
            _ => "as given",
        }
        .to_string(),
    ));
    let fixed: Vec<String> = (record.sections.iter().filter(|s| s.gain_is_fixed))
        .map(|s| format!("section {} stays at {}: its circuit gives no other", s.name, short(s.gain, 5)))
        .collect();
    let mut gains = match choice.gains {
        "headroom" => {
            "the largest op-amp output of each section peaks as high as the last one's, as nearly as its parts let it"
        }
        "equal" => "the same for each section",
        _ => "as given",
    }
    .to_string();
    if !fixed.is_empty() {
        gains += &format!("; {}", fixed.join(", "));
    }
    gains += if record.filter.inverts { ". The filter inverts" } else { ". The filter does not invert" };
    lines.push(("Gains:", gains));
    let alone: Vec<&str> = record.sections.iter().filter(|s| !s.op_amps_counted).map(|s| s.name.as_str()).collect();
    if !alone.is_empty() {
        let sections = if alone.len() == 1 { "section" } else { "sections" };
        let text =
            "no ideal parts were found for its circuit on these shelves, so only the section output is counted";
        lines.push(("Uncounted:", format!("{sections} {}: {text}", alone.join(", "))));
    }
    lines
}
