//! The incomplete gamma function: tails of a gamma variable with unit scale.

use super::invert::{Probability, Side, Tail, invert};
use super::saddle::ln_gamma_density;

/// Terms of a series or fraction before it is given up; √a times a small number are needed.
const MOST_TERMS: usize = 1_000_000;

/// P(X ≤ x) or P(X > x) for shape a.
pub(super) fn tail(side: Side, a: f64, x: f64) -> f64 {
    if !(a > 0.0 && a.is_finite()) || x.is_nan() {
        return f64::NAN;
    }
    if x <= 0.0 {
        return if side == Side::Lower { 0.0 } else { 1.0 };
    }
    if x == f64::INFINITY {
        return if side == Side::Lower { 1.0 } else { 0.0 };
    }
    tail_at(a, x).probability(side)
}

/// The x with this probability for shape a.
pub(super) fn quantile(probability: Probability, a: f64) -> f64 {
    if !(a > 0.0 && a.is_finite()) {
        return f64::NAN;
    }
    invert(probability, a, |x| tail_at(a, x))
}

/// The tail that converges at x: the lower one up to about the mean, else the upper one.
fn tail_at(a: f64, x: f64) -> Tail {
    let ln_density = ln_gamma_density(a, x);
    if x < a + 1.0 {
        Tail { side: Side::Lower, ln_density, factor: series(a, x) }
    } else {
        Tail { side: Side::Upper, ln_density, factor: fraction(a, x) }
    }
}

/// The lower tail over x^a e^(−x) / Γ(a): Σₙ xⁿ / (a (a + 1) … (a + n)), all terms positive
/// (NIST Digital Library of Mathematical Functions, 8.7.1).
fn series(a: f64, x: f64) -> f64 {
    let mut term = 1.0 / a;
    let mut sum = term;
    let mut denominator = a;
    for _ in 0..MOST_TERMS {
        denominator += 1.0;
        term *= x / denominator;
        sum += term;
        if term <= 1e-17 * sum {
            return sum;
        }
    }
    f64::NAN
}

/// The upper tail over x^a e^(−x) / Γ(a): Legendre's continued fraction in its even form,
/// evaluated forwards (NIST Digital Library of Mathematical Functions, 8.9.2 and 3.10(iii)).
///
/// ```text
/// 1 / (x + 1 − a + 1 (a − 1) / (x + 3 − a + 2 (a − 2) / (x + 5 − a + …)))
/// ```
fn fraction(a: f64, x: f64) -> f64 {
    let first = x - a + 1.0;
    let mut value = first;
    let (mut c, mut d) = (first, 0.0);
    for n in 1..MOST_TERMS {
        let n = n as f64;
        let numerator = n * (a - n);
        let denominator = first + 2.0 * n;
        d = 1.0 / (denominator + numerator * d);
        c = denominator + numerator / c;
        let change = c * d;
        value *= change;
        if (change - 1.0).abs() <= f64::EPSILON {
            return 1.0 / value;
        }
    }
    f64::NAN
}
