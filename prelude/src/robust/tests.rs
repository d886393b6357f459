//! Exact searches, invariances, contamination and refusals. Other programs' numbers are in the
//! workspace's `tests/tests/references`.

use nalgebra::{DMatrix, DVector};
use rand_distr::{Distribution, StandardNormal};
use rand_xoshiro::rand_core::SeedableRng;

use super::univariate::{tightest_window, univariate};
use super::{RobustComponents, RobustOptions, RobustRoute, robust_components, robust_scatter};
use crate::compare::{assert_all_relative, assert_matrix, assert_relative, assert_zero};
use crate::components::{Scaling, principal_components};
use crate::distances::{Standing, distances};
use crate::error::Error;
use crate::random::Generator;
use crate::table::DataMatrix;

fn noise(n: usize, p: usize, seed: u64) -> DMatrix<f64> {
    let mut generator = Generator::seed_from_u64(seed);
    DMatrix::from_fn(n, p, |_, _| StandardNormal.sample(&mut generator))
}

fn table(values: DMatrix<f64>) -> DataMatrix {
    DataMatrix::from_unnamed(values).unwrap()
}

fn usual() -> RobustOptions {
    RobustOptions::new().seed(1)
}

/// The covariance with divisor rows − 1, by the definition.
fn covariance(x: &DMatrix<f64>) -> DMatrix<f64> {
    let mean = x.row_mean();
    let centred = DMatrix::from_fn(x.nrows(), x.ncols(), |i, j| x[(i, j)] - mean[j]);
    centred.tr_mul(&centred) / (x.nrows() as f64 - 1.0)
}

/// Every subset of h of n rows.
fn subsets(n: usize, h: usize) -> Vec<Vec<usize>> {
    (0..1_u32 << n)
        .filter(|bits| bits.count_ones() as usize == h)
        .map(|bits| (0..n).filter(|row| bits >> row & 1 == 1).collect())
        .collect()
}

#[test]
fn the_subset_is_the_best_of_all_there_are() {
    for (seed, p) in [(1, 2), (2, 2), (3, 3), (4, 4)] {
        let mut x = noise(13, p, seed);
        x.rows_mut(0, 3).add_scalar_mut(4.0);
        let scatter = robust_scatter(&table(x.clone()), usual().share(0.5)).unwrap();
        let determinant = |rows: &Vec<usize>| covariance(&x.select_rows(rows)).determinant();
        let best = subsets(13, scatter.subset_size())
            .into_iter()
            .min_by(|a, b| determinant(a).total_cmp(&determinant(b)))
            .unwrap();
        assert_eq!(scatter.subset(), best, "seed {seed}");
        assert_relative(scatter.log_determinant().exp(), determinant(&best), 1e-10, "determinant");
        assert!(scatter.converged());
    }
}

#[test]
fn one_dimension_is_searched_exactly() {
    for seed in 1..20 {
        let x = noise(11, 1, seed);
        let scatter = robust_scatter(&table(x.clone()), usual().share(0.5)).unwrap();
        let h = scatter.subset_size();
        let variance = |rows: &Vec<usize>| covariance(&x.select_rows(rows))[(0, 0)];
        let best =
            subsets(11, h).into_iter().min_by(|a, b| variance(a).total_cmp(&variance(b))).unwrap();
        assert_eq!(scatter.subset(), best, "seed {seed}");
        // The list of numbers by itself says the same as the table of one column.
        let mut ascending: Vec<f64> = x.iter().copied().collect();
        ascending.sort_by(f64::total_cmp);
        let found = univariate(&ascending, h).raw;
        assert_relative(found.window.variance, variance(&best), 1e-12, "variance");
        assert_relative(found.centre, scatter.raw_centre()[0], 1e-12, "centre");
    }
    let window = tightest_window(&[1.0, 5.0, 5.0, 5.0, 9.0], 3);
    assert_eq!((window.first, window.mean, window.variance), (1, 5.0, 0.0));
}

