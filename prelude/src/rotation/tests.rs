//! Properties, closed forms and faults. Values from outside programs are in the workspace's
//! `tests/tests/references`.

use nalgebra::{DMatrix, dmatrix};
use proptest::prelude::*;
use rand_distr::{Distribution, StandardNormal};
use rand_xoshiro::rand_core::SeedableRng;

use super::{Rotated, Rotation, RotationOptions, rotate_with};
use crate::compare::{assert_all_relative, assert_matrix, assert_relative, assert_zero};
use crate::components::{Scaling, principal_components};
use crate::error::Error;
use crate::exhibit::Exhibit;
use crate::random::Generator;
use crate::table::{DataMatrix, NamedMatrix};

const ORTHOGONAL: [Rotation; 3] = [Rotation::Varimax, Rotation::Quartimax, Rotation::Equamax];

fn all() -> [Rotation; 5] {
    let [a, b, c] = ORTHOGONAL;
    [a, b, c, Rotation::promax(), Rotation::oblimin()]
}

fn noise(n: usize, p: usize, seed: u64) -> DMatrix<f64> {
    let mut generator = Generator::seed_from_u64(seed);
    DMatrix::from_fn(n, p, |_, _| StandardNormal.sample(&mut generator))
}

fn named(values: DMatrix<f64>) -> NamedMatrix {
    let rows: Vec<String> = (1..=values.nrows()).map(|j| format!("V{j}")).collect();
    let columns: Vec<String> = (1..=values.ncols()).map(|k| format!("PC{k}")).collect();
    NamedMatrix::new(values, rows, columns).unwrap()
}

fn turned(values: DMatrix<f64>, rotation: Rotation) -> Rotated {
    rotate_with(&named(values), rotation, RotationOptions::new().seed(1)).unwrap()
}

fn fault(values: DMatrix<f64>, rotation: Rotation) -> Error {
    rotate_with(&named(values), rotation, RotationOptions::new().seed(1)).unwrap_err()
}

/// Groups of variables with one large loading each, and small ones elsewhere.
fn grouped(p: usize, k: usize, seed: u64) -> DMatrix<f64> {
    let small = noise(p, k, seed) * 0.1;
    let simple = DMatrix::from_fn(p, k, |j, l| small[(j, l)] + if j % k == l { 0.8 } else { 0.0 });
    simple * noise(k, k, seed + 1).qr().q()
}

/// The documented criterion of the orthomax family, written out.
fn naive_orthomax(loadings: &DMatrix<f64>, weight: f64, kaiser: bool) -> f64 {
    let (p, k) = loadings.shape();
    let mut sum = 0.0;
    for column in 0..k {
        let square = |row: usize| {
            let length = if kaiser { loadings.row(row).norm() } else { 1.0 };
            (loadings[(row, column)] / length).powi(2)
        };
        let second: f64 = (0..p).map(square).sum();
        let fourth: f64 = (0..p).map(|row| square(row).powi(2)).sum();
        sum += fourth - weight / p as f64 * second.powi(2);
    }
    sum
}

#[test]
fn two_components_have_kaisers_angle() {
    // H. F. Kaiser (1958), equation for the angle of a pair: with u = x² − y², v = 2xy,
    // tan 4φ = [2 Σuv − 2 Σu Σv / p] / [Σ(u² − v²) − ((Σu)² − (Σv)²) / p]. Here by hand for the
    // rows (1, 0) and (3/5, 4/5), lengths one: u = 1, −7/25; v = 0, 24/25; p = 2.
    // 2Σuv = −336/625, 2ΣuΣv/p = (18/25)(24/25) = 432/625: n = −768/625.
    // Σ(u² − v²) = 1 + (49 − 576)/625 = 98/625, ((Σu)² − (Σv)²)/p = (324 − 576)/1250 = −126/625:
    // d = 224/625. φ = atan2(−768, 224) / 4.
    let result = turned(dmatrix![1.0, 0.0; 0.6, 0.8], Rotation::Varimax);
    let angle = (-768.0_f64).atan2(224.0) / 4.0;
    let (sine, cosine) = angle.sin_cos();
    let x = [cosine, 0.6 * cosine + 0.8 * sine];
    let y = [-sine, 0.8 * cosine - 0.6 * sine];
    let squares = |column: &[f64]| -> Vec<f64> {
        let mut squares: Vec<f64> = column.iter().map(|value| value * value).collect();
        squares.sort_by(f64::total_cmp);
        squares
    };
    let mut expected = [squares(&x), squares(&y)].concat();
    expected.sort_by(f64::total_cmp);
    assert_all_relative(&squares(result.loadings().as_slice()), &expected, 1e-9, "squares");
}

