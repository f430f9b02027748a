//! Design held against published values and its own promises.
