//! Ways that are asked for, and how many components are kept.

use nalgebra::DMatrix;

use super::weights::weighted_and_repeated;
use super::{BOTH, correlated, noise};
use crate::compare::{assert_all_relative, assert_columns_up_to_sign, assert_matrix, assert_zero};
use crate::components::{
    ComponentOptions, Decomposition, PrincipalComponents, RandomisedOptions, Route, Scaling,
    principal_components, principal_components_with,
};
use crate::error::Error;
use crate::table::DataMatrix;

const EXACT: [(Decomposition, Route); 3] = [
    (Decomposition::VariableCrossProduct, Route::VariableCrossProduct),
    (Decomposition::RowCrossProduct, Route::RowCrossProduct),
    (Decomposition::SingularValues, Route::SingularValues),
];

fn by(x: &DataMatrix, scaling: Scaling, decomposition: Decomposition) -> PrincipalComponents {
    let options = ComponentOptions::new(scaling).decomposition(decomposition);
    principal_components_with(x, options).unwrap()
}

pub(super) fn assert_orthonormal(pca: &PrincipalComponents, tolerance: f64) {
    let loadings = pca.loadings().values();
    let identity = DMatrix::identity(loadings.ncols(), loadings.ncols());
    assert_matrix(&(loadings.transpose() * loadings), &identity, tolerance, "orthonormal");
}

#[test]
fn every_exact_way_gives_the_same_components() {
    for (n, p) in [(40, 6), (6, 40), (12, 12), (5000, 8)] {
        let plain = DataMatrix::from_unnamed(correlated(n, p, 31)).unwrap();
        for x in [plain, weighted_and_repeated(n, p, 31).0] {
            for scaling in BOTH {
                let usual = principal_components(&x, scaling).unwrap();
                for (decomposition, route) in EXACT {
                    if n > 1000 && route == Route::RowCrossProduct {
                        continue; // its cost grows with the cube of n
                    }
                    let pca = by(&x, scaling, decomposition);
                    let what = format!("{n} x {p}, {scaling}, {route}");
                    assert_eq!((pca.route(), pca.rank()), (route, usual.rank()), "{what}");
                    assert!(pca.is_complete());
                    let (seen, expected) = (pca.variances(), usual.variances());
                    assert_all_relative(seen.as_slice(), expected.as_slice(), 1e-9, &what);
                    assert_columns_up_to_sign(pca.loadings(), usual.loadings(), 1e-8, &what);
                    assert_matrix(pca.scores(), usual.scores(), 1e-8, &what);
                }
            }
        }
    }
}

#[test]
fn a_cross_product_asked_for_in_spite_of_its_condition_stays_sound() {
    // Columns over twelve orders of magnitude, one constant, one a copy.
    for (n, p) in [(30, 8), (8, 30)] {
        let base = noise(n, p, 8);
        let x = DMatrix::from_fn(n, p, |i, j| match j {
            5 => 3.0,
            6 => 2.0 * base[(i, 0)],
            _ => base[(i, j)] * 10.0_f64.powi(-2 * (j.min(7) as i32)),
        });
        let x = DataMatrix::from_unnamed(x).unwrap();
        let full = by(&x, Scaling::Covariance, Decomposition::SingularValues);
        for (decomposition, route) in EXACT {
            let pca = by(&x, Scaling::Covariance, decomposition);
            assert_eq!(pca.route(), route);
            assert!(pca.rank() <= full.rank() && pca.rank() >= 4, "{route}: {}", pca.rank());
            assert_orthonormal(&pca, 1e-12);
            for (k, variance) in pca.variances().iter().enumerate() {
                let off = (variance - full.variances()[k]).abs();
                assert_zero(off, 1e-14 * full.variances()[0], "variance");
                assert!(*variance > pca.tolerance());
            }
            assert!(pca.scores().values().iter().all(|score| score.is_finite()));
        }
    }
}

#[test]
fn keeping_the_first_components_leaves_the_rest_of_the_answer_alone() {
    for (n, p) in [(40, 6), (6, 40)] {
        let x = DataMatrix::from_unnamed(correlated(n, p, 2)).unwrap();
        for scaling in BOTH {
            let all = principal_components(&x, scaling).unwrap();
            let options = ComponentOptions::new(scaling).keep(2);
            let two = principal_components_with(&x, options).unwrap();
            assert_eq!((two.n_components(), two.rank()), (2, all.rank()));
            assert!(!two.is_complete() && all.is_complete());
            assert!(two.loadings().values() == &all.loadings().columns(0, 2));
            assert!(two.scores().values() == &all.scores().columns(0, 2));
            assert!(two.total_variance() == all.total_variance());
            assert!(two.proportions() == all.proportions().rows(0, 2));
            let left = all.variances().iter().skip(2).sum::<f64>();
            assert_zero(two.left_out_variance() - left, 1e-12 * left, "left out");
            assert!(all.left_out_variance() == 0.0);
            assert!(two.reconstruct(2).is_ok());
            assert!(matches!(
                two.reconstruct(3),
                Err(Error::ComponentOutOfRange { asked: 3, available: 2 })
            ));
        }
        for asked in [0, 7] {
            let options = ComponentOptions::new(Scaling::Covariance).keep(asked);
            assert!(matches!(
                principal_components_with(&x, options),
                Err(Error::ComponentOutOfRange { asked: seen, .. }) if seen == asked
            ));
        }
    }
}

#[test]
fn options_that_cannot_be_met_are_refused() {
    let x = DataMatrix::from_unnamed(noise(20, 5, 1)).unwrap();
    let randomised = |options| Decomposition::Randomised(options);
    let try_with = |options| principal_components_with(&x, options).unwrap_err();
    let open = ComponentOptions::new(Scaling::Covariance);
    assert!(matches!(
        try_with(open.decomposition(randomised(RandomisedOptions::new()))),
        Error::OptionNeeded { option: "keep", .. }
    ));
    let bad = randomised(RandomisedOptions::new().oversampling(1));
    assert!(matches!(
        try_with(open.keep(2).decomposition(bad)),
        Error::OptionOutOfRange { option: "oversampling", .. }
    ));
    let bad = randomised(RandomisedOptions::new().power_iterations(101));
    assert!(matches!(
        try_with(open.keep(2).decomposition(bad)),
        Error::OptionOutOfRange { option: "power_iterations", .. }
    ));
}

#[test]
fn components_of_equal_variance_are_named() {
    // Spreads 3, 2, 2, 2, 1, 1 along six axes, turned; the equal ones are equal by construction.
    let mut centred = noise(50, 6, 3);
    for mut column in centred.column_iter_mut() {
        let mean = column.mean();
        column.add_scalar_mut(-mean);
    }
    let spreads = nalgebra::DVector::from_row_slice(&[3.0, 2.0, 2.0, 2.0, 1.0, 1.0]);
    let turned = noise(6, 6, 4).qr().q();
    let x = centred.qr().q() * DMatrix::from_diagonal(&spreads) * turned;
    let x = DataMatrix::from_unnamed(x).unwrap();
    for (decomposition, route) in EXACT {
        let pca = by(&x, Scaling::Covariance, decomposition);
        let expected = [vec!["PC2", "PC3", "PC4"], vec!["PC5", "PC6"]];
        assert_eq!(pca.tied(), expected, "{route}");
    }
    let apart = DataMatrix::from_unnamed(correlated(50, 6, 3)).unwrap();
    let pca = principal_components(&apart, Scaling::Covariance).unwrap();
    assert!(pca.tied().is_empty());
}
