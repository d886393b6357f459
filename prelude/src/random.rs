//! Random numbers for a notebook: the same on every run, whatever the number of threads.
//!
//! Every generator here starts from the session's seed, or from the `seed` in a cell's header.
//! Two calls in one cell start from different seeds, and running the cell again repeats both.

use nalgebra::DMatrix;
use rand_distr::{Distribution, StandardNormal};
use rand_xoshiro::rand_core::SeedableRng;

/// The generator behind everything random in the prelude: xoshiro256++ of D. Blackman and
/// S. Vigna (2021), "Scrambled linear pseudorandom number generators".
// Handed on, not aliased: a cell must be able to name the type of a variable that holds one.
pub use rand_xoshiro::Xoshiro256PlusPlus as Generator;

/// A generator seeded by the session and the cell.
///
/// ```
/// use semiaxis::random::random_generator;
/// use rand::RngExt;
///
/// let mut generator = random_generator();
/// let share: f64 = generator.random();
/// assert!((0.0..1.0).contains(&share));
/// ```
pub fn random_generator() -> Generator {
    Generator::seed_from_u64(crate::live::seed())
}

/// A matrix of independent standard normal values, seeded by the session and the cell.
///
/// ```
/// let x = semiaxis::random::random_normal(200, 3);
/// assert_eq!(x.shape(), (200, 3));
/// assert!(x.iter().all(|value| value.abs() < 10.0));
/// ```
pub fn random_normal(n_rows: usize, n_cols: usize) -> DMatrix<f64> {
    let mut generator = random_generator();
    DMatrix::from_fn(n_rows, n_cols, |_, _| StandardNormal.sample(&mut generator))
}

/// The generator of one replicate of a computation.
///
/// Seed and number are mixed through a bijection each (the finalizer of SplitMix64, G. L. Steele,
/// D. Lea and C. H. Flood 2014), so that neither neighbouring replicates nor neighbouring seeds
/// share a stream.
pub(crate) fn replicate_generator(seed: u64, replicate: u64) -> Generator {
    Generator::seed_from_u64(mixed(mixed(seed).wrapping_add(mixed(!replicate))))
}

fn mixed(value: u64) -> u64 {
    let mut z = value.wrapping_add(0x9e37_79b9_7f4a_7c15);
    z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    z ^ (z >> 31)
}
