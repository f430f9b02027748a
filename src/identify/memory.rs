//! Memory of the noise: how much a sample has in common with the one before it.
//!
//! Noise is taken as a first-order autoregressive process in continuous time, so that two samples have
//! ρ^(Δt/interval) in common however irregularly they were taken (R.H. Jones, Technometrics 22 (1980)
//! 389-395). Noise that turns about from
//! sample to sample, as exception reporting makes it, is no such process: its ρ is 0, and what it has in
//! common with itself is taken from the residual. ρ and variance are those of the restricted
//! likelihood (H.D. Patterson, R. Thompson, Biometrika 58 (1971) 545-554; for autoregressive errors
//! D.A. Harville, J. Am. Stat. Assoc. 72 (1977) 320-338), which counts what the fit took up of the noise:
//! a plain residual has less memory than its noise.

use super::least_squares::Base;
use std::ops::Range;

/// Part of the noise that a fit takes up, p parameters of n/F samples that count: below this the
/// residual's own memory, corrected to first order, is as good as the likelihood's.
const TAKEN_UP: f64 = 0.02;
/// Above this the likelihood costs more than the search; a fit that still takes up much of what it leaves
/// is one of a wrong kind.
const MOST_ROWS: usize = 10_000;
/// Bounds of ρ, as its inverse hyperbolic tangent: 0 to 0.998.
const LOW: f64 = 0.0;
const HIGH: f64 = 3.5;
/// Steps of the search for it: from coarse to where the rest is far below its scatter.
const FIRST_STEP: f64 = 0.4;
const LAST_STEP: f64 = 0.04;

/// Memory of a residual.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Memory {
    /// Lag-one autocorrelation as it stands.
    pub autocorrelation: f64,
    /// Lag-one autocorrelation of the noise over the usual interval, with what the fit took up of it.
    pub noise_autocorrelation: f64,
    /// Variance of the noise, %².
    pub variance: f64,
    /// The same two where ρ is one standard deviation higher: what the doubt about it means.
    pub doubtful: (f64, f64),
    /// How many samples count as one: Σ of the autocorrelation over all lags, at least 1.
    pub factor: f64,
    /// Whether the noise turns about from sample to sample.
    pub turning: bool,
    /// What of the factor a single ρ does not explain: a longer tail, at least 1.
    pub tail: f64,
}

/// Rows of a fit by window.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Stretch {
    pub rows: Range<usize>,
    pub base: Base,
}

/// ρ^(Δt/interval) from each row to the next; 0 at the first of a window.
pub(crate) fn links(t_s: &[f64], windows: &[Stretch], usual_s: f64, rho: f64) -> Vec<f64> {
    let mut links = vec![0.0; t_s.len()];
    let (mut length, mut link) = (usual_s, rho);
    for window in windows {
        for i in window.rows.clone().skip(1) {
            let between = t_s[i] - t_s[i - 1];
            if (between - length).abs() > 1e-9 * usual_s {
                length = between;
                link = libm::pow(rho, between / usual_s);
            }
            links[i] = link;
        }
    }
    links
}

/// Scale of each row of a whitened column, 1/√(1 − link²).
pub(crate) fn scales(links: &[f64]) -> Vec<f64> {
    links
        .iter()
        .map(|link| 1.0 / libm::sqrt(1.0 - link * link))
        .collect()
}

/// Takes out of each row what it has in common with the one before, to the same variance for all.
pub(crate) fn whiten(column: &mut [f64], links: &[f64], scales: &[f64]) {
    let mut before = 0.0;
    for ((value, link), scale) in column.iter_mut().zip(links).zip(scales) {
        let here = *value;
        *value = (here - link * before) * scale;
        before = here;
    }
}

