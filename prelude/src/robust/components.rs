//! Components of the rows that belong together.

use std::fmt;
use std::sync::Arc;

use nalgebra::{DMatrix, DVector};

use super::fit::robust_scatter;
use super::options::RobustOptions;
use super::projection::{Projected, project};
use crate::components::scores::project_rows;
use crate::components::{Scaling, same_variables, spectrum};
use crate::distances::{ComponentModel, Distances, Plane, fitted_distances, sealed};
use crate::error::{Error, Result};
use crate::live::seed;
use crate::quantile::median;
use crate::table::{DataMatrix, NamedMatrix};

/// The way to robust components.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum RobustRoute {
    /// Eigenvectors of the covariance (or correlation) of
    /// [`robust_scatter`](super::robust_scatter). Taken for tables of more than 5p rows.
    Scatter,
    /// Projections: the rows least outlying along many directions give a plane, and a robust
    /// scatter within it gives the components (M. Hubert, P. J. Rousseeuw and K. Vanden Branden
    /// 2005). Taken for all other tables, wide ones among them.
    Projections,
}

impl fmt::Display for RobustRoute {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            RobustRoute::Scatter => "robust scatter matrix",
            RobustRoute::Projections => "projections, then a robust scatter matrix",
        })
    }
}

/// Principal components that rows which do not belong cannot turn.
///
/// Up to n − h rows may hold anything; see [`RobustOptions`] for h. With the default share of 0.75
/// that is a quarter of the rows. The route is [`RobustRoute::Scatter`] for n > 5p and
/// [`RobustRoute::Projections`] otherwise, unless the options say which.
///
/// - Scatter: all p components, or as many as the options ask for. Under
///   [`Scaling::Correlation`] variables are divided by their robust standard deviations, the roots
///   of the diagonal of the scatter matrix.
/// - Projections: as many components as the options ask for, else the first ones that carry 80 %
///   of the variance, among those with at least a thousandth of the leading variance, n/5 and ten
///   at most. Under [`Scaling::Correlation`] variables are divided by 1.4826 times the median
///   absolute deviation from the median. h is the larger of ⌊αn⌋ and ⌊(n + k + 1)/2⌋, with k the
///   number asked for or the most that the rule may take.
///
/// ```
/// use semiaxis::components::{Scaling, principal_components};
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::robust::{RobustOptions, robust_components};
/// use semiaxis::table::DataMatrix;
///
/// // Forty rows along the diagonal; eight were moved far off it.
/// let x = DMatrix::from_fn(40, 2, |i, j| {
///     let along = (i as f64 * 1.7).sin() * 3.0;
///     let noise = 0.1 * ((5 * i + 3 * j) as f64 * 0.9).cos();
///     if i < 8 { if j == 0 { 20.0 + noise } else { -20.0 + noise } } else { along + noise }
/// });
/// let x = DataMatrix::from_unnamed(x)?;
/// let robust = robust_components(&x, Scaling::Covariance, RobustOptions::new().seed(1))?;
/// let classical = principal_components(&x, Scaling::Covariance)?;
/// // Along the diagonal both loadings are 0.707; across it their signs differ.
/// let product = |loadings: &DMatrix<f64>| loadings[(0, 0)] * loadings[(1, 0)];
/// assert!((product(robust.loadings()) - 0.5).abs() < 0.01);
/// assert!((product(classical.loadings()) + 0.5).abs() < 0.01);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// Those of [`robust_scatter`](super::robust_scatter) on its route; by projections
/// [`Error::TooFewRows`] for fewer than 2k or k + 2 rows, [`Error::NoRobustSpread`] under
/// correlation when half of a column is equal, and [`Error::NoVariation`]. On both
/// [`Error::WeightsNotCovered`], [`Error::ComponentOutOfRange`] when more components are asked for
/// than most rows have, and [`Error::OptionOutOfRange`].
pub fn robust_components(
    x: &DataMatrix,
    scaling: Scaling,
    options: RobustOptions,
) -> Result<RobustComponents> {
    options.check()?;
    if x.relative_weights().is_some() {
        return Err(Error::WeightsNotCovered { method: "robust components" });
    }
    let usual = match x.n_rows() > 5 * x.n_cols() {
        true => RobustRoute::Scatter,
        false => RobustRoute::Projections,
    };
    let seed = options.chosen_seed().unwrap_or_else(seed);
    match options.chosen_route().unwrap_or(usual) {
        RobustRoute::Scatter => by_scatter(x, scaling, options.seed(seed)),
        RobustRoute::Projections => by_projections(x, scaling, options.seed(seed), seed),
    }
}

