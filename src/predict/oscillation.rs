//! Telling a response that oscillates from one that settles.

use crate::predict::words::duration;
use schemars::JsonSchema;
use serde::{Deserialize, Serialize};

/// An oscillation seen in a closed-loop trial.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Oscillation {
    /// Size of a swing over that of the swing one period before it.
    pub decay_ratio: f64,
    /// Period, s.
    pub period_s: f64,
    /// Whether its size stays the same: a limit cycle.
    pub limit_cycle: bool,
    /// In words.
    pub text: String,
}

/// A decay ratio above this is named (quarter decay is the most that is left unsaid).
const NAMED_DECAY: f64 = 0.25;
/// A swing this many times the threshold is one: smaller ones are noise that ran the same way.
const CLEAR_SWING: f64 = 2.0;
/// Swings, counted to either side, that a limit cycle shows at least.
const LIMIT_CYCLE_SWINGS: usize = 6;
/// Ratio of the later to the earlier swings within which their size is the same.
const SAME_SIZE: [f64; 2] = [0.75, 1.33];

/// One swing of the error to one side.
struct Swing {
    size: f64,
    from_s: f64,
    to_s: f64,
}

/// Swings of the error beyond `threshold`, in order; a swing ends where the error reaches the
/// threshold on the other side.
fn swings(t_s: &[f64], error: &[f64], threshold: f64) -> Vec<Swing> {
    let mut found: Vec<Swing> = Vec::new();
    let mut upward = None;
    for (&t, &e) in t_s.iter().zip(error) {
        if e.abs() < threshold {
            continue;
        }
        let side = e > 0.0;
        match found.last_mut() {
            Some(swing) if upward == Some(side) => {
                swing.size = swing.size.max(e.abs());
                swing.to_s = t;
            }
            _ => {
                upward = Some(side);
                found.push(Swing {
                    size: e.abs(),
                    from_s: t,
                    to_s: t,
                });
            }
        }
    }
    found
}

/// Looks for an oscillation in an error, %, that a disturbance started.
///
/// `threshold` is what counts as a swing: beyond noise, and a small part of the step. `skip` is the number
/// of swings that the disturbance itself makes: 1 after a set-point step, whose first swing is the
/// step, 0 after a load. At least three further swings are needed: one period.
pub fn find(t_s: &[f64], error: &[f64], threshold: f64, skip: usize) -> Option<Oscillation> {
    let all = swings(t_s, error, threshold);
    let swings = all.get(skip..)?;
    if swings.len() < 3 {
        return None;
    }
    // Ratios over one period.
    let ratios: Vec<f64> = swings.windows(3).map(|w| w[2].size / w[0].size).collect();
    let mean_log =
        |ratios: &[f64]| ratios.iter().map(|r| libm::log(*r)).sum::<f64>() / ratios.len() as f64;
    // The last swing may be cut off by the end of the log; those that the disturbance itself made are
    // larger. What comes between shows whether the size stays the same.
    let later = &ratios[ratios.len() / 2..];
    let whole = &later[..later.len().saturating_sub(1).max(1)];
    let stays = libm::exp(mean_log(whole));
    let limit_cycle =
        swings.len() >= LIMIT_CYCLE_SWINGS && stays > SAME_SIZE[0] && stays < SAME_SIZE[1];
    let decay_ratio = if limit_cycle {
        stays
    } else {
        libm::exp(mean_log(&ratios))
    };
    // From the middle of one swing to that of the next is half a period; of a cycle the later ones count.
    let counted = if limit_cycle {
        &swings[swings.len() / 2..]
    } else {
        swings
    };
    let middle = |swing: &Swing| 0.5 * (swing.from_s + swing.to_s);
    let (first, last) = (&counted[0], &counted[counted.len() - 1]);
    let period_s = 2.0 * (middle(last) - middle(first)) / (counted.len() - 1) as f64;
    let clear = swings.iter().any(|s| s.size >= CLEAR_SWING * threshold);
    if !limit_cycle && (decay_ratio <= NAMED_DECAY || !clear) {
        return None;
    }
    let text = if limit_cycle {
        format!(
            "PV cycles with a period of {} and a size that stays the same: a limit cycle, likely the valve",
            duration(period_s)
        )
    } else if decay_ratio > 1.0 {
        format!(
            "PV swings with a period of {}, and the swings grow",
            duration(period_s)
        )
    } else {
        format!(
            "PV swings with a period of {} and a decay ratio of {decay_ratio:.2} (bound {NAMED_DECAY})",
            duration(period_s)
        )
    };
    Some(Oscillation {
        decay_ratio,
        period_s,
        limit_cycle,
        text,
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::f64::consts::TAU;

    fn swing(decay_per_period: f64) -> (Vec<f64>, Vec<f64>) {
        let t: Vec<f64> = (0..1000).map(|k| k as f64).collect();
        let rate = libm::log(decay_per_period) / 80.0;
        let error = t
            .iter()
            .map(|t| 3.0 * libm::exp(rate * t) * libm::cos(TAU * t / 80.0));
        let error = error.collect();
        (t, error)
    }

    #[test]
    fn decay_ratio_and_period_are_those_of_the_response() {
        let (t, error) = swing(0.4);
        let found = find(&t, &error, 0.1, 1).expect("a decay ratio of 0.4 is named");
        assert!(
            (found.decay_ratio - 0.4).abs() < 0.04,
            "{}",
            found.decay_ratio
        );
        assert!((found.period_s - 80.0).abs() < 4.0, "{}", found.period_s);
        assert!(!found.limit_cycle);
        let (t, error) = swing(0.2);
        assert_eq!(find(&t, &error, 0.1, 1), None);
    }

    #[test]
    fn a_cycle_that_stays_is_a_limit_cycle() {
        let (t, error) = swing(1.0);
        let found = find(&t, &error, 0.1, 0).expect("a limit cycle");
        assert!(found.limit_cycle && found.text.contains("valve"));
        let (t, error) = swing(1.6);
        let found = find(&t, &error, 0.1, 0).expect("swings that grow");
        assert!(
            !found.limit_cycle && found.text.contains("grow"),
            "{found:?}"
        );
    }
}
