//! A fit problem laid out for evaluation, and the descent to its nearest least sum of squares.

use super::least_squares::{Base, Fit, Point, Problem, searched};
use super::memory::{self, Left, Stretch};
use super::response::{self, Answer};
use crate::model::Kind;
use std::ops::Range;

/// A window in the flattened rows of [`Prepared`].
struct Rows {
    rows: Range<usize>,
    moves: Vec<(f64, f64)>,
    base: Base,
    mean_t: f64,
    /// Σ (t − mean)².
    square_t: f64,
    /// Unit columns that span the base, whitened; none where samples count as they are.
    whitened_base: Vec<Vec<f64>>,
}

/// What takes the memory of the noise out of columns.
struct Whitening {
    links: Vec<f64>,
    scales: Vec<f64>,
}

/// Bounds of the search.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Bounds {
    pub low: [f64; 3],
    pub high: [f64; 3],
}

impl Bounds {
    fn clip(&self, mut point: Point) -> Point {
        for k in 0..3 {
            point.set(k, point.get(k).max(self.low[k]).min(self.high[k]));
        }
        point
    }
}

/// Rounds of a search; it ends well before unless the data do not determine the point.
const MOST_ROUNDS: usize = 40;
/// The same where many samples make a round costly: their search starts from the end of another.
const MOST_ROUNDS_OF_MANY: usize = 6;
/// What counts as many samples.
const MANY_ROWS: usize = 8000;

/// A problem laid out for evaluation, with its work space.
pub(crate) struct Prepared {
    kind: Kind,
    windows: Vec<Rows>,
    /// Rows that share linear parameters.
    groups: Vec<Range<usize>>,
    t_s: Vec<f64>,
    /// PV with the bases projected out.
    pv: Vec<f64>,
    /// Means and slopes that were projected out of the PV.
    pv_base: Vec<(f64, f64)>,
    linear: usize,
    searched: usize,
    columns: Vec<Vec<f64>>,
    residual: Vec<f64>,
    /// Median sampling interval, s.
    usual_s: f64,
    whitening: Option<Whitening>,
}

/// What one evaluation found.
#[derive(Debug, Clone)]
pub(crate) struct Evaluation {
    pub rss: f64,
    /// Linear factors (gain, rate) of each group.
    factors: Vec<[f64; 2]>,
    /// Normal matrix and right-hand side of the step, linear parameters projected out.
    normal: [[f64; 3]; 3],
    rhs: [f64; 3],
    /// Means and slopes projected out of the linear columns, by window and column.
    column_base: Vec<[(f64, f64); 2]>,
}

fn dot(a: &[f64], b: &[f64]) -> f64 {
    // Four sums side by side: quicker, and their rounding errors do not line up.
    let mut sums = [0.0; 4];
    let (a4, b4) = (a.chunks_exact(4), b.chunks_exact(4));
    let tail: f64 = a4
        .remainder()
        .iter()
        .zip(b4.remainder())
        .map(|(x, y)| x * y)
        .sum();
    for (x, y) in a4.zip(b4) {
        for k in 0..4 {
            sums[k] += x[k] * y[k];
        }
    }
    (sums[0] + sums[1]) + (sums[2] + sums[3]) + tail
}

/// Takes level and slope out of one window of a column; gives what was taken (mean, slope) unless the
/// column was whitened.
fn project(window: &Rows, t_s: &[f64], column: &mut [f64]) -> (f64, f64) {
    if window.base == Base::Nothing {
        return (0.0, 0.0);
    }
    let column = &mut column[window.rows.clone()];
    if !window.whitened_base.is_empty() {
        for unit in &window.whitened_base {
            memory::subtract(column, unit);
        }
        return (0.0, 0.0);
    }
    let t_s = &t_s[window.rows.clone()];
    let mean = column.iter().sum::<f64>() / column.len() as f64;
    for value in column.iter_mut() {
        *value -= mean;
    }
    if window.base == Base::Level || window.square_t <= 0.0 {
        return (mean, 0.0);
    }
    let slope = column
        .iter()
        .zip(t_s)
        .map(|(value, t)| value * (t - window.mean_t))
        .sum::<f64>()
        / window.square_t;
    for (value, t) in column.iter_mut().zip(t_s) {
        *value -= slope * (t - window.mean_t);
    }
    (mean, slope)
}

