//! The tests across modules, in one binary: the typesetter links slowly. How to add one:
//! `tests/README.md`.

mod archive;
mod broken;
mod cli;
mod demo;
mod errors;
mod identify;
mod inspect;
mod layering;
mod new_user;
mod plant;
mod predict;
mod published;
mod register;
mod schema;
mod support;
mod synthetic;
mod twins;
