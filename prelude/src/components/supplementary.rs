//! Columns and groups that took no part in the analysis, seen along its components.
//!
//! They leave means, scales and components as they are, and only say how components go together
//! with what else is known of the same rows. Sources: L. Lebart, A. Morineau and M. Piron (1995),
//! "Statistique exploratoire multidimensionnelle", section 1.2, for supplementary elements and test
//! values; L. Kish (1965), "Survey Sampling", section 11.7, for the effective count of weighted
//! rows (both from memory).

use std::collections::HashMap;

use nalgebra::{DMatrix, DVector};

use super::columns::Columns;
use super::cross;
use super::fitted::lacking;
use super::options::Scaling;
use super::result::PrincipalComponents;
use super::row_weights::RowWeights;
use super::scores::Standardised;
use crate::distributions::normal_upper_tail;
use crate::error::{Error, Result};
use crate::table::{DataMatrix, NamedMatrix};

impl PrincipalComponents {
    /// The correlations of columns that took no part with the components.
    ///
    /// The columns must stand in a matrix of the same rows, with the same labels in the same order.
    /// Row weights are those of the analysis.
    ///
    /// ```
    /// use semiaxis::components::{Scaling, principal_components};
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    ///
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0; 4.0, 4.5])?;
    /// let pca = principal_components(&x, Scaling::Correlation)?;
    /// // The components themselves correlate with themselves only.
    /// let scores = DataMatrix::from_unnamed(pca.scores().values().clone())?;
    /// let columns = pca.supplementary_columns(&scores)?;
    /// assert!((columns.correlations()[(0, 0)] - 1.0).abs() < 1e-12);
    /// assert!(columns.correlations()[(0, 1)].abs() < 1e-12);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::RowsDiffer`] names rows that are missing, unknown or out of place;
    /// [`Error::ConstantColumns`]; [`Error::Magnitude`].
    pub fn supplementary_columns(&self, columns: &DataMatrix) -> Result<SupplementaryColumns> {
        check_rows(self.labels(), columns.labels())?;
        let weights = RowWeights::of(self.data());
        let moments = cross::moments(columns.values(), weights.as_ref());
        let Columns { mean, scale, .. } = Columns::checked(columns, moments, Scaling::Correlation)?;
        let mut scores = self.scores().values().clone();
        for (mut column, variance) in scores.column_iter_mut().zip(self.variances().iter()) {
            column /= variance.sqrt() * self.divisor() as f64;
        }
        if let Some(weights) = &weights {
            weights.weigh_rows(&mut scores);
        }
        let (x, weights) = (columns.values(), weights.as_ref());
        let standardised = Standardised { x, mean: &mean, scale: &scale, weights };
        let values = standardised.transposed_times(&scores);
        crate::live::checkpoint();
        let names = self.loadings().shared_column_names();
        let correlations = NamedMatrix::new(values, columns.shared_variables(), names)?;
        Ok(SupplementaryColumns { correlations, n_rows: self.n_rows() })
    }

    /// The mean scores of groups of rows, with their standard errors and test values.
    ///
    /// There is one name for each row: that of the group it belongs to. Groups are listed in the
    /// order in which they appear.
    ///
    /// ```
    /// use semiaxis::components::{Scaling, principal_components};
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    ///
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0; 4.0, 4.5])?;
    /// let pca = principal_components(&x, Scaling::Correlation)?;
    /// let kilns = pca.supplementary_groups(["north", "north", "south", "south"])?;
    /// assert_eq!(kilns.counts(), [2, 2]);
    /// // Groups of equal size lie on opposite sides of the mean.
    /// assert!((kilns.means()[(0, 0)] + kilns.means()[(1, 0)]).abs() < 1e-12);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::ShapeMismatch`] unless there is one name for each row.
    pub fn supplementary_groups<S: Into<String>>(
        &self,
        groups: impl IntoIterator<Item = S>,
    ) -> Result<SupplementaryGroups> {
        let mut place_of: HashMap<String, usize> = HashMap::new();
        let mut names: Vec<String> = Vec::new();
        let members: Vec<usize> = groups
            .into_iter()
            .map(|group| {
                let group = group.into();
                *place_of.entry(group.clone()).or_insert_with(|| {
                    names.push(group);
                    names.len() - 1
                })
            })
            .collect();
        if members.len() != self.n_rows() {
            let (expected, found) = (self.n_rows(), members.len());
            return Err(Error::ShapeMismatch { what: "group names of rows", expected, found });
        }
        let weight = |row: usize| self.row_weights().map_or(1.0, |weights| weights[row]);
        let mut sizes = vec![Size::default(); names.len()];
        for (row, &group) in members.iter().enumerate() {
            sizes[group].add(weight(row));
        }
        let shape = (names.len(), self.n_components());
        let [mut means, mut errors, mut tests] = [(); 3].map(|()| DMatrix::zeros(shape.0, shape.1));
        for (k, scores) in self.scores().values().column_iter().enumerate() {
            let along = along_component(scores.as_slice(), &members, &sizes, weight);
            means.set_column(k, &along.means);
            errors.set_column(k, &along.standard_errors);
            tests.set_column(k, &along.test_values);
        }
        let components = self.loadings().shared_column_names();
        let names: std::sync::Arc<[String]> = names.into();
        let named = |values| NamedMatrix::new(values, names.clone(), components.clone());
        Ok(SupplementaryGroups {
            counts: sizes.iter().map(|size| size.count).collect(),
            means: named(means)?,
            standard_errors: named(errors)?,
            test_values: named(tests)?,
            is_weighted: self.is_weighted(),
        })
    }
}

/// How many rows a group has, and what they weigh.
#[derive(Debug, Clone, Copy, Default)]
struct Size {
    count: usize,
    weight: f64,
    squared_weights: f64,
}