#[test]
fn criteria_are_the_documented_formulas_and_do_not_fall() {
    let loadings = grouped(9, 3, 4);
    for kaiser in [true, false] {
        let options = RotationOptions::new().seed(3).kaiser_normalisation(kaiser);
        for (rotation, weight) in ORTHOGONAL.into_iter().zip([1.0, 0.0, 1.5]) {
            let result = rotate_with(&named(loadings.clone()), rotation, options).unwrap();
            let reached = naive_orthomax(result.loadings(), weight, kaiser);
            assert_relative(result.criterion(), reached, 1e-12, "criterion reached");
            let start = naive_orthomax(&loadings, weight, kaiser);
            assert_relative(result.start_criterion(), start, 1e-12, "criterion at the start");
            assert!(result.criterion() >= result.start_criterion());
            // No turn in any plane gains anything.
            for first in 0..3 {
                for second in first + 1..3 {
                    for angle in [-0.7, -0.1, -1e-3, 1e-3, 0.1, 0.7] {
                        let (sine, cosine) = f64::sin_cos(angle);
                        let mut other = result.loadings().values().clone();
                        for mut row in other.row_iter_mut() {
                            let (x, y) = (row[first], row[second]);
                            row[first] = x * cosine + y * sine;
                            row[second] = y * cosine - x * sine;
                        }
                        assert!(naive_orthomax(&other, weight, kaiser) < reached);
                    }
                }
            }
        }
        let gamma = -0.5;
        let result =
            rotate_with(&named(loadings.clone()), Rotation::Oblimin { gamma }, options).unwrap();
        let mut expected = 0.0;
        for first in 0..3 {
            for second in first + 1..3 {
                let square = |row: usize, column: usize| {
                    let length = if kaiser { loadings.row(row).norm() } else { 1.0 };
                    (result.loadings()[(row, column)] / length).powi(2)
                };
                let total = |column: usize| (0..9).map(|row| square(row, column)).sum::<f64>();
                expected += (0..9).map(|row| square(row, first) * square(row, second)).sum::<f64>()
                    - gamma / 9.0 * total(first) * total(second);
            }
        }
        assert_relative(result.criterion(), expected, 1e-11, "oblimin");
        assert!(result.criterion() <= result.start_criterion());
    }
}

#[test]
fn perfect_simple_structure_is_recovered() {
    // Every variable on one component alone: zero is the least that oblimin can reach, and no
    // rotation can be simpler by the orthogonal criteria.
    let simple =
        DMatrix::from_fn(12, 3, |j, k| if j / 4 == k { 0.5 + 0.04 * j as f64 } else { 0.0 });
    let away = &simple * noise(3, 3, 8).qr().q();
    for rotation in all() {
        let result = turned(away.clone(), rotation);
        // Descending variance: the later groups have the larger loadings.
        let expected = simple.select_columns(&[2, 1, 0]);
        // Away from zero by what the tolerance leaves; the fourth root of nothing for oblimin,
        // whose criterion is flat there to second order only.
        assert_matrix(result.loadings(), &expected, 1e-8, &rotation.to_string());
        assert_matrix(
            result.factor_correlations(),
            &DMatrix::identity(3, 3),
            1e-8,
            &rotation.to_string(),
        );
    }
    // Components that do correlate come back with their correlation.
    let phi = dmatrix![1.0, 0.4, 0.2; 0.4, 1.0, 0.3; 0.2, 0.3, 1.0];
    let root = phi.clone().cholesky().unwrap().l();
    let result = turned(&simple * root * noise(3, 3, 9).qr().q(), Rotation::oblimin());
    assert_matrix(result.loadings(), &simple.select_columns(&[2, 1, 0]), 1e-7, "oblique pattern");
    assert_relative(result.factor_correlations()[(0, 1)], 0.3, 1e-7, "correlation");
    assert_relative(result.factor_correlations()[(1, 2)], 0.4, 1e-7, "correlation");
}

#[test]
fn promax_of_power_one_is_varimax() {
    let loadings = grouped(10, 3, 12);
    let varimax = turned(loadings.clone(), Rotation::Varimax);
    let promax = turned(loadings.clone(), Rotation::Promax { power: 1.0 });
    assert_matrix(promax.loadings(), varimax.loadings(), 1e-10, "pattern");
    assert_matrix(promax.factor_correlations(), &DMatrix::identity(3, 3), 1e-10, "correlations");
    let oblique = turned(loadings, Rotation::promax());
    assert!(oblique.factor_correlations()[(0, 1)].abs() > 1e-3);
}

