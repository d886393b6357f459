//! From a matrix of loadings to the best of several rotations.

use nalgebra::{DMatrix, DVector};
use rand_distr::{Distribution, StandardNormal};

use super::options::{Rotation, RotationOptions};
use super::result::Rotated;
use super::{oblimin, orthomax, promax};
use crate::components::spectrum::{self, singular};
use crate::error::{Error, Result};
use crate::live;
use crate::random::Generator;
use crate::repeat::repeat;
use crate::table::NamedMatrix;

/// Starts whose criteria differ by less than this share of their scale have found the same.
const SAME: f64 = 1e-8;

/// Singular values below this share of the largest make the columns dependent.
const DEPENDENT: f64 = 1e-10;

/// Rotates loadings to simple structure, with Kaiser normalisation and 20 starts.
///
/// One row for each variable and one column for each component. Structure correlations of the first
/// k components are what rotation is meant for:
/// [`PrincipalComponents::rotated`](crate::components::PrincipalComponents::rotated) takes them by
/// itself and gives rotated scores as well. Conventions stand at the [family](super).
///
/// ```
/// use semiaxis::nalgebra::dmatrix;
/// use semiaxis::rotation::{Rotation, rotate};
/// use semiaxis::table::NamedMatrix;
///
/// // Two groups of variables, seen along axes that are turned by 45 degrees.
/// let loadings = NamedMatrix::new(
///     dmatrix![0.6, 0.6; 0.5, 0.5; 0.5, -0.5; 0.4, -0.4],
///     ["a", "b", "c", "d"].map(String::from),
///     ["PC1", "PC2"].map(String::from),
/// )?;
/// let rotated = rotate(&loadings, Rotation::Varimax)?;
/// let first = rotated.loadings().column(0);
/// assert!((first[0] - 0.6 * 2.0_f64.sqrt()).abs() < 1e-9);
/// assert!(first[2].abs() < 1e-9);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// As [`rotate_with`].
pub fn rotate(loadings: &NamedMatrix, rotation: Rotation) -> Result<Rotated> {
    rotate_with(loadings, rotation, RotationOptions::default())
}

