"""Keep the state of a run in a file, so that the next run goes on where this one was cut off."""

import signal
import sys
import threading
import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from types import FrameType
from typing import Any

from perpend._core import Reading, StateError, Watch
from perpend.intake import Row
from perpend.refusal import InputError, shown

EVERY_SECONDS = 10.0
"""A save syncs the disk, some milliseconds; what this long has brought can be lost to a power cut."""

OPTIONS = {"false_alarm": "--false-alarm", "of": "--confirm"}


def resume(path: str, channels: Sequence[str], settings: Mapping[str, Any]) -> Watch | None:
    """Load the watch that a file keeps.

    Parameters
    ----------
    path : str
        File given by ``--state``.
    channels : sequence of str
        Names of the channels of the input.
    settings : mapping
        Arguments of `Watch` as far as they were given: they must be those it was made with.

    Returns
    -------
    Watch or None
        None where there is no such file yet.

    Raises
    ------
    InputError
        Where the file holds no state, or that of another watch.
    """
    try:
        watch = Watch.load(path)
    except FileNotFoundError:
        return None
    except StateError as error:
        raise InputError(f"--state: {error}; give another file, or move this one away") from None
    except OSError as error:
        raise InputError(f"--state: {error.strerror or error}", path) from None
    if list(channels) != watch.names:
        raise InputError(f"--state: {_difference(channels, watch.names)}", path)
    made_with = watch.settings
    for name, value in settings.items():
        if made_with[name] != value:
            option = OPTIONS.get(name, f"--{name}")
            raise InputError(
                f"{option}: the state was made with {made_with[name]}, got {value};"
                " leave it out, or begin another state",
                path,
            )
    return watch


def _difference(channels: Sequence[str], kept: Sequence[str]) -> str:
    missing = [name for name in kept if name not in channels]
    added = [name for name in channels if name not in kept]
    if missing:
        return f"it watches column {shown(missing[0])}, which the input does not have"
    if added:
        return f"it does not watch column {shown(added[0])} of the input; --ignore leaves a column out"
    return "it watches the same columns in another order; give them in that order"


@contextmanager
def asked_to_end() -> Iterator[None]:
    """Take a request to terminate, as a service manager sends it, for an interrupt: the state is saved then."""

    def end(number: int, frame: FrameType | None) -> None:
        raise KeyboardInterrupt

    if threading.current_thread() is not threading.main_thread():
        yield
        return
    before = signal.signal(signal.SIGTERM, end)
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, before)


class Keeper:
    """Saves the watch now and then, and at the end.

    Parameters
    ----------
    watch : Watch
        What is kept.
    path : str
        Where.
    now : callable, optional
        A clock in seconds.
    """

    def __init__(self, watch: Watch, path: str, now: Callable[[], float] = time.monotonic) -> None:
        self._watch = watch
        self._path = path
        self._now = now
        self._saved = now()
        self._failing = False

    def take(self, row: Row, reading: Reading) -> None:
        """Save if it is time: a watch outlives a full disk, and tries again."""
        if self._now() - self._saved < EVERY_SECONDS:
            return
        try:
            self._watch.save(self._path)
        except OSError as error:
            if not self._failing:
                print(f"perpend watch: {self._path}: not saved, {error.strerror}; watching on", file=sys.stderr)
            self._failing = True
        else:
            self._failing = False
        self._saved = self._now()

    def save(self) -> None:
        """Save now.

        Raises
        ------
        InputError
            Where that fails.
        """
        try:
            self._watch.save(self._path)
        except OSError as error:
            raise InputError(f"--state: not saved, {error.strerror or error}", self._path) from None
