//! The law of the largest root of noise, and the roots beyond it.

use nalgebra::DMatrix;

use super::evidence::EQUAL_NOISE;
use super::quadrature::{Quadrature, gauss_legendre};
use super::subject::Subject;
use super::verdict::{Answer, Comparison, Criterion};
use crate::components::Scaling;
use crate::components::spectrum::{roots_workspace, symmetric_roots};
use crate::error::Result;

/// Each root in sequence against the largest root of noise of the size that is left.
///
/// After k components N = n − 1 − k degrees of freedom and q = p − k directions are left. With
/// λ̄ the mean of the roots left, the next root is brought to
///
/// ```text
/// s = (N λ_{k+1} / λ̄ − μ) / σ,  μ = (√(N − 1) + √q)²,  σ = (√(N − 1) + √q) (1/√(N − 1) + 1/√q)^(1/3)
/// ```
///
/// (Johnstone 2001, equations 1.3 and 1.4; the sequence is that of Patterson, Price and Reich
/// 2006) and its tail under the law of order one must lie below the level. The size of the noise is
/// estimated by the mean of the roots left, the tested one included, which makes the test cautious
/// when few are left.
pub(super) fn tracy_widom(subject: &Subject) -> Result<Answer> {
    let checked = subject.needs_equal_rows().and_then(|()| subject.needs_components(3));
    if let Err(reason) = checked {
        return Ok(Err(reason));
    }
    let level = subject.options.chosen_level();
    let law = Law::new();
    let mut values = Vec::new();
    for k in 0..subject.roots.len() - 1 {
        let value = law.upper_tail(statistic(&subject.roots, k, subject.n, subject.p))?;
        values.push(value);
        if !(value < level) {
            break;
        }
    }
    let thresholds = vec![level; values.len()];
    let answer = Comparison::new("p-value", Criterion::Below, values, thresholds);
    Ok(Ok(match subject.pca.scaling() {
        Scaling::Covariance => answer,
        Scaling::Correlation => answer.with_remark(EQUAL_NOISE),
    }))
}

/// s of the formula above.
pub(super) fn statistic(roots: &[f64], k: usize, n: usize, p: usize) -> f64 {
    let (freedom, q) = ((n - 1 - k) as f64, (p - k) as f64);
    let mean = roots[k..].iter().sum::<f64>() / q;
    let (rows, columns) = ((freedom - 1.0).sqrt(), q.sqrt());
    let centre = (rows + columns).powi(2);
    let scale = (rows + columns) * (1.0 / rows + 1.0 / columns).cbrt();
    (freedom * roots[k] / mean - centre) / scale
}

/// The Tracy–Widom law of order one, by its Fredholm determinant.
///
/// ```text
/// F(s) = det(1 − B),  B(x, y) = Ai(x + y + s) on x, y > 0
/// ```
///
/// (P. L. Ferrari and H. Spohn (2005), "A determinantal formula for the GOE Tracy–Widom
/// distribution", Journal of Physics A 38, L557–L561), replaced by the determinant of the kernel at
/// Gauss–Legendre nodes, which converges exponentially (F. Bornemann (2010), "On the numerical
/// evaluation of Fredholm determinants", Mathematics of Computation 79, 871–915).
pub(super) struct Law {
    rule: Quadrature,
}

/// Enough for all digits of the kernel on the lengths below.
const NODES: usize = 44;

/// Where the law has no mass a double could show: F(−9) is about 1e-14.
const LEAST: f64 = -9.0;

impl Law {
    pub(super) fn new() -> Self {
        Law { rule: gauss_legendre(NODES) }
    }

    /// P(S > s), as such and not as one minus something, so that far tails keep their digits.
    pub(super) fn upper_tail(&self, s: f64) -> Result<f64> {
        if s.is_nan() {
            return Ok(f64::NAN);
        }
        if s < LEAST {
            return Ok(1.0);
        }
        if s > 150.0 {
            // exp(−2/3 s^1.5) is below the smallest double.
            return Ok(0.0);
        }
        // Beyond, the kernel is below the rounding of its largest part.
        let length = (16.0 - s).max(12.0);
        let roots: Vec<f64> = self.rule.weights.iter().map(|w| (w * length).sqrt()).collect();
        let kernel = DMatrix::from_fn(NODES, NODES, |i, j| {
            // Only the lower triangle is read.
            if i < j {
                return 0.0;
            }
            roots[i] * roots[j] * airy(s + length * (self.rule.nodes[i] + self.rule.nodes[j]))
        });
        let mut ascending = vec![0.0; NODES];
        symmetric_roots(&kernel, &mut ascending, &mut roots_workspace(NODES))?;
        Ok(-ascending.iter().map(|root| (-root).ln_1p()).sum::<f64>().exp_m1())
    }
}

/// Airy's function Ai for x ≥ −12, to an absolute error of some 1e-12 below zero and a relative
/// one of some 1e-14 above one.
///
/// Its integral along a line parallel to the real axis, at height c,
///
/// ```text
/// Ai(x) = (1/π) exp(c³/3 − c x) ∫₀^∞ exp(−c t²) cos(t³/3 + (x − c²) t) dt
/// ```
///
/// (NIST Digital Library of Mathematical Functions, 9.5.4, with the path moved; c = √x leads
/// through the saddle point), by the trapezoidal rule, whose error falls like exp(−π²/(c h²)).
pub(super) fn airy(x: f64) -> f64 {
    let c = if x > 1.0 { x.sqrt() } else { 1.0 };
    let h = 0.5 / c.sqrt().max(4.0);
    let slope = x - c * c;
    let mut sum = 0.5;
    let mut t = 0.0;
    loop {
        t += h;
        let envelope = (-c * t * t).exp();
        if envelope < 1e-18 {
            break;
        }
        sum += envelope * (t * t * t / 3.0 + slope * t).cos();
    }
    sum * h / std::f64::consts::PI * (c * c * c / 3.0 - c * x).exp()
}
