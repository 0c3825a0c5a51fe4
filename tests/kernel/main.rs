//! Claims about the kernel, each in the name of its test.
#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test may stop where it finds a surprise")]
mod basis;
mod ops;
mod state;
mod state_refusals;
mod tracker;
mod watch;
mod watch_property;
mod watch_published;
mod watch_stream;
