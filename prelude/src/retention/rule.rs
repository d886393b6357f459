//! The rules, by name and by source.

use std::fmt;

/// A rule for the number of components.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
#[non_exhaustive]
pub enum Rule {
    /// The fewest components that together reach a share of the total variance. The share is a
    /// matter of taste.
    CumulativeShare,
    /// Variances above their mean; above one for correlations (Kaiser's rule, Guttman's bound).
    MeanRoot,
    /// Variances above 0.7 of their mean, since those of a sample scatter about those of the
    /// population.
    LowerMeanRoot,
    /// Variances above what the longest, the second longest and so on of the pieces of a stick
    /// broken at random have on average.
    BrokenStick,
    /// Where the curve of variances bends most.
    Acceleration,
    /// Variances above the mean and above the line through the next and the last one.
    OptimalCoordinates,
    /// Parallel analysis: above the mean of normal noise (Horn).
    NoiseMean,
    /// Parallel analysis: above a percentile of normal noise (Glorfeld).
    NoisePercentile,
    /// Parallel analysis: above the mean of the data with every column shuffled.
    PermutedMean,
    /// Parallel analysis: above a percentile of the data with every column shuffled.
    PermutedPercentile,
    /// Parallel analysis of correlations with squared multiple correlations on the diagonal: above
    /// the mean of normal noise. It counts what variables share.
    SharedMean,
    /// The same, above a percentile of normal noise.
    SharedPercentile,
    /// Minimum average partial: the number after which the mean squared partial correlation is
    /// least (Velicer).
    AveragePartial,
    /// The same with fourth powers of the partial correlations.
    AveragePartialFourth,
    /// Bartlett's test that the remaining roots of a correlation matrix are equal, in sequence.
    BartlettTest,
    /// The same with Lawley's correction.
    LawleyTest,
    /// The likelihood-ratio test that the remaining roots of a covariance matrix are equal, in
    /// sequence (Anderson), with Bartlett's factor.
    LikelihoodRatioTest,
    /// Cross-validation by leaving out a row and a column at a time (Eastment and Krzanowski).
    RowColumnValidation,
    /// Cross-validation cell by cell: components from other rows, scores from the row's other
    /// variables.
    CellValidation,
    /// The optimal hard threshold for singular values in noise of unknown size (Gavish and Donoho).
    SingularThreshold,
    /// Roots beyond the Tracy–Widom law of the largest root of noise, in sequence.
    TracyWidom,
    /// Minka's approximation of the evidence of the probabilistic model.
    Evidence,
    /// Bootstrap intervals of the variances that lie above the mean root.
    BootstrapMean,
    /// Bootstrap intervals of neighbouring variances that do not overlap.
    BootstrapGaps,
}

impl Rule {
    /// Every rule, in the order in which they are reported.
    pub const ALL: [Rule; 24] = [
        Rule::CumulativeShare,
        Rule::MeanRoot,
        Rule::LowerMeanRoot,
        Rule::BrokenStick,
        Rule::Acceleration,
        Rule::OptimalCoordinates,
        Rule::NoiseMean,
        Rule::NoisePercentile,
        Rule::PermutedMean,
        Rule::PermutedPercentile,
        Rule::SharedMean,
        Rule::SharedPercentile,
        Rule::AveragePartial,
        Rule::AveragePartialFourth,
        Rule::BartlettTest,
        Rule::LawleyTest,
        Rule::LikelihoodRatioTest,
        Rule::RowColumnValidation,
        Rule::CellValidation,
        Rule::SingularThreshold,
        Rule::TracyWidom,
        Rule::Evidence,
        Rule::BootstrapMean,
        Rule::BootstrapGaps,
    ];

