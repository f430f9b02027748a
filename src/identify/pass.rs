//! The way through identification: every step fitted and judged, the model over those that are usable, and
//! where the dead band of the valve is known the same once more for the valve's own moves.

use super::choice::{self, Candidate};
use super::least_squares::{Point, Problem};
use super::noise::{self, Noise};
use super::pooled::{self, Fitted};
use super::verdict::{self, Grounds, Judged};
use super::{Context, Identification, Model, Reason, ReasonCode, Step, Verdict};
use super::{advice, reading, valve};
use crate::model::Kind;
use crate::steps::OpStep;
use crate::trace::Trace;

/// A step through fit and verdict.
struct Work {
    fitted: Option<Fitted>,
    own: Option<Kind>,
    judged: Judged,
}

impl Work {
    fn own(&self) -> Option<(&Fitted, &Candidate)> {
        let fitted = self.fitted.as_ref()?;
        Some((fitted, fitted.of(self.own?)))
    }
}

/// The test as logged, and as the valve moved where its dead band is known.
struct Ground<'a> {
    trace: &'a Trace,
    steps: &'a [OpStep],
    moved: &'a Trace,
    moved_steps: &'a [OpStep],
    noise: &'a Noise,
    context: &'a Context,
    /// What the doubt about the dead band adds to the standard deviation of ln gain.
    gain_sd: f64,
}

/// Every step fitted and judged, and the model over those that are usable.
struct Pass {
    work: Vec<Work>,
    model: Option<Model>,
}

impl Pass {
    fn new(ground: &Ground) -> Self {
        let mut work: Vec<Work> = (0..ground.steps.len())
            .map(|k| fit_and_judge(ground, k))
            .collect();
        compare_signs(&mut work, ground.moved_steps);
        let model = Pass::model(ground, &work);
        Pass { work, model }
    }

    fn usable(work: &[Work]) -> Vec<&Fitted> {
        work.iter()
            .filter(|w| w.judged.verdict != Verdict::Rejected)
            .filter_map(|w| w.fitted.as_ref())
            .collect()
    }

    fn model(ground: &Ground, work: &[Work]) -> Option<Model> {
        let usable = Pass::usable(work);
        if usable.is_empty() {
            return None;
        }
        let own_kinds: Vec<Kind> = work
            .iter()
            .filter(|w| w.judged.verdict != Verdict::Rejected)
            .filter_map(|w| w.own)
            .collect();
        let watched_s = usable
            .iter()
            .map(|f| watched_s(ground.trace, &f.step))
            .fold(0.0, f64::max);
        pooled::model(
            ground.trace,
            &usable,
            &own_kinds,
            ground.noise,
            watched_s,
            ground.gain_sd,
        )
    }
}

/// Judges the steps of a trace that needs no thinning, reads and fits them, and fits the model.
pub(crate) fn identify_samples(
    trace: &Trace,
    steps: &[OpStep],
    context: &Context,
) -> Identification {
    let noise = noise::assess(trace, steps);
    let as_logged = Ground {
        trace,
        steps,
        moved: trace,
        moved_steps: steps,
        noise: &noise,
        context,
        gain_sd: 0.0,
    };
    let mut pass = Pass::new(&as_logged);
    let findings = findings(&as_logged, &pass);
    // Where the dead band is known, fits and gains are those of the valve's own moves.
    let moved = findings
        .valve
        .filter(|valve| valve.in_fit)
        .map(|valve| valve::as_moved(trace, steps, &valve));
    let ground = match &moved {
        Some((moved, moved_steps)) => Ground {
            moved,
            moved_steps,
            gain_sd: findings.gain_sd,
            ..as_logged
        },
        None => as_logged,
    };
    if moved.is_some() {
        pass = Pass::new(&ground);
    }
    if let Some(model) = &mut pass.model {
        model.direction_ratio = findings.direction_ratio;
    }
    let Pass { work, model } = pass;
    let for_advice: Vec<_> = work.iter().map(|w| (w.own(), &w.judged)).collect();
    let next_time = advice::next_time(trace, context, &noise, model.as_ref(), &for_advice, steps);
    let kind = model.as_ref().map(|m| m.kind);
    Identification {
        steps: work
            .iter()
            .zip(steps)
            .map(|(work, step)| finished(&ground, step, work, kind))
            .collect(),
        model,
        noise_sd_percent: noise.sd,
        sigma_percent: noise.sigma,
        compressed: noise.compressed,
        outliers: 0,
        next_time,
        valve: findings.valve,
        valve_not_assessed: findings.not_assessed,
    }
}

/// What the usable steps tell of the valve. A level that goes on moving after a move back, which the valve
/// lost, counts as drift and rejects the next step: such steps tell of the valve all the same.
fn findings(ground: &Ground, pass: &Pass) -> valve::Findings {
    let integrates = |w: &Work| w.own.is_some_and(Kind::integrates);
    let levels = pass
        .work
        .iter()
        .any(|w| w.judged.verdict != Verdict::Rejected && integrates(w));
    let drifts_alone = |w: &&Work| {
        // A single step of a level may pass for a settling process that was not watched for long.
        let passes = |r: &Reason| r.code == ReasonCode::Watched && !integrates(w);
        let mut reasons = w.judged.reasons.iter();
        (levels || integrates(w)) && reasons.all(|r| r.is_slope() || passes(r))
    };
    let telling: Vec<&Work> = pass
        .work
        .iter()
        .filter(|w| w.judged.verdict != Verdict::Rejected || drifts_alone(w))
        .collect();
    let usable: Vec<&Fitted> = telling.iter().filter_map(|w| w.fitted.as_ref()).collect();
    let own_kinds: Vec<Kind> = telling.iter().filter_map(|w| w.own).collect();
    if usable.is_empty() {
        return valve::Findings::default();
    }
    let (trace, noise) = (ground.trace, ground.noise);
    let watched = usable.iter().map(|f| watched_s(trace, &f.step));
    let watched_s = watched.fold(0.0, f64::max);
    let more = || pooled::model(trace, &usable, &own_kinds, noise, watched_s, 0.0);
    let model = match &pass.model {
        Some(model) if model.steps.len() == usable.len() => Some(model.clone()),
        _ => more(),
    };
    let Some(model) = model else {
        return valve::Findings::default();
    };
    let point = Point::new(
        model.dead_time_s.value,
        model.time_constant_s.map_or(1.0, |e| e.value),
        model.second_time_constant_s.map(|e| e.value),
    );
    valve::assess(trace, ground.steps, &usable, model.kind, point)
}

