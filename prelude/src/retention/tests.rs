//! Properties, closed forms, known structure and faults. Values from other programs and books are
//! in the workspace's `tests/tests/references`.

use nalgebra::{DMatrix, DVector};
use rand_distr::{Distribution, StandardNormal};
use rand_xoshiro::rand_core::SeedableRng;

use super::{
    Comparison, Criterion, Effort, Reason, Retention, RetentionOptions, Rule, Span, cells,
    eastment, evidence, quadrature, retention_with, shares, singular_threshold, tracy_widom,
};
use crate::compare::{assert_all_relative, assert_relative, assert_zero};
use crate::components::{
    ComponentOptions, Scaling, principal_components, principal_components_with,
};
use crate::error::Error;
use crate::exhibit::Exhibit;
use crate::random::Generator;
use crate::table::DataMatrix;

const SIMULATED: [Rule; 6] = [
    Rule::NoiseMean,
    Rule::NoisePercentile,
    Rule::PermutedMean,
    Rule::PermutedPercentile,
    Rule::SharedMean,
    Rule::SharedPercentile,
];

fn noise(n: usize, p: usize, seed: u64) -> DMatrix<f64> {
    let mut generator = Generator::seed_from_u64(seed);
    DMatrix::from_fn(n, p, |_, _| StandardNormal.sample(&mut generator))
}

/// Three hidden sequences of unequal strength, each behind a third of the variables.
fn three_hidden(n: usize, p: usize, seed: u64) -> DMatrix<f64> {
    let (hidden, own) = (noise(n, 3, seed), noise(n, p, seed + 1000));
    let strength = [1.6, 1.25, 1.0];
    DMatrix::from_fn(n, p, |i, j| {
        let place = if j < p / 2 {
            0
        } else if j < p / 2 + p / 3 {
            1
        } else {
            2
        };
        hidden[(i, place)] * strength[place] + 0.6 * own[(i, j)]
    })
}

fn rules(x: DMatrix<f64>, scaling: Scaling, options: RetentionOptions) -> Retention {
    let pca = principal_components(&DataMatrix::from_unnamed(x).unwrap(), scaling).unwrap();
    retention_with(&pca, options.seed(3)).unwrap()
}

fn quick() -> RetentionOptions {
    RetentionOptions::new().replicates(100)
}

#[test]
fn known_structure_is_found_by_the_rules_made_for_it() {
    for (scaling, seed) in [(Scaling::Correlation, 1), (Scaling::Covariance, 7)] {
        let result = rules(three_hidden(300, 15, seed), scaling, quick());
        let found = |rule| result.verdict(rule).n_components();
        for rule in [
            Rule::MeanRoot,
            Rule::LowerMeanRoot,
            Rule::RowColumnValidation,
            Rule::CellValidation,
            Rule::BootstrapMean,
        ] {
            assert_eq!(found(rule), Some(3), "{rule}, {scaling}");
        }
        let best = &result.agreement()[0];
        assert_eq!(best.n_components(), 3);
        assert!(best.rules().len() > result.n_applying() / 2);
        if scaling == Scaling::Correlation {
            for rule in
                SIMULATED.into_iter().chain([Rule::AveragePartial, Rule::AveragePartialFourth])
            {
                assert_eq!(found(rule), Some(3), "{rule}");
            }
        } else {
            // These rest on noise of one size, which bringing variables to unit variance undoes.
            for rule in [
                Rule::SingularThreshold,
                Rule::TracyWidom,
                Rule::Evidence,
                Rule::LawleyTest,
                Rule::LikelihoodRatioTest,
            ] {
                assert_eq!(found(rule), Some(3), "{rule}");
            }
        }
    }
}

#[test]
fn noise_is_left_alone_by_rules_with_a_model_of_noise() {
    // At level 0.05 a test keeps something of pure noise once in twenty tables, so counts over
    // forty tables stay at seven and below (binomial: P(> 7) = 0.001).
    let mut kept = std::collections::HashMap::new();
    let options = || quick().without([Rule::RowColumnValidation]);
    for seed in 0..40 {
        let result = rules(noise(120, 8, seed), Scaling::Covariance, options());
        for verdict in result.verdicts() {
            *kept.entry(verdict.rule()).or_insert(0) +=
                usize::from(verdict.n_components().is_some_and(|count| count > 0));
        }
    }
    for rule in [Rule::TracyWidom, Rule::LikelihoodRatioTest, Rule::LawleyTest, Rule::Evidence] {
        assert!(kept[&rule] <= 7, "{rule} kept something of noise {} times", kept[&rule]);
    }
    // The test of equal roots has its level: over forty tables it must not be silent altogether
    // and neither may the largest root be refused too often.
    let result = rules(noise(200, 8, 99), Scaling::Correlation, quick());
    for rule in [Rule::NoisePercentile, Rule::AveragePartial, Rule::CellValidation] {
        assert_eq!(result.verdict(rule).n_components(), Some(0), "{rule}");
    }
}

