//! What is known about the stability of an analysis.

use nalgebra::{DMatrix, DVector};

use super::options::{Alignment, BootstrapOptions};
use crate::components::Scaling;
use crate::error::{ColumnCount, Error, Result};
use crate::quantile::quantile;
use crate::table::NamedMatrix;

/// Lower and upper ends of intervals, one for each quantity.
#[derive(Debug, Clone, PartialEq)]
pub struct Bands {
    pub(super) low: DVector<f64>,
    pub(super) high: DVector<f64>,
}

impl Bands {
    /// The lower ends.
    pub fn low(&self) -> &DVector<f64> {
        &self.low
    }

    /// The upper ends.
    pub fn high(&self) -> &DVector<f64> {
        &self.high
    }
}

/// Standard errors and intervals by theory for normal rows; made by
/// [`asymptotic_errors`](super::asymptotic_errors).
#[derive(Debug, Clone, PartialEq)]
pub struct AsymptoticErrors {
    pub(super) variances: DVector<f64>,
    pub(super) variance_errors: DVector<f64>,
    pub(super) variance_bands: Bands,
    pub(super) loadings: NamedMatrix,
    pub(super) loading_errors: NamedMatrix,
    pub(super) direction_errors: DVector<f64>,
    pub(super) quantile: f64,
    pub(super) confidence: f64,
    pub(super) n_rows: usize,
    pub(super) scaling: Scaling,
}

impl AsymptoticErrors {
    /// The variances of the components, descending.
    pub fn variances(&self) -> &DVector<f64> {
        &self.variances
    }

    /// The standard error of each variance.
    pub fn variance_errors(&self) -> &DVector<f64> {
        &self.variance_errors
    }

    /// The interval for each variance; an upper end is infinite where rows are too few for one.
    pub fn variance_bands(&self) -> &Bands {
        &self.variance_bands
    }

    /// The loadings, p × r.
    pub fn loadings(&self) -> &NamedMatrix {
        &self.loadings
    }

    /// The standard error of each loading, p × r.
    pub fn loading_errors(&self) -> &NamedMatrix {
        &self.loading_errors
    }

    /// The lower end of the interval for each loading: the loading less its standard error times
    /// the normal quantile. It may lie below −1 where a direction is not settled.
    pub fn loadings_low(&self) -> NamedMatrix {
        self.loadings_at(-self.quantile)
    }

    /// The upper end of the interval for each loading.
    pub fn loadings_high(&self) -> NamedMatrix {
        self.loadings_at(self.quantile)
    }

    /// For each component, the root mean square angle in degrees between its direction and that of
    /// the population, as far as a linear approximation goes: the root of the summed squares of
    /// the loadings' standard errors. Beyond some 30° the approximation has no meaning.
    pub fn direction_errors(&self) -> &DVector<f64> {
        &self.direction_errors
    }

    /// The confidence of the intervals, each by itself.
    pub fn confidence(&self) -> f64 {
        self.confidence
    }

    /// The number n of rows.
    pub fn n_rows(&self) -> usize {
        self.n_rows
    }

    /// What the variables were measured in.
    pub fn scaling(&self) -> Scaling {
        self.scaling
    }

    fn loadings_at(&self, quantile: f64) -> NamedMatrix {
        let values = self.loadings.values() + quantile * self.loading_errors.values();
        like(&self.loadings, values)
    }
}

/// How a list of quantities spreads over resamples.
#[derive(Debug, Clone, PartialEq)]
pub struct Spread {
    pub(super) mean: DVector<f64>,
    pub(super) bias: DVector<f64>,
    pub(super) standard_error: DVector<f64>,
    pub(super) percentile: Bands,
    pub(super) bca: Bands,
}

impl Spread {
    /// The mean over the resamples.
    pub fn mean(&self) -> &DVector<f64> {
        &self.mean
    }

    /// The mean over the resamples less the value of the data.
    pub fn bias(&self) -> &DVector<f64> {
        &self.bias
    }

    /// The standard deviation over the resamples (divisor: their number less one).
    pub fn standard_error(&self) -> &DVector<f64> {
        &self.standard_error
    }

    /// Percentile intervals: quantiles of the resamples at (1 ∓ confidence) / 2.
    pub fn percentile(&self) -> &Bands {
        &self.percentile
    }

