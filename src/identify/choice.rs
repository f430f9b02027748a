//! The choice of the kind of model: by BIC with the effective number of samples.
//!
//! BIC: G. Schwarz, Annals of Statistics 6 (1978) 461-464.

use super::Alternative;
use super::least_squares::{Base, Fit, FitError, Point, Problem};
use super::search;
use super::words::time_text;
use crate::model::Kind;

/// A richer model has to be better by more than this in BIC: odds of about 150 to 1.
const CLEARLY: f64 = 10.0;
/// Beyond this many times what was watched, a time constant is not seen to end: the PV did not bend.
const UNBENT: f64 = 3.0;
/// Part of the change of slope that an integrating PV still moves with at the end.
const STILL_MOVING: f64 = 0.3;
/// Autocorrelation below this many standard deviations of its estimate from white noise, 1/√n, is none.
const WHITE: f64 = 2.0;
/// Plain fits whose sums differ by less than this many variances of what they leave are the same.
const SAME: f64 = 1.0;
/// Mean square residual below which there is nothing left to explain, %².
const NOTHING_LEFT: f64 = 1e-10;

/// A fit with the bases it was given.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Candidate {
    pub fit: Fit,
    /// Base of each window.
    pub bases: Vec<Base>,
    /// OP at the end of each window less its level before the move, %.
    pub op_end: Vec<f64>,
    /// BIC less a constant common to the fits of the same samples.
    pub bic: f64,
}

impl Candidate {
    /// Whether an integrating fit has the PV still moving at the end, on average over its windows by
    /// more than a part of what the moves changed its slope. A PV that came to rest just because a
    /// slope before the move met its opposite would be chance.
    fn still_moving(&self) -> bool {
        let parts: Vec<f64> = self
            .op_end
            .iter()
            .zip(&self.fit.bases)
            .zip(&self.fit.gains)
            .filter(|((op, _), _)| **op != 0.0)
            .map(|((op, base), gain)| ((base.1 + gain * op) / (gain * op)).abs().min(1.0))
            .collect();
        parts.is_empty() || parts.iter().sum::<f64>() > STILL_MOVING * parts.len() as f64
    }
}

/// BIC of each fit of the same samples, less a constant common to all.
///
/// The likelihood is that of noise with the memory that the best fit leaves, for all fits alike: each
/// kind is fitted once more to what samples bring beyond the ones before (generalised least squares). A
/// lag shows in the first samples after a move, where such noise has hardly changed; by plain sums of
/// squares it drowns. Where the noise has a longer tail than one ρ explains, samples count for less.
fn evidence(fits: &[(&Problem, &Fit)]) -> Vec<f64> {
    let least = fits
        .iter()
        .map(|(_, fit)| *fit)
        .min_by(|a, b| a.rss.total_cmp(&b.rss))
        .expect("there are fits");
    let memory = &least.memory;
    let rho = memory.noise_autocorrelation;
    let rows = least.rows as f64;
    let counted = least.samples as f64 / memory.tail;
    let effective = least.samples as f64 / memory.factor;
    let white = rho < WHITE / libm::sqrt(rows);
    fits.iter()
        .map(|(problem, fit)| {
            let rss = if white {
                fit.rss
            } else {
                search::whitened_rss(problem, fit, rho)
            };
            counted * libm::log((rss / rows).max(NOTHING_LEFT))
                + fit.parameters as f64 * libm::log(effective)
        })
        .collect()
}

fn candidate(problem: &Problem, kind: Kind, hints: &[Point]) -> Result<Candidate, FitError> {
    let fit = search::fit(problem, kind, hints)?;
    Ok(Candidate {
        fit,
        bases: problem.windows.iter().map(|w| w.base).collect(),
        op_end: problem
            .windows
            .iter()
            .map(|w| w.moves.last().map_or(0.0, |m| m.1))
            .collect(),
        bic: 0.0,
    })
}

fn with_bases(problem: &Problem, base: impl Fn(usize) -> Base) -> Problem {
    let mut problem = problem.clone();
    for (k, window) in problem.windows.iter_mut().enumerate() {
        window.base = base(k);
    }
    problem
}