#[test]
fn the_estimate_follows_its_formulas() {
    let mut x = noise(60, 3, 5);
    x.rows_mut(0, 10).add_scalar_mut(7.0);
    let scatter = robust_scatter(&table(x.clone()), usual()).unwrap();
    let raw = covariance(&x.select_rows(scatter.subset()))
        * (scatter.raw_consistency_factor() * scatter.raw_small_sample_factor());
    assert_matrix(scatter.raw_covariance(), &raw, 1e-12, "raw covariance");
    let distance = |centre: &DVector<f64>, covariance: &DMatrix<f64>, row: usize| {
        let deviation = x.row(row).transpose() - centre;
        deviation.dot(&(covariance.clone().try_inverse().unwrap() * &deviation)).sqrt()
    };
    for row in 0..60 {
        let expected = distance(scatter.raw_centre(), &raw, row);
        assert_relative(scatter.raw_distances()[row], expected, 1e-10, "raw distance");
        assert_eq!(scatter.kept()[row], expected <= scatter.limit());
        let expected = distance(scatter.centre(), scatter.covariance(), row);
        assert_relative(scatter.distances()[row], expected, 1e-10, "distance");
    }
    let kept: Vec<usize> = (0..60).filter(|row| scatter.kept()[*row]).collect();
    let expected = covariance(&x.select_rows(&kept))
        * (scatter.consistency_factor() * scatter.small_sample_factor());
    assert_matrix(scatter.covariance(), &expected, 1e-12, "covariance");
    assert_all_relative(scatter.correlation().diagonal().as_slice(), &[1.0; 3], 1e-15, "diagonal");
    assert_eq!(scatter.flagged()[..10], ["1", "2", "3", "4", "5", "6", "7", "8", "9", "10"]);
    // All rows trusted: nothing but the covariance of all, then of those within the cut-off.
    let all = robust_scatter(&table(x.clone()), usual().share(1.0)).unwrap();
    assert_eq!(all.subset_size(), 60);
    assert_matrix(all.raw_covariance(), &covariance(&x), 1e-12, "of all rows");
}

#[test]
fn neither_units_nor_order_nor_a_change_of_variables_matters() {
    let mut x = noise(80, 3, 8);
    x.rows_mut(0, 15).add_scalar_mut(6.0);
    let scatter = robust_scatter(&table(x.clone()), usual()).unwrap();
    let change = nalgebra::dmatrix![2.0, 0.3, -1.0; 0.0, 500.0, 0.2; 0.1, 0.0, 0.003];
    let mut changed = &x * &change;
    changed.column_mut(1).add_scalar_mut(1e6);
    let other = robust_scatter(&table(changed), usual()).unwrap();
    assert_eq!(scatter.subset(), other.subset());
    let expected = scatter.distances().as_slice();
    // An offset of 2 000 spreads takes three digits away.
    assert_all_relative(other.distances().as_slice(), expected, 1e-9, "distances");
    let expected = change.transpose() * scatter.covariance().values() * &change;
    assert_matrix(other.covariance(), &expected, 1e-9, "covariance");
    let order: Vec<usize> = (0..80).map(|row| (row * 37) % 80).collect();
    let other = robust_scatter(&table(x.select_rows(&order)), usual()).unwrap();
    for (place, row) in order.into_iter().enumerate() {
        assert_relative(other.distances()[place], scatter.distances()[row], 1e-9, "distance");
    }
}

#[test]
fn long_tables_are_searched_in_groups_with_the_same_end() {
    for n in [700, 1300, 4000] {
        let mut x = noise(n, 4, 3);
        let n_wild = n / 5;
        x.rows_mut(0, n_wild).add_scalar_mut(5.0);
        let x = table(x);
        let scatter = robust_scatter(&x, usual()).unwrap();
        assert!((0..n_wild).all(|row| !scatter.kept()[row]), "{n}");
        assert!(scatter.centre().amax() < 5.0 / (n as f64).sqrt(), "{n}: {}", scatter.centre());
        let again = robust_scatter(&x, usual().seed(99)).unwrap();
        assert_relative(again.log_determinant(), scatter.log_determinant(), 0.01, "other seed");
    }
}

