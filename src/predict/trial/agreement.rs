//! Whether a measured response is the predicted one.

use super::TrialMove;
use crate::predict::Metrics;
use crate::predict::oscillation::Oscillation;
use crate::predict::words::duration;

/// The measured settling time agrees within this part of what the models predict.
const SETTLING_AGREES: f64 = 0.5;
/// The measured overshoot agrees within so many points of what the models predict.
const OVERSHOOT_AGREES: f64 = 10.0;

/// A measured set-point response beside what the fitted model and those of its set predict.
pub(super) struct Compared<'a> {
    measured: &'a Metrics,
    predicted: &'a Metrics,
    /// Shortest and longest settling time of the models that settle in the time watched.
    pub settling_s: Option<[f64; 2]>,
    /// Smallest and largest overshoot of all models.
    pub overshoot_percent: [f64; 2],
}

fn overshoot(metrics: &Metrics) -> f64 {
    metrics.overshoot_percent.unwrap_or(0.0)
}

/// Smallest and largest.
pub(super) fn ends(values: impl Iterator<Item = f64>) -> Option<[f64; 2]> {
    values.fold(None, |ends, v| match ends {
        None => Some([v, v]),
        Some([low, high]) => Some([f64::min(low, v), f64::max(high, v)]),
    })
}

impl<'a> Compared<'a> {
    /// `by_models`: the fitted model's figures first.
    pub(super) fn new(measured: &'a Metrics, by_models: &'a [Metrics]) -> Self {
        Compared {
            measured,
            predicted: &by_models[0],
            settling_s: ends(by_models.iter().filter_map(|m| m.settling_time_s)),
            overshoot_percent: ends(by_models.iter().map(overshoot)).unwrap_or_default(),
        }
    }

    /// What speaks against agreement, in words.
    pub(super) fn against(
        &self,
        oscillation: Option<&Oscillation>,
        integral_action: bool,
    ) -> Vec<String> {
        let mut against = Vec::new();
        match (
            self.measured.settling_time_s,
            self.predicted.settling_time_s,
            self.settling_s,
        ) {
            (Some(found), Some(expected), Some([low, high])) => {
                if found < (1.0 - SETTLING_AGREES) * low || found > (1.0 + SETTLING_AGREES) * high {
                    against.push(format!(
                        "it settles in {}, {} was predicted{}",
                        duration(found),
                        duration(expected),
                        between(duration(low), duration(high))
                    ));
                }
            }
            (None, Some(expected), _) => against.push(format!(
                "it does not settle in the time watched, {} was predicted",
                duration(expected)
            )),
            _ if integral_action => {
                against.push("it was not watched for as long as it is predicted to take".to_owned())
            }
            _ => against.push(
                "without integral action it is not predicted to come to its set point".to_owned(),
            ),
        }
        let found = overshoot(self.measured);
        let [low, high] = self.overshoot_percent;
        if found < low - OVERSHOOT_AGREES || found > high + OVERSHOOT_AGREES {
            against.push(format!(
                "it overshoots by {found:.0} %, {:.0} % was predicted{}",
                overshoot(self.predicted),
                between(format!("{low:.0} %"), format!("{high:.0} %"))
            ));
        }
        against.extend(oscillation.map(|seen| seen.text.clone()));
        against
    }
}

/// ", between 40 s and 70 s with the models of the test", nothing where they say the same.
fn between(low: String, high: String) -> String {
    if low == high {
        String::new()
    } else {
        format!(", between {low} and {high} with the models of the test")
    }
}

/// Why a trial with these set-point moves agrees with its prediction, or does not.
pub(super) fn in_words(moves: &[TrialMove]) -> String {
    let several = moves.len() > 1;
    let against: Vec<String> = moves
        .iter()
        .enumerate()
        .filter(|(_, m)| !m.agrees)
        .map(|(k, m)| {
            if several {
                format!("after move {} of {} {}", k + 1, moves.len(), m.why)
            } else {
                m.why.clone()
            }
        })
        .collect();
    if !against.is_empty() {
        return format!(
            "Does not agree with the prediction: {}.",
            against.join("; ")
        );
    }
    let after = if several {
        format!("after each of {} set-point moves ", moves.len())
    } else {
        String::new()
    };
    format!(
        "Agrees with the prediction: {after}it settles within ±50 % and overshoots within 10 points of what the \
         models of the test predict, and no cycle is seen."
    )
}
