//! Response of a process of unit gain to a held OP, with its derivatives to the parameters that a
//! fit searches over: exact, one pass over samples and moves.
//!
//! A process at rest that answers y = G u to the OP u has y_θ = −dy/dt and, for a lag τ,
//! ∂y/∂ln τ = −τ s/(τs + 1) · y = L y − y with L = 1/(τs + 1): one more lag of the same τ in the
//! chain gives the derivative without differencing.

use super::least_squares::Point;
use crate::model::Kind;

/// One sample: the response, its derivatives to dead time, ln lag and spread, and the same of its
/// rate of change.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub(crate) struct Answer {
    /// y, % for a gain of 1.
    pub value: f64,
    /// ∂y/∂θ, ∂y/∂m, ∂y/∂w (see [`Point`]).
    pub slopes: [f64; 3],
    /// dy/dt, %/s.
    pub rate: f64,
    /// ∂(dy/dt)/∂θ, /∂m, /∂w.
    pub rate_slopes: [f64; 3],
}

/// A chain of up to four lags with poles alternating between the two lags, stepped exactly.
struct Chain {
    kind: Kind,
    tau: f64,
    tau2: f64,
    /// Factor of ∂y/∂w: −e^m sinh(δ)/δ, times dv/dt.
    spread_factor: f64,
    /// Outputs of the lags; an integrating kind keeps its integral in `integral`.
    states: [f64; 4],
    integral: f64,
    /// The two latest step lengths with their coefficients: regular samples and a regular dead
    /// time need no new exponentials.
    kept: [(f64, Coefficients); 2],
}

/// What a step of one length does to the chain.
#[derive(Clone, Copy, Default)]
struct Coefficients {
    first: f64,
    second: f64,
    from_one: f64,
    from_two: f64,
    from_two_back: f64,
    from_three: f64,
}

/// Step lengths that differ by less than this part are taken as one: a hundred thousand of them
/// are then off by less than a ten-thousandth of one step.
const SAME_LENGTH: f64 = 1e-10;

impl Chain {
    fn new(kind: Kind, point: &Point) -> Self {
        let (tau, tau2) = point.lags(kind);
        let half = libm::sqrt(point.spread.max(0.0));
        let sinhc = if half < 1e-4 {
            1.0 + half * half / 6.0
        } else {
            libm::sinh(half) / half
        };
        Chain {
            kind,
            tau,
            tau2,
            spread_factor: -libm::exp(point.ln_lag) * sinhc,
            states: [0.0; 4],
            integral: 0.0,
            kept: [(f64::NAN, Coefficients::default()); 2],
        }
    }

    fn coefficients(&mut self, h_s: f64) -> Coefficients {
        if (self.kept[0].0 - h_s).abs() <= SAME_LENGTH * h_s {
            return self.kept[0].1;
        }
        if (self.kept[1].0 - h_s).abs() <= SAME_LENGTH * h_s {
            self.kept.swap(0, 1);
            return self.kept[0].1;
        }
        let fresh = if self.kind == Kind::SecondOrder {
            two_lags(h_s, self.tau, self.tau2)
        } else {
            let first = libm::exp(-h_s / self.tau);
            Coefficients {
                first,
                from_one: h_s / self.tau * first,
                ..Coefficients::default()
            }
        };
        self.kept = [(h_s, fresh), self.kept[0]];
        fresh
    }

    /// `h_s` seconds on under the OP deviation `op`.
    fn advance(&mut self, h_s: f64, op: f64) {
        if h_s <= 0.0 {
            return;
        }
        if self.kind == Kind::Integrating {
            self.integral += op * h_s;
            return;
        }
        let c = self.coefficients(h_s);
        let d = self.states.map(|x| x - op);
        match self.kind {
            Kind::SecondOrder => {
                self.states = [
                    op + c.first * d[0],
                    op + c.second * d[1] + c.from_one / self.tau2 * d[0],
                    op + c.first * d[2]
                        + (c.from_one * d[1] + c.from_two / self.tau2 * d[0]) / self.tau,
                    op + c.second * d[3]
                        + (c.from_one * d[2]
                            + (c.from_two_back * d[1] + c.from_three / self.tau2 * d[0])
                                / self.tau)
                            / self.tau2,
                ];
            }
            _ => {
                // ∫ of the lag's output over the step, 1 − e^(−h/τ) without cancellation where h ≪ τ.
                let lost = if h_s < 1e-3 * self.tau {
                    -libm::expm1(-h_s / self.tau)
                } else {
                    1.0 - c.first
                };
                self.integral += op * h_s + d[0] * self.tau * lost;
                self.states[0] = op + c.first * d[0];
                self.states[1] = op + c.first * d[1] + c.from_one * d[0];
            }
        }
    }

    /// Every lag at the OP deviation `op`, as if held there since ever. An integral is counted so that
    /// the OP's moves up to second 0 (`ahead`, %·s, is yet to come of them) leave it at 0.
    fn settle(&mut self, op: f64, ahead: f64) {
        self.states = [op; 4];
        let lag = if self.kind == Kind::IntegratingLag {
            self.tau
        } else {
            0.0
        };
        self.integral = -(ahead + lag * op);
    }

