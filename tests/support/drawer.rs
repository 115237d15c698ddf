//! Every set of a drawer, one after the other.
//!
//! Nothing of the search is used here, and of the supply only what its lines say. From the requirements:
//! - a part that was not measured serves if bodies per board x boards + spares <= what its lines add up to, over the
//!   whole filter; if not, its part number is bought, where that is allowed;
//! - a measured part is there once over all boards and is never bought;
//! - part numbers: different labels (kind, nominal value, tolerance, temperature coefficient, dielectric), or different
//!   values where there is no line;
//! - a row is listed if no other set has an error, part numbers, part numbers to buy, placed parts and, where rows are
//!   ranked by it, a cost that are all no larger; errors are compared as steps of 1e-7;
//! - slots that do not reach the response are filled too, in every way.

use std::collections::{BTreeMap, BTreeSet};

use roundwell::circuit;
use roundwell::parts::{Buying, Choice, LotId, Shelf, Stock, StockLine, Supply};
use roundwell::search::{
    BuiltBoard, Chosen, Goals, Joint, Outcome, Pairs, Part, Problem, Rank, Row, SectionProblem, Unwatched, shortlist,
};
use roundwell::target::{Section, Shape};
use roundwell::units::{Kind, Value};
use roundwell::verify::verify;

use crate::support::{Judge, Numbers, TAU, agree, cascade, filled, library, problem, values};

// ---- drawers ------------------------------------------------------------------------------------------------------

/// A stock list as a supply, and what may go into a slot.
#[derive(Clone, Debug)]
pub struct Drawer {
    pub supply: Supply,
    resistors: Vec<Choice>,
    capacitors: Vec<Choice>,
}

impl Drawer {
    /// The drawer of a stock list.
    pub fn read(csv: &str) -> Drawer {
        let stock = Stock::read(csv.as_bytes()).unwrap();
        assert_eq!(stock.faults, [], "{csv}");
        let supply = Supply::of_stock(&stock);
        let of = |kind: Kind| {
            let lots = supply.lots().filter(|(_, lot)| lot.kind == kind);
            lots.map(|(id, lot)| Choice { value: lot.measured.unwrap_or(lot.nominal), lot: Some(id) }).collect()
        };
        Drawer { resistors: of(Kind::Resistor), capacitors: of(Kind::Capacitor), supply }
    }

    /// A drawer from lines without the header: kind, value, quantity, tolerance, price, measured value.
    pub fn lines(lines: &[&str]) -> Drawer {
        Drawer::read(&format!("kind,value,quantity,tolerance,price,measured\n{}\n", lines.join("\n")))
    }

    /// No list: everything of these values can be had.
    pub fn of(resistors: &str, capacitors: &str) -> Drawer {
        let of = |kind, text| values(kind, text).into_iter().map(Choice::from).collect();
        let (resistors, capacitors) = (of(Kind::Resistor, resistors), of(Kind::Capacitor, capacitors));
        Drawer { supply: Supply::default(), resistors, capacitors }
    }

    /// Values that no line names may be bought too.
    pub fn beside(mut self, kind: Kind, text: &str) -> Drawer {
        let choices = if kind == Kind::Resistor { &mut self.resistors } else { &mut self.capacitors };
        choices.extend(values(kind, text).into_iter().map(Choice::from));
        self
    }

    pub fn boards(mut self, boards: u64, spares: u64) -> Drawer {
        (self.supply.boards, self.supply.spares) = (boards, spares);
        self
    }

    pub fn buying(mut self, buying: Buying) -> Drawer {
        self.supply.buying = buying;
        self
    }

    fn choices(&self, kind: Kind) -> &[Choice] {
        if kind == Kind::Resistor { &self.resistors } else { &self.capacitors }
    }

    pub fn shelf(&self, kind: Kind) -> Shelf {
        Shelf::of_choices(kind, self.choices(kind).iter().copied()).unwrap()
    }

    pub fn section(&self, target: Section, id: &str, output: &str) -> SectionProblem {
        let (r, c) = (self.shelf(Kind::Resistor), self.shelf(Kind::Capacitor));
        SectionProblem::new(target, library(id), output, &r, &c).unwrap()
    }

    pub fn problem(&self, section: SectionProblem, goals: Goals) -> Problem {
        Problem { supply: self.supply.clone(), ..problem(section, goals) }
    }

    /// The shelf of what carries one of these labels.
    pub fn labelled(&self, kind: Kind, text: &str) -> Shelf {
        let wanted = values(kind, text);
        let label = |choice: &Choice| choice.lot.map_or(choice.value, |id| self.supply.lot(id).nominal);
        self.shelf(kind).filtered(|choice| wanted.contains(&label(choice))).unwrap()
    }
}

/// What a drawer is made of, to be made again with a line more or less.
#[derive(Clone, Debug)]
pub struct Recipe {
    /// Kind, value, quantity, tolerance, price, measured value; none without a stock list.
    pub lines: Vec<String>,
    /// Values without a stock list, and what may be bought beside it.
    pub beside: Vec<(Kind, Vec<Value>)>,
    pub boards: u64,
    pub spares: u64,
    pub buying: Buying,
}

impl Recipe {
    pub fn drawer(&self) -> Drawer {
        let lines: Vec<&str> = self.lines.iter().map(String::as_str).collect();
        let empty = Drawer { supply: Supply::default(), resistors: Vec::new(), capacitors: Vec::new() };
        let mut drawer = if lines.is_empty() { empty } else { Drawer::lines(&lines) };
        for (kind, values) in &self.beside {
            let choices = if *kind == Kind::Resistor { &mut drawer.resistors } else { &mut drawer.capacitors };
            choices.extend(values.iter().copied().map(Choice::from));
        }
        (drawer.supply.boards, drawer.supply.spares) = (self.boards, self.spares);
        if !lines.is_empty() {
            drawer.supply.buying = self.buying;
        }
        drawer
    }
}