#[test]
fn a_smaller_gamma_lets_components_correlate_less() {
    // Jennrich and Sampson (1966) describe γ as what controls how oblique the result is.
    let phi = dmatrix![1.0, 0.5, 0.4; 0.5, 1.0, 0.5; 0.4, 0.5, 1.0];
    let loadings = grouped(12, 3, 12) * phi.cholesky().unwrap().l();
    let largest = |gamma: f64| {
        let oblimin = turned(loadings.clone(), Rotation::Oblimin { gamma });
        (oblimin.factor_correlations().values() - DMatrix::identity(3, 3)).amax()
    };
    let (positive, usual, negative) = (largest(0.2), largest(0.0), largest(-2.0));
    assert!(positive > usual && usual > negative, "{positive}, {usual}, {negative}");
}

#[test]
fn components_that_fall_together_are_an_error() {
    // Without structure, and with components encouraged to correlate, nothing holds them apart.
    match fault(noise(30, 4, 0), Rotation::Oblimin { gamma: 0.8 }) {
        Error::RotationCollapsed { n_starts: 20, .. } => {}
        other => panic!("{other}"),
    }
}

#[test]
fn scores_fit_the_loadings() {
    let x = noise(40, 2, 5) * DMatrix::from_fn(2, 6, |k, j| ((j + 3 * k) as f64).cos())
        + noise(40, 6, 6) * 0.3;
    let x = DMatrix::from_fn(40, 6, |i, j| x[(i, j)] * (1.0 + j as f64));
    let data = DataMatrix::from_unnamed(x.clone()).unwrap();
    for scaling in [Scaling::Correlation, Scaling::Covariance] {
        let pca = principal_components(&data, scaling).unwrap();
        for rotation in all() {
            let what = format!("{rotation}, {scaling}");
            let rotated = pca.rotated_with(3, rotation, RotationOptions::new().seed(2)).unwrap();
            let scores = rotated.scores().values();
            let correlations = scores.transpose() * scores / 39.0;
            assert_matrix(&correlations, rotated.factor_correlations(), 1e-10, &what);
            let standard = DMatrix::from_fn(40, 6, |i, j| {
                let column = x.column(j);
                (column[i] - column.mean()) / (column.variance() * 40.0 / 39.0).sqrt()
            });
            // Structure: correlations of variables with rotated scores.
            let structure = standard.transpose() * scores / 39.0;
            assert_matrix(rotated.structure(), &structure, 1e-10, &what);
            // Pattern: the rows are made up of scores as three components describe them.
            let described = pca.reconstruct(3).unwrap();
            let made = DMatrix::from_fn(40, 6, |i, j| {
                let column = x.column(j);
                (described.values()[(i, j)] - column.mean())
                    / (column.variance() * 40.0 / 39.0).sqrt()
            });
            let product = scores * rotated.loadings().transpose();
            assert_matrix(&product, &made, 1e-10, &what);
            let share = rotated.proportions().sum();
            assert_relative(share, pca.cumulative()[2], 1e-10, &what);
            let again = rotated.project(&data).unwrap();
            assert_matrix(&again, rotated.scores(), 1e-12, "projected");
        }
    }
}

#[test]
fn bad_input_is_named() {
    let two = grouped(5, 2, 1);
    let one = two.columns(0, 1).into_owned();
    assert!(matches!(
        fault(one, Rotation::Varimax),
        Error::TooFewColumns { needed: 2, found: 1, .. }
    ));
    assert!(matches!(
        fault(noise(2, 3, 1), Rotation::Varimax),
        Error::TooFewRows { needed: 3, found: 2, .. }
    ));
    let mut empty_row = two.clone();
    empty_row.row_mut(3).fill(0.0);
    match fault(empty_row.clone(), Rotation::Varimax) {
        Error::ZeroRows { rows } => assert_eq!(rows, ["V4"]),
        other => panic!("{other}"),
    }
    let options = RotationOptions::new().kaiser_normalisation(false).seed(1);
    let result = rotate_with(&named(empty_row), Rotation::Varimax, options).unwrap();
    assert_zero(result.communalities()[3], 0.0, "nothing to explain");
    let mut hole = two.clone();
    hole[(2, 1)] = f64::NAN;
    match fault(hole, Rotation::oblimin()) {
        Error::NonFinite { column, row: 3, label, .. } => {
            assert_eq!((column.as_str(), label.as_str()), ("PC2", "V3"));
        }
        other => panic!("{other}"),
    }
    let twice = DMatrix::from_fn(5, 2, |j, k| two[(j, 0)] * (1.0 + k as f64));
    for rotation in [Rotation::promax(), Rotation::oblimin()] {
        assert!(matches!(
            fault(twice.clone(), rotation),
            Error::DependentColumns { rank: 1, n_cols: 2, .. }
        ));
    }
    let options = RotationOptions::new().kaiser_normalisation(false).seed(1);
    assert!(matches!(
        rotate_with(&named(DMatrix::zeros(4, 2)), Rotation::Varimax, options),
        Err(Error::DependentColumns { rank: 0, .. })
    ));
    for rotation in [
        Rotation::Promax { power: 0.5 },
        Rotation::Promax { power: f64::NAN },
        Rotation::Oblimin { gamma: 0.9 },
    ] {
        assert!(matches!(fault(two.clone(), rotation), Error::OptionOutOfRange { .. }));
    }
    for options in [
        RotationOptions::new().starts(0),
        RotationOptions::new().tolerance(0.0),
        RotationOptions::new().iterations(0),
    ] {
        let result = rotate_with(&named(two.clone()), Rotation::Varimax, options);
        assert!(matches!(result, Err(Error::OptionOutOfRange { .. })));
    }
}

