//! Identities, closed forms, coverage and refusals. Other programs' numbers are in the workspace's
//! `tests/tests/references`.

use nalgebra::{DMatrix, DVector};
use rand_distr::{Distribution, StandardNormal};
use rand_xoshiro::rand_core::SeedableRng;

use super::{QRule, Standing, TSquaredRule, distances, distances_of, t_squared_and_q};
use crate::compare::{assert_all_relative, assert_relative, assert_zero};
use crate::components::{
    ComponentOptions, PrincipalComponents, Scaling, principal_components, principal_components_with,
};
use crate::error::Error;
use crate::exhibit::Exhibit;
use crate::random::Generator;
use crate::table::DataMatrix;

fn noise(n: usize, p: usize, seed: u64) -> DMatrix<f64> {
    let mut generator = Generator::seed_from_u64(seed);
    DMatrix::from_fn(n, p, |_, _| StandardNormal.sample(&mut generator))
}

fn table(values: DMatrix<f64>) -> DataMatrix {
    DataMatrix::from_unnamed(values).unwrap()
}

fn fitted(values: DMatrix<f64>, scaling: Scaling) -> PrincipalComponents {
    principal_components(&table(values), scaling).unwrap()
}

/// Rows that follow two components of known spread, with equal noise beyond them.
fn patterned(n: usize, p: usize, seed: u64) -> DMatrix<f64> {
    let (scores, own) = (noise(n, 2, seed), noise(n, p, seed + 1));
    DMatrix::from_fn(n, p, |i, j| {
        let pattern = if j % 2 == 0 { 4.0 * scores[(i, 0)] } else { 2.5 * scores[(i, 1)] };
        pattern + 0.5 * own[(i, j)]
    })
}

#[test]
fn statistics_sum_to_what_they_must() {
    for (n, p) in [(40, 6), (12, 30)] {
        for scaling in [Scaling::Covariance, Scaling::Correlation] {
            let pca = fitted(patterned(n, p, 3), scaling);
            for k in [1, 2, 5] {
                let found = t_squared_and_q(&pca, k).unwrap();
                let freedom = n as f64 - 1.0;
                assert_relative(found.t_squared().sum(), k as f64 * freedom, 1e-10, "T²");
                let left_out = pca.variances().iter().skip(k).sum::<f64>();
                assert_relative(found.q().sum(), freedom * left_out, 1e-10, "Q");
                // The residuals of a reconstruction come by another way.
                let expected = pca.reconstruct(k).unwrap();
                let expected = expected.row_residuals().as_slice();
                assert_all_relative(found.q().as_slice(), expected, 1e-9, "row residuals");
                let distances = distances(&pca, k).unwrap();
                let squares = distances.score_distances().map(|d| d * d);
                assert_all_relative(squares.as_slice(), found.t_squared().as_slice(), 1e-12, "T²");
                let squares = distances.orthogonal_distances().map(|d| d * d);
                assert_all_relative(squares.as_slice(), found.q().as_slice(), 1e-12, "Q");
            }
        }
    }
}

#[test]
fn all_components_give_the_mahalanobis_distance() {
    let x = patterned(50, 4, 9);
    let mean = x.row_mean().transpose();
    let centred = DMatrix::from_fn(50, 4, |i, j| x[(i, j)] - mean[j]);
    let inverse = (centred.tr_mul(&centred) / 49.0).try_inverse().unwrap();
    for scaling in [Scaling::Covariance, Scaling::Correlation] {
        let found = distances(&fitted(x.clone(), scaling), 4).unwrap();
        for row in 0..50 {
            let deviation: DVector<f64> = centred.row(row).transpose();
            let expected = deviation.dot(&(&inverse * &deviation)).sqrt();
            assert_relative(found.score_distances()[row], expected, 1e-9, "distance");
        }
        assert_eq!(found.orthogonal_limit(), None);
        assert_eq!(found.count(Standing::Off) + found.count(Standing::FarOutAndOff), 0);
    }
}

