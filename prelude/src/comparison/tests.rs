//! Properties, closed forms and faults. Values from outside programs are in the workspace's
//! `tests/tests/references`.

use nalgebra::{DMatrix, DVector, dmatrix};
use rand_distr::{Distribution, StandardNormal};
use rand_xoshiro::rand_core::SeedableRng;

use super::{
    ProcrustesOptions, ProcrustesTestOptions, Similarity, congruence, principal_angles, procrustes,
    procrustes_test, procrustes_with,
};
use crate::compare::{assert_matrix, assert_relative, assert_zero};
use crate::error::Error;
use crate::exhibit::Exhibit;
use crate::random::Generator;
use crate::table::NamedMatrix;

fn noise(n: usize, p: usize, seed: u64) -> DMatrix<f64> {
    let mut generator = Generator::seed_from_u64(seed);
    DMatrix::from_fn(n, p, |_, _| StandardNormal.sample(&mut generator))
}

fn named(values: DMatrix<f64>) -> NamedMatrix {
    let rows: Vec<String> = (1..=values.nrows()).map(|j| format!("V{j}")).collect();
    let columns: Vec<String> = (1..=values.ncols()).map(|k| format!("C{k}")).collect();
    NamedMatrix::new(values, rows, columns).unwrap()
}

#[test]
fn congruence_knows_its_own_columns_in_any_order_sign_and_length() {
    let first = noise(8, 3, 1);
    let second = DMatrix::from_columns(&[first.column(2) * -3.0, first.column(0) * 1e-200]);
    let result = congruence(&named(first), &named(second)).unwrap();
    let pairs: Vec<(usize, usize)> =
        result.pairs().iter().map(|pair| (pair.first_idx, pair.second_idx)).collect();
    assert_eq!(pairs, [(0, 1), (2, 0)]);
    assert_relative(result.pairs()[0].coefficient, 1.0, 1e-14, "itself");
    assert_relative(result.pairs()[1].coefficient, -1.0, 1e-14, "turned round");
    assert!(result.pairs().iter().all(|pair| pair.similarity() == Similarity::Equal));
    assert_eq!(result.first_alone(), ["C2"]);
    let text = result.exhibit().text("text/plain").unwrap().to_owned();
    assert!(text.contains("C2") && text.contains("can be taken for equal"), "{text}");
}

#[test]
fn verdicts_change_at_the_published_limits() {
    // Lorenzo-Seva and ten Berge (2006): 0.85–0.94 fair, 0.95 and above equal. A column (1, 0) and
    // one at the angle whose cosine is the coefficient.
    for (cosine, verdict) in [
        (0.951, Similarity::Equal),
        (0.949, Similarity::Fair),
        (0.851, Similarity::Fair),
        (0.849, Similarity::Low),
    ] {
        let sine = (1.0_f64 - cosine * cosine).sqrt();
        let result =
            congruence(&named(dmatrix![1.0; 0.0]), &named(dmatrix![-cosine; sine])).unwrap();
        assert_relative(result.pairs()[0].coefficient, -cosine, 1e-14, "cosine");
        assert_eq!(result.pairs()[0].similarity(), verdict);
    }
}

#[test]
fn procrustes_undoes_what_was_done() {
    let first = noise(9, 3, 2);
    let turn = noise(3, 3, 3).qr().q();
    // A turn alone.
    let result = procrustes(&named(first.clone()), &named(&first * &turn)).unwrap();
    assert_matrix(result.rotation_matrix(), &turn.transpose(), 1e-13, "turned back");
    assert_zero(result.residual_sum_of_squares(), 1e-26, "nothing is left");
    assert_zero(result.m_squared(), 1e-13, "same shape");
    // Turned, stretched by 4 and shifted.
    let mut moved = 4.0 * &first * &turn;
    for mut row in moved.row_iter_mut() {
        row += DVector::from_vec(vec![10.0, -3.0, 1.0]).transpose();
    }
    let options = ProcrustesOptions::for_scores();
    let result = procrustes_with(&named(first.clone()), &named(moved), options).unwrap();
    assert_relative(result.scale(), 0.25, 1e-13, "stretch");
    assert_matrix(result.fitted(), &first, 1e-13, "laid on one another");
}

#[test]
fn no_turn_of_the_plane_fits_better() {
    // All turns and reflections of the plane, in steps of a thousandth of a circle.
    let (first, second) = (noise(7, 2, 4), noise(7, 2, 5));
    let result = procrustes(&named(first.clone()), &named(second.clone())).unwrap();
    for step in 0..1000 {
        let (sine, cosine) = (std::f64::consts::TAU * f64::from(step) / 1000.0).sin_cos();
        for reflect in [1.0, -1.0] {
            let turn = dmatrix![cosine, -sine * reflect; sine, cosine * reflect];
            let left = (&first - &second * turn).norm_squared();
            assert!(left >= result.residual_sum_of_squares() - 1e-12);
        }
    }
    let swapped = procrustes(&named(second.clone()), &named(first.clone())).unwrap();
    assert_relative(swapped.m_squared(), result.m_squared(), 1e-12, "whichever comes first");
    let text = result.exhibit().text("text/plain").unwrap().to_owned();
    assert!(text.contains("turned and reflected to fit"), "{text}");
}

