//! Robust components of wide data: projections first, then a robust scatter in few dimensions.
//!
//! M. Hubert, P. J. Rousseeuw and K. Vanden Branden (2005), "ROBPCA: a new approach to robust
//! principal component analysis", Technometrics 47, 64–79, section 2 and appendix: the data are
//! brought to the space that they span; the h rows that are least outlying along many directions
//! give a first plane; the rows near that plane give a better one; and a minimum covariance
//! determinant within it gives centre, directions and variances.

use nalgebra::{DMatrix, DVector};

use super::fit::{Outcome, reweighted};
use super::options::RobustOptions;
use super::outlyingness::{Outlying, outlyingness};
use super::subsets::smallest;
use crate::components::spectrum::{singular, symmetric};
use crate::components::{Scaling, principal_components};
use crate::distances::{orthogonal_limit, orthogonal_moments};
use crate::error::{Error, Result};
use crate::table::DataMatrix;

/// The most components that are sought when their number is left to the rule.
const MOST_COMPONENTS: usize = 10;
/// Of the leading variance, what a component must have to be kept by the rule.
const LEAST_RATIO: f64 = 1e-3;
/// The share of variance that is enough.
const ENOUGH: f64 = 0.8;
/// The coverage of the cut-off for rows near the first plane.
const NEAR: f64 = 0.975;

/// Centre, directions and variances in the coordinates that were given.
pub(super) struct Projected {
    pub(super) centre: DVector<f64>,
    /// p × k, columns of unit length.
    pub(super) loadings: DMatrix<f64>,
    pub(super) variances: DVector<f64>,
    /// Rows that were trusted.
    pub(super) subset_size: usize,
}

/// The components of columns that are near zero and scaled.
pub(super) fn project(y: DMatrix<f64>, options: RobustOptions, seed: u64) -> Result<Projected> {
    let n = y.nrows();
    let mut span = Span::of(y)?;
    let asked = options.chosen_components();
    let available = span.rows.ncols();
    if asked.is_some_and(|asked| asked > available) {
        return Err(Error::ComponentOutOfRange { asked: asked.unwrap_or(0), available });
    }
    // A robust scatter in k dimensions needs five rows for each as a rule, and two at least.
    let most = asked.unwrap_or((n / 5).clamp(1, MOST_COMPONENTS).min(available));
    let needed = (2 * most).max(most + 2);
    if n < needed {
        return Err(Error::TooFewRows { method: "robust components", needed, found: n });
    }
    let h =
        ((options.chosen_share() * n as f64 + 1e-9) as usize).max((n + most).div_ceil(2)).min(n);
    let worst = loop {
        match outlyingness(&span.rows, h, options.n_directions(), seed)? {
            Outlying::By(worst) => break worst,
            Outlying::Flat { direction, at } => span.flatten(&direction, at)?,
        }
    };
    let mut least = Vec::new();
    smallest(&worst, h, &mut Vec::new(), &mut least);
    let first = Directions::of(&span.rows, &least)?;
    let k = match asked {
        Some(asked) => asked.min(first.variances.len()),
        None => by_rule(&first.variances, most),
    };
    let near = near_plane(&span.rows, &first, k, h);
    let second = Directions::of(&span.rows, &near)?;
    let (k, found) = within(&span, &second, k.min(second.variances.len()), h, options, seed)?;
    match asked {
        Some(asked) if k < asked => Err(Error::ComponentOutOfRange { asked, available: k }),
        _ => Ok(Projected { subset_size: h, ..found }),
    }
}

/// The space that rows span: y = origin + basis · row.
struct Span {
    origin: DVector<f64>,
    /// p × r, columns of unit length and perpendicular.
    basis: DMatrix<f64>,
    /// n × r.
    rows: DMatrix<f64>,
}

impl Span {
    fn of(y: DMatrix<f64>) -> Result<Self> {
        let pca = principal_components(&DataMatrix::from_unnamed(y)?, Scaling::Covariance)?;
        Ok(Span {
            origin: pca.mean().clone(),
            basis: pca.loadings().values().clone(),
            rows: pca.scores().values().clone(),
        })
    }

    /// Takes away a direction in which most rows do not differ: the plane through those rows.
    ///
    /// A reflection turns the direction into the first axis, and the other axes stay.
    fn flatten(&mut self, direction: &DVector<f64>, at: f64) -> Result<()> {
        let r = direction.len();
        if r == 1 {
            return Err(Error::NoVariation { n_rows: self.rows.nrows() });
        }
        self.origin += &self.basis * (direction * at);
        let mut mirror = direction.clone();
        mirror[0] += direction[0].signum();
        let length = mirror.norm();
        mirror /= length;
        let reflected = |matrix: &DMatrix<f64>| {
            let along = matrix * &mirror;
            let turned = matrix - along * mirror.transpose() * 2.0;
            turned.columns(1, r - 1).into_owned()
        };
        self.basis = reflected(&self.basis);
        self.rows = reflected(&self.rows);
        Ok(())
    }
}

