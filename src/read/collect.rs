//! Bad cells of a file: all counted, the first ones told.

use crate::notice::{Place, Problem};

/// How many bad cells of a file are told one by one.
const SHOWN: usize = 5;

/// Problems of one file while it is read.
#[derive(Debug, Default)]
pub struct BadCells {
    first: Vec<Problem>,
    total: usize,
}

impl BadCells {
    /// One more bad cell; the problem is put into words only where it will be shown.
    pub fn add(&mut self, problem: impl FnOnce() -> Problem) {
        if self.first.len() < SHOWN {
            self.first.push(problem());
        }
        self.total += 1;
    }

    /// Nothing where no cell was bad, else the first ones and how many there are in all.
    ///
    /// # Errors
    /// Where a cell was bad.
    pub fn finish(mut self, place: Place) -> Result<(), Vec<Problem>> {
        if self.total == 0 {
            return Ok(());
        }
        if self.total > self.first.len() {
            self.first.push(Problem::error(
                place,
                format!(
                    "{} cells cannot be read; the first {SHOWN} are told above",
                    self.total
                ),
            ));
        }
        Err(self.first)
    }
}
