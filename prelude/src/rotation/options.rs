//! Which rotation, and how it is sought.

use std::fmt;

use crate::error::{Error, Result};

/// What a rotation makes simple.
///
/// The first three are orthogonal and maximise, over orthogonal T,
///
/// ```text
/// V = Σ_k [ Σ_j λ_jk⁴ − (w/p) (Σ_j λ_jk²)² ]
/// ```
///
/// with w = 1 for varimax, 0 for quartimax and k/2 for equamax (Harman 1976, section 13.5: the
/// orthomax family). Under Kaiser normalisation the λ are those of rows of unit length.
#[derive(Debug, Clone, Copy, PartialEq)]
#[non_exhaustive]
pub enum Rotation {
    /// Orthogonal; spreads the squared loadings within each component. The usual first choice.
    Varimax,
    /// Orthogonal; spreads the squared loadings within each variable. Tends to leave one general
    /// component.
    Quartimax,
    /// Orthogonal; between the two, it evens out how much the components explain.
    Equamax,
    /// Oblique; varimax first, then a fit to a target in which every loading is raised to a power,
    /// which makes small ones smaller.
    ///
    /// ```text
    /// Q = sign(X) |X|^m,   U = (XᵀX)⁻¹ Xᵀ Q,   columns of U scaled so that diag((UᵀU)⁻¹) = 1
    /// ```
    ///
    /// X holds the varimax loadings. Under Kaiser normalisation they are those of rows of unit
    /// length; some programs go back to the raw lengths before this step, which moves the loadings
    /// somewhat: without normalisation both ways are the same.
    Promax {
        /// The power m, from 1 (which leaves varimax as it is) to 10; 4 is usual.
        power: f64,
    },
    /// Oblique; makes the products of squared loadings small between components (direct oblimin).
    /// It minimises
    ///
    /// ```text
    /// V = Σ_{k<l} [ Σ_j λ_jk² λ_jl² − (γ/p) Σ_j λ_jk² Σ_j λ_jl² ]
    /// ```
    ///
    /// over all T with columns of unit length (Jennrich and Sampson 1966).
    Oblimin {
        /// The weight γ, from −100 to 0.8; 0 is usual (also called direct quartimin). The larger it
        /// is, the more the components correlate. Above 0 the criterion may have no minimum: then
        /// components fall together, which is an error when it happens from every start and is
        /// counted otherwise; beyond 0.8 it nearly always happens.
        gamma: f64,
    },
}

impl Rotation {
    /// Promax with the usual power of 4.
    pub fn promax() -> Self {
        Rotation::Promax { power: 4.0 }
    }

    /// Direct oblimin with the usual γ of 0.
    pub fn oblimin() -> Self {
        Rotation::Oblimin { gamma: 0.0 }
    }

    /// Whether the rotated components may correlate.
    pub fn is_oblique(self) -> bool {
        matches!(self, Rotation::Promax { .. } | Rotation::Oblimin { .. })
    }

    pub(super) fn check(self) -> Result<()> {
        match self {
            Rotation::Promax { power } => within("power", power, 1.0, 10.0, "1 to 10"),
            Rotation::Oblimin { gamma } => within("gamma", gamma, -100.0, 0.8, "-100 to 0.8"),
            _ => Ok(()),
        }
    }
}

/// How a rotation is sought. The default is Kaiser normalisation, 20 starts, tolerance 1e-9, at
/// most 1 000 iterations a start, seeded by the session.
///
/// ```
/// use semiaxis::rotation::RotationOptions;
///
/// let options = RotationOptions::new().kaiser_normalisation(false).starts(50).seed(7);
/// assert_eq!(options.n_starts(), 50);
/// ```
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RotationOptions {
    kaiser: bool,
    starts: usize,
    tolerance: f64,
    iterations: usize,
    seed: Option<u64>,
}

impl Default for RotationOptions {
    fn default() -> Self {
        RotationOptions { kaiser: true, starts: 20, tolerance: 1e-9, iterations: 1000, seed: None }
    }
}

impl RotationOptions {
    /// The default choices.
    pub fn new() -> Self {
        Self::default()
    }

    /// Whether rows are brought to unit length while the rotation is sought.
    pub fn kaiser_normalisation(mut self, kaiser: bool) -> Self {
        self.kaiser = kaiser;
        self
    }

    /// The number of starts, from 1 to 10 000. The first is the matrix as given, the others are
    /// random orthogonal positions.
    pub fn starts(mut self, starts: usize) -> Self {
        self.starts = starts;
        self
    }

    /// The gradient of the criterion at which a start has arrived, from 1e-12 to 0.01; see
    /// [`Rotated::gradient`](super::Rotated::gradient).
    pub fn tolerance(mut self, tolerance: f64) -> Self {
        self.tolerance = tolerance;
        self
    }

    /// The most iterations of one start, from 1 to 1 million.
    pub fn iterations(mut self, iterations: usize) -> Self {
        self.iterations = iterations;
        self
    }

    /// The seed of the random starts, instead of the session's.
    pub fn seed(mut self, seed: u64) -> Self {
        self.seed = Some(seed);
        self
    }

    /// Whether rows are brought to unit length while the rotation is sought.
    pub fn is_kaiser_normalised(&self) -> bool {
        self.kaiser
    }

    /// The number of starts.
    pub fn n_starts(&self) -> usize {
        self.starts
    }

    /// The gradient at which a start has arrived.
    pub fn chosen_tolerance(&self) -> f64 {
        self.tolerance
    }

    /// The most iterations of one start.
    pub fn most_iterations(&self) -> usize {
        self.iterations
    }

    /// The seed, if one was given.
    pub fn chosen_seed(&self) -> Option<u64> {
        self.seed
    }

    pub(super) fn check(&self) -> Result<()> {
        within("starts", self.starts as f64, 1.0, 1e4, "1 to 10000")?;
        within("tolerance", self.tolerance, 1e-12, 0.01, "1e-12 to 0.01")?;
        within("iterations", self.iterations as f64, 1.0, 1e6, "1 to 1000000")
    }
}

impl fmt::Display for Rotation {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Rotation::Varimax => f.write_str("varimax"),
            Rotation::Quartimax => f.write_str("quartimax"),
            Rotation::Equamax => f.write_str("equamax"),
            Rotation::Promax { power } => write!(f, "promax, power {power}"),
            Rotation::Oblimin { gamma } => write!(f, "direct oblimin, γ = {gamma}"),
        }
    }
}

fn within(
    option: &'static str,
    value: f64,
    least: f64,
    most: f64,
    accepted: &'static str,
) -> Result<()> {
    if (least..=most).contains(&value) {
        Ok(())
    } else {
        Err(Error::OptionOutOfRange { option, value, accepted })
    }
}
