//! The search for the subset whose covariance has the smallest determinant.
//!
//! P. J. Rousseeuw and K. Van Driessen (1999), "A fast algorithm for the minimum covariance
//! determinant estimator", Technometrics 41, 212–223, sections 3 and 4: many random starts take two
//! concentration steps each, the ten best go on until they change no more. With more than 600 rows
//! the starts work on up to five groups of rows, the ten best of each are tried on all those rows
//! together, and the ten best of these on the whole table.

use nalgebra::{DMatrix, DVector};
use rand::RngExt;

use super::subsets::{self, Estimate, Flat, Workspace};
use super::univariate::tightest_window;
use crate::components::spectrum::symmetric;
use crate::error::{Error, Result};
use crate::live::interrupted;
use crate::random::{Generator, replicate_generator};
use crate::repeat::repeat;

/// Tables of more rows than this are searched in groups.
const WHOLE: usize = 600;
/// Rows in a group, and the most groups there are.
const GROUP: usize = 300;
const MOST_GROUPS: usize = 5;
/// Candidates that go on to the next round.
const BEST: usize = 10;
/// Concentration steps of each start, and on each candidate before the last round.
const FIRST_STEPS: usize = 2;
/// Steps after which a candidate counts as not converged. A step that changes anything lowers the
/// determinant, so that the sequence ends by itself; some ten steps are usual.
const MOST_STEPS: usize = 200;

/// The subset that was found.
#[derive(Debug, Clone)]
pub(super) struct Tightest {
    /// Rows, ascending.
    pub(super) subset: Vec<u32>,
    pub(super) estimate: Estimate,
    /// Concentration steps of the last round, and whether they came to an end.
    pub(super) n_steps: usize,
    pub(super) converged: bool,
}

/// A hyperplane that holds h rows or more: normal · x = constant, the normal of unit length.
#[derive(Debug, Clone)]
pub(super) struct Hyperplane {
    pub(super) normal: DVector<f64>,
    pub(super) constant: f64,
    /// Rows on it, ascending.
    pub(super) on: Vec<u32>,
}

/// What the search ends in.
#[derive(Debug, Clone)]
pub(super) enum Found {
    Tightest(Tightest),
    Hyperplane(Hyperplane),
}

/// Searches for the h rows of `x` of least determinant; columns should be near zero and of size
/// one, so that no digits are lost. Needs p < h ≤ n.
pub(super) fn search(x: &DMatrix<f64>, h: usize, n_starts: usize, seed: u64) -> Result<Found> {
    if x.ncols() == 1 {
        return in_one_dimension(x, h);
    }
    let n = x.nrows();
    if h == n {
        let rows: Vec<u32> = (0..n as u32).collect();
        return finish(x, rows, 0, true);
    }
    let candidates = match n {
        0..=WHOLE => starts(x, h, n_starts, seed, 0)?,
        _ => by_groups(x, h, n_starts, seed)?,
    };
    let mut candidates = match candidates {
        Round::Estimates(candidates) => candidates,
        Round::Hyperplane(plane) => return Ok(Found::Hyperplane(plane)),
    };
    candidates.truncate(BEST);
    let round = advance(x, h, candidates, MOST_STEPS, seed)?;
    let best = match round {
        Advanced::Hyperplane(plane) => return Ok(Found::Hyperplane(plane)),
        Advanced::Candidates(candidates) => candidates.into_iter().next(),
    };
    let best = best.ok_or(Error::NoConvergence { method: "the search for a robust scatter" })?;
    finish(x, best.rows, best.n_steps, best.converged)
}

/// A start, or what became of it.
#[derive(Debug, Clone)]
struct Candidate {
    estimate: Estimate,
    rows: Vec<u32>,
    n_steps: usize,
    converged: bool,
}

enum Round {
    Estimates(Vec<Estimate>),
    Hyperplane(Hyperplane),
}

enum Advanced {
    Candidates(Vec<Candidate>),
    Hyperplane(Hyperplane),
}

/// A few steps, or as many as it takes; the flat subset if one turns up.
fn concentrate(
    x: &DMatrix<f64>,
    h: usize,
    mut estimate: Estimate,
    most_steps: usize,
    workspace: &mut Workspace,
) -> std::result::Result<Candidate, Flat> {
    let (mut rows, mut before) = (Vec::new(), Vec::new());
    for n_steps in 1..=most_steps {
        subsets::closest(x, &estimate, h, workspace, &mut rows);
        if rows == before || interrupted() {
            return Ok(Candidate { estimate, rows, n_steps, converged: true });
        }
        estimate = subsets::estimate(x, &rows, workspace)?;
        std::mem::swap(&mut rows, &mut before);
    }
    Ok(Candidate { estimate, rows: before, n_steps: most_steps, converged: false })
}

