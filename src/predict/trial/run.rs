//! The stretch of a trial that is judged: its noise, what a model predicts for it, and figures of both.

use super::{AsLeft, Band, TrialError};
use crate::model::ProcessModel;
use crate::predict::measure::{
    Disturbance, Meter, SETTLED_LEAST_PERCENT, Sample, Thinner, noise_sd, smoothed,
};
use crate::predict::oscillation::{self, Oscillation};
use crate::predict::simulate::{Inputs, SampledController, run};
use crate::predict::{Curve, Metrics};
use crate::trace::Trace;
use std::ops::Range;

/// Samples that a trial needs in automatic.
pub(super) const LEAST_SAMPLES: usize = 30;
/// The PV is smoothed over this part of the process's dead time plus time constant before figures are
/// read off it: short against any answer of the loop, long against noise.
const SMOOTHED_PART: f64 = 0.1;
/// A swing exceeds the noise by this: noise alone reaches it once in 100,000 samples.
const SWING_OVER_NOISE: f64 = 4.5;
/// Instants that a band of predictions is kept at.
const BAND_INSTANTS: usize = 300;

/// The stretch in automatic with its noise.
pub(super) struct Run<'a> {
    pub t_s: &'a [f64],
    pub pv: &'a [f64],
    pub op: &'a [f64],
    /// Set point at each sample; the mean PV where none was logged.
    pub sp: Vec<f64>,
    pub smooth: Vec<f64>,
    /// Noise of the smoothed PV, %.
    pub noise: f64,
    /// Noise of the PV, %.
    pub sigma: f64,
}

/// PV and OP at the samples.
pub(super) struct Line {
    pub pv: Vec<f64>,
    pub op: Vec<f64>,
}

/// Where the loop is at rest, %.
#[derive(Clone, Copy)]
pub(super) struct Rest {
    pub pv: f64,
    pub op: f64,
    pub sp: f64,
}

impl<'a> Run<'a> {
    /// The longest stretch in automatic.
    pub(super) fn new(trace: &'a Trace, model: &ProcessModel) -> Result<Self, TrialError> {
        let stretch = longest_automatic(trace);
        if stretch.is_empty() {
            return Err(TrialError::NeverAutomatic);
        }
        if stretch.len() < LEAST_SAMPLES {
            return Err(TrialError::TooShort(stretch.len()));
        }
        let t_s = &trace.t_s()[stretch.clone()];
        let pv = &trace.pv()[stretch.clone()];
        let sp = match trace.sp() {
            Some(sp) => sp[stretch.clone()].to_vec(),
            None => vec![mean(pv); pv.len()],
        };
        let pace = model.dead_time_s() + model.time_constant_s().unwrap_or(0.0);
        let (smooth, width) = smoothed(t_s, pv, SMOOTHED_PART * pace);
        let sigma = noise_sd(pv);
        Ok(Run {
            t_s,
            pv,
            op: &trace.op()[stretch],
            sp,
            smooth,
            noise: sigma / libm::sqrt(width),
            sigma,
        })
    }

    /// Mean of `values` over the last third of the time before `index`, at least 10 samples where
    /// there are that many.
    pub(super) fn quiet_mean(&self, values: &[f64], index: usize) -> f64 {
        if index == 0 {
            return values[0];
        }
        let since = self.t_s[index] - (self.t_s[index] - self.t_s[0]) / 3.0;
        let from = self.t_s[..index].partition_point(|t| *t < since);
        mean(&values[from.min(index.saturating_sub(10))..index])
    }

    /// PV and OP that `model` gives from rest, at the samples.
    pub(super) fn predicted(
        &self,
        left: &AsLeft,
        model: &ProcessModel,
        rest: Rest,
        load: impl Fn(f64) -> f64,
    ) -> Line {
        let scan_s = left.controller.scan_s;
        let start = self.t_s[0];
        let executions = libm::ceil((self.t_s[self.t_s.len() - 1] - start) / scan_s) as usize + 2;
        let mut controller = SampledController::new(
            left.terms,
            left.controller,
            left.filter,
            left.action,
            [(-rest.op).min(0.0), (100.0 - rest.op).max(0.0)],
        );
        let (mut at, mut filled) = (0, 0);
        let mut before: Option<Sample> = None;
        let mut answer = Line {
            pv: Vec::with_capacity(self.t_s.len()),
            op: Vec::with_capacity(self.t_s.len()),
        };
        run(
            model,
            &mut controller,
            scan_s,
            executions,
            |k| {
                let now = start + k as f64 * scan_s;
                while at + 1 < self.t_s.len() && self.t_s[at + 1] <= now + 1e-9 * scan_s {
                    at += 1;
                }
                Inputs {
                    set_point: self.sp[at] - rest.sp,
                    load: load(now),
                }
            },
            |now| {
                // Between two executions the OP is that of the first; the PV is taken as straight.
                if let Some(from) = before {
                    while filled < self.t_s.len() && self.t_s[filled] - start < now.t_s {
                        let into = (self.t_s[filled] - start - from.t_s) / scan_s;
                        answer
                            .pv
                            .push(rest.pv + from.pv + into * (now.pv - from.pv));
                        answer.op.push(rest.op + from.op);
                        filled += 1;
                    }
                }
                before = Some(now);
            },
        );
        answer
    }

