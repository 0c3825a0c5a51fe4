//! The drifting subspace.