/// Pairs of one kind, at most so many.
pub fn paired(mut section: SectionProblem, kind: Kind, joints: &[Joint], most: usize) -> SectionProblem {
    let slots = &section.circuit.slots;
    let mut allowed = section.pairs.joints.clone();
    allowed.resize(slots.len(), Vec::new());
    for (slot, joint) in slots.iter().zip(&mut allowed).filter(|(slot, _)| slot.kind == kind) {
        assert_eq!(slot.kind, kind);
        *joint = joints.to_vec();
    }
    section.pairs = Pairs { joints: allowed, most };
    section
}

// ---- what there is ------------------------------------------------------------------------------------------------

/// A part number.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
enum Number {
    /// That of a line; index of the first lot of that label.
    Labelled(usize),
    /// A value that no line names.
    Bare(Kind, Value),
}

struct Thing {
    measured: bool,
    /// `None` is enough.
    there: Option<u64>,
    number: usize,
    price: Option<u64>,
}

/// What the lines of a supply add up to.
struct Things {
    of: BTreeMap<LotId, (usize, Thing)>,
    has_stock: bool,
    boards: u64,
    spares: u64,
    most_to_buy: usize,
}

impl Things {
    fn new(supply: &Supply) -> Things {
        let all: Vec<(LotId, &[StockLine])> = supply.lots().map(|(id, lot)| (id, lot.lines.as_slice())).collect();
        let label = |lines: &[StockLine]| {
            let line = &lines[0];
            (
                line.kind,
                line.value,
                line.tolerance,
                line.temperature_coefficient,
                line.dielectric.clone(),
                line.ageing,
            )
        };
        let thing = |lines: &[StockLine]| {
            let measured = lines[0].measured.is_some();
            assert!(lines.iter().skip(1).all(|line| lines[0].is_same_choice(line)));
            let there = match measured {
                true => Some(lines[0].quantity.map_or(1, |quantity| quantity.min(1))),
                false => lines.iter().map(|line| line.quantity).sum::<Option<u64>>(),
            };
            let number = all.iter().position(|(_, other)| label(other) == label(lines)).unwrap();
            let same = lines.iter().all(|line| line.price == lines[0].price);
            let price = lines[0].price.as_ref().filter(|_| same).map(|price| price.millionths);
            Thing { measured, there, number, price }
        };
        // Lines that are one choice must not be in two lots.
        for (i, (_, one)) in all.iter().enumerate() {
            assert!(all.iter().skip(i + 1).all(|(_, two)| !one[0].is_same_choice(&two[0])));
        }
        let most_to_buy = match supply.buying {
            Buying::Forbidden => 0,
            Buying::AtMost(most) => most,
            Buying::Allowed => usize::MAX,
        };
        Things {
            of: all.iter().enumerate().map(|(i, (id, lines))| (*id, (i, thing(lines)))).collect(),
            has_stock: supply.has_stock(),
            boards: supply.boards,
            spares: supply.spares,
            most_to_buy,
        }
    }

    fn get(&self, choice: &Choice) -> Option<&(usize, Thing)> {
        choice.lot.map(|id| &self.of[&id])
    }

    /// What must be the same on all boards.
    fn alike(&self, choice: &Choice) -> Alike {
        let has_measured = |number| self.of.values().any(|(_, thing)| thing.measured && thing.number == number);
        match self.get(choice) {
            Some((_, thing)) if thing.measured || LABELS_MIX && has_measured(thing.number) => {
                Alike::Measured(thing.number)
            }
            _ => Alike::Plain(*choice),
        }
    }

    /// What a board takes, and which measured parts, as bits; `None` where there is not enough.
    fn takes(&self, uses: &[(Kind, Choice, u64)]) -> Option<(Takes, u64)> {
        let mut sums: BTreeMap<(Kind, Choice), u64> = BTreeMap::new();
        uses.iter().for_each(|(kind, choice, bodies)| *sums.entry((*kind, *choice)).or_default() += bodies);
        let (mut numbers, mut bought, mut placed) = (BTreeSet::new(), BTreeSet::new(), 0);
        let (mut cost, mut measured) = (Some(0), 0);
        for (&(kind, choice), &bodies) in &sums {
            let thing = self.get(&choice);
            let number = thing.map_or(Number::Bare(kind, choice.value), |(_, thing)| Number::Labelled(thing.number));
            numbers.insert(number);
            placed += bodies as usize;
            let price = thing.and_then(|(_, thing)| thing.price);
            cost = cost.zip(price).map(|(sum, price)| sum + price * bodies);
            match thing {
                Some((index, Thing { measured: true, there, .. })) => {
                    if bodies > 1 || *there == Some(0) {
                        return None;
                    }
                    measured |= 1 << index;
                }
                Some((_, thing)) if thing.there.is_none_or(|there| bodies * self.boards + self.spares <= there) => {}
                Some(_) => {
                    bought.insert(number);
                }
                None if self.has_stock => {
                    bought.insert(number);
                }
                None => {}
            }
        }
        let to_buy = bought.len();
        let takes = Takes { part_numbers: numbers.len(), to_buy, placed, cost };
        (to_buy <= self.most_to_buy).then_some((takes, measured))
    }
}

// ---- fronts -------------------------------------------------------------------------------------------------------

/// What a set takes.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Takes {
    pub part_numbers: usize,
    pub to_buy: usize,
    pub placed: usize,
    /// In millionths; `None` where it does not count or is not known.
    pub cost: Option<u64>,
}

