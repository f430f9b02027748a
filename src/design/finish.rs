//! One finished design: τc from the limits, settings rounded, every limit checked again with them.

use crate::design::candidate::Typed;
use crate::design::limits::{self, Basis, Need};
use crate::design::words::{self, duration};
use crate::design::{Aim, Hardness, Limit, LimitName, LimitOutcome, Refusal};
use crate::predict::open_loop::open_loop;
use crate::settings::{Action, Standard};

/// A design with its settings, before it is told against the other one (with or without derivative).
#[derive(Debug, Clone, PartialEq)]
pub struct Finished {
    /// τc, s.
    pub tau_c_s: f64,
    /// What is typed.
    pub typed: Typed,
    /// Settings of the typed numbers in standard form.
    pub standard: Option<Standard>,
    /// The limit that decided.
    pub binding: LimitName,
    /// In words.
    pub binding_detail: String,
    /// The model nearest to its Ms bound.
    pub governing_model: String,
    /// All limits, the target first.
    pub limits: Vec<Limit>,
    /// For the cautions.
    pub remarks: Vec<String>,
}

/// τc is made longer by this part where rounding the settings broke a limit.
const NUDGE: f64 = 0.0005;
/// So often; rounding to four digits moves a setting by less than one such part.
const NUDGES: u32 = 60;
/// Part of the allowed deviation that the averaging design leaves for rounding.
const LEVEL_ROOM: f64 = 0.999;
/// Scan times crossover frequency beyond which the hold as a delay is no longer a fair picture.
const FAST_SAMPLING: f64 = 0.5;
/// A scan longer than this part of the time constant is coarse (common practice).
const COARSE_SCAN: f64 = 0.25;
/// An integral time that is unusual enough to be pointed out, s.
const LONG_INTEGRAL_S: f64 = 3600.0;

/// A limit from below with what it needs.
struct Floor {
    name: LimitName,
    kind: Hardness,
    need: Need,
}

/// What came of the wish for a time constant or for a level.
struct Choice {
    tau_c_s: f64,
    binding: LimitName,
    /// Soft limits do not count: a target with a reason is faster.
    overridden: bool,
}

/// The finished design for a basis.
///
/// # Errors
/// Where no τc satisfies every limit.
pub fn finish(basis: &Basis) -> Result<Finished, Refusal> {
    let floors = floors(basis)?;
    let level = level(basis);
    let choice = choose(basis, &floors, level);
    let ceiling = level.filter(|level| choice.tau_c_s <= *level * (1.0 + 1e-9));
    let mut tau_c_s = choice.tau_c_s;
    for _ in 0..NUDGES {
        if let Some(typed) = basis.recipe.typed(tau_c_s, basis.controller)
            && holds(basis, &floors, &choice, ceiling.is_some(), &typed)
        {
            return Ok(describe(basis, &floors, level, &choice, tau_c_s, typed));
        }
        tau_c_s *= 1.0 + NUDGE;
    }
    Err(Refusal::NoSolution {
        text: format!(
            "No closed-loop time constant satisfies every limit: near {} {} is met only before the settings are rounded.",
            duration(choice.tau_c_s),
            words::limit(choice.binding)
        ),
    })
}

/// All limits from below; robustness last, searched from the others.
fn floors(basis: &Basis) -> Result<Vec<Floor>, Refusal> {
    let floor = |name, kind, need| Floor { name, kind, need };
    let mut floors = vec![
        floor(
            LimitName::DeadTime,
            Hardness::Hard,
            limits::dead_time(basis),
        ),
        floor(
            LimitName::TimeConstant,
            Hardness::Soft,
            limits::time_constant(basis),
        ),
        floor(
            LimitName::ScanTime,
            Hardness::Hard,
            limits::scan_time(basis),
        ),
        floor(LimitName::Noise, Hardness::Soft, limits::noise(basis)),
        floor(LimitName::OpMove, Hardness::Soft, limits::op_move(basis)),
    ];
    if let Some(inner) = &basis.request.inner {
        floors.push(floor(
            LimitName::InnerLoop,
            Hardness::Hard,
            limits::inner_loop(basis, inner),
        ));
    }
    if let Some(never) = floors.iter().find(|f| !f.need.seconds().is_finite()) {
        return Err(Refusal::NoSolution {
            text: format!(
                "No closed-loop time constant satisfies every limit: {} stands in the way of any.",
                words::limit(never.name)
            ),
        });
    }
    let others = floors.iter().map(|f| f.need.seconds()).fold(0.0, f64::max);
    let need = limits::robustness(basis, others);
    if need == Need::NoSettings {
        return Err(Refusal::NoSolution {
            text: "No closed-loop time constant satisfies every limit: none gives settings that the form of the \
                   controller can hold."
                .to_owned(),
        });
    }
    if let Need::Impossible(nearest) = &need {
        let figure = if nearest.ms.is_finite() {
            format!(
                "Ms stays above {} (at best {:.2})",
                words::ms(nearest.bound),
                nearest.ms
            )
        } else {
            "the loop stays unstable".to_owned()
        };
        return Err(Refusal::NoSolution {
            text: format!(
                "No closed-loop time constant satisfies every limit: with {} {figure}.",
                nearest.model
            ),
        });
    }
    floors.insert(0, floor(LimitName::Robustness, Hardness::Hard, need));
    Ok(floors)
}

