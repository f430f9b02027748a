//! How well a fit is known: covariance of its parameters, with the residual's own memory counted.

use super::least_squares::Fit;
use crate::model::Kind;
use nalgebra::DMatrix;

/// Normal quantile of a two-sided 95 % interval.
pub(crate) const TWO_SIDED_95: f64 = 1.959_963_984_540_054;

/// No interval reaches further than this from its value, as a standard deviation of a logarithm:
/// a factor of about ten thousand either way. Beyond, the data say nothing at all.
const MOST_LOG_SD: f64 = 4.7;

/// Least information along any axis, as part of that of its parameters: below, rounding would be all there is.
const LEAST_INFORMATION: f64 = 1e-9;
/// Lags further apart than a factor of about seven, as (ln(τ/τ₂)/2)², are each what they are: the bend of
/// their scatter lies at equal lags.
const FAR_APART: f64 = 1.0;
/// Root of an information that is none: squares of its inverse have no numbers any more.
const UNSEEN: f64 = 1e-60;

/// (JᵀJ)⁻¹ of a fit over relative gain, dead time, m, w (searched ones only).
fn inverse_information(fit: &Fit) -> Vec<Vec<f64>> {
    let n = fit.information.len();
    // Scaled to a unit diagonal before it is inverted; what the data show hardly at all gets a very small
    // information instead of none. What they do not show at all, as a second lag a thousand times
    // shorter than the first, is no parameter: it stays where it is.
    let scale: Vec<f64> = (0..n)
        .map(|k| {
            let root = libm::sqrt(fit.information[k][k]);
            if root > UNSEEN { root } else { f64::INFINITY }
        })
        .collect();
    let matrix = DMatrix::from_fn(n, n, |j, k| {
        if j == k {
            1.0
        } else {
            fit.information[j][k] / (scale[j] * scale[k])
        }
    });
    let eigen = nalgebra::SymmetricEigen::new(matrix);
    let mut inverse = DMatrix::zeros(n, n);
    for (k, value) in eigen.eigenvalues.iter().enumerate() {
        let axis = eigen.eigenvectors.column(k);
        inverse += axis * axis.transpose() / value.max(LEAST_INFORMATION);
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
    /// How far the 95 % interval of each reaches down and up.
    pub reaches: Vec<(f64, f64)>,
    /// Sampling interval in ln(θ + interval), s.
    pub interval_s: f64,
}

impl LogCovariance {
    /// Widens the interval of each parameter by a factor.
    pub(crate) fn widen(&mut self, factors: &[f64]) {
        stretch(&mut self.matrix, factors);
        for (reach, factor) in self.reaches.iter_mut().zip(factors) {
            *reach = (reach.0 * factor, reach.1 * factor);
        }
    }

    /// Adds a doubt about ln K that the samples do not show, as a standard deviation.
    pub(crate) fn doubt_gain(&mut self, sd: f64) {
        self.matrix[0][0] += sd * sd;
        let added = TWO_SIDED_95 * sd;
        let (down, up) = self.reaches[0];
        self.reaches[0] = (libm::hypot(down, added), libm::hypot(up, added));
    }
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

/// (JᵀJ)⁻¹ M (JᵀJ)⁻¹, M the middle: JᵀVJ with the variance of the noise, over relative gain, dead
/// time, m, w.
fn sandwich(inverse: &[Vec<f64>], middle: &[Vec<f64>]) -> Vec<Vec<f64>> {
    let product = |a: &[Vec<f64>], b: &[Vec<f64>]| -> Vec<Vec<f64>> {
        let n = a.len();
        (0..n)
            .map(|j| {
                (0..n)
                    .map(|k| (0..n).map(|i| a[j][i] * b[i][k]).sum())
                    .collect()
            })
            .collect()
    };
    product(&product(inverse, middle), inverse)
}

/// Covariance in logarithms.
///
/// Each variance has the degrees of freedom that its own doubt leaves it (F.E. Satterthwaite,
/// Biometrics Bulletin 2 (1946) 110-114): 2 v²/Var(v), with the variance of the noise known to 2/(n − p)
/// and its ρ to what the restricted likelihood says.
pub(crate) fn logarithmic(fit: &Fit, interval_s: f64) -> LogCovariance {
    let inverse = inverse_information(fit);
    let mut raw = sandwich(&inverse, &fit.middle);
    // Where two parameters can hardly be told apart rounding may eat the sandwich: the plain covariance
    // then says how little is known.
    if (0..raw.len()).any(|k| raw[k][k].is_nan() || raw[k][k] <= 0.0) {
        raw = scaled(inverse.clone(), fit.memory.variance);
    }
    let doubtful = sandwich(&inverse, &fit.doubtful_middle);
    let count = fit.samples.saturating_sub(fit.parameters) as f64 / fit.memory.tail;
    let mut factors: Vec<f64> = (0..raw.len())
        .map(|k| {
            let doubt = libm::log(doubtful[k][k] / raw[k][k]);
            student_95(2.0 / (2.0 / count.max(1.0) + doubt * doubt)) / TWO_SIDED_95
        })
        .map(|q| if q.is_finite() { q } else { 1.0 })
        .collect();
    // Noise that turns about averages out of the gain, which rests on all samples; dead time and lags rest
    // on the few after a move, where every look was kept and the noise does not turn.
    if let Some(middle) = &fit.turning_middle
        && let Some(factor) = factors.first_mut()
    {
        let turning = sandwich(&inverse, middle);
        *factor *= libm::sqrt((turning[0][0] / raw[0][0]).clamp(0.1, 1.0));
    }
    raw = scaled(raw, fit.memory.tail);
    stretch(&mut raw, &factors);
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
    let mut by_lag = Vec::new();
    match fit.kind {
        Kind::Integrating => {}
        Kind::FirstOrder | Kind::IntegratingLag => rows.push(unit(size, 2, 1.0)),
        Kind::SecondOrder => {
            for sign in [1.0, -1.0] {
                let mut row = unit(size, 2, 1.0);
                let lag = spread_of_lag(fit.point.spread, &raw, sign);
                row[3] = lag.slope;
                rows.push(row);
                by_lag.push(lag.reach);
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
    let mut reaches: Vec<(f64, f64)> = (0..matrix.len())
        .map(|k| TWO_SIDED_95 * libm::sqrt(matrix[k][k].max(0.0)))
        .map(|reach| (reach, reach))
        .collect();
    for (k, (down, up)) in by_lag.into_iter().enumerate() {
        let most = TWO_SIDED_95 * MOST_LOG_SD;
        reaches[1 + k] = (f64::min(down, most), f64::min(up, most));
    }
    LogCovariance {
        matrix,
        reaches,
        interval_s,
    }
}

/// Scatter of the logarithm of a lag of two.
struct LagSpread {
    /// Weight of w in it, that of m being 1.
    slope: f64,
    /// How far its 95 % interval reaches down and up.
    reach: (f64, f64),
}

/// Scatter of ln τ = m + √w (`sign` +1) or ln τ₂ = m − √w (−1).
///
/// The square root has no slope at equal lags, so the scatter of the lag is worked out from that of m and
/// w, which is normal but for w ≥ 0, m following w as the data have the two linked. Its interval is what
/// lies between 2.5 % and 97.5 %; the longer side stands for 1.96 standard deviations.
fn spread_of_lag(w: f64, raw: &[Vec<f64>], sign: f64) -> LagSpread {
    let variance = raw[3][3];
    let w = w.max(0.0);
    if variance <= 0.0 || w > FAR_APART {
        let slope = if variance > 0.0 {
            sign / (2.0 * libm::sqrt(w))
        } else {
            0.0
        };
        let both = raw[2][2] + 2.0 * slope * raw[2][3] + slope * slope * variance;
        let reach = TWO_SIDED_95 * libm::sqrt(both.max(0.0));
        return LagSpread {
            slope,
            reach: (reach, reach),
        };
    }
    let sd_w = libm::sqrt(variance);
    let follow = raw[2][3] / variance;
    let alone = libm::sqrt((raw[2][2] - follow * raw[2][3]).max(0.0));
    // What w alone does to the lag, at evenly likely values of it.
    const POINTS: usize = 101;
    let shifts: Vec<f64> = (0..POINTS)
        .map(|k| {
            let at = (w + sd_w * normal_quantile((k as f64 + 0.5) / POINTS as f64)).max(0.0);
            follow * (at - w) + sign * (libm::sqrt(at) - libm::sqrt(w))
        })
        .collect();
    let below = |x: f64| -> f64 {
        let parts = shifts.iter().map(|shift| {
            if alone > 0.0 {
                0.5 * libm::erfc((shift - x) / (alone * std::f64::consts::SQRT_2))
            } else {
                f64::from(u8::from(*shift <= x))
            }
        });
        parts.sum::<f64>() / POINTS as f64
    };
    let furthest = shifts.iter().fold(0.0_f64, |f, s| f.max(s.abs())) + 4.0 * alone;
    let quantile = |part: f64| {
        let (mut low, mut high) = (-furthest, furthest);
        for _ in 0..40 {
            let middle = (low + high) / 2.0;
            if below(middle) < part {
                low = middle;
            } else {
                high = middle;
            }
        }
        (low + high) / 2.0
    };
    let (mut lo, mut hi) = (quantile(0.025).min(0.0), quantile(0.975).max(0.0));
    // Equal lags within the interval of w are a bound that many tests end at: from there on it is the
    // scatter of m alone that the interval has to hold.
    if w < TWO_SIDED_95 * sd_w {
        let at_equal = -follow * w - sign * libm::sqrt(w);
        if sign > 0.0 {
            lo = lo.min(at_equal - TWO_SIDED_95 * alone);
        } else {
            hi = hi.max(at_equal + TWO_SIDED_95 * alone);
        }
    }
    let sd = hi.max(-lo) / TWO_SIDED_95;
    LagSpread {
        slope: sign * libm::sqrt((sd * sd - alone * alone).max(0.0)) / sd_w - follow,
        reach: (-lo, hi),
    }
}

/// Quantile of the standard normal, to 5e-4 (C. Hastings; Abramowitz and Stegun, 26.2.23).
fn normal_quantile(part: f64) -> f64 {
    let tail = part.min(1.0 - part);
    let t = libm::sqrt(-2.0 * libm::log(tail));
    let x = t
        - (2.515_517 + t * (0.802_853 + t * 0.010_328))
            / (1.0 + t * (1.432_788 + t * (0.189_269 + t * 0.001_308)));
    libm::copysign(x, part - 0.5)
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
