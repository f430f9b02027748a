//! The sum of squares of several steps for every dead band of the valve, by the PV's responses to each move
//! of the OP: what the profile of the dead band is made from.

use super::least_squares::{Base, Point, Problem, Window};
use super::noise::line;
use super::pooled::{self, Fitted};
use super::{response, search};
use crate::model::Kind;
use crate::steps::OpStep;
use crate::trace::Trace;
use std::ops::Range;

/// Samples that the profile of a ramped OP is made from: more tell a dead band no better than it matters.
const MOST_ROWS: usize = 1500;
/// Moves of the OP in a window and its history up to which it counts as made of plain steps.
const MOST_IDEAL: usize = 4;
/// Moves of the OP in a window up to which each has a response of its own.
const MOST_UNITS: usize = 64;
/// Samples of a window with more moves than that.
const FEW_ROWS: usize = 300;
/// Mean square residual below which there is nothing left to explain, %².
const NOTHING_LEFT: f64 = 1e-8;
/// Rounds of a search for an end of the interval, or for the least sum of squares.
const ROUNDS: usize = 14;

/// Positions of a valve with play: within half the dead band of the OP, moved only where it has to.
pub(crate) fn play(op: &[f64], dead_band: f64, start: f64) -> Vec<f64> {
    let half = dead_band / 2.0;
    let mut position = op.first().copied().unwrap_or(0.0) + start;
    op.iter()
        .map(|op| {
            position = position.clamp(op - half, op + half);
            position
        })
        .collect()
}

/// One usable step for the profile.
pub(crate) struct Piece {
    /// Which of the OP's changes move the PV of the window, those of its history among them.
    seen: Range<usize>,
    /// When each of those came, s from the move.
    at_s: Vec<f64>,
    /// ⟨uⱼ, uₖ⟩ and ⟨uₖ, PV⟩ of the responses to a unit move at each of those times; `None` where they are
    /// too many.
    units: Option<(Vec<Vec<f64>>, Vec<f64>)>,
    /// Times, and PV less its base.
    t_s: Vec<f64>,
    pv: Vec<f64>,
    base: Base,
}

/// What each change of the OP moves: the valve; the same without sign; the valve bent by its curve.
type Moved = [f64; 3];

impl Piece {
    fn new(window: &Window, step: &OpStep, changes: &[(f64, f64)]) -> Self {
        let first = window.t_s.first().copied().unwrap_or(0.0);
        let last = window.t_s.last().copied().unwrap_or(0.0);
        let until = |t: f64| changes.partition_point(|c| c.0 <= step.at_s + t);
        // History as far back as the window is long. The level of the first change is no move.
        let seen = until(first - (last - first)).max(1)..until(last).max(1);
        Piece {
            at_s: changes[seen.clone()]
                .iter()
                .map(|c| c.0 - step.at_s)
                .collect(),
            seen,
            units: None,
            pv: without_base(window.base, &window.t_s, &window.pv),
            t_s: window.t_s.clone(),
            base: window.base,
        }
    }

    /// The response to some moves, less its base.
    fn response(&self, kind: Kind, point: &Point, moves: &[(f64, f64)]) -> Vec<f64> {
        let mut column = Vec::with_capacity(self.t_s.len());
        response::answers(kind, point, moves, &self.t_s, |_, a| column.push(a.value));
        without_base(self.base, &self.t_s, &column)
    }

    /// Works out the unit responses.
    fn prepare(&mut self, kind: Kind, point: &Point) {
        self.units = (self.seen.len() <= MOST_UNITS).then(|| {
            let units: Vec<Vec<f64>> = self
                .at_s
                .iter()
                .map(|at| self.response(kind, point, &[(*at, 1.0)]))
                .collect();
            let products = units
                .iter()
                .map(|a| units.iter().map(|b| dot(a, b)).collect())
                .collect();
            let with_pv = units.iter().map(|u| dot(u, &self.pv)).collect();
            (products, with_pv)
        });
    }

