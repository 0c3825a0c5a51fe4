//! Streaming, incremental orthogonalization.
//!
//! Symbols used throughout (words are the interface, letters are local names):
//!
//! | letter | meaning |
//! |---|---|
//! | `v`, `x` | a vector or row of `dim` (or `channels`) entries as it arrives |
//! | `q`, `Q` | the orthonormal basis, `rank` rows of `dim` entries: `Q Q^T = I` |
//! | `h` | coefficients of `v` on the basis, `h = Q v` |
//! | `w` | what the basis does not explain, `w = v - Q^T h` |
//! | `s` | what is left of the basis in `w`, `s = Q w`: the measured loss of orthogonality |
//! | `r`, `R` | the upper triangular factor: vector `j` is `sum_i R[i, j] q_i` |
//! | `d` | a row less the mean |
//! | `lambda` | the weight a past row keeps at each tick, `1 - 1/memory` |
//! | `eps` | distance from 1 to the next larger number of the stored type |
//!
//! Rows are stored in `f32` or `f64` ([`Scalar`]); all arithmetic, and everything small, is `f64`.

mod angles;
pub mod basis;
pub mod dense;
mod error;
mod memory;
pub mod ops;
mod orthonormal;
mod rows;
mod scalar;
pub mod state;
pub mod tracker;
pub mod watch;

#[cfg(feature = "python")]
mod python;

pub use angles::principal_angles;
pub use basis::Basis;
pub use error::Error;
pub use orthonormal::orthogonality_error;
pub use rows::{RowStore, Rows};
pub use scalar::Scalar;
pub use state::State;
pub use tracker::Tracker;
