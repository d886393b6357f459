//! Weighted rows, contributions, communalities and supplementary elements of open data, by other
//! programs.

use nalgebra::DMatrix;
use semiaxis::components::{PrincipalComponents, Scaling, principal_components};
use semiaxis::table::DataMatrix;
use semiaxis_tests::compare::{
    assert_all_relative, assert_columns_up_to_sign, assert_matrix, assert_relative,
};
use serde_json::Value;

use crate::files::{cases, data, load, matrix, numbers, scaling};

fn open_data(name: &str) -> DataMatrix {
    let file = load("components.json");
    let case = cases(&file).find(|case| case["name"] == name).expect("a data set of the file");
    data(case)
}

/// The covariance matrix that an analysis decomposes, from its components.
fn covariance(pca: &PrincipalComponents) -> DMatrix<f64> {
    let loadings = pca.loadings().values();
    loadings * DMatrix::from_diagonal(pca.variances()) * loadings.transpose()
}

/// Weights as importances (numpy's `aweights`, unbiased) and as repetitions (`fweights`), and
/// scikit-learn on repeated rows. Each differs from ours by a factor that is known.
#[test]
fn weighted_rows_by_numpy_and_by_repetition() {
    let file = load("weighted.json");
    let weights = numbers(&file["weights"]);
    let x = open_data("iris");
    let n = x.n_rows() as f64;
    let sum: f64 = weights.iter().sum();
    let shares_squared: f64 = weights.iter().map(|weight| (weight / sum).powi(2)).sum();
    let x = x.with_weights(weights.iter().map(|weight| 0.01 * weight)).unwrap();
    let pca = principal_components(&x, Scaling::Covariance).unwrap();
    assert_all_relative(pca.mean().as_slice(), &numbers(&file["mean"]), 1e-13, "mean");
    let by_importance = covariance(&pca) * ((n - 1.0) / n / (1.0 - shares_squared));
    assert_matrix(&by_importance, &matrix(&file["covariance_aweights"]), 1e-12, "aweights");
    let repetition = (n - 1.0) / n / (1.0 - 1.0 / sum);
    let by_repetition = covariance(&pca) * repetition;
    assert_matrix(&by_repetition, &matrix(&file["covariance_fweights"]), 1e-12, "fweights");

    assert_eq!(numbers(&file["weights"]).iter().sum::<f64>(), file["n_repeated"].as_f64().unwrap());
    for case in file["by_repetition"].as_array().unwrap() {
        let pca = principal_components(&x, scaling(case)).unwrap();
        let what = format!("scikit-learn on repeated rows, {}", scaling(case));
        let factor = if scaling(case) == Scaling::Covariance { repetition } else { 1.0 };
        let variances = pca.variances() * factor;
        assert_all_relative(variances.as_slice(), &numbers(&case["variances"]), 1e-11, &what);
        let shares = pca.proportions();
        assert_all_relative(shares.as_slice(), &numbers(&case["proportions"]), 1e-11, &what);
        assert_columns_up_to_sign(pca.loadings(), &matrix(&case["loadings"]), 1e-11, &what);
    }
}

/// The active columns of the wine data, the supplementary ones, and the growers.
fn wine(case: &Value) -> (DataMatrix, DataMatrix, Vec<&'static str>) {
    let x = open_data("wine");
    let x = match &case["weights"] {
        Value::Null => x,
        weights => x.with_weights(numbers(weights)).unwrap(),
    };
    let (active, other) = x.variables().split_at(11);
    let growers = [("first", 59), ("second", 71), ("third", 48)];
    let growers =
        growers.iter().flat_map(|(grower, count)| std::iter::repeat_n(*grower, *count)).collect();
    (x.select(active).unwrap(), x.select(other).unwrap(), growers)
}

/// R: cov.wt with eigen, FactoMineR, ade4, psych; with and without weights.
#[test]
fn contributions_cosines_and_supplementary_elements_by_the_statistics_language() {
    let file = load("meaning.json");
    let mut n_cases = 0;
    for case in cases(&file) {
        let (x, other, growers) = wine(case);
        let n = x.n_rows() as f64;
        let pca = principal_components(&x, scaling(case)).unwrap();
        let what = format!("{}, weights {}", scaling(case), !case["weights"].is_null());
        // Fifteen digits were written.
        let close = 1e-10;
        assert_all_relative(pca.mean().as_slice(), &numbers(&case["mean"]), 1e-13, &what);
        // FactoMineR and ade4 divide by n, as does cov.wt for method "ML".
        let larger = if scaling(case) == Scaling::Covariance { n / (n - 1.0) } else { 1.0 };
        let roots: Vec<f64> =
            numbers(&case["roots_divisor_n"]).iter().map(|root| root * larger).collect();
        assert_all_relative(pca.variances().as_slice(), &roots, close, &what);
        assert_columns_up_to_sign(pca.loadings(), &matrix(&case["loadings"]), close, &what);
        if scaling(case) == Scaling::Covariance {
            let divided_by_n = matrix(&case["covariance_divisor_n"]) * larger;
            assert_matrix(&covariance(&pca), &divided_by_n, 1e-11, &what);
            let shares = match pca.row_weights() {
                Some(weights) => weights.iter().map(|weight| (weight / n).powi(2)).sum::<f64>(),
                None => 1.0 / n,
            };
            let unbiased = matrix(&case["covariance_unbiased"]) * (larger * (1.0 - shares));
            assert_matrix(&covariance(&pca), &unbiased, 1e-11, &what);
        }

        let contributions = pca.variable_contributions();
        assert_matrix(&contributions, &matrix(&case["variable_contributions"]), close, &what);
        let structure = pca.structure().values().map(|correlation| correlation.powi(2));
        assert_matrix(&structure, &matrix(&case["variable_cosines"]), close, &what);
        for by in ["row_contributions", "row_contributions_ade4"] {
            let expected = matrix(&case[by]);
            let seen = pca.row_contributions().rows(0, expected.nrows()).into_owned();
            assert_matrix(&seen, &expected, close, &format!("{what}, {by}"));
        }
        let expected = matrix(&case["row_cosines"]);
        let seen = pca.squared_cosines().rows(0, expected.nrows()).into_owned();
        assert_matrix(&seen, &expected, close, &what);

        let columns = pca.supplementary_columns(&other).unwrap();
        let expected = matrix(&case["column_correlations"]);
        assert_columns_up_to_sign(columns.correlations(), &expected, close, &what);
        let groups = pca.supplementary_groups(growers).unwrap();
        assert_eq!((groups.names().len(), groups.counts()), (3, &[59, 71, 48][..]));
        // Scores brought to unit variance by the other divisor are larger.
        let smaller =
            if scaling(case) == Scaling::Correlation { ((n - 1.0) / n).sqrt() } else { 1.0 };
        let means = matrix(&case["group_means_divisor_n"]) * smaller;
        assert_columns_up_to_sign(groups.means(), &means, close, &what);
        if !case["group_test_values"].is_null() {
            let expected = matrix(&case["group_test_values"]);
            assert_columns_up_to_sign(groups.test_values(), &expected, close, &what);
        }
        if !case["communalities_of_three"].is_null() {
            let expected = numbers(&case["communalities_of_three"]);
            let three = pca.communalities(3).unwrap();
            assert_all_relative(three.values().as_slice(), &expected, close, &what);
            let sum: f64 = expected.iter().sum();
            assert_relative(three.values().sum(), sum, close, &what);
        }
        n_cases += 1;
    }
    assert_eq!(n_cases, 4);
}
