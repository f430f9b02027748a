//! The model of a record: one fit over all usable steps, its intervals, and the set of models that
//! the design has to be safe for.

use super::choice::{self, Candidate, Choice};
use super::covariance::{self, LogCovariance, TWO_SIDED_95};
use super::least_squares::{Base, Fit, Problem, Window};
use super::noise::Noise;
use super::verdict::misfit_percent;
use super::{Model, SetMember, StepFit};
use crate::model::Kind;
use crate::quantity::Estimate;
use crate::steps::OpStep;
use crate::trace::Trace;
use nalgebra::DMatrix;

/// A step with its fits of all kinds, in the order of [`Kind::ALL`].
pub(crate) struct Fitted {
    pub step: OpStep,
    pub window: Window,
    pub candidates: Vec<Candidate>,
}

impl Fitted {
    pub(crate) fn of(&self, kind: Kind) -> &Candidate {
        self.candidates
            .iter()
            .find(|c| c.fit.kind == kind)
            .expect("there is a fit of every kind")
    }
}

/// Figures of a fit in the order of its covariance: ln |K|, ln τ, ln τ₂, ln(θ + interval).
fn logarithms(candidate: &Candidate, interval_s: f64) -> Vec<f64> {
    let fit = &candidate.fit;
    let (tau, tau2) = fit.point.lags(fit.kind);
    let mut values = vec![libm::log(fit.gains[0].abs())];
    match fit.kind {
        Kind::Integrating => {}
        Kind::FirstOrder | Kind::IntegratingLag => values.push(libm::log(tau)),
        Kind::SecondOrder => values.extend([libm::log(tau), libm::log(tau2)]),
    }
    values.push(libm::log(fit.point.dead_time_s + interval_s));
    values
}

fn sd(covariance: &LogCovariance, k: usize) -> f64 {
    libm::sqrt(covariance.matrix[k][k].max(0.0))
}

/// Gain, τ, τ₂ and θ with their intervals.
pub(crate) struct Figures {
    pub gain: Estimate,
    pub tau: Option<Estimate>,
    pub tau2: Option<Estimate>,
    pub theta: Estimate,
}

pub(crate) fn figures(fit: &Fit, covariance: &LogCovariance) -> Figures {
    let (tau, tau2) = fit.point.lags(fit.kind);
    let by_factor = |value: f64, k: usize| {
        let (down, up) = covariance.reaches[k];
        Estimate::new(value, value * libm::exp(-down), value * libm::exp(up))
    };
    let last = covariance.matrix.len() - 1;
    let theta = fit.point.dead_time_s;
    // The upper end as the logarithm has it; as far down, but no dead time is negative.
    let reach =
        (theta + covariance.interval_s) * (libm::exp(TWO_SIDED_95 * sd(covariance, last)) - 1.0);
    Figures {
        gain: by_factor(fit.gains[0], 0),
        tau: (fit.kind != Kind::Integrating).then(|| by_factor(tau, 1)),
        tau2: (fit.kind == Kind::SecondOrder).then(|| by_factor(tau2, 2)),
        theta: Estimate::new(theta, (theta - reach).max(0.0), theta + reach),
    }
}

/// The fit of one step as the record holds it; `gain_sd` is a doubt of ln gain that the samples of the
/// step do not show.
pub(crate) fn step_fit(
    candidate: &Candidate,
    pv: &[f64],
    noise: &Noise,
    interval_s: f64,
    gain_sd: f64,
) -> StepFit {
    let mut covariance = covariance::logarithmic(&candidate.fit, interval_s);
    covariance.doubt_gain(gain_sd);
    let figures = figures(&candidate.fit, &covariance);
    let (bias_percent, drift_percent_per_s) = candidate.fit.bases[0];
    StepFit {
        kind: candidate.fit.kind,
        gain: figures.gain,
        time_constant_s: figures.tau,
        second_time_constant_s: figures.tau2,
        dead_time_s: figures.theta,
        residual_percent: misfit_percent(
            candidate.fit.rss,
            noise.sigma.unwrap_or(0.0),
            std::iter::once(pv),
        ),
        rmse_percent: candidate.fit.rmse(),
        bias_percent,
        drift_percent_per_s,
    }
}

/// How many first samples of each window are the last of the one before: the quiet stretch before a move
/// also belongs to the move before.
pub(crate) fn shared<'a>(steps: impl Iterator<Item = &'a OpStep>) -> Vec<usize> {
    let mut before = 0..0;
    steps
        .map(|step| {
            let from = step.window.start.max(before.start);
            let shared = before.end.min(step.window.end).saturating_sub(from);
            before = step.window.clone();
            shared
        })
        .collect()
}

/// Single-step figures against the pooled ones.
struct Spread {
    /// Factor on each standard deviation that makes the pooled interval cover the steps.
    factors: Vec<f64>,
    widened: bool,
    /// Whether the gains of the steps disagree beyond their intervals.
    gains_disagree: bool,
}