    /// What each model predicts: the fitted one first, then the others with which the loop is stable.
    pub(super) fn predicted_by_all(
        &self,
        left: &AsLeft,
        rest: Rest,
        load: impl Fn(f64) -> f64 + Copy,
    ) -> Vec<Line> {
        std::iter::once(left.model)
            .chain(left.stable_others().map(|(_, model)| model))
            .map(|model| self.predicted(left, model, rest, load))
            .collect()
    }

    /// Figures of a response over `window`, as deviations from `rest`. `wander`: how far the plant strays
    /// by itself. A measured one has settled when it has stayed in the band for `hold_s`, as long as it was
    /// predicted to take.
    pub(super) fn metrics(
        &self,
        (disturbance, window): (Disturbance, Range<usize>),
        (pv, op): (&[f64], &[f64]),
        rest: Rest,
        wander: f64,
        hold_s: Option<f64>,
    ) -> Metrics {
        let margin = (3.0 * self.noise).max(wander);
        let mut meter = Meter::new(disturbance).with_margin(margin);
        if let Some(hold_s) = hold_s {
            meter = meter.with_hold(hold_s);
        }
        let at = self.t_s[window.start];
        for k in window {
            meter.take(Sample {
                t_s: self.t_s[k] - at,
                set_point: self.sp[k] - rest.sp,
                pv: pv[k] - rest.pv,
                op: op[k] - rest.op,
            });
        }
        meter.metrics()
    }

    /// Half width of the narrowest settling band where the plant strays by `wander`, % of span.
    pub(super) fn least_band(&self, wander: f64) -> f64 {
        SETTLED_LEAST_PERCENT + (3.0 * self.noise).max(wander)
    }

    /// How far the smoothed PV strays from its mean while the loop is at rest before sample `first`, %
    /// (19 in 20 samples): what the plant does by itself is no part of the response. 0 where the log
    /// shows too little of it.
    pub(super) fn wander(&self, first: usize) -> f64 {
        let rest: Vec<f64> = (0..first)
            .rev()
            .take_while(|&k| self.sp[k] == self.sp[first - 1])
            .map(|k| self.smooth[k])
            .collect();
        if rest.len() < LEAST_SAMPLES {
            return 0.0;
        }
        let middle = mean(&rest);
        let mut strays: Vec<f64> = rest.iter().map(|pv| (pv - middle).abs()).collect();
        let place = strays.len() * 19 / 20;
        *strays.select_nth_unstable_by(place, f64::total_cmp).1
    }

    /// An oscillation of the error over `window`; swings below `least`, %, are none.
    pub(super) fn oscillation(
        &self,
        window: Range<usize>,
        least: f64,
        skip: usize,
    ) -> Option<Oscillation> {
        let threshold = (SWING_OVER_NOISE * self.noise).max(least);
        let error: Vec<f64> = window
            .clone()
            .map(|k| self.sp[k] - self.smooth[k])
            .collect();
        oscillation::find(&self.t_s[window], &error, threshold, skip)
    }

    /// Root mean square of measured less predicted PV, %.
    pub(super) fn rmse(&self, predicted: &[f64]) -> f64 {
        let squares = self
            .pv
            .iter()
            .zip(predicted)
            .map(|(a, b)| (a - b) * (a - b));
        libm::sqrt(squares.sum::<f64>() / self.pv.len() as f64)
    }

    /// A predicted line, thinned.
    pub(super) fn curve(&self, line: &Line) -> Curve {
        let mut thinner = Thinner::new(line.pv.len());
        for (k, (&pv, &op)) in line.pv.iter().zip(&line.op).enumerate() {
            thinner.take(Sample {
                t_s: self.t_s[k],
                set_point: self.sp[k],
                pv,
                op,
            });
        }
        thinner.curve()
    }

    /// What `lines` hold between them, at instants as many as a plot can show.
    pub(super) fn band(&self, lines: &[Line]) -> Band {
        let mut band = Band::default();
        let stride = self.t_s.len().div_ceil(BAND_INSTANTS);
        for k in (0..self.t_s.len()).step_by(stride) {
            let values = lines.iter().map(|line| line.pv[k]);
            let (low, high) = values.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), v| {
                (low.min(v), high.max(v))
            });
            band.t_s.push(self.t_s[k]);
            band.pv_low.push(low);
            band.pv_high.push(high);
        }
        band
    }
}

/// The longest stretch of samples in automatic; all of them where no mode was logged.
fn longest_automatic(trace: &Trace) -> Range<usize> {
    let Some(manual) = trace.manual() else {
        return 0..trace.len();
    };
    let mut longest = 0..0;
    let mut from = 0;
    for k in 0..=manual.len() {
        if k == manual.len() || manual[k] {
            if k - from > longest.len() {
                longest = from..k;
            }
            from = k + 1;
        }
    }
    longest
}

pub(super) fn mean(values: &[f64]) -> f64 {
    values.iter().sum::<f64>() / values.len() as f64
}