    /// Intervals corrected for bias and for a standard error that changes with the quantity
    /// (BCa; Efron 1987). NaN where all resamples lie on one side of the value of the data, where
    /// equal variances leave a loading undefined, or where components are rotated together.
    pub fn bca(&self) -> &Bands {
        &self.bca
    }
}

/// How an analysis moves when rows are drawn anew; made by [`bootstrap`](super::bootstrap).
#[derive(Debug, Clone, PartialEq)]
pub struct Bootstrap {
    pub(super) variances: DVector<f64>,
    pub(super) variance_spread: Spread,
    pub(super) loadings: NamedMatrix,
    // Of the loadings, column after column.
    pub(super) loading_spread: Spread,
    pub(super) order_changes: DVector<f64>,
    pub(super) any_order_change: f64,
    pub(super) congruences: DVector<f64>,
    pub(super) angles: DMatrix<f64>,
    pub(super) largest_angles: Vec<f64>,
    pub(super) n_degenerate: usize,
    pub(super) degenerate_columns: Vec<ColumnCount>,
    pub(super) n_rows: usize,
    pub(super) scaling: Scaling,
    pub(super) options: BootstrapOptions,
    pub(super) seed: u64,
}

impl Bootstrap {
    /// The variances of the data's components, descending.
    pub fn variances(&self) -> &DVector<f64> {
        &self.variances
    }

    /// How the variances spread; the k-th is the k-th largest of each resample, whichever
    /// component it belongs to.
    pub fn variance_spread(&self) -> &Spread {
        &self.variance_spread
    }

    /// The loadings of the components that are followed, p × k.
    pub fn loadings(&self) -> &NamedMatrix {
        &self.loadings
    }

    /// The mean of each aligned loading over the resamples.
    pub fn loading_means(&self) -> NamedMatrix {
        self.by_loading(&self.loading_spread.mean)
    }

    /// The mean of each aligned loading over the resamples less the loading of the data.
    pub fn loading_biases(&self) -> NamedMatrix {
        self.by_loading(&self.loading_spread.bias)
    }

    /// The standard deviation of each aligned loading over the resamples.
    pub fn loading_errors(&self) -> NamedMatrix {
        self.by_loading(&self.loading_spread.standard_error)
    }

    /// Lower ends of the percentile intervals for loadings.
    pub fn loadings_low(&self) -> NamedMatrix {
        self.by_loading(&self.loading_spread.percentile.low)
    }

    /// Upper ends of the percentile intervals for loadings.
    pub fn loadings_high(&self) -> NamedMatrix {
        self.by_loading(&self.loading_spread.percentile.high)
    }

    /// Lower ends of the corrected intervals for loadings; see [`Spread::bca`].
    pub fn loadings_bca_low(&self) -> NamedMatrix {
        self.by_loading(&self.loading_spread.bca.low)
    }

    /// Upper ends of the corrected intervals for loadings; see [`Spread::bca`].
    pub fn loadings_bca_high(&self) -> NamedMatrix {
        self.by_loading(&self.loading_spread.bca.high)
    }

    /// For each component that is followed, the share of resamples in which it stood at another
    /// place in the order of variances.
    pub fn order_changes(&self) -> &DVector<f64> {
        &self.order_changes
    }

    /// The share of resamples in which any of the components that are followed stood at another
    /// place.
    pub fn any_order_change(&self) -> f64 {
        self.any_order_change
    }

    /// For each component that is followed, the mean absolute congruence (cosine between loadings)
    /// with its counterpart.
    pub fn congruences(&self) -> &DVector<f64> {
        &self.congruences
    }

    /// The principal angles in degrees between the subspace of the leading k components and that
    /// of each usable resample: a row for each resample, k columns, ascending.
    pub fn angles(&self) -> &DMatrix<f64> {
        &self.angles
    }

    /// A quantile, over the resamples, of the largest principal angle, in degrees.
    ///
    /// # Errors
    ///
    /// [`Error::OptionOutOfRange`] unless the share lies from 0 to 1.
    pub fn angle_quantile(&self, share: f64) -> Result<f64> {
        if !(0.0..=1.0).contains(&share) {
            return Err(Error::OptionOutOfRange {
                option: "share",
                value: share,
                accepted: "from 0 to 1",
            });
        }
        Ok(quantile(&self.largest_angles, share))
    }