fn by_scatter(
    x: &DataMatrix,
    scaling: Scaling,
    options: RobustOptions,
) -> Result<RobustComponents> {
    let p = x.n_cols();
    let k = options.chosen_components().unwrap_or(p);
    if k > p {
        return Err(Error::ComponentOutOfRange { asked: k, available: p });
    }
    let scatter = robust_scatter(x, options)?;
    let (matrix, scale) = match scaling {
        Scaling::Covariance => (scatter.covariance().values().clone(), DVector::repeat(p, 1.0)),
        Scaling::Correlation => {
            let scale = scatter.covariance().values().diagonal().map(f64::sqrt);
            (scatter.correlation().into_values(), scale)
        }
    };
    let total_variance = matrix.trace();
    let spectrum = spectrum::symmetric(matrix)?;
    let found = Found {
        scaling,
        route: RobustRoute::Scatter,
        centre: scatter.centre().clone(),
        scale,
        loadings: spectrum.vectors.columns(0, k).into_owned(),
        variances: spectrum.roots.rows(0, k).into_owned(),
        subset_size: scatter.subset_size(),
        seed: scatter.seed(),
    };
    found.into_result(x, Some(total_variance))
}

fn by_projections(
    x: &DataMatrix,
    scaling: Scaling,
    options: RobustOptions,
    seed: u64,
) -> Result<RobustComponents> {
    let (centre, scale) = medians(x, scaling)?;
    let mut y = x.values().clone();
    for (j, mut column) in y.column_iter_mut().enumerate() {
        column.apply(|value| *value = (*value - centre[j]) / scale[j]);
    }
    let Projected { centre: shift, loadings, variances, subset_size } = project(y, options, seed)?;
    let found = Found {
        scaling,
        route: RobustRoute::Projections,
        centre: centre + shift.component_mul(&scale),
        scale,
        loadings,
        variances,
        subset_size,
        seed,
    };
    found.into_result(x, None)
}

/// Makes the median absolute deviation of normal numbers their standard deviation: one over the
/// normal quantile of 3/4.
const MAD_TO_DEVIATION: f64 = 1.482_602_218_505_602;

fn medians(x: &DataMatrix, scaling: Scaling) -> Result<(DVector<f64>, DVector<f64>)> {
    let columns = || x.values().column_iter().map(|column| column.iter().copied().collect());
    let centre = DVector::from_iterator(x.n_cols(), columns().map(median));
    if scaling == Scaling::Covariance {
        return Ok((centre, DVector::repeat(x.n_cols(), 1.0)));
    }
    let scale = columns().zip(centre.iter()).map(|(column, centre): (Vec<f64>, _)| {
        MAD_TO_DEVIATION * median(column.iter().map(|value| (value - centre).abs()).collect())
    });
    let scale = DVector::from_iterator(x.n_cols(), scale);
    let columns: Vec<(String, f64)> = (0..x.n_cols())
        .filter(|&j| scale[j] == 0.0)
        .map(|j| (x.variables()[j].clone(), centre[j]))
        .collect();
    if columns.is_empty() { Ok((centre, scale)) } else { Err(Error::NoRobustSpread { columns }) }
}

/// What both routes hand over.
struct Found {
    scaling: Scaling,
    route: RobustRoute,
    centre: DVector<f64>,
    scale: DVector<f64>,
    loadings: DMatrix<f64>,
    variances: DVector<f64>,
    subset_size: usize,
    seed: u64,
}

impl Found {
    fn into_result(mut self, x: &DataMatrix, total: Option<f64>) -> Result<RobustComponents> {
        for mut column in self.loadings.column_iter_mut() {
            if spectrum::sign(column.as_slice()) < 0.0 {
                column.neg_mut();
            }
        }
        let names: Arc<[String]> = (1..=self.variances.len()).map(|k| format!("PC{k}")).collect();
        let scores = project_rows(x.values(), &self.centre, &self.scale, &self.loadings, || false);
        let plane = Plane {
            variables: x.shared_variables(),
            transformations: x.transformations().to_vec(),
            centre: self.centre.clone(),
            scale: self.scale.clone(),
            loadings: self.loadings.clone(),
            variances: self.variances.clone(),
            left_out: None,
            n_rows: x.n_rows(),
        };
        let trusted = self.subset_size as f64 / x.n_rows() as f64;
        let distances = fitted_distances(plane, x, trusted, true)?;
        let total = total.unwrap_or_else(|| self.variances.sum() + variance_beyond(&distances));
        Ok(RobustComponents {
            data: x.clone(),
            scaling: self.scaling,
            route: self.route,
            centre: self.centre,
            scale: self.scale,
            total_variance: total,
            variances: self.variances,
            loadings: NamedMatrix::new(self.loadings, x.shared_variables(), names.clone())?,
            scores: NamedMatrix::new(scores, x.shared_labels(), names)?,
            distances,
            subset_size: self.subset_size,
            seed: self.seed,
        })
    }
}

/// The mean square of the orthogonal distances within their cut-off.
fn variance_beyond(distances: &Distances) -> f64 {
    let Some(limit) = distances.orthogonal_limit() else { return 0.0 };
    let within: Vec<f64> =
        distances.orthogonal_distances().iter().copied().filter(|d| *d <= limit).collect();
    let squares: f64 = within.iter().map(|distance| distance * distance).sum();
    if within.len() > 1 { squares / (within.len() - 1) as f64 } else { 0.0 }
}

