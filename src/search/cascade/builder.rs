//! The choice of pairing, order and gains, and the sections built for it.

use rayon::prelude::*;

use crate::target::{Band, Biquad, Design, Parts, Section, SectionError, Zeros, magnitude_at_reference, section_of};

use crate::units::rounded;

use super::grid::{Grid, grid, peak};
use super::table::{ALIKE, Levels, Table, best_pairing};
use super::unit::{Stage, Unit};
use super::{
    Cascade, CascadeError, CascadeRequest, CascadeSection, Gains, Level, OpAmpLevel, Pairing, Pairings, Sequence,
    Swing,
};

/// Up to this many sections of second order all pairings are compared.
const ALL_PAIRINGS: usize = 4;
/// Up to this many sections pairings are improved by exchanges.
const EXCHANGES: usize = 8;
/// Up to this many sections every order is solved for; beyond, the one that is best if levels follow the gains.
const ALL_ORDERS: usize = 3;
/// Significant digits of the gains chosen for headroom.
const GAIN_DIGITS: usize = 3;
/// How often gains are set and sections solved anew: levels inside a section do not quite follow its gain.
const ROUNDS: usize = 2;

/// Puts the poles and zeros of a filter together into sections.
///
/// `over_dc` is the gain of the reference over that where the prototype has DC; `pass_end` the end of the pass band in
/// the prototype; `stage_of` gives what realises a section, if anything does.
///
/// # Errors
/// Lists that do not fit the filter, gains that the circuits cannot give.
pub fn cascade(
    design: &Design,
    band: Band,
    over_dc: f64,
    pass_end: f64,
    request: &CascadeRequest,
    stage_of: &mut dyn FnMut(&Section) -> Option<Stage>,
) -> Result<Cascade, CascadeError> {
    let parts = Parts::new(&design.roots);
    let grid = grid(&parts, band, pass_end);
    let mut builder = Builder { parts: &parts, band, grid: &grid, over_dc, request, known: Vec::new(), stage_of };
    let nearest = parts.nearest_zeros();
    let has_choice = parts.zeros.iter().any(|zeros| !alike(*zeros, parts.zeros[0]));
    let (pairing, mut pairings) = builder.pairing(has_choice, &nearest)?;
    let mut found = builder.compared(&pairing)?;
    let mut nearest_zeros = None;
    if has_choice {
        let other = if pairing == nearest { None } else { Some(builder.compared(&nearest)?) };
        nearest_zeros = Some(other.as_ref().unwrap_or(&found).best.swing);
        if let Some(other) =
            other.filter(|other| request.pairing == Pairing::Headroom && better(&other.best, &found.best))
        {
            found = other;
        }
    } else {
        pairings = Pairings::One;
    }
    let Compared { best, rising_q, falling_q } = found;
    let responses: Vec<Biquad> = best.units.iter().map(Unit::output).collect();
    Ok(Cascade {
        gain: responses.iter().map(|h| magnitude_at_reference(h, band)).product::<f64>() * over_dc,
        output: peak(&grid, |w| responses.iter().map(|h| h.value(w).norm()).product()),
        swing: Swing {
            chosen: best.swing.exp(),
            rising_q: rising_q.exp(),
            falling_q: falling_q.exp(),
            nearest_zeros: nearest_zeros.map(f64::exp),
        },
        pairings,
        has_all_orders: best.units.len() <= ALL_ORDERS,
        sections: sections(&best, &grid),
        parts,
    })
}

/// Whether one attempt swings less than another by more than rounding.
fn better(a: &Attempt, b: &Attempt) -> bool {
    a.swing < b.swing - ALIKE
}

/// Whether two sets of zeros lie at the same place.
fn alike(a: Zeros, b: Zeros) -> bool {
    match (a, b) {
        (Zeros::Pair(a), Zeros::Pair(b)) => (a / b - 1.0).abs() < 1e-12,
        _ => a == b,
    }
}

