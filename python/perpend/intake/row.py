"""One row of input."""

from collections.abc import Sequence
from dataclasses import dataclass

from perpend.intake.clock import Instant


@dataclass(slots=True, frozen=True)
class Row:
    """One row: what a tick is made of.

    Attributes
    ----------
    number : int
        Counted from 1, the header not counted.
    place : str
        Where it stands in its source, for messages.
    values : sequence of float
        One a channel; NaN where there is no value.
    instant : Instant or None
        What the clock column says.
    """

    number: int
    place: str
    values: Sequence[float]
    instant: Instant | None
