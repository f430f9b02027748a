//! Frequency response of the loop and its margins.
//!
//! L = C·P·F·H: controller, process with its exact dead time, PV filter, hold. The sweep follows
//! phase and gain from factor to factor, so neither is ever unwrapped from a grid, and it ends
//! only where a bound on all that lies above shows that nothing there can decide.

use crate::model::ProcessModel;
use crate::predict::open_loop::{Loop, open_loop};
use crate::predict::{Margins, PvFilter};
use crate::settings::{Action, Controller, Terms};
use std::f64::consts::{PI, TAU};

/// The loop at one frequency. Slopes are per natural logarithm of frequency.
#[derive(Debug, Clone, Copy)]
struct Point {
    log_omega: f64,
    log_gain: f64,
    phase: f64,
    gain_slope: f64,
    phase_slope: f64,
}

/// The largest sensitivities met so far, and what the crossings showed.
#[derive(Debug, Default)]
struct Found {
    points: Vec<Point>,
    /// Net crossings of the real axis left of −1, downwards in phase.
    turns_around: i64,
    /// Largest |L| below 1 where the phase is an odd multiple of −180°.
    nearest_crossing: f64,
    phase_margin_rad: Option<f64>,
    delay_margin_s: Option<f64>,
    crossover_rad_s: Option<f64>,
    sensitivity: f64,
    complementary: f64,
}

/// At the crossings |L| this near to 1 counts as reaching it: the loop would swing for ever.
const TOUCHING: f64 = 1e-12;
/// Bound on the steps of one sweep. Dead time ends a sweep within a turn or two of the phase and
/// its absence within a few decades, so only figures out of all proportion come near it.
const MOST_POINTS: usize = 50_000;

impl Point {
    fn omega(&self) -> f64 {
        libm::exp(self.log_omega)
    }

    fn gain(&self) -> f64 {
        libm::exp(self.log_gain)
    }

    /// |S| = 1/|1 + L|.
    fn sensitivity(&self) -> f64 {
        let gain = self.gain();
        1.0 / libm::hypot(
            1.0 + gain * libm::cos(self.phase),
            gain * libm::sin(self.phase),
        )
    }

    /// |T| = |L|/|1 + L|.
    fn complementary(&self) -> f64 {
        self.gain() * self.sensitivity()
    }

    /// Which turn of the phase: changes where L meets the negative real axis.
    fn turn(&self) -> f64 {
        libm::floor((self.phase + PI) / TAU)
    }
}

impl Loop {
    fn at(&self, log_omega: f64) -> Point {
        let omega = libm::exp(log_omega);
        let n = self.integrators as f64;
        let mut squared = 1.0;
        let mut below = 1.0;
        let mut phase = -n * PI / 2.0 - omega * self.dead_time_s;
        let mut phase_slope = -omega * self.dead_time_s;
        let mut gain_slope = -n;
        if self.gain < 0.0 {
            phase -= PI;
        }
        for &t in &self.zeros {
            let x = omega * t;
            let size = 1.0 + x * x;
            squared *= size;
            phase += libm::atan(x);
            phase_slope += x / size;
            gain_slope += x * x / size;
        }
        for &t in &self.lags {
            let x = omega * t;
            let size = 1.0 + x * x;
            below *= size;
            phase -= libm::atan(x);
            phase_slope -= x / size;
            gain_slope -= x * x / size;
        }
        for &(a, b) in &self.pairs {
            let (re, im) = (1.0 - b * omega * omega, a * omega);
            let size = re * re + im * im;
            squared *= size;
            phase += libm::atan2(im, re);
            phase_slope += im * (1.0 + b * omega * omega) / size;
            gain_slope += (im * im - 2.0 * b * omega * omega * re) / size;
        }
        Point {
            log_omega,
            log_gain: libm::log(self.gain.abs()) + 0.5 * (libm::log(squared) - libm::log(below))
                - n * log_omega,
            phase,
            gain_slope,
            phase_slope,
        }
    }

    /// A bound on |L| at this frequency and at all above.
    ///
    /// Each zero is paired with a pole, the slowest with the slowest. From here on a pair grows by
    /// at most (Tz/Tp)·√((1 + ω²Tp²)/(1 + ω²Tz²)) where Tz > Tp, and not at all otherwise. A pair of
    /// complex zeros is replaced by the double real zero √b, which is nowhere smaller.
    fn bound_above(&self, point: &Point, zeros: &[f64], lags: &[f64]) -> f64 {
        let omega = point.omega();
        let mut bound = point.gain();
        for &(a, b) in &self.pairs {
            let (re, im) = (1.0 - b * omega * omega, a * omega);
            bound *= (1.0 + b * omega * omega) / libm::hypot(re, im);
        }
        for (k, &zero) in zeros.iter().enumerate().skip(self.integrators) {
            match lags.get(k - self.integrators) {
                None => return f64::INFINITY,
                Some(&lag) if lag < zero => {
                    let (z, p) = (omega * zero, omega * lag);
                    bound *= zero / lag * libm::sqrt((1.0 + p * p) / (1.0 + z * z));
                }
                Some(_) => {}
            }
        }
        if self.excess() == 0 {
            bound = bound.min(self.bound_near_limit(omega));
        }
        bound
    }

