//! Score and orthogonal distances, and how rows stand by them.

use std::fmt;
use std::sync::Arc;

use nalgebra::DVector;

use super::contributions::Contributions;
use super::limits::{
    USUAL_COVERAGE, check_coverage, orthogonal_limit, orthogonal_moments, score_limit,
};
use super::model::{ComponentModel, Plane};
use crate::error::Result;
use crate::table::DataMatrix;

/// The distances of the rows that components were fitted to, with cut-offs at coverage 0.975.
///
/// ```text
/// score distance       √( Σ_{k ≤ K} z_ik² / λ_k )
/// orthogonal distance  √( Σ_j ( x̃_ij − Σ_{k ≤ K} z_ik v_jk )² )
/// ```
///
/// with z the scores, λ the variances, v the loadings and x̃ the deviations from the centre,
/// scaled as the analysis scales them. The cut-offs are those of M. Hubert, P. J. Rousseeuw and
/// K. Vanden Branden (2005), "ROBPCA: a new approach to robust principal component analysis",
/// Technometrics 47, 64–79, section 2.3: √χ²_{K, 0.975} for score distances, and (μ + σ z₀.₉₇₅)^{3/2}
/// for orthogonal ones, with μ and σ robust for the distances to the power 2/3.
///
/// Classical components follow rows that do not belong, and then hide them. Compare with
/// [`robust_components`](crate::robust::robust_components).
///
/// ```
/// use semiaxis::components::{Scaling, principal_components};
/// use semiaxis::distances::{Standing, distances};
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::table::DataMatrix;
///
/// // Twenty rows near a line; the last one lies off it.
/// let x = DMatrix::from_fn(20, 2, |i, j| {
///     let i = i as f64;
///     if j == 0 { i } else if i == 19.0 { 12.0 } else { i + 0.1 * (i * 2.3).sin() }
/// });
/// let pca = principal_components(&DataMatrix::from_unnamed(x)?, Scaling::Covariance)?;
/// let distances = distances(&pca, 1)?;
/// assert_eq!(distances.standings()[19], Standing::Off);
/// // Squared score distances sum to K (n − 1).
/// let sum: f64 = distances.score_distances().iter().map(|d| d * d).sum();
/// assert!((sum - 19.0).abs() < 1e-9);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::ComponentOutOfRange`](crate::Error::ComponentOutOfRange) unless 1 ≤ K ≤ r.
pub fn distances(model: &impl ComponentModel, n_components: usize) -> Result<Distances> {
    let plane = Plane::of(model, n_components)?;
    fitted_distances(plane, model.data(), model.trusted_share(), model.is_robust())
}

/// The distances of the rows that a plane was fitted to, with the cut-offs that follow from them.
pub(crate) fn fitted_distances(
    plane: Plane,
    data: &DataMatrix,
    trusted_share: f64,
    robust: bool,
) -> Result<Distances> {
    let squares = plane.squares(data)?;
    let off = if plane.n_components() < data.n_cols() {
        orthogonal_moments(squares.orthogonal.as_slice(), trusted_share)
    } else {
        None
    };
    let rounding = ROUNDING * plane.variances.sum().sqrt();
    let fit = Arc::new(Fit { plane, off, rounding, robust });
    Ok(Distances::new(fit, data.clone(), squares, false, USUAL_COVERAGE))
}

/// The distances of other rows, against the cut-offs that the fitted rows give.
///
/// ```
/// use semiaxis::components::{Scaling, principal_components};
/// use semiaxis::distances::distances_of;
/// use semiaxis::nalgebra::{DMatrix, dmatrix};
/// use semiaxis::table::DataMatrix;
///
/// let x = DMatrix::from_fn(9, 2, |i, j| if j == 0 { i as f64 } else { (i * i % 7) as f64 });
/// let pca = principal_components(&DataMatrix::from_unnamed(x)?, Scaling::Correlation)?;
/// let centre = dmatrix![pca.mean()[0], pca.mean()[1]];
/// let found = distances_of(&pca, 1, &DataMatrix::from_unnamed(centre)?)?;
/// assert_eq!(found.score_distances()[0], 0.0);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// Those of [`distances`]; [`Error::VariablesDiffer`](crate::Error::VariablesDiffer) unless the
/// rows have the variables of the analysis in the same order, and
/// [`Error::TransformationsDiffer`](crate::Error::TransformationsDiffer) unless they went through
/// its transformations.
pub fn distances_of(
    model: &impl ComponentModel,
    n_components: usize,
    rows: &DataMatrix,
) -> Result<Distances> {
    distances(model, n_components)?.of(rows)
}

/// An orthogonal distance of up to this share of the root of the kept components' variance counts
/// as rounding.
const ROUNDING: f64 = 1e-8;

/// How a row stands beside the others.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Standing {
    /// Within both cut-offs.
    Within,
    /// On the pattern of the others, but far out: beyond the cut-off for score distances only.
    /// Such a row pulls the leading components little, or even steadies them.
    FarOut,
    /// Off the pattern of the others: beyond the cut-off for orthogonal distances only.
    Off,
    /// Far out and off the pattern: beyond both. Such rows turn classical components the most.
    FarOutAndOff,
}

impl Standing {
    /// All of them, from the least to the most unusual.
    pub const ALL: [Standing; 4] =
        [Standing::Within, Standing::FarOut, Standing::Off, Standing::FarOutAndOff];

    fn by(far: bool, off: bool) -> Self {
        match (far, off) {
            (false, false) => Standing::Within,
            (true, false) => Standing::FarOut,
            (false, true) => Standing::Off,
            (true, true) => Standing::FarOutAndOff,
        }
    }
}