fn stretches(windows: &[Rows]) -> Vec<Stretch> {
    windows
        .iter()
        .map(|w| Stretch {
            rows: w.rows.clone(),
            base: w.base,
        })
        .collect()
}

/// Median sampling interval, s; 1 where there is none.
pub(crate) fn usual_interval(problem: &Problem) -> f64 {
    let mut intervals: Vec<f64> = problem
        .windows
        .iter()
        .flat_map(|w| w.t_s.windows(2).map(|p| p[1] - p[0]))
        .collect();
    if intervals.is_empty() {
        return 1.0;
    }
    let middle = intervals.len() / 2;
    *intervals.select_nth_unstable_by(middle, f64::total_cmp).1
}

impl Prepared {
    pub(crate) fn new(problem: &Problem, kind: Kind) -> Self {
        Prepared::laid_out(problem, kind, None)
    }

    /// The same for noise that has `rho` in common over the usual interval: least squares of what each
    /// sample brings beyond the one before.
    pub(crate) fn whitened(problem: &Problem, kind: Kind, rho: f64) -> Self {
        Prepared::laid_out(problem, kind, Some(rho))
    }

    fn laid_out(problem: &Problem, kind: Kind, rho: Option<f64>) -> Self {
        let (mut t_s, mut pv, mut windows) = (Vec::new(), Vec::new(), Vec::new());
        for window in &problem.windows {
            let start = t_s.len();
            t_s.extend_from_slice(&window.t_s);
            pv.extend_from_slice(&window.pv);
            let mean_t = window.t_s.iter().sum::<f64>() / window.t_s.len().max(1) as f64;
            windows.push(Rows {
                rows: start..t_s.len(),
                moves: window.moves.clone(),
                base: window.base,
                mean_t,
                square_t: window.t_s.iter().map(|t| (t - mean_t) * (t - mean_t)).sum(),
                whitened_base: Vec::new(),
            });
        }
        let usual_s = usual_interval(problem);
        let whitening = rho.map(|rho| {
            let stretches = stretches(&windows);
            let links = memory::links(&t_s, &stretches, usual_s, rho);
            let scales = memory::scales(&links);
            memory::whiten(&mut pv, &links, &scales);
            for (window, stretch) in windows.iter_mut().zip(&stretches) {
                window.whitened_base = memory::whitened_base(stretch, &t_s, &links, &scales).0;
            }
            Whitening { links, scales }
        });
        let pv_base = windows.iter().map(|w| project(w, &t_s, &mut pv)).collect();
        let groups = if problem.gain_per_window {
            windows.iter().map(|w| w.rows.clone()).collect()
        } else {
            std::iter::once(0..t_s.len()).collect()
        };
        let linear = 1 + usize::from(problem.moving_at_start);
        let rows = t_s.len();
        Prepared {
            kind,
            windows,
            groups,
            pv,
            pv_base,
            linear,
            searched: searched(kind),
            columns: vec![vec![0.0; rows]; linear * (1 + searched(kind))],
            residual: vec![0.0; rows],
            usual_s,
            whitening,
            t_s,
        }
    }

    /// Sum of squares of the PV about its bases: what a fit has to explain.
    pub(crate) fn total(&self) -> f64 {
        dot(&self.pv, &self.pv)
    }

