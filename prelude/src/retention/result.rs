//! Every verdict, and where they agree.

use nalgebra::DVector;

use super::bands::VarianceBands;
use super::options::RetentionOptions;
use super::rule::Rule;
use super::shares::pieces;
use super::verdict::Verdict;
use crate::components::Scaling;
use crate::parallel::ParallelAnalysis;

/// What every rule says about one analysis; made by [`retention`](super::retention).
#[derive(Debug, Clone, PartialEq)]
pub struct Retention {
    pub(super) verdicts: Vec<Verdict>,
    pub(super) variances: DVector<f64>,
    pub(super) total_variance: f64,
    pub(super) n_rows: usize,
    pub(super) n_variables: usize,
    // How many components the analysis holds when those are not all.
    pub(super) n_computed: Option<usize>,
    pub(super) scaling: Scaling,
    pub(super) normal: Option<ParallelAnalysis>,
    pub(super) permuted: Option<ParallelAnalysis>,
    pub(super) shared: Option<ParallelAnalysis>,
    pub(super) bands: Option<VarianceBands>,
    pub(super) options: RetentionOptions,
    pub(super) seed: u64,
}

/// A number of components, and the rules that give it.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Agreement {
    n_components: usize,
    rules: Vec<Rule>,
}

impl Agreement {
    /// The number of components.
    pub fn n_components(&self) -> usize {
        self.n_components
    }

    /// The rules that give it.
    pub fn rules(&self) -> &[Rule] {
        &self.rules
    }
}

/// The fewest and the most components that any rule keeps.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Span {
    /// The fewest.
    pub least: usize,
    /// The most.
    pub most: usize,
}

impl Retention {
    /// What each rule says, in the order of [`Rule::ALL`].
    pub fn verdicts(&self) -> &[Verdict] {
        &self.verdicts
    }

    /// What one rule says.
    pub fn verdict(&self, rule: Rule) -> &Verdict {
        self.verdicts
            .iter()
            .find(|verdict| verdict.rule() == rule)
            .expect("every rule has a verdict")
    }

    /// How many rules apply.
    pub fn n_applying(&self) -> usize {
        self.verdicts.iter().filter(|verdict| verdict.n_components().is_some()).count()
    }

    /// The numbers that rules give, most rules first, fewer components first where as many give
    /// them.
    ///
    /// Rules are not independent witnesses: several hold the same variances against thresholds that
    /// are close to one another. A majority among them is no proof.
    pub fn agreement(&self) -> Vec<Agreement> {
        let mut groups: Vec<Agreement> = Vec::new();
        for verdict in &self.verdicts {
            let Some(n_components) = verdict.n_components() else { continue };
            match groups.iter_mut().find(|group| group.n_components == n_components) {
                Some(group) => group.rules.push(verdict.rule()),
                None => groups.push(Agreement { n_components, rules: vec![verdict.rule()] }),
            }
        }
        groups.sort_by_key(|group| (usize::MAX - group.rules.len(), group.n_components));
        groups
    }

    /// The fewest and the most components that a rule keeps; `None` when no rule applies.
    pub fn span(&self) -> Option<Span> {
        let counts = || self.verdicts.iter().filter_map(Verdict::n_components);
        Some(Span { least: counts().min()?, most: counts().max()? })
    }

    /// All m = min(n − 1, p) variances, descending, zeros included.
    pub fn variances(&self) -> &DVector<f64> {
        &self.variances
    }

    /// The mean of the variances of the p variables: one under correlation.
    pub fn mean_root(&self) -> f64 {
        self.total_variance / self.n_variables as f64
    }

    /// The broken stick's threshold for each variance.
    pub fn broken_stick(&self) -> DVector<f64> {
        DVector::from_vec(pieces(self.variances.len(), self.total_variance))
    }

    /// The parallel analysis with normal noise, if it was made.
    pub fn normal_noise(&self) -> Option<&ParallelAnalysis> {
        self.normal.as_ref()
    }

    /// The parallel analysis with permuted columns, if it was made.
    pub fn permuted_noise(&self) -> Option<&ParallelAnalysis> {
        self.permuted.as_ref()
    }

    /// The parallel analysis of reduced correlations, if it was made.
    pub fn shared_noise(&self) -> Option<&ParallelAnalysis> {
        self.shared.as_ref()
    }

    /// Bootstrap intervals of the variances, if they were made.
    pub fn variance_bands(&self) -> Option<&VarianceBands> {
        self.bands.as_ref()
    }

    /// The number n of rows.
    pub fn n_rows(&self) -> usize {
        self.n_rows
    }

    /// The number p of variables.
    pub fn n_variables(&self) -> usize {
        self.n_variables
    }

    /// How many components the analysis held when those were not all; the rules looked at all.
    pub fn n_computed_before(&self) -> Option<usize> {
        self.n_computed
    }

    /// What the variables were measured in.
    pub fn scaling(&self) -> Scaling {
        self.scaling
    }

    /// What the rules were told.
    pub fn options(&self) -> &RetentionOptions {
        &self.options
    }

    /// The seed; the same seed gives the same verdicts.
    pub fn seed(&self) -> u64 {
        self.seed
    }
}
