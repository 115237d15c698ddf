//! A circuit as data: slots, op-amps, outputs, ties and needs, read from a circuit file and analysed.

use serde::Deserialize;
use thiserror::Error;

use super::nodal::{Network, Transfer};
use crate::target::Shape;
use crate::text::{self, CONTROL_HELP, Fault, control_character, with_article};
use crate::units::Kind;

/// A place for one resistor or capacitor.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Slot {
    /// Its name; the first letter tells the kind.
    pub name: String,
    /// Resistor or capacitor.
    pub kind: Kind,
    /// The nodes it lies between, as indices into [`Circuit::nodes`].
    pub nodes: [usize; 2],
}

/// An op-amp, by node indices.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct OpAmp {
    /// Its name.
    pub name: String,
    /// Non-inverting input.
    pub plus: usize,
    /// Inverting input.
    pub minus: usize,
    /// Output.
    pub out: usize,
}

/// A usable output of a circuit.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Output {
    /// Its name.
    pub name: String,
    /// Its node.
    pub node: usize,
    /// The shape it gives.
    pub shape: Shape,
    /// Slots that stay empty for this output.
    pub without: Vec<usize>,
    /// The transfer function from the source, in the slot admittances.
    pub transfer: Transfer,
}

impl Output {
    /// Sign of the gain as [`Shape`] defines it: 1 or −1 where it is the same for all part values, otherwise `None`.
    pub fn gain_sign(&self) -> Option<i8> {
        let (n, d) = (&self.transfer.numerator, &self.transfer.denominator);
        let power = match self.shape {
            Shape::HighPass => 2,
            Shape::BandPass | Shape::FirstOrderHighPass => 1,
            _ => 0,
        };
        match n.get(power)?.sign() * d.get(power)?.sign() {
            0 => None,
            sign => Some(if sign > 0 { 1 } else { -1 }),
        }
    }

    /// The slots that are filled.
    pub fn filled<'a>(&'a self, circuit: &'a Circuit) -> impl Iterator<Item = usize> + 'a {
        (0..circuit.slots.len()).filter(|slot| !self.without.contains(slot))
    }
}

/// One term of an inequality's right side: factor × Q^q × |gain|^gain.
#[derive(Clone, Copy, Debug, PartialEq, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Term {
    /// Plain factor.
    pub factor: f64,
    /// Power of Q.
    #[serde(default)]
    pub q: i32,
    /// Power of the absolute gain.
    #[serde(default)]
    pub gain: i32,
}

/// An inequality that every realisation satisfies: a ratio of slot values against terms in Q and gain.
#[derive(Clone, Debug, PartialEq)]
pub struct Need {
    /// Names of the outputs it holds for.
    pub outputs: Vec<String>,
    /// Slots whose product is the dividend.
    pub above: Vec<usize>,
    /// Slots whose product is the divisor.
    pub below: Vec<usize>,
    /// Whether the ratio must be at least (true) or at most (false) the sum of the terms.
    pub at_least: bool,
    /// The terms.
    pub terms: Vec<Term>,
    /// What fails otherwise.
    pub why: String,
}

impl Need {
    /// The right side for a target's Q and absolute gain.
    pub fn bound(&self, q: f64, gain: f64) -> f64 {
        self.terms.iter().map(|t| t.factor * q.powi(t.q) * gain.powi(t.gain)).sum()
    }

    /// The inequality as text, such as `C1/C2 >= 4 Q^2 + 4 Q^2 |gain|`.
    pub fn text(&self, circuit: &Circuit) -> String {
        let product =
            |slots: &[usize]| slots.iter().map(|&s| circuit.slots[s].name.as_str()).collect::<Vec<_>>().join(" ");
        let power = |name: &str, k: i32| match k {
            0 => String::new(),
            1 => format!(" {name}"),
            k => format!(" {name}^{k}"),
        };
        let mut right = String::new();
        for (i, term) in self.terms.iter().enumerate() {
            let sign = match (i, term.factor < 0.0) {
                (0, true) => "-",
                (0, false) => "",
                (_, true) => " - ",
                (_, false) => " + ",
            };
            let factors = format!("{}{}", power("Q", term.q), power("|gain|", term.gain));
            let factor = term.factor.abs();
            right += sign;
            if (factor - 1.0).abs() < 1e-12 && !factors.is_empty() {
                right += factors.trim_start();
            } else {
                right += &format!("{factor}{factors}");
            }
        }
        let relation = if self.at_least { ">=" } else { "<=" };
        format!("{}/{} {relation} {right}", product(&self.above), product(&self.below))
    }
}

/// Up to which Q a circuit is sensible, and why.
#[derive(Clone, Debug, PartialEq, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SensibleQ {
    /// The largest sensible Q.
    pub up_to: f64,
    /// The reason.
    pub why: String,
}

