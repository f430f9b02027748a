//! Frequency response of the loop and its margins.