#[test]
fn tests_of_equal_roots_have_their_level() {
    // 400 tables of noise: the share of p-values below 0.2 has a standard error of 0.02.
    let mut below = [0.0; 4];
    let options = RetentionOptions::new().effort(Effort::Formulas).assume_normal(true);
    for seed in 0..400 {
        let x = noise(60, 5, 500 + seed);
        let by_covariance = rules(x.clone(), Scaling::Covariance, options.clone());
        let by_correlation = rules(x.clone(), Scaling::Correlation, options.clone());
        // The first two variables are made to stand out, so that the third root is the first of
        // the equal ones.
        let apart = DMatrix::from_fn(60, 5, |i, j| x[(i, j)] * [10.0, 4.0, 1.0, 1.0, 1.0][j]);
        let apart = rules(apart, Scaling::Covariance, options.clone());
        let at = |result: &Retention, rule, place: usize| {
            result.verdict(rule).comparison().map_or(f64::NAN, |c| c.values()[place])
        };
        let first = |result: &Retention, rule| at(result, rule, 0);
        for (count, value) in below.iter_mut().zip([
            first(&by_covariance, Rule::LikelihoodRatioTest),
            first(&by_covariance, Rule::LawleyTest),
            first(&by_correlation, Rule::BartlettTest),
            at(&apart, Rule::LawleyTest, 2),
        ]) {
            assert!(!value.is_nan());
            *count += f64::from(value < 0.2) / 400.0;
        }
    }
    for share in below {
        assert_zero(share - 0.2, 0.08, "share of p-values below 0.2");
    }
}

#[test]
fn pieces_of_a_broken_stick_have_the_lengths_of_the_closed_form() {
    // Of three pieces: (1 + 1/2 + 1/3)/3, (1/2 + 1/3)/3, (1/3)/3.
    assert_all_relative(
        &shares::pieces(3, 1.0),
        &[11.0 / 18.0, 5.0 / 18.0, 2.0 / 18.0],
        1e-15,
        "pieces",
    );
    assert_relative(shares::pieces(40, 7.0).iter().sum(), 7.0, 1e-14, "they make up the stick");
}

#[test]
fn gauss_legendre_integrates_polynomials_exactly() {
    for m in [1, 2, 7, 44] {
        let rule = quadrature::gauss_legendre(m);
        for degree in [0, 1, 2 * m - 1] {
            let sum: f64 =
                rule.nodes.iter().zip(&rule.weights).map(|(x, w)| w * x.powi(degree as i32)).sum();
            assert_relative(sum, 1.0 / (degree as f64 + 1.0), 1e-13, "power of x");
        }
    }
}

#[test]
fn the_tracy_widom_law_has_its_published_moments() {
    // Mean −1.2065335745820, variance 1.607781034581, skewness 0.29346452408, kurtosis
    // 0.1652429384 of the law of order one (F. Bornemann (2010), "On the numerical evaluation of
    // distributions in random matrix theory", table 10; from memory). E S = −8 + ∫ of the tail.
    let law = tracy_widom::Law::new();
    let rule = quadrature::gauss_legendre(60);
    let (low, length) = (-8.0, 24.0);
    let integral = |power: i32| -> f64 {
        let pairs = rule.nodes.iter().zip(&rule.weights);
        let terms = pairs.map(|(x, w)| {
            let s = length * x;
            w * length * f64::from(power) * s.powi(power - 1) * law.upper_tail(low + s).unwrap()
        });
        terms.sum()
    };
    let mean = integral(1);
    assert_relative(low + mean, -1.206_533_574_582, 1e-9, "mean");
    assert_relative(integral(2) - mean * mean, 1.607_781_034_581, 1e-9, "variance");
    for (s, tail) in [(0.450_1, 0.10), (0.979_3, 0.05), (2.023_4, 0.01)] {
        // Quantiles to four decimals (Johnstone 2001, table 2, from memory); the density there is
        // 0.15 at most.
        assert_zero(law.upper_tail(s).unwrap() - tail, 1e-5, "quantile");
    }
    assert_eq!(law.upper_tail(-9.5).unwrap(), 1.0);
    assert_eq!(law.upper_tail(200.0).unwrap(), 0.0);
    assert!(law.upper_tail(f64::NAN).unwrap().is_nan());
    // Far out −(2/3) s^1.5 rules the logarithm: ln[1 − F] ≈ −(2/3) s^1.5 − ¾ ln s − ln(4 √π).
    let s: f64 = 60.0;
    let expected =
        -2.0 / 3.0 * s.powf(1.5) - 0.75 * s.ln() - (4.0 * std::f64::consts::PI.sqrt()).ln();
    assert_relative(law.upper_tail(s).unwrap().ln(), expected, 1e-4, "far tail");
}

