//! The settings of charts and whether they fit.

use std::collections::HashSet;

use nalgebra::DMatrix;

use super::marks::MOST_MARKS;
use super::picture::Picture;
use super::source::Source;
use crate::components::Scaling;
use crate::error::{Error, Result};
use crate::exhibit::numbers::{grouped, stored};
use crate::parallel::ParallelAnalysis;
use crate::retention::Retention;
use crate::stability::{AsymptoticErrors, Bootstrap};

/// As many groups have a colour and shape of their own.
pub(super) const MOST_GROUPS: usize = 64;
const SIDES: std::ops::RangeInclusive<usize> = 240..=4000;

/// Variances that a scree compares the components with.
#[derive(Debug, Clone, PartialEq)]
pub enum Reference {
    /// The mean of all variances: what each variable has on average; one under correlation.
    MeanVariance,
    /// The broken stick: the expected lengths, longest first, of the p pieces of a stick that is
    /// as long as the total variance and breaks at random,
    ///
    /// ```text
    /// b_k = (T / p) Σ_{i=k}^{p} 1 / i
    /// ```
    ///
    /// with T the total variance. Source: S. Frontier (1976), "Étude de la décroissance des
    /// valeurs propres dans une analyse en composantes principales" (from memory).
    BrokenStick,
    /// The variances of tables without structure, from a parallel analysis: their percentile.
    Noise(Box<ParallelAnalysis>),
    /// The thresholds of the rules of a [`Retention`] that can be drawn beside variances, and how
    /// many components each number of rules keeps.
    Rules(Box<Retention>),
    /// An interval for each variance.
    Band(VarianceBand),
}

/// An interval for each of the leading variances, to be drawn in a scree.
#[derive(Debug, Clone, PartialEq)]
pub struct VarianceBand {
    pub(super) low: Vec<f64>,
    pub(super) high: Vec<f64>,
    pub(super) words: String,
}

impl VarianceBand {
    /// Joins lower and upper ends, the first component's first, and says in words what the
    /// intervals are ("95 % of 2000 bootstrap samples").
    ///
    /// # Errors
    ///
    /// [`Error::ShapeMismatch`] when there are not as many upper as lower ends.
    pub fn new(
        low: impl IntoIterator<Item = f64>,
        high: impl IntoIterator<Item = f64>,
        words: impl Into<String>,
    ) -> Result<Self> {
        let (low, high): (Vec<f64>, Vec<f64>) =
            (low.into_iter().collect(), high.into_iter().collect());
        check_count("upper ends of variances", low.len(), high.len())?;
        Ok(VarianceBand { low, high, words: words.into() })
    }
}

impl From<&ParallelAnalysis> for Reference {
    fn from(analysis: &ParallelAnalysis) -> Self {
        Reference::Noise(Box::new(analysis.clone()))
    }
}

impl From<ParallelAnalysis> for Reference {
    fn from(analysis: ParallelAnalysis) -> Self {
        Reference::Noise(Box::new(analysis))
    }
}

/// A setting that some kinds of chart have and others have not.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Setting {
    Components,
    Groups,
    Labels,
    Coverage,
    Reference,
    First,
    Intervals,
    Hulls,
}

/// What charts of units in a plane have.
pub(super) const OF_UNITS_IN_A_PLANE: &[Setting] =
    &[Setting::Components, Setting::Groups, Setting::Labels, Setting::Coverage, Setting::Hulls];

/// What charts of variables in a plane have.
pub(super) const OF_VARIABLES_IN_A_PLANE: &[Setting] = &[Setting::Components, Setting::Labels];

impl Setting {
    /// The name of the builder's method.
    pub fn name(self) -> &'static str {
        match self {
            Setting::Components => "components",
            Setting::Groups => "groups",
            Setting::Labels => "labels",
            Setting::Coverage => "coverage",
            Setting::Reference => "reference",
            Setting::First => "first",
            Setting::Intervals => "intervals",
            Setting::Hulls => "hulls",
        }
    }
}

impl From<&Retention> for Reference {
    fn from(retention: &Retention) -> Self {
        Reference::Rules(Box::new(retention.clone()))
    }
}

impl From<VarianceBand> for Reference {
    fn from(band: VarianceBand) -> Self {
        Reference::Band(band)
    }
}

impl From<&Bootstrap> for Reference {
    fn from(bootstrap: &Bootstrap) -> Self {
        let bands = bootstrap.variance_spread().percentile();
        Reference::Band(VarianceBand {
            low: bands.low().iter().copied().collect(),
            high: bands.high().iter().copied().collect(),
            words: bootstrap_words(bootstrap),
        })
    }
}

impl From<&AsymptoticErrors> for Reference {
    fn from(errors: &AsymptoticErrors) -> Self {
        let bands = errors.variance_bands();
        Reference::Band(VarianceBand {
            low: bands.low().iter().copied().collect(),
            high: bands.high().iter().copied().collect(),
            words: asymptotic_words(errors),
        })
    }
}

