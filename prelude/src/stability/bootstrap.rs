//! Drawing rows anew.

use nalgebra::{DMatrix, DVector};
use rand::RngExt;

use super::asymptotic::{check_unweighted, with_all_components};
use super::influence::{Accelerations, accelerations};
use super::intervals::spread;
use super::options::{Alignment, BootstrapOptions, followed};
use super::refit::{Outcome, Refit, Refitted};
use super::result::Bootstrap;
use crate::components::PrincipalComponents;
use crate::error::{ColumnCount, Error, Result};
use crate::live::seed;
use crate::quantile::{ascending, mean};
use crate::repeat::repeat;

/// Fewer usable resamples than this say nothing about tails.
const LEAST_USABLE: usize = 40;

/// The most loadings that are kept of all resamples together (2 GB).
const MOST_KEPT: usize = 1 << 28;

/// How variances, loadings and the leading subspace move when n rows are drawn with replacement,
/// many times over.
///
/// Each resample is analysed as the data were, with means and scales of its own. A resample in
/// which a column does not vary cannot be scaled under correlation; such resamples are counted and
/// named, and enter no other number.
///
/// ```
/// use semiaxis::components::{Scaling, principal_components};
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::stability::{BootstrapOptions, bootstrap};
/// use semiaxis::table::DataMatrix;
///
/// let x = DMatrix::from_fn(60, 4, |i, j| {
///     (i as f64 * 0.7).sin() + 0.3 * ((i * (j + 3)) as f64 * 1.3).cos()
/// });
/// let pca = principal_components(&DataMatrix::from_unnamed(x)?, Scaling::Correlation)?;
/// let spread = bootstrap(&pca, BootstrapOptions::new().replicates(200).components(1).seed(1))?;
/// // One component holds the four columns together, and its direction hardly moves.
/// assert!(spread.angle_quantile(0.95)? < 5.0);
/// assert_eq!(spread.order_changes()[0], 0.0);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::OptionOutOfRange`]; [`Error::ComponentOutOfRange`]; [`Error::WeightsNotCovered`];
/// [`Error::TooFewRows`] for fewer than three rows; [`Error::DegenerateResamples`] when fewer than
/// 40 resamples can be analysed; [`Error::Interrupted`].
pub fn bootstrap(pca: &PrincipalComponents, options: BootstrapOptions) -> Result<Bootstrap> {
    options.check()?;
    check_unweighted(pca, "the bootstrap of rows")?;
    let n = pca.n_rows();
    if n < 3 {
        return Err(Error::TooFewRows { method: "the bootstrap of rows", needed: 3, found: n });
    }
    let whole = with_all_components(pca)?;
    let pca = whole.as_ref().unwrap_or(pca);
    let k = followed(options.chosen_components(), pca)?;
    let kept = options.n_replicates().saturating_mul(k * pca.n_variables());
    if kept > MOST_KEPT {
        return Err(Error::OptionOutOfRange {
            option: "replicates",
            value: options.n_replicates() as f64,
            accepted: "so many that replicates × components × variables stay below 2^28",
        });
    }
    let seed = options.chosen_seed().unwrap_or_else(seed);
    let refit = Refit::new(pca, k, options.chosen_alignment());
    let outcomes = repeat(
        "bootstrap of rows",
        options.n_replicates(),
        seed,
        || refit.workspace(),
        |workspace, generator, _| {
            workspace.weights.fill(0.0);
            for _ in 0..n {
                workspace.weights[generator.random_range(0..n)] += 1.0;
            }
            refit.weighted(workspace)
        },
    )?;
    let (usable, degenerate) = sorted_out(pca, outcomes);
    if usable.len() < LEAST_USABLE {
        return Err(Error::DegenerateResamples {
            usable: usable.len(),
            drawn: options.n_replicates(),
            columns: degenerate,
        });
    }
    let mut accelerations = accelerations(pca, &refit, k);
    if options.chosen_alignment() == Alignment::Procrustes {
        // A loading that is rotated towards the data is not the statistic that they describe.
        accelerations.loadings.fill(f64::NAN);
    }
    Ok(summary(pca, k, &usable, &accelerations, Drawn { options, seed, degenerate }))
}

/// How the resamples came about.
struct Drawn {
    options: BootstrapOptions,
    seed: u64,
    degenerate: Vec<ColumnCount>,
}

/// Resamples that could be analysed, and the columns that kept the others from it.
fn sorted_out(
    pca: &PrincipalComponents,
    outcomes: Vec<Outcome>,
) -> (Vec<Refitted>, Vec<ColumnCount>) {
    let mut usable = Vec::with_capacity(outcomes.len());
    let mut counts = vec![0; pca.n_variables()];
    for outcome in outcomes {
        match outcome {
            Ok(refitted) => usable.push(refitted),
            Err(constant) => constant.into_iter().for_each(|j| counts[j] += 1),
        }
    }
    let columns = pca
        .variables()
        .iter()
        .zip(counts)
        .filter(|(_, count)| *count > 0)
        .map(|(name, count)| ColumnCount { column: name.clone(), count })
        .collect();
    (usable, columns)
}

fn summary(
    pca: &PrincipalComponents,
    k: usize,
    usable: &[Refitted],
    accelerations: &Accelerations,
    drawn: Drawn,
) -> Bootstrap {
    let n_usable = usable.len();
    let confidence = drawn.options.chosen_confidence();
    let loadings = pca.loadings().first(k).expect("k was checked against the components");
    let variance_spread = spread(
        pca.variances().as_slice(),
        accelerations.variances.as_slice(),
        n_usable,
        confidence,
        |resample, place| usable[resample].variances[place],
    );
    let loading_spread = spread(
        loadings.values().as_slice(),
        accelerations.loadings.as_slice(),
        n_usable,
        confidence,
        |resample, place| usable[resample].loadings[place],
    );
    let share = |of: &dyn Fn(&Refitted) -> bool| {
        usable.iter().filter(|refitted| of(refitted)).count() as f64 / n_usable as f64
    };
    let in_order = |refitted: &Refitted| refitted.places.iter().enumerate().all(|(c, p)| c == *p);
    let angles = DMatrix::from_fn(n_usable, k, |resample, place| {
        usable[resample].angles[place].to_degrees()
    });
    Bootstrap {
        variances: pca.variances().clone(),
        variance_spread,
        loadings,
        loading_spread,
        order_changes: DVector::from_fn(k, |c, _| share(&|refitted| refitted.places[c] != c)),
        any_order_change: share(&|refitted| !in_order(refitted)),
        congruences: DVector::from_fn(k, |c, _| {
            mean(&usable.iter().map(|refitted| refitted.congruences[c]).collect::<Vec<f64>>())
        }),
        largest_angles: ascending(angles.column(k - 1).iter().copied().collect()),
        angles,
        n_degenerate: drawn.options.n_replicates() - n_usable,
        degenerate_columns: drawn.degenerate,
        n_rows: pca.n_rows(),
        scaling: pca.scaling(),
        options: drawn.options,
        seed: drawn.seed,
    }
}
