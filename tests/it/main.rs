//! The tests across modules, in one binary: the typesetter links slowly. How to add one:
//! `tests/README.md`.

mod archive;
mod as_found;
mod broken;
mod cascade;
mod cli;
mod demo;
mod errors;
mod forms;
mod identify;
mod inspect;
mod layering;
mod loops;
mod new_user;
mod paper;
mod plan;
mod plant;
mod predict;
mod published;
mod reading;
mod register;
mod schema;
mod support;
mod synthetic;
mod twins;
mod withheld;
