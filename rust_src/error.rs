//! Broken contracts. Outcomes of a computation (a dependent vector, a skipped row) are values, not errors.

use std::fmt;

/// What was wrong with a call. The object called is as it was before.
#[derive(Clone, Debug, PartialEq)]
#[non_exhaustive]
pub enum Error {
    /// A vector or row has the wrong number of entries.
    Length {
        /// What was measured: "vector", "row".
        what: &'static str,
        /// Entries it should have.
        expected: usize,
        /// Entries it has.
        got: usize,
    },
    /// An entry is infinite, or NaN where NaN is not allowed.
    NonFinite {
        /// What holds it: "vector", "row".
        what: &'static str,
        /// Which entry, from 0.
        index: usize,
        /// The entry.
        value: f64,
    },
    /// A norm exceeds the largest number of the type.
    Overflow {
        /// What has that norm.
        what: &'static str,
    },
    /// The memory asked for cannot be had.
    Memory {
        /// How much was asked for; a number, since it may exceed any integer.
        bytes: f64,
    },
    /// A parameter is outside its range.
    Parameter {
        /// Its name.
        name: &'static str,
        /// What it must be.
        expected: String,
        /// What it is.
        got: String,
    },
    /// Two objects do not go together.
    Unlike {
        /// The property in which they differ.
        what: &'static str,
        /// That property of the one called.
        expected: String,
        /// That property of the other.
        got: String,
    },
    /// An error in one of many rows.
    InRow {
        /// Which row, from 0.
        row: usize,
        /// What was wrong with it.
        source: Box<Error>,
    },
    /// Bytes are no state of the object asked for, or an object has a state that cannot be written.
    State {
        /// What is wrong: where, what was expected, what was found.
        what: String,
    },
    /// A small decomposition did not converge; kept apart because it would be a defect, never the caller's.
    NoConvergence {
        /// Which decomposition.
        what: &'static str,
    },
}

impl Error {
    /// The same error, said to be in row `row`.
    #[must_use]
    pub fn in_row(self, row: usize) -> Self {
        Self::InRow { row, source: Box::new(self) }
    }
}

impl Error {
    /// The same error, `rows` further down: where the rows it counts are a piece of more.
    #[must_use]
    pub fn further_down(self, rows: usize) -> Self {
        match self {
            Self::InRow { row, source } => Self::InRow { row: row + rows, source },
            other => other,
        }
    }
}

impl fmt::Display for Error {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Length { what, expected, got } => {
                write!(f, "{what}: expected {expected} entries, got {got}")
            }
            Self::NonFinite { what, index, value } => {
                write!(f, "{what}: expected finite entries, got {value} at index {index}")
            }
            Self::Overflow { what } => write!(f, "{what}: exceeds the largest float64"),
            Self::Memory { bytes } => write!(f, "{bytes:.3e} bytes of memory cannot be had"),
            Self::Parameter { name, expected, got } => write!(f, "{name}: expected {expected}, got {got}"),
            Self::Unlike { what, expected, got } => {
                write!(f, "{what} differs: expected {expected}, got {got}")
            }
            Self::InRow { row, source } => write!(f, "row {row}: {source}"),
            Self::State { what } => f.write_str(what),
            Self::NoConvergence { what } => write!(f, "{what} did not converge"),
        }
    }
}

impl std::error::Error for Error {
    fn source(&self) -> Option<&(dyn std::error::Error + 'static)> {
        match self {
            Self::InRow { source, .. } => Some(source),
            _ => None,
        }
    }
}