/// Random starts with two steps each; the best of them first, without repetition.
///
/// `place` tells the generators of several groups apart.
fn starts(x: &DMatrix<f64>, h: usize, n_starts: usize, seed: u64, place: u64) -> Result<Round> {
    let start = |workspace: &mut Workspace, generator: &mut Generator, _| {
        let first = match random_start(x, generator, workspace) {
            Ok(first) => first,
            Err(flat) => return Ok(Err(flat)),
        };
        Ok(concentrate(x, h, first, FIRST_STEPS, workspace).map(|candidate| candidate.estimate))
    };
    let seed = seed.wrapping_add(place.rotate_left(32));
    let found = repeat("robust scatter", n_starts, seed, Workspace::new, start)?;
    sort_out(x, h, found)
}

/// Estimates in order of their determinants, or a hyperplane that holds h rows.
fn sort_out(
    x: &DMatrix<f64>,
    h: usize,
    found: Vec<std::result::Result<Estimate, Flat>>,
) -> Result<Round> {
    let mut estimates = Vec::new();
    for found in found {
        match found {
            Ok(estimate) => estimates.push(estimate),
            Err(flat) => {
                let plane = hyperplane(x, &flat)?;
                if plane.on.len() >= h {
                    return Ok(Round::Hyperplane(plane));
                }
            }
        }
    }
    Ok(Round::Estimates(in_order(estimates)))
}

// The sort is stable, so that of equal determinants the earlier start comes first; subsets are
// summed in row order, so that equal ones have equal determinants to the last digit.
fn in_order(mut estimates: Vec<Estimate>) -> Vec<Estimate> {
    estimates.sort_by(|a, b| a.log_determinant.total_cmp(&b.log_determinant));
    estimates.dedup_by(|a, b| a.log_determinant == b.log_determinant);
    estimates
}

/// The estimate from p + 1 rows drawn at random, or as many more as it takes to leave no
/// hyperplane.
fn random_start(
    x: &DMatrix<f64>,
    generator: &mut Generator,
    workspace: &mut Workspace,
) -> std::result::Result<Estimate, Flat> {
    let (n, p) = x.shape();
    let mut rows: Vec<u32> = Vec::with_capacity(p + 1);
    loop {
        let more = if rows.is_empty() { (p + 1).min(n) } else { 1 };
        for _ in 0..more {
            // Few are drawn from many as a rule; a draw that repeats one is drawn again.
            loop {
                let row = generator.random_range(0..n as u32);
                if !rows.contains(&row) {
                    rows.push(row);
                    break;
                }
            }
        }
        match subsets::estimate(x, &rows, workspace) {
            Err(_) if rows.len() < n => {}
            answer => return answer,
        }
    }
}

/// The rounds for a long table.
fn by_groups(x: &DMatrix<f64>, h: usize, n_starts: usize, seed: u64) -> Result<Round> {
    let n = x.nrows();
    let n_groups = (n / GROUP).min(MOST_GROUPS);
    let mut rows: Vec<usize> = (0..n).collect();
    let mut generator = replicate_generator(seed, u64::MAX);
    let n_drawn = n.min(n_groups * GROUP).max(if n_groups < MOST_GROUPS { n } else { 0 });
    for place in 0..n_drawn {
        rows.swap(place, generator.random_range(place..n));
    }
    rows.truncate(n_drawn);
    let share = h as f64 / n as f64;
    let sized = |n_rows: usize| ((share * n_rows as f64).ceil() as usize).min(n_rows);
    let per_group = n_drawn.div_ceil(n_groups);
    let mut together = Vec::new();
    for (place, group) in rows.chunks(per_group).enumerate() {
        let group = x.select_rows(group.iter());
        let h_group = sized(group.nrows()).max(x.ncols() + 1);
        let n_starts = n_starts.div_ceil(n_groups);
        match starts(&group, h_group, n_starts, seed, place as u64 + 1)? {
            Round::Estimates(mut best) => {
                best.truncate(BEST);
                together.extend(best);
            }
            Round::Hyperplane(plane) => {
                // Flat within a group need not be flat within the table.
                let plane = Hyperplane { on: on_plane(x, &plane.normal, plane.constant), ..plane };
                if plane.on.len() >= h {
                    return Ok(Round::Hyperplane(plane));
                }
            }
        }
    }
    if together.is_empty() {
        return starts(x, h, n_starts, seed, 0);
    }
    let merged = x.select_rows(rows.iter());
    let h_merged = sized(n_drawn);
    match advance(&merged, h_merged, together, FIRST_STEPS, seed)? {
        Advanced::Candidates(found) => {
            let estimates = found.into_iter().map(|candidate| candidate.estimate).collect();
            Ok(Round::Estimates(in_order(estimates)))
        }
        Advanced::Hyperplane(plane) => {
            let on = on_plane(x, &plane.normal, plane.constant);
            if on.len() >= h {
                return Ok(Round::Hyperplane(Hyperplane { on, ..plane }));
            }
            // The rows drawn are flat and the table is not: only the whole table can tell.
            starts(x, h, n_starts, seed, 0)
        }
    }
}

