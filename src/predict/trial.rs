//! The closed-loop trial held against the prediction.
