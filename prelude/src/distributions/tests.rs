//! Values in many digits, printed tables and ends. `tests/references/distributions.py` in the
//! workspace made the values by integrating densities numerically.

use super::*;
use crate::compare::{assert_relative, assert_zero};

const MANY_DIGITS: &str = include_str!("../../../tests/references/distributions.csv");

/// What the library says for one row of the file.
fn computed(function: &str, first: f64, second: f64, argument: f64) -> f64 {
    match function {
        "normal_upper" => normal_upper_tail(argument),
        "normal_upper_quantile" => normal_upper_quantile(argument),
        "chi_squared_lower" => chi_squared_lower_tail(argument, first),
        "chi_squared_upper" => chi_squared_upper_tail(argument, first),
        "chi_squared_lower_quantile" => chi_squared_quantile(argument, first),
        "chi_squared_upper_quantile" => chi_squared_upper_quantile(argument, first),
        "f_lower" => f_lower_tail(argument, first, second),
        "f_upper" => f_upper_tail(argument, first, second),
        "f_upper_quantile" => f_upper_quantile(argument, first, second),
        "t_two" => t_two_tails(argument, first),
        "beta_lower" => beta_lower_tail(argument, first, second),
        "beta_upper" => beta_upper_tail(argument, first, second),
        other => panic!("{other}"),
    }
}

#[test]
fn tails_and_quantiles_agree_with_many_digits() {
    let mut n_rows = 0;
    for line in MANY_DIGITS.lines().skip(2) {
        let fields: Vec<&str> = line.split(',').collect();
        let number = |place: usize| fields[place].parse::<f64>().unwrap();
        let actual = computed(fields[0], number(1), number(2), number(3));
        assert_relative(actual, number(4), 1e-12, line);
        n_rows += 1;
    }
    assert!(n_rows > 1000, "{n_rows} rows");
}

// R 4.2.2 with `options(digits = 15)`, printed to 16 digits; each call stands behind its value.
#[test]
fn the_statistics_language_gives_the_same() {
    let pairs = [
        (f_quantile(0.95, 4.0, 20.0), 2.866081402015659), // qf(0.95, 4, 20)
        (f_upper_quantile(1e-9, 3.5, 40.0), 24.33160582964642), // qf(1e-9, 3.5, 40, lower = F)
        (t_quantile(0.975, 7.3), 2.345066736547702),      // qt(0.975, 7.3)
        (t_upper_quantile(1e-12, 12.0), 28.68765664933176), // qt(1e-12, 12, lower = F)
        (t_quantile(0.3, 4.0), -0.5686490630497055),      // qt(0.3, 4)
        (t_upper_tail(4.5, 11.0), 0.0004506045049368936), // pt(4.5, 11, lower = F)
        (beta_quantile(0.99, 2.5, 14.0), 0.4013188862935432), // qbeta(0.99, 2.5, 14)
        (beta_upper_quantile(1e-6, 1.5, 8.0), 0.8456293003013048), // qbeta(1e-6, 1.5, 8, lower = F)
        (beta_quantile(0.05, 0.5, 300.0), 6.559008732518636e-06), // qbeta(0.05, 0.5, 300)
        (beta_upper_tail(0.75, 4.0, 9.0), 0.0003916621208190919), // pbeta(0.75, 4, 9, lower = F)
        (chi_squared_quantile(0.999, 6.5), 23.39841192711507), // qchisq(0.999, 6.5)
        (chi_squared_quantile(1e-9, 2.5), 1.394488337536075e-07), // qchisq(1e-9, 2.5)
        (normal_quantile(1.0 - 1e-9), 5.997807015007687), // qnorm(1e-9, lower = F)
        (f_lower_tail(0.2, 3.0, 9.0), 0.1062121080894225), // pf(0.2, 3, 9)
    ];
    for (place, (actual, expected)) in pairs.into_iter().enumerate() {
        // 1 − 1e-9 in doubles has a tail that is off by up to 6e-8, and a quantile by that over z².
        let allowed = if place == 12 { 2e-9 } else { 1e-12 };
        assert_relative(actual, expected, allowed, &format!("value {place}"));
    }
}

