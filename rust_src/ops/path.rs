//! Which instruction set the sweeps use: detected once, or forced by the environment.

use std::sync::OnceLock;

#[cfg(target_arch = "x86_64")]
use super::avx2::Avx2;
#[cfg(target_arch = "x86_64")]
use super::avx512::Avx512;
#[cfg(target_arch = "aarch64")]
use super::neon::Neon;
use super::portable::Portable;
use crate::error::Error;

/// Environment variable that forces a path: one of the names [`Path::name`] gives.
pub const VARIABLE: &str = "PERPEND_KERNEL";

/// An instruction set the sweeps can run on. A value is the proof that this processor has it.
#[derive(Clone, Copy, Debug)]
pub struct Path(pub(super) Set);

/// The instruction sets, widest first.
#[derive(Clone, Copy, Debug)]
pub(super) enum Set {
    #[cfg(target_arch = "x86_64")]
    Avx512(Avx512),
    #[cfg(target_arch = "x86_64")]
    Avx2(Avx2),
    #[cfg(target_arch = "aarch64")]
    Neon(Neon),
    Portable(Portable),
}

impl Path {
    /// Every path this processor can run, the preferred one first.
    #[must_use]
    pub fn available() -> Vec<Self> {
        let mut paths = Vec::new();
        #[cfg(target_arch = "x86_64")]
        {
            paths.extend(Avx512::detect().map(|proof| Self(Set::Avx512(proof))));
            paths.extend(Avx2::detect().map(|proof| Self(Set::Avx2(proof))));
        }
        #[cfg(target_arch = "aarch64")]
        paths.push(Self(Set::Neon(Neon)));
        paths.push(Self(Set::Portable(Portable)));
        paths
    }

    /// The path in use in this process.
    #[must_use]
    pub fn current() -> Self {
        static CURRENT: OnceLock<Path> = OnceLock::new();
        *CURRENT.get_or_init(|| Self::requested().unwrap_or(Self(Set::Portable(Portable))))
    }

    /// The path the environment forces, or the preferred one.
    ///
    /// # Errors
    /// [`Error::Parameter`] where the variable names no path of this processor.
    pub fn requested() -> Result<Self, Error> {
        let paths = Self::available();
        let Ok(name) = std::env::var(VARIABLE) else { return Ok(paths[0]) };
        paths.iter().copied().find(|path| path.name() == name).ok_or_else(|| Error::Parameter {
            name: VARIABLE,
            expected: paths.iter().map(|path| path.name()).collect::<Vec<_>>().join(" or "),
            got: name,
        })
    }

    /// Its name: `avx512`, `avx2`, `neon` or `portable`.
    #[must_use]
    pub fn name(self) -> &'static str {
        match self.0 {
            #[cfg(target_arch = "x86_64")]
            Set::Avx512(_) => "avx512",
            #[cfg(target_arch = "x86_64")]
            Set::Avx2(_) => "avx2",
            #[cfg(target_arch = "aarch64")]
            Set::Neon(_) => "neon",
            Set::Portable(_) => "portable",
        }
    }
}
