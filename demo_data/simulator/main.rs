//! The simulator of the demo plant: makes the job folder `demo_data`.
//!
//! ```text
//! cargo run --release --example simulate_plant -- demo_data
//! ```
//!
//! It writes `job.toml`, `loops.xlsx`, `logs/*` and `simulator/truth.csv` below the folder named, the
//! same each time. The plant, its people and its papers are invented.
//!
//! A loop is a valve with play (and, in one trial, stiction), a static curve, a transport delay and
//! two to four lags in series, which for a level end in a tank; a slow wander, a change of shift, noise
//! and the resolution of the transmitter come on top. A lag is advanced exactly over a tick of
//! 0.05 to 1 s. In manual the operator moves the controller output; in automatic the controller runs at
//! its own scan with the settings of `tuning.rs`, in its own form.
//!
//! `truth.csv` has one row for each deliberate step (the return of a pulse is none of its own):
//!
//! | column | meaning |
//! | --- | --- |
//! | `tag` | the loop |
//! | `step` | number of the step in the log, from 1 |
//! | `gain` | mean slope of the static curve between the two valve positions, so without what the play of the valve takes from the move; %/% or, for a level, %/s/%; signed |
//! | `dead_time_s` | transport delay, s; no log adds a hold to it, since the PV is logged at the instants at which it is refreshed |
//! | `lags_s` | all lags in series, s, separated by `;` |
//!
//! For the outer loop of the cascade `dead_time_s` holds the dead time of the inner process too, and the
//! last of the lags stands for the inner loop in automatic, so that dead time and lags add up to the mean
//! delay from one set point to the other PV.

mod controller;
mod job;
mod logs;
mod plant;
mod process;
mod random;
mod rig;
mod schedule;
mod scripts;
mod table;
mod truth;
mod tuning;

use std::error::Error;
use std::path::Path;

use logs::Runs;
use rig::{Inner, LoopSpec, run};
use tuning::tuning;

fn main() -> Result<(), Box<dyn Error>> {
    let folder = std::env::args()
        .nth(1)
        .ok_or("name the folder to write, such as demo_data")?;
    let folder = Path::new(&folder);
    let logs = folder.join("logs");
    std::fs::create_dir_all(&logs)?;
    std::fs::create_dir_all(folder.join("simulator"))?;
    std::fs::write(folder.join("job.toml"), job::JOB_TOML)?;
    schedule::write(&folder.join("loops.xlsx"))?;

    let mut all = Vec::new();
    for spec in plant::LOOPS {
        let controller = &tuning(spec.tag).controller;
        let test = run(&spec, controller, scripts::test(&spec), inner(&spec)?);
        let at_trial = plant::at_trial(spec);
        let trial = match scripts::trial(&at_trial) {
            Some(script) => Some(run(&at_trial, controller, script, inner(&spec)?)),
            None => None,
        };
        let runs = Runs { spec, test, trial };
        logs::write(&logs, &runs)?;
        all.push(runs);
    }

    let steam = &plant::FIC203;
    let steam_tuning = tuning(steam.tag);
    let steam_left = steam_tuning.left.ok_or("FIC-203 has no settings as left")?;
    let lag_s = truth::inner_lag_s(steam, &steam_tuning.controller, steam_left);
    truth::write(&folder.join("simulator").join("truth.csv"), &all, |tag| {
        (tag == plant::TIC202.tag).then_some((steam.process.dead_time_s, lag_s))
    })
}

/// The inner loop that a loop's output is the set point of.
fn inner(spec: &LoopSpec) -> Result<Option<Inner>, Box<dyn Error>> {
    if spec.tag != plant::TIC202.tag {
        return Ok(None);
    }
    let steam = &plant::FIC203;
    let row = tuning(steam.tag);
    let left = row
        .left
        .ok_or("the inner loop is tuned before the outer one is tested")?;
    Ok(Some(Inner::at_rest(
        steam,
        &row.controller,
        left,
        spec.start_op,
        spec.tick_s,
    )))
}
