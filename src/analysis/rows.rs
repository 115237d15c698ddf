//! What tolerances make of the rows of a shortlist: yield and spread of each, and the order and choice that follow.

use rayon::prelude::*;

use super::built::Built;
use super::mask::Scratch;
use super::spread::{deviations, response_yardstick};
use super::tighten::Wanted;
use super::tolerance::Tolerances;
use super::vetted::is_lost_in_spread;
use super::yields::{Sampling, Yield};
use crate::search::{ErrorKey, Outcome, Problem, Rank, Row};
use crate::target::{Biquad, Section, Yardstick};

/// What rows are put in order by once their yields are known.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Order {
    /// By nothing more: as the search ranked them.
    #[default]
    AsFound,
    /// The highest yield first. Rows whose interval reaches into that of the first of them are not told apart by it: they
    /// stand by part numbers, part numbers to buy, placed parts, and error.
    Yield,
    /// The least spread of the response first, to 1e-7 of its unit; of equal ones the order is as for the yield.
    Spread,
}

/// What is asked of the tolerances.
#[derive(Clone, Debug)]
pub struct YieldQuestion {
    /// What a board has to keep.
    pub wanted: Wanted,
    /// How far the parts are off.
    pub tolerances: Tolerances,
    /// How boards are drawn; every row has the same draws.
    pub sampling: Sampling,
    /// What the rows are put in order by.
    pub order: Order,
    /// How many rows are listed at most.
    pub rows: usize,
}

/// What tolerances make of one row.
#[derive(Clone, Debug, PartialEq)]
pub struct RowYield {
    /// Whether the nominal parts keep what is wanted.
    pub nominal_keeps: bool,
    /// The share of boards that do.
    pub keeping: Yield,
    /// The largest standard deviation of the response, from the sensitivities, and where it is, rad/s: see
    /// [`Deviations::response`](super::Deviations::response).
    pub spread: (f64, f64),
    /// Whether the nominal error is below a third of that, so that a better nominal fit is lost in it.
    pub nominal_is_lost: bool,
}

/// What tolerances make of a shortlist.
#[derive(Clone, Debug, PartialEq)]
pub struct Yields {
    /// Whether the ideal target keeps what is wanted: if not, no parts do.
    pub target_keeps: bool,
    /// Of each row of the list.
    pub rows: Vec<RowYield>,
    /// Of the row "nearest value to each".
    pub nearest: Option<RowYield>,
    /// How many alternatives are not listed, being no better in yield either.
    pub dropped: usize,
}

/// The rows of a search with their yields, in the order that is asked for.
///
/// The yield is not searched for: it is computed for the rows of the outcome, which should hold all that may be listed, the
/// alternatives too. An alternative stays where its interval lies wholly above that of every kept row that is as good in
/// error, part numbers, part numbers to buy, placed parts and, where it counts, cost; rows of the front, and the marked one,
/// stay anyhow. Where there are more rows than wanted the last go, with the order as found alternatives first, but never the
/// marked one. The same for any number of threads.
pub fn with_yields(problem: &Problem, outcome: Outcome, asked: &YieldQuestion) -> (Outcome, Yields) {
    let targets: Vec<Section> = problem.sections.iter().map(|section| section.target.clone()).collect();
    let yardstick = response_yardstick(&targets, problem.criterion);
    // A row of a search always has all its parts; without them it would have no yield to be judged by.
    let of_row = |row: &Row| Some(of_board(&Built::of_row(problem, row)?, asked, &yardstick));
    let found: Vec<Option<RowYield>> = outcome.rows.par_iter().map(of_row).collect();
    let nearest = outcome.nearest.as_ref().and_then(of_row);
    let mut rows: Vec<Candidate> = (outcome.rows.into_iter().zip(found).enumerate())
        .filter_map(|(index, (row, yields))| {
            Some(Candidate { row, yields: yields?, marked: Some(index) == outcome.marked, found: index })
        })
        .collect();
    let looked_at = rows.len();
    rows = unbeaten(rows, problem.goals.rank == Rank::Cost);
    order(&mut rows, asked.order);
    let listed = rows.len();
    let by_place = |kept: &(usize, Candidate)| {
        let (place, candidate) = kept;
        (!candidate.marked, asked.order == Order::AsFound && candidate.row.alternative, *place)
    };
    let mut kept: Vec<(usize, Candidate)> = rows.into_iter().enumerate().collect();
    kept.sort_by_key(by_place);
    kept.truncate(asked.rows);
    kept.sort_by_key(|(place, _)| *place);
    let marked = kept.iter().position(|(_, candidate)| candidate.marked);
    let more_rows = outcome.more_rows + listed - kept.len();
    let (rows, yields) = kept.into_iter().map(|(_, candidate)| (candidate.row, candidate.yields)).unzip();
    let target_keeps = asked.wanted.target_keeps(&targets);
    (
        Outcome { rows, marked, more_rows, ..outcome },
        Yields { target_keeps, rows: yields, nearest, dropped: looked_at - listed },
    )
}

