//! What the tables say.

use nalgebra::{DMatrix, dmatrix};

use super::correlated;
use crate::components::{
    ComponentOptions, Decomposition, RandomisedOptions, Scaling, principal_components,
    principal_components_with,
};
use crate::exhibit::Exhibit;
use crate::table::DataMatrix;

fn plain(of: &dyn Exhibit) -> String {
    of.exhibit().text("text/plain").unwrap().split_whitespace().collect::<Vec<_>>().join(" ")
}

#[test]
fn a_table_of_components_says_how_they_were_made() {
    let x = DataMatrix::from_unnamed(correlated(30, 5, 1)).unwrap();
    let weighted = x.with_weights((0..30).map(|i| 1.0 + i as f64)).unwrap();
    let pca = principal_components(&weighted, Scaling::Correlation).unwrap();
    let text = plain(&pca);
    assert!(text.contains("30 rows of unequal weight and 5 variables"), "{text}");
    assert!(text.contains("by cross-product of the variables"), "{text}");
    assert!(!text.contains("left out") && !text.contains("searched"), "{text}");
    assert_eq!(plain(pca.fitted()), text);

    let options = RandomisedOptions::new().seed(4);
    let options = ComponentOptions::new(Scaling::Correlation)
        .keep(2)
        .decomposition(Decomposition::Randomised(options));
    let two = principal_components_with(&x, options).unwrap();
    let text = plain(&two);
    assert!(text.contains("Only the first 2 components kept"), "{text}");
    assert!(text.contains("5 directions searched at random, refined 4 times, seed 4"), "{text}");
    assert!(text.contains("residual") && text.contains("equation 4.3"), "{text}");
}

#[test]
fn a_table_of_components_names_ties() {
    let square = dmatrix![1.0, 1.0; 1.0, -1.0; -1.0, 1.0; -1.0, -1.0];
    let fit = |x: DMatrix<f64>| {
        principal_components(&DataMatrix::from_unnamed(x).unwrap(), Scaling::Covariance).unwrap()
    };
    let text = plain(&fit(square));
    assert!(text.contains("can tell: PC1 and PC2."), "{text}");
}
