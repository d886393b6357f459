//! What one rule says: a number and what it was compared with, or why there is none.

use std::fmt;

use super::rule::Rule;
use crate::exhibit::{grouped, significant};

/// What a rule says about an analysis.
#[derive(Debug, Clone, PartialEq)]
pub struct Verdict {
    pub(super) rule: Rule,
    pub(super) outcome: Outcome,
}

/// A number of components, or the reason why the rule has none to give.
#[derive(Debug, Clone, PartialEq)]
pub enum Outcome {
    /// The rule applies, and this is what it compared.
    Keeps(Comparison),
    /// The rule does not apply to this analysis.
    DoesNotApply(Reason),
}

impl Verdict {
    /// The rule.
    pub fn rule(&self) -> Rule {
        self.rule
    }

    /// What the rule says, whole.
    pub fn outcome(&self) -> &Outcome {
        &self.outcome
    }

    /// How many components the rule keeps; `None` when it does not apply.
    pub fn n_components(&self) -> Option<usize> {
        self.comparison().map(Comparison::n_components)
    }

    /// What the rule compared; `None` when it does not apply.
    pub fn comparison(&self) -> Option<&Comparison> {
        match &self.outcome {
            Outcome::Keeps(comparison) => Some(comparison),
            Outcome::DoesNotApply(_) => None,
        }
    }

    /// Why the rule does not apply; `None` when it does.
    pub fn reason(&self) -> Option<&Reason> {
        match &self.outcome {
            Outcome::Keeps(_) => None,
            Outcome::DoesNotApply(reason) => Some(reason),
        }
    }
}

/// How the compared values become a number of components.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Criterion {
    /// Leading places whose value lies above their threshold are kept. The first place stands for
    /// the first component.
    Above,
    /// The last place whose value lies above its threshold is kept, with all before it. The first
    /// place stands for the first component.
    LastAbove,
    /// Leading places whose value lies below their threshold are kept. The first place stands for
    /// the first component.
    Below,
    /// The first place whose value reaches its threshold is the last that is kept. The first place
    /// stands for the first component.
    Reaches,
    /// The place of the smallest value. The first place stands for no component at all.
    Smallest,
    /// The place of the largest value. The first place stands for no component at all.
    Largest,
}

/// The values that a rule compared, and by what criterion.
#[derive(Debug, Clone, PartialEq)]
pub struct Comparison {
    pub(super) what: &'static str,
    pub(super) criterion: Criterion,
    // A value that is not a number has no place in the comparison.
    pub(super) values: Vec<f64>,
    // As many as values; none for the smallest and the largest.
    pub(super) thresholds: Vec<f64>,
    pub(super) remark: Option<String>,
}

impl Comparison {
    pub(super) fn new(
        what: &'static str,
        criterion: Criterion,
        values: Vec<f64>,
        thresholds: Vec<f64>,
    ) -> Self {
        Comparison { what, criterion, values, thresholds, remark: None }
    }

    pub(super) fn with_remark(mut self, remark: impl Into<String>) -> Self {
        self.remark = Some(remark.into());
        self
    }

    /// What the values are, such as "variance" or "p-value".
    pub fn what(&self) -> &'static str {
        self.what
    }

    /// How they become a number of components, and what the first of them stands for.
    pub fn criterion(&self) -> Criterion {
        self.criterion
    }

    /// The values: for each component, or for each number of components from zero on, as the
    /// [`criterion`](Self::criterion) says. There may be fewer than components where a sequence
    /// ended.
    pub fn values(&self) -> &[f64] {
        &self.values
    }

    /// What each value was compared with; empty where the smallest or the largest is sought.
    pub fn thresholds(&self) -> &[f64] {
        &self.thresholds
    }

    /// How the rule was applied: sizes, degrees of freedom, cautions.
    pub fn remark(&self) -> Option<&str> {
        self.remark.as_deref()
    }

    /// How many components this keeps.
    pub fn n_components(&self) -> usize {
        let pairs = || self.values.iter().zip(&self.thresholds);
        let best = |sign: f64| {
            let mut best: Option<(usize, f64)> = None;
            for (place, value) in self.values.iter().enumerate() {
                let size = sign * value;
                // The smaller number of components wins a tie.
                if !size.is_nan() && best.is_none_or(|(_, most)| size > most) {
                    best = Some((place, size));
                }
            }
            best.map_or(0, |(place, _)| place)
        };
        match self.criterion {
            Criterion::Above => pairs().take_while(|(value, limit)| value > limit).count(),
            Criterion::LastAbove => {
                let last =
                    self.values.iter().zip(&self.thresholds).rposition(|(v, limit)| v > limit);
                last.map_or(0, |place| place + 1)
            }
            Criterion::Below => pairs().take_while(|(value, limit)| value < limit).count(),
            Criterion::Reaches => {
                let short = pairs().take_while(|(value, limit)| value < limit).count();
                (short + 1).min(self.values.len())
            }
            Criterion::Smallest => best(-1.0),
            Criterion::Largest => best(1.0),
        }
    }

    /// What speaks for the last component that is kept, and what against one more.
    pub(super) fn decided_by(&self) -> (String, String) {
        let kept = self.n_components();
        let digits = |value: f64| significant(value, 3);
        let pair =
            |place: usize, sign: &str| match (self.values.get(place), self.thresholds.get(place)) {
                (Some(value), Some(limit)) => {
                    format!("{} {sign} {}", digits(*value), digits(*limit))
                }
                _ => String::new(),
            };
        let at =
            |place: usize| self.values.get(place).map_or(String::new(), |value| digits(*value));
        let last =
            |sign: &str| kept.checked_sub(1).map_or(String::new(), |place| pair(place, sign));
        match self.criterion {
            Criterion::Above | Criterion::LastAbove => (last(">"), pair(kept, "≤")),
            Criterion::Below => (last("<"), pair(kept, "≥")),
            Criterion::Reaches => (last("≥"), String::new()),
            Criterion::Smallest | Criterion::Largest => (at(kept), at(kept + 1)),
        }
    }
}

