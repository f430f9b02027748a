//! Figures of one closed-loop response, taken sample by sample: the same for a simulated and for a
//! logged response.

use crate::predict::{Curve, Metrics};

/// Points that a printed line may have.
const CURVE_POINTS: usize = 400;
/// Half width of the settling band, part of the step.
const SETTLED_PART: f64 = 0.02;
/// Least half width of the settling band, % of span.
pub const SETTLED_LEAST_PERCENT: f64 = 0.1;
/// The PV counts as settled only where it stays in the band for at least this part of the time
/// watched: a PV that swings through the band at the very end has not settled.
const STAYED_PART: f64 = 0.02;

/// What was moved.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Disturbance {
    /// The set point, by so many % of span.
    SetPoint(f64),
    /// The process input, by so many % of OP.
    Load(f64),
}

/// One sample of a response, as deviations from where it was at rest, %.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sample {
    /// Seconds from the step.
    pub t_s: f64,
    /// Set point.
    pub set_point: f64,
    /// PV.
    pub pv: f64,
    /// OP.
    pub op: f64,
}

/// Takes the samples of one response and gives its figures.
#[derive(Debug, Clone)]
pub struct Meter {
    disturbance: Disturbance,
    band: f64,
    last: Option<Sample>,
    highest: f64,
    at_10: Option<f64>,
    at_90: Option<f64>,
    at_63: Option<f64>,
    /// Last sample outside the band; 0 before any.
    last_outside: f64,
    /// Time in the band after which the PV counts as settled, s, and when it had stayed that long.
    hold_s: Option<f64>,
    held_from: Option<f64>,
    iae: f64,
    peak: f64,
    travel: f64,
}

impl Meter {
    /// A meter for the response to one step.
    pub fn new(disturbance: Disturbance) -> Self {
        let (Disturbance::SetPoint(step) | Disturbance::Load(step)) = disturbance;
        Meter {
            disturbance,
            band: (SETTLED_PART * step.abs()).max(SETTLED_LEAST_PERCENT),
            last: None,
            highest: f64::NEG_INFINITY,
            at_10: None,
            at_90: None,
            at_63: None,
            last_outside: 0.0,
            hold_s: None,
            held_from: None,
            iae: 0.0,
            peak: 0.0,
            travel: 0.0,
        }
    }

    /// The same with a settling band that is wider by `margin` to each side, % of span: for a measured
    /// response, which noise would otherwise keep leaving the band, and its prediction.
    pub fn with_margin(mut self, margin: f64) -> Self {
        self.band += margin;
        self
    }

    /// The same, settled as soon as the PV has stayed in the band for `hold_s`: for a measured response,
    /// which some later disturbance or a rare noise sample takes out of the band again.
    pub fn with_hold(mut self, hold_s: f64) -> Self {
        self.hold_s = Some(hold_s);
        self
    }

    /// Takes the next sample; times increase.
    pub fn take(&mut self, now: Sample) {
        // Before the first sample the loop is at rest at its start.
        let before = self.last.unwrap_or(Sample {
            set_point: now.set_point,
            pv: 0.0,
            op: 0.0,
            ..now
        });
        let elapsed = now.t_s - before.t_s;
        let (error_before, error) = (before.set_point - before.pv, now.set_point - now.pv);
        self.iae += 0.5 * elapsed * (error_before.abs() + error.abs());
        self.travel += (now.op - before.op).abs();
        self.peak = self.peak.max(match self.disturbance {
            Disturbance::SetPoint(_) => now.pv.abs(),
            Disturbance::Load(_) => error.abs(),
        });
        if let Disturbance::SetPoint(step) = self.disturbance {
            let (from, to) = (before.pv / step, now.pv / step);
            self.highest = self.highest.max(to);
            for (at, part) in [
                (&mut self.at_10, 0.1),
                (&mut self.at_63, 1.0 - libm::exp(-1.0)),
                (&mut self.at_90, 0.9),
            ] {
                if at.is_none() && to >= part {
                    let into = if to > from {
                        (part - from) / (to - from)
                    } else {
                        1.0
                    };
                    *at = Some(before.t_s + into.clamp(0.0, 1.0) * elapsed);
                }
            }
        }
        if error.abs() > self.band {
            self.last_outside = now.t_s;
        } else if self.held_from.is_none()
            && self
                .hold_s
                .is_some_and(|hold| now.t_s - self.last_outside >= hold)
        {
            self.held_from = Some(self.last_outside);
        }
        self.last = Some(now);
    }

