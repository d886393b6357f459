//! Points that a map leaves where they are, found faster than by applying it over and over.
//!
//! Plain iteration closes the distance by a constant factor in each step, and where much is missing
//! that factor is close to one. Here each step also looks back at the last few: of all combinations
//! of them it takes the one whose change would be smallest if the map were linear (D. G. Anderson
//! (1965), "Iterative procedures for nonlinear integral equations", Journal of the ACM 12, 547–560;
//! H. F. Walker and P. Ni (2011), "Anderson acceleration for fixed-point iterations", SIAM Journal
//! on Numerical Analysis 49, 1715–1735). When the change grows instead, the past is forgotten and
//! the next step is a plain one.

use super::em::Limits;
use super::fit::Status;
use super::small::{dot, factor, solve_lower, solve_upper};
use crate::error::{Error, Result};
use crate::live::interrupted;

/// How many steps back are looked at.
const DEPTH: usize = 6;

/// Applies `map` until no element changes by more than the tolerance, and returns the last point
/// with how that ended.
pub(super) fn settle(
    mut point: Vec<f64>,
    limits: Limits,
    mut map: impl FnMut(&[f64]) -> Result<Vec<f64>>,
) -> Result<(Vec<f64>, Status)> {
    let mut status = Status { n_iterations: 0, last_change: 0.0, converged: point.is_empty() };
    let mut past = Past::default();
    while status.n_iterations < limits.n_iterations && !status.converged {
        if interrupted() {
            return Err(Error::Interrupted);
        }
        let mapped = map(&point)?;
        status.n_iterations += 1;
        let change: Vec<f64> = mapped.iter().zip(&point).map(|(new, old)| new - old).collect();
        status.last_change = change.iter().fold(0.0, |most, change| f64::max(most, change.abs()));
        status.converged = status.last_change <= limits.tolerance;
        point = if status.converged { mapped } else { past.next(mapped, change) };
    }
    Ok((point, status))
}

/// Where the last steps led and how far they went.
#[derive(Default)]
struct Past {
    mapped: Vec<f64>,
    change: Vec<f64>,
    /// Differences between neighbouring steps, the oldest first.
    mapped_steps: Vec<Vec<f64>>,
    change_steps: Vec<Vec<f64>>,
}

impl Past {
    /// The point to try next.
    fn next(&mut self, mapped: Vec<f64>, change: Vec<f64>) -> Vec<f64> {
        let difference = |new: &[f64], old: &[f64]| -> Vec<f64> {
            new.iter().zip(old).map(|(new, old)| new - old).collect()
        };
        if !self.change.is_empty() {
            if dot(&change, &change) > 4.0 * dot(&self.change, &self.change) {
                self.mapped_steps.clear();
                self.change_steps.clear();
            } else {
                self.mapped_steps.push(difference(&mapped, &self.mapped));
                self.change_steps.push(difference(&change, &self.change));
            }
            if self.change_steps.len() > DEPTH {
                self.mapped_steps.remove(0);
                self.change_steps.remove(0);
            }
        }
        let mut next = mapped.clone();
        if let Some(weights) = self.weights(&change) {
            for (weight, step) in weights.iter().zip(&self.mapped_steps) {
                next.iter_mut().zip(step).for_each(|(next, step)| *next -= weight * step);
            }
        }
        (self.mapped, self.change) = (mapped, change);
        next
    }

    /// The combination of past steps whose change is nearest to the present one, by least squares;
    /// older steps are left out where they add nothing.
    fn weights(&self, change: &[f64]) -> Option<Vec<f64>> {
        for first in 0..self.change_steps.len() {
            let steps = &self.change_steps[first..];
            let m = steps.len();
            let mut products = vec![0.0; m * m];
            for a in 0..m {
                for b in 0..=a {
                    products[a * m + b] = dot(&steps[a], &steps[b]);
                }
                products[a * m + a] *= 1.0 + 1e-12;
            }
            if !factor(&mut products, m) {
                continue;
            }
            let mut weights: Vec<f64> = steps.iter().map(|step| dot(step, change)).collect();
            solve_lower(&products, m, &mut weights);
            solve_upper(&products, m, &mut weights);
            let left_out = std::iter::repeat_n(0.0, first);
            return Some(left_out.chain(weights).collect());
        }
        None
    }
}
