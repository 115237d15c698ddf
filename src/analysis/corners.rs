//! The worst that tolerances can do: every part anywhere within its tolerance.

use std::collections::BTreeSet;

use argmin::core::{CostFunction, Error, Executor, State};
use argmin::solver::neldermead::NelderMead;
use num_complex::Complex64;
use rayon::prelude::*;

use super::built::{Built, Sensitivities};
use super::tolerance::{Boards, Tolerances};
use crate::target::Biquad;

/// The worst case of something that is judged.
#[derive(Clone, Debug, PartialEq)]
pub struct WorstCase {
    /// How bad it is; infinite where the board is unstable.
    pub value: f64,
    /// Where, rad/s.
    pub at: Option<f64>,
    /// The relative errors of the slots, in the order of sections and parts; zero where they do not matter.
    pub errors: Vec<f64>,
    /// How many slots reach the response.
    pub slots: usize,
    /// Whether every corner was tried; otherwise those that the sensitivities point to, and their neighbours.
    pub every_corner: bool,
    /// How many corners were tried.
    pub corners: usize,
    /// Whether the search inside the tolerances found worse than any corner.
    pub inside: bool,
}

/// Up to so many slots every corner is tried.
const MOST_SLOTS: usize = 16;

/// The most steps of the search inside.
const STEPS: u64 = 600;

/// What is judged: how bad a board is, and where (rad/s). What is unstable is infinitely bad.
pub type Judge<'a> = &'a (dyn Fn(&[Biquad]) -> (f64, Option<f64>) + Sync);

/// Finds the worst case of `judge` with every part anywhere within its tolerance.
///
/// With sixteen slots or fewer all corners are tried. With more, those to which the signs of the sensitivities point at
/// each of `frequencies` (rad/s), and from the worst of them every change of a single part that makes it worse. From the
/// worst corner a simplex search (Nelder and Mead) then looks inside the tolerances. Reels are not regarded: each part
/// is taken by itself.
pub fn worst_case(built: &Built, tolerances: &Tolerances, frequencies: &[f64], judge: Judge) -> WorstCase {
    let boards = Boards::new(built, tolerances);
    let parts = built.sections.iter().flat_map(|s| &s.parts);
    let limits: Vec<(f64, f64)> = parts.map(|part| tolerances.slot_limits(part)).collect();
    let judged = |errors: &[f64]| -> (f64, Option<f64>) {
        let board = boards.with_errors(errors);
        let orders = built.sections.iter().map(|section| section.target.shape.order());
        let stable = board.iter().zip(orders).all(|(h, order)| h.is_stable(order));
        let (value, at) = judge(&board);
        if stable && !value.is_nan() { (value, at) } else { (f64::INFINITY, at) }
    };
    let sensitivities: Vec<Sensitivities> = built.sections.iter().map(Sensitivities::of).collect();
    let slopes: Vec<Vec<Complex64>> =
        frequencies.iter().map(|w| sensitivities.iter().flat_map(|s| s.response(*w)).collect()).collect();
    let reaches = |k: usize| slopes.iter().any(|line| line[k].norm() > 1e-9);
    let matters: Vec<usize> = (0..limits.len()).filter(|&k| limits[k].0 < limits[k].1 && reaches(k)).collect();
    let at_corner = |signs: &[bool]| -> Vec<f64> {
        let mut errors = vec![0.0; limits.len()];
        matters.iter().zip(signs).for_each(|(&k, up)| errors[k] = if *up { limits[k].1 } else { limits[k].0 });
        errors
    };
    let every_corner = matters.len() <= MOST_SLOTS;
    let corners: Vec<Vec<bool>> = if every_corner {
        (0..1usize << matters.len()).map(|bits| (0..matters.len()).map(|k| bits >> k & 1 == 1).collect()).collect()
    } else {
        // The real part moves the magnitude, the imaginary part the phase.
        let pointed = slopes.iter().flat_map(|line| {
            let up =
                |part: fn(&Complex64) -> f64| matters.iter().map(|&k| part(&line[k]) > 0.0).collect::<Vec<bool>>();
            let down = |up: &[bool]| up.iter().map(|up| !up).collect();
            let (magnitude, phase) = (up(|s| s.re), up(|s| s.im));
            [down(&magnitude), magnitude, down(&phase), phase]
        });
        pointed.collect::<BTreeSet<_>>().into_iter().collect()
    };
    let found: Vec<f64> = corners.par_iter().map(|signs| judged(&at_corner(signs)).0).collect();
    let mut tried = corners.len();
    let worst = (0..corners.len()).reduce(|a, b| if found[b] > found[a] { b } else { a });
    let mut signs = worst.map_or_else(Vec::new, |k| corners[k].clone());
    let mut value = worst.map_or_else(|| judged(&at_corner(&[])).0, |k| found[k]);
    // Where all corners were tried, no change of one part makes the worst worse.
    let mut can_worsen = !every_corner;
    while can_worsen {
        let turned: Vec<f64> = (0..signs.len())
            .into_par_iter()
            .map(|k| {
                let mut other = signs.clone();
                other[k] = !other[k];
                judged(&at_corner(&other)).0
            })
            .collect();
        tried += turned.len();
        let best = (0..turned.len()).reduce(|a, b| if turned[b] > turned[a] { b } else { a });
        let worse = best.filter(|&k| turned[k] > value);
        can_worsen = worse.is_some();
        if let Some(k) = worse {
            signs[k] = !signs[k];
            value = turned[k];
        }
    }
    let mut errors = at_corner(&signs);
    let mut inside = false;
    if value.is_finite() && !matters.is_empty() {
        let within = search_inside(&errors, &limits, &matters, &judged);
        if let Some((better, place)) = within.filter(|(better, _)| *better > value + 1e-9 * value.abs() + 1e-12) {
            (value, errors, inside) = (better, place, true);
        }
    }
    let at = judged(&errors).1;
    WorstCase { value, at, errors, slots: matters.len(), every_corner, corners: tried, inside }
}

