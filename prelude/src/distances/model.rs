//! What distances need to know of fitted components.

use std::sync::Arc;

use nalgebra::{DMatrix, DVector};

use crate::components::scores::{product, project_rows};
use crate::components::{PrincipalComponents, same_variables};
use crate::error::{Error, Result};
use crate::table::{DataMatrix, NamedMatrix};
use crate::transform::Transformation;

/// Components that rows can be measured against: classical ones
/// ([`PrincipalComponents`]) or robust ones ([`RobustComponents`](crate::robust::RobustComponents)).
///
/// Throughout, p is the number of variables and r that of components. The trait is not meant to be
/// implemented elsewhere.
pub trait ComponentModel: sealed::Sealed {
    /// The rows that the components were fitted to.
    fn data(&self) -> &DataMatrix;

    /// The centre that deviations are taken from, p values in the units of the variables.
    fn centre(&self) -> &DVector<f64>;

    /// What deviations are divided by, p values in the units of the variables.
    fn scale(&self) -> &DVector<f64>;

    /// The loadings, p × r, columns of unit length and perpendicular to one another.
    fn loadings(&self) -> &NamedMatrix;

    /// The variances of the components, descending, r values.
    fn variances(&self) -> &DVector<f64>;

    /// Whether no component was left out, by choice or for speed, before the model was made: only
    /// then are the variances beyond the kept components known one by one.
    fn is_complete(&self) -> bool;

    /// Whether rows that do not belong were kept from deciding on the components.
    fn is_robust(&self) -> bool;

    /// Of the fitted rows, the share that limits on orthogonal distances may rely on.
    fn trusted_share(&self) -> f64;
}

pub(crate) mod sealed {
    pub trait Sealed {}
}

impl sealed::Sealed for PrincipalComponents {}

impl ComponentModel for PrincipalComponents {
    fn data(&self) -> &DataMatrix {
        self.data()
    }

    fn centre(&self) -> &DVector<f64> {
        (**self).mean()
    }

    fn scale(&self) -> &DVector<f64> {
        (**self).scale()
    }

    fn loadings(&self) -> &NamedMatrix {
        (**self).loadings()
    }

    fn variances(&self) -> &DVector<f64> {
        (**self).variances()
    }

    fn is_complete(&self) -> bool {
        (**self).is_complete()
    }

    fn is_robust(&self) -> bool {
        false
    }

    fn trusted_share(&self) -> f64 {
        0.75
    }
}

/// The first k components as a plane through the centre, and the variances beyond it.
#[derive(Debug, Clone)]
pub(crate) struct Plane {
    pub(crate) variables: Arc<[String]>,
    /// What the fitted rows went through.
    pub(crate) transformations: Vec<Transformation>,
    pub(crate) centre: DVector<f64>,
    pub(crate) scale: DVector<f64>,
    /// p × k.
    pub(crate) loadings: DMatrix<f64>,
    /// k of them, all above zero.
    pub(crate) variances: DVector<f64>,
    /// Of the components that are not kept; none when they are not known one by one.
    pub(crate) left_out: Option<Vec<f64>>,
    /// Rows that the components were fitted to.
    pub(crate) n_rows: usize,
}

/// Squared distances of rows.
pub(crate) struct Squares {
    pub(crate) score: DVector<f64>,
    pub(crate) orthogonal: DVector<f64>,
}

/// One row, split.
pub(crate) struct Split {
    /// The row's deviations from the centre, scaled.
    pub(crate) deviations: DVector<f64>,
    /// Its scores, each divided by the root of its component's variance.
    pub(crate) unit_scores: DVector<f64>,
    /// What the components leave of the deviations.
    pub(crate) residuals: DVector<f64>,
}

impl Plane {
    /// The plane of the first `k` components.
    pub(crate) fn of(model: &impl ComponentModel, k: usize) -> Result<Self> {
        let available = model.variances().len();
        if !(1..=available).contains(&k) {
            return Err(Error::ComponentOutOfRange { asked: k, available });
        }
        Ok(Plane {
            variables: model.data().shared_variables(),
            transformations: model.data().transformations().to_vec(),
            centre: model.centre().clone(),
            scale: model.scale().clone(),
            loadings: model.loadings().values().columns(0, k).into_owned(),
            variances: model.variances().rows(0, k).into_owned(),
            left_out: model
                .is_complete()
                .then(|| model.variances().iter().skip(k).copied().collect()),
            n_rows: model.data().n_rows(),
        })
    }

    /// The number of components that are kept.
    pub(crate) fn n_components(&self) -> usize {
        self.variances.len()
    }

    /// The squared distances of rows that have the variables of the analysis.
    ///
    /// Residuals are formed and squared one by one: a difference of squared lengths would lose the
    /// digits of small ones.
    pub(crate) fn squares(&self, x: &DataMatrix) -> Result<Squares> {
        same_variables(&self.variables, x.variables())?;
        x.check_transformations(&self.transformations)?;
        let values = x.values();
        let scores = project_rows(values, &self.centre, &self.scale, &self.loadings, || false);
        let described = product(&scores, &self.loadings);
        let mut score = DVector::zeros(x.n_rows());
        for (column, variance) in scores.column_iter().zip(self.variances.iter()) {
            score.zip_apply(&column, |sum, score| *sum += score * score / variance);
        }
        let mut orthogonal = DVector::zeros(x.n_rows());
        for (j, described) in described.column_iter().enumerate() {
            let (centre, scale) = (self.centre[j], self.scale[j]);
            orthogonal.zip_zip_apply(&values.column(j), &described, |sum, value, described| {
                let residual = (value - centre) / scale - described;
                *sum += residual * residual;
            });
        }
        Ok(Squares { score, orthogonal })
    }

    /// One row split into its parts.
    pub(crate) fn split(&self, x: &DataMatrix, row: usize) -> Split {
        let values = x.values().row(row).transpose();
        let deviations = (values - &self.centre).component_div(&self.scale);
        let scores = self.loadings.tr_mul(&deviations);
        let residuals = &deviations - &self.loadings * &scores;
        let unit_scores =
            scores.zip_map(&self.variances, |score, variance| score / variance.sqrt());
        Split { deviations, unit_scores, residuals }
    }
}