    /// Adds the products of the responses to what each change moves.
    fn add(&self, kind: Kind, point: &Point, moved: &[Moved], sums: &mut Sums) {
        let moved = &moved[self.seen.clone()];
        let Some((products, with_pv)) = &self.units else {
            let responses = [0, 1, 2].map(|i| {
                let mut level = 0.0;
                let moves: Vec<(f64, f64)> = moved
                    .iter()
                    .zip(&self.at_s)
                    .map(|(moved, at)| {
                        level += moved[i];
                        (*at, level)
                    })
                    .collect();
                self.response(kind, point, &moves)
            });
            for i in 0..3 {
                for j in 0..3 {
                    sums.products[i][j] += dot(&responses[i], &responses[j]);
                }
                sums.with_pv[i] += dot(&responses[i], &self.pv);
            }
            return;
        };
        let still = |moved: &Moved| moved.iter().all(|m| *m == 0.0);
        for (a, left) in moved.iter().enumerate().filter(|m| !still(m.1)) {
            for (b, right) in moved.iter().enumerate().filter(|m| !still(m.1)) {
                for (row, l) in sums.products.iter_mut().zip(left) {
                    for (sum, r) in row.iter_mut().zip(right) {
                        *sum += l * r * products[a][b];
                    }
                }
            }
            for (sum, l) in sums.with_pv.iter_mut().zip(left) {
                *sum += l * with_pv[a];
            }
        }
    }
}

fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(x, y)| x * y).sum()
}

/// What may differ beside the dead band: nothing; gain by direction; by operating point; by both.
pub(crate) const SETS: [&[usize]; 4] = [&[0], &[0, 1], &[0, 2], &[0, 1, 2]];

/// Sums of products of the three responses (position; the same times direction; operating point) with
/// each other and with the PV.
#[derive(Clone, Copy, Default)]
pub(crate) struct Sums {
    products: [[f64; 3]; 3],
    with_pv: [f64; 3],
}

pub(crate) struct Profile {
    /// The OP's values, each that differs from the one before.
    op: Vec<f64>,
    pub(crate) pieces: Vec<Piece>,
    kind: Kind,
    pub(crate) point: Point,
    /// Middle and width of the OP's range, %.
    range: (f64, f64),
    /// Direction of the first step of the log.
    first_way: f64,
    /// Σ pv² with bases taken out.
    total: f64,
    rows: f64,
    /// Rows that count, noise's memory and shared samples considered.
    pub(crate) effective: f64,
    /// Mean square of the noise as one parameter sees it, %².
    pub(crate) variance: f64,
    /// Sum of squares with a gain for each step.
    pub(crate) free_rss: f64,
}

/// The least sum of squares for one dead band.
#[derive(Clone, Copy)]
pub(crate) struct Least {
    pub(crate) rss: f64,
    /// Share of the play that the first move had to take up.
    pub(crate) slack: f64,
    /// Whether that share makes a difference.
    pub(crate) matters: bool,
}

impl Profile {
    pub(crate) fn sums(&self, dead_band: f64, slack: f64) -> Sums {
        let positions = play(&self.op, dead_band, self.start(dead_band, slack));
        let curved = |p: f64| {
            let far = (p - self.range.0) / self.range.1;
            far * far * self.range.1 / 2.0
        };
        let mut moved: Vec<Moved> = vec![[0.0; 3]];
        moved.extend(positions.windows(2).map(|p| {
            let change = p[1] - p[0];
            [change, change.abs(), curved(p[1]) - curved(p[0])]
        }));
        let mut sums = Sums::default();
        for piece in &self.pieces {
            piece.add(self.kind, &self.point, &moved, &mut sums);
        }
        sums
    }

    /// The same profile at other dynamics.
    pub(crate) fn at(mut self, point: Point, free_rss: f64) -> Self {
        (self.point, self.free_rss) = (point, free_rss);
        for piece in &mut self.pieces {
            piece.prepare(self.kind, &point);
        }
        self
    }

