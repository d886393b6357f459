//! Densities that keep their digits for large parameters.
//!
//! x^a e^(−x) / Γ(a) and its like for the beta distribution are quotients of numbers that differ by
//! hundreds of powers of ten. Taking their logarithms apart and adding them loses digits in
//! proportion to the size of the parameters. Written about the mean instead, as a deviance and the
//! remainder of Stirling's formula, nothing large is subtracted: C. Loader (2000), "Fast and
//! accurate computation of binomial probabilities".

use std::f64::consts::PI;

/// The remainder of Stirling's formula, also for small a.
///
/// ```text
/// δ(a) = ln Γ(a + 1) − (a + ½) ln a + a − ½ ln 2π
/// ```
pub(super) fn stirling_remainder(a: f64) -> f64 {
    // δ(a) − δ(a + 1) = (a + ½) ln(1 + 1/a) − 1, from Γ(a + 2) = (a + 1) Γ(a + 1).
    let mut sum = 0.0;
    let mut a = a;
    while a < 12.0 {
        sum += (a + 0.5) * (1.0 / a).ln_1p() - 1.0;
        a += 1.0;
    }
    // The asymptotic series with Bernoulli's numbers B₂ₖ / (2k (2k − 1) a^(2k − 1)); from 12 on the
    // first term left out is below 1e-17.
    let s = 1.0 / (a * a);
    let series = 1.0 / 12.0
        - s * (1.0 / 360.0
            - s * (1.0 / 1260.0
                - s * (1.0 / 1680.0
                    - s * (1.0 / 1188.0 - s * (691.0 / 360_360.0 - s * (1.0 / 156.0))))));
    sum + series / a
}

/// u − ln(1 + u), given both u and 1 + u with all their digits.
pub(super) fn deviance(u: f64, one_plus_u: f64) -> f64 {
    if u.abs() > 0.5 {
        return u - one_plus_u.ln();
    }
    // With r = u / (2 + u): ln(1 + u) = 2 artanh r, and 2 r − u = −u r.
    let r = u / (2.0 + u);
    let square = r * r;
    let mut power = 1.0;
    let mut sum = 0.0;
    for k in 1..40 {
        let term = power / f64::from(2 * k + 1);
        sum += term;
        if term <= 1e-17 * sum {
            break;
        }
        power *= square;
    }
    r * (u - 2.0 * square * sum)
}

/// ln of x^a e^(−x) / Γ(a), which is the density of ln X for a gamma variable X of shape a.
pub(super) fn ln_gamma_density(a: f64, x: f64) -> f64 {
    let distance = a * deviance((x - a) / a, x / a);
    0.5 * (a / (2.0 * PI)).ln() - stirling_remainder(a) - distance
}

/// ln of x^a y^b / B(a, b) with y = 1 − x, which is the density of ln(X / (1 − X)) for a beta
/// variable X; `excess` is b x − a y, with all its digits.
pub(super) fn ln_beta_density(a: f64, b: f64, x: f64, y: f64, excess: f64) -> f64 {
    let n = a + b;
    let distance = a * deviance(excess / a, n * (x / a)) + b * deviance(-excess / b, n * (y / b));
    let remainder = stirling_remainder(n) - stirling_remainder(a) - stirling_remainder(b);
    0.5 * (a / n * (b / (2.0 * PI))).ln() + remainder - distance
}
