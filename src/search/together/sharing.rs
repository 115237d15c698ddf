//! One set of each section such that all together have few part numbers and may still meet the error.

use std::ops::Range;
use std::sync::OnceLock;

use super::candidates::Candidate;
use super::offsets::{Off, ROWS};

/// The candidates of a section, grouped by their part numbers.
pub(super) struct List<'a> {
    /// By ascending palette.
    candidates: Vec<&'a Candidate>,
    /// What each of them is off.
    offs: Vec<Off>,
    /// Distinct palettes, each with its candidates.
    palettes: Vec<(&'a [u16], Range<usize>)>,
    /// Each palette under the marks of all that is left of it without so many of its part numbers; made when first needed.
    without: [OnceLock<Marked>; MOST_NEW + 1],
    /// The palettes in which each part number occurs.
    with: Vec<Vec<u32>>,
    /// The least and the largest size of a palette.
    sizes: (usize, usize),
    /// The least and the most that its candidates are off.
    pub span: (Off, Off),
    /// Its candidates by what they are off, where it is the last section.
    grid: Option<Grid>,
}

/// Candidates by what they are off in a few rows: those that make good what the sections before are off lie in a few cells.
struct Grid {
    /// Two rows and the widths of their cells, and a row by which the candidates of a cell are ordered.
    rows: [(usize, f32); 3],
    /// Cell, what it is off in the last row, and the candidate; ascending.
    list: Vec<([i32; 2], f32, u32)>,
}

impl Grid {
    /// Cells as wide as `reach`, in the rows that tell most candidates apart; `None` if no row would.
    fn new(candidates: &[&Candidate], reach: &Off) -> Option<Grid> {
        // What a row tells beyond those before it: its spread in units of the reach, less what follows from theirs.
        let sample: Vec<&Candidate> =
            candidates.iter().step_by(candidates.len().div_ceil(1000).max(1)).copied().collect();
        let column = |row: usize| -> Vec<f32> {
            let mean = sample.iter().map(|c| c.off[row]).sum::<f32>() / sample.len() as f32;
            sample.iter().map(|c| (c.off[row] - mean) / reach[row]).collect()
        };
        let dot = |a: &[f32], b: &[f32]| a.iter().zip(b).map(|(a, b)| a * b).sum::<f32>();
        let usable = |row: &usize| reach[*row].is_finite() && reach[*row] > 0.0;
        let mut columns: Vec<(usize, Vec<f32>)> = (0..ROWS).filter(usable).map(|row| (row, column(row))).collect();
        let mut rows = [(0, f32::INFINITY); 3];
        for place in &mut rows {
            let best = columns.iter().max_by(|a, b| dot(&a.1, &a.1).total_cmp(&dot(&b.1, &b.1)))?.clone();
            let norm = dot(&best.1, &best.1);
            // Where all lie within two cells a row tells nothing.
            if norm < 4.0 * sample.len() as f32 {
                break;
            }
            *place = (best.0, reach[best.0]);
            for (_, column) in &mut columns {
                let along = dot(column, &best.1) / norm;
                column.iter_mut().zip(&best.1).for_each(|(a, b)| *a -= along * b);
            }
        }
        let mut grid = Grid { rows, list: Vec::new() };
        let last = rows[2].0;
        grid.list = candidates.iter().zip(0..).map(|(c, i)| (grid.cell(|row| c.off[row]), c.off[last], i)).collect();
        grid.list.sort_unstable_by(|a, b| a.0.cmp(&b.0).then(a.1.total_cmp(&b.1)).then(a.2.cmp(&b.2)));
        rows[0].1.is_finite().then_some(grid)
    }

    fn cell(&self, off: impl Fn(usize) -> f32) -> [i32; 2] {
        // A row that tells nothing has one cell, infinitely wide.
        [0, 1].map(|place| (off(self.rows[place].0) / self.rows[place].1).floor() as i32)
    }

    /// The candidates that may make good what the others are off: all that do, and some others.
    fn opposite(&self, off: &Off, reach: &Off, found: &mut Vec<u32>) {
        found.clear();
        let (low, high) = (self.cell(|row| -off[row] - reach[row]), self.cell(|row| -off[row] + reach[row]));
        let last = self.rows[2].0;
        let (least, most) = (-off[last] - reach[last], -off[last] + reach[last]);
        for a in low[0]..=high[0] {
            for b in low[1]..=high[1] {
                let before = |entry: &([i32; 2], f32, u32)| (entry.0, entry.1) < ([a, b], least);
                let start = self.list.partition_point(before);
                let inside = self.list[start..].iter().take_while(|entry| entry.0 == [a, b] && entry.1 <= most);
                found.extend(inside.map(|entry| entry.2));
            }
        }
    }
}

