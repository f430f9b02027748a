//! The search for the best fit: starts from a coarse grid on few samples, then more samples, then
//! all, then the pieces between which the dead time makes corners.

use super::descent::{Bounds, Prepared, usual_interval};
use super::least_squares::{Fit, FitError, Point, Problem, Window};
use crate::model::Kind;

/// Samples of the coarse grid: enough to tell starts apart.
const COARSE_ROWS: usize = 240;
/// Samples of the middle search, after which few rounds over all samples are left to do; the first for
/// many samples, where such a round is costly.
const MIDDLE_ROWS: [usize; 2] = [4000, 500];
/// How close a search comes to its end, as the square of a part of a standard deviation: for starts,
/// for many samples, and for few, where rounds cost nothing.
const ROUGHLY: f64 = 1e-3;
const CLOSELY: f64 = 1e-7;
const EXACTLY: f64 = 1e-18;
/// What counts as few samples.
const FEW_ROWS: usize = 500;
/// Above this the corners that single samples make in the sum of squares are too small to matter.
const MOST_ROWS_FOR_PIECES: usize = 5000;
/// With so many starts from other fits of the same data no grid is needed.
const ENOUGH_HINTS: usize = 2;
/// Pieces searched to either side of the best dead time: with few samples, and with more, where one
/// piece differs from the next by less than a thousandth of the sum.
const PIECES: [usize; 2] = [6, 2];

/// The times that bound a search.
struct Scales {
    /// Longest time watched after the first move made within a window, s.
    watched_s: f64,
    /// Median sampling interval, s.
    interval_s: f64,
}

fn scales(problem: &Problem) -> Option<Scales> {
    let watched_s = problem
        .windows
        .iter()
        .filter_map(|w| {
            let first = w.own_moves().first().or(w.moves.last())?;
            Some(w.t_s.last()? - first.0)
        })
        .filter(|watched_s| watched_s.is_finite())
        .fold(0.0, f64::max);
    if problem.rows() <= problem.windows.len() || watched_s <= 0.0 {
        return None;
    }
    let interval_s = usual_interval(problem);
    Some(Scales {
        watched_s,
        interval_s,
    })
}

fn bounds(problem: &Problem, scales: &Scales) -> Bounds {
    let shortest = (scales.interval_s / 20.0).min(scales.watched_s / 20.0);
    let longest = 10.0 * scales.watched_s;
    let (theta_low, theta_high) = match problem.fixed_dead_time_s {
        Some(theta) => (theta, theta),
        None => (0.0, 0.8 * scales.watched_s),
    };
    // τ/τ₂ up to e^7, about a thousand.
    Bounds {
        low: [theta_low, libm::log(shortest), 0.0],
        high: [theta_high, libm::log(longest), 12.25],
    }
}

/// About `rows` samples of a problem, dense after each move and thin where little happens.
pub(crate) fn thinned(problem: &Problem, rows: usize) -> Problem {
    let budget = (rows / problem.windows.len().max(1)).max(40);
    let windows = problem
        .windows
        .iter()
        .map(|w| thinned_window(w, budget))
        .collect();
    Problem {
        windows,
        ..problem.clone()
    }
}

fn thinned_window(window: &Window, budget: usize) -> Window {
    let rows = window.t_s.len();
    if rows <= budget {
        return window.clone();
    }
    let mut keep = vec![false; rows];
    let even = budget / 2;
    for k in 0..even {
        keep[k * rows / even] = true;
    }
    // The larger moves, at most four: jitter of the OP needs no samples of its own.
    let mut sizes: Vec<(f64, f64)> = window
        .moves
        .iter()
        .scan(0.0, |op, m| {
            let size = (m.1 - *op).abs();
            *op = m.1;
            Some((size, m.0))
        })
        .collect();
    sizes.sort_by(|a, b| b.0.total_cmp(&a.0));
    sizes.truncate(4);
    let each = ((budget - even) / sizes.len().max(1)).max(1);
    for (_, at) in &sizes {
        let first = window.t_s.partition_point(|t| t < at);
        let span = (rows - first) as f64;
        for k in 0..each {
            let offset = libm::pow(span, k as f64 / each as f64) as usize;
            if first + offset < rows {
                keep[first + offset] = true;
            }
        }
    }
    let pick = |values: &[f64]| {
        values
            .iter()
            .zip(&keep)
            .filter(|(_, k)| **k)
            .map(|(v, _)| *v)
            .collect::<Vec<_>>()
    };
    Window {
        t_s: pick(&window.t_s),
        pv: pick(&window.pv),
        moves: if window.moves.len() > budget {
            coarse_moves(&window.moves, budget)
        } else {
            window.moves.clone()
        },
        base: window.base,
    }
}

