"""Streaming, incremental orthogonalization and subspace tracking for monitoring loops.

`Basis` keeps a growing orthonormal basis, one vector at a time, orthonormal to rounding however badly conditioned the
vectors are. `Tracker` follows a drifting subspace in a stream of rows. `Watch` is a monitoring loop: it judges each row
by what the healthy rows before it taught, and its `Reading` says what it found.

The kernel is compiled. `kernel_path` names the instruction set it uses, which the environment variable
``PERPEND_KERNEL`` can force.
"""

from perpend._core import Basis, Reading, StateError, Step, Tracker, Watch, __version__, kernel_path

__all__ = ["Basis", "Reading", "StateError", "Step", "Tracker", "Watch", "__version__", "kernel_path"]
