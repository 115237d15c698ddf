//! `roundwell circuits`: what circuits there are, and what one of them is made of.

use std::path::Path;
use std::sync::Arc;

use serde::Serialize;

use super::FOUND;
use super::args::{CircuitsArgs, ShowFormat};
use super::failure::Failure;
use super::files::{is_file_name, read_circuit};
use super::output::Output;
use crate::circuit::{Circuit, Output as CircuitOutput, SlotEffect, find, library};
use crate::report::{Column, grid, paragraph, unbroken};
use crate::text::{Fault, suggestion};
use crate::units::Kind;

/// Runs the command and gives its exit code.
///
/// # Errors
/// A circuit that does not exist, a circuit file with faults, an output that cannot be written.
pub fn run(args: &CircuitsArgs) -> Result<u8, Failure> {
    let width = usize::from(args.width);
    let text = match (&args.circuit, args.format) {
        (None, ShowFormat::Table) => overview(library(), width),
        (None, ShowFormat::Json) => json(&library().iter().map(CircuitRecord::new).collect::<Vec<_>>())?,
        (Some(name), format) => {
            let circuit = chosen(name)?;
            match format {
                ShowFormat::Table => one(&circuit, width),
                ShowFormat::Json => json(&CircuitRecord::new(&circuit))?,
            }
        }
    };
    Output::Standard.write(text.as_bytes())?;
    Ok(FOUND)
}

fn chosen(name: &str) -> Result<Arc<Circuit>, Failure> {
    if is_file_name(name) {
        return read_circuit(Path::new(name)).map(Arc::new);
    }
    find(name).cloned().map(Arc::new).ok_or_else(|| {
        let known: Vec<&str> = library().iter().map(|circuit| circuit.id.as_str()).collect();
        let help = suggestion(name, "the circuits are", &known);
        Failure::input(Fault::at("", format!("there is no circuit `{name}`")).help(help))
    })
}

/// A circuit in full.
#[derive(Serialize)]
struct CircuitRecord {
    format: &'static str,
    id: String,
    title: String,
    source: String,
    nodes: Vec<String>,
    elements: Vec<ElementRecord>,
    op_amps: Vec<OpAmpRecord>,
    outputs: Vec<OutputRecord>,
    ties: Vec<Vec<String>>,
    needs: Vec<NeedRecord>,
    sensible_q: Option<SensibleRecord>,
    notes: Vec<String>,
}

#[derive(Serialize)]
struct ElementRecord {
    name: String,
    kind: Kind,
    nodes: [String; 2],
}

#[derive(Serialize)]
struct OpAmpRecord {
    name: String,
    plus: String,
    minus: String,
    out: String,
}

#[derive(Serialize)]
struct OutputRecord {
    name: String,
    node: String,
    shape: &'static str,
    /// 1 or -1; null where it depends on the values.
    gain_sign: Option<i8>,
    /// Slots that stay empty.
    without: Vec<String>,
    resistors: usize,
    capacitors: usize,
    /// What each slot moves: see [`moved`].
    effects: Vec<EffectRecord>,
    /// Resistors in an order in which each sets its figure and disturbs none before it.
    trims: Vec<TrimRecord>,
}

#[derive(Serialize)]
struct EffectRecord {
    slot: String,
    moves: Vec<&'static str>,
}

#[derive(Serialize)]
struct TrimRecord {
    slot: String,
    figure: &'static str,
}

#[derive(Serialize)]
struct NeedRecord {
    outputs: Vec<String>,
    inequality: String,
    why: String,
}

#[derive(Serialize)]
struct SensibleRecord {
    up_to: f64,
    why: String,
}

impl CircuitRecord {
    fn new(circuit: &Circuit) -> CircuitRecord {
        let node = |index: usize| circuit.nodes[index].clone();
        let names = |slots: &[usize]| slots.iter().map(|&slot| circuit.slots[slot].name.clone()).collect::<Vec<_>>();
        let elements = circuit.slots.iter().map(|slot| ElementRecord {
            name: slot.name.clone(),
            kind: slot.kind,
            nodes: slot.nodes.map(node),
        });
        let op_amps = circuit.op_amps.iter().map(|amp| OpAmpRecord {
            name: amp.name.clone(),
            plus: node(amp.plus),
            minus: node(amp.minus),
            out: node(amp.out),
        });
        let needs = circuit.needs.iter().map(|need| NeedRecord {
            outputs: need.outputs.clone(),
            inequality: need.text(circuit),
            why: need.why.clone(),
        });
        CircuitRecord {
            format: "roundwell-circuit/1",
            id: circuit.id.clone(),
            title: circuit.title.clone(),
            source: circuit.source.clone(),
            nodes: circuit.nodes.clone(),
            elements: elements.collect(),
            op_amps: op_amps.collect(),
            outputs: circuit.outputs.iter().map(|output| OutputRecord::new(circuit, output)).collect(),
            ties: circuit.ties.iter().map(|tie| names(tie)).collect(),
            needs: needs.collect(),
            sensible_q: circuit.sensible_q.as_ref().map(|q| SensibleRecord { up_to: q.up_to, why: q.why.clone() }),
            notes: circuit.notes.clone(),
        }
    }
}

