//! Reads step-test logs, fits and tunes each control loop, and typesets its loop-tuning record.

pub mod archive;
pub mod assemble;
pub mod design;
pub mod display;
pub mod document;
pub mod figures;
pub mod identify;
mod inspect;
pub mod job;
pub mod model;
pub mod notice;
mod pipeline;
pub mod plan;
mod planning;
pub mod predict;
pub mod quantity;
pub mod read;
pub mod record;
pub mod register;
pub mod report;
mod run;
pub mod settings;
pub mod steps;
pub mod trace;

pub use inspect::inspect;
pub use planning::{PlanOptions, plan_sheets};
pub use run::{RecordOptions, check, new_job, record};