/// Orthonormal columns that span level and slope of a window, whitened, with the logarithm of the
/// determinant of their normal matrix.
pub(crate) fn whitened_base(
    window: &Stretch,
    t_s: &[f64],
    links: &[f64],
    scales: &[f64],
) -> (Vec<Vec<f64>>, f64) {
    let rows = window.rows.clone();
    let (links, scales) = (&links[rows.clone()], &scales[rows.clone()]);
    let t_s = &t_s[rows];
    let mut raw: Vec<Vec<f64>> = Vec::new();
    if window.base != Base::Nothing {
        raw.push(vec![1.0; t_s.len()]);
    }
    if window.base == Base::LevelAndSlope {
        let mean = t_s.iter().sum::<f64>() / t_s.len().max(1) as f64;
        raw.push(t_s.iter().map(|t| t - mean).collect());
    }
    let mut found: Vec<Vec<f64>> = Vec::new();
    let mut ln_determinant = 0.0;
    for mut column in raw {
        whiten(&mut column, links, scales);
        for other in &found {
            subtract(&mut column, other);
        }
        let square: f64 = column.iter().map(|v| v * v).sum();
        if square > 0.0 {
            ln_determinant += libm::log(square);
            let size = libm::sqrt(square);
            column.iter_mut().for_each(|v| *v /= size);
            found.push(column);
        }
    }
    (found, ln_determinant)
}

/// Takes a unit column's part out of another.
pub(crate) fn subtract(column: &mut [f64], unit: &[f64]) {
    let along: f64 = column.iter().zip(unit).map(|(a, b)| a * b).sum();
    for (value, u) in column.iter_mut().zip(unit) {
        *value -= along * u;
    }
}

/// A residual with the columns of the fit that left it.
pub(crate) struct Left<'a> {
    pub t_s: &'a [f64],
    pub windows: &'a [Stretch],
    pub residual: &'a [f64],
    /// Of gain and searched parameters; empty where there are none to count.
    pub columns: &'a [&'a [f64]],
    /// All of the fit, bases counted.
    pub parameters: usize,
    /// Median sampling interval, s.
    pub usual_s: f64,
}

