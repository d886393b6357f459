//! The assignment problem: which pairs, each row and column used at most once, weigh most.

use nalgebra::DMatrix;

/// For each row the column that it is paired with; `None` for rows left over when there are more
/// rows than columns. The sum of the weights of the pairs is the largest possible.
///
/// Rows are added one by one, each along the cheapest alternating path, while potentials keep all
/// reduced costs at zero or above (H. W. Kuhn (1955), "The Hungarian method for the assignment
/// problem", Naval Research Logistics Quarterly 2, 83–97; in the form that grows shortest paths).
/// The cost is rows² × columns.
pub(super) fn heaviest(weights: &DMatrix<f64>) -> Vec<Option<usize>> {
    if weights.nrows() <= weights.ncols() {
        return cheapest(&-weights).into_iter().map(Some).collect();
    }
    let mut paired = vec![None; weights.nrows()];
    for (column, row) in cheapest(&-weights.transpose()).into_iter().enumerate() {
        paired[row] = Some(column);
    }
    paired
}

/// The column of each row; there must not be more rows than columns.
fn cheapest(costs: &DMatrix<f64>) -> Vec<usize> {
    let (n, m) = costs.shape();
    // Column m stands for the row that is being added.
    let mut row_of = vec![None; m + 1];
    let mut row_price = vec![0.0; n];
    let mut column_price = vec![0.0; m + 1];
    for added in 0..n {
        row_of[m] = Some(added);
        let mut least = vec![f64::INFINITY; m];
        let mut came_from = vec![m; m];
        let mut visited = vec![false; m + 1];
        let mut here = m;
        while let Some(row) = row_of[here] {
            visited[here] = true;
            let (mut step, mut next) = (f64::INFINITY, m);
            for column in (0..m).filter(|&column| !visited[column]) {
                let reduced = costs[(row, column)] - row_price[row] - column_price[column];
                if reduced < least[column] {
                    (least[column], came_from[column]) = (reduced, here);
                }
                if least[column] < step {
                    (step, next) = (least[column], column);
                }
            }
            for column in 0..=m {
                if visited[column] {
                    if let Some(row) = row_of[column] {
                        row_price[row] += step;
                    }
                    column_price[column] -= step;
                } else if column < m {
                    least[column] -= step;
                }
            }
            here = next;
        }
        while here != m {
            let before = came_from[here];
            row_of[here] = row_of[before];
            here = before;
        }
    }
    let mut columns = vec![0; n];
    for (column, row) in row_of[..m].iter().enumerate() {
        if let Some(row) = row {
            columns[*row] = column;
        }
    }
    columns
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Every way of pairing, tried.
    fn by_trial(weights: &DMatrix<f64>, row: usize, used: &mut Vec<bool>) -> f64 {
        if row == weights.nrows() {
            return 0.0;
        }
        let mut best = f64::NEG_INFINITY;
        if weights.nrows() > weights.ncols() {
            best = by_trial(weights, row + 1, used);
        }
        for column in 0..weights.ncols() {
            if !used[column] {
                used[column] = true;
                best = best.max(weights[(row, column)] + by_trial(weights, row + 1, used));
                used[column] = false;
            }
        }
        best
    }

    #[test]
    fn no_other_pairing_weighs_more() {
        for case in 0..60 {
            let (n, m) = (1 + case % 5, 1 + (case / 5) % 4);
            let weights = DMatrix::from_fn(n, m, |i, j| {
                ((case * 31 + i * 7 + j * 13) as f64 * 1.7).sin().abs()
            });
            let pairs = heaviest(&weights);
            let mut used = vec![false; m];
            let mut sum = 0.0;
            for (row, column) in pairs.iter().enumerate() {
                if let Some(column) = column {
                    assert!(!std::mem::replace(&mut used[*column], true), "column used twice");
                    sum += weights[(row, *column)];
                }
            }
            assert_eq!(pairs.iter().flatten().count(), n.min(m));
            let best = by_trial(&weights, 0, &mut vec![false; m]);
            assert!((sum - best).abs() < 1e-12, "{n} x {m}: {sum} for {best}");
        }
    }
}
