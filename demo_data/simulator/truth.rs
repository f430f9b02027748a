//! `truth.csv`: what the simulator knows and the fit has to find.

use std::error::Error;
use std::path::Path;

use crate::controller::{Controller, ControllerSpec, Settings};
use crate::logs::Runs;
use crate::rig::LoopSpec;

/// The extra lag, s, that an inner loop in automatic puts before its outer process.
///
/// The mean delay of a closed loop with integral action is exactly `1 / (Ki K)`; what of it is not the
/// inner loop's own dead time counts as a lag.
pub fn inner_lag_s(inner: &LoopSpec, spec: &ControllerSpec, settings: Settings) -> f64 {
    let span = inner.pv_high - inner.pv_low;
    let integral_gain_per_s = Controller::new(spec, settings, span).integral_gain_per_s();
    let gain = inner.process.curve.gain;
    1.0 / (integral_gain_per_s * gain) - inner.process.dead_time_s
}

/// Writes the truth of all loops; `extra` gives a loop's dead time and lag that stand before its own.
pub fn write(
    path: &Path,
    all: &[Runs],
    extra: impl Fn(&str) -> Option<(f64, f64)>,
) -> Result<(), Box<dyn Error>> {
    let mut writer = csv::Writer::from_path(path)?;
    writer.write_record(["tag", "step", "gain", "dead_time_s", "lags_s"])?;
    for runs in all {
        let process = &runs.spec.process;
        let (mut dead_time_s, mut lags_s) = (process.dead_time_s, process.lags_s.to_vec());
        if let Some((more_dead_time_s, lag_s)) = extra(runs.spec.tag) {
            dead_time_s += more_dead_time_s;
            lags_s.push(lag_s);
        }
        let lags: Vec<String> = lags_s.iter().map(|lag_s| significant(*lag_s)).collect();
        for (n, step) in runs.test.steps.iter().enumerate() {
            writer.write_record([
                runs.spec.tag,
                &(n + 1).to_string(),
                &significant(step.gain),
                &significant(dead_time_s),
                &lags.join(";"),
            ])?;
        }
    }
    writer.flush()?;
    Ok(())
}

/// Five significant digits, without trailing zeros.
fn significant(value: f64) -> String {
    let magnitude = value.abs().log10().floor() as i32;
    let decimals = usize::try_from(4 - magnitude).unwrap_or(0);
    let text = format!("{value:.decimals$}");
    if text.contains('.') {
        text.trim_end_matches('0').trim_end_matches('.').to_owned()
    } else {
        text
    }
}