#[test]
fn running_out_of_iterations_is_said() {
    let options = RotationOptions::new().iterations(1).starts(1).seed(1);
    for rotation in [Rotation::Varimax, Rotation::oblimin()] {
        let result = rotate_with(&named(grouped(9, 3, 4)), rotation, options).unwrap();
        assert!(!result.converged() && result.iterations() == 1);
        assert!(result.exhibit().text("text/plain").unwrap().contains("NOT CONVERGED"));
    }
}

#[test]
fn the_exhibit_says_what_was_done() {
    let result = turned(grouped(6, 2, 4), Rotation::oblimin()).sorted_by_component();
    let text = result.exhibit().text("text/plain").unwrap().to_owned();
    for part in ["direct oblimin", "communality", "Kaiser", "seed 1", "Factor correlations", "0.3"]
    {
        assert!(text.contains(part), "{part} is missing in\n{text}");
    }
    let home = result.home_idx();
    let first_home = (0..6).filter(|row| home[*row] == 0).count();
    let place = |row: usize| text.find(&format!("V{}", row + 1)).unwrap();
    let mut rows: Vec<usize> = (0..6).collect();
    rows.sort_by_key(|row| place(*row));
    assert!(rows[..first_home].iter().all(|row| home[*row] == 0), "sorted by component");
    let orthogonal = turned(grouped(6, 2, 4), Rotation::Varimax).exhibit();
    assert!(!orthogonal.text("text/plain").unwrap().contains("Factor correlations"));
}

#[test]
fn results_do_not_depend_on_the_number_of_threads() {
    let loadings = named(noise(30, 4, 77));
    for rotation in all() {
        let run = |threads: usize| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
            pool.install(|| {
                rotate_with(&loadings, rotation, RotationOptions::new().seed(5)).unwrap()
            })
        };
        assert!(run(1) == run(3), "{rotation}");
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(24))]

    #[test]
    fn what_no_rotation_may_change(p in 4usize..30, k in 2usize..5, seed in 0u64..100_000) {
        prop_assume!(p > 2 * k);
        let loadings = grouped(p, k, seed);
        for rotation in all() {
            let result = turned(loadings.clone(), rotation);
            let what = rotation.to_string();
            prop_assert!(result.converged(), "{}: {} after {}", what, result.gradient(), result.iterations());
            // Communalities.
            let before: Vec<f64> = loadings.row_iter().map(|row| row.norm_squared()).collect();
            assert_all_relative(result.communalities().as_slice(), &before, 1e-9, &what);
            // What the components reproduce.
            let (pattern, phi) = (result.loadings().values(), result.factor_correlations().values());
            let reproduced = pattern * phi * pattern.transpose();
            assert_matrix(&reproduced, &(&loadings * loadings.transpose()), 1e-9, &what);
            // Unit columns of T, perpendicular for the orthogonal ones.
            let turn = result.rotation_matrix().values();
            assert_matrix(&(turn.transpose() * turn), phi, 1e-9, &what);
            for column in 0..k {
                assert_relative(phi[(column, column)], 1.0, 1e-12, &what);
            }
            // Order and sign.
            let variances = result.variances();
            prop_assert!(variances.as_slice().windows(2).all(|pair| pair[0] >= pair[1]));
            for column in pattern.column_iter() {
                prop_assert!(column[column.iamax()] > 0.0 || column.max() >= column.amax() * (1.0 - 1e-7));
            }
        }
    }

    #[test]
    fn neither_row_order_nor_the_axes_given_matter(seed in 0u64..100_000) {
        let loadings = grouped(12, 3, seed);
        let backwards = DMatrix::from_fn(12, 3, |j, k| loadings[(11 - j, k)]);
        let elsewhere = &loadings * noise(3, 3, seed + 7).qr().q();
        for rotation in all() {
            let result = turned(loadings.clone(), rotation);
            let what = rotation.to_string();
            let other = turned(backwards.clone(), rotation);
            assert_relative(other.criterion(), result.criterion(), 1e-8, &what);
            let other = turned(elsewhere.clone(), rotation);
            assert_relative(other.criterion(), result.criterion(), 1e-8, &what);
            assert_matrix(other.loadings(), result.loadings(), 1e-6, &what);
        }
    }
}
