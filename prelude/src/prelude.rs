//! The names that every cell can use without a `use` line.
//!
//! Chosen one by one: a glob of the data-frame library's own prelude would bring some two thousand
//! names, among them a `Result` of its own. Whoever needs more of it writes
//! `use polars::prelude::*;` in a cell.

// From tables to statistics.
pub use crate::adequacy::{Adequacy, MultivariateNormality, adequacy, multivariate_normality};
pub use crate::comparison::{
    Congruence, PrincipalAngles, Procrustes, ProcrustesOptions, ProcrustesTest,
    ProcrustesTestOptions, Similarity, congruence, principal_angles, procrustes, procrustes_test,
    procrustes_with,
};
pub use crate::components::{
    Communalities, ComponentOptions, Decomposition, FittedComponents, PrincipalComponents,
    RandomisedOptions, Reconstruction, Route, Scaling, SupplementaryColumns, SupplementaryGroups,
    principal_components, principal_components_with,
};
pub use crate::distances::{
    Contributions, Distances, QRule, Standing, TSquaredAndQ, distances, distances_of,
    t_squared_and_q,
};
pub use crate::error::{Error, Result};
pub use crate::exhibit::{
    Bundle, Chart, Content, Exhibit, Intervals, NumberFormat, Reference, Table, TableColumn,
    Turntable, VarianceBand, biplot, contribution_plot, correlation_map, distance_plot,
    loading_bars, loading_plot, pairs, profiles, rotation_plot, score_matrix, score_plot, scree,
    sequence_plot, significant, structure_circle, turntable, variance_shares,
};
pub use crate::gaps::{
    Completed, ComponentChoice, ComponentRule, EstimatedCell, GapMethod, GapOptions,
    ProbabilisticComponents, ProbabilisticOptions, components_for_gaps, estimate_missing,
    probabilistic_components,
};
pub use crate::parallel::{Noise, ParallelAnalysis, ParallelOptions, RootsOf, parallel_analysis};
pub use crate::random::{Generator, random_generator, random_normal};
pub use crate::retention::{
    Effort, Retention, RetentionOptions, Rule, Verdict, retention, retention_with,
};
pub use crate::robust::{
    RobustComponents, RobustOptions, RobustRoute, RobustScatter, robust_components, robust_scatter,
};
pub use crate::rotation::{
    Rotated, RotatedComponents, Rotation, RotationOptions, rotate, rotate_with,
};
pub use crate::stability::{
    Alignment, AsymptoticErrors, AsymptoticOptions, Bootstrap, BootstrapOptions, LeaveOut,
    LeaveOutOptions, asymptotic_errors, bootstrap, leave_out,
};
pub use crate::table::{
    ColumnCheck, ColumnDescription, ColumnDescriptions, DataMatrix, FrameToMatrix, GappedMatrix,
    Label, MatrixOptions, Missing, MissingPattern, MissingValues, NamedMatrix, NumberType,
    TableOptions, describe_columns, missing_values, read_table, read_table_with,
};
pub use crate::transform::{Transform, Transformation};

// Showing something in the middle of a cell.
pub use crate::show;

// Saying how far a long loop has come.
pub use crate::live::{Progress, counted};

// Matrices and vectors.
pub use nalgebra::{self, DMatrix, DVector, dmatrix, dvector};

// Data frames: what filtering, grouping, joining and deriving columns take.
pub use polars;
pub use polars::prelude::{
    AnyValue, BooleanChunked, ChunkAgg, ChunkCompareEq, ChunkCompareIneq, ChunkUnique, Column,
    DataFrame, DataFrameJoinOps, DataType, Expr, Field, FillNullStrategy, Float64Chunked,
    Int64Chunked, IntoColumn, IntoLazy, IntoSeries, JoinArgs, JoinType, LazyFrame, NamedFrom,
    PlSmallStr, QuantileMethod, Schema, Series, SortMultipleOptions, StringChunked,
    UniqueKeepStrategy, all, coalesce, col, cols, concat, df, len, lit, when,
};

// What a generator needs to be of use.
pub use rand::RngExt;
pub use rand_distr::Distribution;

pub use std::collections::{BTreeMap, HashMap};
