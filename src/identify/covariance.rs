//! How well a fit is known: covariance of its parameters, with the residual's own memory counted.

use super::least_squares::Fit;
use crate::model::Kind;
use nalgebra::DMatrix;

/// Normal quantile of a two-sided 95 % interval.
pub(crate) const TWO_SIDED_95: f64 = 1.959_963_984_540_054;

/// No interval reaches further than this from its value, as a standard deviation of a logarithm:
/// a factor of about ten thousand either way. Beyond, the data say nothing at all.
const MOST_LOG_SD: f64 = 4.7;

/// (JᵀJ)⁻¹ of a fit over relative gain, dead time, m, w (searched ones only).
fn inverse_information(fit: &Fit) -> Vec<Vec<f64>> {
    let n = fit.information.len();
    // Scaled to a unit diagonal before it is inverted; what the data do not show at all gets a
    // very small information instead of none.
    let scale: Vec<f64> = (0..n)
        .map(|k| libm::sqrt(fit.information[k][k].max(f64::MIN_POSITIVE)))
        .collect();
    let matrix = DMatrix::from_fn(n, n, |j, k| fit.information[j][k] / (scale[j] * scale[k]));
    let eigen = nalgebra::SymmetricEigen::new(matrix);
    let mut inverse = DMatrix::zeros(n, n);
    for (k, value) in eigen.eigenvalues.iter().enumerate() {
        let axis = eigen.eigenvectors.column(k);
        inverse += axis * axis.transpose() / value.max(1e-13);
    }
    (0..n)
        .map(|j| {
            (0..n)
                .map(|k| inverse[(j, k)] / (scale[j] * scale[k]))
                .collect()
        })
        .collect()
}

/// The usual covariance s²(JᵀJ)⁻¹ with s² = RSS/(n − p), over ln gain, dead time, m, w (searched
/// ones only): right for residuals without memory.
pub fn ordinary(fit: &Fit) -> Vec<Vec<f64>> {
    let variance = fit.rss / (fit.rows - fit.parameters) as f64;
    scaled(inverse_information(fit), variance)
}

fn scaled(mut matrix: Vec<Vec<f64>>, factor: f64) -> Vec<Vec<f64>> {
    for row in &mut matrix {
        for value in row {
            *value *= factor;
        }
    }
    matrix
}

/// Memory of a residual.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Memory {
    /// Lag-one autocorrelation as it stands.
    pub autocorrelation: f64,
    /// Lag-one autocorrelation of the noise, corrected for what the fit took up of it; not negative.
    pub noise_autocorrelation: f64,
    /// How many samples count as one: Σ of the autocorrelation over all lags, at least 1.
    pub factor: f64,
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

/// The memory of a residual left by a fit of so many parameters; `windows` are the numbers of
/// samples of its windows.
///
/// A fit takes up the slow part of correlated noise: of p parameters each removes about F = Σρ
/// samples' worth. For noise of one time constant the residual then shows
/// ρ̂ = (ρ − cF)/(1 − cF), c = p/n, F = (1+ρ)/(1−ρ), which is solved for ρ. Where the autocorrelation
/// has a longer tail than that, its sum over lags is used if larger.
pub(crate) fn memory(residual: &[f64], windows: &[usize], parameters: usize) -> Memory {
    let rows = residual.len() as f64;
    let own = products(residual, windows, 0);
    if own <= 0.0 {
        return Memory {
            autocorrelation: 0.0,
            noise_autocorrelation: 0.0,
            factor: 1.0,
        };
    }
    let at = |lag: usize| products(residual, windows, lag) / own;
    let seen = at(1);
    let c = parameters as f64 / rows;
    // ρ² − ρ(1 + ρ̂ − c(1 − ρ̂)) + ρ̂ + c(1 − ρ̂) = 0; the root that goes to ρ̂ with c → 0.
    let sum = 1.0 + seen - c * (1.0 - seen);
    let under_root = sum * sum / 4.0 - seen - c * (1.0 - seen);
    let rho = (sum / 2.0 - libm::sqrt(under_root.max(0.0))).clamp(0.0, 0.999);
    let by_one_lag = (1.0 + rho) / (1.0 - rho);

    // Σ of the autocorrelation by the trapezoid over widening lags until it is lost in its scatter.
    let mut by_sum = 1.0;
    let (mut lag, mut before) = (1_usize, 1.0);
    let mut last_lag = 0_usize;
    let longest = windows.iter().copied().max().unwrap_or(0) / 4;
    while lag <= longest {
        let here = at(lag);
        if here < 2.0 / libm::sqrt(rows) {
            break;
        }
        // Lags after the last up to this one: the mean of both, twice for both signs.
        by_sum += (lag - last_lag) as f64 * (before + here) - before + here;
        (before, last_lag) = (here, lag);
        lag += 1 + lag / 4;
    }
    Memory {
        autocorrelation: seen.clamp(-1.0, 1.0),
        noise_autocorrelation: rho,
        factor: by_one_lag.max(by_sum).min(rows / 4.0).max(1.0),
    }
}

