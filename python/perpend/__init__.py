"""Streaming, incremental orthogonalization and subspace tracking for monitoring loops.

`Basis` keeps a growing orthonormal basis, one vector at a time, orthonormal to rounding however badly conditioned the
vectors are. `Tracker` follows a drifting subspace in a stream of rows.

The kernel is compiled. `kernel_path` names the instruction set it uses, which the environment variable
``PERPEND_KERNEL`` can force.
"""

from perpend._core import Basis, Step, Tracker, __version__, kernel_path

__all__ = ["Basis", "Step", "Tracker", "__version__", "kernel_path"]