impl Left<'_> {
    /// −2 ln of the restricted likelihood at ρ, and the variance there.
    fn restricted(&self, rho: f64) -> (f64, f64) {
        let links = links(self.t_s, self.windows, self.usual_s, rho);
        let scales = scales(&links);
        // ln of the scales, worked out once for samples that are as far apart as those before.
        let (mut scale, mut ln_scale) = (1.0, 0.0);
        let mut ln_determinant = 0.0;
        for next in &scales {
            if *next != scale {
                (scale, ln_scale) = (*next, libm::log(*next));
            }
            ln_determinant -= 2.0 * ln_scale;
        }
        let mut columns: Vec<Vec<f64>> = std::iter::once(self.residual)
            .chain(self.columns.iter().copied())
            .map(|column| {
                let mut column = column.to_vec();
                whiten(&mut column, &links, &scales);
                column
            })
            .collect();
        for window in self.windows {
            let (base, of_base) = whitened_base(window, self.t_s, &links, &scales);
            ln_determinant += of_base;
            for column in &mut columns {
                for unit in &base {
                    subtract(&mut column[window.rows.clone()], unit);
                }
            }
        }
        // The columns made orthogonal one after the other, then taken out of the residual.
        let (residual, columns) = columns.split_at_mut(1);
        for k in 0..columns.len() {
            let (done, rest) = columns.split_at_mut(k);
            let own = &mut rest[0];
            let whole: f64 = own.iter().map(|v| v * v).sum();
            for other in done {
                subtract(own, other);
            }
            let square: f64 = own.iter().map(|v| v * v).sum();
            // What the columns before it span already is no parameter of its own.
            if square > 1e-12 * whole {
                ln_determinant += libm::log(square);
                let size = libm::sqrt(square);
                own.iter_mut().for_each(|v| *v /= size);
                subtract(&mut residual[0], own);
            } else {
                own.fill(0.0);
            }
        }
        let degrees = (self.residual.len() - self.parameters) as f64;
        let rss = residual[0]
            .iter()
            .map(|v| v * v)
            .sum::<f64>()
            .max(f64::MIN_POSITIVE);
        (degrees * libm::log(rss) + ln_determinant, rss / degrees)
    }

    /// ρ as its inverse hyperbolic tangent, and that one standard deviation higher.
    fn most_likely(&self, start: f64) -> (f64, f64) {
        let value = |z: f64| self.restricted(libm::tanh(z)).0;
        let mut step = FIRST_STEP;
        let mut z = start.clamp(LOW, HIGH);
        let mut here = value(z);
        let (mut up, mut down) = (None, None);
        while step > LAST_STEP {
            let above = *up.get_or_insert_with(|| value((z + step).min(HIGH)));
            if above < here {
                (z, down, here, up) = ((z + step).min(HIGH), Some(here), above, None);
                continue;
            }
            let below = *down.get_or_insert_with(|| value((z - step).max(LOW)));
            if below < here {
                (z, up, here, down) = ((z - step).max(LOW), Some(here), below, None);
                continue;
            }
            // The lowest of a parabola through the three.
            let bend = above + below - 2.0 * here;
            if bend > 0.0 {
                let shift = (step * (below - above) / (2.0 * bend)).clamp(-step, step);
                let there = (z + shift).clamp(LOW, HIGH);
                let lowest = value(there);
                if lowest < here {
                    (z, here) = (there, lowest);
                }
            }
            (up, down) = (None, None);
            step /= 4.0;
        }
        // At an end of its range the likelihood is taken to fall to both sides as it does to the inner one.
        let reach = FIRST_STEP / 2.0;
        let rise = |at: f64| (LOW..=HIGH).contains(&at).then(|| value(at) - here);
        let (above, below) = (rise(z + reach), rise(z - reach));
        let both = above.or(below).unwrap_or(0.0) + below.or(above).unwrap_or(0.0);
        let sd = libm::sqrt(2.0 * reach * reach / both.max(2.0 * reach * reach));
        (z, z + sd)
    }

    /// Memory of the noise.
    pub(crate) fn memory(&self) -> Memory {
        let lengths: Vec<usize> = self.windows.iter().map(|w| w.rows.len()).collect();
        let rows = self.residual.len() as f64;
        let own = products(self.residual, &lengths, 0);
        if own <= 0.0 {
            return Memory {
                autocorrelation: 0.0,
                noise_autocorrelation: 0.0,
                variance: 0.0,
                doubtful: (0.0, 0.0),
                factor: 1.0,
                turning: false,
                tail: 1.0,
            };
        }
        let seen = products(self.residual, &lengths, 1) / own;
        let start = seen.clamp(0.0, 0.998);
        let taken_up = self.parameters as f64 / rows * (1.0 + start) / (1.0 - start);
        let by_likelihood =
            taken_up > TAKEN_UP && self.residual.len() <= MOST_ROWS && !self.columns.is_empty();
        let (rho, variance, doubtful) = if by_likelihood {
            let (z, above) = self.most_likely(libm::atanh(start));
            let rho = libm::tanh(z);
            let above = libm::tanh(above);
            (
                rho,
                self.restricted(rho).1,
                (above, self.restricted(above).1),
            )
        } else {
            let c = self.parameters as f64 / rows;
            // For noise of one time constant the residual shows ρ̂ = (ρ − cF)/(1 − cF), c = p/n,
            // F = (1+ρ)/(1−ρ): ρ² − ρ(1 + ρ̂ − c(1 − ρ̂)) + ρ̂ + c(1 − ρ̂) = 0; the root that goes to ρ̂
            // with c → 0.
            let sum = 1.0 + seen - c * (1.0 - seen);
            let under_root = sum * sum / 4.0 - seen - c * (1.0 - seen);
            let rho = (sum / 2.0 - libm::sqrt(under_root.max(0.0))).clamp(0.0, 0.998);
            let taken = self.parameters as f64 * ((1.0 + rho) / (1.0 - rho)).max(1.0);
            let variance = own / (rows - taken).max(rows / 4.0);
            let sd = 1.0 / libm::sqrt(rows * (1.0 - rho * rho));
            (rho, variance, (libm::tanh(libm::atanh(rho) + sd), variance))
        };
        let by_one_lag = (1.0 + rho) / (1.0 - rho);
        let by_sum = sum_of_autocorrelation(self.residual, &lengths, own);
        let tail = (by_sum / by_one_lag.max(1.0)).max(1.0);
        Memory {
            autocorrelation: seen.clamp(-1.0, 1.0),
            noise_autocorrelation: rho,
            variance,
            doubtful,
            turning: seen < -2.0 / libm::sqrt(rows),
            factor: (by_one_lag * tail).min(rows / 4.0).max(1.0),
            tail,
        }
    }
}

