//! Asking for memory before taking it: what cannot be had is an error, not the end of the process.

use crate::error::Error;

/// Checks that `count` numbers of eight bytes, times `times`, can be had at once.
///
/// # Errors
/// [`Error::Memory`] where they cannot.
pub(crate) fn check_room(count: usize, times: usize) -> Result<(), Error> {
    let entries = count.checked_mul(times);
    let mut probe: Vec<f64> = Vec::new();
    match entries {
        Some(entries) if probe.try_reserve_exact(entries).is_ok() => Ok(()),
        _ => Err(Error::Memory { bytes: count as f64 * times as f64 * size_of::<f64>() as f64 }),
    }
}
