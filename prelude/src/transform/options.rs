//! Which transformation is wanted, and of which columns.

use crate::error::{Error, Result};

/// A transformation that is wanted of some columns or all; fitted to a matrix by
/// [`DataMatrix::transformed`](crate::table::DataMatrix::transformed).
///
/// ```
/// use semiaxis::nalgebra::dmatrix;
/// use semiaxis::table::DataMatrix;
/// use semiaxis::transform::Transform;
///
/// let x = DataMatrix::from_values(
///     dmatrix![1.0, 20.0; 10.0, 21.0; 100.0, 25.0],
///     ["uptake", "width"],
///     ["a", "b", "c"],
/// )?;
/// let x = x.transformed(Transform::log10().of(["uptake"]))?.transformed(Transform::standardise())?;
/// assert_eq!(x.variable("uptake")?, [-1.0, 0.0, 1.0]);
/// assert_eq!(x.transformations().len(), 2);
/// # Ok::<(), semiaxis::Error>(())
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct Transform {
    pub(super) wanted: Wanted,
    // None means every column.
    pub(super) columns: Option<Vec<String>>,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Wanted {
    Log,
    Log10,
    LogPlus(f64),
    SquareRoot,
    CentredLogRatio,
    BoxCox(f64),
    BoxCoxBetween(f64, f64),
    Centre,
    Standardise,
    StandardiseRobustly,
    UnitRange,
}

/// Exponents beyond these are no transformation that anybody could explain, and at their ends the
/// likelihood of data with little relative spread is flat.
const EXPONENTS: (f64, f64) = (-5.0, 5.0);

impl Transform {
    /// The natural logarithm, ln x, of values above zero.
    pub fn log() -> Self {
        Self::every(Wanted::Log)
    }

    /// The logarithm to base ten, of values above zero.
    pub fn log10() -> Self {
        Self::every(Wanted::Log10)
    }

    /// The natural logarithm after adding a constant, ln(x + c), of values above −c: the way to
    /// keep zeros. The constant is in the units of the columns, and results depend on it.
    pub fn log_plus(constant: f64) -> Self {
        Self::every(Wanted::LogPlus(constant))
    }

    /// The square root, of values that are not negative: counts, areas.
    pub fn square_root() -> Self {
        Self::every(Wanted::SquareRoot)
    }

    /// Centred log-ratios of a composition (Aitchison 1986, section 4.6): each part of a row over
    /// the geometric mean of all its parts, on the natural logarithmic scale.
    ///
    /// ```text
    /// y_ij = ln x_ij − (1 / D) Σ_k ln x_ik        over the D columns that are the parts
    /// ```
    ///
    /// Parts must be above zero and at least two. Each row sums to zero afterwards, so that one
    /// component has no variance: use the covariance. The total of a row does not matter and is
    /// lost. If all rows have the same total to a relative 10⁻⁶, undoing restores it; otherwise
    /// undoing gives parts of one.
    pub fn centred_log_ratio() -> Self {
        Self::every(Wanted::CentredLogRatio)
    }

    /// The power transformation of Box and Cox (1964, equation 1), with the exponent of each
    /// column estimated by maximum likelihood between −5 and 5, of values above zero.
    ///
    /// ```text
    /// y = (x^λ − 1) / λ,   or ln x for λ = 0
    /// ```
    ///
    /// Each x comes back from its y, but with fewer digits the further λ lies below zero, since large
    /// values then crowd below −1/λ.
    ///
    /// The estimate makes the column as normal as a power can, which is not to say normal. The
    /// fitted [`Exponent`](super::Exponent) holds an interval: a plain exponent inside it (0 for
    /// the logarithm, ½ for the root, 1 for no change) is easier to explain.
    pub fn box_cox() -> Self {
        Self::box_cox_between(EXPONENTS.0, EXPONENTS.1)
    }

    /// As [`box_cox`](Self::box_cox), with the exponents sought between these two, inclusive.
    pub fn box_cox_between(least: f64, most: f64) -> Self {
        Self::every(Wanted::BoxCoxBetween(least, most))
    }

    /// The power transformation of Box and Cox with this exponent for every column.
    pub fn box_cox_exponent(exponent: f64) -> Self {
        Self::every(Wanted::BoxCox(exponent))
    }

    /// Subtracts the mean of each column.
    pub fn centre() -> Self {
        Self::every(Wanted::Centre)
    }

    /// Subtracts the mean of each column and divides by its standard deviation (divisor n − 1).
    pub fn standardise() -> Self {
        Self::every(Wanted::Standardise)
    }

    /// Subtracts the median of each column and divides by 1.4826 times the median absolute
    /// deviation from it, which for normal values estimates the standard deviation: up to half the
    /// rows can be far off without moving either far.
    pub fn standardise_robustly() -> Self {
        Self::every(Wanted::StandardiseRobustly)
    }

    /// Brings each column to the range from 0 to 1 by its least and largest value.
    pub fn unit_range() -> Self {
        Self::every(Wanted::UnitRange)
    }

    /// Only these columns; the others stay as they are.
    pub fn of<S: Into<String>>(mut self, columns: impl IntoIterator<Item = S>) -> Self {
        self.columns = Some(columns.into_iter().map(Into::into).collect());
        self
    }

    fn every(wanted: Wanted) -> Self {
        Transform { wanted, columns: None }
    }

    pub(super) fn check(&self) -> Result<()> {
        let finite = |option, value: f64| {
            let accepted = "a finite number";
            if value.is_finite() {
                Ok(())
            } else {
                Err(Error::OptionOutOfRange { option, value, accepted })
            }
        };
        match self.wanted {
            Wanted::LogPlus(constant) => finite("constant", constant),
            Wanted::BoxCox(exponent) => finite("exponent", exponent),
            Wanted::BoxCoxBetween(least, most) => {
                finite("least exponent", least)?;
                finite("largest exponent", most)?;
                if least < most {
                    return Ok(());
                }
                let accepted = "above the least exponent";
                Err(Error::OptionOutOfRange { option: "largest exponent", value: most, accepted })
            }
            _ => Ok(()),
        }
    }
}
