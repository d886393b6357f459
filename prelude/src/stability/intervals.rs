//! From many resampled values of a quantity to its error and its intervals.

use nalgebra::DVector;
use rayon::prelude::*;

use super::result::{Bands, Spread};
use crate::distributions::{normal_quantile, normal_upper_quantile, normal_upper_tail};
use crate::quantile::{deviation, mean, quantile};

/// The spread of each quantity over the resamples. `values(place, into)` writes the resampled
/// values of the quantity at a place.
pub(super) fn spread(
    observed: &[f64],
    accelerations: &[f64],
    n_resamples: usize,
    confidence: f64,
    value: impl Fn(usize, usize) -> f64 + Sync,
) -> Spread {
    let tail = 0.5 * (1.0 - confidence);
    let summaries: Vec<[f64; 7]> = observed
        .par_iter()
        .zip(accelerations)
        .enumerate()
        .map_init(
            || vec![0.0; n_resamples],
            |values, (place, (&observed, &acceleration))| {
                for (resample, entry) in values.iter_mut().enumerate() {
                    *entry = value(resample, place);
                }
                let mean = mean(values);
                let error = deviation(values);
                values.sort_unstable_by(f64::total_cmp);
                let (low, high) = (quantile(values, tail), quantile(values, 1.0 - tail));
                let (corrected_low, corrected_high) = bca(values, observed, acceleration, tail);
                [mean, mean - observed, error, low, high, corrected_low, corrected_high]
            },
        )
        .collect();
    let take = |of: usize| DVector::from_iterator(observed.len(), summaries.iter().map(|s| s[of]));
    Spread {
        mean: take(0),
        bias: take(1),
        standard_error: take(2),
        percentile: Bands { low: take(3), high: take(4) },
        bca: Bands { low: take(5), high: take(6) },
    }
}

/// The interval of Efron (1987), equation 6.8:
///
/// ```text
/// share = Φ(z₀ + (z₀ + z) / (1 − a (z₀ + z))),   z₀ = Φ⁻¹(share of resamples below the value)
/// ```
///
/// Resamples equal to the value count half. NaN without resamples on both sides of the value.
fn bca(ascending: &[f64], observed: f64, acceleration: f64, tail: f64) -> (f64, f64) {
    let below = ascending.partition_point(|value| *value < observed);
    let not_above = ascending.partition_point(|value| *value <= observed);
    let share = 0.5 * (below + not_above) as f64 / ascending.len() as f64;
    let shift = normal_quantile(share);
    let at = |z: f64| {
        let denominator = 1.0 - acceleration * (shift + z);
        if !(denominator > 0.0 && shift.is_finite()) {
            return f64::NAN;
        }
        let place = shift + (shift + z) / denominator;
        quantile(ascending, normal_upper_tail(-place))
    };
    let z = normal_upper_quantile(tail);
    (at(-z), at(z))
}
