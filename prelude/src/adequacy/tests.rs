//! Closed forms, identities and refusals. Values by other programs are in the workspace's
//! `tests/tests/references`.

use nalgebra::{DMatrix, dmatrix};
use rand_distr::{Distribution, StandardNormal};
use rand_xoshiro::rand_core::SeedableRng;

use super::{adequacy, multivariate_normality};
use crate::compare::{assert_all_relative, assert_relative, assert_zero};
use crate::error::Error;
use crate::exhibit::Exhibit;
use crate::random::Generator;
use crate::table::DataMatrix;

fn noise(n: usize, p: usize, seed: u64) -> DMatrix<f64> {
    let mut generator = Generator::seed_from_u64(seed);
    DMatrix::from_fn(n, p, |_, _| StandardNormal.sample(&mut generator))
}

fn named(values: DMatrix<f64>) -> DataMatrix {
    DataMatrix::from_unnamed(values).unwrap()
}

/// Rows whose correlations are exactly r: columns of a full factorial of signs, mixed.
fn equicorrelated(r: f64) -> DataMatrix {
    let signs = DMatrix::from_fn(16, 4, |i, j| if i >> j & 1 == 0 { -1.0 } else { 1.0 });
    let target = DMatrix::from_fn(4, 4, |i, j| if i == j { 1.0 } else { r });
    named(signs * target.cholesky().unwrap().unpack().transpose())
}

#[test]
fn equal_correlations_have_closed_forms() {
    // Four variables with correlation r: |R| = (1 − r)³ (1 + 3r), all partial correlations are
    // r / (1 + 2r), roots 1 + 3r and 1 − r.
    for r in [0.1, 0.5, 0.9] {
        let found = adequacy(&equicorrelated(r)).unwrap();
        let partial = r / (1.0 + 2.0 * r);
        let measure = r * r / (r * r + partial * partial);
        assert_relative(found.overall(), measure, 1e-12, "overall");
        assert_all_relative(found.by_variable().as_slice(), &[measure; 4], 1e-12, "each");
        let values = found.partial_correlations().values();
        assert_relative(values[(2, 1)], partial, 1e-12, "partial");
        let determinant: f64 = (1.0_f64 - r).powi(3) * (1.0 + 3.0 * r);
        assert_relative(found.determinant(), determinant, 1e-12, "determinant");
        assert_relative(found.condition_number(), (1.0 + 3.0 * r) / (1.0 - r), 1e-12, "condition");
        let statistic = -(15.0 - 13.0 / 6.0) * determinant.ln();
        assert_relative(found.sphericity().statistic, statistic, 1e-12, "statistic");
        assert_eq!(found.sphericity().freedom, 6.0);
    }
}

#[test]
fn a_full_factorial_has_known_skewness_and_kurtosis() {
    // Signs are symmetric, and every row has squared distance p: b₁ = 0 and b₂ = p².
    let signs = DMatrix::from_fn(16, 4, |i, j| if i >> j & 1 == 0 { -1.0 } else { 1.0 });
    let found = multivariate_normality(&named(signs)).unwrap();
    assert_zero(found.skewness().skewness, 1e-12, "skewness");
    assert_relative(found.kurtosis().kurtosis, 16.0, 1e-12, "kurtosis");
    let expected = (16.0 - 24.0) / (8.0 * 24.0 / 16.0_f64).sqrt();
    assert_relative(found.kurtosis().statistic, expected, 1e-12, "z");
}

#[test]
fn one_variable_has_the_moments_of_one_variable() {
    let x = [2.0, 7.0, 1.0, 8.0, 2.0, 8.0, 1.0, 8.0, 2.0, 8.0];
    let found = multivariate_normality(&named(DMatrix::from_column_slice(10, 1, &x))).unwrap();
    let mean = x.iter().sum::<f64>() / 10.0;
    let moment = |power| x.iter().map(|x| (x - mean).powi(power)).sum::<f64>() / 10.0;
    let squared_skewness = moment(3).powi(2) / moment(2).powi(3);
    assert_relative(found.skewness().skewness, squared_skewness, 1e-12, "b1");
    assert_relative(found.kurtosis().kurtosis, moment(4) / moment(2).powi(2), 1e-12, "b2");
}

