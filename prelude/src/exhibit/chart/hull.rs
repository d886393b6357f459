//! Convex hulls: the smallest convex outline around some points.

/// The corners of the hull, counted round; two for points on a line, one for a single point.
///
/// Points are sorted and the lower and the upper chain built by turning one way only (A. M. Andrew
/// (1979), "Another efficient algorithm for convex hulls in two dimensions", Information
/// Processing Letters 9, 216–219). Points that are not finite are passed over.
pub(super) fn hull(points: impl IntoIterator<Item = (f64, f64)>) -> Vec<(f64, f64)> {
    let finite = |point: &(f64, f64)| point.0.is_finite() && point.1.is_finite();
    let mut sorted: Vec<(f64, f64)> = points.into_iter().filter(finite).collect();
    sorted.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.total_cmp(&b.1)));
    sorted.dedup();
    if sorted.len() < 3 {
        return sorted;
    }
    let mut corners = chain(sorted.iter().copied());
    let back = chain(sorted.iter().rev().copied());
    // Each chain ends where the other begins.
    corners.pop();
    corners.extend(&back[..back.len() - 1]);
    corners
}

/// The corners of one side, never turning right.
fn chain(points: impl Iterator<Item = (f64, f64)>) -> Vec<(f64, f64)> {
    let mut corners: Vec<(f64, f64)> = Vec::new();
    for point in points {
        while let [.., a, b] = corners[..]
            && cross(a, b, point) <= 0.0
        {
            corners.pop();
        }
        corners.push(point);
    }
    corners
}

/// Twice the area of the triangle, positive when it turns left.
fn cross(a: (f64, f64), b: (f64, f64), c: (f64, f64)) -> f64 {
    (b.0 - a.0) * (c.1 - a.1) - (b.1 - a.1) * (c.0 - a.0)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_square_with_points_inside_has_four_corners() {
        let points = [(0.0, 0.0), (1.0, 1.0), (0.5, 0.5), (1.0, 0.0), (0.0, 1.0), (0.5, 0.0)];
        let corners = hull(points);
        assert_eq!(corners, [(0.0, 0.0), (1.0, 0.0), (1.0, 1.0), (0.0, 1.0)]);
    }

    #[test]
    fn every_point_lies_inside() {
        let points: Vec<(f64, f64)> = (0..200)
            .map(|i| (f64::from(i) * 1.7, f64::from(i) * 0.31))
            .map(|(a, b)| (a.sin(), b.cos()))
            .collect();
        let corners = hull(points.iter().copied());
        for (place, a) in corners.iter().enumerate() {
            let b = corners[(place + 1) % corners.len()];
            assert!(points.iter().all(|&point| cross(*a, b, point) >= -1e-12));
        }
    }

    #[test]
    fn few_points_and_points_on_a_line_do_no_harm() {
        assert!(hull([]).is_empty());
        assert_eq!(hull([(1.0, 2.0), (1.0, 2.0)]), [(1.0, 2.0)]);
        assert_eq!(hull([(0.0, 0.0), (1.0, 1.0), (2.0, 2.0)]), [(0.0, 0.0), (2.0, 2.0)]);
        assert_eq!(hull([(f64::NAN, 0.0), (1.0, 1.0)]), [(1.0, 1.0)]);
    }
}