/// Fits of all four kinds to one step. A slope is always free for integrating kinds, whose OP may be
/// off balance before the move; others get one only where it earns its place.
pub(crate) fn of_step(problem: &Problem) -> Result<Vec<Candidate>, FitError> {
    let sloped = with_bases(problem, |_| Base::LevelAndSlope);
    // Where a fit with a slope starts: near the one without, its lag also much longer or shorter.
    let around = |point: Point| {
        [1.0, 3.0, 1.0 / 3.0].map(|factor| Point {
            ln_lag: point.ln_lag + libm::log(factor),
            ..point
        })
    };
    let first = candidate(problem, Kind::FirstOrder, &[])?;
    let first_sloped = candidate(&sloped, Kind::FirstOrder, &around(first.fit.point))?;
    let splits = search::split_lags(&[first.fit.point]);
    let second = candidate(problem, Kind::SecondOrder, &splits)?;
    let mut splits = search::split_lags(&[first_sloped.fit.point]);
    splits.push(second.fit.point);
    let second_sloped = candidate(&sloped, Kind::SecondOrder, &splits)?;
    let level = problem;
    let (first, first_on) = with_slope_if_earned((first, level), (first_sloped, &sloped));
    let (second, second_on) = with_slope_if_earned((second, level), (second_sloped, &sloped));
    let mut found = vec![
        first,
        second,
        candidate(&sloped, Kind::Integrating, &[])?,
        candidate(&sloped, Kind::IntegratingLag, &[])?,
    ];
    weigh(&mut found, &[first_on, second_on, &sloped, &sloped]);
    Ok(found)
}

/// Of the fits of one kind without and with a slope, each with its problem, the one without unless the
/// slope earns its place. A slope is slow: plain sums of squares, of the samples that count, judge it as well
/// as any, and better where the fit leaves what is no noise.
fn with_slope_if_earned<'a>(
    level: (Candidate, &'a Problem),
    slope: (Candidate, &'a Problem),
) -> (Candidate, &'a Problem) {
    let effective = slope.0.fit.samples as f64 / slope.0.fit.memory.factor;
    let bic = |fit: &Fit| {
        let mean_square = (fit.rss / fit.rows as f64).max(NOTHING_LEFT);
        effective * libm::log(mean_square) + fit.parameters as f64 * libm::log(effective)
    };
    if bic(&level.0.fit) - bic(&slope.0.fit) > CLEARLY {
        slope
    } else {
        level
    }
}

/// Gives each of the fits of the same samples its BIC; `on` are their problems.
fn weigh(found: &mut [Candidate], on: &[&Problem]) {
    let fits: Vec<(&Problem, &Fit)> = on
        .iter()
        .copied()
        .zip(found.iter().map(|c| &c.fit))
        .collect();
    for (bic, candidate) in evidence(&fits).into_iter().zip(found) {
        candidate.bic = bic;
    }
}

/// Fits of all four kinds to several steps; `bases` are those that each step's own fit of a kind
/// took, `hints` its points.
pub(crate) fn of_steps(
    problem: &Problem,
    bases: impl Fn(Kind, usize) -> Base,
    hints: impl Fn(Kind) -> Vec<Point>,
) -> Result<Vec<Candidate>, FitError> {
    let mut found = Vec::new();
    let mut on = Vec::new();
    for kind in Kind::ALL {
        let problem = with_bases(problem, |k| bases(kind, k));
        found.push(candidate(&problem, kind, &hints(kind))?);
        on.push(problem);
    }
    weigh(&mut found, &on.iter().collect::<Vec<_>>());
    Ok(found)
}

/// Puts one gain for all windows in the place of one for each; the bases stay.
pub(crate) fn share_gain(candidate: &mut Candidate, problem: &Problem) {
    let problem = with_bases(problem, |k| candidate.bases[k]);
    candidate.fit = search::with_common_gain(&problem, &candidate.fit);
}

/// What was chosen and why the others were not.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Choice {
    pub kind: Kind,
    pub undecided: Option<String>,
    pub alternatives: Vec<Alternative>,
}

/// Controller gain and integral time of a fit by SIMC with τc = θe (S. Skogestad, J. Process Control
/// 13 (2003) 291-309), in the fit's own units; θe at least `interval_s`.
fn settings(fit: &Fit, interval_s: f64) -> (f64, f64) {
    let (tau, tau2) = fit.point.lags(fit.kind);
    let gain = fit.gains[0].abs();
    // The half rule: half of a neglected lag is dead time, half goes to the lag before it.
    let (tau, theta) = match fit.kind {
        Kind::FirstOrder => (tau, fit.point.dead_time_s),
        Kind::SecondOrder => (tau + tau2 / 2.0, fit.point.dead_time_s + tau2 / 2.0),
        Kind::Integrating => (f64::INFINITY, fit.point.dead_time_s),
        Kind::IntegratingLag => (f64::INFINITY, fit.point.dead_time_s + tau / 2.0),
    };
    let theta = theta.max(interval_s);
    if fit.kind.integrates() {
        (1.0 / (gain * 2.0 * theta), 8.0 * theta)
    } else {
        (tau / (gain * 2.0 * theta), tau.min(8.0 * theta))
    }
}

