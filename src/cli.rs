//! What can be typed. Types alone: what it means is the library's.

use clap::{Parser, Subcommand};
use std::path::PathBuf;

const EXIT_CODES: &str = "\
Exit codes:
  0  done; every loop got its record (one that recommends no settings is a record) or its plan
  1  nothing could be done, nothing was written
  2  the command was not understood
  3  some loops could not be recorded or planned, the others were

inspect ends with 1 where no log could be read, with 3 where some could not";

/// Reads step-test logs, fits and tunes each control loop, and typesets its loop-tuning record.
#[derive(Debug, Parser)]
#[command(name = "asleft", version, after_help = EXIT_CODES)]
pub struct Cli {
    /// Print one JSON document on standard output instead of text
    #[arg(long, global = true)]
    pub json: bool,
    /// Print errors only
    #[arg(long, global = true)]
    pub quiet: bool,
    /// What to do
    #[command(subcommand)]
    pub command: Command,
}

/// The commands.
#[derive(Debug, Subcommand)]
pub enum Command {
    /// Lay out a job folder: job.toml, a loop schedule, a place for the logs
    #[command(after_help = "Example:\n  asleft new unit-200")]
    New {
        /// The folder to make; refused where it holds anything
        folder: PathBuf,
    },
    /// Write the sheets to take to the control room before the step tests
    #[command(
        after_help = "Examples:\n  asleft plan unit-200\n  asleft plan unit-200 --loop TIC-204 --records ../2019/records"
    )]
    Plan {
        /// The job folder
        job: PathBuf,
        /// Only this loop; may be repeated
        #[arg(long = "loop", value_name = "TAG")]
        loops: Vec<String>,
        /// Folder of the plans [default: JOB/plan]
        #[arg(long, value_name = "DIR")]
        out: Option<PathBuf>,
        /// Folder of earlier records of the loops, whose figures are used [default: JOB/records]
        #[arg(long, value_name = "DIR")]
        records: Option<PathBuf>,
    },
    /// Tell what a log holds: its columns, clock, gaps, moves of the OP, and the schedule line for it
    #[command(
        after_help = "Examples:\n  asleft inspect unit-200/logs/tic204.xlsx\n  asleft inspect --job unit-200 --tag TIC-204 unit-200/logs/all.csv"
    )]
    Inspect {
        /// The exported files; FILE.xlsx#Sheet for one sheet
        #[arg(required = true, value_name = "LOG")]
        logs: Vec<PathBuf>,
        /// Look at this loop alone, in a log of many
        #[arg(long)]
        tag: Option<String>,
        /// Read by the [[log]] rules of this job [default: the job folder that the log lies in]
        #[arg(long, value_name = "JOB")]
        job: Option<PathBuf>,
    },
    /// Do all that `record` would do short of writing, and list every finding
    #[command(after_help = "Example:\n  asleft check unit-200")]
    Check {
        /// The job folder
        job: PathBuf,
        /// Only this loop; may be repeated
        #[arg(long = "loop", value_name = "TAG")]
        loops: Vec<String>,
    },
    /// Write the records, the dossier and the register
    #[command(
        after_help = "Examples:\n  asleft record unit-200\n  asleft record unit-200 --loop TIC-204 --loop FIC-203 --out review"
    )]
    Record {
        /// The job folder
        job: PathBuf,
        /// Only this loop, without the dossier; may be repeated
        #[arg(long = "loop", value_name = "TAG")]
        loops: Vec<String>,
        /// Folder of the records [default: JOB/records]
        #[arg(long, value_name = "DIR")]
        out: Option<PathBuf>,
        /// Write no dossier
        #[arg(long)]
        no_dossier: bool,
    },
    /// Print the JSON Schema of a record's JSON
    #[command(after_help = "Example:\n  asleft schema > record.schema.json")]
    Schema,
}