#[test]
fn contributions_sum_to_the_statistic_and_are_not_negative() {
    let mut x = patterned(40, 6, 4);
    x[(7, 3)] += 9.0;
    let pca = fitted(x.clone(), Scaling::Correlation);
    let found = t_squared_and_q(&pca, 2).unwrap();
    for (row, label) in pca.labels().iter().enumerate() {
        let parts = found.contributions(label).unwrap();
        assert_relative(parts.to_t_squared().sum(), found.t_squared()[row], 1e-10, "T²");
        assert_relative(parts.to_q().sum(), found.q()[row], 1e-10, "Q");
        assert!(parts.to_t_squared().min() >= 0.0 && parts.to_q().min() >= 0.0);
        assert_eq!(parts.values().as_slice(), pca.data().row(label).unwrap());
    }
    // The value that was moved leads what is left over, upwards.
    let parts = distances(&pca, 2).unwrap().contributions("8").unwrap();
    assert_eq!(parts.to_q().imax(), 3);
    assert!(parts.residuals()[3] > 0.0);
    assert!(matches!(found.contributions("41"), Err(Error::UnknownLabel { .. })));
    // The table lists it first among the contributions to Q.
    let plain = parts.exhibit().text("text/plain").unwrap().to_owned();
    let q = &plain[plain.find("Contributions to Q").unwrap()..];
    let first = q.lines().skip_while(|line| !line.starts_with('─')).nth(1).unwrap();
    assert!(first.starts_with("V4"), "{plain}");
}

#[test]
fn one_variance_left_out_gives_closed_forms() {
    // With one variance λ left out, Q / λ follows χ² with one degree of freedom. Box's limit is
    // then exact, and Jackson and Mudholkar's is Wilson and Hilferty's approximation
    // λ (1 − 2/9 + z √(2/9))³, since h₀ = 1/3. χ²₁ is 3.841459 at 0.95 and z 1.644854.
    let pca = fitted(patterned(60, 3, 2), Scaling::Covariance);
    let found = t_squared_and_q(&pca, 2).unwrap().with_coverage(0.95).unwrap();
    let variance = pca.variances()[2];
    let limit = |rule| found.q_limit_by(rule).unwrap() / variance;
    assert_relative(limit(QRule::Box), 3.841_458_820_694_124, 1e-10, "Box");
    let third = 1.0 - 2.0 / 9.0 + 1.644_853_626_951_472_2 * (2.0_f64 / 9.0).sqrt();
    assert_relative(limit(QRule::JacksonMudholkar), third.powi(3), 1e-10, "Jackson and Mudholkar");
    // One variance is as even as can be: the F ratio applies, and exceeds χ² for estimated ones.
    assert!(limit(QRule::F) > limit(QRule::Box));
}

#[test]
fn limits_on_t_squared_meet_their_bounds() {
    // No row of the fitted table can have more than (n − 1)²/n, and the beta limit stays below it.
    for (n, k) in [(6, 3), (10, 2), (500, 4)] {
        let most = (n as f64 - 1.0).powi(2) / n as f64;
        for coverage in [0.95, 0.99, 0.999_999] {
            let beta = TSquaredRule::Beta.limit(n, k, coverage).unwrap();
            let f = TSquaredRule::F.limit(n, k, coverage).unwrap();
            assert!(beta < most && beta < f);
        }
    }
    // Both tend to χ² with k degrees of freedom: 5.991465 for two at 0.95.
    for rule in [TSquaredRule::Beta, TSquaredRule::F] {
        let limit = rule.limit(1_000_000, 2, 0.95).unwrap();
        assert_relative(limit, 5.991_464_547_107_98, 1e-4, "many rows");
    }
    // For k = 2 the beta quantile is closed: 1 − (1 − c)^(2/(n − 3)).
    let (n, coverage) = (20.0_f64, 0.975_f64);
    let quantile = 1.0 - (1.0 - coverage).powf(2.0 / (n - 3.0));
    let expected = (n - 1.0).powi(2) / n * quantile;
    assert_relative(TSquaredRule::Beta.limit(20, 2, coverage).unwrap(), expected, 1e-12, "k = 2");
    assert_eq!(TSquaredRule::Beta.limit(4, 3, 0.95), None);
    assert_eq!(TSquaredRule::F.limit(3, 3, 0.95), None);
}