#[test]
fn scatter_of_normal_rows_is_unbiased() {
    // Mean over 200 tables of the log determinant's root, which the corrections of Pison and
    // others were made for: within four standard errors and the two per cent they leave.
    for (n, p, share) in [(40, 2, 0.75), (60, 3, 0.5)] {
        let roots: Vec<f64> = (0..200)
            .map(|seed| {
                let options = RobustOptions::new().share(share).starts(100).seed(seed);
                let scatter = robust_scatter(&table(noise(n, p, 1000 + seed)), options).unwrap();
                scatter.raw_covariance().values().determinant().powf(1.0 / p as f64)
            })
            .collect();
        let mean = crate::quantile::mean(&roots);
        let error = crate::quantile::deviation(&roots) / 200.0_f64.sqrt();
        assert_zero(mean - 1.0, 4.0 * error + 0.02, &format!("{n} x {p}"));
    }
}

/// Rows along three clean directions of decreasing spread, and a fifth of them moved together.
fn contaminated(n: usize, p: usize, seed: u64) -> (DataMatrix, DMatrix<f64>, usize) {
    let spreads = [5.0, 3.0, 2.0];
    let directions = noise(p, 4, seed + 500).qr().q();
    let scores = noise(n, 3, seed);
    let own = noise(n, p, seed + 1);
    let n_wild = n / 5;
    let x = DMatrix::from_fn(n, p, |i, j| {
        let pattern: f64 = (0..3).map(|k| scores[(i, k)] * spreads[k] * directions[(j, k)]).sum();
        // The wild rows lie far off in a direction that the others do not use.
        let moved = if i < n_wild { 60.0 * directions[(j, 3)] } else { 0.0 };
        pattern + moved + 0.1 * own[(i, j)]
    });
    (table(x), directions.columns(0, 3).into_owned(), n_wild)
}

/// The largest angle between two spaces, in degrees.
fn angle(a: &DMatrix<f64>, b: &DMatrix<f64>) -> f64 {
    let cosines = a.tr_mul(b).singular_values();
    cosines.min().clamp(-1.0, 1.0).acos().to_degrees()
}

#[test]
fn a_fifth_of_wild_rows_does_not_turn_robust_components() {
    for (n, p, route) in [
        (200, 6, RobustRoute::Scatter),
        (200, 6, RobustRoute::Projections),
        (60, 40, RobustRoute::Projections),
        (50, 300, RobustRoute::Projections),
    ] {
        let (x, clean, n_wild) = contaminated(n, p, 7);
        let options = usual().components(3).route(route);
        let robust = robust_components(&x, Scaling::Covariance, options).unwrap();
        let what = format!("{n} x {p}, {route}");
        let classical = principal_components(&x, Scaling::Covariance).unwrap();
        let broken = classical.loadings().first(3).unwrap();
        assert!(angle(&broken, &clean) > 80.0, "{what}");
        // Without the wild rows the classical fit is within a few degrees of the truth.
        let rows: Vec<String> = x.labels()[n_wild..].to_vec();
        let honest = principal_components(&x.select_rows(rows).unwrap(), Scaling::Covariance);
        let honest = honest.unwrap();
        let honest_angle = angle(&honest.loadings().first(3).unwrap(), &clean);
        let robust_angle = angle(robust.loadings(), &clean);
        assert!(robust_angle < 2.0 * honest_angle + 0.5, "{what}: {robust_angle}");
        let flagged = robust.flagged();
        assert!(x.labels()[..n_wild].iter().all(|label| flagged.contains(&label.as_str())));
        let off = robust.distances().standings()[..n_wild].iter();
        assert!(
            off.filter(|s| matches!(s, Standing::Off | Standing::FarOutAndOff)).count() == n_wild
        );
        // About one clean row in twenty passes one of the two cut-offs.
        assert!(flagged.len() - n_wild <= n / 5, "{what}: {}", flagged.len() - n_wild);
        for (k, variance) in robust.variances().iter().enumerate() {
            // Few rows, of which the robust fit does without some: half to double.
            let ratio = variance / honest.variances()[k];
            assert!((0.45..2.0).contains(&ratio), "{what}, variance {k}: {ratio}");
        }
    }
}

