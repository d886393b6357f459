//! From a probability to a quantile.

/// Which tail of a distribution is meant.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Side {
    Lower,
    Upper,
}

/// A probability, said by the tail that holds it.
#[derive(Debug, Clone, Copy)]
pub(super) struct Probability {
    side: Side,
    value: f64,
}

impl Probability {
    pub(super) fn lower(value: f64) -> Self {
        Probability { side: Side::Lower, value }
    }

    pub(super) fn upper(value: f64) -> Self {
        Probability { side: Side::Upper, value }
    }

    /// Said by the smaller tail: one minus a number of at least one half is exact.
    fn by_smaller_tail(self) -> Self {
        if self.value <= 0.5 {
            return self;
        }
        let side = match self.side {
            Side::Lower => Side::Upper,
            Side::Upper => Side::Lower,
        };
        Probability { side, value: 1.0 - self.value }
    }
}

/// One tail of a distribution on the positive numbers at some place x, as a factor times the
/// density of ln X there; the other tail is what is left of one.
#[derive(Debug, Clone, Copy)]
pub(super) struct Tail {
    pub(super) side: Side,
    pub(super) ln_density: f64,
    pub(super) factor: f64,
}

impl Tail {
    pub(super) fn probability(self, side: Side) -> f64 {
        let own = self.ln_density.exp() * self.factor;
        if side == self.side { own } else { 1.0 - own }
    }

    /// ln of a tail, which is finite where the tail itself is too small for a double, and its
    /// derivative by ln x.
    fn ln_with_slope(self, side: Side) -> (f64, f64) {
        let (ln, slope) = if side == self.side {
            (self.ln_density + self.factor.ln(), 1.0 / self.factor)
        } else {
            let other = 1.0 - self.ln_density.exp() * self.factor;
            (other.ln(), self.ln_density.exp() / other)
        };
        (ln, if side == Side::Lower { slope } else { -slope })
    }
}

/// Steps of an inversion before it is given up: several times what any tail needs.
const MOST_STEPS: usize = 500;

/// The x at which a distribution on the positive numbers leaves this probability in its tail.
///
/// Newton's method on ln of the smaller tail against ln x. For the gamma distribution and for the
/// ratio of two of them ln X has a log-concave density, so ln of either tail is concave: after
/// the first step the iteration comes from one side only and cannot leave the root. `start` is any
/// x between the ends.
pub(super) fn invert(probability: Probability, start: f64, tail_at: impl Fn(f64) -> Tail) -> f64 {
    let Probability { side, value } = probability.by_smaller_tail();
    if !(0.0..=0.5).contains(&value) {
        return f64::NAN;
    }
    if value == 0.0 {
        return if side == Side::Lower { 0.0 } else { f64::INFINITY };
    }
    let target = value.ln();
    let mut x = start;
    // The first step may overshoot where the tail bends; longer ones are allowed one by one.
    let mut longest = 2.0;
    let mut last = f64::INFINITY;
    for _ in 0..MOST_STEPS {
        let (ln, slope) = tail_at(x).ln_with_slope(side);
        let step = (target - ln) / slope;
        if step.is_nan() {
            return f64::NAN;
        }
        if step.abs() > longest {
            x *= (longest * step.signum()).exp();
            longest *= 2.0;
        } else {
            x *= step.exp();
            // Below 1e-9 a step that does not shrink is rounding.
            if step.abs() <= 2.0 * f64::EPSILON || (step.abs() < 1e-9 && step.abs() >= last) {
                return x;
            }
            last = step.abs();
        }
        if x == 0.0 || x == f64::INFINITY {
            return x;
        }
    }
    f64::NAN
}
