//! Gauss–Legendre nodes and weights.

/// Places and weights of a rule on 0 to 1.
pub(super) struct Quadrature {
    pub(super) nodes: Vec<f64>,
    pub(super) weights: Vec<f64>,
}

/// The rule of this many points: exact for polynomials of degree 2m − 1. Newton's method on the
/// Legendre polynomial, whose roots are close to cosines of equally spaced angles (NIST Digital
/// Library of Mathematical Functions, 3.5(v) and 18.16).
pub(super) fn gauss_legendre(m: usize) -> Quadrature {
    let (mut nodes, mut weights) = (Vec::with_capacity(m), Vec::with_capacity(m));
    for k in 0..m {
        let mut x = (std::f64::consts::PI * (k as f64 + 0.75) / (m as f64 + 0.5)).cos();
        let mut slope = 1.0;
        // Convergence is quadratic from so close; the limit is never reached.
        for _ in 0..20 {
            let (mut before, mut value) = (1.0, x);
            for degree in 2..=m {
                let d = degree as f64;
                (before, value) = (value, ((2.0 * d - 1.0) * x * value - (d - 1.0) * before) / d);
            }
            slope = m as f64 * (x * value - before) / (x * x - 1.0);
            let step = value / slope;
            x -= step;
            if step.abs() <= 1e-15 {
                break;
            }
        }
        nodes.push(0.5 * (1.0 - x));
        weights.push(1.0 / ((1.0 - x * x) * slope * slope));
    }
    Quadrature { nodes, weights }
}
