//! What a matrix does with transformations: take one, repeat those of another, undo its own.

use super::options::Transform;
use super::result::Transformation;
use crate::error::{Error, Result};
use crate::table::DataMatrix;

impl DataMatrix {
    /// The matrix in other units: a transformation fitted to these rows and applied to them, and
    /// remembered.
    ///
    /// ```
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    /// use semiaxis::transform::Transform;
    ///
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0; 4.0; 9.0])?;
    /// let roots = x.transformed(Transform::square_root())?;
    /// assert_eq!(roots.variable("V1")?, [1.0, 2.0, 3.0]);
    /// assert_eq!(roots.untransformed()?.values(), x.values());
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::UnknownColumn`], [`Error::RepeatedRequest`] and [`Error::NoColumns`] for its
    /// columns; [`Error::OptionOutOfRange`]; [`Error::OutsideDomain`] names the first value that
    /// cannot be transformed; [`Error::NoSpread`] names columns that cannot be standardised;
    /// [`Error::TooFewRows`] and [`Error::TooFewColumns`].
    pub fn transformed(&self, transform: Transform) -> Result<DataMatrix> {
        transform.fit(self)?.apply(self)
    }

    /// These rows in the units of another matrix: its transformations in order, with the numbers
    /// that were fitted to its rows. What these rows went through already must be the beginning of
    /// that chain, and is not repeated.
    ///
    /// ```
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    /// use semiaxis::transform::Transform;
    ///
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0; 4.0; 7.0])?.transformed(Transform::centre())?;
    /// let new = DataMatrix::from_unnamed(dmatrix![14.0])?.transformed_as(&x)?;
    /// assert_eq!(new.values()[0], 10.0); // the mean of the first rows is 4
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::TransformationsDiffer`] when these rows went through something else;
    /// [`Error::VariablesDiffer`] names columns that they lack; [`Error::OutsideDomain`].
    pub fn transformed_as(&self, other: &DataMatrix) -> Result<DataMatrix> {
        self.through(other.transformations())
    }

    /// The rows in the units from before their first transformation.
    ///
    /// # Errors
    ///
    /// [`Error::OutsideDomain`] names a value that no untransformed value leads to;
    /// [`Error::VariablesDiffer`] names columns that were needed and have been left out since.
    pub fn untransformed(&self) -> Result<DataMatrix> {
        self.transformations().iter().rev().try_fold(self.clone(), |x, last| last.undo(&x))
    }

    /// These rows through the rest of a chain whose beginning they went through.
    pub(crate) fn through(&self, chain: &[Transformation]) -> Result<DataMatrix> {
        match chain.strip_prefix(self.transformations()) {
            Some(rest) => rest.iter().try_fold(self.clone(), |x, next| next.apply(&x)),
            None => Err(differ(chain, self.transformations())),
        }
    }

    /// Refuses rows that did not go through exactly this chain.
    pub(crate) fn check_transformations(&self, chain: &[Transformation]) -> Result<()> {
        if self.transformations() == chain {
            Ok(())
        } else {
            Err(differ(chain, self.transformations()))
        }
    }
}

fn differ(wanted: &[Transformation], found: &[Transformation]) -> Error {
    let texts = |chain: &[Transformation]| chain.iter().map(Transformation::to_string).collect();
    Error::TransformationsDiffer { wanted: texts(wanted), found: texts(found) }
}
