//! Reads step-test logs, fits and tunes each control loop, and typesets its loop-tuning record.

pub mod design;
pub mod identify;
pub mod job;
pub mod model;
pub mod notice;
pub mod predict;
pub mod quantity;
pub mod read;
pub mod settings;
pub mod steps;
pub mod trace;
