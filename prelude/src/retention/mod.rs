//! How many components to keep: what each rule of the trade says, by which threshold, and why some
//! of them do not apply.
//!
//! There is no true answer: rules ask different questions (what share is kept, what exceeds noise,
//! what predicts best, what is common to several variables), and on real tables they disagree. So
//! every rule is put to the same analysis, each gives its number or says why it does not apply, and
//! the summary counts the answers. The choice is the analyst's, and its grounds lie outside the
//! table: what the components are for, and what they mean.
//!
//! Conventions: variances are descending with divisor n − 1; there are m = min(n − 1, p) of them,
//! counting zeros; a rule that compares place by place keeps leading components until the first
//! that fails, whatever comes after it. Everything drawn depends on the seed only. Analyses of
//! which only the first components were computed are decomposed again in full, and say so.
//!
//! Cross-validation by leaving out rows and predicting them from their own scores is not among the
//! rules: a row's scores are computed from the very values to be predicted, so that its error never
//! rises with the number of components and says nothing about it (R. Bro, K. Kjeldahl,
//! A. K. Smilde and H. A. L. Kiers (2008), "Cross-validation of component models: a critical look
//! at current methods", Analytical and Bioanalytical Chemistry 390, 1241–1251). Here only values
//! that had no part in their own prediction are predicted.
//!
//! Sources: I. T. Jolliffe (2002), "Principal Component Analysis", 2nd edition, section 6.1, for
//! the field; each rule's own at [`Rule::source`].

mod options;
mod result;
mod rule;
mod verdict;

mod fit;
mod subject;

mod bands;
mod cells;
mod eastment;
mod equal_roots;
mod evidence;
mod exhibit;
mod noise;
mod partial;
mod quadrature;
mod shares;
mod singular_threshold;
mod slopes;
mod tracy_widom;

#[cfg(test)]
mod tests;

pub use bands::VarianceBands;
pub use fit::{retention, retention_with};
pub use options::{Effort, RetentionOptions};
pub use result::{Agreement, Retention, Span};
pub use rule::Rule;
pub use verdict::{Comparison, Criterion, Outcome, Reason, Verdict};
