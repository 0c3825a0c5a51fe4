//! The monitoring loop.