/// Centre, directions and variances of some of the rows.
struct Directions {
    centre: DVector<f64>,
    vectors: DMatrix<f64>,
    variances: DVector<f64>,
}

impl Directions {
    fn of(rows: &DMatrix<f64>, chosen: &[u32]) -> Result<Self> {
        let places: Vec<usize> = chosen.iter().map(|row| *row as usize).collect();
        let mut chosen = rows.select_rows(&places);
        let centre = chosen.row_mean().transpose();
        for (mut column, centre) in chosen.column_iter_mut().zip(centre.iter()) {
            column.add_scalar_mut(-centre);
        }
        let (values, vectors) = singular(&chosen)?;
        let variances = values.map(|value| value * (value / (places.len() as f64 - 1.0)));
        let least = variances[0] * 1e-14;
        let rank = variances.iter().take_while(|variance| **variance > least).count();
        if rank == 0 {
            return Err(Error::NoVariation { n_rows: rows.nrows() });
        }
        Ok(Directions {
            centre,
            vectors: vectors.columns(0, rank).into_owned(),
            variances: variances.rows(0, rank).into_owned(),
        })
    }
}

/// The first number of components that carries 80 % of the variance, among those with a
/// thousandth of the leading one.
fn by_rule(variances: &DVector<f64>, most: usize) -> usize {
    let total = variances.sum();
    let large = variances.iter().take_while(|v| **v >= LEAST_RATIO * variances[0]).count();
    let mut sum = 0.0;
    let enough = variances.iter().position(|variance| {
        sum += variance;
        sum >= ENOUGH * total
    });
    enough.map_or(large, |place| place + 1).min(large).min(most).max(1)
}

/// The rows whose distance from the plane stays within its cut-off; all rows if there is nothing
/// beyond the plane.
fn near_plane(rows: &DMatrix<f64>, plane: &Directions, k: usize, h: usize) -> Vec<u32> {
    let (n, r) = rows.shape();
    let mut all = 0..n as u32;
    if k >= r {
        // Nothing can be off all dimensions, so that the first plane has to do.
        let squares: Vec<f64> = within_squares(rows, plane);
        let mut closest = Vec::new();
        smallest(&squares, h, &mut Vec::new(), &mut closest);
        return closest;
    }
    let vectors = plane.vectors.columns(0, k);
    let mut centred = rows.clone();
    for (mut column, centre) in centred.column_iter_mut().zip(plane.centre.iter()) {
        column.add_scalar_mut(-centre);
    }
    let residuals = &centred - &centred * vectors * vectors.transpose();
    let squares: Vec<f64> = residuals.row_iter().map(|row| row.norm_squared()).collect();
    let Some(moments) = orthogonal_moments(&squares, h as f64 / n as f64) else {
        return all.collect();
    };
    let limit = orthogonal_limit(moments, NEAR).powi(2);
    let near: Vec<u32> = all.by_ref().filter(|row| squares[*row as usize] <= limit).collect();
    if near.len() >= h {
        return near;
    }
    let mut closest = Vec::new();
    smallest(&squares, h, &mut Vec::new(), &mut closest);
    closest
}

/// Squared distances within all directions of a plane.
fn within_squares(rows: &DMatrix<f64>, plane: &Directions) -> Vec<f64> {
    let offset = plane.vectors.tr_mul(&plane.centre);
    let mut scores = rows * &plane.vectors;
    for (k, mut column) in scores.column_iter_mut().enumerate() {
        column.add_scalar_mut(-offset[k]);
        column /= plane.variances[k].sqrt();
    }
    scores.row_iter().map(|row| row.norm_squared()).collect()
}

/// The robust scatter of rows within a plane of k dimensions, or of as many as have a volume.
fn within(
    span: &Span,
    plane: &Directions,
    mut k: usize,
    h: usize,
    options: RobustOptions,
    seed: u64,
) -> Result<(usize, Projected)> {
    loop {
        let vectors = plane.vectors.columns(0, k);
        let offset = vectors.tr_mul(&plane.centre);
        let mut scores = &span.rows * vectors;
        for (mut column, offset) in scores.column_iter_mut().zip(offset.iter()) {
            column.add_scalar_mut(-offset);
        }
        match reweighted(&scores, h.max(k + 1), options, seed)? {
            Outcome::Fitted(fitted) => {
                let spectrum = symmetric(fitted.covariance)?;
                let centre = &plane.centre + vectors * fitted.centre;
                let projected = Projected {
                    centre: &span.origin + &span.basis * centre,
                    loadings: &span.basis * (vectors * spectrum.vectors),
                    variances: spectrum.roots,
                    subset_size: h,
                };
                return Ok((k, projected));
            }
            _ if k > 1 => k -= 1,
            _ => {
                return Err(Error::SingularScatter {
                    method: "robust components",
                    rank: 0,
                    order: 1,
                });
            }
        }
    }
}