    /// The answer `ahead_s` seconds before the first move, settled at the OP deviation `op`.
    fn settled_before(&self, ahead_s: f64, op: f64) -> Answer {
        let mut answer = self.answer(op);
        if self.kind.integrates() {
            answer.value -= op * ahead_s;
        }
        answer
    }

    fn answer(&self, op: f64) -> Answer {
        let [one, two, three, four] = self.states;
        let (tau, tau2) = (self.tau, self.tau2);
        match self.kind {
            Kind::FirstOrder => {
                let rate = (op - one) / tau;
                Answer {
                    value: one,
                    slopes: [-rate, two - one, 0.0],
                    rate,
                    rate_slopes: [rate / tau, (one - two) / tau - rate, 0.0],
                }
            }
            Kind::SecondOrder => {
                // two = y, three = L₁y, four = v = L₁L₂y.
                let v_rate = (three - four) / tau2;
                let y_rate = (one - two) / tau2;
                let three_rate = (two - three) / tau;
                let v_bend = (three_rate - v_rate) / tau2;
                let y_bend = ((op - one) / tau - y_rate) / tau2;
                // ∂y/∂ln τ₂ = ∂y/∂ln τ + (τ − τ₂) dv/dt.
                let to_mean = 2.0 * (three - two) + (tau - tau2) * v_rate;
                let rate_to_mean = 2.0 * (three_rate - y_rate) + (tau - tau2) * v_bend;
                Answer {
                    value: two,
                    slopes: [-y_rate, to_mean, self.spread_factor * v_rate],
                    rate: y_rate,
                    rate_slopes: [-y_bend, rate_to_mean, self.spread_factor * v_bend],
                }
            }
            Kind::Integrating => Answer {
                value: self.integral,
                slopes: [-op, 0.0, 0.0],
                rate: op,
                rate_slopes: [0.0; 3],
            },
            Kind::IntegratingLag => Answer {
                value: self.integral,
                slopes: [-one, -tau * two, 0.0],
                rate: one,
                rate_slopes: [-(op - one) / tau, two - one, 0.0],
            },
        }
    }
}

/// Divided differences of e^(λh) over the poles λ₁ = −1/τ, λ₂ = −1/τ₂ that a chain of lags
/// τ, τ₂, τ, τ₂ needs; right also where the two meet.
fn two_lags(h_s: f64, tau: f64, tau2: f64) -> Coefficients {
    let (first, second) = (libm::exp(-h_s / tau), libm::exp(-h_s / tau2));
    // Half the distance of the poles, times the step.
    let z = (h_s / tau2 - h_s / tau) / 2.0;
    let h = h_s;
    if z < 0.1 {
        let middle = libm::exp(-(h_s / tau + h_s / tau2) / 2.0);
        let z2 = z * z;
        // sinh(z)/z, and (cosh z − sinh(z)/z)/z²: their power series.
        let sinhc = 1.0 + z2 / 6.0 * (1.0 + z2 / 20.0 * (1.0 + z2 / 42.0 * (1.0 + z2 / 72.0)));
        let rest =
            (1.0 + z2 / 10.0 * (1.0 + z2 / 28.0 * (1.0 + z2 / 54.0 * (1.0 + z2 / 88.0)))) / 3.0;
        Coefficients {
            first,
            second,
            from_one: h * middle * sinhc,
            // (e^(±z) − sinh(z)/z)/(±2z), with e^(±z) = cosh z ± sinh z.
            from_two: h * h * middle * (z * rest + sinhc) / 2.0,
            from_two_back: h * h * middle * (sinhc - z * rest) / 2.0,
            from_three: h * h * h * middle * rest / 2.0,
        }
    } else {
        let sinhc = (first - second) / (2.0 * z);
        Coefficients {
            first,
            second,
            from_one: h * sinhc,
            from_two: h * h * (first - sinhc) / (2.0 * z),
            from_two_back: h * h * (sinhc - second) / (2.0 * z),
            from_three: h * h * h * ((first + second) / 2.0 - sinhc) / (2.0 * z * z),
        }
    }
}

/// ∫ of the held OP deviation between two times, %·s; the later one may come first.
fn integral(moves: &[(f64, f64)], from: f64, to: f64) -> f64 {
    if to < from {
        return -integral(moves, to, from);
    }
    let ends = moves.iter().skip(1).map(|m| m.0).chain([f64::INFINITY]);
    moves
        .iter()
        .zip(ends)
        .map(|(&(begin, op), end)| op * (end.min(to) - begin.max(from)).max(0.0))
        .sum()
}

