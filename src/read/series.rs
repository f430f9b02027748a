//! The signals of a loop, each at times of its own, and how they become samples.

use super::cells::{FileSamples, Reading};

/// The signals of a loop, each in order of time; `None` for one that a file does not hold.
#[derive(Debug, Clone, Default)]
pub(super) struct Series {
    pub pv: Option<Vec<(i64, Reading)>>,
    pub op: Option<Vec<(i64, f64)>>,
    pub sp: Option<Vec<(i64, f64)>>,
    pub mode: Option<Vec<(i64, String)>>,
}

impl Series {
    /// The signals of several files together; of two values at one moment the later file's.
    pub fn of_files(files: Vec<Series>) -> Self {
        let mut all = Series::default();
        for file in files {
            append(&mut all.pv, file.pv);
            append(&mut all.op, file.op);
            append(&mut all.sp, file.sp);
            append(&mut all.mode, file.mode);
        }
        all
    }

    /// First and last moment of the PV.
    pub fn span_of_pv(&self) -> Option<(i64, i64)> {
        span(self.pv.as_deref()?)
    }

    /// First and last moment of the OP.
    pub fn span_of_op(&self) -> Option<(i64, i64)> {
        span(self.op.as_deref()?)
    }

    /// The samples from `from` on: PV at its own times, OP, SP and mode held; an OP move between two samples
    /// of the PV gets a row of its own, without a PV, so that its time is kept. Without a PV the times are
    /// those of the first signal there is.
    pub fn join(self, from: i64) -> FileSamples {
        let op = self.op.unwrap_or_default();
        let mut samples = FileSamples::default();
        if let Some(pv) = self.pv {
            let mut moves: Vec<i64> = op
                .windows(2)
                .filter(|pair| pair[1].1 != pair[0].1 && pair[1].0 >= from)
                .map(|pair| pair[1].0)
                .collect();
            moves.reverse();
            for (t_us, reading) in pv {
                while let Some(at) = moves.pop_if(|at| *at <= t_us) {
                    if at < t_us {
                        samples.push_pv(at, Reading::NONE);
                    }
                }
                samples.push_pv(t_us, reading);
            }
            while let Some(at) = moves.pop() {
                samples.push_pv(at, Reading::NONE);
            }
        } else {
            let times: Vec<i64> = if op.is_empty() {
                let sp = self.sp.iter().flatten().map(|(t_us, _)| *t_us);
                let mode = self.mode.iter().flatten().map(|(t_us, _)| *t_us);
                sp.chain(mode.filter(|_| self.sp.is_none())).collect()
            } else {
                op.iter().map(|(t_us, _)| *t_us).collect()
            };
            for t_us in times.into_iter().filter(|t_us| *t_us >= from) {
                samples.push_pv(t_us, Reading::NONE);
            }
        }
        samples.op = held(&samples.t_us, &op, f64::NAN);
        samples.sp = self.sp.map(|sp| held(&samples.t_us, &sp, f64::NAN));
        samples.mode = self
            .mode
            .map(|mode| held(&samples.t_us, &mode, String::new()));
        samples
    }
}

fn span<T>(series: &[(i64, T)]) -> Option<(i64, i64)> {
    Some((series.first()?.0, series.last()?.0))
}

fn append<T>(all: &mut Option<Vec<(i64, T)>>, file: Option<Vec<(i64, T)>>) {
    let Some(file) = file else { return };
    let all = all.get_or_insert_default();
    all.extend(file);
    // Stable: of one moment the later file's value stands last, and the last is kept.
    all.sort_by_key(|(t_us, _)| *t_us);
    all.reverse();
    all.dedup_by_key(|(t_us, _)| *t_us);
    all.reverse();
}

/// The value that holds at each time: the last one at or before it.
fn held<T: Clone>(t_us: &[i64], series: &[(i64, T)], before: T) -> Vec<T> {
    let mut next = 0;
    t_us.iter()
        .map(|t| {
            while series.get(next).is_some_and(|(at, _)| at <= t) {
                next += 1;
            }
            match next {
                0 => before.clone(),
                _ => series[next - 1].1.clone(),
            }
        })
        .collect()
}
