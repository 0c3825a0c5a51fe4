"""Show on a terminal how far the reading has come; say nothing in a pipe. Needs the extra ``progress``."""

import sys
from typing import Any

from perpend._core import Reading
from perpend.intake import Row
from perpend.intake.opening import Opened

EVERY = 200
LAYOUT = "{percentage:3.0f} %|{bar:24}| {postfix} {elapsed} gone, {remaining} left"


class Progress:
    """A bar by the bytes read, with rows a second and the time left.

    Parameters
    ----------
    opened : Opened
        What is read; without a known size, without a terminal or without the extra, nothing is shown.
    """

    def __init__(self, opened: Opened) -> None:
        self._raw = opened.raw
        self._rows = 0
        self._bar: Any = None
        if opened.size is None or not sys.stderr.isatty():
            return
        try:
            from tqdm import tqdm
        except ImportError:
            return
        self._bar = tqdm(total=opened.size, file=sys.stderr, leave=False, bar_format=LAYOUT, ascii=" -=")

    def take(self, row: Row, reading: Reading) -> None:
        """Count one row."""
        self._rows += 1
        if self._bar is not None and self._rows % EVERY == 0:
            rate = self._rows / max(self._bar.format_dict["elapsed"], 1e-9)
            self._bar.set_postfix_str(f"row {self._rows:,}, {rate:,.0f} rows/s,", refresh=False)
            self._bar.update(self._raw.tell() - self._bar.n)

    def clear(self) -> None:
        """Make room for a line; the bar comes back with the next rows."""
        if self._bar is not None:
            self._bar.clear()

    def close(self) -> None:
        """Take the bar away."""
        if self._bar is not None:
            self._bar.close()