impl Takes {
    fn no_more_than(&self, other: &Takes) -> bool {
        self.part_numbers <= other.part_numbers
            && self.to_buy <= other.to_buy
            && self.placed <= other.placed
            && self.cost <= other.cost
    }
}

/// A row as it is compared.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Point {
    pub error: f64,
    pub takes: Takes,
}

/// An error in steps.
fn steps(error: f64) -> u64 {
    (error / 1e-7).round() as u64
}

/// Points that no other beats.
#[derive(Clone, Debug, Default)]
pub struct Front(pub Vec<Point>);

impl Front {
    /// The least error among all that take no more.
    fn best(&self, takes: &Takes) -> f64 {
        let fewer = self.0.iter().filter(|point| point.takes.no_more_than(takes));
        fewer.map(|point| point.error).fold(f64::INFINITY, f64::min)
    }

    fn add(&mut self, point: Point) {
        let beats = |a: &Point, b: &Point| steps(a.error) <= steps(b.error) && a.takes.no_more_than(&b.takes);
        if self.0.iter().any(|other| beats(other, &point)) {
            return;
        }
        self.0.retain(|other| !beats(&point, other));
        self.0.push(point);
        self.0.sort_by_key(|point| point.takes);
    }

    /// Whether two fronts have the same points.
    pub fn is(&self, other: &Front) -> bool {
        let same = |(a, b): (&Point, &Point)| a.takes == b.takes && (a.error - b.error).abs() <= 1.5e-7;
        self.0.len() == other.0.len() && self.0.iter().zip(&other.0).all(same)
    }

    /// The front with errors below a resolution taken as nothing.
    fn to(&self, resolution: f64) -> Front {
        let mut front = Front::default();
        for point in &self.0 {
            let error = if point.error < resolution { 0.0 } else { point.error };
            front.add(Point { error, takes: point.takes });
        }
        front
    }

    /// The best error for each number of part numbers and fewer.
    fn by_part_numbers(&self) -> Front {
        let mut front = Front::default();
        for point in &self.0 {
            let takes = Takes { part_numbers: point.takes.part_numbers, to_buy: 0, placed: 0, cost: None };
            front.add(Point { error: point.error, takes });
        }
        front
    }
}

// ---- every set ----------------------------------------------------------------------------------------------------

/// What may stand in a group of slots.
#[derive(Clone, Debug)]
pub struct Held {
    pub pieces: Vec<Choice>,
    pub joint: Option<Joint>,
    pub value: f64,
}

/// Slots that hold the same.
pub struct Group {
    pub slots: Vec<usize>,
    pub kind: Kind,
    /// Whether they do not move the response.
    pub silent: bool,
    pub held: Vec<Held>,
}

/// A piece for all boards: measured parts of one label are alike.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
enum Alike {
    Plain(Choice),
    Measured(usize),
}

/// Whether a slot may hold a measured part on one board and one of the same label that was not measured on another: all
/// boards have the same labels in the same slots.
const LABELS_MIX: bool = false;

type Structure = Vec<(Option<Joint>, Vec<Alike>)>;

/// All sets of a section.
pub struct Oracle<'a> {
    problem: &'a Problem,
    section: &'a SectionProblem,
    things: Things,
    groups: Vec<Group>,
    judge: Judge,
    limit: f64,
    memo: BTreeMap<Vec<u64>, Result<f64, f64>>,
    pub sets: u64,
    pub front: Front,
    /// Sets that came onto the front, in words, for messages.
    pub shown: Vec<(Takes, f64, String)>,
    /// For boards of the same labels: what they take, and for each choice of measured parts the error.
    structures: BTreeMap<Structure, Vec<(Takes, u64, f64)>>,
    /// For boards each of its own: the least error by part numbers and measured parts.
    own: BTreeMap<(usize, u64), f64>,
}

fn value_of(kind: Kind, joint: Joint, a: &Choice, b: &Choice) -> f64 {
    let (a, b) = (a.value.to_f64(), b.value.to_f64());
    match (kind, joint) {
        (Kind::Resistor, Joint::Series) | (Kind::Capacitor, Joint::Parallel) => a + b,
        (Kind::Resistor, Joint::Parallel) | (Kind::Capacitor, Joint::Series) => 1.0 / (1.0 / a + 1.0 / b),
    }
}

/// The groups of slots of a section, with all that may stand in them.
pub fn groups(section: &SectionProblem) -> Vec<Group> {
    let silent = silent(section);
    let mut groups: Vec<Group> = Vec::new();
    for slot in section.output().filled(&section.circuit) {
        if groups.iter().any(|group| group.slots.contains(&slot)) {
            continue;
        }
        let together = section.equal.iter().find(|equal| equal.contains(&slot));
        let slots: Vec<usize> = together.map_or(vec![slot], |equal| {
            section.output().filled(&section.circuit).filter(|slot| equal.contains(slot)).collect()
        });
        let kind = section.circuit.slots[slot].kind;
        let everywhere = |choice: &&Choice| slots.iter().all(|&s| section.shelves[s].choices().contains(*choice));
        let choices: Vec<Choice> = section.shelves[slot].choices().iter().filter(everywhere).copied().collect();
        let one = |&choice: &Choice| Held { pieces: vec![choice], joint: None, value: choice.value.to_f64() };
        let mut held: Vec<Held> = choices.iter().map(one).collect();
        let silent = slots.iter().all(|slot| silent.contains(slot));
        for joint in [Joint::Series, Joint::Parallel] {
            let allowed = |&s: &usize| section.pairs.joints.get(s).is_some_and(|joints| joints.contains(&joint));
            if silent || !slots.iter().all(allowed) {
                continue;
            }
            for (i, a) in choices.iter().enumerate() {
                for b in &choices[i..] {
                    let value = value_of(kind, joint, a, b);
                    held.push(Held { pieces: vec![*a, *b], joint: Some(joint), value });
                }
            }
        }
        groups.push(Group { slots, kind, silent, held });
    }
    groups
}