/// The slowest τc that an averaging level allows; `None` for other aims, and where none is slow enough.
fn level(basis: &Basis) -> Option<f64> {
    let request = basis.request;
    let (allowed, load) = request
        .allowed_deviation_percent
        .zip(request.expected_load_percent)?;
    if request.aim != Aim::Averaging {
        return None;
    }
    limits::level_deviation(basis, LEVEL_ROOM * allowed, load)
}

fn choose(basis: &Basis, floors: &[Floor], level: Option<f64>) -> Choice {
    let largest = |kinds: &[Hardness]| {
        let mut best: Option<&Floor> = None;
        for floor in floors.iter().filter(|f| kinds.contains(&f.kind)) {
            if best.is_none_or(|b| floor.need.seconds() > b.need.seconds()) {
                best = Some(floor);
            }
        }
        best.map_or((LimitName::DeadTime, 0.0), |b| (b.name, b.need.seconds()))
    };
    let all = largest(&[Hardness::Hard, Hardness::Soft]);
    let hard = largest(&[Hardness::Hard]);
    let target = basis.request.target_s;
    let overridden = basis.request.reason().is_some() && target.is_some_and(|t| t < all.1);
    let mut chosen = if overridden { hard } else { all };
    let slowest = level.unwrap_or(f64::INFINITY);
    match target {
        Some(target) if target >= chosen.1 && target <= slowest => {
            chosen = (LimitName::Target, target);
        }
        None if basis.request.aim != Aim::Averaging => {}
        // A target too slow, or an averaging level without one: as slow as the level allows.
        _ if slowest.is_finite() && slowest > chosen.1 && target.is_none_or(|t| t > slowest) => {
            chosen = (LimitName::LevelDeviation, slowest);
        }
        _ => {}
    }
    Choice {
        tau_c_s: chosen.1,
        binding: chosen.0,
        overridden: overridden && chosen.1 < all.1,
    }
}

/// Whether the typed settings keep every limit that settings can break.
fn holds(basis: &Basis, floors: &[Floor], choice: &Choice, level: bool, typed: &Typed) -> bool {
    let bounds = &basis.request.bounds;
    floors.iter().all(|floor| {
        let yields = choice.overridden && floor.kind == Hardness::Soft;
        yields
            || match floor.name {
                LimitName::Robustness => basis.robustness.holds(&typed.terms),
                LimitName::Noise => basis.sigma_percent.is_none_or(|sigma| {
                    limits::noise_figure(basis, sigma, &typed.terms) <= bounds.noise_percent
                }),
                LimitName::OpMove => {
                    limits::op_move_figure(basis, &typed.terms) <= bounds.op_move_percent
                }
                // The others are bounds on τc itself, which rounding does not move.
                _ => true,
            }
    }) && (!level || level_figure(basis, typed).is_none_or(|(figure, allowed)| figure <= allowed))
}

/// Deviation of the level with these settings and the one allowed, where the aim is averaging.
fn level_figure(basis: &Basis, typed: &Typed) -> Option<(f64, f64)> {
    let request = basis.request;
    if request.aim != Aim::Averaging {
        return None;
    }
    let (allowed, load) = request
        .allowed_deviation_percent
        .zip(request.expected_load_percent)?;
    Some((limits::level_figure(basis, load, &typed.terms), allowed))
}