/// Carries candidates on, side by side; the best comes first.
fn advance(
    x: &DMatrix<f64>,
    h: usize,
    estimates: Vec<Estimate>,
    most_steps: usize,
    seed: u64,
) -> Result<Advanced> {
    let step = |workspace: &mut Workspace, _: &mut Generator, place: usize| {
        Ok(concentrate(x, h, estimates[place].clone(), most_steps, workspace))
    };
    let found = repeat("robust scatter", estimates.len(), seed, Workspace::new, step)?;
    let mut candidates = Vec::new();
    for found in found {
        match found {
            Ok(candidate) => candidates.push(candidate),
            Err(flat) => {
                let plane = hyperplane(x, &flat)?;
                if plane.on.len() >= h {
                    return Ok(Advanced::Hyperplane(plane));
                }
            }
        }
    }
    candidates.sort_by(|a, b| a.estimate.log_determinant.total_cmp(&b.estimate.log_determinant));
    Ok(Advanced::Candidates(candidates))
}

/// The subset with its own estimate.
fn finish(x: &DMatrix<f64>, subset: Vec<u32>, n_steps: usize, converged: bool) -> Result<Found> {
    match subsets::estimate(x, &subset, &mut Workspace::new()) {
        Ok(estimate) => Ok(Found::Tightest(Tightest { subset, estimate, n_steps, converged })),
        Err(flat) => Ok(Found::Hyperplane(hyperplane(x, &flat)?)),
    }
}

fn in_one_dimension(x: &DMatrix<f64>, h: usize) -> Result<Found> {
    let mut order: Vec<u32> = (0..x.nrows() as u32).collect();
    let column = x.as_slice();
    order.sort_by(|&a, &b| column[a as usize].total_cmp(&column[b as usize]).then(a.cmp(&b)));
    let ascending: Vec<f64> = order.iter().map(|&row| column[row as usize]).collect();
    let window = tightest_window(&ascending, h);
    if window.variance == 0.0 {
        let normal = DVector::repeat(1, 1.0);
        let on = on_plane(x, &normal, window.mean);
        return Ok(Found::Hyperplane(Hyperplane { normal, constant: window.mean, on }));
    }
    let mut subset = order[window.first..window.first + h].to_vec();
    subset.sort_unstable();
    finish(x, subset, 0, true)
}

/// The direction in which a flat subset has no extent, and every row that lies in its hyperplane.
fn hyperplane(x: &DMatrix<f64>, flat: &Flat) -> Result<Hyperplane> {
    let spectrum = symmetric(flat.covariance.clone())?;
    let normal = spectrum.vectors.column(x.ncols() - 1).into_owned();
    let constant = normal.dot(&flat.centre);
    let on = on_plane(x, &normal, constant);
    Ok(Hyperplane { normal, constant, on })
}

/// Rows within rounding of a hyperplane, where columns are of size one.
fn on_plane(x: &DMatrix<f64>, normal: &DVector<f64>, constant: f64) -> Vec<u32> {
    // Eigenvectors of a covariance are exact to about the root of what its smallest root is.
    let near = |row: &usize| (x.row(*row).tr_dot(normal) - constant).abs() < 1e-7;
    (0..x.nrows()).filter(near).map(|row| row as u32).collect()
}

/// The whole of a symmetric matrix of which the lower triangle is filled.
pub(super) fn mirrored(mut lower: DMatrix<f64>) -> DMatrix<f64> {
    lower.fill_upper_triangle_with_lower_triangle();
    lower
}
