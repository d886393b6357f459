//! Numbers from outside: books, and other programs on open data, a file for each statistical
//! family. `tests/references/README.md` says how the values were made.

mod components;
mod parallel;
mod retention;
mod tables;
mod weights_and_meaning;

mod files;