impl From<&Bootstrap> for Intervals {
    fn from(bootstrap: &Bootstrap) -> Self {
        Intervals {
            low: bootstrap.loadings_low().into_values(),
            high: bootstrap.loadings_high().into_values(),
            words: format!("Whiskers: {}.", bootstrap_words(bootstrap)),
        }
    }
}

impl From<&AsymptoticErrors> for Intervals {
    fn from(errors: &AsymptoticErrors) -> Self {
        Intervals {
            low: errors.loadings_low().into_values(),
            high: errors.loadings_high().into_values(),
            words: format!("Whiskers: {}.", asymptotic_words(errors)),
        }
    }
}

fn bootstrap_words(bootstrap: &Bootstrap) -> String {
    format!(
        "the middle {} % of {} bootstrap samples, seed {}",
        stored(100.0 * bootstrap.confidence(), 4),
        grouped(bootstrap.n_replicates()),
        bootstrap.seed()
    )
}

fn asymptotic_words(errors: &AsymptoticErrors) -> String {
    format!("{} % intervals by theory for normal rows", stored(100.0 * errors.confidence(), 4))
}

/// What a user set; checked before anything is drawn.
#[derive(Debug, Clone, Default, PartialEq)]
pub(super) struct Settings {
    pub components: Option<(usize, usize)>,
    pub groups: Option<Vec<Option<String>>>,
    pub labels: Option<Vec<Option<String>>>,
    pub title: Option<String>,
    pub size: Option<(usize, usize)>,
    pub coverage: Option<f64>,
    pub references: Vec<Reference>,
    pub first: Option<usize>,
    pub intervals: Option<Intervals>,
    pub hulls: bool,
}

/// The ends of an interval for each loading.
///
/// Made from two matrices of the shape of the loadings, or from a result that has intervals.
#[derive(Debug, Clone, PartialEq)]
pub struct Intervals {
    pub(super) low: DMatrix<f64>,
    pub(super) high: DMatrix<f64>,
    pub(super) words: String,
}

impl Intervals {
    /// Joins the lower and the upper ends, variables by components, and says in words what the
    /// intervals are ("whiskers: 95 % of 2000 bootstrap samples").
    ///
    /// # Errors
    ///
    /// [`Error::ShapeMismatch`] when the two matrices differ in shape.
    pub fn new(low: &DMatrix<f64>, high: &DMatrix<f64>, words: impl Into<String>) -> Result<Self> {
        check_count("rows of upper ends", low.nrows(), high.nrows())?;
        check_count("columns of upper ends", low.ncols(), high.ncols())?;
        Ok(Intervals { low: low.clone(), high: high.clone(), words: words.into() })
    }

    /// Whether there is an interval for each loading that is drawn.
    pub(super) fn check(&self, n_variables: usize, n_components: usize) -> Result<()> {
        check_count("rows of intervals", n_variables, self.low.nrows())?;
        if self.low.ncols() < n_components {
            let available = self.low.ncols();
            return Err(Error::ComponentOutOfRange { asked: n_components, available });
        }
        Ok(())
    }
}

impl Settings {
    /// The two components to draw; the second is missing when there is only one.
    pub fn plane(&self, source: &Source) -> (Option<usize>, Option<usize>) {
        match self.components {
            Some((sideways, upwards)) => (Some(sideways), Some(upwards)),
            None => (Some(1), (source.n_components() > 1).then_some(2)),
        }
    }

    pub fn title_or(&self, usual: String) -> String {
        self.title.clone().unwrap_or(usual)
    }

    /// Whether a kind of chart has what was set, and whether title-free settings are in range.
    pub fn check(&self, picture: &dyn Picture) -> Result<()> {
        let takes = picture.takes();
        if let Some(foreign) = self.set().find(|setting| !takes.contains(setting)) {
            let available =
                takes.iter().map(|setting| setting.name()).chain(["title", "size"]).collect();
            let (setting, chart) = (foreign.name(), picture.kind());
            return Err(Error::SettingNotForChart { setting, chart, available });
        }
        for side in self.size.iter().flat_map(|size| [size.0, size.1]) {
            if !SIDES.contains(&side) {
                return Err(Error::OptionOutOfRange {
                    option: "size",
                    value: side as f64,
                    accepted: "width and height from 240 to 4000 pixels",
                });
            }
        }
        if let Some(coverage) = self.coverage
            && !(coverage > 0.0 && coverage < 1.0)
        {
            return Err(Error::OptionOutOfRange {
                option: "coverage",
                value: coverage,
                accepted: "above 0 and below 1",
            });
        }
        Ok(())
    }

