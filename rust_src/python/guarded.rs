//! One object, many threads: calls take turns, and a panic stays inside.

use std::sync::{Mutex, MutexGuard, PoisonError, TryLockError};

use pyo3::prelude::*;
use pyo3::sync::MutexExt;

use super::errors::fenced;
use super::fork;
use crate::Error;

/// A kernel object that is worked on by one call at a time.
pub(super) struct Guarded<T>(Mutex<T>);

impl<T> Guarded<T> {
    pub fn new(object: T) -> Self {
        Self(Mutex::new(object))
    }

    /// Runs `call` on the object, holding the interpreter: for work too short to let it go.
    pub fn with<R>(&self, py: Python<'_>, call: impl FnOnce(&mut T) -> Result<R, Error>) -> PyResult<R> {
        let (_share, mut object) = self.turn(py);
        fenced(|| call(&mut object))
    }

    /// This thread's turn. Nobody forks while the interpreter is held, which it is throughout where the object is free;
    /// where it has to be waited for, the fork has to be put off.
    fn turn(&self, py: Python<'_>) -> (fork::Share, MutexGuard<'_, T>) {
        match self.0.try_lock() {
            Ok(object) => (None, object),
            Err(TryLockError::Poisoned(error)) => (None, error.into_inner()),
            Err(TryLockError::WouldBlock) => {
                let share = fork::put_off_attached(py);
                (share, self.0.lock_py_attached(py).unwrap_or_else(PoisonError::into_inner))
            }
        }
    }

    /// The same without the interpreter: for work long enough that other threads should go on meanwhile.
    pub fn alone<R>(&self, call: impl FnOnce(&mut T) -> Result<R, Error>) -> PyResult<R> {
        let _share = fork::put_off();
        let mut object = self.0.lock().unwrap_or_else(PoisonError::into_inner);
        fenced(|| call(&mut object))
    }

    /// Runs `call` on one piece of rows after another, each without the interpreter, so that other threads go on meanwhile,
    /// and looks for signals between them. An error names the row among all.
    pub fn in_pieces<'a>(
        &self,
        py: Python<'_>,
        pieces: impl Iterator<Item = (usize, &'a [f64])>,
        mut call: impl FnMut(&mut T, &[f64]) -> Result<(), Error> + Send,
    ) -> PyResult<()>
    where
        T: Send,
    {
        for (first, piece) in pieces {
            py.detach(|| {
                self.alone(|object| call(object, piece).map_err(|error| error.further_down(first)))
            })?;
            py.check_signals()?;
        }
        Ok(())
    }

    /// Reads something that cannot fail.
    pub fn read<R>(&self, py: Python<'_>, call: impl FnOnce(&T) -> R) -> R {
        let (_share, object) = self.turn(py);
        call(&object)
    }
}
