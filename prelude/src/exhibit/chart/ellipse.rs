//! Concentration ellipses: where the stated share of a normal distribution lies.
//!
//! For a group with mean m and covariance S (divisor n − 1) in the plane of two components, the
//! ellipse holds the points x with
//!
//! ```text
//! (x − m)ᵀ S⁻¹ (x − m) ≤ q,   q = −2 ln(1 − coverage)
//! ```
//!
//! q is the quantile of the chi-square distribution with two degrees of freedom, which has this
//! closed form. Mean and covariance are taken as known, so for small groups the ellipse covers
//! less than it states. Source: T. W. Anderson (2003), An Introduction to Multivariate
//! Statistical Analysis, third edition, section 3.3 (from memory).

/// An ellipse in data coordinates.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Ellipse {
    pub centre: (f64, f64),
    /// The longer and the shorter semi-axis.
    pub semi_axes: (f64, f64),
    /// The direction of the longer one, in radians.
    pub angle: f64,
}

impl Ellipse {
    /// The ellipse of some points; `None` for fewer than three or when they lie on a line.
    pub fn around(points: &[(f64, f64)], coverage: f64) -> Option<Self> {
        if points.len() < 3 {
            return None;
        }
        let n = points.len() as f64;
        let centre = mean(points);
        let (mut xx, mut xy, mut yy) = (0.0, 0.0, 0.0);
        for (x, y) in points {
            let (dx, dy) = (x - centre.0, y - centre.1);
            xx += dx * dx;
            xy += dx * dy;
            yy += dy * dy;
        }
        let divisor = n - 1.0;
        let (xx, xy, yy) = (xx / divisor, xy / divisor, yy / divisor);
        // Roots of the two by two covariance; the difference form loses no digits.
        let half_difference = (xx - yy) / 2.0;
        let radius = half_difference.hypot(xy);
        let middle = (xx + yy) / 2.0;
        let longer = middle + radius;
        let shorter = (xx * yy - xy * xy) / longer;
        // Points on a line leave only rounding error in the second root.
        // A comparison that a NaN fails, too.
        let flat = shorter.partial_cmp(&(longer * 1e-12)) != Some(std::cmp::Ordering::Greater);
        if flat || !longer.is_finite() {
            return None;
        }
        let quantile = -2.0 * (-coverage).ln_1p();
        Some(Ellipse {
            centre,
            semi_axes: ((longer * quantile).sqrt(), (shorter * quantile).sqrt()),
            angle: xy.atan2(half_difference) / 2.0,
        })
    }

    /// Half the width and half the height of the box around it.
    pub fn half_box(&self) -> (f64, f64) {
        let (sin, cos) = self.angle.sin_cos();
        let (a, b) = self.semi_axes;
        ((a * cos).hypot(b * sin), (a * sin).hypot(b * cos))
    }
}

/// The mean of some points; not a number when there are none.
pub(super) fn mean(points: &[(f64, f64)]) -> (f64, f64) {
    let n = points.len() as f64;
    let sum = points.iter().fold((0.0, 0.0), |sum, point| (sum.0 + point.0, sum.1 + point.1));
    (sum.0 / n, sum.1 / n)
}

#[cfg(test)]
mod tests {
    use super::*;

    // Points along the rim.
    fn rim(ellipse: &Ellipse, n: usize) -> impl Iterator<Item = (f64, f64)> + '_ {
        let (sin, cos) = ellipse.angle.sin_cos();
        (0..n).map(move |i| {
            let (s, c) = (i as f64 / n as f64 * std::f64::consts::TAU).sin_cos();
            let (u, v) = (ellipse.semi_axes.0 * c, ellipse.semi_axes.1 * s);
            (ellipse.centre.0 + u * cos - v * sin, ellipse.centre.1 + u * sin + v * cos)
        })
    }

    #[test]
    fn the_rim_is_where_the_formula_says() {
        let points = [(1.0, 2.0), (3.0, 1.0), (4.0, 5.0), (-2.0, 0.5), (0.0, 3.0)];
        let ellipse = Ellipse::around(&points, 0.95).unwrap();
        // The documented formula, coded naively: S inverted by Cramer's rule.
        let m = mean(&points);
        let s = |f: fn(f64, f64) -> f64| {
            points.iter().map(|p| f(p.0 - m.0, p.1 - m.1)).sum::<f64>() / 4.0
        };
        let (xx, xy, yy) = (s(|x, _| x * x), s(|x, y| x * y), s(|_, y| y * y));
        let determinant = xx * yy - xy * xy;
        // Quantile of chi-square with 2 degrees of freedom at 0.95: 5.991, NIST/SEMATECH
        // e-Handbook of Statistical Methods, section 1.3.6.7.4, table of upper critical values (from memory).
        for (x, y) in rim(&ellipse, 16) {
            let (dx, dy) = (x - m.0, y - m.1);
            let q = (yy * dx * dx - 2.0 * xy * dx * dy + xx * dy * dy) / determinant;
            assert!((q - 5.991).abs() < 5e-4, "{q}");
        }
    }

    #[test]
    fn the_box_holds_the_rim_tightly() {
        let points = [(1.0, 2.0), (3.0, 1.0), (4.0, 5.0), (-2.0, 0.5)];
        let ellipse = Ellipse::around(&points, 0.9).unwrap();
        let half = ellipse.half_box();
        let reach = rim(&ellipse, 3600).fold((0.0f64, 0.0f64), |reach, (x, y)| {
            (reach.0.max(x - ellipse.centre.0), reach.1.max(y - ellipse.centre.1))
        });
        assert!((half.0 - reach.0).abs() < 1e-4 && (half.1 - reach.1).abs() < 1e-4);
    }

    #[test]
    fn too_few_points_or_a_line_have_none() {
        assert_eq!(Ellipse::around(&[(0.0, 0.0), (1.0, 1.0)], 0.95), None);
        assert_eq!(Ellipse::around(&[(0.0, 0.0), (1.0, 1.0), (2.0, 2.0)], 0.95), None);
        assert_eq!(Ellipse::around(&[(1.0, 1.0); 5], 0.95), None);
    }
}