    /// A bound on |L| at ω and above where |L| tends to a constant: with u = 1/ω²,
    /// ln(|L|²/|L(∞)|²) ≤ c u + d u² from ln(1 + x) ≤ x and −ln(1 + x) ≤ −x + x²/2.
    fn bound_near_limit(&self, omega: f64) -> f64 {
        let u = 1.0 / (omega * omega);
        let (mut first, mut second) = (0.0, 0.0);
        for &t in &self.zeros {
            first += 1.0 / (t * t);
        }
        for &tau in &self.lags {
            let inverse = 1.0 / (tau * tau);
            first -= inverse;
            second += inverse * inverse / 2.0;
        }
        for &(a, b) in &self.pairs {
            first += (a * a - 2.0 * b) / (b * b);
            second += 1.0 / (b * b);
        }
        // Over all smaller u the largest is at one end: 0 at u = 0.
        self.limit().abs() * libm::exp(0.5 * (first * u + second * u * u).max(0.0))
    }

    /// Whether the phase falls at this frequency and at all above.
    fn phase_falls_from(&self, omega: f64) -> bool {
        let mut lead = 0.0;
        for &t in self.zeros.iter().filter(|t| **t > 0.0) {
            lead += t / (1.0 + omega * omega * t * t);
        }
        for &(a, b) in &self.pairs {
            // Beyond twice its own frequency a pair's lead only falls.
            if omega * omega * b < 4.0 {
                return false;
            }
            let (re, im) = (1.0 - b * omega * omega, a * omega);
            lead += a * (1.0 + b * omega * omega) / (re * re + im * im);
        }
        lead < self.dead_time_s
    }

    /// The point between two where `slope` changes sign, by halving.
    fn turning(&self, from: &Point, to: &Point, slope: impl Fn(&Point) -> f64) -> Point {
        let (mut low, mut high) = (from.log_omega, to.log_omega);
        let rising = slope(from) > 0.0;
        for _ in 0..40 {
            let middle = 0.5 * (low + high);
            if (slope(&self.at(middle)) > 0.0) == rising {
                low = middle;
            } else {
                high = middle;
            }
        }
        self.at(0.5 * (low + high))
    }

    /// The point between two where `value` is 0, given that it changes sign there: Newton's steps,
    /// halving where they leave the bracket.
    fn crossing(
        &self,
        from: &Point,
        to: &Point,
        value: impl Fn(&Point) -> f64,
        slope: impl Fn(&Point) -> f64,
    ) -> Point {
        let (mut low, mut high) = (*from, *to);
        let mut here = self.at(0.5 * (low.log_omega + high.log_omega));
        for _ in 0..60 {
            let size = value(&here);
            if size == 0.0 {
                return here;
            }
            if (size > 0.0) == (value(&low) > 0.0) {
                low = here;
            } else {
                high = here;
            }
            let newton = here.log_omega - size / slope(&here);
            let next = if newton > low.log_omega && newton < high.log_omega {
                newton
            } else {
                0.5 * (low.log_omega + high.log_omega)
            };
            let moved = (next - here.log_omega).abs();
            here = self.at(next);
            if moved < 1e-15 * (1.0 + next.abs()) {
                break;
            }
        }
        here
    }

    /// Takes in one stretch on which phase and gain are monotone.
    fn take(&self, from: &Point, to: &Point, found: &mut Found) {
        if from.turn() != to.turn() {
            let target = TAU * from.turn().max(to.turn()) - PI;
            let at = self.crossing(from, to, |p| p.phase - target, |p| p.phase_slope);
            let gain = at.gain();
            if gain >= 1.0 - TOUCHING {
                found.turns_around += if to.turn() < from.turn() { 1 } else { -1 };
            } else {
                found.nearest_crossing = found.nearest_crossing.max(gain);
            }
            found.point(at);
        }
        if (from.log_gain > 0.0) != (to.log_gain > 0.0) {
            let at = self.crossing(from, to, |p| p.log_gain, |p| p.gain_slope);
            let turn = (at.phase + PI) / TAU;
            let margin = TAU * (turn - libm::floor(turn));
            let delay = margin / at.omega();
            found.phase_margin_rad = Some(found.phase_margin_rad.map_or(margin, |m| m.min(margin)));
            found.delay_margin_s = Some(found.delay_margin_s.map_or(delay, |d| d.min(delay)));
            found.crossover_rad_s = Some(at.omega());
            found.point(at);
        }
        found.point(*to);
    }