/// The order by Q; first-order sections count as the lowest.
fn by_q(units: &[Unit], rising: bool) -> Vec<usize> {
    let q = |unit: usize| units[unit].section.q.unwrap_or(0.0);
    let mut order: Vec<usize> = (0..units.len()).collect();
    order.sort_by(|&a, &b| if rising { q(a).total_cmp(&q(b)) } else { q(b).total_cmp(&q(a)) });
    order
}

fn is_permutation(list: &[usize], count: usize) -> bool {
    list.len() == count && (0..count).all(|member| list.contains(&member))
}

/// Every order of `count` members.
fn permutations(count: usize) -> Vec<Vec<usize>> {
    let Some(last) = count.checked_sub(1) else { return vec![Vec::new()] };
    let longer = |order: Vec<usize>| {
        (0..count).map(move |place| {
            let mut order = order.clone();
            order.insert(place, last);
            order
        })
    };
    permutations(last).into_iter().flat_map(longer).collect()
}

/// One way to build the filter.
struct Attempt {
    pairing: Vec<usize>,
    /// The numbers of the poles in signal order.
    order: Vec<usize>,
    /// The sections in signal order, with their gains, solved for them.
    units: Vec<Unit>,
    /// As a logarithm.
    swing: f64,
}

/// What was taken for a pairing, and the swings of the customary orders.
struct Compared {
    best: Attempt,
    rising_q: f64,
    falling_q: f64,
}

/// Builds sections, and remembers those already solved.
struct Builder<'a> {
    parts: &'a Parts,
    band: Band,
    grid: &'a Grid,
    over_dc: f64,
    request: &'a CascadeRequest,
    known: Vec<((usize, usize), Unit)>,
    stage_of: &'a mut dyn FnMut(&Section) -> Option<Stage>,
}