#[test]
fn two_distributions_have_closed_forms() {
    // Two degrees of freedom: P(X > x) = e^(−x/2). Cauchy: P(T > t) = artan(1/t) / π.
    for tail in [0.9, 0.5, 0.05, 1e-9, 1e-100, 1e-300_f64] {
        let allowed = if tail > 0.5 { 1e-14 } else { 4e-15 };
        let x = chi_squared_upper_quantile(tail, 2.0);
        assert_relative(x, -2.0 * tail.ln(), allowed, "chi-squared");
    }
    for t in [0.1, 1.0, 12.7, 1e6, 1e150] {
        let expected = (1.0_f64 / t).atan() / std::f64::consts::PI;
        assert_relative(t_upper_tail(t, 1.0), expected, 1e-13, "Cauchy");
    }
    // P(X ≤ x) = x^a for b = 1.
    assert_relative(beta_lower_tail(1e-80, 3.5, 1.0), 1e-280, 1e-12, "power");
}

#[test]
fn quantiles_and_tails_undo_one_another() {
    for (d1, d2) in [(0.3, 0.7), (1.0, 9.5), (40.0, 3.0), (1e5, 12.0), (3.0, 1e6), (2e5, 7e5)] {
        for tail in [0.999_999, 0.9, 0.5, 0.1, 1e-4, 1e-20, 1e-80] {
            let x = f_upper_quantile(tail, d1, d2);
            // A quantile rounded to a double has a tail that differs by its slope times that.
            assert_relative(f_upper_tail(x, d1, d2), tail, 1e-11, &format!("F {d1} {d2} {tail}"));
            let x = chi_squared_quantile(tail, d1);
            if x > 0.0 {
                let reached = chi_squared_lower_tail(x, d1);
                assert_relative(reached, tail, 1e-11, &format!("chi-squared {d1} {tail}"));
            }
        }
    }
    for z in [-7.0, -2.5, -0.1, 0.0, 0.4, 3.0] {
        assert_zero(normal_quantile(1.0 - normal_upper_tail(z)) - z, 1e-4, "normal");
        assert_zero(normal_upper_quantile(normal_upper_tail(z)) - z, 1e-4, "normal");
    }
}

#[test]
fn ends_and_impossible_arguments() {
    assert_eq!(chi_squared_upper_tail(-1.0, 3.0), 1.0);
    assert_eq!(f_upper_tail(f64::INFINITY, 3.0, 4.0), 0.0);
    assert_eq!(beta_lower_tail(1.5, 3.0, 4.0), 1.0);
    assert_eq!(chi_squared_quantile(1.0, 3.0), f64::INFINITY);
    assert_eq!(chi_squared_upper_quantile(1.0, 3.0), 0.0);
    assert_eq!(beta_upper_quantile(0.0, 3.0, 4.0), 1.0);
    assert_eq!(normal_quantile(0.0), f64::NEG_INFINITY);
    assert_eq!(normal_quantile(0.5), 0.0);
    assert_eq!(t_upper_quantile(0.0, 4.0), f64::INFINITY);
    assert_eq!(normal_upper_tail(f64::NEG_INFINITY), 1.0);
    for value in [
        chi_squared_upper_tail(1.0, 0.0),
        chi_squared_upper_tail(f64::NAN, 1.0),
        chi_squared_quantile(1.5, 3.0),
        chi_squared_quantile(f64::NAN, 3.0),
        f_quantile(0.5, -1.0, 4.0),
        f_upper_tail(1.0, 2.0, f64::INFINITY),
        beta_quantile(-0.1, 1.0, 1.0),
        normal_quantile(f64::NAN),
        normal_quantile(1.1),
        t_two_tails(1.0, f64::NAN),
    ] {
        assert!(value.is_nan(), "{value}");
    }
}
