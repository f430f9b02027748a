//! One function for each published rule.
