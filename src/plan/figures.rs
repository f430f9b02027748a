//! The figures of a plan: size of the moves, times, logging, limits.

use super::{Basis, DecidedBy, Limits, LoggedFor, NotProposed, Size, Times};
use crate::model::ProcessModel;
use crate::record::Loop;

/// A good step moves the PV by this many times its noise: enough for an interval of a few percent on
/// gain and time constant, and well above what makes a step one with a reservation (10 σ).
const CHANGE_SIGMAS: f64 = 20.0;
/// Least move of a valve whose dead band is known, %: stations take a tenth, this is two of them.
const LEAST_MOVE_PERCENT: f64 = 0.2;
/// Least move where the dead band is not known, %: a valve without play worth a word may still lose
/// some tenths.
const LEAST_MOVE_UNKNOWN_VALVE_PERCENT: f64 = 1.0;
/// A move is this many dead bands, so that turning back loses no more than a third of it.
const DEAD_BANDS: f64 = 3.0;
/// No move is expected to take the PV further than this from its start, % of span.
const PV_SHARE_PERCENT: f64 = 10.0;
/// No move of the OP is proposed larger than this, %.
const OP_SHARE_PERCENT: f64 = 10.0;
/// An integrating process is rather watched for longer than moved by more than this, %.
const PULSE_PERCENT: f64 = 5.0;
/// Time constants to watch after the dead time: 98 % of the way.
const WATCH_LAGS: f64 = 4.0;
/// Dead times to watch an integrating process: the bound below which a step has a reservation.
const WATCH_DEAD_TIMES: f64 = 5.0;
/// Scans to watch at least: moves nearer than three are read as one.
const WATCH_SCANS: f64 = 5.0;
/// Time that a person needs to read, write and move, s.
const LEAST_WATCH_S: f64 = 30.0;
/// Samples for each time constant.
const LOG_PER_LAG: f64 = 20.0;
/// Samples for each dead time of a process without a lag.
const LOG_PER_DEAD_TIME: f64 = 5.0;
/// Samples that the watch of an integrating process holds at least: 20 are needed without reservation.
const LEAST_SAMPLES: f64 = 25.0;
/// Proposed hold point and abort limit, in expected PV changes.
const HOLD_CHANGES: f64 = 1.5;
const ABORT_CHANGES: f64 = 2.0;
/// No move should end nearer to the end of a range than this, %.
const CLEARANCE_PERCENT: f64 = 5.0;

/// Intervals that trend systems offer, s.
const LOG_INTERVALS_S: [f64; 13] = [
    0.1, 0.2, 0.25, 0.5, 1.0, 2.0, 3.0, 5.0, 10.0, 15.0, 20.0, 30.0, 60.0,
];

/// Everything that follows from the model.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Figures {
    pub size: Size,
    pub times: Option<Times>,
    pub limits: Option<Limits>,
    pub log_interval_s: f64,
    pub logged_for: LoggedFor,
}

/// The allowed deviation of the schedule, % of PV span.
pub(super) fn allowed_deviation_percent(of: &Loop) -> Option<f64> {
    of.allowed_deviation
        .map(|deviation| deviation * 100.0 / (of.pv.high - of.pv.low))
}

/// The figures for a process as far as it is known. `deviation_percent` bounds how far the PV may go.
pub(super) fn of(
    basis: Option<&Basis>,
    scan_s: f64,
    deviation_percent: Option<f64>,
    protective: bool,
) -> Figures {
    let process = basis.and_then(|basis| basis.process);
    let (log_interval_s, logged_for) = logging(process.as_ref(), scan_s);
    let to_agree = |because| Figures {
        size: Size::ToAgree { because },
        times: None,
        limits: None,
        log_interval_s,
        logged_for,
    };
    let Some(basis) = basis.filter(|_| !protective) else {
        return to_agree(if protective {
            NotProposed::Protective
        } else {
            NotProposed::NoRecord
        });
    };
    let Some(process) = process else {
        return to_agree(NotProposed::NoModel);
    };
    let least_watch_s = least_watch_s(&process, log_interval_s, scan_s);
    let Some(sigma) = basis.sigma_percent.filter(|sigma| *sigma > 0.0) else {
        // How long to watch needs no noise; how far to move does.
        return Figures {
            times: Some(times(round_up_time(least_watch_s))),
            ..to_agree(NotProposed::NoNoise)
        };
    };
    let needs = Needs {
        process,
        sigma,
        most_gain_ratio: basis.most_gain_ratio,
        dead_band_percent: basis.dead_band_percent,
        deviation_percent,
    };
    let (size, watch_s) = if process.kind().integrates() {
        needs.pulse(least_watch_s)
    } else {
        let watch_s = round_up_time(least_watch_s);
        (needs.size(process.gain().abs()), watch_s)
    };
    Figures {
        size,
        times: Some(times(watch_s)),
        limits: limits(size, &process, deviation_percent),
        log_interval_s,
        logged_for,
    }
}