/// Up to so many new part numbers, palettes are found by what they share with those before.
const MOST_NEW: usize = 3;

/// Lists of marks longer than this are not made.
const MOST_MARKS: usize = 30_000_000;

/// A number for a part number; those of a palette add up to its mark, which others may share.
fn mark(id: u16) -> u64 {
    // The finaliser of splitmix64 (Steele, Lea, Flood, 2014).
    let mut z = (u64::from(id) + 1).wrapping_mul(0x9e37_79b9_7f4a_7c15);
    z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    z ^ (z >> 31)
}

/// The mark of those part numbers whose bits are set.
fn mark_of(ids: &[u16], bits: u32) -> u64 {
    let members = ids.iter().enumerate().filter(|(i, _)| bits >> i & 1 == 1);
    members.fold(0, |sum, (_, &id)| sum.wrapping_add(mark(id)))
}

/// Palettes by mark.
struct Marked {
    /// Mark and number, ascending.
    list: Vec<(u64, u32)>,
    /// A bit for the low end of each mark: most marks that are asked for are not there.
    bits: Vec<u64>,
}

impl Marked {
    fn new(mut list: Vec<(u64, u32)>) -> Marked {
        list.sort_unstable();
        // A power of two, some 16 bits to an entry.
        let mut bits = vec![0u64; (list.len() / 4 + 1).next_power_of_two()];
        let mask = bits.len() - 1;
        for (mark, _) in &list {
            bits[(mark >> 6) as usize & mask] |= 1 << (mark & 63);
        }
        Marked { list, bits }
    }

    /// All numbers under that mark.
    fn get(&self, mark: u64) -> impl Iterator<Item = u32> + '_ {
        let word = self.bits[(mark >> 6) as usize & (self.bits.len() - 1)];
        let list: &[(u64, u32)] = match word >> (mark & 63) & 1 {
            0 => &[],
            _ => &self.list[self.list.partition_point(|(known, _)| *known < mark)..],
        };
        list.iter().take_while(move |(known, _)| *known == mark).map(|(_, number)| *number)
    }
}

/// The least and the most in each row.
fn span<'a>(candidates: impl Iterator<Item = &'a Candidate>) -> (Off, Off) {
    let none = ([f32::INFINITY; ROWS], [f32::NEG_INFINITY; ROWS]);
    candidates.fold(none, |(mut least, mut most), candidate| {
        for (row, &off) in candidate.off.iter().enumerate() {
            least[row] = least[row].min(off);
            most[row] = most[row].max(off);
        }
        (least, most)
    })
}

/// Whether what is off by `off`, with something between the ends of `rest`, can be within `reach`.
fn may_meet(off: &Off, rest: &(Off, Off), reach: &Off) -> bool {
    (0..ROWS).all(|row| off[row] + rest.0[row] <= reach[row] && off[row] + rest.1[row] >= -reach[row])
}

fn sum(a: &Off, b: &Off) -> Off {
    std::array::from_fn(|row| a[row] + b[row])
}

/// What all spans but one come to.
fn others(spans: &[(Off, Off)], but: usize) -> (Off, Off) {
    let rest = spans.iter().enumerate().filter(|(index, _)| *index != but);
    rest.fold(([0.0; ROWS], [0.0; ROWS]), |(least, most), (_, span)| (sum(&least, &span.0), sum(&most, &span.1)))
}

/// Leaves out candidates that the best of the other sections cannot make good, until all that are left can be; none are left
/// of any section where one has none.
pub(super) fn reconciled<'a>(
    lists: impl Iterator<Item = &'a [Candidate]>,
    most: usize,
    reach: impl Fn(&[(Off, Off)]) -> Off,
) -> (Vec<Vec<&'a Candidate>>, Off) {
    let mut lists: Vec<Vec<&Candidate>> =
        lists.map(|list| list.iter().filter(|c| c.palette.len() <= most).collect()).collect();
    loop {
        let spans: Vec<(Off, Off)> = lists.iter().map(|list| span(list.iter().copied())).collect();
        let reach = reach(&spans);
        if lists.iter().any(Vec::is_empty) {
            lists.iter_mut().for_each(Vec::clear);
            return (lists, reach);
        }
        let before: usize = lists.iter().map(Vec::len).sum();
        for (index, list) in lists.iter_mut().enumerate() {
            let rest = others(&spans, index);
            list.retain(|candidate| may_meet(&candidate.off, &rest, &reach));
        }
        let after: usize = lists.iter().map(Vec::len).sum();
        // The last few are not worth another round.
        if after * 20 > before * 19 {
            return (lists, reach);
        }
    }
}