    /// Follows the loop from low frequencies to where nothing above can decide any more.
    /// `None`: the closed loop is unstable, or Ms lies above `most_ms`.
    ///
    /// Stability is Nyquist's count (H. Nyquist, Bell System Tech. J. 11 (1932) 126-147): without
    /// open-loop poles to the right, and with the poles at the origin passed on the right, the
    /// closed loop has two poles to the right for each net downward crossing of the real axis left of −1.
    fn sweep(&self, most_ms: f64) -> Option<Found> {
        let limit = self.limit();
        let delayed = self.dead_time_s > 0.0;
        let static_gain = self.gain;
        // 1 + L is real on the positive real axis, so a change of sign there is a root there.
        if self.gain < 0.0 && (self.integrators > 0 || static_gain <= -1.0) {
            return None;
        }
        if limit.is_infinite() || (delayed && limit.abs() >= 1.0) || (!delayed && limit <= -1.0) {
            return None;
        }
        let mut found = Found {
            sensitivity: if limit == 0.0 { 1.0 } else { 0.0 },
            ..Found::default()
        };
        if self.integrators > 0 {
            found.complementary = 1.0;
        } else {
            found.sensitivity = found.sensitivity.max(1.0 / (1.0 + static_gain));
            found.complementary = static_gain.abs() / (1.0 + static_gain);
            if static_gain < 0.0 {
                found.nearest_crossing = -static_gain;
            }
        }
        // What is met only as ω → ∞: with dead time L circles at the radius of the limit.
        if limit != 0.0 {
            let nearest = if delayed { -limit.abs() } else { limit };
            found.sensitivity = found.sensitivity.max(1.0 / (1.0 + nearest));
            found.complementary = found.complementary.max(limit.abs() / (1.0 + nearest));
            if nearest < 0.0 {
                found.nearest_crossing = found.nearest_crossing.max(-nearest);
            }
        }

        let mut zeros: Vec<f64> = self.zeros.iter().map(|t| t.abs()).collect();
        for &(_, b) in &self.pairs {
            zeros.extend([libm::sqrt(b); 2]);
        }
        zeros.sort_by(|a, b| b.total_cmp(a));
        let mut lags = self.lags.clone();
        lags.sort_by(|a, b| b.total_cmp(a));
        let longest = zeros.iter().chain(&lags).sum::<f64>() + self.dead_time_s;
        let shortest = zeros.iter().chain(&lags).copied().fold(longest, f64::min);

        let mut low = f64::INFINITY;
        if longest > 0.0 {
            low = 1.0 / longest;
        }
        if self.integrators > 0 {
            low = low.min(libm::pow(self.gain.abs(), 1.0 / self.integrators as f64));
        }
        let mut here = self.at(libm::log(0.01 * low));
        if !(here.log_gain.is_finite() && here.phase.is_finite()) {
            return None;
        }
        if self.gain > 0.0 {
            // With two poles at the origin the phase starts at −180° and may start beyond it.
            found.turns_around = -here.turn() as i64;
        }
        found.point(here);
        while found.points.len() < MOST_POINTS {
            // Where |L| is far from 1 only the count of crossings can matter.
            let (phase_step, gain_step) = if here.log_gain.abs() < 2.5 {
                (0.12, 0.2)
            } else {
                (0.35, 0.6)
            };
            let step = (phase_step / here.phase_slope.abs())
                .min(gain_step / here.gain_slope.abs())
                .min(0.5);
            let next = self.at(here.log_omega + step);
            let mut between = Vec::new();
            if here.phase_slope * next.phase_slope < 0.0 {
                between.push(self.turning(&here, &next, |p| p.phase_slope));
            }
            if here.gain_slope * next.gain_slope < 0.0 {
                between.push(self.turning(&here, &next, |p| p.gain_slope));
            }
            between.push(next);
            between.sort_by(|a, b| a.log_omega.total_cmp(&b.log_omega));
            for point in between {
                self.take(&here, &point, &mut found);
                here = point;
            }
            let lost = found.turns_around > 0 && self.phase_falls_from(here.omega());
            if lost || found.sensitivity > most_ms {
                return None;
            }
            if here.log_gain >= 0.0 {
                continue;
            }
            let bound = self.bound_above(&here, &zeros, &lags);
            if bound >= 1.0 {
                continue;
            }
            if found.turns_around != 0 {
                return None;
            }
            let decided = |best: f64, above: f64| above <= best * (1.0 + 1e-9);
            let ended = if delayed {
                decided(found.nearest_crossing, bound)
            } else {
                here.omega() * shortest > 1e4
            };
            if ended
                && (!delayed || decided(found.sensitivity, 1.0 / (1.0 - bound)))
                && (!delayed || decided(found.complementary, bound / (1.0 - bound)))
            {
                found
                    .points
                    .sort_by(|a, b| a.log_omega.total_cmp(&b.log_omega));
                return Some(found);
            }
        }
        None
    }