/// The slots that do not move the response, tied ones taken together: found by trial.
fn silent(section: &SectionProblem) -> BTreeSet<usize> {
    let mut numbers = Numbers(11);
    let filled: Vec<usize> = section.output().filled(&section.circuit).collect();
    let together = |slot: usize| section.equal.iter().find(|e| e.contains(&slot)).cloned().unwrap_or(vec![slot]);
    let mut silent: BTreeSet<usize> = filled.iter().copied().collect();
    for _ in 0..3 {
        let mut base: Vec<f64> = (section.circuit.slots.iter())
            .map(|slot| match slot.kind {
                Kind::Resistor => numbers.between(1e3, 1e4),
                Kind::Capacitor => numbers.between(1e-8, 1e-7),
            })
            .collect();
        section.equal.iter().for_each(|equal| equal.iter().for_each(|&slot| base[slot] = base[equal[0]]));
        for w in [0.3, 1.0, 2.7].map(|ratio| ratio * TAU * 1e3) {
            let at = |values: &[f64]| circuit::response(&section.circuit, section.output(), values, w).unwrap();
            silent.retain(|&slot| {
                let mut other = base.clone();
                together(slot).iter().for_each(|&s| other[s] *= 1.7);
                (at(&base) - at(&other)).norm() <= 1e-9 * at(&base).norm()
            });
        }
    }
    silent
}

