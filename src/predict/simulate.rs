//! The sampled controller on the exact process.
