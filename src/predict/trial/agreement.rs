//! Whether a measured set-point response is the predicted one.

use crate::predict::Metrics;
use crate::predict::oscillation::Oscillation;
use crate::predict::words::duration;

/// Measured and predicted settling times agree within this part of the predicted one.
const SETTLING_AGREES: f64 = 0.5;
/// Measured and predicted overshoot agree within so many points.
const OVERSHOOT_AGREES: f64 = 10.0;

/// Whether a set-point response agrees with its prediction, and why.
pub(super) fn agreement(
    measured: &Metrics,
    predicted: &Metrics,
    oscillation: Option<&Oscillation>,
) -> (bool, String) {
    let mut against = Vec::new();
    match (measured.settling_time_s, predicted.settling_time_s) {
        (Some(found), Some(expected)) => {
            if (found - expected).abs() > SETTLING_AGREES * expected {
                against.push(format!(
                    "it settles in {}, {} was predicted",
                    duration(found),
                    duration(expected)
                ));
            }
        }
        (None, Some(expected)) => against.push(format!(
            "it does not settle in the time watched, {} was predicted",
            duration(expected)
        )),
        (_, None) => {
            against.push("it was not watched for as long as it is predicted to take".to_owned());
        }
    }
    let overshoot = |metrics: &Metrics| metrics.overshoot_percent.unwrap_or(0.0);
    if (overshoot(measured) - overshoot(predicted)).abs() > OVERSHOOT_AGREES {
        against.push(format!(
            "it overshoots by {:.0} %, {:.0} % was predicted",
            overshoot(measured),
            overshoot(predicted)
        ));
    }
    if let Some(seen) = oscillation {
        against.push(seen.text.clone());
    }
    if against.is_empty() {
        let why = "Agrees with the prediction: it settles within ±50 % and overshoots within 10 points of it, and no cycle is seen.";
        (true, why.to_owned())
    } else {
        let why = format!(
            "Does not agree with the prediction: {}.",
            against.join("; ")
        );
        (false, why)
    }
}
