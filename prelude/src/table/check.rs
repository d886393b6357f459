//! Columns that say nothing, or nothing that another column does not say.

use super::matrix::DataMatrix;
use crate::random::replicate_generator;
use rand::RngExt;

/// Columns count as perfectly correlated when, centred and brought to unit length, they lie this
/// close together or to each other's opposite: a correlation within 5 · 10⁻¹³ of 1 or −1.
const CLOSE: f64 = 1e-6;

/// What is odd about the columns of a matrix; made by [`DataMatrix::check_columns`].
#[derive(Debug, Clone, PartialEq)]
pub struct ColumnCheck {
    constant: Vec<(String, f64)>,
    equal: Vec<(String, String)>,
    linear: Vec<LinearPair>,
    n_cols: usize,
    n_rows: usize,
}

/// A column that follows from an earlier one: column = shift + factor × earlier.
#[derive(Debug, Clone, PartialEq)]
pub struct LinearPair {
    /// The column.
    pub column: String,
    /// The earlier column.
    pub earlier: String,
    /// What the earlier column is multiplied by; its sign is that of the correlation.
    pub factor: f64,
    /// What is added.
    pub shift: f64,
}

impl ColumnCheck {
    /// Columns that hold one value throughout, with that value. They have no correlation with
    /// anything and cannot be standardised.
    pub fn constant(&self) -> &[(String, f64)] {
        &self.constant
    }

    /// Columns that hold the same values as an earlier one, each with the first such.
    pub fn equal(&self) -> &[(String, String)] {
        &self.equal
    }

    /// Columns that are perfectly correlated with an earlier one without being equal to it, such
    /// as one measurement in two units, each with the first such.
    ///
    /// Perfectly means: a correlation within 5 · 10⁻¹³ of 1 or −1. Measurements written down in
    /// both units with few digits are correlated less perfectly than that.
    pub fn linear(&self) -> &[LinearPair] {
        &self.linear
    }

    /// Whether every column varies and no two are perfectly correlated.
    ///
    /// Columns can still follow from several others together, as a total from its parts: the rank
    /// of a decomposition tells.
    pub fn is_sound(&self) -> bool {
        self.constant.is_empty() && self.equal.is_empty() && self.linear.is_empty()
    }

    /// The number of columns that were looked at.
    pub fn n_cols(&self) -> usize {
        self.n_cols
    }

    /// The number of rows.
    pub fn n_rows(&self) -> usize {
        self.n_rows
    }
}

impl DataMatrix {
    /// Looks for columns that do not vary, are equal, or are perfectly correlated.
    ///
    /// ```
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    ///
    /// let x = DataMatrix::from_values(
    ///     dmatrix![1.0, 10.0, 7.0; 3.0, 30.0, 7.0; 4.0, 40.0, 7.0],
    ///     ["length_cm", "length_mm", "kiln"],
    ///     ["a", "b", "c"],
    /// )?;
    /// let check = x.check_columns();
    /// assert_eq!(check.constant(), [("kiln".to_owned(), 7.0)]);
    /// let pair = &check.linear()[0];
    /// assert_eq!((pair.column.as_str(), pair.earlier.as_str()), ("length_mm", "length_cm"));
    /// assert!((pair.factor - 10.0).abs() < 1e-12);
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    pub fn check_columns(&self) -> ColumnCheck {
        let columns: Vec<Centred<'_>> =
            (0..self.n_cols()).map(|j| Centred::of(self.column(j))).collect();
        let name = |j: usize| self.variables()[j].clone();
        let mut check = ColumnCheck {
            constant: Vec::new(),
            equal: Vec::new(),
            linear: Vec::new(),
            n_cols: self.n_cols(),
            n_rows: self.n_rows(),
        };
        for (j, column) in columns.iter().enumerate() {
            if column.is_constant() {
                check.constant.push((name(j), column.values[0]));
            }
        }
        for (j, earlier) in followers(&columns) {
            if columns[j].values == columns[earlier].values {
                check.equal.push((name(j), name(earlier)));
            } else {
                let (factor, shift) = columns[j].line_over(&columns[earlier]);
                let (column, earlier) = (name(j), name(earlier));
                check.linear.push(LinearPair { column, earlier, factor, shift });
            }
        }
        check
    }