fn watched_s(trace: &Trace, step: &OpStep) -> f64 {
    verdict::watched_until_s(trace, step) - verdict::arrived_s(trace, step)
}

fn fit_and_judge(ground: &Ground, k: usize) -> Work {
    let (trace, step, moved) = (ground.trace, &ground.steps[k], &ground.moved_steps[k]);
    let before = k.checked_sub(1).map(|b| &ground.moved_steps[b]);
    let window = pooled::window(ground.moved, moved);
    let fitted = if step.quiet.is_empty() {
        Err("there are no samples before the move".to_owned())
    } else {
        choice::of_step(&Problem::new(vec![window.clone()]))
            .map(|candidates| Fitted {
                step: step.clone(),
                window,
                candidates,
            })
            .map_err(|error| error.to_string())
    };
    let own = fitted.as_ref().ok().map(|fitted| {
        choice::choose(
            &fitted.candidates,
            watched_s(trace, step),
            trace.interval_s(),
        )
        .kind
    });
    let mut grounds = Grounds {
        trace,
        noise: ground.noise,
        bounds: &ground.context.bounds,
        not_before_s: ground.context.not_before_s,
        change_op: moved.op_to - moved.op_from,
        explained_slope: 0.0,
    };
    let judged = match (&fitted, own) {
        (Ok(fitted), Some(kind)) => {
            let own = fitted.of(kind);
            grounds.explained_slope =
                before.map_or(0.0, |b| explained_slope(trace, b, moved, own.fit.gains[0]));
            verdict::judge(step, Ok((own, fitted.window.own_moves())), &grounds)
        }
        (Err(why), _) => verdict::judge(step, Err(why.clone()), &grounds),
        (Ok(_), None) => verdict::judge(step, Err("no kind fits".to_owned()), &grounds),
    };
    Work {
        fitted: fitted.ok(),
        own,
        judged,
    }
}

/// Slope of an integrating PV that the move before explains, % per s: that of its quiet stretch and
/// what its move added. A level driven on purpose does not drift.
fn explained_slope(trace: &Trace, before: &OpStep, step: &OpStep, gain_per_s: f64) -> f64 {
    let contiguous = before.window.end >= step.quiet.start && before.quiet.len() >= 3;
    if !contiguous {
        return 0.0;
    }
    let quiet = before.quiet.clone();
    let slope = noise::line(&trace.t_s()[quiet.clone()], &trace.pv()[quiet]).slope;
    slope + gain_per_s * (step.op_from - before.op_from)
}

fn compare_signs(work: &mut [Work], steps: &[OpStep]) {
    let mut compared: Vec<(&mut Judged, f64, f64)> = work
        .iter_mut()
        .zip(steps)
        .filter_map(|(work, step)| {
            let gain = work.fitted.as_ref()?.of(work.own?).fit.gains[0];
            Some((&mut work.judged, gain, step.op_to - step.op_from))
        })
        .collect();
    verdict::compare_signs(&mut compared);
}

/// A step as the record holds it; `kind` is that of the model.
fn finished(ground: &Ground, step: &OpStep, work: &Work, kind: Option<Kind>) -> Step {
    let (trace, noise, context) = (ground.trace, ground.noise, ground.context);
    let usable = work.judged.verdict != Verdict::Rejected;
    let fit = work
        .fitted
        .as_ref()
        .zip(kind)
        .filter(|_| usable)
        .map(|(fitted, kind)| {
            pooled::step_fit(
                fitted.of(kind),
                &fitted.window.pv,
                noise,
                trace.interval_s(),
                ground.gain_sd,
            )
        });
    let integrates = kind.or(work.own).is_some_and(Kind::integrates);
    let mut reading = reading::read(trace, step, noise, integrates);
    if let (Some(reading), Some(fit)) = (&mut reading, &fit) {
        reading.differs = reading::differs(reading, fit, trace.interval_s());
    }
    let (from, to) = reading::ends(trace, step);
    let seconds = |range: &std::ops::Range<usize>| {
        let times = &trace.t_s()[range.clone()];
        [
            times.first().copied().unwrap_or(step.at_s),
            times.last().copied().unwrap_or(step.at_s),
        ]
    };
    Step {
        number: step.number,
        at: context.clock.at(step.at_s),
        at_s: step.at_s,
        op_from: context.op_span.engineering(step.op_from),
        op_to: context.op_span.engineering(step.op_to),
        pv_from: context.pv_span.engineering(from),
        pv_to: context.pv_span.engineering(to),
        window_s: seconds(&step.window),
        quiet_s: seconds(&step.quiet),
        pulse: step.pulse,
        verdict: work.judged.verdict,
        reasons: work.judged.reasons.clone(),
        checks: work.judged.checks.clone(),
        reading,
        fit,
    }
}