impl<'a> Oracle<'a> {
    /// Runs through all sets of the problem's only section.
    pub fn run(problem: &'a Problem, limit: f64) -> Oracle<'a> {
        let section = &problem.sections[0];
        let mut oracle = Oracle {
            problem,
            section,
            things: Things::new(&problem.supply),
            groups: groups(section),
            judge: Judge::new(std::slice::from_ref(&section.target), &problem.criterion),
            limit,
            memo: BTreeMap::new(),
            sets: 0,
            front: Front::default(),
            shown: Vec::new(),
            structures: BTreeMap::new(),
            own: BTreeMap::new(),
        };
        // The groups that set the response first.
        oracle.groups.sort_by_key(|group| group.silent);
        let mut chosen = Vec::new();
        oracle.enumerate(&mut chosen, 0);
        oracle.assign();
        oracle.assign_own();
        oracle
    }

    fn enumerate(&mut self, chosen: &mut Vec<usize>, pairs: usize) {
        let group = self.groups.get(chosen.len()).filter(|group| !group.silent);
        let Some(group) = group else { return self.fill(chosen) };
        let slots = group.slots.len();
        let is_pair: Vec<bool> = group.held.iter().map(|held| held.joint.is_some()).collect();
        for (i, is_pair) in is_pair.into_iter().enumerate() {
            let pairs = pairs + if is_pair { slots } else { 0 };
            if pairs <= self.section.pairs.most {
                chosen.push(i);
                self.enumerate(chosen, pairs);
                chosen.pop();
            }
        }
    }

    /// Fills the silent slots in every way.
    fn fill(&mut self, chosen: &mut Vec<usize>) {
        self.sets += 1;
        let mut ways = Vec::new();
        self.fillings(chosen, &mut ways);
        for (takes, measured, all) in ways {
            self.judge_set(&all, takes, measured);
        }
    }

    fn fillings(&self, chosen: &mut Vec<usize>, ways: &mut Vec<(Takes, u64, Vec<usize>)>) {
        if let Some(group) = self.groups.get(chosen.len()) {
            for i in 0..group.held.len() {
                chosen.push(i);
                self.fillings(chosen, ways);
                chosen.pop();
            }
            return;
        }
        let of = |(group, &i): (&'_ Group, &usize)| -> Vec<(Kind, Choice, u64)> {
            let bodies = group.slots.len() as u64;
            group.held[i].pieces.iter().map(|piece| (group.kind, *piece, bodies)).collect()
        };
        let uses: Vec<_> = self.groups.iter().zip(chosen.iter()).flat_map(of).collect();
        let Some((mut takes, measured)) = self.things.takes(&uses) else { return };
        if !self.is_in_impedance_range(chosen) {
            return;
        }
        if self.problem.goals.max_part_numbers.is_some_and(|most| takes.part_numbers > most) {
            return;
        }
        if self.problem.goals.rank == Rank::Cost {
            assert!(takes.cost.is_some(), "ranked by cost, and a price is not known");
        } else {
            takes.cost = None;
        }
        // The response is that of all ways.
        if !ways.iter().any(|(other, parts, _)| *parts == measured && other.no_more_than(&takes)) {
            ways.push((takes, measured, chosen.clone()));
        }
    }

    /// Whether the geometric mean of the resistances that set the response lies in the wanted range.
    fn is_in_impedance_range(&self, chosen: &[usize]) -> bool {
        let Some((from, to)) = self.problem.goals.impedance else { return true };
        let resistors = || self.groups.iter().zip(chosen).filter(|(g, _)| g.kind == Kind::Resistor && !g.silent);
        let count: usize = resistors().map(|(group, _)| group.slots.len()).sum();
        let logs: f64 = resistors().map(|(group, &i)| group.held[i].value.ln() * group.slots.len() as f64).sum();
        (from..=to).contains(&(logs / count as f64).exp())
    }

    fn judge_set(&mut self, chosen: &[usize], takes: Takes, measured: u64) {
        let boards = self.things.boards;
        let own = is_each_its_own(self.problem);
        let mut limit = self.limit;
        if boards == 1 || measured == 0 && !LABELS_MIX {
            limit = limit.min(self.front.best(&takes) + 1e-6);
        }
        if own {
            let known = self.own.get(&(takes.part_numbers, measured));
            limit = limit.max(if measured == 0 { 0.0 } else { self.limit });
            limit = limit.min(known.copied().unwrap_or(f64::INFINITY));
        }
        let mut slots = vec![1.0; self.section.circuit.slots.len()];
        for (group, &i) in self.groups.iter().zip(chosen) {
            group.slots.iter().for_each(|&slot| slots[slot] = group.held[i].value);
        }
        let Some(error) = self.error(&slots, limit) else { return };
        if own {
            let best = self.own.entry((takes.part_numbers, measured)).or_insert(f64::INFINITY);
            *best = best.min(error);
        }
        let stands_alone = measured == 0 || boards == 1;
        if stands_alone {
            if steps(error) < steps(self.front.best(&takes)) {
                let words = self.in_words(chosen);
                self.shown.push((takes, error, words));
            }
            self.front.add(Point { error, takes });
        }
        if boards > 1 && !own {
            let of = |(group, &i): (&Group, &usize)| {
                let held = &group.held[i];
                let mut pieces: Vec<Alike> = held.pieces.iter().map(|piece| self.things.alike(piece)).collect();
                pieces.sort_unstable();
                (held.joint, pieces)
            };
            let structure: Structure = self.groups.iter().zip(chosen).map(of).collect();
            self.structures.entry(structure).or_default().push((takes, measured, error));
        }
    }

    fn in_words(&self, chosen: &[usize]) -> String {
        let of = |(group, &i): (&Group, &usize)| {
            let names: Vec<&str> =
                group.slots.iter().map(|&slot| self.section.circuit.slots[slot].name.as_str()).collect();
            let held = &group.held[i];
            let pieces: Vec<String> = held.pieces.iter().map(|piece| named(self.problem, piece)).collect();
            format!("{}={}", names.join("="), pieces.join(sign(held.joint)))
        };
        self.groups.iter().zip(chosen).map(of).collect::<Vec<_>>().join(" ")
    }

    /// The error of a set; `None` if it is above the limit.
    fn error(&mut self, slots: &[f64], limit: f64) -> Option<f64> {
        let key: Vec<u64> = slots.iter().map(|value| value.to_bits()).collect();
        match self.memo.get(&key) {
            Some(Ok(error)) => return Some(*error).filter(|error| *error <= limit),
            Some(Err(above)) if *above >= limit => return None,
            _ => {}
        }
        let response = |w: f64| circuit::response(&self.section.circuit, self.section.output(), slots, w);
        let found = self.judge.error(&response, limit);
        self.memo.insert(key, found.ok_or(limit));
        found
    }

    /// Boards of the same labels: the worst board as good as can be.
    fn assign(&mut self) {
        for (_, boards) in std::mem::take(&mut self.structures) {
            let every: BTreeSet<Takes> = boards.iter().map(|(takes, ..)| *takes).collect();
            for most in every {
                let within = boards.iter().filter(|(takes, ..)| takes.no_more_than(&most));
                let within = within.map(|&(_, measured, error)| (measured, error)).collect();
                if let Some(error) = worst_board(within, self.things.boards) {
                    self.front.add(Point { error, takes: most });
                }
            }
        }
    }

    /// Boards each of its own, for each number of part numbers.
    fn assign_own(&mut self) {
        if self.own.is_empty() {
            return;
        }
        self.front = Front::default();
        let most = self.own.keys().map(|(count, _)| *count).max().unwrap_or(0);
        for count in 1..=most {
            let mut best: BTreeMap<u64, f64> = BTreeMap::new();
            for (&(_, measured), &error) in self.own.iter().filter(|((numbers, _), _)| *numbers <= count) {
                let known = best.entry(measured).or_insert(f64::INFINITY);
                *known = known.min(error);
            }
            if let Some(error) = worst_board(best.into_iter().collect(), self.things.boards) {
                let takes = Takes { part_numbers: count, to_buy: 0, placed: 0, cost: None };
                self.front.add(Point { error, takes });
            }
        }
    }
}

/// So many boards that have no measured part in common, the worst of them as good as can be. A board without measured
/// parts can be built any number of times.
fn worst_board(mut boards: Vec<(u64, f64)>, count: u64) -> Option<f64> {
    boards.sort_by(|a, b| a.1.total_cmp(&b.1).then(a.0.cmp(&b.0)));
    let mut seen = BTreeSet::new();
    boards.retain(|(measured, _)| seen.insert(*measured));
    fn fits(boards: &[(u64, f64)], taken: u64, count: u64) -> bool {
        let mut left = (0..boards.len()).rev().filter(|&i| boards[i].0 & taken == 0);
        count == 0 || left.any(|i| boards[i].0 == 0 || fits(&boards[..i], taken | boards[i].0, count - 1))
    }
    let of = |i: usize| boards[i].0 == 0 || fits(&boards[..i], boards[i].0, count - 1);
    (0..boards.len()).find(|&i| of(i)).map(|i| boards[i].1)
}

// ---- comparison ---------------------------------------------------------------------------------------------------

/// Whether boards may differ in all their parts.
fn is_each_its_own(problem: &Problem) -> bool {
    let is_measured = |choice: &Choice| problem.supply.lot_of(*choice).is_some_and(|lot| lot.measured.is_some());
    let on_shelves = |section: &SectionProblem| {
        let mut slots = section.output().filled(&section.circuit);
        slots.any(|slot| section.shelves[slot].choices().iter().any(is_measured))
    };
    problem.goals.each_board_its_own && problem.supply.boards > 1 && problem.sections.iter().any(on_shelves)
}

fn is_by_cost(problem: &Problem) -> bool {
    problem.goals.rank == Rank::Cost
}

fn point(problem: &Problem, row: &Row) -> Point {
    let takes = Takes {
        part_numbers: row.part_numbers.unwrap(),
        to_buy: row.to_buy.unwrap_or(0),
        placed: row.placed_parts,
        cost: row.cost.filter(|_| is_by_cost(problem)),
    };
    Point { error: row.deviation.error, takes }
}

/// The rows of an outcome that are on the front.
pub fn listed_front(problem: &Problem, outcome: &Outcome) -> Front {
    let mut rows: Vec<Point> =
        outcome.rows.iter().filter(|row| !row.alternative).map(|row| point(problem, row)).collect();
    rows.sort_by_key(|point| point.takes);
    Front(rows)
}

/// A choice as its value and the place of its lot.
fn named(problem: &Problem, choice: &Choice) -> String {
    let lot = choice.lot.map(|id| problem.supply.lots().position(|(other, _)| other == id).unwrap());
    format!("{}{}", choice.value, lot.map_or(String::new(), |lot| format!("#{lot}")))
}

fn sign(joint: Option<Joint>) -> &'static str {
    match joint {
        Some(Joint::Series) => " + ",
        _ => " || ",
    }
}