#[test]
fn limits_cover_what_they_promise() {
    // 400 tables of 40 normal rows with all three components: the directions do not matter, so that
    // the laws of T² hold exactly. Of the 16 000 fitted and 16 000 new rows 95 % stay within, up to
    // four standard errors of dependent counts (taken as twice those of independent ones).
    let (mut within, mut within_new, mut q_within, mut total) = ([0, 0], 0, [0, 0, 0], 0);
    for seed in 0..400 {
        let pca = fitted(noise(40, 3, 2 * seed), Scaling::Covariance);
        let found = t_squared_and_q(&pca, 3).unwrap().with_coverage(0.95).unwrap();
        let new = found.of(&table(noise(40, 3, 2 * seed + 1))).unwrap();
        within[0] += 40 - found.beyond_t_squared().len();
        within_new += 40 - new.beyond_t_squared().len();
        // The wrong law for new rows would let too many pass.
        let beta = found.t_squared_limit().unwrap();
        within[1] += new.t_squared().iter().filter(|t| **t <= beta).count();
        total += 40;
    }
    let share = |count: usize| count as f64 / total as f64;
    let allowed = 8.0 * (0.95 * 0.05 / total as f64).sqrt();
    assert_zero(share(within[0]) - 0.95, allowed, "fitted rows");
    assert_zero(share(within_new) - 0.95, allowed, "new rows");
    assert!(share(within[1]) < 0.95 - 2.0 * allowed, "{}", share(within[1]));
    // Q of new rows, from 300 fitted ones that leave the directions well known.
    let mut total = 0;
    for seed in 0..40 {
        let pca = fitted(patterned(300, 8, 10 * seed), Scaling::Covariance);
        let found = t_squared_and_q(&pca, 2).unwrap().with_coverage(0.95).unwrap();
        let new = found.of(&table(patterned(300, 8, 10 * seed + 5))).unwrap();
        for (count, rule) in
            q_within.iter_mut().zip([QRule::JacksonMudholkar, QRule::Box, QRule::F])
        {
            let limit = found.q_limit_by(rule).unwrap();
            *count += new.q().iter().filter(|q| **q <= limit).count();
        }
        total += 300;
    }
    for count in q_within {
        // The estimated directions leave new rows a little more than fitted ones: one per cent.
        assert_zero(count as f64 / total as f64 - 0.95, 0.015, "Q of new rows");
    }
}

#[test]
fn cut_offs_of_distances_cover_what_they_promise() {
    let (mut far, mut off, mut total) = (0, 0, 0);
    for seed in 0..60 {
        let pca = fitted(patterned(200, 8, 10 * seed), Scaling::Covariance);
        let found = distances(&pca, 2).unwrap();
        far += found.count(Standing::FarOut) + found.count(Standing::FarOutAndOff);
        off += found.count(Standing::Off) + found.count(Standing::FarOutAndOff);
        total += found.n_rows();
        let counts = Standing::ALL.map(|standing| found.count(standing));
        assert_eq!(counts.iter().sum::<usize>(), found.n_rows());
        assert_eq!(found.unusual().len(), found.n_rows() - counts[0]);
    }
    // 2.5 % of 12 000 rows each, and what few rows leave in the robust moments.
    for (count, what) in [(far, "score distance"), (off, "orthogonal distance")] {
        assert_zero(count as f64 / total as f64 - 0.025, 0.008, what);
    }
}

#[test]
fn rows_stand_where_they_were_put() {
    let x = patterned(100, 6, 11);
    let pca = fitted(x.clone(), Scaling::Covariance);
    let found = distances(&pca, 2).unwrap();
    let (along, off) = (pca.loadings().column(0), pca.loadings().column(4));
    let row = |a: f64, b: f64| (pca.mean() + along * a + off * b).transpose();
    let rows = DMatrix::from_rows(&[row(0.0, 0.0), row(90.0, 0.0), row(0.0, 9.0), row(90.0, 9.0)]);
    let new = found.of(&table(rows.clone())).unwrap();
    let standings = [Standing::Within, Standing::FarOut, Standing::Off, Standing::FarOutAndOff];
    assert_eq!(new.standings(), standings);
    assert_eq!(new.unusual(), ["2", "3", "4"]);
    assert!(new.are_new_rows() && !found.are_new_rows());
    assert_relative(new.orthogonal_distances()[2], 9.0, 1e-9, "moved by nine");
    let expected = 90.0 / pca.variances()[0].sqrt();
    assert_relative(new.score_distances()[1], expected, 1e-9, "moved by ninety");
    // The cut-offs are those of the fitted rows.
    assert_eq!(new.score_limit(), found.score_limit());
    assert_eq!(new.orthogonal_limit(), found.orthogonal_limit());
    let again = distances_of(&pca, 2, &table(rows)).unwrap();
    assert_eq!(again.score_distances(), new.score_distances());
    // A larger coverage moves both cut-offs out.
    let wide = found.with_coverage(0.99).unwrap();
    assert!(wide.score_limit() > found.score_limit());
    assert!(wide.orthogonal_limit() > found.orthogonal_limit());
}