type Judged<'a> = &'a dyn Fn(&[f64]) -> (f64, Option<f64>);

/// The middle of a slot's limits and how far they are from it.
fn middle((low, high): (f64, f64)) -> (f64, f64) {
    (0.5 * (low + high), 0.5 * (high - low))
}

/// The search inside: errors of the slots that matter, from the middle of their limits in units of their half-width.
struct Inside<'a> {
    errors: &'a [f64],
    limits: &'a [(f64, f64)],
    matters: &'a [usize],
    judged: Judged<'a>,
}

impl Inside<'_> {
    fn place(&self, units: &[f64]) -> Vec<f64> {
        let mut errors = self.errors.to_vec();
        for (&k, unit) in self.matters.iter().zip(units) {
            let (middle, half_width) = middle(self.limits[k]);
            errors[k] = middle + unit.clamp(-1.0, 1.0) * half_width;
        }
        errors
    }
}

impl CostFunction for Inside<'_> {
    type Param = Vec<f64>;
    type Output = f64;

    fn cost(&self, units: &Vec<f64>) -> Result<f64, Error> {
        // An unstable board is infinitely bad, which the simplex cannot weigh.
        Ok(-(self.judged)(&self.place(units)).0.min(1e9))
    }
}

fn search_inside(
    errors: &[f64],
    limits: &[(f64, f64)],
    matters: &[usize],
    judged: Judged,
) -> Option<(f64, Vec<f64>)> {
    let inside = Inside { errors, limits, matters, judged };
    let unit = |&k: &usize| {
        let (middle, half_width) = middle(limits[k]);
        (errors[k] - middle) / half_width
    };
    let start: Vec<f64> = matters.iter().map(unit).collect();
    let mut simplex = vec![start.clone()];
    for k in 0..matters.len() {
        let mut point = start.clone();
        // Unequal steps: a symmetric simplex can end at once.
        point[k] *= 0.7 - 0.4 * k as f64 / matters.len() as f64;
        simplex.push(point);
    }
    let judge = Inside { ..inside };
    let solver = NelderMead::new(simplex).with_sd_tolerance(1e-12).ok()?;
    let result = Executor::new(inside, solver).configure(|state| state.max_iters(STEPS)).run().ok()?;
    let place = judge.place(result.state.get_best_param()?);
    Some(((judge.judged)(&place).0, place))
}