fn spread(usable: &[&Fitted], pooled: &Candidate, covariance: &LogCovariance) -> Spread {
    let kind = pooled.fit.kind;
    let interval_s = covariance.interval_s;
    let centre = logarithms(pooled, interval_s);
    let mut found = Spread {
        factors: vec![1.0; centre.len()],
        widened: false,
        gains_disagree: false,
    };
    let steps: Vec<(Vec<f64>, LogCovariance)> = usable
        .iter()
        .map(|f| {
            let own = f.of(kind);
            let covariance = covariance::logarithmic(&own.fit, interval_s);
            (logarithms(own, interval_s), covariance)
        })
        .collect();
    for k in 0..centre.len() {
        let (mut highest_low, mut lowest_high) = (f64::NEG_INFINITY, f64::INFINITY);
        let mut furthest = 0.0_f64;
        for (values, covariance) in &steps {
            let reach = TWO_SIDED_95 * sd(covariance, k);
            highest_low = highest_low.max(values[k] - reach);
            lowest_high = lowest_high.min(values[k] + reach);
            furthest = furthest.max((values[k] - centre[k]).abs());
        }
        if highest_low <= lowest_high {
            continue;
        }
        found.gains_disagree |= k == 0;
        let needed = furthest / TWO_SIDED_95;
        if needed > sd(covariance, k) {
            found.factors[k] = needed / sd(covariance, k).max(f64::MIN_POSITIVE);
            found.widened = true;
        }
    }
    found
}

/// Whether the gains of the steps disagree beyond their intervals under one kind.
fn gains_disagree(usable: &[&Fitted], kind: Kind, interval_s: f64) -> bool {
    let (mut highest_low, mut lowest_high) = (f64::NEG_INFINITY, f64::INFINITY);
    for fitted in usable {
        let own = fitted.of(kind);
        let covariance = covariance::logarithmic(&own.fit, interval_s);
        let reach = TWO_SIDED_95 * sd(&covariance, 0);
        let gain = libm::log(own.fit.gains[0].abs());
        highest_low = highest_low.max(gain - reach);
        lowest_high = lowest_high.min(gain + reach);
    }
    highest_low > lowest_high
}

/// All kinds fitted to the usable steps, and the choice among them.
fn fit_all(
    usable: &[&Fitted],
    own_kinds: &[Kind],
    watched_s: f64,
    interval_s: f64,
) -> Option<(Vec<Candidate>, Choice)> {
    if usable.len() == 1 {
        let candidates = usable[0].candidates.clone();
        let choice = choice::choose(&candidates, watched_s, interval_s);
        return Some((candidates, choice));
    }
    // Where the gain differs from step to step, what one gain leaves would hide what a lag explains
    // and pass for noise: kind, lags, dead time and noise are then found with a gain for each step.
    let apart = own_kinds
        .iter()
        .any(|&kind| gains_disagree(usable, kind, interval_s));
    let mut problem = Problem::new(usable.iter().map(|f| f.window.clone()).collect());
    problem.shared = shared(usable.iter().map(|f| &f.step));
    problem.gain_per_window = apart;
    let bases = |kind: Kind, k: usize| usable[k].of(kind).bases[0];
    let hints = |kind: Kind| usable.iter().map(|f| f.of(kind).fit.point).collect();
    let mut candidates = choice::of_steps(&problem, bases, hints).ok()?;
    let choice = choice::choose(&candidates, watched_s, interval_s);
    if apart {
        problem.gain_per_window = false;
        for candidate in &mut candidates {
            choice::share_gain(candidate, &problem);
        }
    }
    Some((candidates, choice))
}

/// The model over all usable steps; `None` where no fit of them succeeds. `gain_sd` is a doubt of ln gain
/// that all steps share.
pub(crate) fn model(
    trace: &Trace,
    usable: &[&Fitted],
    own_kinds: &[Kind],
    noise: &Noise,
    watched_s: f64,
    gain_sd: f64,
) -> Option<Model> {
    let interval_s = trace.interval_s();
    let (candidates, choice) = fit_all(usable, own_kinds, watched_s, interval_s)?;
    let pooled = candidates.iter().find(|c| c.fit.kind == choice.kind)?;
    let fit = &pooled.fit;
    let mut covariance = covariance::logarithmic(fit, interval_s);
    let spread = spread(usable, pooled, &covariance);
    covariance.widen(&spread.factors);
    covariance.doubt_gain(gain_sd);
    let figures = figures(fit, &covariance);
    let gains = usable.iter().map(|f| f.of(fit.kind).fit.gains[0].abs());
    let largest = gains.clone().fold(0.0, f64::max);
    let smallest = gains.fold(f64::INFINITY, f64::min);
    Some(Model {
        kind: fit.kind,
        gain: figures.gain,
        time_constant_s: figures.tau,
        second_time_constant_s: figures.tau2,
        dead_time_s: figures.theta,
        steps: usable.iter().map(|f| f.step.number).collect(),
        noise_sd_percent: noise.sd,
        resolution_percent: noise.resolution,
        rmse_percent: fit.rmse(),
        residual_percent: misfit_percent(
            fit.rss,
            noise.sigma.unwrap_or(0.0),
            usable.iter().map(|f| f.window.pv.as_slice()),
        ),
        covariance_of: covariance::parameter_names(fit.kind),
        residual_autocorrelation: fit.memory.autocorrelation,
        effective_samples: fit.samples as f64 / fit.memory.factor,
        widened: spread.widened,
        direction_ratio: None,
        gain_ratio: spread.gains_disagree.then(|| largest / smallest),
        undecided: choice.undecided,
        alternatives: choice.alternatives,
        set: set(usable, pooled, &covariance),
        covariance: covariance.matrix,
    })
}