fn describe(
    basis: &Basis,
    floors: &[Floor],
    level: Option<f64>,
    choice: &Choice,
    tau_c_s: f64,
    typed: Typed,
) -> Finished {
    let nearest = basis.robustness.nearest(&typed.terms);
    let mut limits = Vec::new();
    limits.extend(target_limit(basis, choice, tau_c_s));
    for floor in floors {
        limits.push(floor_limit(basis, floor, choice, tau_c_s, &typed));
    }
    let mut remarks = remarks(basis, &typed);
    if let Some((figure, allowed)) = level_figure(basis, &typed) {
        let met = figure <= allowed;
        let load = basis.request.expected_load_percent.unwrap_or(0.0);
        if !met {
            remarks.push(format!(
                "A load of {} % OP will move the level by about {} % of span, {} % is allowed: {} does not let the loop be faster.",
                words::bound(load), words::bound(figure), words::bound(allowed), words::limit(choice.binding)
            ));
        }
        limits.push(Limit {
            limit: LimitName::LevelDeviation,
            needs_s: level,
            kind: None,
            outcome: if met {
                LimitOutcome::Met
            } else {
                LimitOutcome::NotMet
            },
            figure: Some(figure),
            bound: Some(allowed),
            detail: format!(
                "the slowest loop that keeps the level within {} % of span for a load of {} % OP",
                words::bound(allowed),
                words::bound(load)
            ),
        });
    }
    Finished {
        tau_c_s,
        typed,
        standard: typed.terms.standard(),
        binding: choice.binding,
        binding_detail: binding_detail(basis, choice, &nearest, tau_c_s),
        governing_model: nearest.model,
        limits,
        remarks,
    }
}

fn target_limit(basis: &Basis, choice: &Choice, tau_c_s: f64) -> Option<Limit> {
    let target = basis.request.target_s?;
    let met = choice.binding == LimitName::Target;
    let mut detail = basis
        .request
        .reason()
        .unwrap_or("closed-loop time constant asked for")
        .to_owned();
    if !met {
        detail = format!(
            "{detail}; {} needs {}, and {} is used",
            words::limit(choice.binding),
            duration(choice.tau_c_s),
            duration(tau_c_s)
        );
    }
    Some(Limit {
        limit: LimitName::Target,
        needs_s: Some(target),
        kind: None,
        outcome: if met {
            LimitOutcome::Met
        } else {
            LimitOutcome::NotMet
        },
        figure: Some(tau_c_s),
        bound: Some(target),
        detail,
    })
}

fn floor_limit(
    basis: &Basis,
    floor: &Floor,
    choice: &Choice,
    tau_c_s: f64,
    typed: &Typed,
) -> Limit {
    let bounds = &basis.request.bounds;
    let theta_e = basis.recipe.effective_dead_time_s;
    let (figure, bound, detail) = match floor.name {
        LimitName::Robustness => {
            let nearest = basis.robustness.nearest(&typed.terms);
            let detail = format!(
                "Ms ≤ {} fitted, ≤ {} for every model of the set",
                words::ms(bounds.ms),
                words::ms(bounds.worst_ms)
            );
            (Some(nearest.ms), Some(nearest.bound), detail)
        }
        LimitName::TimeConstant => (
            basis.recipe.time_constant_s.map(|tau| tau / tau_c_s),
            Some(bounds.time_constant),
            format!(
                "not more than {} times faster than the process",
                words::bound(bounds.time_constant)
            ),
        ),
        LimitName::ScanTime => (
            Some(tau_c_s / basis.controller.scan_s),
            Some(bounds.scan),
            format!(
                "{} scans of {} s",
                words::bound(bounds.scan),
                words::bound(basis.controller.scan_s)
            ),
        ),
        LimitName::Noise => (
            basis
                .sigma_percent
                .map(|sigma| limits::noise_figure(basis, sigma, &typed.terms)),
            Some(bounds.noise_percent),
            format!(
                "OP moved by noise, sd at most {} %",
                words::bound(bounds.noise_percent)
            ),
        ),
        LimitName::OpMove => (
            Some(limits::op_move_figure(basis, &typed.terms)),
            Some(bounds.op_move_percent),
            format!(
                "1 % of set point moves OP by at most {} % at once",
                words::bound(bounds.op_move_percent)
            ),
        ),
        LimitName::InnerLoop => {
            let inner = basis.request.inner.as_ref();
            let inner_s = inner.map_or(0.0, |inner| inner.closed_loop_time_constant_s);
            (
                (inner_s > 0.0).then(|| tau_c_s / inner_s),
                Some(bounds.inner),
                format!(
                    "{} times the closed-loop time constant of {}, {}",
                    words::bound(bounds.inner),
                    inner.map_or("the inner loop", |inner| &inner.tag),
                    duration(inner_s)
                ),
            )
        }
        LimitName::DeadTime | LimitName::Target | LimitName::LevelDeviation => (
            Some(tau_c_s / theta_e),
            Some(bounds.dead_time),
            format!(
                "τc at least {}the effective dead time θe",
                times(bounds.dead_time)
            ),
        ),
    };
    let broken = floor.need.seconds() > tau_c_s * (1.0 + 1e-9);
    Limit {
        limit: floor.name,
        needs_s: match floor.need {
            Need::AtLeast(seconds) => Some(seconds),
            _ => None,
        },
        kind: Some(floor.kind),
        outcome: match floor.need {
            Need::NotAssessed => LimitOutcome::NotAssessed,
            Need::Any => LimitOutcome::MetByAny,
            _ if broken && choice.overridden => LimitOutcome::Overridden,
            _ => LimitOutcome::Met,
        },
        figure,
        bound,
        detail,
    }
}