/// What stands in the slots, in words.
pub fn in_words(problem: &Problem, sections: &[Chosen]) -> String {
    let of = |(section, chosen): (&SectionProblem, &Chosen)| {
        let part = |part: &Part| {
            let pieces: Vec<String> = part.pieces.iter().map(|piece| named(problem, piece)).collect();
            format!("{}={}", section.circuit.slots[part.slot].name, pieces.join(sign(part.joint)))
        };
        chosen.parts.iter().map(part).collect::<Vec<_>>().join(" ")
    };
    problem.sections.iter().zip(sections).map(of).collect::<Vec<_>>().join("; ")
}

fn rows_in_words(problem: &Problem, outcome: &Outcome) -> String {
    let row = |row: &Row| {
        let boards: String = (row.boards.iter())
            .map(|board| format!("\n      {:.7} {}", board.error, in_words(problem, &board.sections)))
            .collect();
        format!("\n   {:?} {}{boards}", point(problem, row), in_words(problem, &row.sections))
    };
    outcome.rows.iter().map(row).collect()
}

fn drawer_in_words(problem: &Problem) -> String {
    let supply = &problem.supply;
    let lot = |(i, (_, lot)): (usize, (LotId, &roundwell::parts::Lot))| {
        format!(
            "\n   #{i} {} {} there {:?} measured {:?} price {:?}",
            lot.kind.name(),
            lot.nominal,
            lot.available,
            lot.measured.map(|value| value.to_string()),
            lot.price.as_ref().map(|price| price.millionths)
        )
    };
    let lots: String = supply.lots().enumerate().map(lot).collect();
    let mut text = format!(
        "\n boards {}, spares {}, buying {:?}, {:?}{lots}",
        supply.boards, supply.spares, supply.buying, problem.goals
    );
    for section in &problem.sections {
        let slot = |slot: usize| {
            let shelf = section.shelves[slot].choices().iter().map(|choice| named(problem, choice));
            let shelf = shelf.collect::<Vec<_>>().join(" ");
            let joints = section.pairs.joints.get(slot).cloned().unwrap_or_default();
            format!("\n   {}: {shelf} {joints:?}", section.circuit.slots[slot].name)
        };
        let slots: String = section.output().filled(&section.circuit).map(slot).collect();
        text += &format!(
            "\n {} {:?}, equal {:?}, pairs at most {}{slots}",
            section.circuit.id, section.target, section.equal, section.pairs.most
        );
    }
    text
}

/// Searches a problem of one section and compares with all its sets; gives back what was found.
pub fn compare_drawer(label: &str, problem: &Problem) -> Outcome {
    let outcome = shortlist(problem, &Unwatched);
    let own = is_each_its_own(problem);
    let limit = problem.goals.error_limit;
    let oracle = Oracle::run(problem, limit);
    let sets = oracle.sets;
    let mut expected = oracle.front.clone();
    let mut found = listed_front(problem, &outcome);
    let listed = rows_in_words(problem, &outcome);
    // Whatever is below the resolution is as good as exact, and yet each row is the best of its sort.
    let best_of_its_sort = |point: &Point| own || steps(point.error) <= steps(oracle.front.best(&point.takes) + 1e-7);
    let listed_is_best = found.0.iter().all(best_of_its_sort);
    (expected, found) = (expected.to(problem.goals.error_resolution), found.to(problem.goals.error_resolution));
    if own {
        (expected, found) = (expected.by_part_numbers(), found.by_part_numbers());
    }
    let shown = |point: &Point| {
        let same =
            |(takes, error, _): &&(Takes, f64, String)| *takes == point.takes && (error - point.error).abs() < 1e-9;
        format!("\n   {point:?} {}", oracle.shown.iter().find(same).map_or("", |(_, _, words)| words))
    };
    let say = || {
        format!(
            "{label}{}\n expected:{}\n found:{}\n listed:{listed}\n unmet {:?}",
            drawer_in_words(problem),
            expected.0.iter().map(shown).collect::<String>(),
            found.0.iter().map(|point| format!("\n   {point:?}")).collect::<String>(),
            outcome.sections[0].unmet
        )
    };
    assert!(sets <= 300_000, "{label}: {sets} sets");
    assert_eq!(outcome.stopped, None, "{}", say());
    for row in &outcome.rows {
        if let Err(what) = check_drawer_row(problem, row) {
            panic!(
                "a listed row is wrong: {what}\n   {:?} {}\n {}",
                point(problem, row),
                in_words(problem, &row.sections),
                say()
            );
        }
    }
    if expected.0.is_empty() {
        assert!(!outcome.within_limit, "rows that no set gives: {}", say());
        let whole = Oracle::run(problem, f64::INFINITY).front;
        let nearest = whole.0.iter().map(|point| point.error).fold(f64::INFINITY, f64::min);
        match outcome.rows.first() {
            None => {
                assert!(nearest.is_infinite(), "nothing is listed, the nearest has {nearest}: {}", say());
                assert!(outcome.marked.is_none());
            }
            Some(row) => {
                let best = outcome.rows.iter().map(|row| row.deviation.error).fold(f64::INFINITY, f64::min);
                assert!(
                    (best - nearest).abs() <= 1.5e-7 * (1.0 + nearest),
                    "{row:?}: the nearest has {nearest}: {}",
                    say()
                );
            }
        }
    } else {
        let short = outcome.sections[0].unmet.iter().find(|text| text.contains("in stock"));
        assert_eq!(short, None, "there is enough: {}", say());
        assert!(outcome.within_limit, "there are sets within the limit: {}", say());
        assert!(expected.is(&found), "fronts differ: {}", say());
        assert!(listed_is_best, "a better set takes no more: {}", say());
    }
    for row in &outcome.rows {
        assert_eq!(check_level(problem, row), Ok(()), "{}", say());
    }
    let wanted = outcome.rows.iter().filter(|row| row.deviation.error <= problem.goals.wanted_error);
    let marked = outcome.marked.map(|index| outcome.rows[index].part_numbers);
    assert_eq!(marked, wanted.map(|row| row.part_numbers).min(), "the wrong row is marked: {}", say());
    assert_eq!(verify(problem, &outcome), Ok(()), "{}", say());
    outcome
}