fn times(watch_s: f64) -> Times {
    Times {
        before_s: watch_s,
        watch_s,
        total_s: watch_s * (1.0 + super::SERIES.len() as f64),
    }
}

/// Longest interval between samples, s, on the grid of trend systems. What the process asks for stands
/// also where the controller executes more seldom: the PV moves between its executions.
fn logging(process: Option<&ProcessModel>, scan_s: f64) -> (f64, LoggedFor) {
    let Some(process) = process else {
        return (scan_s, LoggedFor::NoModel);
    };
    let (wanted, why) = match process.time_constant_s() {
        Some(tau) if tau > 0.0 => (tau / LOG_PER_LAG, LoggedFor::TimeConstant),
        _ => (
            process.dead_time_s() / LOG_PER_DEAD_TIME,
            LoggedFor::DeadTime,
        ),
    };
    if wanted <= 0.0 {
        return (scan_s, LoggedFor::Scan);
    }
    let offered = LOG_INTERVALS_S
        .into_iter()
        .rev()
        .find(|offered| *offered <= wanted);
    (offered.unwrap_or(LOG_INTERVALS_S[0]), why)
}

/// θ + 4(τ + τ₂); integrating: no less than 5θ and 25 samples either. Never so short that two moves would be
/// read as one, or that nobody could write them down.
fn least_watch_s(process: &ProcessModel, log_interval_s: f64, scan_s: f64) -> f64 {
    let settles = settles_s(process);
    let told_apart = LEAST_WATCH_S.max(WATCH_SCANS * scan_s);
    if process.kind().integrates() {
        settles
            .max(WATCH_DEAD_TIMES * process.dead_time_s())
            .max(LEAST_SAMPLES * log_interval_s)
            .max(told_apart)
    } else {
        settles.max(told_apart)
    }
}

/// θ + 4(τ + τ₂), s.
pub(super) fn settles_s(process: &ProcessModel) -> f64 {
    process.dead_time_s() + WATCH_LAGS * lags_s(process)
}

fn lags_s(process: &ProcessModel) -> f64 {
    process.time_constant_s().unwrap_or(0.0) + process.second_time_constant_s().unwrap_or(0.0)
}

/// What the size of a move has to meet.
struct Needs {
    process: ProcessModel,
    sigma: f64,
    most_gain_ratio: f64,
    dead_band_percent: Option<f64>,
    deviation_percent: Option<f64>,
}

impl Needs {
    /// The least move that the valve follows, %, and whether the dead band decides it.
    fn least(&self) -> (f64, DecidedBy) {
        let floor = match self.dead_band_percent {
            Some(_) => LEAST_MOVE_PERCENT,
            None => LEAST_MOVE_UNKNOWN_VALVE_PERCENT,
        };
        let from_dead_band = DEAD_BANDS * self.dead_band_percent.unwrap_or(0.0);
        if from_dead_band > floor {
            (from_dead_band, DecidedBy::DeadBand)
        } else {
            (floor, DecidedBy::LeastMove)
        }
    }

    /// How far the PV may go, % of span.
    fn reach(&self) -> (f64, DecidedBy) {
        match self.deviation_percent {
            Some(deviation) if deviation < PV_SHARE_PERCENT => {
                (deviation, DecidedBy::AllowedDeviation)
            }
            _ => (PV_SHARE_PERCENT, DecidedBy::PvShare),
        }
    }

    /// A move where each percent of OP comes to `pv_per_op` percent of PV: ΔOP = 20σ/|K|, not below the
    /// least move, not above what keeps PV and OP within bounds. The bounds from above win.
    fn size(&self, pv_per_op: f64) -> Size {
        self.bounded(pv_per_op, pv_per_op)
    }