/// A published op-amp network.
#[derive(Clone, Debug, PartialEq)]
pub struct Circuit {
    /// Its identifier, such as `tow-thomas`.
    pub id: String,
    /// Its name in the trade.
    pub title: String,
    /// Where it was published.
    pub source: String,
    /// Node names; 0 is ground, 1 the source.
    pub nodes: Vec<String>,
    /// Its slots.
    pub slots: Vec<Slot>,
    /// Its op-amps.
    pub op_amps: Vec<OpAmp>,
    /// Its outputs.
    pub outputs: Vec<Output>,
    /// Slots that carry one value unless a job unties them.
    pub ties: Vec<Vec<usize>>,
    /// Inequalities that limit what can be realised.
    pub needs: Vec<Need>,
    /// The sensible Q, if known.
    pub sensible_q: Option<SensibleQ>,
    /// What a builder should know.
    pub notes: Vec<String>,
}

/// A circuit file that cannot be used: all faults found, each with its place in the text.
#[derive(Clone, Debug, PartialEq, Error)]
#[error("{}", .faults.first().map_or("unusable circuit file", |f| f.message.as_str()))]
pub struct CircuitError {
    /// The faults, at least one.
    pub faults: Vec<Fault>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, rename = "Circuit")]
struct RawCircuit {
    id: String,
    title: String,
    #[serde(default)]
    source: String,
    elements: Vec<(String, String, String)>,
    op_amps: Vec<RawOpAmp>,
    outputs: Vec<RawOutput>,
    #[serde(default)]
    ties: Vec<Vec<String>>,
    #[serde(default)]
    needs: Vec<RawNeed>,
    #[serde(default)]
    sensible_q: Option<SensibleQ>,
    #[serde(default)]
    notes: Vec<String>,
}

impl RawCircuit {
    /// Every text that is shown, with its path. Other names must repeat one of these.
    fn texts(&self) -> Vec<(String, &str)> {
        let mut texts = vec![("id".to_string(), self.id.as_str()), ("title".into(), &self.title)];
        texts.push(("source".into(), &self.source));
        for (i, (name, from, to)) in self.elements.iter().enumerate() {
            let members = [name, from, to].into_iter().enumerate();
            texts.extend(members.map(|(k, text)| (format!("elements[{i}][{k}]"), text.as_str())));
        }
        for (i, amp) in self.op_amps.iter().enumerate() {
            let members = [("name", &amp.name), ("plus", &amp.plus), ("minus", &amp.minus), ("out", &amp.out)];
            texts.extend(members.map(|(key, text)| (format!("op_amps[{i}].{key}"), text.as_str())));
        }
        texts.extend(self.outputs.iter().enumerate().map(|(i, o)| (format!("outputs[{i}].name"), o.name.as_str())));
        texts.extend(self.needs.iter().enumerate().map(|(i, n)| (format!("needs[{i}].why"), n.why.as_str())));
        texts.extend(self.sensible_q.iter().map(|q| ("sensible_q.why".into(), q.why.as_str())));
        texts.extend(self.notes.iter().enumerate().map(|(i, note)| (format!("notes[{i}]"), note.as_str())));
        texts
    }
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, rename = "OpAmp")]
struct RawOpAmp {
    name: String,
    plus: String,
    minus: String,
    out: String,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, rename = "Output")]
struct RawOutput {
    name: String,
    node: String,
    shape: Shape,
    #[serde(default)]
    without: Vec<String>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields, rename = "Need")]
struct RawNeed {
    outputs: Vec<String>,
    ratio: (Vec<String>, Vec<String>),
    #[serde(default)]
    at_least: Vec<Term>,
    #[serde(default)]
    at_most: Vec<Term>,
    #[serde(default)]
    why: String,
}

/// The most slots and nodes that a circuit may have: the expansion doubles with each node.
const MOST: (usize, usize) = (24, 14);

impl Circuit {
    /// Reads and analyses a circuit file.
    ///
    /// # Errors
    /// All faults of the text, each with its place: syntax, unknown keys or names, slots that are neither R nor C,
    /// names given twice, outputs that the network does not determine or that have another shape than they claim.
    pub fn parse(source: &str) -> Result<Circuit, CircuitError> {
        let raw: RawCircuit = text::parse(source).map_err(|faults| CircuitError { faults })?;
        let mut reader = Reader { faults: Vec::new(), nodes: vec!["0".into(), "in".into()], slots: Vec::new() };
        let circuit = reader.circuit(raw);
        match circuit {
            Some(circuit) if reader.faults.is_empty() => Ok(circuit),
            _ => Err(CircuitError { faults: text::located(source, reader.faults) }),
        }
    }

    /// The output of that name.
    pub fn output(&self, name: &str) -> Option<&Output> {
        self.outputs.iter().find(|o| o.name == name)
    }