fn demand(holds: bool, what: impl Into<String>) -> Result<(), String> {
    if holds { Ok(()) } else { Err(what.into()) }
}

/// Recomputes a row from its parts, whatever number of sections: shelves, pairs, equalities, stock over all boards,
/// counts, errors.
pub fn check_drawer_row(problem: &Problem, row: &Row) -> Result<(), String> {
    let things = Things::new(&problem.supply);
    let alone = [BuiltBoard { error: row.deviation.error, sections: row.sections.clone() }];
    let several = !row.boards.is_empty();
    let boards: &[BuiltBoard] = if several { &row.boards } else { &alone };
    demand(!several || boards.len() as u64 == problem.supply.boards, "not as many boards as are built")?;
    let mut measured = 0u64;
    let mut most: Option<Takes> = None;
    let mut structures = BTreeSet::new();
    for board in boards {
        let mut uses: Vec<(Kind, Choice, u64)> = Vec::new();
        let mut structure = Vec::new();
        for (section, chosen) in problem.sections.iter().zip(&board.sections) {
            let slots: Vec<usize> = section.output().filled(&section.circuit).collect();
            demand(chosen.parts.iter().map(|part| part.slot).eq(slots.iter().copied()), "not all slots are filled")?;
            let silent = silent(section);
            let mut pairs = 0;
            for part in &chosen.parts {
                let name = &section.circuit.slots[part.slot].name;
                demand(part.kind == section.circuit.slots[part.slot].kind, "kind")?;
                for piece in &part.pieces {
                    let shelf = section.shelves[part.slot].choices();
                    demand(shelf.contains(piece), format!("{name}: {piece:?} is not on the shelf"))?;
                    uses.push((part.kind, *piece, 1));
                }
                let value = match (part.pieces.as_slice(), part.joint) {
                    ([one], None) => {
                        demand(part.value == Some(one.value), format!("{name}: value"))?;
                        one.value.to_f64()
                    }
                    ([a, b], Some(joint)) => {
                        pairs += 1;
                        let allowed = section.pairs.joints.get(part.slot).is_some_and(|j| j.contains(&joint));
                        demand(allowed && !silent.contains(&part.slot), format!("{name}: no pair may stand here"))?;
                        demand(part.value.is_none(), format!("{name}: a pair with a single value"))?;
                        value_of(part.kind, joint, a, b)
                    }
                    _ => return Err(format!("{name}: {:?} joined {:?}", part.pieces, part.joint)),
                };
                demand((part.ideal / value - 1.0).abs() < 1e-12, format!("{name}: {} is not {value}", part.ideal))?;
                let mut pieces: Vec<Alike> = part.pieces.iter().map(|piece| things.alike(piece)).collect();
                pieces.sort_unstable();
                structure.push((part.joint, pieces));
            }
            demand(pairs <= section.pairs.most, format!("{pairs} pairs"))?;
            for equal in &section.equal {
                let of = |slot: &usize| {
                    let part = chosen.parts.iter().find(|part| part.slot == *slot);
                    part.map(|part| (part.joint, part.pieces.clone()))
                };
                demand(equal.windows(2).all(|two| of(&two[0]) == of(&two[1])), "a tie is broken")?;
            }
        }
        structures.insert(structure);
        let (takes, here) = things.takes(&uses).ok_or("more is used than there is")?;
        demand(measured & here == 0, "a measured part stands on two boards")?;
        measured |= here;
        most = Some(most.map_or(takes, |other| Takes {
            part_numbers: other.part_numbers.max(takes.part_numbers),
            to_buy: other.to_buy.max(takes.to_buy),
            placed: other.placed.max(takes.placed),
            cost: other.cost.zip(takes.cost).map(|(a, b)| a.max(b)),
        }));
        let targets: Vec<Section> = problem.sections.iter().map(|s| s.target.clone()).collect();
        let judge = Judge::new(&targets, &problem.criterion);
        let as_row = Row { sections: board.sections.clone(), ..row.clone() };
        let values = filled(problem, &as_row);
        let error = judge.error(&cascade(problem, &values), f64::INFINITY).unwrap();
        demand(agree(error, board.error), format!("a board's error is {error}, {} is said", board.error))?;
    }
    demand(
        several || problem.supply.boards == 1 || measured == 0,
        "boards cannot be alike: they have measured parts",
    )?;
    demand(
        problem.goals.each_board_its_own || structures.len() == 1,
        "boards differ in more than which measured part stands where",
    )?;
    let worst = boards.iter().map(|board| board.error).fold(0.0, f64::max);
    demand(
        agree(worst, row.deviation.error),
        format!("the worst board has {worst}, the row {}", row.deviation.error),
    )?;
    demand(
        boards.iter().any(|board| agree(board.error, worst) && board.sections == row.sections),
        "the row does not show the worst board",
    )?;
    let Some(counted) = most else { return Err("no board".into()) };
    let has_stock = problem.supply.has_stock();
    demand(row.part_numbers == Some(counted.part_numbers), format!("{counted:?} counted"))?;
    demand(
        row.to_buy == has_stock.then_some(counted.to_buy),
        format!("{counted:?} counted, to buy {:?}", row.to_buy),
    )?;
    demand(row.placed_parts == counted.placed, format!("{counted:?} counted"))?;
    demand(row.cost == counted.cost, format!("{counted:?} counted, cost {:?}", row.cost))?;
    let limit = problem.goals.max_part_numbers.unwrap_or(usize::MAX);
    demand(counted.part_numbers <= limit, "more part numbers than the job allows")
}