/// Calls `take` with the answer at each of the increasing `times_s` to `moves` (time, OP deviation
/// from then on); at rest before the first, or settled at the first where that one is at −∞.
pub(crate) fn answers(
    kind: Kind,
    point: &Point,
    moves: &[(f64, f64)],
    times_s: &[f64],
    mut take: impl FnMut(usize, Answer),
) {
    let mut chain = Chain::new(kind, point);
    let mut op = 0.0;
    let mut now = f64::NAN;
    let mut next = 0;
    if let [(f64::NEG_INFINITY, since_ever), rest @ ..] = moves {
        op = *since_ever;
        let first = rest.first().map_or(0.0, |m| m.0);
        now = first + point.dead_time_s;
        chain.settle(op, integral(moves, first, 0.0));
        next = 1;
    }
    for (row, &t) in times_s.iter().enumerate() {
        while next < moves.len() && moves[next].0 + point.dead_time_s <= t {
            let at = moves[next].0 + point.dead_time_s;
            if now.is_finite() {
                chain.advance(at - now, op);
            }
            now = at;
            op = moves[next].1;
            next += 1;
        }
        if next == 0 {
            take(row, Answer::default());
            continue;
        }
        if t < now {
            // Before the first move after rest: settled.
            take(row, chain.settled_before(now - t, op));
            continue;
        }
        chain.advance(t - now, op);
        now = t;
        take(row, chain.answer(op));
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::ProcessModel;

    const MOVES: [(f64, f64); 3] = [(2.0, 3.0), (9.3, -2.0), (21.0, 1.0)];

    fn times() -> Vec<f64> {
        (0..60).map(|k| 0.7 * f64::from(k)).collect()
    }

    fn values(kind: Kind, point: &Point) -> Vec<Answer> {
        let mut found = Vec::new();
        answers(kind, point, &MOVES, &times(), |_, a| found.push(a));
        found
    }

    fn points() -> Vec<Point> {
        [0.0, 1e-6, 0.0004, 0.09, 1.7]
            .map(|spread| Point {
                dead_time_s: 1.37,
                ln_lag: 1.5,
                spread,
            })
            .to_vec()
    }

    #[test]
    fn the_response_is_that_of_the_model() {
        for kind in Kind::ALL {
            for point in points() {
                let (tau, tau2) = point.lags(kind);
                let model = ProcessModel::of_kind(kind, 1.0, tau, tau2, point.dead_time_s);
                let expected = model.response_to_held(&MOVES, &times());
                for (a, e) in values(kind, &point).iter().zip(expected) {
                    assert!((a.value - e).abs() < 1e-9, "{kind:?} {} {e}", a.value);
                }
            }
        }
    }

    #[test]
    fn a_process_that_stood_since_ever_has_settled() {
        for kind in Kind::ALL {
            let point = points()[3];
            let long_ago = -1e4;
            let from = |first: f64| {
                let moves = [(first, 2.5), MOVES[0], MOVES[1], MOVES[2]];
                let mut found = Vec::new();
                answers(kind, &point, &moves, &times(), |_, a| found.push(a));
                found
            };
            let (ever, long) = (from(f64::NEG_INFINITY), from(long_ago));
            // An integral of long ago differs by what it had gathered by second 0.
            let gathered = if kind.integrates() { 1e4 * 2.5 } else { 0.0 };
            for (a, b) in ever.iter().zip(&long) {
                assert!((b.value - gathered - a.value).abs() < 1e-7, "{kind:?}");
                for k in 0..3 {
                    assert!((b.slopes[k] - a.slopes[k]).abs() < 1e-7, "{kind:?} {k}");
                }
                assert!((b.rate - a.rate).abs() < 1e-9, "{kind:?}");
            }
        }
    }

    #[test]
    fn an_integral_counts_from_second_0() {
        for kind in [Kind::Integrating, Kind::IntegratingLag] {
            let moves = [(f64::NEG_INFINITY, 2.0), (-40.0, 3.0), (-30.0, 0.0)];
            answers(kind, &points()[0], &moves, &[100.0], |_, a| {
                assert!(a.value.abs() < 1e-7, "{kind:?} {}", a.value);
            });
        }
    }

    #[test]
    fn derivatives_are_those_of_differences() {
        for kind in Kind::ALL {
            for point in points() {
                for k in 0..3 {
                    let h = 1e-6;
                    let shifted = |sign: f64| {
                        let mut p = point;
                        match k {
                            0 => p.dead_time_s += sign * h,
                            1 => p.ln_lag += sign * h,
                            // One-sided at the edge: the spread is never negative.
                            _ => p.spread += (sign + 1.0) * h,
                        }
                        values(kind, &p)
                    };
                    let (up, down) = (shifted(1.0), shifted(-1.0));
                    for ((a, u), d) in values(kind, &point).iter().zip(up).zip(down) {
                        let difference = (u.value - d.value) / (2.0 * h);
                        assert!(
                            (a.slopes[k] - difference).abs() < 2e-5 * (1.0 + difference.abs()),
                            "{kind:?} {point:?} {k}: {} {difference}",
                            a.slopes[k]
                        );
                        let difference = (u.rate - d.rate) / (2.0 * h);
                        assert!(
                            (a.rate_slopes[k] - difference).abs() < 2e-5 * (1.0 + difference.abs()),
                            "rate of {kind:?} {point:?} {k}: {} {difference}",
                            a.rate_slopes[k]
                        );
                    }
                }
            }
        }
    }
}