    /// Residual sum of squares and the step's normal equations at a point; leaves the residual.
    pub(crate) fn evaluate(&mut self, point: &Point) -> Evaluation {
        let per_column = 1 + self.searched;
        let linear = self.linear;
        for window in &self.windows {
            let start = window.rows.start;
            let columns = &mut self.columns;
            let searched = self.searched;
            response::answers(
                self.kind,
                point,
                &window.moves,
                &self.t_s[window.rows.clone()],
                |row, a: Answer| {
                    columns[0][start + row] = a.value;
                    for k in 0..searched {
                        columns[1 + k][start + row] = a.slopes[k];
                    }
                    if linear == 2 {
                        columns[per_column][start + row] = a.rate;
                        for k in 0..searched {
                            columns[per_column + 1 + k][start + row] = a.rate_slopes[k];
                        }
                    }
                },
            );
        }
        if let Some(Whitening { links, scales }) = &self.whitening {
            for column in &mut self.columns {
                memory::whiten(column, links, scales);
            }
        }
        let mut column_base = Vec::with_capacity(self.windows.len());
        for window in &self.windows {
            let mut taken = [(0.0, 0.0); 2];
            for (c, column) in self.columns.iter_mut().enumerate() {
                let base = project(window, &self.t_s, column);
                if c % per_column == 0 {
                    taken[c / per_column] = base;
                }
            }
            column_base.push(taken);
        }
        let mut evaluation = Evaluation {
            rss: 0.0,
            factors: Vec::with_capacity(self.groups.len()),
            normal: [[0.0; 3]; 3],
            rhs: [0.0; 3],
            column_base,
        };
        for rows in self.groups.clone() {
            self.add_group(rows, &mut evaluation);
        }
        evaluation
    }

    /// Solves the linear parameters of a group of rows and adds its part of the normal equations.
    fn add_group(&mut self, rows: Range<usize>, evaluation: &mut Evaluation) {
        let per_column = 1 + self.searched;
        let pv = &self.pv[rows.clone()];
        let first = &self.columns[0][rows.clone()];
        let g00 = dot(first, first);
        let b0 = dot(first, pv);
        let mut factors = [if g00 > 0.0 { b0 / g00 } else { 0.0 }, 0.0];
        let (mut g01, mut g11) = (0.0, 0.0);
        if self.linear == 2 {
            let second = &self.columns[per_column][rows.clone()];
            (g01, g11) = (dot(first, second), dot(second, second));
            let b1 = dot(second, pv);
            let determinant = g00 * g11 - g01 * g01;
            if determinant > 1e-14 * g00 * g11 {
                factors = [
                    (b0 * g11 - b1 * g01) / determinant,
                    (b1 * g00 - b0 * g01) / determinant,
                ];
            }
        }
        let residual = &mut self.residual[rows.clone()];
        for ((r, y), g) in residual.iter_mut().zip(pv).zip(first) {
            *r = y - factors[0] * g;
        }
        if self.linear == 2 {
            let second = &self.columns[per_column][rows.clone()];
            for (r, g) in residual.iter_mut().zip(second) {
                *r -= factors[1] * g;
            }
        }
        // The columns of the Jacobian, in place of the derivatives of the first response.
        for k in 0..self.searched {
            let (head, rest) = self.columns.split_at_mut(per_column);
            let column = &mut head[1 + k][rows.clone()];
            for value in column.iter_mut() {
                *value *= factors[0];
            }
            if self.linear == 2 {
                for (value, rate) in column.iter_mut().zip(&rest[1 + k][rows.clone()]) {
                    *value += factors[1] * rate;
                }
            }
        }
        let residual = &self.residual[rows.clone()];
        evaluation.rss += dot(residual, residual);
        evaluation.factors.push(factors);
        let mut along = [[0.0; 2]; 3];
        for (k, along) in along.iter_mut().enumerate().take(self.searched) {
            let column = &self.columns[1 + k][rows.clone()];
            evaluation.rhs[k] += dot(column, residual);
            along[0] = dot(column, &self.columns[0][rows.clone()]);
            if self.linear == 2 {
                along[1] = dot(column, &self.columns[per_column][rows.clone()]);
            }
        }
        let determinant = g00 * g11 - g01 * g01;
        for j in 0..self.searched {
            for k in 0..=j {
                let plain = dot(
                    &self.columns[1 + j][rows.clone()],
                    &self.columns[1 + k][rows.clone()],
                );
                let explained = if self.linear == 2 && determinant > 1e-14 * g00 * g11 {
                    let [a, b] = along[j];
                    let [c, d] = along[k];
                    (a * c * g11 - (a * d + b * c) * g01 + b * d * g00) / determinant
                } else if g00 > 0.0 {
                    along[j][0] * along[k][0] / g00
                } else {
                    0.0
                };
                let value = plain - explained;
                evaluation.normal[j][k] += value;
                if j != k {
                    evaluation.normal[k][j] += value;
                }
            }
        }
    }