    /// The same where the PV goes on by a part that tells nothing: `seen` of it counts against the noise.
    fn bounded(&self, pv_per_op: f64, seen: f64) -> Size {
        let wanted = CHANGE_SIGMAS * self.sigma / seen;
        let (least, by_valve) = self.least();
        let (reach, by_reach) = self.reach();
        let most_for_pv = reach / (pv_per_op * self.most_gain_ratio);
        let (most, by_most) = if most_for_pv < OP_SHARE_PERCENT {
            (most_for_pv, by_reach)
        } else {
            (OP_SHARE_PERCENT, DecidedBy::OpShare)
        };
        let (asked, by_asked) = if wanted >= least {
            (wanted, DecidedBy::Noise)
        } else {
            (least, by_valve)
        };
        let rounded = round_up(asked);
        let (op_percent, decided_by) = if rounded <= most {
            (rounded, by_asked)
        } else {
            (round_down(most), by_most)
        };
        Size::Proposed {
            op_percent,
            pv_percent: pv_per_op * op_percent,
            most_pv_percent: pv_per_op * op_percent * self.most_gain_ratio,
            signal_to_noise: seen * op_percent / self.sigma,
            wanted_op_percent: wanted,
            decided_by,
        }
    }

    /// The pulse of an integrating process and how long it is held, s. |K′|ΔOP runs for the watch less dead
    /// time and lag; a small move held for longer is preferred to a large one, as long as the PV may go so far.
    fn pulse(&self, least_watch_s: f64) -> (Size, f64) {
        let slope = self.process.gain().abs();
        let idle_s = self.process.dead_time_s() + lags_s(&self.process);
        let at = |watch_s: f64| self.bounded(slope * watch_s, slope * (watch_s - idle_s));
        let short = round_up_time(least_watch_s);
        let size = at(short);
        let Size::Proposed {
            wanted_op_percent, ..
        } = size
        else {
            return (size, short);
        };
        let preferred = PULSE_PERCENT.max(round_up(self.least().0));
        if wanted_op_percent <= preferred {
            return (size, short);
        }
        let watch_s = round_up_time(idle_s + CHANGE_SIGMAS * self.sigma / (slope * preferred));
        if slope * self.most_gain_ratio * preferred * watch_s > self.reach().0 {
            return (size, short);
        }
        (at(watch_s), watch_s)
    }
}

/// Proposed limits around the start.
fn limits(size: Size, process: &ProcessModel, deviation_percent: Option<f64>) -> Option<Limits> {
    let Size::Proposed {
        op_percent,
        most_pv_percent,
        ..
    } = size
    else {
        return None;
    };
    let bound = deviation_percent
        .unwrap_or(f64::INFINITY)
        .max(most_pv_percent);
    let abort = (ABORT_CHANGES * most_pv_percent).min(bound);
    let hold = (HOLD_CHANGES * most_pv_percent).min(abort);
    let within = |reach: f64| {
        let room = (CLEARANCE_PERCENT + reach).min(50.0);
        [room, 100.0 - room]
    };
    let time_to_abort_s = process
        .kind()
        .integrates()
        .then(|| process.dead_time_s() + abort / (process.gain().abs() * op_percent));
    Some(Limits {
        pv_hold_percent: hold,
        pv_abort_percent: abort,
        op_start_percent: within(op_percent),
        pv_start_percent: within(abort),
        time_to_abort_s,
    })
}

/// Steps in which a move is typed: tenths below 1 %, halves below 10 %, whole percents above.
fn grid(percent: f64) -> f64 {
    if percent < 1.0 {
        0.1
    } else if percent < 10.0 {
        0.5
    } else {
        1.0
    }
}

fn round_up(percent: f64) -> f64 {
    let grid = grid(percent);
    // What is a grid point but for the last bits stays where it is.
    crate::quantity::round_significant(libm::ceil(percent / grid - 1e-9) * grid, 6)
}

/// Rounded down on the same grid; below a tenth to one figure.
fn round_down(percent: f64) -> f64 {
    let grid = if percent < 0.1 {
        libm::pow(10.0, libm::floor(libm::log10(percent)))
    } else {
        grid(percent)
    };
    crate::quantity::round_significant(libm::floor(percent / grid + 1e-9) * grid, 6)
}

/// A time to watch, rounded up to what is read off a clock.
fn round_up_time(seconds: f64) -> f64 {
    let grid = match seconds {
        s if s <= 60.0 => 5.0,
        s if s <= 120.0 => 10.0,
        s if s <= 600.0 => 30.0,
        s if s <= 7200.0 => 60.0,
        _ => 300.0,
    };
    libm::ceil(seconds / grid - 1e-9) * grid
}