#[test]
fn formulas_coded_naively_give_the_same() {
    let x = noise(25, 3, 5).map(|value| value + 0.3 * value * value);
    let found = multivariate_normality(&named(x.clone())).unwrap();
    let mean = x.row_mean();
    let centred = DMatrix::from_fn(25, 3, |i, j| x[(i, j)] - mean[j]);
    let inverse = (centred.transpose() * &centred / 25.0).try_inverse().unwrap();
    let g = &centred * inverse * centred.transpose();
    let b1 = g.map(|g| g.powi(3)).sum() / 625.0;
    assert_relative(found.skewness().skewness, b1, 1e-11, "b1");
    // b₁ is also the sum of squared third moments of uncorrelated rows.
    let b = found.henze_zirkler().smoothing;
    let mut sum = 0.0;
    for i in 0..25 {
        for j in 0..25 {
            let d: f64 = g[(i, i)] + g[(j, j)] - 2.0 * g[(i, j)];
            sum += (-0.5 * b * b * d).exp() / 625.0;
        }
        sum -= 2.0 / 25.0
            * (1.0 + b * b).powf(-1.5)
            * (-b * b * g[(i, i)] / (2.0 * (1.0 + b * b))).exp();
    }
    sum += (1.0 + 2.0 * b * b).powf(-1.5);
    assert_relative(found.henze_zirkler().statistic, 25.0 * sum, 1e-10, "T");
}

#[test]
fn units_order_and_mixtures_do_not_matter() {
    let x = noise(40, 3, 2).map(|value| value.exp());
    let base = adequacy(&named(x.clone())).unwrap();
    let mixing = dmatrix![2.0, 0.5, -1.0; 0.0, 30.0, 1.0; 0.3, 0.0, 0.004];
    let mixed = multivariate_normality(&named(&x * mixing)).unwrap();
    let plain = base.normality();
    assert_relative(mixed.skewness().statistic, plain.skewness().statistic, 1e-8, "skewness");
    assert_relative(mixed.kurtosis().statistic, plain.kurtosis().statistic, 1e-8, "kurtosis");
    let statistic = |found: &super::MultivariateNormality| found.henze_zirkler().statistic;
    assert_relative(statistic(&mixed), statistic(plain), 1e-8, "Henze–Zirkler");
    let rescaled =
        DMatrix::from_fn(40, 3, |i, j| 1e3 + (j as f64 + 0.1) * x[((i * 7) % 40, 2 - j)]);
    let rescaled = adequacy(&named(rescaled)).unwrap();
    assert_relative(rescaled.overall(), base.overall(), 1e-9, "units and order");
    assert_relative(rescaled.by_variable()[0], base.by_variable()[2], 1e-9, "order");
}

/// Under normality p-values are uniform. 400 tables of 150 rows; a share of 0.05 has a standard
/// error of 0.011, and the approximations themselves are allowed 0.02.
#[test]
fn tests_of_normality_keep_their_level() {
    let mut refused = [0; 4];
    for table in 0..400 {
        let found = adequacy(&named(noise(150, 3, 900 + table))).unwrap();
        let normality = found.normality();
        let p_values = [
            found.sphericity().p_value,
            normality.skewness().corrected_p_value,
            normality.kurtosis().p_value,
            normality.henze_zirkler().p_value,
        ];
        for (count, p) in refused.iter_mut().zip(p_values) {
            *count += usize::from(p < 0.05);
        }
    }
    for count in refused {
        assert_zero(f64::from(count as u32) / 400.0 - 0.05, 0.045, "level");
    }
}

#[test]
fn what_cannot_be_judged_is_refused() {
    let refused = |values| adequacy(&named(values)).unwrap_err();
    assert!(matches!(refused(noise(9, 1, 1)), Error::TooFewColumns { needed: 2, .. }));
    assert!(matches!(refused(noise(5, 4, 1)), Error::TooFewRows { needed: 6, found: 5, .. }));
    let mut singular = noise(20, 4, 1);
    let sum = singular.column(0) + singular.column(1);
    singular.set_column(3, &sum);
    let error = refused(singular.clone());
    assert!(matches!(error, Error::SingularScatter { rank: 3, order: 4, .. }));
    assert!(error.to_string().contains("rank 3"), "{error}");
    let error = multivariate_normality(&named(singular)).unwrap_err();
    assert!(matches!(error, Error::SingularScatter { .. }));
    let mut constant = noise(9, 3, 1);
    constant.column_mut(2).fill(4.0);
    assert!(matches!(refused(constant), Error::ConstantColumns { .. }));
    let weighted = named(noise(12, 3, 1)).with_weights((1..=12).map(f64::from)).unwrap();
    assert!(matches!(adequacy(&weighted), Err(Error::WeightsNotCovered { .. })));
    // Equal weights say nothing.
    let equal = named(noise(12, 3, 1)).with_weights([2.0; 12]).unwrap();
    assert!(adequacy(&equal).is_ok());
}

#[test]
fn exhibits_say_what_was_found() {
    let shown = adequacy(&equicorrelated(0.5)).unwrap().exhibit();
    let text = shown.text("text/plain").unwrap();
    for part in ["0.800 together", "no variable below 0.5", "Bartlett 1951", "not safety limits"] {
        assert!(text.contains(part), "{part} in {text}");
    }
}