/// JᵀVJ for columns J and noise whose autocorrelation falls as ρ^lag within each window: the middle
/// of the sandwich (H. White, Econometrica 48 (1980) 817-838) with the noise's model put in.
pub(crate) fn filtered(columns: &[&[f64]], windows: &[usize], rho: f64) -> Vec<Vec<f64>> {
    let mut sums = vec![vec![0.0; columns.len()]; columns.len()];
    let mut start = 0;
    for &rows in windows {
        for (j, a) in columns.iter().enumerate() {
            // Σ over earlier rows of ρ^distance, row by row.
            let mut earlier = 0.0;
            for i in start..start + rows {
                for (k, b) in columns.iter().enumerate() {
                    let both = a[i] * b[i];
                    sums[j][k] += earlier * b[i] + both / 2.0;
                    sums[k][j] += earlier * b[i] + both / 2.0;
                }
                earlier = rho * (earlier + a[i]);
            }
        }
        start += rows;
    }
    sums
}

/// Two-sided 95 % quantile of Student's t for `degrees` of freedom (not whole), by the expansion of
/// R.A. Fisher and E.A. Cornish in 1/degrees (Abramowitz and Stegun, 26.7.5).
pub(crate) fn student_95(degrees: f64) -> f64 {
    let v = degrees.max(2.0);
    let x = TWO_SIDED_95;
    let (x3, x5, x7) = (x * x * x, libm::pow(x, 5.0), libm::pow(x, 7.0));
    x + (x3 + x) / (4.0 * v)
        + (5.0 * x5 + 16.0 * x3 + 3.0 * x) / (96.0 * v * v)
        + (3.0 * x7 + 19.0 * x5 + 17.0 * x3 - 15.0 * x) / (384.0 * v * v * v)
}

/// Covariance of a fit in ln K, ln τ, ln τ₂, ln(θ + interval), as far as the kind has them.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct LogCovariance {
    /// Row by row.
    pub matrix: Vec<Vec<f64>>,
    /// Sampling interval in ln(θ + interval), s.
    pub interval_s: f64,
}

/// Names of the parameters of [`LogCovariance`], in order.
pub(crate) fn parameter_names(kind: Kind) -> Vec<String> {
    let lags: &[&str] = match kind {
        Kind::Integrating => &[],
        Kind::FirstOrder | Kind::IntegratingLag => &["ln time constant"],
        Kind::SecondOrder => &["ln time constant", "ln second time constant"],
    };
    std::iter::once("ln gain")
        .chain(lags.iter().copied())
        .chain(std::iter::once("ln (dead time + interval)"))
        .map(str::to_owned)
        .collect()
}

/// (JᵀJ)⁻¹ JᵀVJ (JᵀJ)⁻¹ with the variance of the noise, over relative gain, dead time, m, w.
fn sandwich(fit: &Fit) -> Vec<Vec<f64>> {
    let inverse = inverse_information(fit);
    let n = inverse.len();
    let product = |a: &[Vec<f64>], b: &[Vec<f64>]| -> Vec<Vec<f64>> {
        (0..n)
            .map(|j| {
                (0..n)
                    .map(|k| (0..n).map(|i| a[j][i] * b[i][k]).sum())
                    .collect()
            })
            .collect()
    };
    let rho = fit.memory.noise_autocorrelation;
    // A longer tail of the autocorrelation than ρ has.
    let tail = (fit.memory.factor * (1.0 - rho) / (1.0 + rho)).max(1.0);
    let half = product(&inverse, &fit.filtered);
    // What the fit took up of the noise: by each shape parameter as computed, by each base F.
    let shapes: f64 = (0..n).map(|k| half[k][k]).sum();
    let bases = fit.parameters.saturating_sub(n) as f64;
    let rows = fit.rows as f64;
    let left =
        (rows - (shapes * tail).min(n as f64 * fit.memory.factor) - bases * fit.memory.factor)
            .max((rows - fit.parameters as f64) / 4.0);
    scaled(product(&half, &inverse), fit.noise_rss / left * tail)
}

