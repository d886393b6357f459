//! An analysis that outlives its session: saved as JSON, and read back for use on new rows.
//!
//! ```text
//! { "format": "semiaxis components", "version": 1,
//!   "scaling": "correlation" | "covariance",
//!   "route": "variable-cross-product" | "row-cross-product" | "singular-values" | "randomised",
//!   "rows": n, "divisor": n − 1, "weighted": true | false, "rank": r, "rank_tolerance": τ² / (n − 1),
//!   "variables": [p names], "transformations": [what each row went through before, as `transform` saves it],
//!   "mean": [p], "scale": [p], "deviations": [p],
//!   "total_variance": of all variables, "variances": [one for each component kept],
//!   "loadings": [for each component [p]],
//!   "approximation": null | { "directions", "power_iterations", "seed", "norm_bound", "residuals" },
//!   "scores": null | { "labels": [n names], "values": [for each component [n]] } }
//! ```
//!
//! Numbers are written in the shortest form that reads back as the same double, so that a loaded
//! analysis equals the saved one in every bit. Every field is needed. What is not known, missing,
//! of the wrong kind or length, not finite, or at odds with the rest is refused by name: loadings
//! that are not perpendicular and of unit length, variances that do not descend or exceed the total,
//! scales that do not belong to the scaling.

mod fields;
mod file;
mod read;
mod write;

use std::path::Path;

use super::fitted::FittedComponents;
use super::result::PrincipalComponents;
use crate::error::{Error, Result};
use crate::table::NamedMatrix;

pub(super) const FORMAT: &str = "semiaxis components";
pub(super) const VERSION: u64 = 1;

impl FittedComponents {
    /// The analysis as JSON; scores are part of it only when they were saved before.
    ///
    /// ```
    /// use semiaxis::components::{FittedComponents, Scaling, principal_components};
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    ///
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0])?;
    /// let pca = principal_components(&x, Scaling::Correlation)?;
    /// let back = FittedComponents::from_json(&pca.to_json())?;
    /// assert!(back.variances() == pca.variances());
    /// assert!(back.project(&x)? == *pca.scores());
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    pub fn to_json(&self) -> String {
        write::json(self)
    }

    /// The analysis that [`to_json`](Self::to_json) wrote.
    ///
    /// # Errors
    ///
    /// [`Error::SavedVersion`] for a version that is not known, [`Error::SavedForm`] for anything
    /// else that is not as it should be; both name the part at fault.
    pub fn from_json(text: &str) -> Result<FittedComponents> {
        read::fitted(text)
    }

    /// Writes the analysis to a file, as JSON; a file that is there is replaced when the new one is
    /// whole, and left alone when it cannot be written.
    ///
    /// The rows themselves are not saved, nor their scores; see
    /// [`save_with_scores`](PrincipalComponents::save_with_scores).
    ///
    /// # Errors
    ///
    /// [`Error::Io`] when the file cannot be written.
    pub fn save(&self, path: impl AsRef<Path>) -> Result<()> {
        file::write(path.as_ref(), &self.to_json())
    }

    /// Reads an analysis from a file that [`save`](Self::save) wrote.
    ///
    /// ```
    /// use semiaxis::components::{FittedComponents, Scaling, principal_components};
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    ///
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0])?;
    /// let pca = principal_components(&x, Scaling::Correlation)?;
    /// # let dir = tempfile::tempdir().unwrap();
    /// # let path = dir.path().join("tiles.json");
    /// pca.save(&path)?;
    /// let loaded = FittedComponents::load(&path)?;
    /// let new = DataMatrix::from_unnamed(dmatrix![2.0, 2.0])?;
    /// assert!(loaded.project(&new)?.amax() < 1e-12); // the new row lies at the mean
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::FileMissing`], [`Error::Io`], [`Error::NotText`], and those of
    /// [`from_json`](Self::from_json), with the file's name beside the part at fault.
    pub fn load(path: impl AsRef<Path>) -> Result<FittedComponents> {
        let path = path.as_ref();
        let text = file::read(path)?;
        Self::from_json(&text).map_err(|error| match error {
            Error::SavedForm { part, found, accepted } => {
                Error::SavedForm { part: format!("{part} in {}", path.display()), found, accepted }
            }
            other => other,
        })
    }

    /// The scores of the rows that were analysed, if they were saved with it.
    ///
    /// # Errors
    ///
    /// [`Error::NotSaved`] when they were not.
    pub fn saved_scores(&self) -> Result<&NamedMatrix> {
        self.saved_scores.as_ref().ok_or(Error::NotSaved {
            what: "scores",
            remedy: "save them with `.save_with_scores(path)`, or project the rows",
        })
    }
}

impl PrincipalComponents {
    /// As [`save`](FittedComponents::save), with the labels and scores of the rows: enough to draw
    /// them again, and to read off who they were.
    ///
    /// # Errors
    ///
    /// [`Error::Io`] when the file cannot be written.
    pub fn save_with_scores(&self, path: impl AsRef<Path>) -> Result<()> {
        self.with_scores().save(path)
    }

    /// As [`to_json`](FittedComponents::to_json), with the labels and scores of the rows.
    ///
    /// ```
    /// # use semiaxis::components::{PrincipalComponents, Scaling, principal_components};
    /// # use semiaxis::nalgebra::dmatrix;
    /// # use semiaxis::table::DataMatrix;
    /// # let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0])?;
    /// let pca = principal_components(&x, Scaling::Correlation)?;
    /// let back = PrincipalComponents::from_json(&pca.to_json_with_scores())?;
    /// assert!(back.saved_scores()? == pca.scores());
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    pub fn to_json_with_scores(&self) -> String {
        self.with_scores().to_json()
    }

    /// Reads an analysis from a file: [`FittedComponents::load`], since the rows are not in it.
    ///
    /// # Errors
    ///
    /// Those of [`FittedComponents::load`].
    pub fn load(path: impl AsRef<Path>) -> Result<FittedComponents> {
        FittedComponents::load(path)
    }

    /// Reads an analysis from JSON: [`FittedComponents::from_json`], since the rows are not in it.
    ///
    /// # Errors
    ///
    /// Those of [`FittedComponents::from_json`].
    pub fn from_json(text: &str) -> Result<FittedComponents> {
        FittedComponents::from_json(text)
    }

    fn with_scores(&self) -> FittedComponents {
        FittedComponents { saved_scores: Some(self.scores().clone()), ..self.fitted().clone() }
    }
}