// Made by `tests/references/retention.py` (mpmath 1.4.1, 30 digits for Ai; the law from the second
// Painlevé equation by Taylor series in 40 digits), where the same numbers stand in its JSON file.
#[test]
fn airys_function_and_the_law_agree_with_many_digits() {
    for (x, expected) in [
        (-9.0, -0.022133721547341403),
        (-6.5, -0.2380203019971158),
        (-3.0, -0.37881429367765806),
        (-1.0, 0.5355608832923521),
        (0.0, 0.3550280538878172),
        (0.5, 0.23169360648083348),
        (1.0, 0.13529241631288141),
        (1.01, 0.13370770246895858),
        (2.0, 0.03492413042327438),
        (5.0, 0.00010834442813607442),
        (9.0, 2.47116843087249e-09),
        (16.0, 4.1568888289170244e-20),
        (30.0, 3.2082175915504954e-49),
        (100.0, 2.6344821520881846e-291),
    ] {
        let value = tracy_widom::airy(x);
        if x < 1.0 {
            assert_zero(value - expected, 2e-12, &format!("Ai({x})"));
        } else {
            assert_relative(value, expected, 1e-12, &format!("Ai({x})"));
        }
    }
    let law = tracy_widom::Law::new();
    for (s, expected) in [
        (-8.0, 0.9999999999981932),
        (-6.0, 0.9999972926806747),
        (-4.0, 0.9924323214012036),
        (-3.0, 0.9303998811326301),
        (-2.0, 0.7256798020907821),
        (-1.2065, 0.480337268734528),
        (-1.0, 0.41621010448026774),
        (0.0, 0.16809193379704807),
        (0.9793, 0.050001116567796454),
        (2.0234, 0.010000830741118766),
        (4.0, 0.00022034448743299864),
        (8.0, 8.04542487986974e-09),
        (14.0, 1.3074930670366337e-17),
    ] {
        // Tails down to 1e-17 keep their digits; Ai at −8 has an absolute error of some 1e-12.
        assert_relative(law.upper_tail(s).unwrap(), expected, 1e-10, &format!("tail at {s}"));
    }
}

#[test]
fn the_optimal_threshold_has_its_published_coefficients() {
    // Gavish and Donoho (2014), table IV and section I-D (from memory): 2.858 for square tables.
    for (beta, omega) in [(0.05, 1.5194), (0.1, 1.6089), (0.5, 2.1711), (1.0, 2.8582)] {
        assert_zero(singular_threshold::coefficient(beta) - omega, 6e-4, "coefficient");
    }
    // Their cubic approximation, equation 5: within 0.02 over the whole range.
    for step in 1..=20 {
        let beta = f64::from(step) / 20.0;
        let cubic = 0.56 * beta.powi(3) - 0.95 * beta * beta + 1.82 * beta + 1.43;
        assert_zero(singular_threshold::coefficient(beta) - cubic, 0.02, "cubic");
    }
}

#[test]
fn evidence_without_components_is_that_of_equal_variances() {
    // With k = 0 every factor but the likelihood of v is one.
    let roots = [3.0_f64, 2.0, 1.0];
    assert_relative(evidence::log_evidence(&roots, 0, 10.0), -15.0 * 2.0_f64.ln(), 1e-14, "k = 0");
    // A common factor c of all variances moves every evidence by −n p/2 ln c and decides nothing.
    for k in 0..3 {
        let moved = evidence::log_evidence(&roots.map(|root| 5.0 * root), k, 10.0);
        let expected = evidence::log_evidence(&roots, k, 10.0) - 15.0 * 5.0_f64.ln();
        assert_relative(moved, expected, 1e-12, "units");
    }
}

