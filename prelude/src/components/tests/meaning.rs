//! What components carry, who has part in them, and what took no part.

use nalgebra::{DMatrix, DVector, dmatrix};

use super::weights::weighted_and_repeated;
use super::{BOTH, correlated, noise};
use crate::compare::{assert_all_relative, assert_matrix, assert_relative, assert_zero};
use crate::components::{
    ComponentOptions, PrincipalComponents, Scaling, principal_components, principal_components_with,
};
use crate::error::Error;
use crate::exhibit::Exhibit;
use crate::table::DataMatrix;

fn fitted(n: usize, p: usize, scaling: Scaling, seed: u64) -> PrincipalComponents {
    let x = DataMatrix::from_unnamed(correlated(n, p, seed)).unwrap();
    principal_components(&x, scaling).unwrap()
}

#[test]
fn communalities_are_shares_of_the_variables_variance() {
    for scaling in BOTH {
        let pca = fitted(40, 5, scaling, 6);
        // The variance of what two components reconstruct of a variable, over that of the variable.
        let kept = pca.reconstruct(2).unwrap();
        let expected: Vec<f64> = (0..5)
            .map(|j| kept.values().column(j).variance() / pca.data().values().column(j).variance())
            .collect();
        let two = pca.communalities(2).unwrap();
        assert_all_relative(two.values().as_slice(), &expected, 1e-10, "communalities");
        assert_all_relative(
            pca.communalities(5).unwrap().values().as_slice(),
            &[1.0; 5],
            1e-12,
            "all of it",
        );
        assert_eq!(two.of("V2"), Some(two.values()[1]));
        assert_eq!(two.of("V6"), None);
        assert_relative(two.left_out()[0], 1.0 - expected[0], 1e-10, "left out");
        if scaling == Scaling::Correlation {
            let sum = pca.variances().rows(0, 2).sum();
            assert_relative(two.values().sum(), sum, 1e-12, "sum of the kept variances");
        }
        for asked in [0, 6] {
            assert!(matches!(
                pca.communalities(asked),
                Err(Error::ComponentOutOfRange { available: 5, .. })
            ));
        }
    }
}

#[test]
fn contributions_sum_to_one_and_squared_cosines_too() {
    let (weighted, _) = weighted_and_repeated(30, 5, 2);
    let plain = DataMatrix::from_unnamed(correlated(30, 5, 2)).unwrap();
    for x in [weighted, plain] {
        for scaling in BOTH {
            let pca = principal_components(&x, scaling).unwrap();
            for contributions in [pca.variable_contributions(), pca.row_contributions()] {
                for k in 0..5 {
                    assert_relative(contributions.column(k).sum(), 1.0, 1e-12, "contributions");
                }
                assert!(contributions.values().iter().all(|share| *share >= 0.0));
            }
            let cosines = pca.squared_cosines();
            for row in cosines.values().row_iter() {
                assert_relative(row.sum(), 1.0, 1e-12, "squared cosines");
            }
            // Those of fewer components are the same numbers, with distances taken from the data.
            let two = ComponentOptions::new(scaling).keep(2);
            let two = principal_components_with(&x, two).unwrap();
            let expected = cosines.columns(0, 2).into_owned();
            assert_matrix(two.squared_cosines().values(), &expected, 1e-12, "of two components");
        }
    }
}

#[test]
fn a_row_at_the_mean_points_nowhere() {
    let x = dmatrix![1.1, 5.0; 2.2, 3.0; 3.3, 4.0];
    let mean = x.row_mean();
    let x = x.insert_row(3, 0.0);
    let x = DMatrix::from_fn(4, 2, |i, j| if i < 3 { x[(i, j)] } else { mean[j] });
    let pca = principal_components(&DataMatrix::from_unnamed(x).unwrap(), Scaling::Covariance);
    let cosines = pca.unwrap().squared_cosines();
    assert!(cosines.row(3).iter().all(|value| value.is_nan()));
    assert_relative(cosines.row(0).sum(), 1.0, 1e-12, "another row");
}

#[test]
fn supplementary_columns_correlate_as_the_naive_formula_says() {
    let (weighted, repeated) = weighted_and_repeated(30, 5, 2);
    let other = noise(30, 3, 77).add_scalar(40.0);
    let columns = |x: &DataMatrix, values: DMatrix<f64>| {
        let names = ["hue", "pitch", "mass"];
        DataMatrix::from_values(values, names, x.labels().iter().cloned()).unwrap()
    };
    for scaling in BOTH {
        // Weights act as repeated rows do; those are compared with the plain formula.
        let rows: Vec<usize> = repeated
            .values()
            .row_iter()
            .map(|row| weighted.values().row_iter().position(|other| other == row).unwrap())
            .collect();
        let pca = principal_components(&repeated, scaling).unwrap();
        let y = other.select_rows(&rows);
        let seen = pca.supplementary_columns(&columns(&repeated, y.clone())).unwrap();
        let n = y.nrows() as f64;
        let expected = DMatrix::from_fn(3, 5, |j, k| {
            let (y, z) = (y.column(j), pca.scores().column(k).into_owned());
            let (centred, z) = (y.add_scalar(-y.mean()), z.add_scalar(-z.mean()));
            centred.dot(&z) / (n - 1.0) / (centred.norm_squared() * z.norm_squared()).sqrt()
                * (n - 1.0)
        });
        assert_matrix(seen.correlations(), &expected, 1e-11, "correlations");
        let by_weight = principal_components(&weighted, scaling).unwrap();
        let mut by_weight =
            by_weight.supplementary_columns(&columns(&weighted, other.clone())).unwrap();
        let explained = by_weight.explained(5).unwrap();
        assert_all_relative(
            explained.as_slice(),
            seen.explained(5).unwrap().as_slice(),
            1e-9,
            "explained",
        );
        by_weight = by_weight.clone();
        let sizes = by_weight.correlations().values().abs();
        assert_matrix(&sizes, &seen.correlations().values().abs(), 1e-9, "of weighted rows");
    }
    // The variables themselves have the correlations that the structure holds.
    let pca = fitted(30, 4, Scaling::Covariance, 3);
    let itself = pca.supplementary_columns(pca.data()).unwrap();
    assert_matrix(itself.correlations(), pca.structure().values(), 1e-11, "structure");
    assert_all_relative(itself.explained(4).unwrap().as_slice(), &[1.0; 4], 1e-11, "all of it");
}

