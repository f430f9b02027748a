//! One function for each limit.