#[test]
fn cross_validation_does_not_depend_on_how_it_is_computed() {
    // Through the cross-product of the variables or that of the rows: a table turned by a rotation
    // of its rows' space keeps PRESS only where rows and columns play the same part.
    let mut x = three_hidden(20, 9, 4);
    for mut column in x.column_iter_mut() {
        let mean = column.mean();
        column.add_scalar_mut(-mean);
    }
    let tall = eastment::press(&x, 5).unwrap();
    let wide = eastment::press(&x.transpose(), 5).unwrap();
    assert_all_relative(&wide, &tall, 1e-9, "PRESS of the transpose");
    assert_relative(tall[0], x.norm_squared() / 180.0, 1e-12, "no component predicts the mean");
    let cells = cells::prediction_errors(&x, 20).unwrap();
    // Without components a left-out value is predicted by the mean of the others: its error is
    // n/(n − 1) times the deviation.
    assert_relative(cells[0], x.norm_squared() / 180.0 * (20.0_f64 / 19.0).powi(2), 1e-12, "mean");
}

#[test]
fn counting_follows_the_criterion() {
    let count = |criterion, values: &[f64], thresholds: &[f64]| {
        Comparison::new("test", criterion, values.to_vec(), thresholds.to_vec()).n_components()
    };
    let ones = [1.0; 4];
    assert_eq!(count(Criterion::Above, &[3.0, 2.0, 0.5, 4.0], &ones), 2);
    assert_eq!(count(Criterion::Above, &[1.0], &[1.0]), 0);
    assert_eq!(count(Criterion::Above, &[f64::NAN], &[1.0]), 0);
    assert_eq!(count(Criterion::LastAbove, &[3.0, 0.5, 4.0, 0.1], &ones), 3);
    assert_eq!(count(Criterion::LastAbove, &[0.5, 0.5, 0.4, 0.1], &ones), 0);
    assert_eq!(count(Criterion::Below, &[0.0, 0.5, 1.5, 0.0], &ones), 2);
    assert_eq!(count(Criterion::Reaches, &[0.5, 0.8, 0.9, 1.0], &[0.8; 4]), 2);
    assert_eq!(count(Criterion::Reaches, &[0.5, 0.7], &[0.8; 2]), 2);
    assert_eq!(count(Criterion::Smallest, &[3.0, 1.0, 1.0, 2.0], &[]), 1);
    assert_eq!(count(Criterion::Largest, &[f64::NAN, 1.0, 3.0, 2.0], &[]), 2);
}

#[test]
fn rules_that_do_not_apply_say_why() {
    let why = |result: &Retention, rule| result.verdict(rule).reason().cloned();
    let covariance = rules(three_hidden(60, 12, 5), Scaling::Covariance, quick());
    for rule in SIMULATED.into_iter().chain([Rule::AveragePartial, Rule::BartlettTest]) {
        assert_eq!(why(&covariance, rule), Some(Reason::NeedsCorrelation), "{rule}");
    }
    let correlation = rules(three_hidden(60, 12, 5), Scaling::Correlation, quick());
    assert_eq!(why(&correlation, Rule::LikelihoodRatioTest), Some(Reason::NeedsCovariance));

    let wide = rules(three_hidden(12, 40, 5), Scaling::Correlation, quick());
    for rule in
        [Rule::MeanRoot, Rule::SharedMean, Rule::BartlettTest, Rule::Evidence, Rule::BootstrapMean]
    {
        let expected = Reason::NeedsMoreRows { n_rows: 12, n_variables: 40 };
        assert_eq!(why(&wide, rule), Some(expected), "{rule}");
    }
    assert!(wide.verdict(Rule::CellValidation).n_components().is_some());
    assert!(wide.verdict(Rule::NoiseMean).n_components().is_some());

    let mut redundant = three_hidden(60, 12, 5);
    let sum = redundant.column(0) + redundant.column(5);
    redundant.set_column(11, &sum);
    let redundant = rules(redundant, Scaling::Correlation, quick());
    let expected = Reason::RankDeficient { rank: 11, needed: 12 };
    for rule in [Rule::BartlettTest, Rule::Evidence, Rule::SharedPercentile] {
        assert_eq!(why(&redundant, rule), Some(expected.clone()), "{rule}");
    }
    assert!(redundant.verdict(Rule::RowColumnValidation).n_components().is_some());

    // Cubes of normal values have heavy tails.
    let heavy = three_hidden(200, 6, 5).map(|value| value.powi(3));
    let plain = rules(heavy.clone(), Scaling::Correlation, quick());
    assert!(
        matches!(why(&plain, Rule::LawleyTest), Some(Reason::NotNormal { kurtosis }) if kurtosis > 10.0)
    );
    let bold = rules(heavy, Scaling::Correlation, quick().assume_normal(true));
    assert!(bold.verdict(Rule::LawleyTest).n_components().is_some());

    let two = rules(noise(20, 2, 5), Scaling::Correlation, quick());
    let expected = Reason::TooFewComponents { needed: 3, found: 2 };
    assert_eq!(why(&two, Rule::Acceleration), Some(expected));
    let formulas = rules(noise(20, 3, 5), Scaling::Correlation, quick().effort(Effort::Formulas));
    assert_eq!(why(&formulas, Rule::NoiseMean), Some(Reason::LeftOut));
    assert!(formulas.normal_noise().is_none() && formulas.variance_bands().is_none());
    // A value that occurs once is often not drawn.
    let mut rare = noise(20, 3, 5);
    rare.column_mut(1).fill(0.0);
    rare[(4, 1)] = 1.0;
    let rare = rules(rare, Scaling::Correlation, quick());
    assert!(matches!(why(&rare, Rule::BootstrapGaps), Some(Reason::ConstantWhenResampled { .. })));
}

