//! What was estimated, from what, and how sure it is.

use nalgebra::DMatrix;

use super::fit::Status;
use super::options::{ComponentRule, GapMethod};
use crate::components::Scaling;
use crate::table::{DataMatrix, GappedMatrix};

/// A cell that was missing.
#[derive(Debug, Clone, PartialEq)]
pub struct EstimatedCell {
    /// The row, counted from zero.
    pub row_idx: usize,
    /// The column, counted from zero.
    pub column_idx: usize,
    /// The row's label.
    pub label: String,
    /// The column's name.
    pub variable: String,
    /// The estimate: the mean of what the cell may hold, given the observed cells of its row.
    pub value: f64,
    /// The standard deviation of what the cell may hold, given the observed cells of its row and
    /// the fitted model. It leaves out that the model itself was estimated, and so is too small in
    /// small tables; the spread of the cell over [`Completed::draws`] brings that in.
    pub standard_deviation: f64,
}

/// How well one number of components predicts cells that the fit has not seen.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct PredictionError {
    /// How many components; 0 stands for the means of the columns.
    pub n_components: usize,
    /// The mean squared error, in units of the variance of the variables (correlation) or of their
    /// mean variance (covariance; generalised cross-validation: in squared units of the data).
    /// None where so many components cannot be fitted.
    pub mean_squared: Option<f64>,
    /// The standard deviation of the error between the parts, over the root of their number; None
    /// for generalised cross-validation, which has no parts.
    pub standard_error: Option<f64>,
}

/// How many components predict best, and how the others do.
#[derive(Debug, Clone, PartialEq)]
pub struct ComponentChoice {
    pub(super) rule: ComponentRule,
    pub(super) errors: Vec<PredictionError>,
    pub(super) n_components: usize,
    pub(super) n_predicted: usize,
    pub(super) n_unconverged: usize,
    pub(super) seed: u64,
}

impl ComponentChoice {
    /// The rule that was followed.
    pub fn rule(&self) -> ComponentRule {
        self.rule
    }

    /// The number of components with the smallest error; 0 says that the means of the columns
    /// predict as well as anything that was tried.
    pub fn n_components(&self) -> usize {
        self.n_components
    }

    /// The fewest components whose error is within one standard error of the smallest (the rule of
    /// L. Breiman, J. H. Friedman, R. A. Olshen and C. J. Stone (1984), "Classification and
    /// Regression Trees", section 3.4.3, from memory): the choice of whoever distrusts small
    /// gains. None for generalised cross-validation, which knows no standard error.
    pub fn fewest_within_error(&self) -> Option<usize> {
        let best = self.errors.iter().find(|error| error.n_components == self.n_components)?;
        let limit = best.mean_squared? + best.standard_error?;
        let near = |error: &&PredictionError| error.mean_squared.is_some_and(|e| e <= limit);
        self.errors.iter().find(near).map(|error| error.n_components)
    }

    /// The error of each number of components that was tried, from 0 up.
    pub fn errors(&self) -> &[PredictionError] {
        &self.errors
    }

    /// Observed cells that were predicted.
    pub fn n_predicted(&self) -> usize {
        self.n_predicted
    }

    /// Fits that reached the iteration limit; their errors count as they are.
    pub fn n_unconverged(&self) -> usize {
        self.n_unconverged
    }

    /// The seed of the division into parts.
    pub fn seed(&self) -> u64 {
        self.seed
    }
}

/// A table whose holes were estimated.
#[derive(Debug, Clone)]
pub struct Completed {
    pub(super) source: GappedMatrix,
    pub(super) data: DataMatrix,
    pub(super) cells: Vec<EstimatedCell>,
    pub(super) draws: Vec<DataMatrix>,
    pub(super) method: GapMethod,
    pub(super) scaling: Scaling,
    pub(super) n_components: usize,
    pub(super) choice: Option<ComponentChoice>,
    pub(super) status: Status,
    pub(super) tolerance: f64,
    pub(super) noise: f64,
    pub(super) n_starts: usize,
    pub(super) n_agreeing: usize,
    pub(super) seed: u64,
}

impl Completed {
    /// The completed table. Observed cells are what they were; its notes count the estimated ones
    /// by column.
    pub fn data(&self) -> &DataMatrix {
        &self.data
    }

    /// The table as it was.
    pub fn source(&self) -> &GappedMatrix {
        &self.source
    }

    /// The cells that were estimated, row by row.
    pub fn cells(&self) -> &[EstimatedCell] {
        &self.cells
    }

    /// The estimate where a named row meets a named variable; None where the cell was observed.
    pub fn cell(&self, label: &str, variable: &str) -> Option<&EstimatedCell> {
        self.cells.iter().find(|cell| cell.label == label && cell.variable == variable)
    }

    /// True where a cell was estimated; rows and columns as in [`data`](Completed::data).
    pub fn mask(&self) -> DMatrix<bool> {
        self.source.values().map(|value| value.is_nan())
    }

    /// Completed tables whose estimated cells were drawn, as many as were asked for.
    ///
    /// For each, rows are drawn with replacement, the components are fitted to them anew, and the
    /// missing cells are drawn from what that fit says about them given the observed cells of
    /// their row. So they differ as much as what is unknown about the cells, the fit included;
    /// the number of components is held. An analysis repeated on all of them shows how far the
    /// missing cells move its result.
    pub fn draws(&self) -> &[DataMatrix] {
        &self.draws
    }

    /// How components were fitted.
    pub fn method(&self) -> GapMethod {
        self.method
    }

    /// Whether all variables weighed the same.
    pub fn scaling(&self) -> Scaling {
        self.scaling
    }

    /// The number of components behind the estimates; 0 where the means of the columns did best.
    pub fn n_components(&self) -> usize {
        self.n_components
    }

    /// How the number of components was chosen; None when it was given.
    pub fn choice(&self) -> Option<&ComponentChoice> {
        self.choice.as_ref()
    }

    /// Whether the iteration ended because nothing changed any more.
    pub fn converged(&self) -> bool {
        self.status.converged
    }

    /// Iterations of the fit behind the estimates.
    pub fn n_iterations(&self) -> usize {
        self.status.n_iterations
    }

    /// The largest change in the last iteration; see [`GapOptions::tolerance`](super::GapOptions::tolerance).
    pub fn last_change(&self) -> f64 {
        self.status.last_change
    }

    /// The standard deviation of the noise of a cell, in standard deviations of its variable
    /// (correlation) or in the units of the data (covariance).
    pub fn noise_deviation(&self) -> f64 {
        self.noise.sqrt()
    }

    /// Starts, the plain one included, and how many of them ended at the best fit.
    pub fn starts(&self) -> Starts {
        Starts { n_starts: self.n_starts, n_agreeing: self.n_agreeing }
    }

    /// The seed.
    pub fn seed(&self) -> u64 {
        self.seed
    }
}

/// From how many places an iteration started, and where it ended.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Starts {
    /// Starts, the plain one included.
    pub n_starts: usize,
    /// Starts that ended within a relative 1e-6 of the best likelihood or noise.
    pub n_agreeing: usize,
}