    /// Whether the OP was led over to its levels rather than put there.
    pub(crate) fn ramped(&self) -> bool {
        self.pieces.iter().any(|p| p.seen.len() > MOST_IDEAL)
    }

    /// Where the valve stands of the OP at the beginning of the log, %.
    pub(crate) fn start(&self, dead_band: f64, slack: f64) -> f64 {
        self.first_way * dead_band * (slack - 0.5)
    }

    /// Factors of a set's responses, and the sum of squares they leave.
    pub(crate) fn solve(&self, sums: &Sums, set: &[usize]) -> ([f64; 3], f64) {
        // Cholesky of the scaled normal matrix; responses that say the same make no set.
        let n = set.len();
        let scale = |k: usize| libm::sqrt(sums.products[k][k].max(f64::MIN_POSITIVE));
        let mut lower = [[0.0; 3]; 3];
        let mut half = [0.0; 3];
        for a in 0..n {
            for b in 0..=a {
                let (j, k) = (set[a], set[b]);
                let mut value = sums.products[j][k] / (scale(j) * scale(k));
                for (left, right) in lower[a].iter().zip(&lower[b]).take(b) {
                    value -= left * right;
                }
                if a == b && value < 1e-6 {
                    return ([0.0; 3], f64::INFINITY);
                }
                lower[a][b] = if a == b {
                    libm::sqrt(value)
                } else {
                    value / lower[b][b]
                };
            }
            let mut value = sums.with_pv[set[a]] / scale(set[a]);
            for c in 0..a {
                value -= lower[a][c] * half[c];
            }
            half[a] = value / lower[a][a];
        }
        let explained: f64 = half[..n].iter().map(|h| h * h).sum();
        let mut factors = [0.0; 3];
        for a in (0..n).rev() {
            let mut value = half[a];
            for c in a + 1..n {
                value -= lower[c][a] * factors[c];
            }
            factors[a] = value / lower[a][a];
        }
        for a in 0..n {
            factors[a] /= scale(set[a]);
        }
        (factors, (self.total - explained).max(0.0))
    }

    pub(crate) fn rss(&self, dead_band: f64, slack: f64, set: &[usize]) -> f64 {
        self.solve(&self.sums(dead_band, slack), set).1
    }

    /// The least sum of squares over what the first move had to take up.
    pub(crate) fn least(&self, dead_band: f64, set: &[usize]) -> Least {
        let rss = |slack: f64| self.rss(dead_band, slack, set);
        let ends = [rss(0.0), rss(1.0)];
        let mut found = Least {
            rss: ends[0],
            slack: 0.0,
            matters: (ends[0] - ends[1]).abs() > 1e-9 * self.total,
        };
        if found.matters {
            let slack = golden((0.0, 1.0), rss);
            let there = rss(slack);
            if there < found.rss {
                (found.rss, found.slack) = (there, slack);
            }
        }
        found
    }

    pub(crate) fn bic(&self, rss: f64, parameters: usize) -> f64 {
        self.effective * libm::log((rss / self.rows).max(NOTHING_LEFT))
            + parameters as f64 * libm::log(self.effective)
    }
}

/// A column with level, or level and slope, taken out.
fn without_base(base: Base, t_s: &[f64], values: &[f64]) -> Vec<f64> {
    match base {
        Base::Nothing => values.to_vec(),
        Base::Level => {
            let mean = values.iter().sum::<f64>() / values.len().max(1) as f64;
            values.iter().map(|v| v - mean).collect()
        }
        Base::LevelAndSlope => line(t_s, values).residual,
    }
}

/// The steps with a gain for each; windows with several moves are thinned.
pub(crate) fn problem(windows: Vec<Window>, usable: &[&Fitted], kind: Kind) -> Problem {
    let mut problem = Problem::new(windows);
    let moves = problem.windows.iter().map(|w| w.moves.len()).max();
    let moves = moves.unwrap_or(0);
    if moves > MOST_IDEAL {
        let rows = if moves > MOST_UNITS {
            FEW_ROWS
        } else {
            MOST_ROWS
        };
        problem = search::thinned(&problem, rows);
    }
    problem.gain_per_window = true;
    for (window, fitted) in problem.windows.iter_mut().zip(usable) {
        window.base = fitted.of(kind).bases[0];
    }
    problem
}