impl OutputRecord {
    fn new(circuit: &Circuit, output: &CircuitOutput) -> OutputRecord {
        let name = |slot: usize| circuit.slots[slot].name.clone();
        let effects = circuit.effects(output);
        OutputRecord {
            name: output.name.clone(),
            node: circuit.nodes[output.node].clone(),
            shape: output.shape.name(),
            gain_sign: output.gain_sign(),
            without: output.without.iter().map(|&slot| name(slot)).collect(),
            resistors: circuit.count(output, Kind::Resistor),
            capacitors: circuit.count(output, Kind::Capacitor),
            effects: effects.iter().map(|e| EffectRecord { slot: name(e.slot), moves: moved(output, e) }).collect(),
            trims: circuit
                .trims(output)
                .into_iter()
                .map(|(slot, figure)| TrimRecord { slot: name(slot), figure })
                .collect(),
        }
    }
}

fn json(value: &impl Serialize) -> Result<String, Failure> {
    let text = serde_json::to_string_pretty(value).map_err(|error| Failure::Unwritable(error.to_string()))?;
    Ok(text + "\n")
}

/// What a slot moves: figures, and the `null` of a notch or the `match` of zeros and poles of an all-pass.
fn moved(output: &CircuitOutput, effect: &SlotEffect) -> Vec<&'static str> {
    let mut names = effect.figures();
    if effect.shape {
        names.push(if output.shape.is_all_pass() { "match" } else { "null" });
    }
    names
}

/// The sign of a gain in one word.
fn sign(output: &CircuitOutput) -> &'static str {
    match output.gain_sign() {
        Some(1) => "+",
        Some(_) => "-",
        None => "any",
    }
}

/// All circuits: what each gives and costs, then ties and trims.
fn overview(circuits: &[Circuit], width: usize) -> String {
    let mut cells: [Vec<String>; 7] = Default::default();
    let mut trimmed = String::new();
    for circuit in circuits {
        for (index, output) in circuit.outputs.iter().enumerate() {
            let once = |text: String| if index == 0 { text } else { String::new() };
            let row = [
                once(circuit.id.clone()),
                output.shape.name().to_string(),
                sign(output).to_string(),
                circuit.op_amps.len().to_string(),
                circuit.count(output, Kind::Resistor).to_string(),
                circuit.count(output, Kind::Capacitor).to_string(),
                circuit.sensible_q.as_ref().map_or("-".to_string(), |q| q.up_to.to_string()),
            ];
            cells.iter_mut().zip(row).for_each(|(column, cell)| column.push(cell));
        }
        trimmed += &paragraph(&format!("{}: ", circuit.id), &ties_and_trims(circuit), width);
    }
    let [id, shape, sign, op_amps, resistors, capacitors, q] = cells;
    let columns = [
        Column::left("circuit", id),
        Column::left("shape", shape),
        Column::left("gain", sign),
        Column::right("op-\namps", op_amps),
        Column::right("R", resistors),
        Column::right("C", capacitors),
        Column::right("Q\nup to", q),
    ];
    let intro = "Resistors that set one figure after the other, each without disturbing those before it, and pairs of \
                 slots that carry one value:";
    format!(
        "{}\n{}\n{trimmed}\n{}",
        grid(&columns, 1, width),
        paragraph("", intro, width),
        paragraph("", "`roundwell circuits NAME` shows one in full.", width)
    )
}

/// What can be trimmed, and what is tied, in words.
fn ties_and_trims(circuit: &Circuit) -> String {
    let mut lists: Vec<(String, Vec<&str>)> = Vec::new();
    for output in &circuit.outputs {
        let trims = trims_in_words(circuit, output);
        match lists.iter_mut().find(|(known, _)| *known == trims) {
            Some((_, outputs)) => outputs.push(&output.name),
            None => lists.push((trims, vec![&output.name])),
        }
    }
    let single = lists.len() == 1;
    let mut words: Vec<String> = lists
        .into_iter()
        .map(|(trims, outputs)| if single { trims } else { format!("{}: {trims}", outputs.join(" and ")) })
        .collect();
    words.extend(circuit.ties.iter().map(|tie| {
        let names: Vec<&str> = tie.iter().map(|&slot| circuit.slots[slot].name.as_str()).collect();
        unbroken(&names.join(" = "))
    }));
    words.join("; ")
}

fn trims_in_words(circuit: &Circuit, output: &CircuitOutput) -> String {
    let trims = circuit.trims(output);
    if trims.is_empty() {
        return "no resistor sets a figure by itself".to_string();
    }
    let trims = trims.iter().map(|(slot, figure)| unbroken(&format!("{} sets {figure}", circuit.slots[*slot].name)));
    trims.collect::<Vec<_>>().join(", ")
}

