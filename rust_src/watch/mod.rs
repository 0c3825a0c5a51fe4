//! The monitoring loop.

pub mod alarm;
pub mod gate;
pub mod limits;
pub mod rank;
pub mod runs;
pub mod smooth;
pub mod units;