/// Σ r(i) r(i+lag) over the windows of the residual.
fn products(residual: &[f64], windows: &[usize], lag: usize) -> f64 {
    let mut start = 0;
    let mut sum = 0.0;
    for &rows in windows {
        let part = &residual[start..start + rows];
        if rows > lag {
            sum += part
                .iter()
                .zip(&part[lag..])
                .map(|(a, b)| a * b)
                .sum::<f64>();
        }
        start += rows;
    }
    sum
}

/// Σ of the autocorrelation over all lags, by the trapezoid over widening lags until it is lost in
/// its scatter.
fn sum_of_autocorrelation(residual: &[f64], windows: &[usize], own: f64) -> f64 {
    let mut sum = 1.0;
    let (mut lag, mut before) = (1_usize, 1.0);
    let mut last_lag = 0_usize;
    let longest = windows.iter().copied().max().unwrap_or(0) / 4;
    while lag <= longest {
        let here = products(residual, windows, lag) / own;
        if here < 2.0 / libm::sqrt(residual.len() as f64) {
            break;
        }
        // Lags after the last up to this one: the mean of both, twice for both signs.
        sum += (lag - last_lag) as f64 * (before + here) - before + here;
        (before, last_lag) = (here, lag);
        lag += 1 + lag / 4;
    }
    sum
}

/// Columns over the samples themselves: what windows share is added up. `shared` tells how many first
/// rows of each window are the last of the one before.
pub(crate) fn merged(columns: &[&[f64]], windows: &[Stretch], shared: &[usize]) -> Vec<Vec<f64>> {
    columns
        .iter()
        .map(|column| {
            let mut sums: Vec<f64> = Vec::with_capacity(column.len());
            for (window, &shared) in windows.iter().zip(shared) {
                let (again, fresh) = column[window.rows.clone()].split_at(shared);
                let start = sums.len() - shared;
                for (sum, value) in sums[start..].iter_mut().zip(again) {
                    *sum += value;
                }
                sums.extend_from_slice(fresh);
            }
            sums
        })
        .collect()
}

/// Links between the samples of [`merged`] columns.
pub(crate) fn merged_links(links: &[f64], windows: &[Stretch], shared: &[usize]) -> Vec<f64> {
    windows
        .iter()
        .zip(shared)
        .flat_map(|(window, &shared)| links[window.rows.clone()][shared..].iter().copied())
        .collect()
}

/// JᵀVJ with the variance of the noise, from the residual itself: what each row brings to the columns, and
/// what it has in common with the next two, weighted so that no variance comes out negative (W.K. Newey,
/// K.D. West, Econometrica 55 (1987) 703-708). For noise that turns about: two rows are all it remembers.
pub(crate) fn from_residual(brought: &[Vec<f64>]) -> Vec<Vec<f64>> {
    const LAGS: usize = 2;
    let product = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(x, y)| x * y).sum::<f64>();
    brought
        .iter()
        .map(|a| {
            let sum = |b: &Vec<f64>| {
                let apart = (1..=LAGS.min(a.len().saturating_sub(1))).map(|lag| {
                    let weight = 1.0 - lag as f64 / (LAGS + 1) as f64;
                    weight * (product(a, &b[lag..]) + product(b, &a[lag..]))
                });
                product(a, b) + apart.sum::<f64>()
            };
            brought.iter().map(sum).collect()
        })
        .collect()
}

/// JᵀVJ for columns J and noise of variance 1 with these links: the middle of the sandwich (H. White,
/// Econometrica 48 (1980) 817-838) with the noise's model put in.
pub(crate) fn filtered(columns: &[Vec<f64>], links: &[f64]) -> Vec<Vec<f64>> {
    let size = columns.len();
    let mut sums = vec![vec![0.0; size]; size];
    for (j, a) in columns.iter().enumerate() {
        // Σ over earlier rows of what each has in common with this one; half of the row itself.
        let mut earlier = 0.0;
        let mut before = 0.0;
        for (i, (&value, &link)) in a.iter().zip(links).enumerate() {
            earlier = link * (earlier + before);
            before = value;
            for (sum, b) in sums[j].iter_mut().zip(columns) {
                *sum += (earlier + value / 2.0) * b[i];
            }
        }
    }
    // Later rows have as much in common with earlier ones.
    let both = |j: usize, k: usize| sums[j][k] + sums[k][j];
    (0..size)
        .map(|j| (0..size).map(|k| both(j, k)).collect())
        .collect()
}
