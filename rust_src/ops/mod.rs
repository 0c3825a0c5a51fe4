//! Sweeps over long rows: the only code whose time grows with the length of a row.
//!
//! Safe slices in, safe slices out; the instruction set is chosen once for the process.

mod sweep;

pub use sweep::{
    dot, norm_squared, project, reflect, rotate, scale_into, subtract, subtract_measured,
    subtract_measured_in_place,
};