/// The OP's larger moves: changes below a hundredth of its range are taken up by the next larger one.
fn coarse_moves(moves: &[(f64, f64)], most: usize) -> Vec<(f64, f64)> {
    let range = moves.iter().fold(0.0_f64, |r, m| r.max(m.1.abs()));
    let mut limit = range / 100.0;
    loop {
        let mut kept: Vec<(f64, f64)> = Vec::new();
        let mut op = 0.0_f64;
        for &(at, to) in moves {
            if (to - op).abs() > limit {
                kept.push((at, to));
                op = to;
            }
        }
        if kept.len() <= most || kept.is_empty() {
            return kept;
        }
        limit *= 2.0;
    }
}

/// Points of the coarse grid for a kind with one lag.
fn grid(kind: Kind, problem: &Problem, scales: &Scales) -> Vec<Point> {
    const DEAD_TIMES: [f64; 9] = [0.0, 0.01, 0.03, 0.06, 0.1, 0.16, 0.24, 0.36, 0.5];
    const LAGS: usize = 9;
    let shortest = (scales.watched_s / 200.0).max(scales.interval_s / 3.0);
    let longest = 3.0 * scales.watched_s;
    let dead_times: Vec<f64> = match problem.fixed_dead_time_s {
        Some(theta) => vec![theta],
        None => DEAD_TIMES.iter().map(|f| f * scales.watched_s).collect(),
    };
    let mut points = Vec::new();
    for theta in dead_times {
        if kind == Kind::Integrating {
            points.push(Point::new(theta, 1.0, None));
            continue;
        }
        for k in 0..LAGS {
            let part = k as f64 / (LAGS - 1) as f64;
            let lag = shortest * libm::pow(longest / shortest, part);
            points.push(Point::new(theta, lag, None));
        }
    }
    points
}

/// Starts of a second-order search from the best first-order points: the sum of lags and dead time
/// is kept and split in several ways.
pub(crate) fn split_lags(single: &[Point]) -> Vec<Point> {
    let mut points = Vec::new();
    for point in single.iter().take(2) {
        let (tau, _) = point.lags(Kind::FirstOrder);
        let theta = point.dead_time_s;
        let sum = tau + theta;
        points.push(Point::new(
            theta / 2.0,
            tau,
            Some((theta / 2.0).max(tau / 20.0)),
        ));
        points.push(Point::new(
            theta * 0.1,
            tau,
            Some((theta * 0.9).max(tau / 10.0).min(tau)),
        ));
        points.push(Point::new(theta / 2.0, sum * 0.45, Some(sum * 0.4)));
        points.push(Point::new(theta, tau * 0.8, Some(tau * 0.2)));
        points.push(Point::new(theta, tau * 0.98, Some(tau * 0.02)));
        points.push(Point::new(theta * 0.5, tau * 3.0, Some(tau * 0.5)));
    }
    points
}

/// The best few of evaluated points, no two of them the same.
fn best(mut found: Vec<(Point, f64)>, most: usize) -> Vec<Point> {
    found.sort_by(|a, b| a.1.total_cmp(&b.1));
    let mut points: Vec<Point> = Vec::new();
    for (point, _) in found {
        let near = |p: &Point| {
            (p.dead_time_s - point.dead_time_s).abs() < 1e-3 * (p.dead_time_s + 1e-9)
                && (p.ln_lag - point.ln_lag).abs() < 1e-3
                && (p.spread - point.spread).abs() < 1e-3
        };
        if !points.iter().any(near) {
            points.push(point);
            if points.len() == most {
                break;
            }
        }
    }
    points
}

/// Starts on the coarse samples, each gone down from.
fn coarse(
    problem: &Problem,
    kind: Kind,
    scales: &Scales,
    bounds: &Bounds,
    hints: &[Point],
) -> Vec<Point> {
    let few = thinned(problem, COARSE_ROWS);
    if hints.len() >= ENOUGH_HINTS {
        let mut prepared = Prepared::new(&few, kind);
        let gone_down = hints.iter().map(|p| prepared.descend(*p, bounds, ROUGHLY));
        return best(gone_down.collect(), 3);
    }
    let single = if kind == Kind::SecondOrder {
        Kind::FirstOrder
    } else {
        kind
    };
    let mut prepared = Prepared::new(&few, single);
    let graded: Vec<(Point, f64)> = grid(single, problem, scales)
        .into_iter()
        .map(|p| (p, prepared.evaluate(&p).rss))
        .collect();
    let starts = best(graded, 4);
    let mut gone_down: Vec<(Point, f64)> = starts
        .iter()
        .map(|p| prepared.descend(*p, bounds, ROUGHLY))
        .collect();
    if kind == Kind::SecondOrder {
        let mut prepared = Prepared::new(&few, kind);
        gone_down = split_lags(&best(gone_down, 2))
            .iter()
            .map(|p| prepared.descend(*p, bounds, ROUGHLY))
            .collect();
        gone_down.extend(hints.iter().map(|p| prepared.descend(*p, bounds, ROUGHLY)));
    } else {
        gone_down.extend(hints.iter().map(|p| prepared.descend(*p, bounds, ROUGHLY)));
    }
    best(gone_down, 3)
}