    /// The index of the slot of that name.
    pub fn slot(&self, name: &str) -> Option<usize> {
        self.slots.iter().position(|s| s.name == name)
    }

    /// The transfer function from the source to any node, in the slot admittances, with the slots filled as for an
    /// output; `None` where the network does not determine it.
    pub fn transfer_to(&self, node: usize, output: &Output) -> Option<Transfer> {
        let ends: Vec<[usize; 2]> = self.slots.iter().map(|s| s.nodes).collect();
        let capacitors: Vec<bool> = self.slots.iter().map(|s| s.kind == Kind::Capacitor).collect();
        let op_amps: Vec<[usize; 3]> = self.op_amps.iter().map(|o| [o.plus, o.minus, o.out]).collect();
        let network = Network { nodes: self.nodes.len(), slots: &ends, capacitors: &capacitors, op_amps: &op_amps };
        let keep: Vec<Option<usize>> =
            (0..self.slots.len()).map(|slot| (!output.without.contains(&slot)).then_some(slot)).collect();
        Some(network.transfer(node)?.substituted(&keep, self.slots.len()))
    }

    /// How many slots of a kind an output fills.
    pub fn count(&self, output: &Output, kind: Kind) -> usize {
        output.filled(self).filter(|&s| self.slots[s].kind == kind).count()
    }
}

/// Collects faults while a raw file is turned into a circuit.
struct Reader {
    faults: Vec<Fault>,
    nodes: Vec<String>,
    slots: Vec<Slot>,
}

impl Reader {
    fn fault(&mut self, path: String, message: String, help: &str) {
        self.faults.push(Fault::at(path, message).help(help));
    }

    fn circuit(&mut self, raw: RawCircuit) -> Option<Circuit> {
        for (path, text) in raw.texts() {
            if let Some(message) = control_character(text) {
                self.fault(path, message, CONTROL_HELP);
            }
        }
        for (i, (name, from, to)) in raw.elements.iter().enumerate() {
            self.element(i, name, from, to);
        }
        let mut op_amps = Vec::new();
        for (i, o) in raw.op_amps.into_iter().enumerate() {
            let [plus, minus, out] = [o.plus, o.minus, o.out].map(|n| self.node(&n));
            if out < 2 {
                let what = "an op-amp output must be a node of its own, not ground or the source";
                self.fault(format!("op_amps[{i}].out"), what.into(), "name another node");
            }
            op_amps.push(OpAmp { name: o.name, plus, minus, out });
        }
        if self.nodes.len() > MOST.1 || self.slots.len() > MOST.0 {
            let found = format!("{} elements on {} nodes", self.slots.len(), self.nodes.len());
            let message = format!("{found}: at most {} elements on {} nodes are analysed", MOST.0, MOST.1);
            self.fault("elements".into(), message, "split the network into sections");
            return None;
        }
        let ties = raw.ties.iter().enumerate().map(|(i, tie)| self.tied(&format!("ties[{i}]"), tie)).collect();
        let outputs = raw.outputs.iter().enumerate();
        let outputs: Vec<Output> = outputs.filter_map(|(i, o)| self.output(i, o, &op_amps)).collect();
        if raw.outputs.is_empty() {
            self.fault("outputs".into(), "a circuit needs an output".into(), "name a node and its shape");
        }
        let mut needs = Vec::new();
        for (i, need) in raw.needs.into_iter().enumerate() {
            let above = self.named(&format!("needs[{i}].ratio"), &need.ratio.0);
            let below = self.named(&format!("needs[{i}].ratio"), &need.ratio.1);
            for (k, name) in need.outputs.iter().enumerate() {
                if !raw.outputs.iter().any(|o| &o.name == name) {
                    let message = format!("there is no output `{name}`");
                    self.fault(format!("needs[{i}].outputs[{k}]"), message, "name an output of this circuit");
                }
            }
            if need.at_least.is_empty() == need.at_most.is_empty() {
                let message = "a need has either at_least or at_most".into();
                self.fault(format!("needs[{i}]"), message, "give exactly one of the two");
            }
            let at_least = !need.at_least.is_empty();
            let terms = if at_least { need.at_least } else { need.at_most };
            needs.push(Need { outputs: need.outputs, above, below, at_least, terms, why: need.why });
        }
        Some(Circuit {
            id: raw.id,
            title: raw.title,
            source: raw.source,
            nodes: self.nodes.clone(),
            slots: self.slots.clone(),
            op_amps,
            outputs,
            ties,
            needs,
            sensible_q: raw.sensible_q,
            notes: raw.notes,
        })
    }

    fn node(&mut self, name: &str) -> usize {
        self.nodes.iter().position(|n| n == name).unwrap_or_else(|| {
            self.nodes.push(name.to_string());
            self.nodes.len() - 1
        })
    }

