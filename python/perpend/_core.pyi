import os
from collections.abc import Sequence
from typing import Any, Literal, TypedDict, final

import numpy as np
from numpy.typing import ArrayLike, DTypeLike, NDArray
from typing_extensions import Buffer

__all__ = ["Basis", "Reading", "StateError", "Step", "Tracker", "Watch", "__version__", "kernel_path"]

__version__: str

def kernel_path() -> Literal["avx512", "avx2", "neon", "portable"]:
    """Name the instruction set the kernel uses in this process.

    Returns
    -------
    str
        The widest set the processor has, or the one the environment variable ``PERPEND_KERNEL`` names.
    """

class StateError(ValueError):
    """Bytes or a file hold no state of the object asked for.

    They are cut off, changed, of another class, or of a later release; the message says which.
    """

@final
class Step:
    """What became of a vector given to `Basis.add`.

    Attributes
    ----------
    accepted : bool
        Whether the basis grew by it.
    reason : {"zero", "dependent", "full"} or None
        Why it was not accepted.
    rank : int
        Rank before.
    coefficients : ndarray, shape (rank,)
        Coefficients of the vector on the basis as it was before, in the unit of the vector.
    norm, residual_norm : float
        Norm of the vector, and of what the basis did not explain.
    threshold : float
        The residual norm up to which the vector would have counted as dependent.
    passes : int
        Subtractions made: 1 where the first one, measured, left a residual orthogonal to rounding.
    loss : float
        Measured loss of orthogonality of the residual ``w``: the norm of ``Q w`` over the norm of ``w``.
    """

    @property
    def accepted(self) -> bool: ...
    @property
    def reason(self) -> Literal["zero", "dependent", "full"] | None: ...
    @property
    def rank(self) -> int: ...
    @property
    def coefficients(self) -> NDArray[np.float64]: ...
    @property
    def norm(self) -> float: ...
    @property
    def residual_norm(self) -> float: ...
    @property
    def threshold(self) -> float: ...
    @property
    def passes(self) -> int: ...
    @property
    def loss(self) -> float: ...