/// Each usable step's own model, and the fitted one moved by 1.96 standard deviations either way
/// along each principal axis of its covariance.
fn set(usable: &[&Fitted], pooled: &Candidate, covariance: &LogCovariance) -> Vec<SetMember> {
    let kind = pooled.fit.kind;
    let mut members: Vec<SetMember> = Vec::new();
    if usable.len() > 1 {
        for fitted in usable {
            let own = fitted.of(kind);
            let label = format!("step {}", fitted.step.number);
            let values = logarithms(own, covariance.interval_s);
            members.push(member(
                label,
                kind,
                own.fit.gains[0],
                &values,
                covariance.interval_s,
            ));
        }
    }
    let centre = logarithms(pooled, covariance.interval_s);
    let n = centre.len();
    let eigen =
        nalgebra::SymmetricEigen::new(DMatrix::from_fn(n, n, |j, k| covariance.matrix[j][k]));
    let mut order: Vec<usize> = (0..n).collect();
    order.sort_by(|a, b| eigen.eigenvalues[*b].total_cmp(&eigen.eigenvalues[*a]));
    for (place, &axis) in order.iter().enumerate() {
        let direction = eigen.eigenvectors.column(axis);
        // The sign of an axis is arbitrary: its largest part points up.
        let lead = direction.iamax();
        let sign = if direction[lead] < 0.0 { -1.0 } else { 1.0 };
        let reach = TWO_SIDED_95 * libm::sqrt(eigen.eigenvalues[axis].max(0.0));
        for way in [1.0, -1.0] {
            let values: Vec<f64> = (0..n)
                .map(|k| centre[k] + way * sign * reach * direction[k])
                .collect();
            let mut label = format!("end of the interval with {}", leading(lead, n, way > 0.0));
            if members.iter().any(|other| other.label == label) {
                label = format!("{label} ({} axis)", ordinal(place + 1));
            }
            members.push(member(
                label,
                kind,
                pooled.fit.gains[0],
                &values,
                covariance.interval_s,
            ));
        }
    }
    members
}

/// The figure that an end of the interval moves most, in words; `lead` is its place among `n`.
fn leading(lead: usize, n: usize, up: bool) -> &'static str {
    match (lead, up) {
        (0, true) => "high gain",
        (0, false) => "low gain",
        (k, true) if k == n - 1 => "long dead time",
        (k, false) if k == n - 1 => "short dead time",
        (1, true) => "long time constant",
        (1, false) => "short time constant",
        (_, true) => "long second time constant",
        (_, false) => "short second time constant",
    }
}

fn ordinal(n: usize) -> String {
    match n {
        1 => "1st".to_owned(),
        2 => "2nd".to_owned(),
        3 => "3rd".to_owned(),
        _ => format!("{n}th"),
    }
}

/// A model of the set from its logarithms, with the sign of `gain`.
fn member(label: String, kind: Kind, gain: f64, values: &[f64], interval_s: f64) -> SetMember {
    let last = values.len() - 1;
    let lags: Vec<f64> = values[1..last].iter().map(|v| libm::exp(*v)).collect();
    let longest = lags.iter().copied().reduce(f64::max);
    let shortest = lags.iter().copied().reduce(f64::min);
    SetMember {
        label,
        gain: libm::copysign(libm::exp(values[0]), gain),
        time_constant_s: longest,
        second_time_constant_s: if kind == Kind::SecondOrder {
            shortest
        } else {
            None
        },
        dead_time_s: (libm::exp(values[last]) - interval_s).max(0.0),
    }
}

/// The window of a step for a fit: times from the move, the OP as logged less its level before.
///
/// The PV may not have come to rest after what the OP did before the window: its history is in the
/// moves, as far back as the window is long. What was done earlier than that is taken as over.
pub(crate) fn window(trace: &Trace, step: &OpStep) -> Window {
    let t_s = &trace.t_s()[step.window.clone()];
    let mut moves = Vec::new();
    if let (Some(&first), Some(&last)) = (t_s.first(), t_s.last()) {
        let (times, values) = trace.op_log();
        let since = first - (last - first);
        let start = times.partition_point(|t| *t <= since);
        let end = times.partition_point(|t| *t <= last);
        let mut before = values[start.saturating_sub(1)];
        if before != step.op_from {
            moves.push((f64::NEG_INFINITY, before - step.op_from));
        }
        for k in start..end {
            if values[k] != before {
                before = values[k];
                moves.push((times[k] - step.at_s, before - step.op_from));
            }
        }
    }
    Window {
        t_s: t_s.iter().map(|t| t - step.at_s).collect(),
        pv: trace.pv()[step.window.clone()].to_vec(),
        moves,
        base: Base::Level,
    }
}