#[test]
fn supplementary_columns_need_the_same_rows_in_order() {
    let pca = fitted(10, 3, Scaling::Correlation, 3);
    let turned: Vec<&str> = pca.labels().iter().rev().map(String::as_str).collect();
    let x = pca.data().select_rows(&turned).unwrap();
    match pca.supplementary_columns(&x).unwrap_err() {
        Error::RowsDiffer { missing, extra } => assert!(missing.is_empty() && extra.is_empty()),
        other => panic!("{other}"),
    }
    let x = pca.data().rows_where(|label| label != "4").unwrap();
    match pca.supplementary_columns(&x).unwrap_err() {
        Error::RowsDiffer { missing, extra } => {
            assert_eq!((missing, extra), (vec!["4".to_owned()], vec![]));
        }
        other => panic!("{other}"),
    }
    let constant = DMatrix::from_element(10, 1, 4.0);
    let constant = DataMatrix::from_unnamed(constant).unwrap();
    assert!(matches!(pca.supplementary_columns(&constant), Err(Error::NoVariation { .. })));
}

#[test]
fn test_values_of_groups_are_those_of_drawing_without_putting_back() {
    // All 10 choose 4 groups of four rows: the mean over them of a group's sum is zero and the
    // mean of its square is the variance that the test value divides by.
    let (weighted, _) = weighted_and_repeated(10, 3, 4);
    let plain = DataMatrix::from_unnamed(correlated(10, 3, 4)).unwrap();
    for x in [plain, weighted] {
        let pca = principal_components(&x, Scaling::Correlation).unwrap();
        let weight = |row: usize| pca.row_weights().map_or(1.0, |weights| weights[row]);
        let product = |row: usize| weight(row) * pca.scores()[(row, 0)];
        let (mut squares, mut count) = (0.0, 0.0_f64);
        for chosen in (0..1024_u32).filter(|chosen| chosen.count_ones() == 4) {
            let inside = (0..10).filter(|row| chosen & (1 << row) != 0);
            squares += inside.map(product).sum::<f64>().powi(2);
            count += 1.0;
        }
        let groups = (0..10).map(|row| if row < 4 { "first" } else { "rest" });
        let groups = pca.supplementary_groups(groups).unwrap();
        let sum: f64 = (0..4).map(product).sum();
        let expected = sum / (squares / count).sqrt();
        assert_relative(groups.test_values()[(0, 0)], expected, 1e-10, "test value");
        assert_relative(groups.test_values()[(1, 0)], -expected, 1e-10, "of the rest");
        let weights: f64 = (0..4).map(weight).sum();
        assert_relative(groups.means()[(0, 0)], sum / weights, 1e-12, "mean");
        assert_eq!(groups.counts(), [4, 6]);
    }
}

#[test]
fn groups_of_one_and_of_all_have_what_can_be_had() {
    let pca = fitted(10, 3, Scaling::Covariance, 3);
    let names = (0..10).map(|row| if row == 3 { "odd" } else { "even" });
    let groups = pca.supplementary_groups(names).unwrap();
    assert_eq!(
        (groups.names(), groups.counts()),
        (&["even".into(), "odd".into()][..], &[9, 1][..])
    );
    assert!(groups.standard_errors().row(1).iter().all(|error| error.is_nan()));
    assert!(groups.test_values().values().iter().all(|value| value.is_finite()));
    let even: Vec<f64> =
        (0..10).filter(|row| *row != 3).map(|row| pca.scores()[(row, 0)]).collect();
    let even = DVector::from_vec(even);
    let spread = (even.add_scalar(-even.mean()).norm_squared() / 8.0 / 9.0).sqrt();
    assert_relative(groups.standard_errors()[(0, 0)], spread, 1e-12, "standard error");
    let all = pca.supplementary_groups(["all"; 10]).unwrap();
    assert_zero(all.means().values().amax(), 1e-12, "the mean of all");
    assert!(all.test_values().values().iter().all(|value| value.is_nan()));
    assert!(matches!(
        pca.supplementary_groups(["short"]),
        Err(Error::ShapeMismatch { expected: 10, found: 1, .. })
    ));
    let text = groups.exhibit().text("text/plain").unwrap().to_owned();
    assert!(text.contains("Test values") && text.contains("odd"), "{text}");
    let text = pca.communalities(1).unwrap().exhibit().text("text/plain").unwrap().to_owned();
    assert!(text.contains("Communalities with 1 component: least of"), "{text}");
}
