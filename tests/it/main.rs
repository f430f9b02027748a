//! The tests across modules.