#[test]
fn p_values_of_unrelated_rows_are_uniform() {
    // Under no relation each p-value of 200 permutations is below 0.1 with a probability of just
    // under 0.1; of 200 tests, 20 are expected with a standard deviation of 4.2.
    let options = ProcrustesTestOptions::new().permutations(199);
    let small = (0..200)
        .filter(|case| {
            let (first, second) = (noise(8, 2, 2 * case), noise(8, 2, 2 * case + 1));
            let test = procrustes_test(&named(first), &named(second), options.seed(*case)).unwrap();
            test.p_value() <= 0.1
        })
        .count();
    assert!((6..=36).contains(&small), "{small} of 200");
}

#[test]
fn the_test_depends_on_its_seed_and_not_on_threads() {
    let (first, second) = (named(noise(10, 3, 1)), named(noise(10, 3, 2)));
    let run = |threads: usize, seed: u64| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        pool.install(|| {
            procrustes_test(&first, &second, ProcrustesTestOptions::new().seed(seed)).unwrap()
        })
    };
    assert!(run(1, 4) == run(3, 4));
    assert!(run(1, 4).n_as_large() != run(1, 5).n_as_large());
    let text = run(1, 4).exhibit().text("text/plain").unwrap().to_owned();
    assert!(text.contains("seed 4"), "{text}");
}

#[test]
fn angles_of_spaces_ignore_their_bases() {
    let (a, b) = (noise(9, 3, 1), noise(9, 2, 2));
    let angles = principal_angles(&named(a.clone()), &named(b.clone())).unwrap();
    let other = principal_angles(&named(&b * noise(2, 2, 3)), &named(&a * noise(3, 3, 4))).unwrap();
    for (x, y) in angles.radians().iter().zip(other.radians().iter()) {
        assert_relative(*x, *y, 1e-10, "angle");
    }
    assert_eq!((angles.ranks(), other.ranks()), ((3, 2), (2, 3)));
    // A space within the other; dependent columns count once.
    let inside = DMatrix::from_columns(&[a.column(0) + a.column(1), a.column(0) + a.column(1)]);
    let angles = principal_angles(&named(inside), &named(a)).unwrap();
    assert_eq!((angles.radians().len(), angles.ranks()), (1, (1, 3)));
    assert_zero(angles.radians()[0], 1e-14, "inside");
    // Perpendicular axes.
    let angles =
        principal_angles(&named(dmatrix![1.0; 0.0; 0.0]), &named(dmatrix![0.0; 5.0; 0.0])).unwrap();
    assert_relative(angles.largest_degrees(), 90.0, 1e-14, "right angle");
    assert!(angles.exhibit().text("text/plain").unwrap().contains("90.0 degrees"));
}

#[test]
fn matrices_with_other_rows_are_refused_by_name() {
    let matrix = |rows: &[&str]| {
        let names: Vec<String> = rows.iter().map(|row| (*row).to_owned()).collect();
        NamedMatrix::new(noise(rows.len(), 2, 1), names, ["1", "2"].map(String::from)).unwrap()
    };
    let first = matrix(&["a", "b", "c"]);
    let other = |rows: &[&str]| match congruence(&first, &matrix(rows)) {
        Err(Error::RowNamesDiffer { missing, extra, order }) => (missing, extra, order),
        other => panic!("{other:?}"),
    };
    assert_eq!(other(&["a", "b"]).0, ["c"]);
    assert_eq!(other(&["a", "b", "c", "d"]).1, ["d"]);
    assert_eq!(other(&["a", "c", "b"]).2, Some((2, "b".to_owned(), "c".to_owned())));
    assert!(matches!(
        congruence(&first, &matrix(&["a", "b", "c", "a"])),
        Err(Error::ShapeMismatch { expected: 3, found: 4, .. })
    ));
}

#[test]
fn what_has_no_direction_or_shape_is_refused() {
    let fine = named(noise(4, 2, 1));
    let mut empty = noise(4, 2, 2);
    empty.column_mut(1).fill(0.0);
    match congruence(&fine, &named(empty)) {
        Err(Error::ZeroColumns { columns, what: "the second matrix" }) => {
            assert_eq!(columns, ["C2"]);
        }
        other => panic!("{other:?}"),
    }
    let zero = named(DMatrix::zeros(4, 2));
    assert!(matches!(principal_angles(&zero, &fine), Err(Error::ZeroColumns { .. })));
    assert!(matches!(procrustes(&fine, &zero), Err(Error::ZeroColumns { .. })));
    // One point four times over has no shape once it may be shifted.
    let point = named(DMatrix::repeat(4, 2, 0.1));
    let options = ProcrustesOptions::for_scores();
    assert!(matches!(procrustes_with(&fine, &point, options), Err(Error::ZeroColumns { .. })));
    let three = named(noise(4, 3, 1));
    assert!(matches!(
        procrustes(&fine, &three),
        Err(Error::ShapeMismatch { expected: 2, found: 3, .. })
    ));
    let mut hole = noise(4, 2, 1);
    hole[(1, 0)] = f64::INFINITY;
    assert!(matches!(
        principal_angles(&fine, &named(hole)),
        Err(Error::NonFinite { row: 2, count: 1, .. })
    ));
    let two_rows = named(noise(2, 2, 1));
    assert!(matches!(
        procrustes_test(&two_rows, &two_rows, ProcrustesTestOptions::new()),
        Err(Error::TooFewRows { needed: 3, .. })
    ));
    assert!(matches!(
        procrustes_test(&fine, &fine, ProcrustesTestOptions::new().permutations(5)),
        Err(Error::OptionOutOfRange { .. })
    ));
}