    /// Time from the step to 63.2 % of it, s.
    pub fn time_to_63_percent(&self) -> Option<f64> {
        self.at_63
    }

    /// The figures of all samples taken.
    pub fn metrics(&self) -> Metrics {
        let end = self.last.map_or(0.0, |last| last.t_s);
        let set_point = matches!(self.disturbance, Disturbance::SetPoint(_));
        Metrics {
            overshoot_percent: set_point.then(|| (100.0 * (self.highest - 1.0)).max(0.0)),
            rise_time_s: self.at_90.zip(self.at_10).map(|(to, from)| to - from),
            settling_time_s: self.held_from.or_else(|| {
                (end - self.last_outside >= STAYED_PART * end).then_some(self.last_outside)
            }),
            iae_percent_s: self.iae,
            peak_deviation_percent: self.peak,
            op_travel_percent: self.travel,
        }
    }
}

/// A line thinned to at most 400 points: of each stretch the samples of lowest and highest PV, in
/// order of time, so that no swing is lost.
#[derive(Debug, Clone)]
pub struct Thinner {
    per_stretch: usize,
    taken: usize,
    lowest: Option<Sample>,
    highest: Option<Sample>,
    curve: Curve,
}

impl Thinner {
    /// For `samples` samples to come.
    pub fn new(samples: usize) -> Self {
        Thinner {
            // One stretch gives up to two points.
            per_stretch: if samples <= CURVE_POINTS {
                1
            } else {
                samples.div_ceil(CURVE_POINTS / 2)
            },
            taken: 0,
            lowest: None,
            highest: None,
            curve: Curve::default(),
        }
    }

    /// Takes the next sample.
    pub fn take(&mut self, now: Sample) {
        if self.lowest.is_none_or(|lowest| now.pv < lowest.pv) {
            self.lowest = Some(now);
        }
        if self.highest.is_none_or(|highest| now.pv > highest.pv) {
            self.highest = Some(now);
        }
        self.taken += 1;
        if self.taken.is_multiple_of(self.per_stretch) {
            self.close();
        }
    }

    fn close(&mut self) {
        let (Some(a), Some(b)) = (self.lowest.take(), self.highest.take()) else {
            return;
        };
        let (first, second) = if a.t_s <= b.t_s { (a, b) } else { (b, a) };
        self.push(first);
        if second.t_s > first.t_s {
            self.push(second);
        }
    }

    fn push(&mut self, sample: Sample) {
        self.curve.t_s.push(sample.t_s);
        self.curve.pv.push(sample.pv);
        self.curve.op.push(sample.op);
    }

    /// The thinned line.
    pub fn curve(mut self) -> Curve {
        self.close();
        self.curve
    }
}

/// Running mean over `width_s` about each sample, and the mean number of samples in it.
pub fn smoothed(t_s: &[f64], values: &[f64], width_s: f64) -> (Vec<f64>, f64) {
    let (mut from, mut to) = (0, 0);
    let mut sum = 0.0;
    let mut counted = 0;
    let smooth = t_s
        .iter()
        .map(|t| {
            while to < t_s.len() && t_s[to] <= t + width_s / 2.0 {
                sum += values[to];
                to += 1;
            }
            while t_s[from] < t - width_s / 2.0 {
                sum -= values[from];
                from += 1;
            }
            counted += to - from;
            sum / (to - from) as f64
        })
        .collect();
    (smooth, counted as f64 / t_s.len() as f64)
}

/// Standard deviation of white noise on a slow signal of at least 3 samples, from the median of its
/// second differences.
pub fn noise_sd(values: &[f64]) -> f64 {
    let mut differences: Vec<f64> = values
        .windows(3)
        .map(|w| (w[0] - 2.0 * w[1] + w[2]).abs())
        .collect();
    let middle = differences.len() / 2;
    // 0.6745: the median of |x| of a standard normal; √6: the sd of a second difference.
    let (_, median, _) = differences.select_nth_unstable_by(middle, f64::total_cmp);
    *median / 0.674_489_75 / libm::sqrt(6.0)
}
