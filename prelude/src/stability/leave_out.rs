//! Leaving out each row in turn.

use nalgebra::{DMatrix, DVector};

use super::asymptotic::{check_unweighted, with_all_components};
use super::options::{Alignment, LeaveOutOptions, followed};
use super::refit::{Outcome, Refit};
use super::result::LeaveOut;
use crate::components::PrincipalComponents;
use crate::error::{Error, Result};
use crate::repeat::repeat;
use crate::table::NamedMatrix;

/// Which rows the analysis hangs on: what changes when each is left out.
///
/// Every refit is exact. The cross-product without a row follows from that of all rows by a term
/// of rank one, so that only the decomposition is paid for; wide data are multiplied anew.
///
/// A row that moves the analysis is not wrong for that. It says that the analysis rests on it, and
/// that the row should be looked at.
///
/// ```
/// use semiaxis::components::{Scaling, principal_components};
/// use semiaxis::nalgebra::dmatrix;
/// use semiaxis::stability::{LeaveOutOptions, leave_out};
/// use semiaxis::table::DataMatrix;
///
/// // Five rows about a line, and one high above it.
/// let x = dmatrix![1.0, 1.0; 2.0, 2.1; 3.0, 2.9; 4.0, 4.0; 5.0, 5.1; 3.0, 12.0];
/// let x = DataMatrix::from_unnamed(x)?;
/// let pca = principal_components(&x, Scaling::Covariance)?;
/// let influence = leave_out(&pca, LeaveOutOptions::new().components(1))?;
/// assert_eq!(influence.most_influential().next(), Some("6"));
/// assert!(influence.angles()[5] > 20.0);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::TooFewRows`] for fewer than three rows; [`Error::ComponentOutOfRange`];
/// [`Error::WeightsNotCovered`]; [`Error::Interrupted`].
pub fn leave_out(pca: &PrincipalComponents, options: LeaveOutOptions) -> Result<LeaveOut> {
    let method = "leaving out rows";
    check_unweighted(pca, method)?;
    let n = pca.n_rows();
    if n < 3 {
        return Err(Error::TooFewRows { method, needed: 3, found: n });
    }
    let whole = with_all_components(pca)?;
    let pca = whole.as_ref().unwrap_or(pca);
    let k = followed(options.chosen_components(), pca)?;
    let refit = Refit::new(pca, k, Alignment::Matching);
    // Nothing here is random; the loop is wanted for its threads, its progress and its end.
    let outcomes = repeat(
        method,
        n,
        0,
        || refit.workspace(),
        |workspace, _, row| refit.without(row, workspace),
    )?;
    summary(pca, k, &outcomes)
}

fn summary(pca: &PrincipalComponents, k: usize, outcomes: &[Outcome]) -> Result<LeaveOut> {
    let n = outcomes.len();
    let variances = pca.variances();
    let of = |row: usize, value: &dyn Fn(&super::refit::Refitted) -> f64| {
        outcomes[row].as_ref().map_or(f64::NAN, value)
    };
    let variance_changes = DMatrix::from_fn(n, k, |row, c| {
        of(row, &|refitted| (refitted.variances[c] - variances[c]) / variances[c])
    });
    let loading_changes = DMatrix::from_fn(n, k, |row, c| {
        of(row, &|refitted| {
            // 1 − c = ½ ‖v − w‖² keeps its digits where the cosine is close to one.
            let p = pca.n_variables();
            let pairs = pca.loadings().values().column(c);
            let aligned = &refitted.loadings[c * p..][..p];
            0.5 * pairs.iter().zip(aligned).map(|(v, w)| (v - w) * (v - w)).sum::<f64>()
        })
    });
    let angles =
        DVector::from_fn(n, |row, _| of(row, &|refitted| refitted.angles[k - 1].to_degrees()));
    let whole_space = k == pca.n_variables();
    let size = |row: usize| {
        if outcomes[row].is_err() {
            f64::INFINITY
        } else if whole_space {
            variance_changes.row(row).amax()
        } else {
            angles[row]
        }
    };
    let mut order: Vec<usize> = (0..n).collect();
    order.sort_by(|&a, &b| size(b).total_cmp(&size(a)).then(a.cmp(&b)));
    let needed = outcomes
        .iter()
        .enumerate()
        .filter_map(|(row, outcome)| {
            let columns = outcome.as_ref().err()?;
            let columns = columns.iter().map(|&j| pca.variables()[j].clone()).collect();
            Some((pca.labels()[row].clone(), columns))
        })
        .collect();
    let components = &pca.loadings().column_names()[..k];
    Ok(LeaveOut {
        variance_changes: NamedMatrix::new(variance_changes, pca.labels(), components)?,
        loading_changes: NamedMatrix::new(loading_changes, pca.labels(), components)?,
        angles,
        order,
        needed,
        whole_space,
        scaling: pca.scaling(),
    })
}