    fn column(&self, j: usize) -> &[f64] {
        &self.values().as_slice()[j * self.n_rows()..(j + 1) * self.n_rows()]
    }
}

/// A column with its mean and the length of what is left without it.
struct Centred<'a> {
    values: &'a [f64],
    mean: f64,
    length: f64,
}

impl<'a> Centred<'a> {
    fn of(values: &'a [f64]) -> Self {
        let n = values.len() as f64;
        // Shares of the mean, so that no sum overflows; the second pass takes the rounding error of
        // the first off.
        let first: f64 = values.iter().map(|value| value / n).sum();
        let mean = first + values.iter().map(|value| (value - first) / n).sum::<f64>();
        let reach = values.iter().fold(0.0, |reach: f64, value| reach.max((value - mean).abs()));
        let squares: f64 = values.iter().map(|value| ((value - mean) / reach).powi(2)).sum();
        Centred { values, mean, length: reach * squares.sqrt() }
    }

    fn is_constant(&self) -> bool {
        self.values.iter().all(|value| *value == self.values[0])
    }

    /// The values about their mean, brought to unit length.
    fn unit(&self) -> impl Iterator<Item = f64> {
        self.values.iter().map(|value| (value - self.mean) / self.length)
    }

    fn sign_with(&self, other: &Centred<'_>) -> f64 {
        self.unit().zip(other.unit()).map(|(a, b)| a * b).sum::<f64>().signum()
    }

    fn is_in_line_with(&self, other: &Centred<'_>) -> bool {
        let sign = self.sign_with(other);
        let apart: f64 = self.unit().zip(other.unit()).map(|(a, b)| (a - sign * b).powi(2)).sum();
        apart.sqrt() <= CLOSE
    }

    /// Factor and shift of this column as a linear function of another in line with it.
    fn line_over(&self, other: &Centred<'_>) -> (f64, f64) {
        let factor = self.sign_with(other) * self.length / other.length;
        (factor, self.mean - factor * other.mean)
    }
}