impl<'a> List<'a> {
    /// Groups candidates that are sorted by their palettes, of which there is at least one.
    pub fn new(candidates: Vec<&'a Candidate>, part_numbers: usize) -> List<'a> {
        let mut palettes: Vec<(&[u16], Range<usize>)> = Vec::new();
        for (index, candidate) in candidates.iter().enumerate() {
            match palettes.last_mut() {
                Some((palette, range)) if **palette == *candidate.palette => range.end = index + 1,
                _ => palettes.push((&candidate.palette, index..index + 1)),
            }
        }
        let mut with = vec![Vec::new(); part_numbers];
        for (number, (palette, _)) in (0..).zip(&palettes) {
            palette.iter().for_each(|&id| with[usize::from(id)].push(number));
        }
        let sizes = || palettes.iter().map(|(palette, _)| palette.len());
        let sizes = (sizes().min().unwrap_or(0), sizes().max().unwrap_or(0));
        let span = span(candidates.iter().copied());
        List {
            offs: candidates.iter().map(|c| c.off).collect(),
            candidates,
            palettes,
            without: Default::default(),
            with,
            sizes,
            span,
            grid: None,
        }
    }

    /// Whether palettes with that many new part numbers can be found by what they share.
    fn has_marks(&self, new: usize) -> bool {
        // At most so many subsets to a palette.
        let subsets = (0..new.min(self.sizes.1)).fold(1, |count, i| count * (self.sizes.1 - i) / (i + 1));
        new <= MOST_NEW && self.sizes.1 < 16 && subsets.saturating_mul(self.palettes.len()) <= MOST_MARKS
    }

    fn without(&self, new: usize) -> &Marked {
        self.without[new].get_or_init(|| {
            let mut list = Vec::new();
            for ((palette, _), number) in self.palettes.iter().zip(0..) {
                for kept in
                    (0u32..1 << palette.len()).filter(|kept| kept.count_ones() as usize + new == palette.len())
                {
                    list.push((mark_of(palette, kept), number));
                }
            }
            Marked::new(list)
        })
    }

    /// Prepares for being the last section of boards that may be off so much.
    pub fn index_by_off(&mut self, reach: &Off) {
        self.grid = Grid::new(&self.candidates, reach);
    }

    /// Whether palettes with so many new part numbers at most are found by what they share with the union.
    fn is_marked(&self, union: &[u16], fresh: usize) -> bool {
        const MOST_SHARED: usize = 12;
        union.len() <= MOST_SHARED && self.has_marks(fresh)
    }

    /// Whether candidates are better found by what they are off.
    fn is_open(&self, union: &[u16], fresh: usize) -> bool {
        const FEW: usize = 64;
        self.palettes.len() > FEW && !self.is_marked(union, fresh)
    }

    /// How many candidates there are.
    pub fn len(&self) -> usize {
        self.candidates.len()
    }

    /// The candidate of an index.
    pub fn candidate(&self, index: usize) -> &'a Candidate {
        self.candidates[index]
    }

    /// All palettes with at most `fresh` part numbers that are not in `union`, which is ascending; and how many were looked
    /// at.
    fn compatible(&self, union: &[u16], fresh: usize, found: &mut Vec<u32>) -> usize {
        found.clear();
        let palette = |number: u32| self.palettes[number as usize].0;
        let news = |number: u32| palette(number).iter().filter(|id| union.binary_search(id).is_err()).count();
        let (smallest, largest) = self.sizes;
        let subsets = if union.len() < 16 { 1usize << union.len() } else { usize::MAX };
        if fresh >= largest || self.palettes.len() <= subsets.min(64) {
            found.extend((0..self.palettes.len() as u32).filter(|&number| news(number) <= fresh));
            self.palettes.len()
        } else if self.is_marked(union, fresh) {
            let mut looked_at = 0;
            for shared in 0..subsets as u32 {
                let (size, mark) = (shared.count_ones() as usize, mark_of(union, shared));
                for new in 0..=fresh {
                    if (smallest..=largest).contains(&(size + new)) {
                        // Others may have the same mark, and those with another of the union share more.
                        let is_right = |&n: &u32| palette(n).len() == size + new && news(n) == new;
                        looked_at += 1;
                        found.extend(self.without(new).get(mark).inspect(|_| looked_at += 1).filter(is_right));
                    }
                }
            }
            // Palettes that share their mark are found once for each.
            found.sort_unstable();
            found.dedup();
            looked_at
        } else {
            let mut looked_at = 0;
            for (place, &id) in union.iter().enumerate() {
                let first = |number: &&u32| {
                    let palette = self.palettes[**number as usize].0;
                    !union[..place].iter().any(|earlier| palette.binary_search(earlier).is_ok())
                };
                let numbers = &self.with[usize::from(id)];
                looked_at += numbers.len();
                found.extend(numbers.iter().filter(first).filter(|&&number| news(number) <= fresh));
            }
            // Those that share nothing.
            if fresh >= smallest {
                let apart = |&number: &u32| {
                    let palette = self.palettes[number as usize].0;
                    palette.len() <= fresh && palette.iter().all(|id| union.binary_search(id).is_err())
                };
                found.extend((0..self.palettes.len() as u32).filter(apart));
                looked_at += self.palettes.len();
            }
            looked_at
        }
    }
}

