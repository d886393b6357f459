//! What components mean: how much of each variable they carry, and what variables and rows have
//! part in them.

use std::sync::Arc;

use nalgebra::{DMatrix, DVector};

use super::fitted::FittedComponents;
use super::result::PrincipalComponents;
use crate::error::{Error, Result};
use crate::table::NamedMatrix;

impl FittedComponents {
    /// The communality of each variable: the share of its variance that the first
    /// `n_components` components carry.
    ///
    /// ```text
    /// h²_j = Σ_{k ≤ K} r_jk²,   r_jk the correlation of variable j with component k
    /// ```
    ///
    /// It is the squared multiple correlation of the variable with those components, from 0 to 1,
    /// under either scaling; under covariance that is Σ vⱼₖ² λₖ over the variable's own variance, so
    /// that variables of small variance can have small communalities however many components carry
    /// the total. A variable that does not vary has none (NaN).
    ///
    /// In factor analysis the word means the share of common variance in a model with unique parts;
    /// here nothing is modelled: it is what components of the data carry.
    ///
    /// ```
    /// use semiaxis::components::{Scaling, principal_components};
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    ///
    /// // Two variables of correlation 1/2: the first component carries (1 + 1/2) / 2 of each.
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0])?;
    /// let pca = principal_components(&x, Scaling::Correlation)?;
    /// assert!((pca.communalities(1)?.values()[0] - 0.75).abs() < 1e-12);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::ComponentOutOfRange`] unless 1 ≤ K ≤ r.
    pub fn communalities(&self, n_components: usize) -> Result<Communalities> {
        let available = self.n_components();
        if !(1..=available).contains(&n_components) {
            return Err(Error::ComponentOutOfRange { asked: n_components, available });
        }
        let structure = self.structure();
        let rows = structure.values().row_iter();
        let values = rows.map(|row| row.columns(0, n_components).norm_squared());
        Ok(Communalities {
            values: DVector::from_iterator(self.n_variables(), values),
            variables: self.loadings.shared_row_names(),
            n_components,
        })
    }

    /// The contribution of each variable to each component, p × r: squared loadings, which sum to
    /// one in each component.
    ///
    /// A variable contributes more than its equal share when its contribution exceeds 1/p.
    ///
    /// ```
    /// # use semiaxis::components::{Scaling, principal_components};
    /// # use semiaxis::nalgebra::dmatrix;
    /// # use semiaxis::table::DataMatrix;
    /// # let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0])?;
    /// let pca = principal_components(&x, Scaling::Correlation)?;
    /// assert!((pca.variable_contributions()[(0, 0)] - 0.5).abs() < 1e-12);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    pub fn variable_contributions(&self) -> NamedMatrix {
        self.named_by_variable(self.loadings.values().map(|loading| loading * loading))
    }
}

impl PrincipalComponents {
    /// The contribution of each row to each component, n × r; they sum to one in each component.
    ///
    /// ```text
    /// w_i z_ik² / ((n − 1) λ_k),   w_i the row's weight of sum n (one without weights)
    /// ```
    ///
    /// A row with far more than 1/n makes the component turn towards itself: look whether the
    /// component is still there without it.
    ///
    /// ```
    /// # use semiaxis::components::{Scaling, principal_components};
    /// # use semiaxis::nalgebra::dmatrix;
    /// # use semiaxis::table::DataMatrix;
    /// # let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0])?;
    /// let pca = principal_components(&x, Scaling::Correlation)?;
    /// assert!((pca.row_contributions().column(0).sum() - 1.0).abs() < 1e-12);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    pub fn row_contributions(&self) -> NamedMatrix {
        let mut values = self.scores().values().map(|score| score * score);
        for (mut column, variance) in values.column_iter_mut().zip(self.variances.iter()) {
            column /= variance * self.divisor() as f64;
            if let Some(weights) = self.row_weights() {
                column.iter_mut().zip(weights).for_each(|(value, weight)| *value *= weight);
            }
        }
        self.named_by_row(values)
    }

    /// How well each component shows each row, n × r: the squared cosine of the angle between the
    /// row, seen from the mean, and the component.
    ///
    /// ```text
    /// z_ik² / d_i²,   d_i² = Σ_j ((x_ij − x̄_j) / s_j)²
    /// ```
    ///
    /// The sum over the components of a chart is the quality of the row's place in it: two rows that
    /// lie together in the chart are alike only if that is high for both. Over all components it is
    /// one. A row at the mean, to within rounding, points nowhere (NaN).
    ///
    /// ```
    /// # use semiaxis::components::{Scaling, principal_components};
    /// # use semiaxis::nalgebra::dmatrix;
    /// # use semiaxis::table::DataMatrix;
    /// # let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0])?;
    /// let pca = principal_components(&x, Scaling::Correlation)?;
    /// // The second row lies at (0, 1) from the mean, between the two axes.
    /// assert!((pca.squared_cosines()[(1, 0)] - 0.5).abs() < 1e-12);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    pub fn squared_cosines(&self) -> NamedMatrix {
        let mut values = self.scores().values().map(|score| score * score);
        let distances = if self.is_complete() { values.column_sum() } else { self.distances() };
        for (mut row, distance) in values.row_iter_mut().zip(distances.iter()) {
            if *distance > self.tolerance() {
                row /= *distance;
            } else {
                row.fill(f64::NAN);
            }
        }
        self.named_by_row(values)
    }

    /// The squared distance of each row from the mean, in scaled variables.
    fn distances(&self) -> DVector<f64> {
        let mut distances = DVector::zeros(self.n_rows());
        for (j, column) in self.data.values().column_iter().enumerate() {
            let (mean, scale) = (self.mean[j], self.scale[j]);
            for (distance, value) in distances.iter_mut().zip(column.iter()) {
                let deviation = (value - mean) / scale;
                *distance += deviation * deviation;
            }
        }
        distances
    }

    fn named_by_row(&self, values: DMatrix<f64>) -> NamedMatrix {
        let names = self.loadings.shared_column_names();
        NamedMatrix::new(values, self.data.shared_labels(), names).expect("the shape of the scores")
    }
}

/// How much of each variable some leading components carry; made by
/// [`FittedComponents::communalities`].
#[derive(Debug, Clone, PartialEq)]
pub struct Communalities {
    values: DVector<f64>,
    // As many as values.
    variables: Arc<[String]>,
    n_components: usize,
}

impl Communalities {
    /// The share of each variable's variance that the components carry, in variable order.
    pub fn values(&self) -> &DVector<f64> {
        &self.values
    }

    /// The share that they leave: one minus [`values`](Self::values).
    pub fn left_out(&self) -> DVector<f64> {
        self.values.map(|value| 1.0 - value)
    }

    /// The share of one variable, if there is one of that name.
    pub fn of(&self, variable: &str) -> Option<f64> {
        let place = self.variables.iter().position(|name| name == variable)?;
        Some(self.values[place])
    }

    /// The names of the variables, in order.
    pub fn variables(&self) -> &[String] {
        &self.variables
    }

    /// How many components are meant.
    pub fn n_components(&self) -> usize {
        self.n_components
    }
}