impl Size {
    fn add(&mut self, weight: f64) {
        self.count += 1;
        self.weight += weight;
        self.squared_weights += weight * weight;
    }

    /// The number of equally weighted rows whose mean would vary as much.
    fn effective(&self) -> f64 {
        self.weight * self.weight / self.squared_weights
    }
}

struct Along {
    means: DVector<f64>,
    standard_errors: DVector<f64>,
    test_values: DVector<f64>,
}

fn along_component(
    scores: &[f64],
    members: &[usize],
    sizes: &[Size],
    weight: impl Fn(usize) -> f64,
) -> Along {
    let n = scores.len() as f64;
    let rows = || scores.iter().zip(members).enumerate();
    let mut sums: DVector<f64> = DVector::zeros(sizes.len());
    let mut total_squares = 0.0;
    for (row, (score, &group)) in rows() {
        let product = weight(row) * score;
        sums[group] += product;
        total_squares += product * product;
    }
    let means = DVector::from_fn(sizes.len(), |group, _| sums[group] / sizes[group].weight);
    let mut squares: DVector<f64> = DVector::zeros(sizes.len());
    for (row, (score, &group)) in rows() {
        let deviation: f64 = score - means[group];
        squares[group] += weight(row) * deviation * deviation;
    }
    let standard_errors = DVector::from_fn(sizes.len(), |group, _| {
        let Size { count, weight, .. } = sizes[group];
        if count < 2 {
            return f64::NAN;
        }
        (squares[group] / weight / (sizes[group].effective() - 1.0)).sqrt()
    });
    let test_values = DVector::from_fn(sizes.len(), |group, _| {
        let count = sizes[group].count as f64;
        if count == n {
            return f64::NAN;
        }
        let variance = count * (n - count) / (n * (n - 1.0)) * total_squares;
        sums[group] / variance.sqrt()
    });
    Along { means, standard_errors, test_values }
}

/// Refuses rows that are not those of the analysis in the same order.
fn check_rows(wanted: &[String], found: &[String]) -> Result<()> {
    if wanted == found {
        return Ok(());
    }
    Err(Error::RowsDiffer { missing: lacking(wanted, found), extra: lacking(found, wanted) })
}

/// Columns that took no part, along the components; made by
/// [`PrincipalComponents::supplementary_columns`].
#[derive(Debug, Clone, PartialEq)]
pub struct SupplementaryColumns {
    correlations: NamedMatrix,
    n_rows: usize,
}

impl SupplementaryColumns {
    /// The correlation of each column with each component.
    ///
    /// A chart of variables by their correlations shows these columns at the same scale as those
    /// of the analysis, whose correlations are its
    /// [`structure`](super::FittedComponents::structure).
    pub fn correlations(&self) -> &NamedMatrix {
        &self.correlations
    }

    /// The share of each column's variance that the first components explain together: the squared
    /// multiple correlation, since components are not correlated with one another.
    ///
    /// # Errors
    ///
    /// [`Error::ComponentOutOfRange`] unless 1 ≤ K ≤ r.
    pub fn explained(&self, n_components: usize) -> Result<DVector<f64>> {
        let kept = self.correlations.first(n_components)?;
        let shares = kept.values().row_iter().map(|row| row.norm_squared());
        Ok(DVector::from_iterator(kept.n_rows(), shares))
    }

    /// The number of rows.
    pub fn n_rows(&self) -> usize {
        self.n_rows
    }
}

/// Groups of rows along the components; made by [`PrincipalComponents::supplementary_groups`].
#[derive(Debug, Clone, PartialEq)]
pub struct SupplementaryGroups {
    counts: Vec<usize>,
    means: NamedMatrix,
    standard_errors: NamedMatrix,
    test_values: NamedMatrix,
    is_weighted: bool,
}

impl SupplementaryGroups {
    /// The names of the groups, in the order in which they appear.
    pub fn names(&self) -> &[String] {
        self.means.row_names()
    }

    /// The number of rows in each group.
    pub fn counts(&self) -> &[usize] {
        &self.counts
    }

    /// The mean score of each group on each component, weighted where rows are.
    pub fn means(&self) -> &NamedMatrix {
        &self.means
    }

    /// The standard error of each mean, from the spread within the group; NaN for a group of one.
    ///
    /// ```text
    /// √( Σ w (z − z̄_q)² / Σ w / (m − 1) ),   m = (Σ w)² / Σ w², the number of rows without weights
    /// ```
    pub fn standard_errors(&self) -> &NamedMatrix {
        &self.standard_errors
    }

    /// How far each mean is from zero, in standard deviations of a mean of as many rows drawn at
    /// random, without putting back, from all n; NaN where a group holds all rows.
    ///
    /// ```text
    /// Σ_{i in q} w_i z_i / √( n_q (n − n_q) / (n (n − 1)) Σ_i w_i² z_i² )
    /// ```
    ///
    /// For groups of more than a few rows that had nothing to do with the component, values beyond
    /// ±1.96 turn up once in twenty. Components are directions of large spread, chosen after seeing
    /// the data, and many values are looked at: take them as a guide, not as a test.
    pub fn test_values(&self) -> &NamedMatrix {
        &self.test_values
    }

    /// The probability of a test value at least as far from zero, by the normal distribution.
    pub fn p_values(&self) -> NamedMatrix {
        let values = self.test_values.values().map(|value| 2.0 * normal_upper_tail(value.abs()));
        let (rows, columns) = (self.names().to_vec(), self.means.shared_column_names());
        NamedMatrix::new(values, rows, columns).expect("the shape of the test values")
    }

    /// Whether row weights made a difference.
    pub fn is_weighted(&self) -> bool {
        self.is_weighted
    }
}
