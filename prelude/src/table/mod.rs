//! Tables and the matrices made from them.
//!
//! A file becomes a data frame with [`read_table`], a data frame becomes a [`DataMatrix`] with
//! [`FrameToMatrix`], and every analysis starts from the latter. Nothing is repaired silently on
//! the way: what cannot be read as it stands is an error that says where and what would be
//! accepted, and what is left out by choice is listed in the matrix's notes. Methods that estimate
//! missing values start from a [`GappedMatrix`] instead. What is measured in unhandy units is
//! [transformed](crate::transform) afterwards, and [`DataMatrix::check_columns`] tells columns that
//! say nothing of their own.
//!
//! Conventions: rows are observations and columns are variables; rows are counted from 1 in
//! messages; a missing value is a cell without content, or one that says `NA` (see
//! [`TableOptions`]), and is not the same as a number that is not finite.

mod read;

mod check;
mod frame;
mod gapped;
mod matrix;
mod named;
mod notes;
mod options;
mod pattern;
mod weights;

mod describe;
mod nearest;

#[cfg(test)]
mod tests;

pub use check::{ColumnCheck, LinearPair};
pub use describe::{
    ColumnDescription, ColumnDescriptions, MissingPattern, MissingValues, NumberDescription,
    describe_columns, missing_values,
};
pub use frame::FrameToMatrix;
pub use gapped::GappedMatrix;
pub use matrix::DataMatrix;
pub use named::NamedMatrix;
pub use notes::{DroppedRow, LabelSource, LeftOut, LeftOutReason, MatrixNotes};
pub use options::{Label, MatrixOptions, Missing, NumberType};
pub use read::{READABLE, TableOptions, read_table, read_table_with};

pub(crate) use matrix::check_names;