/// The columns in line with an earlier one, each with the first such, in order.
///
/// Comparing all pairs would take p² n steps. Columns in line with each other have the same
/// absolute product with any fixed direction, so only those with close products are compared.
fn followers(columns: &[Centred<'_>]) -> Vec<(usize, usize)> {
    let n_rows = columns.first().map_or(0, |column| column.values.len());
    let mut generator = replicate_generator(0, 0);
    let size = 1.0 / (n_rows as f64).sqrt();
    let direction: Vec<f64> =
        (0..n_rows).map(|_| if generator.random::<bool>() { size } else { -size }).collect();
    let mut keyed: Vec<(f64, usize)> = columns
        .iter()
        .enumerate()
        .filter(|(_, column)| !column.is_constant())
        .map(|(j, c)| (c.unit().zip(&direction).map(|(z, d)| z * d).sum::<f64>().abs(), j))
        .collect();
    keyed.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
    let mut followers = Vec::new();
    // The direction has unit length, so that products differ by no more than the columns do.
    for close in keyed.chunk_by(|a, b| b.0 - a.0 <= 2.0 * CLOSE) {
        let mut places: Vec<usize> = close.iter().map(|(_, j)| *j).collect();
        places.sort_unstable();
        let mut leaders: Vec<usize> = Vec::new();
        for j in places {
            match leaders.iter().find(|leader| columns[j].is_in_line_with(&columns[**leader])) {
                Some(leader) => followers.push((j, *leader)),
                None => leaders.push(j),
            }
        }
    }
    followers.sort_unstable();
    followers
}

#[cfg(test)]
mod tests {
    use nalgebra::DMatrix;
    use proptest::prelude::*;

    use super::*;
    use crate::compare::assert_relative;

    #[test]
    fn equal_and_perfectly_correlated_columns_are_told_with_their_line() {
        // Temperatures: °F = 32 + 1.8 °C, K = 273.15 + °C; the last is only nearly the first.
        let celsius = [850.3, 912.7, 880.1, 990.9, 1001.4, 873.6];
        let columns: Vec<f64> = celsius
            .iter()
            .copied()
            .chain([1.0, 5.0, 2.0, 2.0, 7.0, 3.0])
            .chain(celsius.iter().map(|c| 32.0 + 1.8 * c))
            .chain(celsius)
            .chain([0.3; 6])
            .chain(celsius.iter().map(|c| 5.0 - c))
            .chain(celsius.iter().enumerate().map(|(row, c)| c + 1e-3 * row as f64))
            .collect();
        let names = ["C", "other", "F", "again", "flat", "minus", "near"];
        let labels = ["1", "2", "3", "4", "5", "6"];
        let x = DataMatrix::from_values(DMatrix::from_vec(6, 7, columns), names, labels).unwrap();
        let check = x.check_columns();
        assert!(!check.is_sound());
        assert_eq!(check.constant(), [("flat".to_owned(), 0.3)]);
        assert_eq!(check.equal(), [("again".to_owned(), "C".to_owned())]);
        let pairs: Vec<(&str, &str)> =
            check.linear().iter().map(|pair| (&*pair.column, &*pair.earlier)).collect();
        assert_eq!(pairs, [("F", "C"), ("minus", "C")]);
        assert_relative(check.linear()[0].factor, 1.8, 1e-13, "factor");
        assert_relative(check.linear()[0].shift, 32.0, 1e-11, "shift");
        assert_relative(check.linear()[1].factor, -1.0, 1e-13, "factor");
        let sound = x.select(["other", "near"]).unwrap().check_columns();
        assert!(sound.is_sound() && sound.n_cols() == 2 && sound.n_rows() == 6);
    }

    #[test]
    fn one_row_is_constant_and_two_rows_are_in_line() {
        let one = DataMatrix::from_unnamed(DMatrix::from_element(1, 3, 2.0)).unwrap();
        assert_eq!(one.check_columns().constant().len(), 3);
        let two = DataMatrix::from_unnamed(DMatrix::from_vec(2, 2, vec![1.0, 2.0, 9.0, 5.0]));
        let check = two.unwrap().check_columns();
        assert_relative(check.linear()[0].factor, -4.0, 1e-14, "factor");
        let large = DMatrix::from_vec(2, 2, vec![1e308, -1e308, 1e-300, 2e-300]);
        assert_eq!(DataMatrix::from_unnamed(large).unwrap().check_columns().linear().len(), 1);
    }

    proptest! {
        /// The definition by correlations of all pairs.
        #[test]
        fn as_all_pairs_say(
            values in prop::collection::vec(-3_i32..4, 24), from in 0_usize..6, factor in -3_i32..4,
        ) {
            let mut x = DMatrix::from_iterator(4, 6, values.iter().map(|v| f64::from(*v)));
            let line = x.column(from) * f64::from(factor) * 0.1;
            x.set_column(5, &line.add_scalar(1.0));
            let x = DataMatrix::from_unnamed(x).unwrap();
            let check = x.check_columns();
            // The last column in tenths, so that products are exact.
            let exact = |j: usize| -> Vec<i64> {
                let scale = if j == 5 { 10.0 } else { 1.0 };
                x.values().column(j).iter().map(|v| (v * scale).round() as i64).collect()
            };
            let moment = |a: &[i64], b: &[i64]| {
                let sum = |x: &[i64]| x.iter().sum::<i64>();
                4 * a.iter().zip(b).map(|(a, b)| a * b).sum::<i64>() - sum(a) * sum(b)
            };
            let mut expected = Vec::new();
            for j in 0..6 {
                let b = exact(j);
                let first = (0..j).find(|i| {
                    let a = exact(*i);
                    let (aa, bb, ab) = (moment(&a, &a), moment(&b, &b), moment(&a, &b));
                    aa > 0 && bb > 0 && ab * ab == aa * bb
                });
                expected.extend(first.map(|i| (format!("V{}", j + 1), format!("V{}", i + 1))));
            }
            let mut found: Vec<(String, String)> = check.equal().to_vec();
            found.extend(check.linear().iter().map(|p| (p.column.clone(), p.earlier.clone())));
            found.sort();
            prop_assert_eq!(found, expected);
        }
    }
}