/// [`rotate`] with a choice of normalisation, starts, tolerance and seed.
///
/// ```
/// use semiaxis::nalgebra::dmatrix;
/// use semiaxis::rotation::{Rotation, RotationOptions, rotate_with};
/// use semiaxis::table::NamedMatrix;
///
/// let loadings = NamedMatrix::new(
///     dmatrix![0.9, 0.1; 0.8, 0.3; 0.2, 0.7; 0.3, 0.9],
///     ["a", "b", "c", "d"].map(String::from),
///     ["PC1", "PC2"].map(String::from),
/// )?;
/// let options = RotationOptions::new().starts(5).seed(1);
/// let rotated = rotate_with(&loadings, Rotation::oblimin(), options)?;
/// assert!(rotated.converged());
/// let communality = rotated.communalities()[0];
/// assert!((communality - 0.82).abs() < 1e-9); // 0.9² + 0.1², whatever the rotation
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::TooFewColumns`] for one component, which has nothing to be rotated against;
/// [`Error::TooFewRows`] for fewer variables than components; [`Error::NonFinite`];
/// [`Error::ZeroRows`] names variables without loadings, which cannot be brought to unit length;
/// [`Error::DependentColumns`] for an oblique rotation of columns that are combinations of each
/// other; [`Error::RotationCollapsed`] when oblique components fall together;
/// [`Error::OptionOutOfRange`].
pub fn rotate_with(
    loadings: &NamedMatrix,
    rotation: Rotation,
    options: RotationOptions,
) -> Result<Rotated> {
    rotate_weighted(loadings, DVector::repeat(loadings.n_rows(), 1.0), rotation, options)
}

/// When a start has arrived, and when it gives up.
#[derive(Clone, Copy)]
pub(super) struct Limits {
    pub(super) tolerance: f64,
    pub(super) iterations: usize,
}

/// Where a start has arrived.
pub(super) struct Arrival {
    pub(super) turn: DMatrix<f64>,
    pub(super) criterion: f64,
    pub(super) iterations: usize,
    pub(super) gradient: f64,
}

/// `variances` says how much of the total each variable carries, in the scale of the analysis.
pub(super) fn rotate_weighted(
    loadings: &NamedMatrix,
    variances: DVector<f64>,
    rotation: Rotation,
    options: RotationOptions,
) -> Result<Rotated> {
    rotation.check()?;
    options.check()?;
    check_loadings(loadings, rotation)?;
    let seed = options.chosen_seed().unwrap_or_else(live::seed);
    let search = Search::of(loadings, rotation, &options)?;
    let best = search.best_of(options.n_starts(), seed)?;
    let turn = match rotation {
        Rotation::Promax { power } => promax::oblique(&search.loadings, &best.arrival.turn, power)?,
        _ => best.arrival.turn,
    };
    let turn = in_order(loadings, turn, rotation, &variances)?;
    let oblique = rotation.is_oblique();
    let k = loadings.n_cols();
    let structure = loadings.values() * &turn;
    let pattern = if oblique { pattern_of(loadings, &turn)? } else { structure.clone() };
    let correlations = if oblique { turn.transpose() * &turn } else { DMatrix::identity(k, k) };
    let names: std::sync::Arc<[String]> = (1..=k).map(|place| format!("R{place}")).collect();
    let by_variable = |values| NamedMatrix::new(values, loadings.shared_row_names(), names.clone());
    Ok(Rotated {
        original: loadings.clone(),
        pattern: by_variable(pattern)?,
        structure: by_variable(structure)?,
        turn: NamedMatrix::new(turn, loadings.shared_column_names(), names.clone())?,
        correlations: NamedMatrix::new(correlations, names.clone(), names.clone())?,
        variances,
        rotation,
        options,
        seed,
        criterion: best.arrival.criterion * search.unit,
        start_criterion: search.criterion_at_start() * search.unit,
        iterations: best.arrival.iterations,
        gradient: best.arrival.gradient,
        n_reached: best.n_reached,
        n_collapsed: best.n_collapsed,
        dimmed_below: 0.3,
        sorted: false,
    })
}

fn check_loadings(loadings: &NamedMatrix, rotation: Rotation) -> Result<()> {
    let (p, k) = loadings.shape();
    if k < 2 {
        return Err(Error::TooFewColumns { method: "a rotation", needed: 2, found: k });
    }
    if p < k {
        return Err(Error::TooFewRows { method: "this rotation", needed: k, found: p });
    }
    check_finite(loadings)?;
    let (values, _) = singular(loadings)?;
    let rank = values.iter().filter(|value| **value > DEPENDENT * values[0]).count();
    if rank == 0 || (rotation.is_oblique() && rank < k) {
        return Err(Error::DependentColumns { what: "the loadings", rank, n_cols: k });
    }
    Ok(())
}

/// Refuses infinities and what is not a number.
pub(crate) fn check_finite(matrix: &NamedMatrix) -> Result<()> {
    let count = matrix.iter().filter(|value| !value.is_finite()).count();
    for (place, value) in matrix.iter().enumerate() {
        if !value.is_finite() {
            let (row, column) = (place % matrix.n_rows(), place / matrix.n_rows());
            return Err(Error::NonFinite {
                column: matrix.column_names()[column].clone(),
                row: row + 1,
                label: matrix.row_names()[row].clone(),
                value: *value,
                count,
            });
        }
    }
    Ok(())
}

/// One problem for all starts: loadings brought to rows of length one on average.
struct Search {
    loadings: DMatrix<f64>,
    /// What criteria of those loadings are multiplied by to be criteria of the loadings as given.
    unit: f64,
    rotation: Rotation,
    limits: Limits,
}

struct Best {
    arrival: Arrival,
    n_reached: usize,
    n_collapsed: usize,
}

impl Search {
    fn of(loadings: &NamedMatrix, rotation: Rotation, options: &RotationOptions) -> Result<Self> {
        let lengths: Vec<f64> = loadings.row_iter().map(|row| row.norm()).collect();
        let n_rows = lengths.len() as f64;
        let mut scaled = loadings.values().clone();
        let unit = if options.is_kaiser_normalised() {
            let longest = lengths.iter().fold(0.0_f64, |longest, length| longest.max(*length));
            // What is so short holds nothing but rounding, and would be blown up.
            let is_zero = |length: f64| length <= 8.0 * f64::EPSILON * longest;
            let names = loadings.row_names().iter().zip(&lengths);
            let rows: Vec<String> = names
                .filter(|(_, length)| is_zero(**length))
                .map(|(name, _)| name.clone())
                .collect();
            if !rows.is_empty() {
                return Err(Error::ZeroRows { rows });
            }
            for (mut row, length) in scaled.row_iter_mut().zip(&lengths) {
                row /= *length;
            }
            1.0
        } else {
            let mean_square = lengths.iter().map(|length| length * length).sum::<f64>() / n_rows;
            scaled /= mean_square.sqrt();
            mean_square * mean_square
        };
        let limits =
            Limits { tolerance: options.chosen_tolerance(), iterations: options.most_iterations() };
        // The search for oblimin works with the criterion for one row on average.
        let unit = if matches!(rotation, Rotation::Oblimin { .. }) { unit * n_rows } else { unit };
        Ok(Search { loadings: scaled, unit, rotation, limits })
    }

    /// The weight w of the orthomax family.
    fn weight(&self) -> f64 {
        match self.rotation {
            Rotation::Quartimax => 0.0,
            Rotation::Equamax => self.loadings.ncols() as f64 / 2.0,
            _ => 1.0,
        }
    }

    fn criterion_at_start(&self) -> f64 {
        match self.rotation {
            Rotation::Oblimin { gamma } => {
                oblimin::criterion(&self.loadings, gamma) / self.loadings.nrows() as f64
            }
            _ => orthomax::criterion(&self.loadings, self.weight()),
        }
    }

    fn best_of(&self, n_starts: usize, seed: u64) -> Result<Best> {
        let k = self.loadings.ncols();
        let arrivals = repeat(
            "rotation",
            n_starts,
            seed,
            || (),
            |_, generator, number| {
                let turn =
                    if number == 0 { DMatrix::identity(k, k) } else { random_turn(k, generator) };
                match self.rotation {
                    Rotation::Oblimin { gamma } => {
                        oblimin::seek(&self.loadings, gamma, turn, self.limits)
                    }
                    _ => orthomax::seek(&self.loadings, self.weight(), turn, self.limits).map(Some),
                }
            },
        )?;
        let mut arrivals: Vec<Arrival> = arrivals.into_iter().flatten().collect();
        let n_collapsed = n_starts - arrivals.len();
        // One that is still on its way may have a better criterion only because it is falling
        // without end, as oblimin can with γ above zero.
        let has_arrived = |arrival: &Arrival| arrival.gradient <= self.limits.tolerance;
        if arrivals.iter().any(has_arrived) {
            arrivals.retain(has_arrived);
        }
        let lower_is_better = matches!(self.rotation, Rotation::Oblimin { .. });
        let gain = |arrival: &Arrival| {
            if lower_is_better { -arrival.criterion } else { arrival.criterion }
        };
        let most = arrivals.iter().map(gain).fold(f64::NEG_INFINITY, f64::max);
        // The sum of fourth powers of row lengths bounds every criterion of the orthomax family.
        let mut scale: f64 = self.loadings.row_iter().map(|row| row.norm_squared().powi(2)).sum();
        if lower_is_better {
            scale /= self.loadings.nrows() as f64;
        }
        let mut reached: Vec<Arrival> =
            arrivals.into_iter().filter(|arrival| gain(arrival) >= most - SAME * scale).collect();
        let n_reached = reached.len();
        if reached.is_empty() {
            let rotation = self.rotation.to_string();
            return Err(Error::RotationCollapsed { rotation, n_starts });
        }
        // The first in order of those that found the same, so that rounding does not choose.
        Ok(Best { arrival: reached.swap_remove(0), n_reached, n_collapsed })
    }
}

/// An orthogonal matrix drawn uniformly: the orthogonal factor of a normal matrix (G. W. Stewart
/// (1980), "The efficient generation of random orthogonal matrices"; reflections make no
/// difference to any criterion, so signs are left as they come).
fn random_turn(k: usize, generator: &mut Generator) -> DMatrix<f64> {
    DMatrix::from_fn(k, k, |_, _| StandardNormal.sample(generator)).qr().q()
}

fn pattern_of(loadings: &DMatrix<f64>, turn: &DMatrix<f64>) -> Result<DMatrix<f64>> {
    let k = turn.ncols();
    let inverse = turn.clone().try_inverse().ok_or(Error::DependentColumns {
        what: "the rotation",
        rank: k - 1,
        n_cols: k,
    })?;
    Ok(loadings * inverse.transpose())
}

/// Columns by descending variance explained, each with the sign rule of the family.
fn in_order(
    loadings: &DMatrix<f64>,
    turn: DMatrix<f64>,
    rotation: Rotation,
    variances: &DVector<f64>,
) -> Result<DMatrix<f64>> {
    let structure = loadings * &turn;
    let pattern =
        if rotation.is_oblique() { pattern_of(loadings, &turn)? } else { structure.clone() };
    let explained = explained(&pattern, &structure, variances);
    let mut order: Vec<usize> = (0..turn.ncols()).collect();
    order.sort_by(|&a, &b| explained[b].total_cmp(&explained[a]));
    let mut ordered = turn.select_columns(&order);
    for (mut column, &place) in ordered.column_iter_mut().zip(&order) {
        column *= spectrum::sign(pattern.column(place).as_slice());
    }
    Ok(ordered)
}

/// What each rotated component explains: Σ_j v_j λ_jk s_jk.
pub(super) fn explained(
    pattern: &DMatrix<f64>,
    structure: &DMatrix<f64>,
    variances: &DVector<f64>,
) -> DVector<f64> {
    let columns = pattern.column_iter().zip(structure.column_iter());
    DVector::from_iterator(
        pattern.ncols(),
        columns.map(|(pattern, structure)| pattern.component_mul(&structure).dot(variances)),
    )
}
