//! Congruence of components, one by one.

use std::fmt;

use nalgebra::DMatrix;

use super::assignment::heaviest;
use super::check::comparable;
use crate::error::{Error, Result};
use crate::table::NamedMatrix;

/// Congruence coefficients between the columns of two matrices of loadings, and which columns
/// belong together.
///
/// ```text
/// φ_kl = Σ_j a_jk b_jl / √(Σ_j a_jk² Σ_j b_jl²)
/// ```
///
/// A cosine, not a correlation: means are not taken off, so that loadings of one sign throughout are
/// congruent however they vary. Pairs are those that make the sum of |φ| largest (an assignment
/// problem, solved exactly); a negative φ of a pair says that one component is the other turned
/// round, which means nothing.
///
/// Both matrices have one row for each variable, with the same names in the same order; the number
/// of columns may differ, and what has no partner is listed.
///
/// ```
/// use semiaxis::comparison::congruence;
/// use semiaxis::nalgebra::dmatrix;
/// use semiaxis::table::NamedMatrix;
///
/// let names = ["a", "b", "c"].map(String::from);
/// let columns = ["1", "2"].map(String::from);
/// let first = NamedMatrix::new(dmatrix![1.0, 0.0; 1.0, 0.0; 0.0, 1.0], names.clone(), columns.clone())?;
/// let second = NamedMatrix::new(dmatrix![0.0, -2.0; 0.0, -2.0; 3.0, 1.0], names, columns)?;
/// let result = congruence(&first, &second)?;
/// // The first column belongs to the second, turned round: −4 / √(2 · 9).
/// assert!((result.pairs()[0].coefficient + 0.9428).abs() < 1e-4);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// Sources: Tucker (1951); C. Burt (1948), "The factorial study of temperamental traits", for the
/// same coefficient; verbal marks from Lorenzo-Seva and ten Berge (2006).
///
/// # Errors
///
/// [`Error::RowNamesDiffer`] names what differs; [`Error::ZeroColumns`] names columns without
/// direction; [`Error::NonFinite`], [`Error::NoRows`], [`Error::NoColumns`].
pub fn congruence(first: &NamedMatrix, second: &NamedMatrix) -> Result<Congruence> {
    comparable(first, second)?;
    let unit_first = unit_columns(first, "the first matrix")?;
    let unit_second = unit_columns(second, "the second matrix")?;
    let values = unit_first.transpose() * unit_second;
    let pairs: Vec<MatchedComponents> = heaviest(&values.abs())
        .into_iter()
        .enumerate()
        .filter_map(|(row, column)| {
            let column = column?;
            Some(MatchedComponents {
                first_idx: row,
                second_idx: column,
                first: first.column_names()[row].clone(),
                second: second.column_names()[column].clone(),
                coefficient: values[(row, column)],
            })
        })
        .collect();
    let alone = |names: &[String], taken: &dyn Fn(usize) -> bool| -> Vec<String> {
        let places = names.iter().enumerate().filter(|(place, _)| !taken(*place));
        places.map(|(_, name)| name.clone()).collect()
    };
    let first_alone =
        alone(first.column_names(), &|place| pairs.iter().any(|pair| pair.first_idx == place));
    let second_alone =
        alone(second.column_names(), &|place| pairs.iter().any(|pair| pair.second_idx == place));
    let coefficients =
        NamedMatrix::new(values, first.shared_column_names(), second.shared_column_names())?;
    Ok(Congruence { coefficients, pairs, first_alone, second_alone })
}

fn unit_columns(matrix: &NamedMatrix, what: &'static str) -> Result<DMatrix<f64>> {
    let mut unit = matrix.values().clone();
    let mut columns = Vec::new();
    for (mut column, name) in unit.column_iter_mut().zip(matrix.column_names()) {
        // The largest goes first, so that squares neither overflow nor vanish.
        let largest = column.amax();
        if largest == 0.0 {
            columns.push(name.clone());
            continue;
        }
        column /= largest;
        let length = column.norm();
        column /= length;
    }
    if columns.is_empty() { Ok(unit) } else { Err(Error::ZeroColumns { what, columns }) }
}

/// How congruent the columns of two matrices are; made by [`congruence`].
#[derive(Debug, Clone, PartialEq)]
pub struct Congruence {
    coefficients: NamedMatrix,
    pairs: Vec<MatchedComponents>,
    first_alone: Vec<String>,
    second_alone: Vec<String>,
}

/// Two columns that belong together.
#[derive(Debug, Clone, PartialEq)]
pub struct MatchedComponents {
    /// The place of the column in the first matrix, from zero.
    pub first_idx: usize,
    /// The place of its partner in the second.
    pub second_idx: usize,
    /// The name of the column in the first matrix.
    pub first: String,
    /// The name of its partner in the second.
    pub second: String,
    /// Their congruence coefficient, from −1 to 1; negative when one is turned round.
    pub coefficient: f64,
}

/// How alike two components count as, by the absolute congruence coefficient (Lorenzo-Seva and ten
/// Berge 2006, from judgements of practitioners). A rule of thumb, not a test.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
#[non_exhaustive]
pub enum Similarity {
    /// Below 0.85: not similar.
    Low,
    /// From 0.85 to below 0.95: fairly similar.
    Fair,
    /// 0.95 and above: can be taken for equal.
    Equal,
}

impl MatchedComponents {
    /// What the absolute coefficient counts as.
    pub fn similarity(&self) -> Similarity {
        match self.coefficient.abs() {
            size if size >= 0.95 => Similarity::Equal,
            size if size >= 0.85 => Similarity::Fair,
            _ => Similarity::Low,
        }
    }
}

impl Congruence {
    /// All coefficients: a row for each column of the first matrix, a column for each of the second.
    pub fn coefficients(&self) -> &NamedMatrix {
        &self.coefficients
    }

    /// The columns that belong together, in the order of the first matrix.
    pub fn pairs(&self) -> &[MatchedComponents] {
        &self.pairs
    }

    /// Columns of the first matrix without a partner.
    pub fn first_alone(&self) -> &[String] {
        &self.first_alone
    }

    /// Columns of the second matrix without a partner.
    pub fn second_alone(&self) -> &[String] {
        &self.second_alone
    }
}

impl fmt::Display for Similarity {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Similarity::Low => "not similar",
            Similarity::Fair => "fairly similar",
            Similarity::Equal => "can be taken for equal",
        })
    }
}