/// "1.5 times " before what it multiplies, nothing for once.
fn times(factor: f64) -> String {
    if factor == 1.0 {
        String::new()
    } else {
        format!("{} times ", words::bound(factor))
    }
}

fn binding_detail(
    basis: &Basis,
    choice: &Choice,
    nearest: &crate::design::robustness::Nearest,
    tau_c_s: f64,
) -> String {
    let bounds = &basis.request.bounds;
    let below = format!(
        "with a closed-loop time constant below {}",
        duration(tau_c_s)
    );
    match choice.binding {
        LimitName::Robustness => format!(
            "Robustness decides: {below} {} would have Ms above {}.",
            nearest.model,
            words::ms(nearest.bound)
        ),
        LimitName::DeadTime => format!(
            "Dead time decides: the closed-loop time constant is at least {}the effective dead time θe of {}.",
            times(bounds.dead_time),
            duration(basis.recipe.effective_dead_time_s)
        ),
        LimitName::TimeConstant => format!(
            "The process time constant decides: {below} the process, whose lags count as {}, would be driven more than {} times faster than it is.",
            duration(basis.recipe.time_constant_s.unwrap_or(0.0)),
            words::bound(bounds.time_constant)
        ),
        LimitName::Noise => format!(
            "Noise decides: {below} the noise of PV would move OP by more than {} % (sd).",
            words::bound(bounds.noise_percent)
        ),
        LimitName::OpMove => format!(
            "The OP move decides: {below} 1 % of set point would move OP by more than {} % at once.",
            words::bound(bounds.op_move_percent)
        ),
        LimitName::ScanTime => format!(
            "The scan time decides: the closed-loop time constant is at least {} scans of {} s.",
            words::bound(bounds.scan),
            words::bound(basis.controller.scan_s)
        ),
        LimitName::InnerLoop => {
            let inner = basis.request.inner.as_ref();
            format!(
                "The inner loop decides: the closed-loop time constant is at least {} times that of {}, {}.",
                words::bound(bounds.inner),
                inner.map_or("the inner loop", |inner| &inner.tag),
                duration(inner.map_or(0.0, |inner| inner.closed_loop_time_constant_s))
            )
        }
        LimitName::LevelDeviation => format!(
            "The level deviation decides: with a closed-loop time constant above {} a load of {} % OP would move the level by more than {} % of span.",
            duration(tau_c_s),
            words::bound(basis.request.expected_load_percent.unwrap_or(0.0)),
            words::bound(basis.request.allowed_deviation_percent.unwrap_or(0.0))
        ),
        LimitName::Target => format!(
            "The time constant asked for decides: {} is asked for, and no {}limit needs more.",
            duration(tau_c_s),
            if choice.overridden { "hard " } else { "" }
        ),
    }
}

/// What the engineer should know of the scan and the settings.
fn remarks(basis: &Basis, typed: &Typed) -> Vec<String> {
    let mut remarks = Vec::new();
    let scan = basis.controller.scan_s;
    if let Some(tau) = basis.recipe.time_constant_s
        && scan > COARSE_SCAN * tau
    {
        remarks.push(format!(
            "The scan of {} is coarse: longer than a quarter of the process time constant of {}.",
            duration(scan),
            duration(tau)
        ));
    }
    let action = Action::for_gain(basis.process.gain());
    let looped = open_loop(
        basis.process,
        &typed.terms,
        basis.controller,
        basis.filter,
        action,
    );
    if let (_, Some(crossover)) = looped.margins_and_crossover()
        && crossover * scan >= FAST_SAMPLING
    {
        remarks.push(format!(
            "The loop is fast for its scan (crossover frequency times scan is {:.2}): margins are computed with the hold as a delay, which is fair below {FAST_SAMPLING}.",
            crossover * scan
        ));
    }
    if basis.request.aim == Aim::Averaging
        && let Some(ti) = typed.terms.standard().and_then(|s| s.ti_s)
        && ti > LONG_INTEGRAL_S
    {
        remarks.push(format!(
            "The integral time of {} is longer than an hour: after a load change the level takes several times that to come back.",
            duration(ti)
        ));
    }
    remarks
}