/// Fits one kind to all samples; `hints` are further starts.
pub(crate) fn fit(problem: &Problem, kind: Kind, hints: &[Point]) -> Result<Fit, FitError> {
    let rows = problem.rows();
    let parameters = problem.parameters(kind);
    if rows <= parameters {
        return Err(FitError::TooFew { rows, parameters });
    }
    let Some(scales) = scales(problem) else {
        return Err(FitError::NoMove);
    };
    let mut all = Prepared::new(problem, kind);
    if all.total() <= 0.0 {
        return Err(FitError::Still);
    }
    let bounds = bounds(problem, &scales);
    let mut starts = coarse(problem, kind, &scales, &bounds, hints);
    if let Some(middle) = MIDDLE_ROWS.into_iter().find(|middle| rows > 2 * middle) {
        let some = thinned(problem, middle);
        let mut prepared = Prepared::new(&some, kind);
        let found = starts
            .iter()
            .map(|p| prepared.descend(*p, &bounds, ROUGHLY))
            .collect();
        starts = best(found, 1);
    }
    let close = if rows > FEW_ROWS { CLOSELY } else { EXACTLY };
    let mut found = starts
        .iter()
        .map(|p| all.descend(*p, &bounds, close))
        .min_by(|a, b| a.1.total_cmp(&b.1))
        .ok_or(FitError::NoMove)?;
    // One lag more behind the move smooths the corners away.
    let corners = matches!(kind, Kind::FirstOrder | Kind::Integrating);
    if corners && rows <= MOST_ROWS_FOR_PIECES && problem.fixed_dead_time_s.is_none() {
        for piece in pieces(problem, found.0.dead_time_s, scales.interval_s) {
            let mut within = bounds;
            within.low[0] = piece.0.max(bounds.low[0]);
            within.high[0] = piece.1.min(bounds.high[0]);
            let mut start = found.0;
            start.dead_time_s = start.dead_time_s.clamp(
                piece.0 + 0.05 * (piece.1 - piece.0),
                piece.1 - 0.05 * (piece.1 - piece.0),
            );
            let there = all.descend(start, &within, CLOSELY);
            if there.1 < found.1 {
                found = all.descend(there.0, &within, close);
            }
        }
    }
    Ok(all.finish(problem, found.0, None))
}

/// Sum of squares, % ², of what samples bring beyond the ones before, for noise that has `rho` in common
/// over the usual interval: the least that one kind leaves near a fit of it.
pub(crate) fn whitened_rss(problem: &Problem, fit: &Fit, rho: f64) -> f64 {
    let Some(scales) = scales(problem) else {
        return fit.rss;
    };
    let mut prepared = Prepared::whitened(problem, fit.kind, rho);
    let bounds = bounds(problem, &scales);
    prepared.descend(fit.point, &bounds, ROUGHLY).1
}

/// The fit of one gain for all windows with the dynamics of a fit of one gain for each.
pub(crate) fn with_common_gain(problem: &Problem, freer: &Fit) -> Fit {
    Prepared::new(problem, freer.kind).finish(problem, freer.point, Some(freer))
}

/// The pieces of dead time near the best between which a sample passes a delayed move: the sum of
/// squares is smooth within each and has corners between them.
fn pieces(problem: &Problem, best_s: f64, interval_s: f64) -> Vec<(f64, f64)> {
    let mut corners = vec![0.0];
    for window in &problem.windows {
        let largest = window.moves.iter().fold(0.0_f64, |r, m| r.max(m.1.abs()));
        let mut op = 0.0;
        let mut used = 0;
        for &(at, to) in &window.moves {
            let size = (to - op).abs();
            op = to;
            if size < 0.1 * largest || used == 12 {
                continue;
            }
            used += 1;
            let from = window
                .t_s
                .partition_point(|t| t - at < best_s - 8.0 * interval_s);
            corners.extend(
                window.t_s[from..]
                    .iter()
                    .map(|t| t - at)
                    .take_while(|d| *d < best_s + 8.0 * interval_s)
                    .filter(|d| *d > 0.0),
            );
        }
    }
    corners.sort_by(f64::total_cmp);
    corners.dedup_by(|a, b| (*a - *b).abs() < 1e-6 * interval_s);
    let here = corners.partition_point(|c| *c <= best_s);
    let each = PIECES[usize::from(problem.rows() > FEW_ROWS)];
    let low = here.saturating_sub(each + 1);
    let high = (here + each).min(corners.len());
    let mut found: Vec<(f64, f64)> = corners[low..high]
        .windows(2)
        .map(|w| (w[0], w[1]))
        .collect();
    // Nearest first: the rest then start from a better point.
    found.sort_by(|a, b| {
        let far = |p: &(f64, f64)| ((p.0 + p.1) / 2.0 - best_s).abs();
        far(a).total_cmp(&far(b))
    });
    found
}
