//! Notebook files, and running one from the command line without any client.
//!
//! A notebook is read and checked, its code cells are run from top to bottom through the same engine
//! that serves clients, and what they showed is written into a copy of it. Nothing that the notebook
//! holds besides results is changed. Whether the results can be written is found out before the
//! first cell runs, and an older file stays until the new one is whole.

pub mod check;
pub mod document;
pub mod error;
pub mod outputs;
pub mod parameters;
pub mod pictures;
pub mod run;
pub mod screen;
pub mod target;