    /// The term of the trade.
    pub fn name(self) -> &'static str {
        match self {
            Rule::CumulativeShare => "cumulative share",
            Rule::MeanRoot => "mean root",
            Rule::LowerMeanRoot => "0.7 of the mean root",
            Rule::BrokenStick => "broken stick",
            Rule::Acceleration => "scree: acceleration factor",
            Rule::OptimalCoordinates => "scree: optimal coordinates",
            Rule::NoiseMean => "parallel, normal: mean",
            Rule::NoisePercentile => "parallel, normal: percentile",
            Rule::PermutedMean => "parallel, permuted: mean",
            Rule::PermutedPercentile => "parallel, permuted: percentile",
            Rule::SharedMean => "parallel, reduced: mean",
            Rule::SharedPercentile => "parallel, reduced: percentile",
            Rule::AveragePartial => "minimum average partial",
            Rule::AveragePartialFourth => "average partial, fourth power",
            Rule::BartlettTest => "equal roots: Bartlett",
            Rule::LawleyTest => "equal roots: Lawley",
            Rule::LikelihoodRatioTest => "equal roots: likelihood ratio",
            Rule::RowColumnValidation => "cross-validation, row and column",
            Rule::CellValidation => "cross-validation, cell by cell",
            Rule::SingularThreshold => "optimal singular-value threshold",
            Rule::TracyWidom => "Tracy–Widom",
            Rule::Evidence => "evidence (Minka)",
            Rule::BootstrapMean => "bootstrap against the mean root",
            Rule::BootstrapGaps => "bootstrap of neighbours",
        }
    }

    /// Author and year, for a table.
    pub fn authors(self) -> &'static str {
        match self {
            Rule::CumulativeShare => "Jolliffe 2002, 6.1.1",
            Rule::MeanRoot => "Guttman 1954; Kaiser 1960",
            Rule::LowerMeanRoot => "Jolliffe 1972",
            Rule::BrokenStick => "Frontier 1976; Jackson 1993",
            Rule::Acceleration | Rule::OptimalCoordinates => "Raîche et al. 2013",
            Rule::NoiseMean => "Horn 1965",
            Rule::NoisePercentile => "Glorfeld 1995",
            Rule::PermutedMean | Rule::PermutedPercentile => "Buja and Eyuboglu 1992",
            Rule::SharedMean | Rule::SharedPercentile => "Humphreys and Ilgen 1969",
            Rule::AveragePartial => "Velicer 1976",
            Rule::AveragePartialFourth => "Velicer et al. 2000",
            Rule::BartlettTest => "Bartlett 1950, 1951",
            Rule::LawleyTest => "Lawley 1956",
            Rule::LikelihoodRatioTest => "Anderson 1963",
            Rule::RowColumnValidation => "Eastment and Krzanowski 1982",
            Rule::CellValidation => "Bro et al. 2008",
            Rule::SingularThreshold => "Gavish and Donoho 2014",
            Rule::TracyWidom => "Patterson et al. 2006",
            Rule::Evidence => "Minka 2000",
            Rule::BootstrapMean | Rule::BootstrapGaps => "Jackson 1993",
        }
    }

    /// Where the rule comes from.
    pub fn source(self) -> &'static str {
        match self {
            Rule::CumulativeShare => {
                "common practice; I. T. Jolliffe (2002), \"Principal Component Analysis\", 2nd \
                 edition, section 6.1.1, names 70 to 90 %"
            }
            Rule::MeanRoot => {
                "L. Guttman (1954), \"Some necessary conditions for common-factor analysis\", \
                 Psychometrika 19, 149–161; H. F. Kaiser (1960), \"The application of electronic \
                 computers to factor analysis\", Educational and Psychological Measurement 20, \
                 141–151"
            }
            Rule::LowerMeanRoot => {
                "I. T. Jolliffe (1972), \"Discarding variables in a principal component analysis \
                 I\", Applied Statistics 21, 160–173"
            }
            Rule::BrokenStick => {
                "S. Frontier (1976), \"Étude de la décroissance des valeurs propres dans une \
                 analyse en composantes principales\", Journal of Experimental Marine Biology and \
                 Ecology 25, 67–75; D. A. Jackson (1993), Ecology 74, 2204–2214"
            }
            Rule::Acceleration | Rule::OptimalCoordinates => {
                "G. Raîche, T. A. Walls, D. Magis, M. Riopel and J.-G. Blais (2013), \
                 \"Non-graphical solutions for Cattell's scree test\", Methodology 9, 23–29"
            }
            Rule::NoiseMean => {
                "J. L. Horn (1965), \"A rationale and test for the number of factors in factor \
                 analysis\", Psychometrika 30, 179–185"
            }
            Rule::NoisePercentile => {
                "L. W. Glorfeld (1995), \"An improvement on Horn's parallel analysis \
                 methodology\", Educational and Psychological Measurement 55, 377–393"
            }
            Rule::PermutedMean | Rule::PermutedPercentile => {
                "A. Buja and N. Eyuboglu (1992), \"Remarks on parallel analysis\", Multivariate \
                 Behavioral Research 27, 509–540"
            }
            Rule::SharedMean | Rule::SharedPercentile => {
                "L. G. Humphreys and D. R. Ilgen (1969), \"Note on a criterion for the number of \
                 common factors\", Educational and Psychological Measurement 29, 571–578"
            }
            Rule::AveragePartial => {
                "W. F. Velicer (1976), \"Determining the number of components from the matrix of \
                 partial correlations\", Psychometrika 41, 321–327"
            }
            Rule::AveragePartialFourth => {
                "W. F. Velicer, C. A. Eaton and J. L. Fava (2000), \"Construct explication through \
                 factor or component analysis\", in \"Problems and Solutions in Human \
                 Assessment\", 41–71"
            }
            Rule::BartlettTest => {
                "M. S. Bartlett (1950), \"Tests of significance in factor analysis\", British \
                 Journal of Psychology (Statistical Section) 3, 77–85; (1951), \"The effect of \
                 standardization on a χ² approximation in factor analysis\", Biometrika 38, \
                 337–344"
            }
            Rule::LawleyTest => {
                "D. N. Lawley (1956), \"Tests of significance for the latent roots of covariance \
                 and correlation matrices\", Biometrika 43, 128–136"
            }
            Rule::LikelihoodRatioTest => {
                "T. W. Anderson (1963), \"Asymptotic theory for principal component analysis\", \
                 Annals of Mathematical Statistics 34, 122–148; K. V. Mardia, J. T. Kent and \
                 J. M. Bibby (1979), \"Multivariate Analysis\", section 8.4.3"
            }
            Rule::RowColumnValidation => {
                "H. T. Eastment and W. J. Krzanowski (1982), \"Cross-validatory choice of the \
                 number of components from a principal component analysis\", Technometrics 24, \
                 73–77; the last W above one after Jolliffe (2002), section 6.1.5"
            }
            Rule::CellValidation => {
                "R. Bro, K. Kjeldahl, A. K. Smilde and H. A. L. Kiers (2008), \"Cross-validation \
                 of component models: a critical look at current methods\", Analytical and \
                 Bioanalytical Chemistry 390, 1241–1251"
            }
            Rule::SingularThreshold => {
                "M. Gavish and D. L. Donoho (2014), \"The optimal hard threshold for singular \
                 values is 4/√3\", IEEE Transactions on Information Theory 60, 5040–5053"
            }
            Rule::TracyWidom => {
                "I. M. Johnstone (2001), \"On the distribution of the largest eigenvalue in \
                 principal components analysis\", Annals of Statistics 29, 295–327; N. Patterson, \
                 A. L. Price and D. Reich (2006), \"Population structure and eigenanalysis\", PLoS \
                 Genetics 2, e190"
            }
            Rule::Evidence => {
                "T. P. Minka (2000), \"Automatic choice of dimensionality for PCA\", Advances in \
                 Neural Information Processing Systems 13, 598–604"
            }
            Rule::BootstrapMean | Rule::BootstrapGaps => {
                "D. A. Jackson (1993), \"Stopping rules in principal components analysis: a \
                 comparison of heuristical and statistical approaches\", Ecology 74, 2204–2214"
            }
        }
    }
}

impl fmt::Display for Rule {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.name())
    }
}