    /// Largest `value` at and between the points of the sweep, given what the ends of the frequency
    /// range give. Peaks that stand below `least` by more than the sweep can miss are not looked at.
    fn largest(&self, found: &Found, ends: f64, least: f64, value: fn(&Point) -> f64) -> f64 {
        /// Points of the sweep lie so near each other that a peak stands above the highest of them
        /// by less than this factor tells.
        const MISSED: f64 = 0.8;
        let sizes: Vec<f64> = found.points.iter().map(value).collect();
        let mut best = sizes.iter().copied().fold(ends, f64::max);
        let worth = MISSED * best.max(least);
        for k in 1..sizes.len().saturating_sub(1) {
            if sizes[k] >= sizes[k - 1] && sizes[k] >= sizes[k + 1] && sizes[k] > worth {
                let (from, to) = (&found.points[k - 1], &found.points[k + 1]);
                best = best.max(self.peak(from.log_omega, to.log_omega, value));
            }
        }
        best
    }

    /// Largest `value` between two frequencies, by golden section.
    fn peak(&self, mut low: f64, mut high: f64, value: fn(&Point) -> f64) -> f64 {
        const GOLDEN: f64 = 0.618_033_988_749_894_9;
        let mut left = high - GOLDEN * (high - low);
        let mut right = low + GOLDEN * (high - low);
        let mut at_left = value(&self.at(left));
        let mut at_right = value(&self.at(right));
        while high - low > 1e-7 {
            if at_left > at_right {
                high = right;
                (right, at_right) = (left, at_left);
                left = high - GOLDEN * (high - low);
                at_left = value(&self.at(left));
            } else {
                low = left;
                (left, at_left) = (right, at_right);
                right = low + GOLDEN * (high - low);
                at_right = value(&self.at(right));
            }
        }
        at_left.max(at_right)
    }

    /// Margins of the loop closed by negative feedback.
    ///
    /// Gain margin: the smallest factor above 1 by which the gain can rise before the loop is
    /// unstable, also where that is met only as ω → ∞. Phase margin: the smallest over all
    /// frequencies where |L| = 1. Delay margin: the smallest of lag over frequency there.
    pub fn margins(&self) -> Margins {
        self.margins_and_crossover().0
    }

    /// Whether the closed loop is stable with Ms ≤ `most_ms`: the answer of [`Loop::margins`], sooner.
    pub fn keeps_ms(&self, most_ms: f64) -> bool {
        if self.gain == 0.0 {
            return self.integrators == 0;
        }
        self.sweep(most_ms).is_some_and(|found| {
            self.largest(&found, found.sensitivity, most_ms, Point::sensitivity) <= most_ms
        })
    }

    /// Margins, and the highest frequency where |L| = 1, rad/s.
    pub fn margins_and_crossover(&self) -> (Margins, Option<f64>) {
        if self.gain == 0.0 {
            let stable = self.integrators == 0;
            let margins = Margins {
                stable,
                ms: stable.then_some(1.0),
                mt: stable.then_some(0.0),
                ..Margins::unstable()
            };
            return (margins, None);
        }
        let Some(found) = self.sweep(f64::INFINITY) else {
            return (Margins::unstable(), None);
        };
        let ms = self.largest(&found, found.sensitivity, 0.0, Point::sensitivity);
        let mt = self.largest(&found, found.complementary, 0.0, Point::complementary);
        let margins = Margins {
            stable: true,
            ms: Some(ms),
            mt: Some(mt),
            gain_margin: (found.nearest_crossing > 0.0).then(|| 1.0 / found.nearest_crossing),
            phase_margin_deg: found.phase_margin_rad.map(f64::to_degrees),
            delay_margin_s: found.delay_margin_s,
        };
        (margins, found.crossover_rad_s)
    }
}

impl Found {
    fn point(&mut self, point: Point) {
        self.sensitivity = self.sensitivity.max(point.sensitivity());
        self.complementary = self.complementary.max(point.complementary());
        self.points.push(point);
    }
}

/// Margins of a controller on a process.
///
/// `terms` are magnitudes; `action` gives the sign, and one that makes the feedback positive gives an
/// unstable loop wherever there is integral action.
pub fn margins(
    model: &ProcessModel,
    terms: &Terms,
    controller: &Controller,
    filter: PvFilter,
    action: Action,
) -> Margins {
    open_loop(model, terms, controller, filter, action).margins()
}

#[cfg(test)]
mod tests;