fn check_conventions(robust: &RobustComponents) {
    let loadings = robust.loadings().values();
    let k = robust.n_components();
    let product = loadings.tr_mul(loadings);
    assert_matrix(&product, &DMatrix::identity(k, k), 1e-9, "perpendicular, of unit length");
    for column in loadings.column_iter() {
        let largest =
            column.iter().copied().fold(0.0, |a: f64, b| if b.abs() > a.abs() { b } else { a });
        assert!(largest > 0.0);
    }
    let variances: Vec<f64> = robust.variances().iter().copied().collect();
    assert!(variances.is_sorted_by(|a, b| a >= b) && variances[k - 1] > 0.0);
    let scores = robust.project(robust.data()).unwrap();
    assert_eq!(scores.values(), robust.scores().values());
    let found = distances(robust, k).unwrap();
    assert_eq!(found.standings(), robust.distances().standings());
    assert!(robust.cumulative()[k - 1] <= 1.0 + 1e-12);
}

#[test]
fn both_routes_keep_the_conventions_of_components() {
    let (x, _, _) = contaminated(90, 5, 3);
    for scaling in [Scaling::Covariance, Scaling::Correlation] {
        for route in [RobustRoute::Scatter, RobustRoute::Projections] {
            let robust = robust_components(&x, scaling, usual().route(route)).unwrap();
            assert_eq!((robust.route(), robust.scaling()), (route, scaling));
            check_conventions(&robust);
        }
        let robust = robust_components(&x, scaling, usual()).unwrap();
        assert_eq!(robust.route(), RobustRoute::Scatter);
        assert_eq!(robust.n_components(), 5);
        let total: f64 = robust.variances().sum();
        assert_relative(robust.total_variance(), total, 1e-12, "all components");
    }
    // Units do not matter under correlation.
    let mut values = x.values().clone();
    values.column_mut(2).scale_mut(1000.0);
    for route in [RobustRoute::Scatter, RobustRoute::Projections] {
        let of = |values: DMatrix<f64>| {
            robust_components(&table(values), Scaling::Correlation, usual().route(route)).unwrap()
        };
        let (one, other) = (of(x.values().clone()), of(values.clone()));
        assert_matrix(other.loadings(), one.loadings(), 1e-8, "loadings");
        assert_eq!(other.flagged(), one.flagged());
    }
}

#[test]
fn a_seed_fixes_the_numbers_on_any_number_of_threads() {
    let (x, _, _) = contaminated(120, 20, 4);
    let (long, _, _) = contaminated(900, 4, 4);
    let run = |threads: usize, seed: u64| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        pool.install(|| {
            let robust =
                robust_components(&x, Scaling::Covariance, RobustOptions::new().seed(seed))
                    .unwrap();
            let scatter =
                robust_scatter(&long, RobustOptions::new().starts(30).seed(seed)).unwrap();
            (robust.loadings().values().clone(), scatter.covariance().values().clone())
        })
    };
    let one = run(1, 9);
    assert!((2..5).all(|threads| run(threads, 9) == one));
    // Other directions are looked along with another seed.
    assert!(run(1, 10).0 != one.0);
}

#[test]
fn rows_in_a_hyperplane_are_named() {
    // Forty of fifty rows satisfy 2 a − b = 3 exactly, up to the rounding of their values.
    let own = noise(50, 3, 6);
    let x = DMatrix::from_fn(50, 3, |i, j| match j {
        1 if i >= 10 => 2.0 * own[(i, 0)] - 3.0,
        _ => own[(i, j)],
    });
    let x = DataMatrix::from_values(x, ["a", "b", "c"], (1..=50).map(|row| row.to_string()));
    match robust_scatter(&x.unwrap(), usual()) {
        Err(Error::ExactFit { n_on: 40, n_rows: 50, coefficients, constant, off, .. }) => {
            let names: Vec<&str> = coefficients.iter().map(|(name, _)| name.as_str()).collect();
            assert_eq!(names, ["a", "b"]);
            assert_relative(coefficients[0].1, 1.0, 1e-12, "a");
            assert_relative(coefficients[1].1, -0.5, 1e-7, "b");
            assert_relative(constant, 1.5, 1e-7, "constant");
            assert_eq!(off.len(), 10);
            assert_eq!((off[0].as_str(), off[9].as_str()), ("1", "10"));
        }
        other => panic!("{other:?}"),
    }
    // Nine in ten values of a column are equal.
    let mut x = noise(40, 2, 6);
    x.rows_mut(0, 36).column_mut(1).fill(7.0);
    match robust_scatter(&table(x), usual()) {
        Err(Error::ExactFit { n_on: 36, coefficients, constant, .. }) => {
            assert_eq!(coefficients.len(), 1);
            assert_relative(constant, 7.0, 1e-7, "constant");
        }
        other => panic!("{other:?}"),
    }
}