pub(crate) fn prepared(
    trace: &Trace,
    steps: &[OpStep],
    usable: &[&Fitted],
    kind: Kind,
    point: Point,
) -> Option<Profile> {
    let windows = usable.iter().map(|f| pooled::window(trace, &f.step));
    let problem = problem(windows.collect(), usable, kind);
    let fit = search::fit(&problem, kind, &[point]).ok()?;
    let (times, op) = trace.op_log();
    let mut changes: Vec<(f64, f64)> = Vec::new();
    for (&t, &op) in times.iter().zip(op) {
        if changes.last().is_none_or(|last| last.1 != op) {
            changes.push((t, op));
        }
    }
    let pieces: Vec<Piece> = problem
        .windows
        .iter()
        .zip(usable)
        .map(|(window, fitted)| Piece::new(window, &fitted.step, &changes))
        .collect();
    let reached = steps.iter().flat_map(|s| [s.op_from, s.op_to]);
    let low = reached.clone().fold(f64::INFINITY, f64::min);
    let high = reached.fold(f64::NEG_INFINITY, f64::max);
    let taken: usize = usable.iter().map(|f| f.step.window.len()).sum();
    let twice: usize = pooled::shared(usable.iter().map(|f| &f.step)).iter().sum();
    let repeated = taken as f64 / (taken - twice) as f64;
    let rows = problem.rows() as f64;
    let factor = fit.memory.factor * repeated;
    let degrees = (rows - fit.parameters as f64).max(1.0);
    let profile = Profile {
        op: changes.iter().map(|c| c.1).collect(),
        total: pieces.iter().map(|p| dot(&p.pv, &p.pv)).sum(),
        pieces,
        kind,
        point: fit.point,
        range: ((low + high) / 2.0, (high - low).max(1e-6)),
        first_way: steps
            .first()
            .map_or(1.0, |s| (s.op_to - s.op_from).signum()),
        rows,
        effective: (rows / factor).max(3.0),
        variance: (fit.rss / degrees).max(NOTHING_LEFT) * factor,
        free_rss: fit.rss,
    };
    Some(profile.at(fit.point, fit.rss))
}

/// Where a curve is least between two ends (golden section, J. Kiefer, Proc. AMS 4 (1953) 502-506).
pub(crate) fn golden((mut low, mut high): (f64, f64), curve: impl Fn(f64) -> f64) -> f64 {
    const SHARE: f64 = 0.618_033_988_749_894_8;
    let (ends, mut a, mut b) = (
        (low, high),
        high - SHARE * (high - low),
        low + SHARE * (high - low),
    );
    let (mut at_a, mut at_b) = (curve(a), curve(b));
    for _ in 0..ROUNDS {
        if at_a <= at_b {
            high = b;
            (b, at_b) = (a, at_a);
            a = high - SHARE * (high - low);
            at_a = curve(a);
        } else {
            low = a;
            (a, at_a) = (b, at_b);
            b = low + SHARE * (high - low);
            at_b = curve(b);
        }
    }
    let middle = (low + high) / 2.0;
    // A least at an end is that end.
    [ends.0, ends.1]
        .into_iter()
        .fold((middle, curve(middle)), |best, end| {
            let at = curve(end);
            if at <= best.1 { (end, at) } else { best }
        })
        .0
}

/// Where a curve passes its bound, between a dead band beyond it and one within.
pub(crate) fn crossing(mut outside: f64, mut inside: f64, beyond: impl Fn(f64) -> bool) -> f64 {
    for _ in 0..ROUNDS {
        let middle = (outside + inside) / 2.0;
        if beyond(middle) {
            outside = middle;
        } else {
            inside = middle;
        }
    }
    inside
}