/// Recomputes the impedance level of each section of a row: the mean of the resistances in the slots that set the
/// response.
fn check_level(problem: &Problem, row: &Row) -> Result<(), String> {
    for (section, chosen) in problem.sections.iter().zip(&row.sections) {
        let silent = silent(section);
        let counts = |part: &&Part| part.kind == Kind::Resistor && !silent.contains(&part.slot);
        let logs: Vec<f64> = chosen.parts.iter().filter(counts).map(|part| part.ideal.ln()).collect();
        let level = (!logs.is_empty()).then(|| (logs.iter().sum::<f64>() / logs.len() as f64).exp());
        let close = |(a, b): (f64, f64)| (a / b - 1.0).abs() < 1e-9;
        let agrees = level.zip(chosen.impedance).map_or(level == chosen.impedance, close);
        demand(agrees, format!("impedance {level:?}, {:?} is said", chosen.impedance))?;
    }
    Ok(())
}

/// The figures that a set gives, as a target: from the coefficients of its transfer function.
pub fn target_of(section: &SectionProblem, slots: &[f64]) -> Option<Section> {
    let output = section.output();
    let (n, d) = output.transfer.coefficients(slots);
    let fixed = |list: &[f64]| [0, 1, 2].map(|k| list.get(k).copied().unwrap_or(0.0));
    let h = roundwell::target::Biquad { num: fixed(&n), den: fixed(&d) };
    let order = output.shape.order();
    assert_ne!(output.shape, Shape::Notch, "not covered here");
    let like = Section::new("A", output.shape, 1.0, (order == 2).then_some(1.0), 1.0, None).ok()?;
    let figures = like.figures_of(&h);
    let sound = h.is_stable(order) && figures.q.is_none_or(|q| (0.2..10.0).contains(&q));
    let target = || Section::new("A", output.shape, figures.w0, figures.q, figures.gain, None).ok();
    sound.then(target).flatten()
}

/// Each row with what it is made of, whatever the order of the list: errors in steps.
pub fn rows_by_label(problem: &Problem, outcome: &Outcome) -> Vec<String> {
    let piece = |choice: &Choice| match problem.supply.lot_of(*choice) {
        None => format!("{}", choice.value),
        Some(lot) => format!("{} of {} {:?}", choice.value, lot.nominal, lot.lines[0].tolerance),
    };
    let of = |chosen: &Chosen| {
        let parts = chosen.parts.iter();
        let parts = parts.map(|p| (p.slot, p.joint, p.pieces.iter().map(piece).collect::<Vec<_>>()));
        format!("{:?}", parts.collect::<Vec<_>>())
    };
    let row = |row: &Row| {
        let boards = row.boards.iter().flat_map(|board| board.sections.iter().map(of)).collect::<Vec<_>>();
        let sections: Vec<String> = row.sections.iter().map(of).collect();
        format!("{} {:?} {sections:?} {boards:?}", steps(row.deviation.error), point(problem, row).takes)
    };
    outcome.rows.iter().map(row).collect()
}

/// The lots that a row takes from.
pub fn lots_used(outcome: &Outcome) -> BTreeSet<LotId> {
    let sections = outcome
        .rows
        .iter()
        .flat_map(|row| row.sections.iter().chain(row.boards.iter().flat_map(|board| board.sections.iter())));
    let pieces = sections.flat_map(|chosen| chosen.parts.iter().flat_map(|part| part.pieces.iter()));
    pieces.filter_map(|piece| piece.lot).collect()
}

/// About how many sets there are.
pub fn section_size(section: &SectionProblem) -> f64 {
    // Sets by how many of their slots hold a pair.
    let mut sets = vec![1.0];
    for group in groups(section) {
        let pairs = group.held.iter().filter(|held| held.joint.is_some()).count() as f64;
        let singles = group.held.len() as f64 - pairs;
        let mut next = vec![0.0; sets.len() + group.slots.len()];
        for (i, count) in sets.iter().enumerate() {
            next[i] += count * singles;
            next[i + group.slots.len()] += count * pairs;
        }
        next.truncate(section.pairs.most + 1);
        sets = next;
    }
    sets.iter().sum()
}