/// Why a rule does not apply.
#[derive(Debug, Clone, PartialEq)]
#[non_exhaustive]
pub enum Reason {
    /// The options leave it out.
    LeftOut,
    /// It is made for correlations, and the analysis is one of covariances.
    NeedsCorrelation,
    /// It is made for covariances, and the analysis is one of correlations.
    NeedsCovariance,
    /// It needs more rows than variables.
    NeedsMoreRows {
        /// Rows there are.
        n_rows: usize,
        /// Variables there are.
        n_variables: usize,
    },
    /// Some variables can be computed from others, and it needs that none can.
    RankDeficient {
        /// The numerical rank.
        rank: usize,
        /// What it would have to be.
        needed: usize,
    },
    /// Its theory does not cover rows that carry weights.
    Weighted,
    /// It assumes normal rows, and these are not.
    NotNormal {
        /// Mardia's kurtosis, standardised: what would be standard normal for normal rows.
        kurtosis: f64,
    },
    /// There are too few components for it.
    TooFewComponents {
        /// The fewest it takes.
        needed: usize,
        /// How many there are.
        found: usize,
    },
    /// It would take long, and the options do not ask for that.
    TooLong {
        /// About how many multiplications it would take.
        operations: f64,
    },
    /// Two variances are equal, and its formula divides by their difference.
    Tied {
        /// The first of the two components, from one.
        component: usize,
    },
    /// Resampled rows leave a variable constant too often.
    ConstantWhenResampled {
        /// How many resampled tables had a constant column.
        n_failed: usize,
        /// How many were drawn.
        n_replicates: usize,
    },
}

impl fmt::Display for Reason {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Reason::LeftOut => f.write_str("the options leave it out"),
            Reason::NeedsCorrelation => {
                f.write_str("it is made for correlations, and this analysis is one of covariances")
            }
            Reason::NeedsCovariance => {
                f.write_str("it is made for covariances, and this analysis is one of correlations")
            }
            Reason::NeedsMoreRows { n_rows, n_variables } => write!(
                f,
                "it needs more rows than variables; there are {} and {}",
                grouped(*n_rows),
                grouped(*n_variables)
            ),
            Reason::RankDeficient { rank, needed } => write!(
                f,
                "some variables can be computed from others: the rank is {rank}, it needs {needed}"
            ),
            Reason::Weighted => f.write_str("its theory does not cover rows that carry weights"),
            Reason::NotNormal { kurtosis } => write!(
                f,
                "it assumes normal rows; Mardia's kurtosis is {} standard deviations from theirs",
                significant(*kurtosis, 3)
            ),
            Reason::TooFewComponents { needed, found } => {
                write!(f, "it takes at least {needed} components; there are {found}")
            }
            Reason::TooLong { operations } => write!(
                f,
                "it would take about {operations:.0e} multiplications; `.effort(Effort::Full)` \
                 asks for it"
            ),
            Reason::Tied { component } => write!(
                f,
                "components {component} and {} have equal variances, and it divides by their \
                 difference",
                component + 1
            ),
            Reason::ConstantWhenResampled { n_failed, n_replicates } => write!(
                f,
                "{} of {} resampled tables had a column without variation",
                grouped(*n_failed),
                grouped(*n_replicates)
            ),
        }
    }
}

/// What a rule hands over: a comparison, or why there is none.
pub(super) type Answer = Result<Comparison, Reason>;
