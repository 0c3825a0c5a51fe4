//! The monitoring loop.

pub mod limits;
pub mod smooth;