/// Principal components of the rows that belong together, and the distance of every row from them;
/// made by [`robust_components`].
///
/// Throughout, n is the number of rows, p that of variables and r that of components.
#[derive(Debug, Clone)]
pub struct RobustComponents {
    data: DataMatrix,
    scaling: Scaling,
    route: RobustRoute,
    centre: DVector<f64>,
    scale: DVector<f64>,
    variances: DVector<f64>,
    total_variance: f64,
    loadings: NamedMatrix,
    scores: NamedMatrix,
    distances: Distances,
    subset_size: usize,
    seed: u64,
}

impl RobustComponents {
    /// The robust variances of the components, descending: eigenvalues of the robust scatter
    /// matrix, consistent for normal rows.
    pub fn variances(&self) -> &DVector<f64> {
        &self.variances
    }

    /// The share of each component in the total variance.
    pub fn proportions(&self) -> DVector<f64> {
        &self.variances / self.total_variance
    }

    /// The share of the first component, the first two, the first three, and so on.
    pub fn cumulative(&self) -> DVector<f64> {
        let mut sum = 0.0;
        self.variances.map(|variance| {
            sum += variance;
            sum / self.total_variance
        })
    }

    /// The loadings, p × r: columns of unit length, perpendicular to one another, in each of which
    /// the loading of largest absolute value is positive.
    pub fn loadings(&self) -> &NamedMatrix {
        &self.loadings
    }

    /// The scores of all rows, n × r, those that do not belong among them: deviations from the
    /// robust centre, scaled, along the components.
    pub fn scores(&self) -> &NamedMatrix {
        &self.scores
    }

    /// The scores of other rows, measured against the centre and scale of this analysis.
    ///
    /// # Errors
    ///
    /// [`Error::VariablesDiffer`] names what is missing, unknown or out of place;
    /// [`Error::TransformationsDiffer`] what the rows went through instead.
    pub fn project(&self, x: &DataMatrix) -> Result<NamedMatrix> {
        same_variables(self.variables(), x.variables())?;
        x.check_transformations(self.data.transformations())?;
        let loadings = self.loadings.values();
        let scores = project_rows(x.values(), &self.centre, &self.scale, loadings, || false);
        NamedMatrix::new(scores, x.shared_labels(), self.loadings.shared_column_names())
    }

    /// The robust centre, p values in the units of the variables.
    pub fn centre(&self) -> &DVector<f64> {
        &self.centre
    }

    /// What each variable was divided by: a robust standard deviation under correlation (which one
    /// depends on the route, see [`robust_components`]), one under covariance.
    pub fn scale(&self) -> &DVector<f64> {
        &self.scale
    }

    /// The total variance. By scatter it is the sum of the robust variances of all variables: p
    /// under correlation. By projections it is the sum of the components' variances and the mean
    /// square (divisor: rows − 1) of the orthogonal distances of the rows within their cut-off.
    pub fn total_variance(&self) -> f64 {
        self.total_variance
    }

    /// Score and orthogonal distances of all rows from these components, with cut-offs. For fewer
    /// components or new rows call [`distances`](crate::distances::distances).
    pub fn distances(&self) -> &Distances {
        &self.distances
    }

    /// The labels of the rows beyond a cut-off, in row order.
    pub fn flagged(&self) -> Vec<&str> {
        self.distances.unusual()
    }

    /// What the variables were measured in.
    pub fn scaling(&self) -> Scaling {
        self.scaling
    }

    /// The way the components were found.
    pub fn route(&self) -> RobustRoute {
        self.route
    }

    /// The number h of rows that were trusted.
    pub fn subset_size(&self) -> usize {
        self.subset_size
    }

    /// The seed; the same seed gives the same numbers.
    pub fn seed(&self) -> u64 {
        self.seed
    }

    /// The matrix that was analysed.
    pub fn data(&self) -> &DataMatrix {
        &self.data
    }

    /// The names of the variables, in order.
    pub fn variables(&self) -> &[String] {
        self.data.variables()
    }

    /// The labels of the rows, in order.
    pub fn labels(&self) -> &[String] {
        self.data.labels()
    }

    /// The number n of rows.
    pub fn n_rows(&self) -> usize {
        self.data.n_rows()
    }

    /// The number p of variables.
    pub fn n_variables(&self) -> usize {
        self.data.n_cols()
    }

    /// The number r of components.
    pub fn n_components(&self) -> usize {
        self.variances.len()
    }
}

impl sealed::Sealed for RobustComponents {}

impl ComponentModel for RobustComponents {
    fn data(&self) -> &DataMatrix {
        &self.data
    }

    fn centre(&self) -> &DVector<f64> {
        &self.centre
    }

    fn scale(&self) -> &DVector<f64> {
        &self.scale
    }

    fn loadings(&self) -> &NamedMatrix {
        &self.loadings
    }

    fn variances(&self) -> &DVector<f64> {
        &self.variances
    }

    fn is_complete(&self) -> bool {
        self.n_components() == self.n_variables()
    }

    fn is_robust(&self) -> bool {
        true
    }

    fn trusted_share(&self) -> f64 {
        self.subset_size as f64 / self.data.n_rows() as f64
    }
}