    fn element(&mut self, index: usize, name: &str, from: &str, to: &str) {
        let path = format!("elements[{index}]");
        let kind = match name.chars().next() {
            Some('R') => Kind::Resistor,
            Some('C') => Kind::Capacitor,
            _ => {
                let message = format!("`{name}` is neither a resistor nor a capacitor");
                return self.fault(path, message, "begin the name with R or C");
            }
        };
        if self.slots.iter().any(|s| s.name == name) {
            return self.fault(path, format!("`{name}` is there twice"), "give each element its own name");
        }
        let nodes = [self.node(from), self.node(to)];
        if nodes[0] == nodes[1] {
            let message = format!("`{name}` has both ends on node `{from}`");
            return self.fault(path, message, "connect it to two nodes");
        }
        self.slots.push(Slot { name: name.to_string(), kind, nodes });
    }

    fn named(&mut self, path: &str, names: &[String]) -> Vec<usize> {
        let mut found: Vec<usize> = Vec::new();
        for name in names {
            match self.slots.iter().position(|s| &s.name == name) {
                Some(slot) => found.push(slot),
                None => {
                    let list: Vec<&str> = self.slots.iter().map(|s| s.name.as_str()).collect();
                    let help = format!("the elements are {}", list.join(", "));
                    self.fault(path.to_string(), format!("there is no element `{name}`"), &help);
                }
            }
        }
        found
    }

    fn tied(&mut self, path: &str, names: &[String]) -> Vec<usize> {
        let slots = self.named(path, names);
        if slots.iter().any(|&slot| self.slots[slot].kind != self.slots[slots[0]].kind) {
            let message = "a resistor and a capacitor cannot carry the same value".to_string();
            self.fault(path.to_string(), message, "tie slots of one kind");
        }
        slots
    }

    fn output(&mut self, index: usize, raw: &RawOutput, op_amps: &[OpAmp]) -> Option<Output> {
        let path = format!("outputs[{index}]");
        let Some(node) = self.nodes.iter().position(|n| n == &raw.node) else {
            let help = format!("the nodes are {}", self.nodes.join(", "));
            self.fault(format!("{path}.node"), format!("there is no node `{}`", raw.node), &help);
            return None;
        };
        let without = self.named(&format!("{path}.without"), &raw.without);
        if !self.faults.is_empty() {
            return None;
        }
        let ends: Vec<[usize; 2]> = self.slots.iter().map(|s| s.nodes).collect();
        let capacitors: Vec<bool> = self.slots.iter().map(|s| s.kind == Kind::Capacitor).collect();
        let amplifiers: Vec<[usize; 3]> = op_amps.iter().map(|o| [o.plus, o.minus, o.out]).collect();
        let network =
            Network { nodes: self.nodes.len(), slots: &ends, capacitors: &capacitors, op_amps: &amplifiers };
        let Some(full) = network.transfer(node) else {
            let message = format!("the network does not determine the voltage of node `{}`", raw.node);
            let help = "check for floating nodes, and that each op-amp has its own output and a feedback path";
            self.fault(path, message, help);
            return None;
        };
        let keep: Vec<Option<usize>> = (0..self.slots.len()).map(|s| (!without.contains(&s)).then_some(s)).collect();
        let transfer = full.substituted(&keep, self.slots.len());
        if let Some(problem) = shape_problem(raw.shape, &transfer) {
            let message = format!("node `{}` does not give {}: {problem}", raw.node, with_article(raw.shape.name()));
            self.fault(format!("{path}.shape"), message, "name the shape that the network gives at this node");
            return None;
        }
        Some(Output { name: raw.name.clone(), node, shape: raw.shape, without, transfer })
    }
}

/// Why a transfer function cannot have a shape, if it cannot. A coefficient that the shape lacks must be able to vanish.
fn shape_problem(shape: Shape, transfer: &Transfer) -> Option<String> {
    let order = transfer.denominator.len().saturating_sub(1);
    if order != shape.order() {
        return Some(format!("its denominator is of order {order}"));
    }
    if transfer.denominator.iter().any(|p| p.is_empty()) {
        return Some("a power of s is missing in its denominator".into());
    }
    if transfer.numerator.len() > order + 1 {
        return Some("its numerator is of higher order than its denominator".into());
    }
    for (power, wanted) in shape.numerator().into_iter().enumerate() {
        let coefficient = transfer.numerator.get(power);
        match (wanted, coefficient.filter(|p| !p.is_empty())) {
            (true, None) => return Some(format!("its numerator has no term in s^{power}")),
            (false, Some(p)) if p.sign() != 0 => {
                return Some(format!("its numerator has a term in s^{power} that cannot vanish"));
            }
            _ => {}
        }
    }
    None
}