#[test]
fn the_smallest_analyses_are_answered() {
    for (n, p) in [(2, 1), (2, 5), (3, 2), (3, 3), (4, 2), (5, 4), (40, 1)] {
        for scaling in [Scaling::Correlation, Scaling::Covariance] {
            let result = rules(noise(n, p, 8), scaling, quick());
            let most = (n - 1).min(p);
            let span = result.span().unwrap();
            assert!(span.most <= most, "{n} x {p}: {span:?}");
            assert_eq!(result.verdicts().len(), Rule::ALL.len());
            assert_eq!(result.variances().len(), most);
            assert!(!result.exhibit().is_empty());
        }
    }
}

#[test]
fn weights_silence_the_rules_that_do_not_know_them() {
    let x = DataMatrix::from_unnamed(three_hidden(60, 6, 2)).unwrap();
    let weighted = x.with_weights((0..60).map(|row| 1.0 + (row % 3) as f64)).unwrap();
    let pca = principal_components(&weighted, Scaling::Correlation).unwrap();
    let result = retention_with(&pca, quick().seed(1)).unwrap();
    for rule in SIMULATED.into_iter().chain([
        Rule::BartlettTest,
        Rule::RowColumnValidation,
        Rule::CellValidation,
        Rule::SingularThreshold,
        Rule::TracyWidom,
        Rule::Evidence,
        Rule::BootstrapMean,
    ]) {
        assert_eq!(result.verdict(rule).reason(), Some(&Reason::Weighted), "{rule}");
    }
    for rule in [Rule::MeanRoot, Rule::BrokenStick, Rule::AveragePartial] {
        assert!(result.verdict(rule).n_components().is_some(), "{rule}");
    }
}

#[test]
fn an_analysis_of_the_first_components_is_completed() {
    let x = DataMatrix::from_unnamed(three_hidden(80, 9, 6)).unwrap();
    let two = ComponentOptions::new(Scaling::Correlation).keep(2);
    let two = principal_components_with(&x, two).unwrap();
    let all = principal_components(&x, Scaling::Correlation).unwrap();
    let from_two = retention_with(&two, quick().seed(4)).unwrap();
    let from_all = retention_with(&all, quick().seed(4)).unwrap();
    assert_eq!(from_two.verdicts(), from_all.verdicts());
    assert_eq!((from_two.n_computed_before(), from_all.n_computed_before()), (Some(2), None));
}

#[test]
fn a_seed_fixes_every_verdict_on_any_number_of_threads() {
    let x = DataMatrix::from_unnamed(three_hidden(40, 7, 3)).unwrap();
    let pca = principal_components(&x, Scaling::Correlation).unwrap();
    let run = |threads: usize, seed: u64| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        pool.install(|| retention_with(&pca, quick().seed(seed)).unwrap())
    };
    let one = run(1, 5);
    assert!((2..5).all(|threads| run(threads, 5) == one));
    assert!(run(1, 6).variance_bands() != one.variance_bands());
}

