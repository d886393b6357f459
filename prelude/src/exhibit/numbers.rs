//! Numbers as a reader wants them: a stated count of significant digits and no more.
//!
//! Everything that exhibits print goes through here, so that a chart's hover text, an HTML table
//! and its plain twin never disagree. Digits before the decimal point are never replaced by
//! zeros: with four significant digits 123456.7 is written 123457, since a reader would take
//! 123500 for the value itself. Values beyond 10¹⁵ or below 10⁻⁵ are written with an exponent.
//!
//! Tables write the ASCII hyphen for minus, because it survives a paste into a spreadsheet;
//! charts write the true minus sign through [`typographic`].

// Beyond these powers of ten a positional number is mostly zeros.
const LARGEST_POSITIONAL: i32 = 15;
const SMALLEST_POSITIONAL: i32 = -5;

/// Rounds to `digits` significant digits and keeps trailing zeros that are significant.
///
/// ```
/// use semiaxis::exhibit::significant;
///
/// assert_eq!(significant(2.0 / 3.0, 4), "0.6667");
/// assert_eq!(significant(12.0, 4), "12.00");
/// assert_eq!(significant(123456.7, 4), "123457");
/// assert_eq!(significant(0.0000012345, 3), "1.23e-6");
/// ```
pub fn significant(value: f64, digits: usize) -> String {
    let digits = digits.clamp(1, 17);
    if !value.is_finite() {
        return not_finite(value);
    }
    if value == 0.0 {
        return "0".to_owned();
    }
    // The exponent is read after rounding, so that 9.9996 with four digits counts as 10.00.
    let scientific = format!("{:.*e}", digits - 1, value);
    let exponent = exponent_of(&scientific);
    if !(SMALLEST_POSITIONAL..LARGEST_POSITIONAL).contains(&exponent) {
        return scientific;
    }
    let decimals = (digits as i32 - 1 - exponent).max(0) as usize;
    fixed(value, decimals)
}

/// As [`significant`], without trailing zeros: how stored data are shown.
///
/// A measurement written as 12.5 was not taken to five digits, so it is not shown as 12.500.
///
/// ```
/// use semiaxis::exhibit::stored;
///
/// assert_eq!(stored(12.5, 6), "12.5");
/// assert_eq!(stored(1.0 / 3.0, 6), "0.333333");
/// ```
pub fn stored(value: f64, digits: usize) -> String {
    let text = significant(value, digits);
    match text.split_once('e') {
        Some((mantissa, exponent)) => format!("{}e{exponent}", without_trailing_zeros(mantissa)),
        None => without_trailing_zeros(&text).to_owned(),
    }
}

/// Rounds to a fixed count of decimals; a negative number that rounds to zero loses its sign.
///
/// ```
/// use semiaxis::exhibit::fixed;
///
/// assert_eq!(fixed(0.26726, 3), "0.267");
/// assert_eq!(fixed(-0.0001, 3), "0.000");
/// ```
pub fn fixed(value: f64, decimals: usize) -> String {
    if !value.is_finite() {
        return not_finite(value);
    }
    let text = format!("{value:.decimals$}");
    match text.strip_prefix('-') {
        Some(rest) if rest.chars().all(|c| c == '0' || c == '.') => rest.to_owned(),
        _ => text,
    }
}

/// A share of one as per cent, with one decimal.
pub(crate) fn percent(share: f64) -> String {
    format!("{} %", fixed(share * 100.0, 1))
}

/// The same number with the true minus sign, for charts.
pub(crate) fn typographic(number: &str) -> String {
    number.replace('-', "\u{2212}")
}

/// A count with its noun; the plural adds an s.
pub(crate) fn counted(count: usize, noun: &str) -> String {
    match (count, noun) {
        (1, _) => format!("1 {noun}"),
        _ => format!("{} {noun}s", grouped(count)),
    }
}

/// A count with thousands set apart by narrow no-break spaces, from five digits on.
pub(crate) fn grouped(count: usize) -> String {
    let digits = count.to_string();
    if digits.len() < 5 {
        return digits;
    }
    let mut out = String::with_capacity(digits.len() + digits.len() / 3 * 3);
    for (place, digit) in digits.chars().enumerate() {
        if place > 0 && (digits.len() - place).is_multiple_of(3) {
            out.push('\u{202f}');
        }
        out.push(digit);
    }
    out
}

fn not_finite(value: f64) -> String {
    if value.is_nan() {
        "NaN".to_owned()
    } else if value > 0.0 {
        "inf".to_owned()
    } else {
        "-inf".to_owned()
    }
}

fn exponent_of(scientific: &str) -> i32 {
    // `{:e}` always writes an exponent, and it fits an i32 for every finite number.
    scientific.split_once('e').and_then(|(_, exponent)| exponent.parse().ok()).unwrap_or(0)
}

fn without_trailing_zeros(text: &str) -> &str {
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.') } else { text }
}

#[cfg(test)]
mod tests {
    use super::*;

    // Expectations in this module follow from the definition of rounding to significant digits,
    // worked by hand; they are not taken from the program.

    #[test]
    fn significant_digits_count_from_the_first_nonzero() {
        assert_eq!(significant(0.00123456, 3), "0.00123");
        assert_eq!(significant(-1.5, 2), "-1.5");
        assert_eq!(significant(99.95, 3), "100");
        assert_eq!(significant(9.9996, 4), "10.00");
        assert_eq!(significant(0.0, 4), "0");
        assert_eq!(significant(-0.0, 4), "0");
        assert_eq!(significant(1e-300, 2), "1.0e-300");
        assert_eq!(significant(-2.5e18, 3), "-2.50e18");
    }

    #[test]
    fn values_that_are_no_numbers_are_named() {
        assert_eq!(significant(f64::NAN, 4), "NaN");
        assert_eq!(significant(f64::INFINITY, 4), "inf");
        assert_eq!(fixed(f64::NEG_INFINITY, 2), "-inf");
    }

    #[test]
    fn stored_data_carry_no_invented_zeros() {
        assert_eq!(stored(12.5, 6), "12.5");
        assert_eq!(stored(100.0, 6), "100");
        assert_eq!(stored(0.1 + 0.2, 6), "0.3");
        assert_eq!(stored(1.5e-9, 6), "1.5e-9");
    }

    #[test]
    fn fixed_decimals_never_show_minus_zero() {
        assert_eq!(fixed(-0.0004, 3), "0.000");
        assert_eq!(fixed(-0.0006, 3), "-0.001");
        assert_eq!(percent(0.4618), "46.2 %");
        assert_eq!(percent(1.0), "100.0 %");
    }

    #[test]
    fn counts_read_as_words_do() {
        assert_eq!(counted(1, "unit"), "1 unit");
        assert_eq!(counted(0, "unit"), "0 units");
        assert_eq!(counted(20000, "unit"), "20\u{202f}000 units");
        assert_eq!(grouped(1234567), "1\u{202f}234\u{202f}567");
        assert_eq!(grouped(1234), "1234");
    }
}