    /// Columns of the Jacobian over relative gain and the searched parameters, from the latest
    /// evaluation; none where each window has its own gain.
    fn jacobian(&self, evaluation: &Evaluation, problem: &Problem) -> Vec<Vec<f64>> {
        if problem.gain_per_window {
            return Vec::new();
        }
        let gain = evaluation.factors[0][0];
        let first = usize::from(problem.fixed_dead_time_s.is_some());
        std::iter::once(self.columns[0].iter().map(|v| v * gain).collect())
            .chain((1 + first..=self.searched).map(|k| self.columns[k].clone()))
            .collect()
    }

    /// The fit at a point; `freer` is a fit of the same samples with more freedom, whose residual then
    /// stands for the noise.
    pub(crate) fn finish(&mut self, problem: &Problem, point: Point, freer: Option<&Fit>) -> Fit {
        let evaluation = self.evaluate(&point);
        let common = self.groups.len() == 1;
        let factors = |w: usize| evaluation.factors[if common { 0 } else { w }];
        let bases = (0..self.windows.len())
            .map(|w| {
                let (mean, slope) = self.pv_base[w];
                let taken = evaluation.column_base[w];
                let [gain, rate] = factors(w);
                let slope = slope - gain * taken[0].1 - rate * taken[1].1;
                let mean = mean - gain * taken[0].0 - rate * taken[1].0;
                (mean - slope * self.windows[w].mean_t, slope)
            })
            .collect();
        let parameters = problem.parameters(self.kind);
        let gains = (0..self.windows.len()).map(|w| factors(w)[0]).collect();
        let rates = (0..self.windows.len()).map(|w| factors(w)[1]).collect();
        let jacobian = self.jacobian(&evaluation, problem);
        let columns: Vec<&[f64]> = jacobian.iter().map(Vec::as_slice).collect();
        let stretches = stretches(&self.windows);
        let left = Left {
            t_s: &self.t_s,
            windows: &stretches,
            residual: &self.residual,
            columns: &columns,
            parameters,
            usual_s: self.usual_s,
        };
        let memory = freer.map_or_else(|| left.memory(), |freer| freer.memory);
        let information = columns
            .iter()
            .map(|a| columns.iter().map(|b| dot(a, b)).collect())
            .collect();
        // Memory runs on from one window to the next where they share samples.
        let merged = memory::merged(&columns, &stretches, &problem.shared);
        let middle = |rho: f64, variance: f64| -> Vec<Vec<f64>> {
            let links = memory::links(&self.t_s, &stretches, self.usual_s, rho);
            let links = memory::merged_links(&links, &stretches, &problem.shared);
            let mut sums = memory::filtered(&merged, &links);
            sums.iter_mut().flatten().for_each(|v| *v *= variance);
            sums
        };
        let turning = memory.turning.then(|| {
            let brought: Vec<Vec<f64>> = columns
                .iter()
                .map(|c| c.iter().zip(&self.residual).map(|(x, r)| x * r).collect())
                .collect();
            let brought: Vec<&[f64]> = brought.iter().map(Vec::as_slice).collect();
            let merged = memory::merged(&brought, &stretches, &problem.shared);
            let mut sums = memory::from_residual(&merged);
            let rows = self.t_s.len() as f64;
            let taken_up = rows / (rows - parameters as f64);
            sums.iter_mut().flatten().for_each(|v| *v *= taken_up);
            sums
        });
        Fit {
            kind: self.kind,
            gains,
            rates,
            point,
            bases,
            rss: evaluation.rss,
            rows: self.t_s.len(),
            samples: self.t_s.len() - problem.shared.iter().sum::<usize>(),
            parameters,
            residual: self.residual.clone(),
            information,
            middle: middle(memory.noise_autocorrelation, memory.variance),
            doubtful_middle: middle(memory.doubtful.0, memory.doubtful.1),
            turning_middle: turning,
            memory,
        }
    }

