//! Noise and resolution of the PV, from the quiet stretches before the steps.

use crate::steps::OpStep;
use crate::trace::Trace;

/// Noise of a PV, percent of span.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Noise {
    /// Robust standard deviation about a line; `None` where not assessable.
    pub sd: Option<f64>,
    /// Smallest step of its digits; `None` where none is seen or nothing is assessable.
    pub resolution: Option<f64>,
    /// max(sd, resolution/√12): σ of the rules.
    pub sigma: Option<f64>,
    /// Whether the log was compressed: it holds a sample only where the PV had moved.
    pub compressed: bool,
}

/// Fewest samples of a stretch that a line can be laid through.
const FEWEST: usize = 5;
/// Residuals beyond this many standard deviations are no noise but events.
const CLIP: f64 = 3.5;

/// The noise of a trace.
pub(crate) fn assess(trace: &Trace, steps: &[OpStep]) -> Noise {
    let compressed = is_compressed(trace);
    if compressed {
        return Noise {
            sd: None,
            resolution: None,
            sigma: None,
            compressed,
        };
    }
    let resolution = resolution(trace.pv());
    let sd = pooled_sd(trace, steps);
    let sigma = sd.map(|sd| sd.max(resolution.unwrap_or(0.0) / libm::sqrt(12.0)));
    Noise {
        sd,
        resolution,
        sigma,
        compressed,
    }
}

/// Whether the log was thinned by exception reporting: intervals of many lengths, and hardly ever
/// the same value twice, since a sample was stored because the PV had moved.
pub(crate) fn is_compressed(trace: &Trace) -> bool {
    let mut intervals: Vec<f64> = trace.t_s().windows(2).map(|w| w[1] - w[0]).collect();
    if intervals.len() < 10 {
        return false;
    }
    let repeats = trace.pv().windows(2).filter(|w| w[0] == w[1]).count();
    intervals.sort_by(f64::total_cmp);
    let at = |part: f64| intervals[(part * (intervals.len() - 1) as f64) as usize];
    let usual = at(0.5);
    let as_usual = intervals
        .iter()
        .filter(|i| (*i - usual).abs() <= 0.01 * usual)
        .count();
    at(0.9) >= 2.5 * at(0.1) && repeats * 10 < intervals.len() && as_usual * 5 < intervals.len() * 4
}

/// Smallest difference of successive samples that comes again and again; `None` for a PV without
/// visible digits.
fn resolution(pv: &[f64]) -> Option<f64> {
    let mut differences: Vec<f64> = pv
        .windows(2)
        .map(|w| (w[1] - w[0]).abs())
        .filter(|d| *d > 1e-9)
        .collect();
    differences.sort_by(f64::total_cmp);
    let enough = 3.max(differences.len() / 500);
    let mut start = 0;
    while start < differences.len() {
        let same = differences[start] * (1.0 + 1e-6) + 1e-9;
        let end = differences.partition_point(|d| *d <= same);
        if end - start >= enough {
            return Some(differences[(start + end) / 2]);
        }
        start = end;
    }
    None
}

/// Standard deviation about a line through each quiet stretch, pooled over those that agree.
fn pooled_sd(trace: &Trace, steps: &[OpStep]) -> Option<f64> {
    let mut stretches: Vec<(f64, f64)> = steps
        .iter()
        .filter(|s| s.quiet.len() >= FEWEST)
        .map(|s| {
            let line = line(&trace.t_s()[s.quiet.clone()], &trace.pv()[s.quiet.clone()]);
            (
                clipped_variance(&line.residual),
                line.residual.len() as f64 - 2.0,
            )
        })
        .collect();
    if stretches.is_empty() {
        return None;
    }
    stretches.sort_by(|a, b| a.0.total_cmp(&b.0));
    // A stretch that still bends from the move before has more about its line than noise.
    let middle = stretches[(stretches.len() - 1) / 2].0;
    let (mut sum, mut count) = (0.0, 0.0);
    for (variance, degrees) in stretches.iter().filter(|s| s.0 <= 4.0 * middle) {
        sum += variance * degrees;
        count += degrees;
    }
    Some(libm::sqrt(sum / count))
}

/// Mean square of a residual of a line fit, outliers left out.
fn clipped_variance(residual: &[f64]) -> f64 {
    let mut limit = f64::INFINITY;
    let mut variance = 0.0;
    for _ in 0..8 {
        let inside = residual.iter().filter(|r| r.abs() <= limit);
        let count = inside.clone().count();
        if count < 4 {
            break;
        }
        variance = inside.map(|r| r * r).sum::<f64>() / (count as f64 - 2.0);
        let next = CLIP * libm::sqrt(variance);
        if next >= limit {
            break;
        }
        limit = next;
    }
    variance
}

/// A least-squares line.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Line {
    /// Mean of the values.
    pub mean: f64,
    /// Mean of the times, s.
    pub mean_t_s: f64,
    /// Slope per second.
    pub slope: f64,
    /// What the line leaves.
    pub residual: Vec<f64>,
}

/// The line through samples; flat for one sample. There is at least one.
pub(crate) fn line(t_s: &[f64], values: &[f64]) -> Line {
    let count = t_s.len().max(1) as f64;
    let mean_t_s = t_s.iter().sum::<f64>() / count;
    let mean = values.iter().sum::<f64>() / count;
    let square: f64 = t_s.iter().map(|t| (t - mean_t_s) * (t - mean_t_s)).sum();
    let product: f64 = t_s
        .iter()
        .zip(values)
        .map(|(t, v)| (t - mean_t_s) * (v - mean))
        .sum();
    let slope = if square > 0.0 { product / square } else { 0.0 };
    Line {
        mean,
        mean_t_s,
        slope,
        residual: t_s
            .iter()
            .zip(values)
            .map(|(t, v)| v - mean - slope * (t - mean_t_s))
            .collect(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_resolution_is_the_smallest_digit() {
        let pv: Vec<f64> = (0..200)
            .map(|k| 0.05 * libm::round(40.0 * libm::sin(f64::from(k * k) * 0.1)))
            .collect();
        let found = resolution(&pv).expect("a resolution");
        assert!((found - 0.05).abs() < 1e-9, "{found}");
        let smooth: Vec<f64> = (0..200)
            .map(|k| libm::sin(f64::from(k * k) * 0.1))
            .collect();
        assert_eq!(resolution(&smooth), None);
    }

    #[test]
    fn a_spike_is_no_noise() {
        let mut residual: Vec<f64> = (0..100).map(|k| libm::sin(f64::from(k * k))).collect();
        let clean = clipped_variance(&residual);
        residual[50] = 40.0;
        assert!((clipped_variance(&residual) / clean - 1.0).abs() < 0.05);
    }
}
