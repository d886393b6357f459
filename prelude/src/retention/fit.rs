//! Putting every rule to one analysis.

use nalgebra::DVector;

use super::bands::{self, VarianceBands};
use super::noise::{self, Noises, Threshold};
use super::options::RetentionOptions;
use super::result::Retention;
use super::rule::Rule;
use super::subject::Subject;
use super::verdict::{Answer, Outcome, Reason, Verdict};
use super::{
    cells, eastment, equal_roots, evidence, partial, shares, singular_threshold, slopes,
    tracy_widom,
};
use crate::components::{PrincipalComponents, principal_components};
use crate::error::Result;
use crate::live::{checkpoint, seed};
use crate::parallel::{Noise, RootsOf};

/// How many components to keep, by every rule, with the default [`RetentionOptions`].
///
/// ```
/// use semiaxis::components::{Scaling, principal_components};
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::retention::{Rule, retention};
/// use semiaxis::table::DataMatrix;
///
/// // Four columns that follow one hidden sequence.
/// let x = DMatrix::from_fn(60, 4, |i, j| {
///     (i as f64 * 0.7).sin() + 0.3 * ((i * (j + 3)) as f64 * 1.3).cos()
/// });
/// let pca = principal_components(&DataMatrix::from_unnamed(x)?, Scaling::Correlation)?;
/// let rules = retention(&pca)?;
/// assert_eq!(rules.verdict(Rule::MeanRoot).n_components(), Some(1));
/// assert_eq!(rules.agreement()[0].n_components(), 1);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::NoConvergence`](crate::Error::NoConvergence) should a decomposition fail;
/// [`Error::Interrupted`](crate::Error::Interrupted). Rules that do not apply are no error: their
/// verdicts say why.
pub fn retention(pca: &PrincipalComponents) -> Result<Retention> {
    retention_with(pca, RetentionOptions::default())
}

/// How many components to keep, by every rule.
///
/// ```
/// use semiaxis::components::{Scaling, principal_components};
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::retention::{Effort, RetentionOptions, Rule, retention_with};
/// use semiaxis::table::DataMatrix;
///
/// let x = DMatrix::from_fn(30, 3, |i, j| ((i * i + 3 * i * j + 7 * j) as f64).sin());
/// let pca = principal_components(&DataMatrix::from_unnamed(x)?, Scaling::Covariance)?;
/// let options = RetentionOptions::new().share(0.5).effort(Effort::Formulas);
/// let rules = retention_with(&pca, options)?;
/// assert_eq!(rules.verdict(Rule::CumulativeShare).n_components(), Some(2));
/// // Velicer's rule is about correlations.
/// assert!(rules.verdict(Rule::AveragePartial).reason().is_some());
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// Those of [`retention`], and [`Error::OptionOutOfRange`](crate::Error::OptionOutOfRange).
pub fn retention_with(pca: &PrincipalComponents, options: RetentionOptions) -> Result<Retention> {
    options.check()?;
    let seed = options.chosen_seed().unwrap_or_else(seed);
    let n_computed = (!pca.is_complete()).then(|| pca.n_components());
    let whole;
    let complete = if pca.is_complete() {
        pca
    } else {
        whole = principal_components(pca.data(), pca.scaling())?;
        &whole
    };
    let subject = Subject::new(complete, &options, seed);
    let noises = Noises {
        normal: unless_left_out(&options, [Rule::NoiseMean, Rule::NoisePercentile], || {
            noise::run(&subject, Noise::Normal, RootsOf::Correlation)
        })?,
        permuted: unless_left_out(
            &options,
            [Rule::PermutedMean, Rule::PermutedPercentile],
            || noise::run(&subject, Noise::Permuted, RootsOf::Correlation),
        )?,
        shared: unless_left_out(&options, [Rule::SharedMean, Rule::SharedPercentile], || {
            noise::run(&subject, Noise::Normal, RootsOf::ReducedCorrelation)
        })?,
    };
    let bands = unless_left_out(&options, [Rule::BootstrapMean, Rule::BootstrapGaps], || {
        bands::bands(&subject)
    })?;
    let verdicts: Result<Vec<Verdict>> = Rule::ALL
        .into_iter()
        .map(|rule| {
            checkpoint();
            let answer = if options.leaves_out(rule) {
                Err(Reason::LeftOut)
            } else {
                answer(rule, &subject, &noises, &bands)?
            };
            let outcome = answer.map_or_else(Outcome::DoesNotApply, Outcome::Keeps);
            Ok(Verdict { rule, outcome })
        })
        .collect();
    Ok(Retention {
        verdicts: verdicts?,
        variances: DVector::from_vec(subject.roots),
        total_variance: subject.total,
        n_rows: subject.n,
        n_variables: subject.p,
        n_computed,
        scaling: complete.scaling(),
        normal: noises.normal.ok(),
        permuted: noises.permuted.ok(),
        shared: noises.shared.ok(),
        bands: bands.ok(),
        seed,
        options,
    })
}

/// What several rules share is not computed when all of them are left out.
fn unless_left_out<T>(
    options: &RetentionOptions,
    rules: [Rule; 2],
    compute: impl FnOnce() -> Result<std::result::Result<T, Reason>>,
) -> Result<std::result::Result<T, Reason>> {
    if rules.iter().all(|rule| options.leaves_out(*rule)) {
        return Ok(Err(Reason::LeftOut));
    }
    compute()
}

fn answer(
    rule: Rule,
    subject: &Subject,
    noises: &Noises,
    bands: &std::result::Result<VarianceBands, Reason>,
) -> Result<Answer> {
    Ok(match rule {
        Rule::CumulativeShare => shares::cumulative_share(subject),
        Rule::MeanRoot => shares::mean_root(subject),
        Rule::LowerMeanRoot => shares::lower_mean_root(subject),
        Rule::BrokenStick => shares::broken_stick(subject),
        Rule::Acceleration => slopes::acceleration(subject),
        Rule::OptimalCoordinates => slopes::optimal_coordinates(subject),
        Rule::NoiseMean => noise::rule(&noises.normal, Threshold::Mean),
        Rule::NoisePercentile => noise::rule(&noises.normal, Threshold::Percentile),
        Rule::PermutedMean => noise::rule(&noises.permuted, Threshold::Mean),
        Rule::PermutedPercentile => noise::rule(&noises.permuted, Threshold::Percentile),
        Rule::SharedMean => noise::rule(&noises.shared, Threshold::Mean),
        Rule::SharedPercentile => noise::rule(&noises.shared, Threshold::Percentile),
        Rule::AveragePartial => partial::average_partial(subject, 2),
        Rule::AveragePartialFourth => partial::average_partial(subject, 4),
        Rule::BartlettTest => equal_roots::bartlett(subject),
        Rule::LawleyTest => equal_roots::lawley(subject),
        Rule::LikelihoodRatioTest => equal_roots::likelihood_ratio(subject),
        Rule::RowColumnValidation => eastment::row_column_validation(subject)?,
        Rule::CellValidation => cells::cell_validation(subject)?,
        Rule::SingularThreshold => singular_threshold::singular_threshold(subject),
        Rule::TracyWidom => tracy_widom::tracy_widom(subject)?,
        Rule::Evidence => evidence::evidence(subject),
        Rule::BootstrapMean => bands::against_mean(subject, bands),
        Rule::BootstrapGaps => bands::gaps(bands),
    })
}