#[test]
fn bands_hold_the_variances_of_the_population() {
    // Population variances 4, 1, 1/4 in 400 rows; asymptotic standard errors are λ √(2/n).
    let scale = [2.0, 1.0, 0.5];
    let x = noise(400, 3, 21);
    let x = DMatrix::from_fn(400, 3, |i, j| x[(i, j)] * scale[j]);
    let result = rules(x, Scaling::Covariance, RetentionOptions::new().replicates(2000));
    let bands = result.variance_bands().unwrap();
    assert_eq!((bands.n_replicates(), bands.n_failed()), (2000, 0));
    assert_relative(bands.coverage(), 0.95, 1e-12, "coverage");
    for (k, variance) in [4.0, 1.0, 0.25].into_iter().enumerate() {
        assert!(bands.lower()[k] < variance && variance < bands.upper()[k], "variance {}", k + 1);
        let width = bands.upper()[k] - bands.lower()[k];
        let expected = 2.0 * 1.96 * result.variances()[k] * (2.0_f64 / 400.0).sqrt();
        assert_relative(width, expected, 0.2, "width, against the asymptotic one");
    }
    assert_eq!(result.verdict(Rule::BootstrapGaps).n_components(), Some(2));
    assert_eq!(result.verdict(Rule::BootstrapMean).n_components(), Some(1));
}

#[test]
fn thresholds_for_charts_are_those_that_decided() {
    let result = rules(three_hidden(50, 6, 9), Scaling::Correlation, quick());
    let stick = result.verdict(Rule::BrokenStick).comparison().unwrap();
    assert_eq!(result.broken_stick(), DVector::from_column_slice(stick.thresholds()));
    assert_relative(result.mean_root(), 1.0, 1e-15, "mean root of correlations");
    let noise = result.verdict(Rule::PermutedMean).comparison().unwrap();
    assert_eq!(result.permuted_noise().unwrap().noise_mean().as_slice(), noise.thresholds());
    let span = result.span().unwrap();
    let counts = || result.verdicts().iter().filter_map(|verdict| verdict.n_components());
    assert_eq!(span, Span { least: counts().min().unwrap(), most: counts().max().unwrap() });
    let agreeing: usize = result.agreement().iter().map(|group| group.rules().len()).sum();
    assert_eq!(agreeing, result.n_applying());
}

#[test]
fn options_out_of_range_are_refused() {
    let x = DataMatrix::from_unnamed(noise(9, 3, 1)).unwrap();
    let pca = principal_components(&x, Scaling::Correlation).unwrap();
    let usual = RetentionOptions::new;
    for (options, name) in [
        (usual().share(1.0), "share"),
        (usual().share(f64::NAN), "share"),
        (usual().level(0.0), "level"),
        (usual().level(0.5), "level"),
        (usual().percentile(100.0), "percentile"),
        (usual().replicates(19), "replicates"),
    ] {
        match retention_with(&pca, options) {
            Err(Error::OptionOutOfRange { option, .. }) => assert_eq!(option, name),
            other => panic!("{name}: {other:?}"),
        }
    }
}

#[test]
fn the_table_names_rules_numbers_and_reasons() {
    let result =
        rules(three_hidden(60, 12, 5), Scaling::Covariance, quick().without([Rule::Acceleration]));
    let text = result.exhibit().text("text/plain").unwrap().to_owned();
    let text = text.split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(text.contains(&format!("by {} rules that apply", result.n_applying())), "{text}");
    for verdict in result.verdicts() {
        assert!(text.contains(verdict.rule().name()), "{} in {text}", verdict.rule());
        if verdict.n_components().is_some() {
            assert!(text.contains(verdict.rule().authors()), "{} in {text}", verdict.rule());
        }
    }
    assert!(text.contains("scree: acceleration factor: the options leave it out."), "{text}");
    assert!(text.contains("it is made for correlations"), "{text}");
    assert!(text.contains("a majority is no proof"), "{text}");
    assert!(text.contains("60 rows and 12 variables in their own units"), "{text}");
    assert!(text.contains("seed 3"), "{text}");
    // What decided must not be cut from a console's table.
    assert!(text.contains("last kept one more source"), "{text}");
}
