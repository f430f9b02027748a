//! The tests across modules, in one binary: the typesetter links slowly. How to add one:
//! `tests/README.md`.

mod archive;
mod cli;
mod identify;
mod layering;
mod register;
mod schema;
mod support;
mod synthetic;