#[test]
fn what_fits_exactly_leaves_only_rounding() {
    // Three columns of rank two: fitted rows have no residual, a row off the plane has.
    let own = noise(30, 2, 1);
    let x =
        DMatrix::from_fn(30, 3, |i, j| if j < 2 { own[(i, j)] } else { own[(i, 0)] - own[(i, 1)] });
    let pca = fitted(x.clone(), Scaling::Covariance);
    assert_eq!(pca.n_components(), 2);
    let found = distances(&pca, 2).unwrap();
    assert_eq!(found.count(Standing::Off) + found.count(Standing::FarOutAndOff), 0);
    let off = nalgebra::dmatrix![0.0, 0.0, 0.01];
    assert_eq!(found.of(&table(off)).unwrap().standings(), [Standing::Off]);
    let limits = t_squared_and_q(&pca, 2).unwrap();
    assert_eq!(limits.q_limit(), None);
    assert!(limits.q_limits().iter().all(|limit| limit.why_not().is_some()));
}

#[test]
fn an_analysis_of_some_components_has_the_limits_that_need_no_more() {
    let x = table(patterned(80, 6, 1));
    let options = ComponentOptions::new(Scaling::Covariance).keep(3);
    let kept = principal_components_with(&x, options).unwrap();
    let all = principal_components(&x, Scaling::Covariance).unwrap();
    let (some, all) = (t_squared_and_q(&kept, 2).unwrap(), t_squared_and_q(&all, 2).unwrap());
    assert_all_relative(some.q().as_slice(), all.q().as_slice(), 1e-9, "Q");
    assert_eq!(some.q_limit_by(QRule::JacksonMudholkar), None);
    assert_eq!(some.q_rule(), Some(QRule::Moments));
    let limits = (some.q_limit().unwrap(), all.q_limit_by(QRule::Moments).unwrap());
    assert_relative(limits.0, limits.1, 1e-9, "moments");
    // With all that it kept, something is left over nevertheless.
    assert!(t_squared_and_q(&kept, 3).unwrap().q_limit().is_some());
    assert!(distances(&kept, 3).unwrap().orthogonal_limit().is_some());
}

#[test]
fn exhibits_say_what_limits_are_not() {
    let mut x = patterned(60, 6, 5);
    x[(3, 2)] += 30.0;
    let pca = fitted(x, Scaling::Correlation);
    let (distances, statistics) = (distances(&pca, 2).unwrap(), t_squared_and_q(&pca, 2).unwrap());
    for bundle in [
        distances.exhibit(),
        statistics.exhibit(),
        statistics.contributions("4").unwrap().exhibit(),
    ] {
        let plain = bundle.text("text/plain").unwrap().to_owned();
        assert!(plain.contains("Statistical limits are not safety limits"), "{plain}");
        assert!(plain.contains("licensed practice"), "{plain}");
    }
    let plain = statistics.exhibit().text("text/plain").unwrap().to_owned();
    assert!(plain.contains("Jackson and Mudholkar") && plain.contains("beta law"), "{plain}");
    let new = statistics.of(pca.data()).unwrap().exhibit();
    assert!(new.text("text/plain").unwrap().contains("F law, new rows"));
}

#[test]
fn what_cannot_be_measured_is_refused() {
    let pca = fitted(patterned(30, 4, 6), Scaling::Covariance);
    for k in [0, 5] {
        assert!(matches!(distances(&pca, k), Err(Error::ComponentOutOfRange { available: 4, .. })));
        assert!(matches!(t_squared_and_q(&pca, k), Err(Error::ComponentOutOfRange { .. })));
    }
    let found = distances(&pca, 2).unwrap();
    for coverage in [0.5, 1.0, f64::NAN] {
        assert!(matches!(found.with_coverage(coverage), Err(Error::OptionOutOfRange { .. })));
    }
    let other = table(noise(3, 3, 1));
    assert!(matches!(found.of(&other), Err(Error::VariablesDiffer { .. })));
    assert!(matches!(distances_of(&pca, 2, &other), Err(Error::VariablesDiffer { .. })));
    let statistics = t_squared_and_q(&pca, 2).unwrap();
    assert!(matches!(statistics.of(&other), Err(Error::VariablesDiffer { .. })));
    let weighted = table(patterned(30, 4, 6)).with_weights((1..=30).map(f64::from)).unwrap();
    let weighted = principal_components(&weighted, Scaling::Covariance).unwrap();
    assert!(matches!(t_squared_and_q(&weighted, 2), Err(Error::WeightsNotCovered { .. })));
    // Two rows have one component, no degrees of freedom and no robust moments.
    let two = fitted(noise(2, 3, 1), Scaling::Covariance);
    let statistics = t_squared_and_q(&two, 1).unwrap();
    assert_eq!(statistics.t_squared_limit(), None);
    assert_eq!(distances(&two, 1).unwrap().orthogonal_limit(), None);
    assert!(!statistics.exhibit().is_empty());
}
