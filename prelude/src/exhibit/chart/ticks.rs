//! Round numbers along an axis.
//!
//! A step is 1, 2 or 5 times a power of ten, the largest that still gives about as many ticks as
//! were asked for. Ticks are counted in whole steps from zero, so that they carry no rounding
//! error and the axis shows a plain 0.

use crate::exhibit::numbers::{fixed, typographic};

/// Where an axis has ticks.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Ticks {
    step: f64,
    from: i64,
    to: i64,
}

impl Ticks {
    /// About `wanted` ticks inside `low..=high`; none when the range is empty or not finite.
    pub fn within(low: f64, high: f64, wanted: usize) -> Self {
        let span = high - low;
        if !(span.is_finite() && span > 0.0) {
            return Ticks { step: 1.0, from: 0, to: -1 };
        }
        Self::stepped(low, high, nice_step(span / wanted.max(1) as f64))
    }

    /// The multiples of a step inside `low..=high`.
    pub fn stepped(low: f64, high: f64, step: f64) -> Self {
        // A tick that misses the range by rounding only still belongs to it.
        let slack = 1e-9;
        let from = (low / step - slack).ceil() as i64;
        let to = (high / step + slack).floor() as i64;
        Ticks { step, from, to }
    }

    /// The ticks from low to high.
    pub fn values(&self) -> impl Iterator<Item = f64> + '_ {
        (self.from..=self.to).map(|n| n as f64 * self.step)
    }

    /// A tick's text, with the decimals that the step needs.
    pub fn text(&self, value: f64) -> String {
        let magnitude = self.step * self.from.unsigned_abs().max(self.to.unsigned_abs()) as f64;
        if magnitude >= 1e7 || (magnitude > 0.0 && magnitude < 1e-4) {
            let decimals = (magnitude.log10().floor() - self.step.log10().floor()).max(0.0);
            return typographic(&format!("{:.*e}", decimals as usize, value));
        }
        let decimals = (-self.step.log10().floor()).max(0.0) as usize;
        typographic(&fixed(value, decimals))
    }
}

/// The smallest of 1, 2, 5 times a power of ten that is not below `least`.
pub(super) fn nice_step(least: f64) -> f64 {
    let power = 10f64.powf(least.log10().floor());
    let lead = least / power;
    // The comparison tolerates the rounding of the logarithm.
    let nice = [1.0, 2.0, 5.0, 10.0].into_iter().find(|nice| lead <= nice * (1.0 + 1e-9));
    nice.unwrap_or(10.0) * power
}

#[cfg(test)]
mod tests {
    use super::*;

    fn texts(low: f64, high: f64, wanted: usize) -> Vec<String> {
        let ticks = Ticks::within(low, high, wanted);
        ticks.values().map(|value| ticks.text(value)).collect()
    }

    // Expectations follow from the rule (1, 2 or 5 times a power of ten), worked by hand.

    #[test]
    fn steps_are_round() {
        assert_eq!(texts(0.0, 10.0, 5), ["0", "2", "4", "6", "8", "10"]);
        assert_eq!(texts(-3.2, 4.1, 4), ["\u{2212}2", "0", "2", "4"]);
        assert_eq!(texts(-0.62, 0.55, 5), ["\u{2212}0.5", "0.0", "0.5"]);
        assert_eq!(texts(0.0, 1.0, 5), ["0.0", "0.2", "0.4", "0.6", "0.8", "1.0"]);
        assert_eq!(texts(1000.0, 5000.0, 4), ["1000", "2000", "3000", "4000", "5000"]);
    }

    #[test]
    fn ends_that_are_ticks_are_kept_in_spite_of_rounding() {
        assert_eq!(texts(0.1 * 3.0, 0.9, 6), ["0.3", "0.4", "0.5", "0.6", "0.7", "0.8", "0.9"]);
    }

    #[test]
    fn very_large_and_small_ranges_have_short_texts() {
        for (low, high) in [(0.0, 3e12), (0.0, 4e-9), (-1e300, 1e300), (1e-300, 2e-300)] {
            let texts = texts(low, high, 5);
            assert!((2..=11).contains(&texts.len()), "{texts:?}");
            assert!(texts.iter().all(|text| text.chars().count() <= 9), "{texts:?}");
        }
    }

    #[test]
    fn an_empty_range_has_no_ticks() {
        assert!(texts(1.0, 1.0, 5).is_empty());
        assert!(texts(f64::NAN, 1.0, 5).is_empty());
        assert!(texts(f64::NEG_INFINITY, 1.0, 5).is_empty());
    }
}