/// Covariance in logarithms. `repeated` is how often the windows use a sample on average: windows
/// share the quiet stretch between two moves, which must not count twice.
pub(crate) fn logarithmic(fit: &Fit, repeated: f64, interval_s: f64) -> LogCovariance {
    let count = fit.rows as f64 / fit.memory.factor / repeated;
    let quantile = student_95(count - fit.parameters as f64) / TWO_SIDED_95;
    let raw = scaled(sandwich(fit), repeated * quantile * quantile);
    // raw: 0 gain, 1 dead time, 2 m, 3 w.
    let sd = |k: usize| libm::sqrt(raw[k][k].max(0.0));
    let theta = fit.point.dead_time_s + interval_s;
    // The upper end of the interval is what matters for a dead time near 0, where the slope of the
    // logarithm at the estimate would make it absurdly wide: the chord to that end is used.
    let reach = TWO_SIDED_95 * sd(1);
    let theta_slope = if reach > 0.0 {
        libm::log1p(reach / theta) / reach
    } else {
        1.0 / theta
    };
    let size = raw.len();
    let mut rows: Vec<Vec<f64>> = vec![unit(size, 0, 1.0)];
    match fit.kind {
        Kind::Integrating => {}
        Kind::FirstOrder | Kind::IntegratingLag => rows.push(unit(size, 2, 1.0)),
        Kind::SecondOrder => {
            for sign in [1.0, -1.0] {
                let mut row = unit(size, 2, 1.0);
                row[3] = spread_slope(fit.point.spread, &raw, sign);
                rows.push(row);
            }
        }
    }
    rows.push(unit(size, 1, theta_slope));
    let mut matrix: Vec<Vec<f64>> = rows
        .iter()
        .map(|a| {
            rows.iter()
                .map(|b| {
                    (0..size)
                        .flat_map(|j| (0..size).map(move |k| (j, k)))
                        .map(|(j, k)| a[j] * raw[j][k] * b[k])
                        .sum()
                })
                .collect()
        })
        .collect();
    let cuts: Vec<f64> = (0..matrix.len())
        .map(|k| {
            let sd = libm::sqrt(matrix[k][k]);
            if sd > MOST_LOG_SD {
                MOST_LOG_SD / sd
            } else {
                1.0
            }
        })
        .collect();
    stretch(&mut matrix, &cuts);
    LogCovariance { matrix, interval_s }
}

/// Weight of w in ln τ = m + √w (`sign` +1) or ln τ₂ = m − √w (−1).
///
/// The square root has no slope at equal lags, so the chord over the 95 % interval of w is used: of
/// what w alone does to the lag, with m following it as the data have the two linked, the largest
/// deviation within the interval. Where equal lags lie within it, that deviation is a bound and no
/// standard deviation: it is then added to the scatter of m, not squared with it.
fn spread_slope(w: f64, raw: &[Vec<f64>], sign: f64) -> f64 {
    let variance = raw[3][3];
    if variance <= 0.0 {
        return 0.0;
    }
    let w = w.max(0.0);
    let reach = TWO_SIDED_95 * libm::sqrt(variance);
    let follow = raw[2][3] / variance;
    let (low, high) = ((w - reach).max(0.0), w + reach);
    let deviation = |at: f64| (follow * (at - w) + sign * (libm::sqrt(at) - libm::sqrt(w))).abs();
    let mut largest = deviation(low).max(deviation(high));
    // Where following and root pull against each other the largest may lie between.
    let turn = 1.0 / (4.0 * follow * follow);
    if follow * sign < 0.0 && turn > low && turn < high {
        largest = largest.max(deviation(turn));
    }
    let mut sd = largest / TWO_SIDED_95;
    if low == 0.0 {
        let alone = libm::sqrt((raw[2][2] - follow * raw[2][3]).max(0.0));
        sd = libm::sqrt(sd * sd + 2.0 * sd * alone);
    }
    sign * sd / libm::sqrt(variance) - follow
}

fn unit(size: usize, place: usize, value: f64) -> Vec<f64> {
    let mut row = vec![0.0; size];
    row[place] = value;
    row
}

/// Multiplies the standard deviation of each parameter; correlations stay.
pub(crate) fn stretch(matrix: &mut [Vec<f64>], factors: &[f64]) {
    for (row, fj) in matrix.iter_mut().zip(factors) {
        for (value, fk) in row.iter_mut().zip(factors) {
            *value *= fj * fk;
        }
    }
}
