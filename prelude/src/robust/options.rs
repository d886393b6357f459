//! How much is trusted, and how hard the search is.

use super::components::RobustRoute;
use crate::error::{Error, Result};

/// How robust estimates are made. The default trusts three rows in four, starts from 500 random
/// subsets, and is seeded by the session.
///
/// ```
/// use semiaxis::robust::RobustOptions;
///
/// let options = RobustOptions::default().share(0.5).seed(7);
/// assert_eq!(options.subset_size(75, 3), 39); // (n + p + 1) / 2
/// assert_eq!(RobustOptions::default().subset_size(75, 3), 57);
/// ```
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RobustOptions {
    share: f64,
    starts: usize,
    directions: usize,
    components: Option<usize>,
    route: Option<RobustRoute>,
    seed: Option<u64>,
}

impl Default for RobustOptions {
    fn default() -> Self {
        RobustOptions {
            share: 0.75,
            starts: 500,
            directions: 250,
            components: None,
            route: None,
            seed: None,
        }
    }
}

impl RobustOptions {
    /// The default choices.
    pub fn new() -> Self {
        Self::default()
    }

    /// The share α of rows that are trusted, from 0.5 to 1. At 0.5 nearly half the rows may hold
    /// anything; larger shares use the sound rows better.
    pub fn share(mut self, share: f64) -> Self {
        self.share = share;
        self
    }

    /// The number of random subsets that the search for a scatter starts from, from 10 to 100 000.
    pub fn starts(mut self, starts: usize) -> Self {
        self.starts = starts;
        self
    }

    /// The number of directions that [`robust_components`](super::robust_components) looks along
    /// when it projects, from 10 to 100 000.
    pub fn directions(mut self, directions: usize) -> Self {
        self.directions = directions;
        self
    }

    /// How many components to seek. Without it, [`robust_components`](super::robust_components)
    /// says how many.
    pub fn components(mut self, n_components: usize) -> Self {
        self.components = Some(n_components);
        self
    }

    /// The way to components, instead of the one that the table's shape suggests.
    pub fn route(mut self, route: RobustRoute) -> Self {
        self.route = Some(route);
        self
    }

    /// The seed, instead of the session's.
    pub fn seed(mut self, seed: u64) -> Self {
        self.seed = Some(seed);
        self
    }

    /// The share α of rows that are trusted.
    pub fn chosen_share(&self) -> f64 {
        self.share
    }

    /// The number of random subsets.
    pub fn n_starts(&self) -> usize {
        self.starts
    }

    /// The number of directions.
    pub fn n_directions(&self) -> usize {
        self.directions
    }

    /// How many components are sought, if that was said.
    pub fn chosen_components(&self) -> Option<usize> {
        self.components
    }

    /// The way to components, if one was chosen.
    pub fn chosen_route(&self) -> Option<RobustRoute> {
        self.route
    }

    /// The seed, if one was given.
    pub fn chosen_seed(&self) -> Option<u64> {
        self.seed
    }

    /// The number h of rows that are trusted, of n rows in p dimensions (p < n):
    /// ⌊2m − n + 2(n − m)α⌋ with m = ⌊(n + p + 1)/2⌋. It is m for α = 0.5, which stands most
    /// contamination, and n for α = 1.
    pub fn subset_size(&self, n_rows: usize, n_dimensions: usize) -> usize {
        let least = (n_rows + n_dimensions).div_ceil(2).min(n_rows);
        let (n, m) = (n_rows as f64, least as f64);
        // The small number keeps a product such as 0.7 · 10, a little below 7, from being cut to 6.
        let size = 2.0 * m - n + 2.0 * (n - m) * self.share + 1e-9;
        (size as usize).clamp(least, n_rows)
    }

    pub(super) fn check(&self) -> Result<()> {
        let refused =
            |option, value, accepted| Err(Error::OptionOutOfRange { option, value, accepted });
        if !(0.5..=1.0).contains(&self.share) {
            return refused("share", self.share, "0.5 to 1");
        }
        if !(10..=100_000).contains(&self.starts) {
            return refused("starts", self.starts as f64, "10 to 100000");
        }
        if !(10..=100_000).contains(&self.directions) {
            return refused("directions", self.directions as f64, "10 to 100000");
        }
        if self.components == Some(0) {
            return refused("components", 0.0, "1 or more");
        }
        Ok(())
    }
}