/// One circuit in full.
fn one(circuit: &Circuit, width: usize) -> String {
    let node = |index: usize| circuit.nodes[index].clone();
    let name = |slot: usize| circuit.slots[slot].name.clone();
    let mut text = paragraph("", &format!("{}: {}", circuit.id, circuit.title), width);
    if !circuit.source.is_empty() {
        text += &paragraph("", &format!("Source: {}", circuit.source), width);
    }

    let mut columns = vec![
        Column::left("slot", circuit.slots.iter().map(|slot| slot.name.clone()).collect()),
        Column::left("nodes", circuit.slots.iter().map(|slot| slot.nodes.map(node).join(" - ")).collect()),
    ];
    for output in &circuit.outputs {
        let effects = circuit.effects(output);
        let cell = |slot: usize| match effects.iter().find(|effect| effect.slot == slot) {
            None => "stays empty".to_string(),
            Some(effect) => match moved(output, effect) {
                none if none.is_empty() => "-".to_string(),
                some => some.join(" "),
            },
        };
        let header = format!("moves, at\n{}", output.name);
        columns.push(Column::left(header, (0..circuit.slots.len()).map(cell).collect()));
    }
    text += "\n";
    text += &grid(&columns, 2, width);

    let amps = &circuit.op_amps;
    if !amps.is_empty() {
        text += "\n";
        text += &grid(
            &[
                Column::left("op-amp", amps.iter().map(|amp| amp.name.clone()).collect()),
                Column::left("plus", amps.iter().map(|amp| node(amp.plus)).collect()),
                Column::left("minus", amps.iter().map(|amp| node(amp.minus)).collect()),
                Column::left("out", amps.iter().map(|amp| node(amp.out)).collect()),
            ],
            1,
            width,
        );
    }

    let outputs = &circuit.outputs;
    let column = |cell: &dyn Fn(&CircuitOutput) -> String| outputs.iter().map(cell).collect::<Vec<_>>();
    text += "\n";
    text += &grid(
        &[
            Column::left("output", column(&|output| output.name.clone())),
            Column::left("node", column(&|output| node(output.node))),
            Column::left("shape", column(&|output| output.shape.name().to_string())),
            Column::left("gain", column(&|output| sign(output).to_string())),
            Column::right("R", column(&|output| circuit.count(output, Kind::Resistor).to_string())),
            Column::right("C", column(&|output| circuit.count(output, Kind::Capacitor).to_string())),
        ],
        1,
        width,
    );

    text += "\n";
    for output in outputs {
        text += &paragraph(&format!("Trim {}: ", output.name), &trims_in_words(circuit, output), width);
    }
    for tie in &circuit.ties {
        let names: Vec<String> = tie.iter().map(|&slot| name(slot)).collect();
        text += &paragraph("Tie: ", &format!("{} carry the same value unless untied", names.join(" and ")), width);
    }
    for need in &circuit.needs {
        let mut line = format!("{} ({})", unbroken(&need.text(circuit)), need.outputs.join(", "));
        if !need.why.is_empty() {
            line += &format!(": {}", need.why);
        }
        text += &paragraph("Need: ", &line, width);
    }
    if let Some(q) = &circuit.sensible_q {
        text += &paragraph("Q: ", &format!("sensible up to {}: {}", q.up_to, q.why), width);
    }
    for note in &circuit.notes {
        text += &paragraph("Note: ", note, width);
    }
    text
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;

    #[test]
    fn all_circuits() {
        insta::assert_snapshot!(overview(library(), 80));
    }

    #[test]
    fn one_circuit_in_full() {
        insta::assert_snapshot!(one(find("tow-thomas").unwrap(), 80));
        insta::assert_snapshot!("one_circuit_with_needs", one(find("multiple-feedback-low-pass").unwrap(), 80));
    }

    #[test]
    fn json_gives_the_netlist() {
        let circuit = find("tow-thomas").unwrap();
        let value: serde_json::Value = serde_json::from_str(&json(&CircuitRecord::new(circuit)).unwrap()).unwrap();
        assert_eq!(value["elements"][0]["name"], "RG");
        assert_eq!(value["elements"][0]["nodes"], serde_json::json!(["in", "n1"]));
        assert_eq!(value["op_amps"][0]["minus"], "n1");
        assert_eq!(value["outputs"][2]["gain_sign"], -1);
        assert_eq!(value["outputs"].as_array().unwrap().len(), circuit.outputs.len());
    }

    #[test]
    fn lines_keep_the_width() {
        for width in [60, 80] {
            let mut texts = vec![overview(library(), width)];
            texts.extend(library().iter().map(|circuit| one(circuit, width)));
            for line in texts.iter().flat_map(|text| text.lines()) {
                assert!(line.chars().count() <= width, "{line}");
            }
        }
    }
}