/// Words for a kind.
pub(crate) fn kind_words(kind: Kind) -> &'static str {
    match kind {
        Kind::FirstOrder => "first order",
        Kind::SecondOrder => "second order",
        Kind::Integrating => "integrating",
        Kind::IntegratingLag => "integrating with a lag",
    }
}

/// Chooses among fits of all four kinds, in the order of [`Kind::ALL`].
pub(crate) fn choose(found: &[Candidate], watched_s: f64, interval_s: f64) -> Choice {
    let bics: Vec<f64> = found.iter().map(|c| c.bic).collect();
    // Within a family the simpler one stands unless the richer one is clearly better, and is another model:
    // where a plain fit of both comes out the same, its second lag is none to design with.
    let richer = |simple: usize| {
        let (one, other) = (&found[simple].fit, &found[simple + 1].fit);
        let differs = one.rows as f64 * libm::log(one.rss / other.rss.max(f64::MIN_POSITIVE));
        if bics[simple] - bics[simple + 1] > CLEARLY && differs > SAME {
            simple + 1
        } else {
            simple
        }
    };
    let (settling, integrating) = (richer(0), richer(2));
    let excess = bics[integrating] - bics[settling];
    let lag_s = found[settling].fit.point.lags(found[settling].fit.kind).0;
    let unbent = lag_s > UNBENT * watched_s;
    let mut undecided = None;
    let chosen = if excess > CLEARLY && !unbent {
        settling
    } else if excess < -CLEARLY {
        integrating
    } else if !found[integrating].still_moving() {
        settling
    } else if unbent {
        integrating
    } else {
        let (kc_s, ti_s) = settings(&found[settling].fit, interval_s);
        let (kc_i, ti_i) = settings(&found[integrating].fit, interval_s);
        let near = |a: f64, b: f64| (a - b).abs() <= 0.1 * b.abs();
        let slower = if kc_s / ti_s < kc_i / ti_i {
            settling
        } else {
            integrating
        };
        if near(kc_s, kc_i) && near(ti_s, ti_i) {
            // Nothing hangs on it, and the time constant is not seen to end.
            integrating
        } else {
            undecided = Some(format!(
                "The PV was not watched for long enough to tell a process that settles \
                 ({}, time constant about {}) from one that integrates; designed for \"{}\", \
                 whose settings are the slower",
                kind_words(found[settling].fit.kind),
                time_text(lag_s),
                kind_words(found[slower].fit.kind),
            ));
            slower
        }
    };
    let alternatives = (0..found.len())
        .filter(|&k| k != chosen)
        .map(|k| Alternative {
            kind: found[k].fit.kind,
            bic: bics[k] - bics[chosen],
            rmse_percent: found[k].fit.rmse(),
            why_not: why_not(
                &found[k].fit,
                &found[chosen].fit,
                bics[k] - bics[chosen],
                undecided.is_some(),
            ),
        })
        .collect();
    Choice {
        kind: found[chosen].fit.kind,
        undecided,
        alternatives,
    }
}

/// Why a kind was not chosen, in words.
fn why_not(other: &Fit, chosen: &Fit, excess: f64, undecided: bool) -> String {
    let times = libm::sqrt(other.rss / chosen.rss.max(f64::MIN_POSITIVE));
    let higher = if excess >= 0.5 {
        format!("BIC higher by {excess:.0}")
    } else {
        format!("BIC lower by {:.0}, too little to count", -excess)
    };
    let left = if times > 100.0 {
        "leaves more than a hundred times as much unexplained".to_owned()
    } else if times >= 1.2 {
        format!("leaves {times:.1} times as much unexplained")
    } else if times >= 1.005 {
        format!("leaves {:.0} % more unexplained", 100.0 * (times - 1.0))
    } else {
        "explains the PV no better".to_owned()
    };
    match (other.kind.integrates(), chosen.kind.integrates()) {
        (true, false) | (false, true) if undecided => {
            format!("not ruled out: it {left} ({higher}); its settings are the faster")
        }
        (true, false) => format!("the PV settles: it {left} ({higher})"),
        (false, true) if excess > CLEARLY => {
            format!("the PV does not settle: it {left} ({higher})")
        }
        (false, true) => format!("the PV shows no sign of settling: it {left} ({higher})"),
        _ if other.parameters > chosen.parameters && times <= 1.0 => {
            format!("one more time constant changes nothing that can be told from noise ({higher})")
        }
        _ => format!("it {left} ({higher})"),
    }
}