    /// The number k of components that are followed.
    pub fn n_components(&self) -> usize {
        self.loadings.n_cols()
    }

    /// The number n of rows, in the data and in each resample.
    pub fn n_rows(&self) -> usize {
        self.n_rows
    }

    /// The number of resamples drawn.
    pub fn n_replicates(&self) -> usize {
        self.options.n_replicates()
    }

    /// How many resamples could not be analysed because a column did not vary in them. They are
    /// part of no other number here.
    pub fn n_degenerate(&self) -> usize {
        self.n_degenerate
    }

    /// The columns that did not vary, and in how many resamples each.
    pub fn degenerate_columns(&self) -> &[ColumnCount] {
        &self.degenerate_columns
    }

    /// The confidence of the intervals, each by itself.
    pub fn confidence(&self) -> f64 {
        self.options.chosen_confidence()
    }

    /// How components were put beside one another.
    pub fn alignment(&self) -> Alignment {
        self.options.chosen_alignment()
    }

    /// What the variables were measured in.
    pub fn scaling(&self) -> Scaling {
        self.scaling
    }

    /// The seed; the same seed gives the same numbers.
    pub fn seed(&self) -> u64 {
        self.seed
    }

    fn by_loading(&self, values: &DVector<f64>) -> NamedMatrix {
        let (p, k) = self.loadings.values().shape();
        like(&self.loadings, DMatrix::from_column_slice(p, k, values.as_slice()))
    }
}

/// How an analysis moves when each row in turn is left out; made by
/// [`leave_out`](super::leave_out).
///
/// Rows stand in the order of the data; [`order`](LeaveOut::order) has the most influential first.
#[derive(Debug, Clone, PartialEq)]
pub struct LeaveOut {
    pub(super) variance_changes: NamedMatrix,
    pub(super) loading_changes: NamedMatrix,
    pub(super) angles: DVector<f64>,
    pub(super) order: Vec<usize>,
    pub(super) needed: Vec<(String, Vec<String>)>,
    pub(super) whole_space: bool,
    pub(super) scaling: Scaling,
}

impl LeaveOut {
    /// The change of each followed variance without the row, as a share of the variance: n × k.
    /// 0.1 says that the variance would be a tenth larger.
    pub fn variance_changes(&self) -> &NamedMatrix {
        &self.variance_changes
    }

    /// One less the absolute congruence of each followed component with its counterpart without
    /// the row: n × k. Zero says that the direction stays.
    pub fn loading_changes(&self) -> &NamedMatrix {
        &self.loading_changes
    }

    /// The largest principal angle in degrees between the subspaces of the leading k components
    /// with and without the row.
    pub fn angles(&self) -> &DVector<f64> {
        &self.angles
    }

    /// Places of the rows, counted from zero, the most influential first: by the angle, or, where
    /// the components that are followed fill the whole space and no angle can differ from zero, by
    /// the largest relative change of a variance. Rows that are needed come first of all.
    pub fn order(&self) -> &[usize] {
        &self.order
    }

    /// Labels of the rows, the most influential first.
    pub fn most_influential(&self) -> impl Iterator<Item = &str> {
        self.order.iter().map(|&row| self.variance_changes.row_names()[row].as_str())
    }

    /// Rows without which the analysis cannot be made, each with the columns that would not vary;
    /// their other numbers are NaN.
    pub fn needed(&self) -> &[(String, Vec<String>)] {
        &self.needed
    }

    /// The number k of components that are followed.
    pub fn n_components(&self) -> usize {
        self.variance_changes.n_cols()
    }

    /// The number n of rows.
    pub fn n_rows(&self) -> usize {
        self.variance_changes.n_rows()
    }

    /// What the variables were measured in.
    pub fn scaling(&self) -> Scaling {
        self.scaling
    }
}

fn like(named: &NamedMatrix, values: DMatrix<f64>) -> NamedMatrix {
    NamedMatrix::new(values, named.row_names(), named.column_names())
        .expect("the shape of the matrix whose names are taken")
}