impl Builder<'_> {
    /// The section of second order of a set of poles and one of zeros, with gain 1.
    fn unit(&mut self, poles: usize, zeros: usize) -> Result<Unit, CascadeError> {
        let list = &self.parts.zeros;
        let zeros = (0..zeros).find(|&earlier| alike(list[earlier], list[zeros])).unwrap_or(zeros);
        if let Some((_, unit)) = self.known.iter().find(|(key, _)| *key == (poles, zeros)) {
            return Ok(unit.clone());
        }
        let unit = self.built(section_of("", self.parts.poles[poles], list[zeros], 1.0))?;
        self.known.push(((poles, zeros), unit.clone()));
        Ok(unit)
    }

    fn built(&mut self, section: Result<Section, SectionError>) -> Result<Unit, CascadeError> {
        let section = section.map_err(|error| CascadeError::Section(error.to_string()))?;
        let stage = (self.stage_of)(&section);
        Ok(Unit::new(section, stage))
    }

    /// All sections with gain 1, or with the gain that their circuits fix, in the order of the poles.
    fn units(&mut self, pairing: &[usize]) -> Result<Vec<Unit>, CascadeError> {
        let mut units = Vec::new();
        for (poles, &zeros) in pairing.iter().enumerate() {
            units.push(self.unit(poles, zeros)?);
        }
        let first = self.parts.poles.len();
        for (index, (poles, zeros)) in self.parts.first_order.iter().enumerate() {
            let key = (first + index, usize::MAX);
            let known = self.known.iter().find(|(known, _)| *known == key).map(|(_, unit)| unit.clone());
            let unit = match known {
                Some(unit) => unit,
                None => self.built(section_of("", *poles, *zeros, 1.0))?,
            };
            self.known.push((key, unit.clone()));
            units.push(unit);
        }
        Ok(units)
    }

    fn table(&self, units: &[Unit]) -> Table {
        let levels: Vec<Levels> = units.iter().map(|unit| Levels::of(unit, self.grid)).collect();
        Table::new(&levels, units.iter().map(|unit| unit.is_free).collect(), self.grid)
    }

    /// The zeros for each set of poles.
    fn pairing(&mut self, has_choice: bool, nearest: &[usize]) -> Result<(Vec<usize>, Pairings), CascadeError> {
        let n = self.parts.poles.len();
        match &self.request.pairing {
            Pairing::Given(list) if is_permutation(list, n) => Ok((list.clone(), Pairings::One)),
            Pairing::Given(_) => Err(CascadeError::List { what: "pairing", count: n }),
            Pairing::Nearest => Ok((nearest.to_vec(), Pairings::One)),
            Pairing::Headroom if !has_choice => Ok(((0..n).collect(), Pairings::One)),
            Pairing::Headroom if n <= ALL_PAIRINGS => {
                let mut best = (f64::INFINITY, nearest.to_vec());
                for pairing in permutations(n) {
                    let swing = self.swing_before_gains(&pairing)?;
                    if swing < best.0 - ALIKE {
                        best = (swing, pairing);
                    }
                }
                Ok((best.1, Pairings::All))
            }
            Pairing::Headroom => {
                let mut swing = vec![vec![0.0; n]; n];
                for (pole, row) in swing.iter_mut().enumerate() {
                    for (zero, cell) in row.iter_mut().enumerate() {
                        *cell = Levels::of(&self.unit(pole, zero)?, self.grid).swing(self.grid);
                    }
                }
                let by_section = best_pairing(&swing);
                if self.parts.count() > EXCHANGES {
                    return Ok((by_section, Pairings::Two));
                }
                Ok((self.exchanged([by_section, nearest.to_vec()])?, Pairings::Exchanges))
            }
        }
    }

    /// The better of two pairings, improved by exchanges.
    fn exchanged(&mut self, starts: [Vec<usize>; 2]) -> Result<Vec<usize>, CascadeError> {
        let [first, second] = starts;
        let swings = [self.swing_before_gains(&first)?, self.swing_before_gains(&second)?];
        let (mut least, mut pairing) =
            if swings[1] < swings[0] - ALIKE { (swings[1], second) } else { (swings[0], first) };
        loop {
            let before = least;
            for a in 0..pairing.len() {
                for b in a + 1..pairing.len() {
                    let mut other = pairing.clone();
                    other.swap(a, b);
                    let swing = self.swing_before_gains(&other)?;
                    if swing < least - ALIKE {
                        (least, pairing) = (swing, other);
                    }
                }
            }
            if least >= before {
                return Ok(pairing);
            }
        }
    }

    /// The swing of a pairing in its best order, were levels inside to follow the gains.
    fn swing_before_gains(&mut self, pairing: &[usize]) -> Result<f64, CascadeError> {
        let units = self.units(pairing)?;
        let total = self.total(&units, &Gains::Headroom)?;
        let table = self.table(&units);
        let order = table.best_order(total);
        Ok(table.swing(&order, &table.gains(&order, total)))
    }

    /// The attempts with a pairing: the order that was asked for or the best, and the customary ones.
    fn compared(&mut self, pairing: &[usize]) -> Result<Compared, CascadeError> {
        let units = self.units(pairing)?;
        let for_others =
            if let Gains::Given(_) = self.request.gains { Gains::Headroom } else { self.request.gains.clone() };
        let rising = self.attempt(&units, pairing, by_q(&units, true), &for_others)?;
        let falling = self.attempt(&units, pairing, by_q(&units, false), &for_others)?;
        let (rising_q, falling_q) = (rising.swing, falling.swing);
        let gains = self.request.gains.clone();
        let best = match &self.request.sequence {
            Sequence::Given(list) if is_permutation(list, units.len()) => {
                self.attempt(&units, pairing, list.clone(), &gains)?
            }
            Sequence::Given(_) => return Err(CascadeError::List { what: "sequence", count: units.len() }),
            Sequence::RisingQ => self.attempt(&units, pairing, by_q(&units, true), &gains)?,
            Sequence::FallingQ => self.attempt(&units, pairing, by_q(&units, false), &gains)?,
            Sequence::Headroom => {
                let total = self.total(&units, &for_others)?;
                let orders = if units.len() <= ALL_ORDERS {
                    permutations(units.len())
                } else {
                    vec![self.table(&units).best_order(total)]
                };
                // The customary order where it is as good.
                let mut best = if better(&falling, &rising) { falling } else { rising };
                for order in orders {
                    let tried = self.attempt(&units, pairing, order, &for_others)?;
                    if better(&tried, &best) {
                        best = tried;
                    }
                }
                match gains {
                    Gains::Given(_) => self.attempt(&units, pairing, best.order, &gains)?,
                    _ => best,
                }
            }
        };
        Ok(Compared { best, rising_q, falling_q })
    }

    /// The gain at the reference of sections as they are.
    fn gain_of(&self, units: &[Unit]) -> f64 {
        units.iter().map(|unit| magnitude_at_reference(&unit.output(), self.band)).product::<f64>() * self.over_dc
    }

    /// By how much the free gains together must differ from those of the sections as they are, as a logarithm.
    fn total(&self, units: &[Unit], gains: &Gains) -> Result<f64, CascadeError> {
        let gives = self.gain_of(units);
        let is_free = units.iter().any(|unit| unit.is_free);
        match (self.request.gain, gains) {
            (_, Gains::Given(list)) if list.len() != units.len() => {
                Err(CascadeError::Gains { found: list.len(), count: units.len() })
            }
            // Only the product counts here, so it does not matter in which order the list stands.
            (_, Gains::Given(list)) => {
                Ok(list.iter().zip(units).map(|(gain, unit)| (gain / unit.section.gain.abs()).ln()).sum())
            }
            (wanted, _) if is_free => Ok((wanted.unwrap_or(1.0) / gives).ln()),
            (Some(wanted), _) if (wanted / gives - 1.0).abs() > 1e-9 => Err(CascadeError::Gain { gives, wanted }),
            _ => Ok(0.0),
        }
    }

    /// The sections in an order, with their gains, solved for them. Where a circuit cannot give the gain chosen for it,
    /// it keeps the one before, and the others make up for it.
    fn attempt(
        &self,
        units: &[Unit],
        pairing: &[usize],
        order: Vec<usize>,
        gains: &Gains,
    ) -> Result<Attempt, CascadeError> {
        let mut units: Vec<Unit> = order.iter().map(|&index| units[index].clone()).collect();
        let places: Vec<usize> = (0..units.len()).collect();
        let mut best: Option<(f64, Vec<Unit>)> = None;
        let mut round = 0;
        while round < ROUNDS {
            let wanted = self.gains(&units, gains)?;
            let solved: Vec<Option<Unit>> =
                units.par_iter().zip(&wanted).map(|(unit, &gain)| unit.with_gain(gain)).collect();
            if let Some(place) = solved.iter().position(Option::is_none) {
                if let Gains::Given(_) = gains {
                    return Err(only_gain(place, &units[place], wanted[place].abs()));
                }
                units[place].is_free = false;
                continue;
            }
            let moved = units.iter().zip(&wanted).map(|(unit, gain)| (gain / unit.section.gain).ln().abs());
            let moved = moved.fold(0.0, f64::max);
            let free: Vec<bool> = units.iter().map(|unit| unit.is_free).collect();
            units = solved.into_iter().flatten().collect();
            units.iter_mut().zip(free).for_each(|(unit, free)| unit.is_free = free);
            let swing = self.table(&units).swing(&places, &vec![0.0; units.len()]);
            // Solved anew, a section may swing more than the gain alone would have made it.
            if best.as_ref().is_none_or(|(least, _)| swing < least - ALIKE) {
                best = Some((swing, units.clone()));
            }
            round += 1;
            if moved < 1e-9 || *gains != Gains::Headroom {
                break;
            }
        }
        let (swing, units) = best.unwrap_or((f64::INFINITY, units));
        Ok(Attempt { pairing: pairing.to_vec(), order, units, swing })
    }

    /// The signed gains of sections in signal order.
    fn gains(&self, units: &[Unit], gains: &Gains) -> Result<Vec<f64>, CascadeError> {
        let own: Vec<f64> = units.iter().map(|unit| unit.section.gain).collect();
        let total = self.total(units, gains)?;
        let shifts = match gains {
            Gains::Given(list) => {
                for (place, (unit, &wanted)) in units.iter().zip(list).enumerate() {
                    if !unit.is_free && (wanted / own[place].abs() - 1.0).abs() > 1e-9 {
                        return Err(only_gain(place, unit, wanted));
                    }
                }
                return Ok(list.iter().zip(&own).map(|(gain, own)| gain.copysign(*own)).collect());
            }
            Gains::Headroom => self.table(units).gains(&(0..units.len()).collect::<Vec<_>>(), total),
            Gains::Equal => {
                let free: Vec<usize> = (0..units.len()).filter(|&place| units[place].is_free).collect();
                let product: f64 = free.iter().map(|&place| own[place].abs().ln()).sum::<f64>() + total;
                let each = product / free.len().max(1) as f64;
                let shift = |place: usize| if units[place].is_free { each - own[place].abs().ln() } else { 0.0 };
                (0..units.len()).map(shift).collect()
            }
        };
        let mut signed: Vec<f64> = own.iter().zip(&shifts).map(|(own, shift)| own * shift.exp()).collect();
        if *gains == Gains::Headroom {
            // More digits than these say nothing about headroom; the last gain makes up for the rounding.
            let free: Vec<usize> = (0..units.len()).filter(|&place| units[place].is_free).collect();
            let Some((&last, others)) = free.split_last() else { return Ok(signed) };
            for &place in others {
                let short = rounded(signed[place], GAIN_DIGITS).parse().unwrap_or(signed[place]);
                signed[last] *= signed[place] / short;
                signed[place] = short;
            }
        }
        Ok(signed)
    }
}

