//! What every comparison asks of its two matrices.

use std::collections::HashSet;

use crate::error::{Error, Result};
use crate::rotation::check_finite;
use crate::table::NamedMatrix;

/// Finite numbers, at least one row and column each, and the same rows in the same order.
pub(super) fn comparable(first: &NamedMatrix, second: &NamedMatrix) -> Result<()> {
    for matrix in [first, second] {
        if matrix.n_cols() == 0 {
            return Err(Error::NoColumns);
        }
        if matrix.n_rows() == 0 {
            return Err(Error::NoRows);
        }
        check_finite(matrix)?;
    }
    same_rows(first.row_names(), second.row_names())
}

fn same_rows(first: &[String], second: &[String]) -> Result<()> {
    if first == second {
        return Ok(());
    }
    let lacking = |from: &[String], of: &[String]| -> Vec<String> {
        let known: HashSet<&String> = of.iter().collect();
        from.iter().filter(|name| !known.contains(name)).cloned().collect()
    };
    let (missing, extra) = (lacking(first, second), lacking(second, first));
    let mut places = first.iter().zip(second).enumerate();
    let order = if missing.is_empty() && extra.is_empty() {
        places.find(|(_, (a, b))| a != b).map(|(place, (a, b))| (place + 1, a.clone(), b.clone()))
    } else {
        None
    };
    if missing.is_empty() && extra.is_empty() && order.is_none() {
        // One list goes on, with names that it has already.
        let (expected, found) = (first.len(), second.len());
        return Err(Error::ShapeMismatch { what: "rows of the second matrix", expected, found });
    }
    Err(Error::RowNamesDiffer { missing, extra, order })
}