    /// What was set, besides title and size.
    pub fn set(&self) -> impl Iterator<Item = Setting> {
        [
            (Setting::Components, self.components.is_some()),
            (Setting::Groups, self.groups.is_some()),
            (Setting::Labels, self.labels.is_some()),
            (Setting::Coverage, self.coverage.is_some()),
            (Setting::Reference, !self.references.is_empty()),
            (Setting::First, self.first.is_some()),
            (Setting::Intervals, self.intervals.is_some()),
            (Setting::Hulls, self.hulls),
        ]
        .into_iter()
        .filter_map(|(setting, is_set)| is_set.then_some(setting))
    }

    /// Whether the components that were chosen are there and differ.
    pub fn check_components(&self, available: usize) -> Result<()> {
        let Some((sideways, upwards)) = self.components else { return Ok(()) };
        for asked in [sideways, upwards] {
            if !(1..=available).contains(&asked) {
                return Err(Error::ComponentOutOfRange { asked, available });
            }
        }
        if sideways == upwards {
            return Err(Error::OptionOutOfRange {
                option: "components",
                value: upwards as f64,
                accepted: "two different components",
            });
        }
        Ok(())
    }

    /// Whether there is a group and a label for each unit.
    pub fn check_units(&self, n_units: usize) -> Result<()> {
        if let Some(groups) = &self.groups {
            check_count("groups", n_units, groups.len())?;
            let different: HashSet<&Option<String>> = groups.iter().collect();
            if different.len() > MOST_GROUPS {
                return Err(Error::OptionOutOfRange {
                    option: "number of groups",
                    value: different.len() as f64,
                    accepted: "at most 64 different groups",
                });
            }
        }
        match &self.labels {
            Some(labels) => check_count("labels of units", n_units, labels.len()),
            None => Ok(()),
        }
    }

    /// As [`check_units`](Settings::check_units), for charts that draw every unit one by one.
    pub fn check_drawn_units(&self, n_units: usize) -> Result<()> {
        if n_units > MOST_MARKS {
            return Err(Error::OptionOutOfRange {
                option: "number of rows",
                value: n_units as f64,
                accepted: "at most 20000; take those of interest with `select_rows`",
            });
        }
        self.check_units(n_units)
    }

    /// Whether there is a label for each variable.
    pub fn check_variables(&self, n_variables: usize) -> Result<()> {
        match &self.labels {
            Some(labels) => check_count("labels of variables", n_variables, labels.len()),
            None => Ok(()),
        }
    }

    /// Whether what was set fits units in the plane of two components.
    pub fn check_plane_of_units(&self, source: &Source) -> Result<()> {
        self.check_components(source.n_components())?;
        self.check_units(source.scores.nrows())
    }

    /// Whether what was set fits variables in the plane of two components.
    pub fn check_plane_of_variables(&self, source: &Source) -> Result<()> {
        self.check_components(source.n_components())?;
        self.check_variables(source.variables.len())
    }

    /// Whether the references of a scree fit its components.
    pub fn check_references(&self, source: &Source) -> Result<()> {
        self.references.iter().try_for_each(|reference| check_reference(reference, source))
    }

    /// The names of units or variables: those that were set, or their own.
    pub fn names_or(&self, own: &[String]) -> Vec<String> {
        match &self.labels {
            Some(labels) => labels.iter().map(|label| label.clone().unwrap_or_default()).collect(),
            None => own.to_vec(),
        }
    }

    /// Width and height of the card, or the usual ones.
    pub fn size_or(&self, width: f64, height: f64) -> (f64, f64) {
        self.size.map_or((width, height), |size| (size.0 as f64, size.1 as f64))
    }
}

// Noise and rules are those of an analysis of the same shape and scaling only.
fn check_reference(reference: &Reference, source: &Source) -> Result<()> {
    let (n_rows, n_variables) = match reference {
        Reference::MeanVariance | Reference::BrokenStick | Reference::Band(_) => return Ok(()),
        Reference::Noise(analysis) => {
            if source.scaling != Scaling::Correlation {
                return Err(Error::SettingNotForChart {
                    setting: "reference to a parallel analysis",
                    chart: "scree of a covariance matrix",
                    available: vec!["mean variance", "broken stick"],
                });
            }
            (analysis.n_rows(), analysis.n_variables())
        }
        Reference::Rules(retention) => {
            if retention.scaling() != source.scaling {
                return Err(Error::SettingNotForChart {
                    setting: "reference to rules for another scaling",
                    chart: "scree",
                    available: vec!["the rules of its own analysis"],
                });
            }
            (retention.n_rows(), retention.n_variables())
        }
    };
    check_count("rows behind the reference", source.n_rows, n_rows)?;
    check_count("variables behind the reference", source.variables.len(), n_variables)
}

fn check_count(what: &'static str, expected: usize, found: usize) -> Result<()> {
    if expected == found { Ok(()) } else { Err(Error::ShapeMismatch { what, expected, found }) }
}
