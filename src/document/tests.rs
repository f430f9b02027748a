//! The pages of each kind of record, by their text.