/// What tolerances make of one board.
fn of_board(built: &Built, asked: &YieldQuestion, yardstick: &Yardstick) -> RowYield {
    let nominal: Vec<Biquad> = built.nominal();
    let spread = deviations(built, &asked.tolerances, yardstick).response;
    RowYield {
        nominal_keeps: asked.wanted.keeps(&nominal, &mut Scratch::default()),
        keeping: asked.wanted.estimate(built, &asked.tolerances, &asked.sampling),
        spread,
        nominal_is_lost: is_lost_in_spread(yardstick.deviation(&nominal).error, spread.0),
    }
}

/// A row that may be listed.
struct Candidate {
    row: Row,
    yields: RowYield,
    marked: bool,
    /// Its place in the outcome.
    found: usize,
}

impl Candidate {
    fn error(&self) -> ErrorKey {
        ErrorKey::new(self.row.deviation.error)
    }

    /// What it takes, the least first.
    fn takes(&self) -> (Option<usize>, Option<usize>, usize) {
        (self.row.part_numbers, self.row.to_buy, self.row.placed_parts)
    }

    /// Whether another is as good in everything that is not the yield, and by the yield not told to be worse.
    fn is_beaten_by(&self, other: &Candidate, cost_counts: bool) -> bool {
        let (mine, its) = (self.takes(), other.takes());
        let takes_no_more = its.0 <= mine.0 && its.1 <= mine.1 && its.2 <= mine.2;
        let cheaper = !cost_counts || other.row.cost <= self.row.cost;
        let no_worse = other.error() <= self.error() && takes_no_more && cheaper;
        no_worse && self.yields.keeping.interval.0 <= other.yields.keeping.interval.1
    }
}

/// The rows without the alternatives that another beats.
fn unbeaten(mut rows: Vec<Candidate>, cost_counts: bool) -> Vec<Candidate> {
    // What beats a row comes before it, and of equal ones the higher yield does.
    rows.sort_by(|a, b| {
        let rank = |c: &Candidate| (c.error(), c.takes(), if cost_counts { c.row.cost } else { None });
        rank(a)
            .cmp(&rank(b))
            .then(b.yields.keeping.share().total_cmp(&a.yields.keeping.share()))
            .then(a.found.cmp(&b.found))
    });
    let mut kept: Vec<Candidate> = Vec::new();
    for candidate in rows {
        let stays = !candidate.row.alternative || candidate.marked;
        if stays || !kept.iter().any(|other| candidate.is_beaten_by(other, cost_counts)) {
            kept.push(candidate);
        }
    }
    kept.sort_by_key(|candidate| candidate.found);
    kept
}

fn order(rows: &mut [Candidate], order: Order) {
    let rest = |c: &Candidate| (c.takes(), c.error(), c.found);
    match order {
        Order::AsFound => {}
        Order::Spread => rows.sort_by_key(|c| (ErrorKey::new(c.yields.spread.0), rest(c))),
        Order::Yield => {
            rows.sort_by(|a, b| {
                b.yields.keeping.share().total_cmp(&a.yields.keeping.share()).then(rest(a).cmp(&rest(b)))
            });
            let mut start = 0;
            while start < rows.len() {
                let low = rows[start].yields.keeping.interval.0;
                let alike = rows[start..].iter().take_while(|c| c.yields.keeping.interval.1 >= low).count();
                let end = start + alike.max(1);
                rows[start..end].sort_by_key(rest);
                start = end;
            }
        }
    }
}