#[test]
fn a_flat_majority_is_followed_by_projections() {
    // In forty dimensions, most rows lie in three; the others are off them.
    let directions = noise(40, 3, 1).qr().q();
    let scores = noise(60, 3, 2);
    let mut x = &scores * directions.transpose();
    let wild = noise(8, 40, 3) * 5.0;
    x.rows_mut(0, 8).copy_from(&wild);
    let options = usual().components(2);
    let robust = robust_components(&table(x), Scaling::Covariance, options).unwrap();
    let within = directions.tr_mul(robust.loadings().values());
    for column in within.column_iter() {
        assert_relative(column.norm(), 1.0, 1e-9, "within the three directions");
    }
    let flagged = robust.flagged();
    assert!((1..=8).all(|row: usize| flagged.contains(&row.to_string().as_str())));
}

#[test]
fn what_cannot_be_estimated_is_refused() {
    let scatter = |values, options| robust_scatter(&table(values), options).unwrap_err();
    assert!(matches!(scatter(noise(9, 5, 1), usual()), Error::TooFewRows { needed: 10, .. }));
    assert!(matches!(scatter(noise(2, 1, 1), usual()), Error::TooFewRows { needed: 3, .. }));
    let mut dependent = noise(40, 4, 1);
    let sum = dependent.column(0) + dependent.column(1);
    dependent.set_column(3, &sum);
    assert!(matches!(
        scatter(dependent, usual()),
        Error::SingularScatter { rank: 3, order: 4, .. }
    ));
    let mut constant = noise(40, 2, 1);
    constant.column_mut(1).fill(3.0);
    assert!(matches!(scatter(constant.clone(), usual()), Error::ExactFit { n_on: 40, .. }));
    for (options, name) in [
        (usual().share(0.4), "share"),
        (usual().share(f64::NAN), "share"),
        (usual().starts(9), "starts"),
        (usual().directions(0), "directions"),
        (usual().components(0), "components"),
    ] {
        match scatter(noise(40, 2, 1), options) {
            Error::OptionOutOfRange { option, .. } => assert_eq!(option, name),
            other => panic!("{other}"),
        }
    }
    let weighted = table(noise(40, 2, 1)).with_weights((1..=40).map(f64::from)).unwrap();
    assert!(matches!(robust_scatter(&weighted, usual()), Err(Error::WeightsNotCovered { .. })));
    let components = |x: &DataMatrix, scaling, options| robust_components(x, scaling, options);
    let refused = components(&weighted, Scaling::Covariance, usual());
    assert!(matches!(refused, Err(Error::WeightsNotCovered { .. })));
    let refused = components(&table(noise(40, 2, 1)), Scaling::Covariance, usual().components(3));
    assert!(matches!(refused, Err(Error::ComponentOutOfRange { asked: 3, available: 2 })));
    let wide = table(noise(8, 20, 1));
    let refused = components(&wide, Scaling::Covariance, usual().components(6));
    assert!(matches!(refused, Err(Error::TooFewRows { needed: 12, found: 8, .. })));
    let mut half = noise(30, 20, 1);
    half.rows_mut(0, 20).column_mut(4).fill(1.5);
    match components(&table(half), Scaling::Correlation, usual()) {
        Err(Error::NoRobustSpread { columns }) => assert_eq!(columns, [("V5".to_owned(), 1.5)]),
        other => panic!("{other:?}"),
    }
}
