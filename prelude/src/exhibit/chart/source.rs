//! What charts take from an analysis.

use nalgebra::DMatrix;

use crate::components::{PrincipalComponents, Scaling};
use crate::exhibit::numbers::percent;

/// The part of a decomposition that charts draw, kept with the chart so that it can be drawn
/// when the analysis is gone.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Source {
    pub scaling: Scaling,
    pub n_rows: usize,
    pub variables: Vec<String>,
    pub labels: Vec<String>,
    pub variances: Vec<f64>,
    pub total_variance: f64,
    /// Variables by components.
    pub loadings: DMatrix<f64>,
    /// Rows by components; without rows where a chart shows no units.
    pub scores: DMatrix<f64>,
}

impl Source {
    /// What a chart without units needs.
    pub fn without_units(pca: &PrincipalComponents) -> Self {
        Source {
            scaling: pca.scaling(),
            n_rows: pca.n_rows(),
            variables: pca.variables().to_vec(),
            labels: Vec::new(),
            variances: pca.variances().iter().copied().collect(),
            total_variance: pca.total_variance(),
            loadings: pca.loadings().values().clone(),
            scores: DMatrix::zeros(0, pca.n_components()),
        }
    }

    /// What a chart of units needs.
    pub fn with_units(pca: &PrincipalComponents) -> Self {
        Source {
            labels: pca.labels().to_vec(),
            scores: pca.scores().values().clone(),
            ..Self::without_units(pca)
        }
    }

    pub fn n_components(&self) -> usize {
        self.variances.len()
    }

    /// The share of a component, counted from 1, in the total variance.
    pub fn share(&self, component: usize) -> f64 {
        self.variances[component - 1] / self.total_variance
    }

    /// The words for an axis along a component, counted from 1.
    pub fn axis_title(&self, component: Option<usize>) -> String {
        match component {
            Some(component) => {
                format!("Component {component} ({} of variance)", percent(self.share(component)))
            }
            None => "no second component: all variance lies along the first".to_owned(),
        }
    }

    /// The coordinates of the units along a component, counted from 1; zeros where there is none.
    pub fn scores_along(&self, component: Option<usize>) -> Vec<f64> {
        match component {
            Some(component) => self.scores.column(component - 1).iter().copied().collect(),
            None => vec![0.0; self.scores.nrows()],
        }
    }

    /// The loadings of the variables on a component, counted from 1; zeros where there is none.
    pub fn loadings_along(&self, component: Option<usize>) -> Vec<f64> {
        match component {
            Some(component) => self.loadings.column(component - 1).iter().copied().collect(),
            None => vec![0.0; self.loadings.nrows()],
        }
    }

    /// What the variables were measured in, in words that follow the noun.
    pub fn scaling_words(&self) -> &'static str {
        match self.scaling {
            Scaling::Correlation => "brought to unit variance (correlation)",
            Scaling::Covariance => "in their own units (covariance)",
        }
    }
}