impl fmt::Display for Standing {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Standing::Within => "within both",
            Standing::FarOut => "far out",
            Standing::Off => "off the pattern",
            Standing::FarOutAndOff => "far out and off",
        })
    }
}

#[derive(Debug)]
struct Fit {
    plane: Plane,
    /// Centre and spread of the orthogonal distances to the power 2/3; none when no row can be off
    /// all dimensions, or there are too few rows to say.
    off: Option<(f64, f64)>,
    /// The least cut-off for orthogonal distances.
    rounding: f64,
    robust: bool,
}

/// Distances of rows from the centre within the kept components, and from the components
/// themselves; made by [`distances`] and [`distances_of`].
#[derive(Debug, Clone)]
pub struct Distances {
    fit: Arc<Fit>,
    rows: DataMatrix,
    new_rows: bool,
    coverage: f64,
    score: DVector<f64>,
    orthogonal: DVector<f64>,
    standings: Vec<Standing>,
}

impl Distances {
    fn new(
        fit: Arc<Fit>,
        rows: DataMatrix,
        squares: super::model::Squares,
        new_rows: bool,
        coverage: f64,
    ) -> Self {
        let (score, orthogonal) = (squares.score.map(f64::sqrt), squares.orthogonal.map(f64::sqrt));
        Distances { fit, rows, new_rows, coverage, score, orthogonal, standings: Vec::new() }
            .placed()
    }

    fn placed(mut self) -> Self {
        let (far, off) = (self.score_limit(), self.orthogonal_limit());
        self.standings = (self.score.iter().zip(self.orthogonal.iter()))
            .map(|(score, orthogonal)| {
                Standing::by(*score > far, off.is_some_and(|off| *orthogonal > off))
            })
            .collect();
        self
    }

    /// The same distances beside cut-offs of another coverage, such as 0.95 or 0.99.
    ///
    /// # Errors
    ///
    /// [`Error::OptionOutOfRange`](crate::Error::OptionOutOfRange) unless it is above 0.5 and
    /// below 1.
    pub fn with_coverage(&self, coverage: f64) -> Result<Distances> {
        check_coverage(coverage)?;
        Ok(Distances { coverage, ..self.clone() }.placed())
    }

    /// The distances of other rows from the same components, against the same cut-offs.
    ///
    /// # Errors
    ///
    /// [`Error::VariablesDiffer`](crate::Error::VariablesDiffer) and
    /// [`Error::TransformationsDiffer`](crate::Error::TransformationsDiffer).
    pub fn of(&self, rows: &DataMatrix) -> Result<Distances> {
        let squares = self.fit.plane.squares(rows)?;
        Ok(Distances::new(self.fit.clone(), rows.clone(), squares, true, self.coverage))
    }

    /// The distance of each row from the centre, measured within the kept components in standard
    /// deviations.
    pub fn score_distances(&self) -> &DVector<f64> {
        &self.score
    }

    /// The distance of each row from the kept components, in the scaled units of the analysis.
    pub fn orthogonal_distances(&self) -> &DVector<f64> {
        &self.orthogonal
    }

    /// The cut-off for score distances: √χ² with as many degrees of freedom as components.
    pub fn score_limit(&self) -> f64 {
        score_limit(self.n_components(), self.coverage)
    }

    /// The cut-off for orthogonal distances. `None` when the components span all variables, so
    /// that no row can be off them, and when there are fewer than three rows. It is at least 1e-8
    /// of the root of the variance of the kept components, which is what rounding may leave where the kept
    /// components describe the fitted rows exactly.
    pub fn orthogonal_limit(&self) -> Option<f64> {
        let moments = self.fit.off?;
        Some(orthogonal_limit(moments, self.coverage).max(self.fit.rounding))
    }

    /// How each row stands, in row order.
    pub fn standings(&self) -> &[Standing] {
        &self.standings
    }

    /// How many rows stand so.
    pub fn count(&self, standing: Standing) -> usize {
        self.standings.iter().filter(|known| **known == standing).count()
    }

    /// The labels of the rows beyond a cut-off, in row order.
    pub fn unusual(&self) -> Vec<&str> {
        (self.labels().iter().zip(&self.standings))
            .filter(|(_, standing)| **standing != Standing::Within)
            .map(|(label, _)| label.as_str())
            .collect()
    }

    /// What each variable contributes to the squared distances of one row.
    ///
    /// # Errors
    ///
    /// [`Error::UnknownLabel`](crate::Error::UnknownLabel) with the nearest label.
    pub fn contributions(&self, label: &str) -> Result<Contributions> {
        Contributions::of(&self.fit.plane, &self.rows, label)
    }

    /// The labels of the rows, in order.
    pub fn labels(&self) -> &[String] {
        self.rows.labels()
    }

    /// The number of rows that are measured.
    pub fn n_rows(&self) -> usize {
        self.rows.n_rows()
    }

    /// The number of rows that the components were fitted to.
    pub fn n_fitted_rows(&self) -> usize {
        self.fit.plane.n_rows
    }

    /// How many components are kept.
    pub fn n_components(&self) -> usize {
        self.fit.plane.n_components()
    }

    /// The share of rows that follow the model and stay within a cut-off.
    pub fn coverage(&self) -> f64 {
        self.coverage
    }

    /// Whether these are rows that did not take part in the fit.
    pub fn are_new_rows(&self) -> bool {
        self.new_rows
    }

    /// Whether the components are robust.
    pub fn is_robust(&self) -> bool {
        self.fit.robust
    }
}
