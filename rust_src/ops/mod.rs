//! Sweeps over long rows: the only code whose time grows with the length of a row, and the only code that may
//! be `unsafe`.
//!
//! Safe slices in, safe slices out. Each sweep is written once (`sweep`, `block`, `entries`, `triangle`) against a few operations on a register
//! (`lanes`); an instruction set is one file of such operations (`avx512`, `avx2`, `neon`, `portable`);
//! detection is in one place (`path`), and a value of [`Path`] is the proof that the processor has it.
#![allow(unsafe_code, reason = "vector loads and stores; each block says why it is sound")]
#![allow(clippy::inline_always, reason = "a sweep must be inlined into the copy that has the features on")]

#[cfg(target_arch = "x86_64")]
mod avx2;
#[cfg(target_arch = "x86_64")]
mod avx512;
mod block;
mod dispatch;
mod entries;
mod lanes;
#[cfg(target_arch = "aarch64")]
mod neon;
mod path;
mod portable;
mod sweep;
mod triangle;

pub use dispatch::{
    combine_block, dot, invert_triangle, norm_squared, normalize_into, project, project_block, project_from,
    reflect, reflect_along, rotate, rotate_chain, scale_into, subtract, subtract_block,
    subtract_block_in_place, subtract_measured, subtract_measured_from, subtract_measured_in_place,
};
pub(crate) use lanes::Transfer;
pub use path::{Path, VARIABLE};
pub use sweep::End;
