//! The incomplete beta function: tails of the share X / (X + Y) of two gamma variables, and of
//! their ratio.

use super::invert::{Probability, Side, Tail, invert};
use super::saddle::ln_beta_density;

const MOST_TERMS: usize = 1_000_000;

/// Where a beta variable is looked at.
struct Place {
    x: f64,
    /// 1 − x, with all its digits.
    y: f64,
    /// b x − a y, with all its digits: how far x lies above the mean a / (a + b), times a + b.
    excess: f64,
}

impl Place {
    /// By the ratio f = (x / a) / (y / b) of two means, which is one at the mean.
    fn at_ratio(a: f64, b: f64, f: f64) -> Self {
        // Divided by the larger part, so that nothing overflows.
        let (p, q) = (a * f, b);
        let sum = p + q;
        if sum.is_finite() {
            Place { x: p / sum, y: q / sum, excess: a * (b / sum) * (f - 1.0) }
        } else {
            Place { x: 1.0, y: q / a / f, excess: b }
        }
    }

    fn at_share(a: f64, b: f64, x: f64) -> Self {
        let y = 1.0 - x;
        Place { x, y, excess: (a + b).mul_add(x, -a) }
    }
}

/// P(F ≤ f) or P(F > f) for F = (X / a) / (Y / b) with X and Y gamma variables of shapes a and b.
pub(super) fn ratio_tail(side: Side, a: f64, b: f64, f: f64) -> f64 {
    if !are_shapes(a, b) || f.is_nan() {
        return f64::NAN;
    }
    if f <= 0.0 || f == f64::INFINITY {
        return at_end(side, f > 0.0);
    }
    tail_at(a, b, &Place::at_ratio(a, b, f)).probability(side)
}

/// The ratio with this probability.
pub(super) fn ratio_quantile(probability: Probability, a: f64, b: f64) -> f64 {
    if !are_shapes(a, b) {
        return f64::NAN;
    }
    invert(probability, 1.0, |f| tail_at(a, b, &Place::at_ratio(a, b, f)))
}

/// P(X ≤ x) or P(X > x) for a beta variable with shapes a and b.
pub(super) fn share_tail(side: Side, a: f64, b: f64, x: f64) -> f64 {
    if !are_shapes(a, b) || x.is_nan() {
        return f64::NAN;
    }
    if x <= 0.0 || x >= 1.0 {
        return at_end(side, x > 0.0);
    }
    tail_at(a, b, &Place::at_share(a, b, x)).probability(side)
}

/// The share with this probability.
pub(super) fn share_quantile(probability: Probability, a: f64, b: f64) -> f64 {
    let ratio = ratio_quantile(probability, a, b);
    if ratio == f64::INFINITY { 1.0 } else { a * ratio / (a * ratio + b) }
}

fn are_shapes(a: f64, b: f64) -> bool {
    a > 0.0 && b > 0.0 && a.is_finite() && b.is_finite()
}

fn at_end(side: Side, upper_end: bool) -> f64 {
    if (side == Side::Lower) == upper_end { 1.0 } else { 0.0 }
}

/// The tail that converges: the lower one below about the mean, else the upper one, which is the
/// lower one of 1 − X.
fn tail_at(a: f64, b: f64, place: &Place) -> Tail {
    let &Place { x, y, excess } = place;
    let ln_density = ln_beta_density(a, b, x, y, excess);
    if excess <= y - x {
        Tail { side: Side::Lower, ln_density, factor: fraction(a, b, x, y, excess) }
    } else {
        Tail { side: Side::Upper, ln_density, factor: fraction(b, a, y, x, -excess) }
    }
}

/// The lower tail over x^a y^b / B(a, b), by the continued fraction of A. R. DiDonato and
/// A. H. Morris (1992), "Algorithm 708: significant digit computation of the incomplete beta
/// function ratios", equation 9, evaluated forwards.
///
/// ```text
/// 1 / (β₀ + α₁ / (β₁ + α₂ / (β₂ + …)))
/// αₙ = (a + n − 1)(a + b + n − 1) n (b − n) x² / (a + 2n − 1)²
/// βₙ = n + n (b − n) x / (a + 2n − 1) + (a + n)(a y − b x + 1 + n (1 + y)) / (a + 2n + 1)
/// ```
fn fraction(a: f64, b: f64, x: f64, y: f64, excess: f64) -> f64 {
    let mut value = a * (1.0 - excess) / (a + 1.0);
    let (mut c, mut d) = (value, 0.0);
    for n in 1..MOST_TERMS {
        let n = n as f64;
        let odd = a + 2.0 * n - 1.0;
        let common = n * (b - n) * x / odd;
        let numerator = common * ((a + n - 1.0) / odd) * ((a + b + n - 1.0) * x);
        let denominator = n + common + (a + n) / (odd + 2.0) * (1.0 - excess + n * (1.0 + y));
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
