//! The one choice an analyst must make, and the choices the computation makes.

use std::fmt;

use crate::error::{Error, Result};

/// What the variables are measured in before components are sought.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Scaling {
    /// Every variable is brought to unit variance, so that all weigh the same whatever their
    /// units. Components are then those of the correlation matrix.
    Correlation,
    /// Variables keep their units, so that those that vary more weigh more. Components are then
    /// those of the covariance matrix with divisor n − 1.
    Covariance,
}

/// The way a decomposition was computed: unless [`ComponentOptions`] ask for one, it depends on
/// shape and conditioning only.
///
/// The smaller of the two cross-products (p × p for n ≥ p, else n × n) is formed about the exact
/// column means and decomposed. When its smallest root that could be non-zero is below 1e-5 of
/// its largest, digits of the small components have been lost in squaring, and the centred data
/// themselves are decomposed by singular values instead.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum Route {
    /// Eigenvectors of the p × p cross-product of the variables.
    VariableCrossProduct,
    /// Eigenvectors of the n × n cross-product of the rows, for wide data.
    RowCrossProduct,
    /// Singular values of the centred (and scaled) data.
    SingularValues,
    /// A randomised search for the leading directions, with an error that is reported; only on
    /// request.
    Randomised,
}

/// The way to decompose: by itself, or one that is asked for.
///
/// The ways agree to within rounding where they are all sound. The two cross-products lose the
/// digits of components whose variance is below some 1e-10 of the largest, and do not report those
/// below p ε (or n ε) of it; singular values cost several times as much; the randomised way finds
/// the first few components only, and pays where both n and p are in the thousands.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
#[non_exhaustive]
pub enum Decomposition {
    /// By shape and conditioning, as [`Route`] says.
    #[default]
    Automatic,
    /// Eigenvectors of the p × p cross-product of the variables, whatever its condition.
    VariableCrossProduct,
    /// Eigenvectors of the n × n cross-product of the rows, whatever its condition.
    RowCrossProduct,
    /// Singular values of the centred (and scaled) data.
    SingularValues,
    /// The leading components by random sampling; see [`RandomisedOptions`].
    Randomised(RandomisedOptions),
}

/// How principal components are computed, and how many are kept.
///
/// ```
/// use semiaxis::components::{ComponentOptions, Decomposition, RandomisedOptions, Scaling};
///
/// let options = ComponentOptions::new(Scaling::Covariance)
///     .keep(5)
///     .decomposition(Decomposition::Randomised(RandomisedOptions::new().seed(7)));
/// assert_eq!(options.chosen_keep(), Some(5));
/// ```
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ComponentOptions {
    scaling: Scaling,
    keep: Option<usize>,
    decomposition: Decomposition,
}

impl ComponentOptions {
    /// Every component, computed in the way that suits the data.
    pub fn new(scaling: Scaling) -> Self {
        ComponentOptions { scaling, keep: None, decomposition: Decomposition::Automatic }
    }

    /// Keeps only the first components, at least one.
    pub fn keep(mut self, n_components: usize) -> Self {
        self.keep = Some(n_components);
        self
    }

    /// The way to decompose.
    pub fn decomposition(mut self, decomposition: Decomposition) -> Self {
        self.decomposition = decomposition;
        self
    }

    /// What the variables are measured in.
    pub fn scaling(&self) -> Scaling {
        self.scaling
    }

    /// How many components are kept, if not all.
    pub fn chosen_keep(&self) -> Option<usize> {
        self.keep
    }

    /// The way to decompose.
    pub fn chosen_decomposition(&self) -> Decomposition {
        self.decomposition
    }

    /// Refuses what lies outside its range; `available` is the most components there can be.
    pub(super) fn check(&self, available: usize) -> Result<()> {
        match self.keep {
            Some(asked) if !(1..=available).contains(&asked) => {
                return Err(Error::ComponentOutOfRange { asked, available });
            }
            _ => (),
        }
        match self.decomposition {
            Decomposition::Randomised(options) => options.check(),
            _ => Ok(()),
        }
    }
}

impl From<Scaling> for ComponentOptions {
    fn from(scaling: Scaling) -> Self {
        ComponentOptions::new(scaling)
    }
}

/// How the leading components are searched for at random. The default is 10 directions more than
/// are kept, 4 power iterations, seeded by the session.
///
/// The data are multiplied by random vectors, and the span of the products is refined by power
/// iterations with orthonormalisation; the components are those of the data seen from that span
/// (N. Halko, P. G. Martinsson and J. A. Tropp (2011), "Finding structure with randomness", SIAM
/// Review 53, 217–288, algorithms 4.4 and 5.1, applied to the transpose so that scores are exact
/// for the loadings found). Each power iteration reads the data twice.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RandomisedOptions {
    oversampling: usize,
    power_iterations: usize,
    seed: Option<u64>,
}

impl Default for RandomisedOptions {
    fn default() -> Self {
        RandomisedOptions { oversampling: 10, power_iterations: 4, seed: None }
    }
}

impl RandomisedOptions {
    /// The default choices.
    pub fn new() -> Self {
        Self::default()
    }

    /// How many directions are searched beyond those kept, from 2 to 1 000.
    pub fn oversampling(mut self, n_directions: usize) -> Self {
        self.oversampling = n_directions;
        self
    }

    /// How often the span is refined, from 0 to 100: more where variances decline slowly.
    pub fn power_iterations(mut self, n_iterations: usize) -> Self {
        self.power_iterations = n_iterations;
        self
    }

    /// The seed, instead of the session's.
    pub fn seed(mut self, seed: u64) -> Self {
        self.seed = Some(seed);
        self
    }

    /// How many directions are searched beyond those kept.
    pub fn chosen_oversampling(&self) -> usize {
        self.oversampling
    }

    /// How often the span is refined.
    pub fn n_power_iterations(&self) -> usize {
        self.power_iterations
    }

    /// The seed, if one was given.
    pub fn chosen_seed(&self) -> Option<u64> {
        self.seed
    }

    fn check(&self) -> Result<()> {
        if !(2..=1000).contains(&self.oversampling) {
            return Err(Error::OptionOutOfRange {
                option: "oversampling",
                value: self.oversampling as f64,
                accepted: "2 to 1000",
            });
        }
        if self.power_iterations > 100 {
            return Err(Error::OptionOutOfRange {
                option: "power_iterations",
                value: self.power_iterations as f64,
                accepted: "0 to 100",
            });
        }
        Ok(())
    }
}

impl fmt::Display for Scaling {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Scaling::Correlation => "correlation",
            Scaling::Covariance => "covariance",
        })
    }
}

impl fmt::Display for Route {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Route::VariableCrossProduct => "cross-product of the variables",
            Route::RowCrossProduct => "cross-product of the rows",
            Route::SingularValues => "singular values of the data",
            Route::Randomised => "randomised search for the leading directions",
        })
    }
}
