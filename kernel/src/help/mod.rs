//! Help while typing: whether a cell is complete, what could follow, what a name means.

pub mod index;