    /// Levenberg-Marquardt from `start` within the bounds; gives the best point and its sum of squares.
    /// It ends where the next step would gain less than `close` times the mean square residual: the
    /// point then moves by less than √close of a standard deviation.
    pub(crate) fn descend(&mut self, start: Point, bounds: &Bounds, close: f64) -> (Point, f64) {
        let mut point = bounds.clip(start);
        let mut here = self.evaluate(&point);
        let mut damping = 1e-4;
        let rows = self.t_s.len() as f64;
        let most = if self.t_s.len() > MANY_ROWS {
            MOST_ROUNDS_OF_MANY
        } else {
            MOST_ROUNDS
        };
        for _ in 0..most {
            let Some(step) = self.step(&here, &point, bounds, damping) else {
                break;
            };
            let mut next = point;
            for (k, size) in step.iter().enumerate().take(self.searched) {
                // A lag moves by a factor of e² at most: beyond, the linear picture says nothing.
                let most = if k == 0 { f64::INFINITY } else { 2.0 };
                next.set(k, point.get(k) + size.clamp(-most, most));
            }
            let next = bounds.clip(next);
            if next == point {
                break;
            }
            let there = self.evaluate(&next);
            let expected: f64 = (0..self.searched).map(|k| step[k] * here.rhs[k]).sum();
            // Below the rounding of the sum of squares the step itself is the better judge.
            let at_rounding = expected < 1e-10 * here.rss && there.rss < here.rss * (1.0 + 1e-11);
            if there.rss < here.rss || at_rounding {
                let moved = (0..self.searched)
                    .map(|k| (next.get(k) - point.get(k)).abs() / (1e-3 + point.get(k).abs()))
                    .fold(0.0, f64::max);
                (point, here) = (next, there);
                damping = if damping < 1e-9 { 0.0 } else { damping / 10.0 };
                if moved < 1e-12 || expected < close * here.rss / rows {
                    break;
                }
            } else {
                if expected < close.max(1e-13) * here.rss / rows {
                    break;
                }
                damping = (damping * 8.0).max(1e-6);
                if damping > 1e9 {
                    break;
                }
            }
        }
        (point, here.rss)
    }

    /// The damped step; parameters that stand at a bound and push outwards stay.
    fn step(
        &self,
        here: &Evaluation,
        point: &Point,
        bounds: &Bounds,
        damping: f64,
    ) -> Option<[f64; 3]> {
        let free: Vec<usize> = (0..self.searched)
            .filter(|&k| {
                let at = point.get(k);
                here.normal[k][k] > 0.0
                    && !(at <= bounds.low[k] && here.rhs[k] <= 0.0)
                    && !(at >= bounds.high[k] && here.rhs[k] >= 0.0)
            })
            .collect();
        let n = free.len();
        if n == 0 {
            return None;
        }
        // Cholesky of the scaled, damped normal matrix.
        let scale = |k: usize| libm::sqrt(here.normal[k][k]);
        let mut lower = [[0.0; 3]; 3];
        for a in 0..n {
            for b in 0..=a {
                let (j, k) = (free[a], free[b]);
                let mut value = here.normal[j][k] / (scale(j) * scale(k));
                if a == b {
                    value += damping;
                }
                for (left, right) in lower[a].iter().zip(&lower[b]).take(b) {
                    value -= left * right;
                }
                lower[a][b] = if a == b {
                    libm::sqrt(value.max(1e-14))
                } else {
                    value / lower[b][b]
                };
            }
        }
        let mut solved = [0.0; 3];
        for a in 0..n {
            let mut value = here.rhs[free[a]] / scale(free[a]);
            for c in 0..a {
                value -= lower[a][c] * solved[c];
            }
            solved[a] = value / lower[a][a];
        }
        for a in (0..n).rev() {
            for c in a + 1..n {
                solved[a] -= lower[c][a] * solved[c];
            }
            solved[a] /= lower[a][a];
        }
        let mut step = [0.0; 3];
        for (a, &k) in free.iter().enumerate() {
            step[k] = solved[a] / scale(k);
        }
        step.iter().all(|s| s.is_finite()).then_some(step)
    }
}