fn only_gain(place: usize, unit: &Unit, wanted: f64) -> CascadeError {
    let circuit = unit.stage.as_ref().map_or(String::new(), |stage| stage.problem.circuit.id.clone());
    CascadeError::SectionGain { section: place + 1, circuit, gives: unit.section.gain.abs(), wanted }
}

/// The sections with the levels at their op-amp outputs.
fn sections(best: &Attempt, grid: &Grid) -> Vec<CascadeSection> {
    let mut sections = Vec::new();
    let mut before: Vec<Biquad> = Vec::new();
    for (place, (unit, &index)) in best.units.iter().zip(&best.order).enumerate() {
        let into = |w: f64| before.iter().map(|h| h.value(w).norm()).product::<f64>();
        let op_amps = unit
            .nodes
            .iter()
            .map(|(name, h)| OpAmpLevel { name: name.clone(), peak: peak(grid, |w| into(w) * h.value(w).norm()) });
        let op_amps: Vec<OpAmpLevel> = op_amps.collect();
        before.push(unit.output());
        let through = |w: f64| before.iter().map(|h| h.value(w).norm()).product::<f64>();
        let inside = grid.frequencies.iter().zip(&grid.in_pass_band).filter(|(_, inside)| **inside);
        let levels = inside.map(|(&w, _)| Level { magnitude: through(w), w });
        let least = levels.reduce(|a, b| if b.magnitude < a.magnitude { b } else { a });
        let section = Section { name: (place + 1).to_string(), ..unit.section.clone() };
        sections.push(CascadeSection {
            problem: unit.stage.as_ref().map(|stage| {
                let mut problem = stage.problem.clone();
                problem.target = section.clone();
                problem
            }),
            poles: index,
            zeros: best.pairing.get(index).copied(),
            is_fixed: !unit.is_free,
            is_counted: unit.is_counted,
            op_amps,
            least: least.unwrap_or(Level { magnitude: f64::NAN, w: section.w0 }),
            section,
        });
    }
    sections
}
