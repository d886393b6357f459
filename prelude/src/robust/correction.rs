//! Factors that make the scatter of a subset an estimate of the scatter of all normal rows.

use crate::distributions::{chi_squared_quantile, chi_squared_upper_tail};

/// The factor by which the scatter of the innermost share α of p-variate normal rows must grow:
///
/// ```text
/// c = α / P( χ²_{p+2} ≤ q ),  q the α-quantile of χ²_p
/// ```
///
/// C. Croux and G. Haesbroeck (1999), "Influence function and efficiency of the minimum covariance
/// determinant scatter matrix estimator", Journal of Multivariate Analysis 71, 161–190.
pub(crate) fn consistency(p: usize, share: f64) -> f64 {
    if share >= 1.0 {
        return 1.0;
    }
    let limit = chi_squared_quantile(share, p as f64);
    share / (1.0 - chi_squared_upper_tail(limit, (p + 2) as f64))
}

/// The factor that takes away the bias of the raw estimate from few rows.
///
/// G. Pison, S. Van Aelst and G. Willems (2002), "Small sample corrections for LTS and MCD",
/// Metrika 55, 111–123: simulated biases of the determinant's root follow 1 + γ / n^β for shares
/// 0.5 and 0.875; in more than two dimensions γ and β follow from two such curves in n / p², and
/// other shares are interpolated.
pub(crate) fn raw_small_sample(p: usize, n: usize, share: f64) -> f64 {
    RAW.factor(p, n, share)
}

/// The factor that takes away the bias of the reweighted estimate from few rows; source as at
/// [`raw_small_sample`].
pub(crate) fn reweighted_small_sample(p: usize, n: usize, share: f64) -> f64 {
    REWEIGHTED.factor(p, n, share)
}

/// A fitted curve of biases: 1 + γ / m^β.
#[derive(Clone, Copy)]
struct Curve {
    gamma: f64,
    beta: f64,
}

/// Curves for one share of rows.
struct AtShare {
    one: Curve,
    two: Curve,
    /// Curves in p of the bias at n = 2 p² and at n = 3 p².
    twice: Curve,
    thrice: Curve,
}

struct Corrections {
    half: AtShare,
    most: AtShare,
}

const fn curve(gamma: f64, beta: f64) -> Curve {
    Curve { gamma, beta }
}

// In one and two dimensions the source gives the logarithm of −γ.
const RAW: Corrections = Corrections {
    half: AtShare {
        one: curve(0.262024211897096, 0.604756680630497),
        two: curve(0.673292623522027, 0.691365864961895),
        twice: curve(-1.42764571687802, 1.26263336932151),
        thrice: curve(-1.06141115981725, 1.28907991440387),
    },
    most: AtShare {
        one: curve(-0.351584646688712, 1.01646567502486),
        two: curve(0.446537815635445, 1.06690782995919),
        twice: curve(-0.455179464070565, 1.11192541278794),
        thrice: curve(-0.294241208320834, 1.09649329149811),
    },
};

const REWEIGHTED: Corrections = Corrections {
    half: AtShare {
        one: curve(1.11098143415027, 1.5182890270453),
        two: curve(3.11101712909049, 1.91401056721863),
        twice: curve(-1.02842572724793, 1.67659883081926),
        thrice: curve(-0.26800273450853, 1.35968562893582),
    },
    most: AtShare {
        one: curve(-0.66046776772861, 0.88939595831888),
        two: curve(0.79473550581058, 1.10081930350091),
        twice: curve(-0.544482443573914, 1.25994483222292),
        thrice: curve(-0.343791072183285, 1.25159004257133),
    },
};

impl Corrections {
    fn factor(&self, p: usize, n: usize, share: f64) -> f64 {
        let (half, most) = (self.half.bias(p, n), self.most.bias(p, n));
        let bias = if share <= MOST {
            half + (most - half) / (MOST - 0.5) * (share - 0.5)
        } else {
            most + (1.0 - most) / (1.0 - MOST) * (share - MOST)
        };
        1.0 / bias
    }
}

/// The larger of the two shares that were simulated.
const MOST: f64 = 0.875;

impl AtShare {
    fn bias(&self, p: usize, n: usize) -> f64 {
        let (p_real, n) = (p as f64, n as f64);
        let low = |curve: Curve| 1.0 - curve.gamma.exp() / n.powf(curve.beta);
        match p {
            1 => low(self.one),
            2 => low(self.two),
            _ => {
                let at = |curve: Curve| (-curve.gamma / p_real.powf(curve.beta)).ln();
                let (twice, thrice) = (at(self.twice), at(self.thrice));
                let sizes = [2.0, 3.0].map(|times: f64| -(times * p_real * p_real).ln());
                let beta = (twice - thrice) / (sizes[0] - sizes[1]);
                let gamma = twice - beta * sizes[0];
                1.0 - gamma.exp() / n.powf(beta)
            }
        }
    }
}