@final
class Basis:
    """A growing orthonormal basis, updated one vector at a time.

    The vectors accepted so far, as columns, are ``vectors.T @ triangular``. Orthonormality rests on a measurement made
    with each vector, not on the conditioning of what was added: the spectral norm of ``I - Q Q^T`` stays below
    ``10 * eps * sqrt(rank)``.

    Parameters
    ----------
    dim : int
        Entries a vector.
    capacity : int, optional
        The most vectors to hold, at most `dim`. Storage for them is made at once and nothing is allocated later.
        Without it the basis grows as needed, to `dim` at most.
    dtype : {"float64", "float32"}
        Type the basis is stored in. Arithmetic, coefficients and the triangular factor are float64 in either case.
    tolerance : float or (float, float), optional
        A vector counts as dependent where its residual norm is at most ``relative * norm``, or at most `absolute`
        where a pair ``(relative, absolute)`` is given. Default: ``dim * eps`` of the stored type, relative.

    Raises
    ------
    ValueError
        Where `dim` is 0, `capacity` exceeds it, or a tolerance is negative or not finite.
    TypeError
        Where `dtype` is neither of the two.
    """

    def __new__(
        cls,
        dim: int,
        capacity: int | None = None,
        *,
        dtype: DTypeLike = "float64",
        tolerance: float | tuple[float, float] | None = None,
    ) -> Basis: ...
    def add(self, vector: ArrayLike) -> Step:
        """Add a vector. Two reads of the basis, ``6 * rank * dim`` flops; rarely a third.

        Parameters
        ----------
        vector : array_like, shape (dim,)
            Finite real numbers of any scale. Neither modified nor kept.

        Returns
        -------
        Step
            A vector that is zero, dependent or one too many is an outcome (`Step.reason`) and leaves the basis as it
            is.

        Raises
        ------
        ValueError
            Wrong length, an entry that is not finite, or a norm beyond the largest float64.
        TypeError
            Entries that are not real numbers.
        """

    def split(self, vector: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Split a vector against the basis, without learning.

        Parameters
        ----------
        vector : array_like, shape (dim,)
            Finite real numbers.

        Returns
        -------
        coefficients : ndarray, shape (rank,)
            On the basis vectors.
        residual : ndarray, shape (dim,)
            What they do not explain, orthogonal to them.

        Raises
        ------
        ValueError, TypeError
            As `add`.
        """

    def residual_norm(self, vector: ArrayLike) -> float:
        """Distance of a vector from the span of the basis: the norm of the residual of `split`."""

    def add_rows(self, rows: ArrayLike) -> tuple[NDArray[np.bool_], NDArray[np.float64]]:
        """Add many vectors: the decisions of one `add` after another, at matrix-matrix speed.

        The interpreter is released meanwhile. An interrupt stops between blocks and leaves the rows before it added.

        Parameters
        ----------
        rows : array_like, shape (n, dim)
            One vector a row.

        Returns
        -------
        accepted : ndarray of bool, shape (n,)
            Whether the basis grew by the row.
        residual_norm : ndarray, shape (n,)
            What the basis, as it was then, did not explain of the row.

        Raises
        ------
        ValueError, TypeError
            As `add`, naming the row; then nothing has been added.
        """

    def split_rows(self, rows: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Split many vectors against the basis: `split` for each row.

        Parameters
        ----------
        rows : array_like, shape (n, dim)
            One vector a row.

        Returns
        -------
        coefficients : ndarray, shape (n, rank)
            On the basis vectors.
        residuals : ndarray, shape (n, dim)
            What they do not explain.

        Raises
        ------
        ValueError, TypeError
            As `add`, naming the row.
        """

    def angles(self, other: Basis) -> NDArray[np.float64]:
        """Principal angles between the spans of two bases, accurate near 0 and near pi/2.

        Parameters
        ----------
        other : Basis
            Of the same `dim`; either type.

        Returns
        -------
        ndarray, shape (min(rank, other.rank),)
            Radians, ascending. From sines where they are small and from cosines where they are not (Bjorck and Golub
            1973, Knyazev and Argentati 2002).

        Raises
        ------
        ValueError
            Where the dimensions differ.
        """

    def copy(self) -> Basis:
        """Copy the basis; the two go separate ways."""

    def __copy__(self) -> Basis: ...
    def __deepcopy__(self, _memo: object, /) -> Basis: ...
    def to_bytes(self) -> bytes:
        """Give the state as bytes: all that what the basis does next depends on.

        A safetensors container, which any reader of that format opens: ``basis.vectors`` and ``basis.triangular``,
        settings and counters in the metadata.
        The same state gives the same bytes.

        Returns
        -------
        bytes
            About as long as the arrays; as much again is taken while they are made.

        Raises
        ------
        StateError
            Where a number has grown beyond the finite ones.
        """

    @classmethod
    def from_bytes(cls, data: Buffer) -> Basis:
        """Make the basis whose state `to_bytes` gave; on the same kernel path it goes on bit for bit.

        Sizes, checksum, finiteness, ranges, triangularity and orthonormality are checked, the latter by
        ``2 * rank * dim`` flops a row. Takes a small multiple of the length of the data, whatever the data says.

        Parameters
        ----------
        data : bytes-like
            Neither modified nor kept.

        Raises
        ------
        StateError
            Where `data` is anything else: the message says what is wrong.
        TypeError
            Where it has no bytes.
        """

    def save(self, path: str | os.PathLike[str]) -> None:
        """Write the state to a file, at once and for good.

        The bytes of `to_bytes` go to a new file beside, are synced to the disk, and take the place of the old file,
        whose mode is kept: after a power cut there is the old state or the new one. What a killed save has left beside
        is removed by the next to the same file. The interpreter is released meanwhile.

        Parameters
        ----------
        path : path-like
            A file, to be made or replaced; where it is a link, what that points to.

        Raises
        ------
        OSError
            Where it cannot be written; the old file is then as it was.
        StateError
            As `to_bytes`.
        """

    @classmethod
    def load(cls, path: str | os.PathLike[str]) -> Basis:
        """Make the basis whose state a file holds; as `from_bytes`.

        Parameters
        ----------
        path : path-like
            What `save` wrote, in this release or an earlier one.

        Raises
        ------
        StateError
            Where the file holds anything else.
        OSError
            Where it cannot be read.
        """

    def __reduce__(self) -> tuple[Any, ...]: ...
    def drop(self, index: int) -> None:
        """Forget an accepted vector; basis and triangular factor hold for the rest.

        Costs ``6 * dim * (rank - index)`` flops, nothing for the last vector. ``drop(0)`` followed by `add` makes a
        sliding window.

        Parameters
        ----------
        index : int
            Which of the accepted vectors, in the order they came.

        Raises
        ------
        ValueError
            Where there is no such vector.
        """

    def solve(self, target: ArrayLike) -> tuple[NDArray[np.float64], float]:
        """Least-squares weights of the accepted vectors for a target.

        Parameters
        ----------
        target : array_like, shape (dim,)
            Finite real numbers.

        Returns
        -------
        weights : ndarray, shape (rank,)
            One an accepted vector.
        residual_norm : float
            Norm of the target less the weighted vectors.

        Raises
        ------
        ValueError, TypeError
            As `add`.
        """

    def condition(self) -> float:
        """Ratio of the largest to the smallest singular value of the accepted vectors; 1 for none."""

    def orthogonality_error(self) -> float:
        """Spectral norm of ``I - Q Q^T``, computed now; ``rank**2 * dim`` flops."""

    @property
    def vectors(self) -> NDArray[np.float64] | NDArray[np.float32]:
        """The orthonormal basis, shape (rank, dim), a copy in the stored type."""

    @property
    def triangular(self) -> NDArray[np.float64]:
        """The upper triangular factor, shape (rank, rank), diagonal positive, a copy."""

    @property
    def rank(self) -> int:
        """Vectors held."""

    @property
    def dim(self) -> int:
        """Entries a vector."""

    @property
    def capacity(self) -> int:
        """The most vectors it can hold."""

    def __len__(self) -> int: ...

@final
class Tracker:
    """A subspace that follows a stream of rows, one at a time, at constant cost.

    It keeps the weighted mean and a factor of the weighted scatter of all rows learned, each row worth ``1 - 1/memory``
    less a tick. More directions are tracked than reported: one that grows is seen coming, and truncation costs little;
    `certificate` says how much at most.

    Parameters
    ----------
    channels : int
        Entries a row.
    rank : int
        Principal axes reported, 1 to `channels`; with `share`, the most of them.
    memory : float, optional
        Time constant of forgetting, in rows. Without it nothing is forgotten and the answer is that of the whole batch.
    center : bool
        Whether the weighted mean is tracked and taken off.
    guard : int, optional
        Directions tracked beyond `rank`. Default: as many again, at least 8, and never more than there are.
    share : float, optional
        Report as many axes as explain this share of the variance, between 0 and 1, and follow it: one more where it is
        not reached, one less only where it is clearly exceeded without; always fewer than there are channels.
    dtype : {"float64", "float32"}
        Type the directions are stored in. Arithmetic, mean and energies are float64 in either case.

    Raises
    ------
    ValueError
        Where `rank`, `guard`, `memory` or `share` is out of its range.
    TypeError
        Where `dtype` is neither of the two.
    """

    def __new__(
        cls,
        channels: int,
        rank: int,
        *,
        memory: float | None = None,
        center: bool = True,
        guard: int | None = None,
        share: float | None = None,
        dtype: DTypeLike = "float64",
    ) -> Tracker: ...
    def update(self, row: ArrayLike, weight: float = 1.0, *, elapsed: float = 1.0) -> bool:
        """Learn one row; ``11 * (rank + guard) * channels`` flops.

        Parameters
        ----------
        row : array_like, shape (channels,)
            Real numbers; NaN is a gap, filled by the model's own value. Neither modified nor kept.
        weight : float
            What the row counts, 0 or more. 0 learns nothing and forgets nothing.
        elapsed : float
            Ticks since the row before: what was learned decays by as many.

        Returns
        -------
        bool
            False where the row was skipped: a weight of 0, or too few channels observed (`skipped` counts those).

        Raises
        ------
        ValueError
            Wrong length, an infinite entry, `weight` or `elapsed` negative or not finite.
        TypeError
            Entries that are not real numbers.
        """

    def update_rows(self, rows: ArrayLike) -> None:
        """Learn many rows, one tick each, in blocks; the interpreter is released meanwhile.

        What is not truncated comes out as row by row, to rounding. The rest is truncated once a block instead of once a
        row, which gives up about as much, and the certificate counts it. A block is four rows a channel where channels
        are few beside rank and guard, else as many rows as these, at least 16; rows that fill less than a fourth or
        half of one, and rows with gaps, go one by one. The first block makes room for itself.

        Parameters
        ----------
        rows : array_like, shape (n, channels)
            One row a tick, NaN a gap.

        Raises
        ------
        ValueError, TypeError
            As `update`, naming the row; nothing has been learned, except the rows before one whose squares overflow.
        """

    def split(self, row: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Split a row, less the mean, against the axes as they stand, without learning.

        Parameters
        ----------
        row : array_like, shape (channels,)
            Real numbers; NaN is a gap.

        Returns
        -------
        coefficients : ndarray, shape (rank,)
            On the axes; fitted to the observed channels where there are gaps.
        residual : ndarray, shape (channels,)
            What the axes do not explain; 0 in a gap.

        Raises
        ------
        ValueError, TypeError
            As `update`.
        """

    def residual_norm(self, row: ArrayLike) -> float:
        """Norm of the residual of `split`, times ``sqrt(channels / observed)`` where there are gaps."""

    def reconstruct(self, row: ArrayLike) -> NDArray[np.float64]:
        """Give the model's own value of a row, shape (channels,): the mean, and what the axes make of the rest."""

    def angles(self, other: Tracker) -> NDArray[np.float64]:
        """Principal angles between the reported subspaces of two trackers, in radians, ascending.

        They mean something where `gap` of both is well above 0.

        Raises
        ------
        ValueError
            Where the channels differ in number.
        """

    def certificate(self) -> tuple[NDArray[np.float64], float | None]:
        """Bound what truncation can have cost.

        Returns
        -------
        energies : ndarray, shape (rank,)
            Upper bounds: the exact weighted energies lie between `energies` and these.
        angle : float or None
            Upper bound, in radians, on the largest angle between the reported subspace and the exact weighted one
            (Davis and Kahan 1970); None where the eigengap is too small for a bound.
        """

    def merge(self, other: Tracker) -> None:
        """Take in all that another tracker has learned, both decayed to the later clock.

        Parameters
        ----------
        other : Tracker
            With the same channels, rank, memory, centring and dtype.

        Raises
        ------
        ValueError
            Where one of those differs.
        """

    def orthogonality_error(self) -> float:
        """Spectral norm of ``I - Q Q^T`` of the tracked directions, computed now."""

    def copy(self) -> Tracker:
        """Copy the tracker; the two go separate ways."""

    def __copy__(self) -> Tracker: ...
    def __deepcopy__(self, _memo: object, /) -> Tracker: ...
    def to_bytes(self) -> bytes:
        """Give the state as bytes: all that what the tracker does next depends on.

        A safetensors container, which any reader of that format opens: ``tracker.mean``, ``tracker.axes``,
        ``tracker.energies``, ``tracker.directions`` and their factor, settings and counters in the metadata.
        The same state gives the same bytes.

        Returns
        -------
        bytes
            About as long as the arrays; as much again is taken while they are made.

        Raises
        ------
        StateError
            Where a number has grown beyond the finite ones.
        """

    @classmethod
    def from_bytes(cls, data: Buffer) -> Tracker:
        """Make the tracker whose state `to_bytes` gave; on the same kernel path it goes on bit for bit.

        Sizes, checksum, finiteness, ranges, triangularity and orthonormality are checked, the latter by
        ``2 * (rank + guard) * channels`` flops a row. Takes a small multiple of the length of the data, whatever the
        data says.

        Parameters
        ----------
        data : bytes-like
            Neither modified nor kept.

        Raises
        ------
        StateError
            Where `data` is anything else: the message says what is wrong.
        TypeError
            Where it has no bytes.
        """

    def save(self, path: str | os.PathLike[str]) -> None:
        """Write the state to a file, at once and for good.

        The bytes of `to_bytes` go to a new file beside, are synced to the disk, and take the place of the old file,
        whose mode is kept: after a power cut there is the old state or the new one. What a killed save has left beside
        is removed by the next to the same file. The interpreter is released meanwhile.

        Parameters
        ----------
        path : path-like
            A file, to be made or replaced; where it is a link, what that points to.

        Raises
        ------
        OSError
            Where it cannot be written; the old file is then as it was.
        StateError
            As `to_bytes`.
        """

    @classmethod
    def load(cls, path: str | os.PathLike[str]) -> Tracker:
        """Make the tracker whose state a file holds; as `from_bytes`.

        Parameters
        ----------
        path : path-like
            What `save` wrote, in this release or an earlier one.

        Raises
        ------
        StateError
            Where the file holds anything else.
        OSError
            Where it cannot be read.
        """

    def __reduce__(self) -> tuple[Any, ...]: ...
    @property
    def axes(self) -> NDArray[np.float64] | NDArray[np.float32]:
        """Principal axes, shape (rank, channels), a copy; signs and order held from call to call."""

    @property
    def energies(self) -> NDArray[np.float64]:
        """Weighted variances along the axes, shape (rank,), descending."""

    @property
    def mean(self) -> NDArray[np.float64]:
        """Weighted mean, shape (channels,)."""

    @property
    def noise_energy(self) -> float:
        """Weighted variance outside the reported axes, all channels together."""

    @property
    def explained(self) -> float:
        """Share of the variance along the reported axes."""

    @property
    def gap(self) -> float:
        """Relative eigengap below the last reported axis; near 0 its direction, and any angle, means nothing."""

    @property
    def samples(self) -> int:
        """Rows learned."""

    @property
    def skipped(self) -> int:
        """Rows skipped for their gaps."""

    @property
    def total_weight(self) -> float:
        """Sum of the weights of the rows learned, each decayed to now."""

    @property
    def channels(self) -> int:
        """Entries a row."""

    @property
    def rank(self) -> int:
        """Axes reported; where `share` is followed, as many as it takes now."""

    @property
    def share(self) -> float | None:
        """Share of the variance that the number of axes follows."""

    @property
    def guard(self) -> int:
        """Directions tracked beyond those."""

    @property
    def memory(self) -> float | None:
        """Time constant of forgetting, in rows."""

_Phase = Literal["settling", "healthy", "exceeding", "alarmed", "adopting"]
_Exceeded = Literal["spe", "t2", "spe_smooth", "t2_smooth"]

class _Event(TypedDict):
    """One alarm, from on to off. Ticks count from 0 over the whole life of the watch."""

    start: int
    end: int | None
    peak: int
    peak_ratio: float
    exceeds: tuple[_Exceeded, ...]
    suspects: list[tuple[str, float]]

@final
class Reading:
    """What one tick found: a value, it does not change when the watch goes on."""

    @property
    def tick(self) -> int:
        """Number of the tick, from 0."""

    @property
    def phase(self) -> _Phase:
        """Where the watch stands after this row."""

    @property
    def alarm(self) -> bool:
        """Whether the alarm is on."""

    @property
    def spe(self) -> float:
        """Squared residual of the row, in squared spreads; NaN where the row was not judged."""

    @property
    def spe_limit(self) -> float:
        """Limit that `spe` was judged by; NaN while settling."""

    @property
    def t2(self) -> float:
        """Hotelling T2 of the row on the principal axes; NaN where the row was not judged."""

    @property
    def t2_limit(self) -> float:
        """Limit that `t2` was judged by; NaN while settling."""

    @property
    def spe_smooth(self) -> float:
        """Exponentially weighted average of the standardised `spe`, in its own healthy spreads."""

    @property
    def spe_smooth_limit(self) -> float:
        """Limit that `spe_smooth` was judged by."""

    @property
    def t2_smooth(self) -> float:
        """Exponentially weighted average of the standardised `t2`, in its own healthy spreads."""

    @property
    def t2_smooth_limit(self) -> float:
        """Limit that `t2_smooth` was judged by."""

    @property
    def exceeds(self) -> tuple[_Exceeded, ...]:
        """Which of the four limits this row passed."""

    @property
    def widening(self) -> float:
        """Factor, 1 or more, by which the limits are wider for resting on few rows so far; NaN while settling."""

    @property
    def weight(self) -> float:
        """How much of the row was learned: 1 healthy, 0 gated or frozen, between when adopting."""

    @property
    def rank(self) -> int:
        """Principal axes in use; 0 while settling."""

    @property
    def drift(self) -> float | None:
        """Largest principal angle from the accepted baseline, radians; None where the eigengap denies it a meaning."""

    @property
    def captured(self) -> float | None:
        """Share of the baseline's explained energy that the present axes still capture."""

    @property
    def mean_shift(self) -> float | None:
        """Largest shift of a channel's mean from the baseline's, in spreads of that channel while settling."""

    @property
    def missing(self) -> list[str]:
        """Channels without a value in this row."""

    @property
    def stuck(self) -> list[str]:
        """Channels that have repeated their value for longer than twice their longest run while settling, and ten rows.

        A row in which all channels that take part are stuck or missing is judged, but not learned.
        """

    @property
    def vanished(self) -> list[str]:
        """Channels that have had no value for longer than twice their longest silence while settling, and ten rows."""

    def contributions(self) -> NDArray[np.float64]:
        """Squared residual of each channel: shape (channels,), they sum to `spe`."""

    def expected(self) -> NDArray[np.float64]:
        """Give what the model makes of the row, in the channels' own units.

        Returns
        -------
        ndarray, shape (channels,)
            The mean and what the axes say of the row; in a gap what the other channels say of it. The difference from
            the row is the residual whose square, in spreads, is the contribution. NaN for a channel that takes no part,
            and everywhere where the row was not judged.

        Examples
        --------
        >>> import numpy as np
        >>> import perpend
        >>> rng = np.random.default_rng(4)
        >>> speed = rng.uniform(900, 1500, (600, 1))
        >>> rows = speed * [1, 0.02, 0.3, 1.5] + rng.normal(0, [5, 0.2, 2, 8], (600, 4))
        >>> watch = perpend.Watch(4, ["speed", "flow", "power", "noise"], rank=1)
        >>> watch.settle_on(rows)
        >>> reading = watch.tick([1200, float("nan"), 361, 1790])
        >>> print(reading.expected()[1].round())
        24.0
        """

    def corrected(self) -> NDArray[np.float64]:
        """Give what each channel would have to read if it alone were put right, in its own unit.

        Returns
        -------
        ndarray, shape (channels,)
            What the others say of the channel: with it in the row, SPE and T2 over their limits have the least sum. A
            suspect's own trace departs from it in every alarm, from `expected` only where SPE is beyond: the model may
            explain a fault by an axis. As `expected` in a gap and where there is nothing to say.
        """

    def suspects(self, n: int = 3) -> list[tuple[str, float]]:
        """Name the channels whose single correction would take away most of the excess.

        Parameters
        ----------
        n : int
            How many, at most.

        Returns
        -------
        list of (name, share)
            Most suspect first. The share is the part of the statistic, 0 to 1, that vanishes when this one channel is
            replaced by what the others say of it. They are suspects: where several channels move together, or the
            trouble is none of them, the first need not be at fault.
        """

@final
class Watch:
    """A monitoring loop: judges each row by what it learned from the healthy ones before it, then learns it.

    Parameters
    ----------
    channels : int
        Channels a row.
    names : sequence of str, optional
        Their names; `channel_0`, ... if not given.
    rank : int, optional
        Principal axes; below `channels`. If not given, chosen when settling ends: those along which the channels move
        together by more than chance.
    memory : float or None
        Rows after which a healthy row's weight has fallen to 1/e, at least 2; None forgets nothing.
    settle : int
        Rows to learn units, rank and first limits from, at least 20.
    false_alarm : float
        Share of healthy rows that may be beyond one limit or another by chance, 1e-9 to 0.2. It is split evenly over
        the four limits; the alarm, which wants several rows, is rarer. Rows with tails heavier than normal pass it
        oftener, two to four times for Student's t with 5 degrees of freedom.
    confirm, of : int
        The alarm goes on when `confirm` of the last `of` rows are beyond a limit, and off when as many are not. Both
        count from the last switch.
    hold : int
        Rows beyond a limit in succession after which the watch adopts what it sees with bounded influence. A
        succession ends with `of` rows in a row within the limits.
    limits : {"moments", "empirical", "spectrum"}
        Where the limits of SPE and T2 come from: the moments of healthy statistics (matched chi-square), their
        streamed quantile, or the model's energies (Jackson and Mudholkar for SPE, F for T2). Rows beyond a limit
        count for it no oftener than chance brings them.
    dtype : {"float64", "float32"}
        What the axes are stored in.

    Raises
    ------
    ValueError
        Where a setting is out of its range, or the names are not one a channel, each once.
    TypeError
        Where `dtype` is neither of the two.
    MemoryError
        Where the rows to settle on cannot be held.
    """

    def __new__(
        cls,
        channels: int,
        names: Sequence[str] | None = None,
        *,
        rank: int | None = None,
        memory: float | None = 5000.0,
        settle: int = 500,
        false_alarm: float = 1e-3,
        confirm: int = 3,
        of: int = 5,
        hold: int = 300,
        limits: Literal["moments", "empirical", "spectrum"] = "moments",
        dtype: DTypeLike = "float64",
    ) -> Watch: ...
    def tick(self, row: ArrayLike) -> Reading:
        """Judge one row, then learn it as far as the gate allows.

        Some microseconds at 24 channels, in proportion to channels times tracked directions; the row that ends settling
        takes longer, as all of them are learned then.

        Parameters
        ----------
        row : array_like, shape (channels,)
            Real numbers in any unit; NaN is a gap. Neither modified nor kept.

        Returns
        -------
        Reading
            What was found. A row with no more values than axes is not judged, and not learned.

        Raises
        ------
        ValueError
            Wrong length or an infinite entry; the watch is as it was.
        TypeError
            Entries that are not real numbers.
        """

    def replay(self, rows: ArrayLike) -> dict[str, NDArray[Any]]:
        """Tick through many rows: the readings of `tick`, one after another, to the last bit.

        Parameters
        ----------
        rows : array_like, shape (ticks, channels)
            As for `tick`.

        Returns
        -------
        dict of arrays
            An entry a property of `Reading`, named as that, first axis the ticks. NaN stands for None; `missing` is a
            count; `exceeds` has four columns: SPE, T2, smoothed SPE, smoothed T2; `contributions`, `stuck` and
            `vanished` have one a channel.

        Raises
        ------
        ValueError, TypeError
            As `tick`, naming the row, before any row is judged.
        """

    def settle_on(self, rows: ArrayLike) -> None:
        """Settle on exactly these rows instead of the first `settle` of the stream.

        They are no ticks. What was learned before is let go; the next row is judged.

        Parameters
        ----------
        rows : array_like, shape (rows, channels)
            Healthy rows, 20 or more; a few glitches among them are left out (`dropped`).

        Raises
        ------
        ValueError
            As `tick`, naming the row; or the rows do not do, saying why: too few that can be judged, or fewer than two
            channels that move. The watch is as it was.
        """

    def freeze(self) -> None:
        """Stop learning until `resume`; judging goes on. A watch that has not settled yet waits meanwhile."""

    def resume(self) -> None:
        """Learn again after `freeze`."""

    def accept(self) -> None:
        """Take the present state as the new baseline; the alarm and its counters start afresh.

        Said during an alarm it also means that what is seen now is healthy: rows beyond a limit are adopted from the
        next one on, without waiting for `hold`, and raise no alarm until `of` rows in a row were within the limits,
        or for three times `hold` rows at most.
        """

    def copy(self) -> Watch:
        """Copy the watch; the two go separate ways."""

    def __copy__(self) -> Watch: ...
    def __deepcopy__(self, _memo: object, /) -> Watch: ...
    def to_bytes(self) -> bytes:
        """Give the state as bytes: all that what the watch does next depends on.

        A safetensors container, which any reader of that format opens: ``watch.model.lens.axes`` and their energies,
        the tracker as ``watch.model.tracker...``, moments of the statistics, alarms, names; settings and counters
        in the metadata. The same state gives the same bytes. Only the last reading is no part of it.

        Returns
        -------
        bytes
            About as long as the arrays; as much again is taken while they are made.

        Raises
        ------
        StateError
            Where a number has grown beyond the finite ones.
        """

    @classmethod
    def from_bytes(cls, data: Buffer) -> Watch:
        """Make the watch whose state `to_bytes` gave; on the same kernel path it goes on bit for bit.

        Sizes, checksum, finiteness, ranges, triangularity and orthonormality are checked, the latter by
        ``2 * (rank + guard) * channels`` flops a row. Takes a small multiple of the length of the data, whatever the
        data says.

        Parameters
        ----------
        data : bytes-like
            Neither modified nor kept.

        Raises
        ------
        StateError
            Where `data` is anything else: the message says what is wrong.
        TypeError
            Where it has no bytes.
        """

    def save(self, path: str | os.PathLike[str]) -> None:
        """Write the state to a file, at once and for good.

        The bytes of `to_bytes` go to a new file beside, are synced to the disk, and take the place of the old file,
        whose mode is kept: after a power cut there is the old state or the new one. The interpreter is released
        meanwhile.

        Parameters
        ----------
        path : path-like
            A file, to be made or replaced; where it is a link, what that points to.

        Raises
        ------
        OSError
            Where it cannot be written; the old file is then as it was.
        StateError
            As `to_bytes`.
        """

    @classmethod
    def load(cls, path: str | os.PathLike[str]) -> Watch:
        """Make the watch whose state a file holds; as `from_bytes`.

        Parameters
        ----------
        path : path-like
            What `save` wrote, in this release or an earlier one.

        Raises
        ------
        StateError
            Where the file holds anything else.
        OSError
            Where it cannot be read.
        """

    def __reduce__(self) -> tuple[Any, ...]: ...
    @property
    def names(self) -> list[str]:
        """Names of the channels."""

    @property
    def channels(self) -> int:
        """Channels a row."""

    @property
    def settings(self) -> dict[str, Any]:
        """What it was made with, named as the arguments; `rank` is None where it was to be chosen."""

    @property
    def phase(self) -> _Phase:
        """Where the watch stands."""

    @property
    def rank(self) -> int:
        """Principal axes in use; 0 while settling."""

    @property
    def energies(self) -> NDArray[np.float64]:
        """Variances along the axes in use, in squared spreads: shape (rank,), descending; none while settling."""

    @property
    def ticks(self) -> int:
        """Rows given to `tick` or `replay` so far."""

    @property
    def dropped(self) -> int:
        """Settling rows left out as glitches."""

    @property
    def frozen(self) -> bool:
        """Whether learning is stopped by `freeze`."""

    @property
    def constant(self) -> list[str]:
        """Channels that did not move, or had no values, while settling.

        They are neither judged nor suspected until they have moved and shown `settle` values since.
        """

    @property
    def events(self) -> list[_Event]:
        """The latest alarms, oldest first: a bounded list."""