/// The way down through the sections.
pub(super) struct Descent<'a, 'b> {
    /// The candidates of each section, in the order in which they are gone through.
    pub lists: &'b [List<'a>],
    /// For each of them, what it and those after it can be off together.
    rest: Vec<(Off, Off)>,
    /// What all together may be off.
    reach: Off,
    /// Part numbers allowed.
    most: usize,
    /// Candidates and palettes looked at.
    pub steps: u64,
}

/// Told of each combination; says whether to go on, which is asked now and then besides.
pub(super) trait Meet {
    /// Candidates by depth that have few enough part numbers, and that may meet the error; gives how many steps that took.
    fn meet(&mut self, chosen: &[usize]) -> u64;
    /// Whether to stop, after so many steps in all.
    fn halted(&mut self, steps: u64) -> bool;
}

impl<'a, 'b> Descent<'a, 'b> {
    /// A descent through these lists for boards with so many part numbers at most.
    pub fn new(lists: &'b [List<'a>], reach: Off, most: usize) -> Descent<'a, 'b> {
        let mut rest = vec![([0.0; ROWS], [0.0; ROWS])];
        for list in lists.iter().rev() {
            let last = rest[rest.len() - 1];
            rest.push((sum(&last.0, &list.span.0), sum(&last.1, &list.span.1)));
        }
        rest.reverse();
        Descent { lists, rest, reach, most, steps: 0 }
    }

    /// Goes down from these candidates of the first section.
    pub fn run(&mut self, roots: Range<usize>, meet: &mut dyn Meet) {
        let mut chosen = Vec::with_capacity(self.lists.len());
        for root in roots {
            let candidate = self.lists[0].candidates[root];
            self.steps += 1;
            if candidate.palette.len() <= self.most && may_meet(&candidate.off, &self.rest[1], &self.reach) {
                chosen.push(root);
                if !self.descend(&mut chosen, &candidate.palette, &candidate.off, meet) {
                    return;
                }
                chosen.pop();
            }
        }
    }

    fn descend(&mut self, chosen: &mut Vec<usize>, union: &[u16], off: &Off, meet: &mut dyn Meet) -> bool {
        let depth = chosen.len();
        let Some(list) = self.lists.get(depth) else {
            self.steps += meet.meet(chosen);
            return !meet.halted(self.steps);
        };
        let fresh = self.most - union.len();
        if let Some(grid) = list.grid.as_ref().filter(|_| list.is_open(union, fresh)) {
            let mut opposite = Vec::new();
            grid.opposite(off, &self.reach, &mut opposite);
            self.steps += 1 + opposite.len() as u64;
            for index in opposite {
                let off = sum(off, &list.offs[index as usize]);
                let palette = || list.candidates[index as usize].palette.iter();
                let news = || palette().filter(|id| union.binary_search(id).is_err()).count();
                if may_meet(&off, &self.rest[depth + 1], &self.reach) && news() <= fresh {
                    chosen.push(index as usize);
                    self.steps += meet.meet(chosen);
                    chosen.pop();
                }
            }
            return !meet.halted(self.steps);
        }
        let mut compatible = Vec::new();
        self.steps += 1 + list.compatible(union, fresh, &mut compatible) as u64;
        if meet.halted(self.steps) {
            return false;
        }
        let mut wider: Vec<u16> = Vec::new();
        for number in compatible {
            let (palette, range) = &list.palettes[number as usize];
            wider.clear();
            wider.extend(union.iter().chain(*palette));
            wider.sort_unstable();
            wider.dedup();
            for index in range.clone() {
                self.steps += 1;
                let off = sum(off, &list.offs[index]);
                if may_meet(&off, &self.rest[depth + 1], &self.reach) {
                    chosen.push(index);
                    if !self.descend(chosen, &wider, &off, meet) {
                        return false;
                    }
                    chosen.pop();
                }
            }
        }
        true
    }
}

/// The order in which sections are gone through: the one with the fewest palettes first.
pub(super) fn order(lists: &[Vec<&Candidate>]) -> Vec<usize> {
    let palettes = |list: &Vec<&Candidate>| list.windows(2).filter(|pair| pair[0].palette != pair[1].palette).count();
    let mut order: Vec<usize> = (0..lists.len()).collect();
    order.sort_by_key(|&index| (palettes(&lists[index]), index));
    order
}
