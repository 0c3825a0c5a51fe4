"""Open a file or standard input and tell by its first bytes, not by its name, what it is."""

import gzip
import sys
import zlib
from dataclasses import dataclass
from io import BufferedReader
from pathlib import Path
from typing import BinaryIO, Literal, cast

from perpend.refusal import InputError

STANDARD_INPUT = "-"
LIVE = "standard input"
FIRST_BYTES = 4096
GZIP = b"\x1f\x8b"

Kind = Literal["delimited", "parquet"]


@dataclass(slots=True)
class Opened:
    """A stream that is ready to be read.

    Attributes
    ----------
    label : str
        How messages name it.
    kind : {"delimited", "parquet"}
        What its first bytes say it is.
    stream : binary file
        Already decompressed.
    raw : binary file
        What lies under `stream`; its position against `size` is how far the reading has come.
    size : int or None
        Bytes of the file; None where the end is not known, as on standard input.
    """

    label: str
    kind: Kind
    stream: BinaryIO
    raw: BinaryIO
    size: int | None

    def close(self) -> None:
        """Close the file; standard input stays open."""
        if self.size is not None or self.label != LIVE:
            self.stream.close()
            self.raw.close()


def open_input(name: str) -> Opened:
    """Open `name`, or standard input for ``-``.

    Raises
    ------
    InputError
        Where there is no such file, it cannot be read, it is empty, or it does not hold rows.
    """
    if name == STANDARD_INPUT:
        if sys.stdin is None:
            raise InputError("it is closed; pipe rows into it or give a file", LIVE)
        return _recognised(cast(BufferedReader, sys.stdin.buffer), LIVE, None)
    if not name:
        raise InputError("expected the name of a file, got an empty one; - is standard input")
    path = Path(name)
    try:
        if path.is_dir():
            raise InputError("expected a file, got a folder", name)
        raw = path.open("rb")
        size = path.stat().st_size if path.is_file() else None
    except FileNotFoundError:
        raise InputError("there is no such file", name) from None
    except (OSError, ValueError) as error:
        raise InputError(f"cannot be read: {getattr(error, 'strerror', None) or error}", name) from None
    try:
        return _recognised(raw, name, size)
    except BaseException:
        raw.close()
        raise


def _recognised(raw: BufferedReader, label: str, size: int | None) -> Opened:
    try:
        first = raw.peek(FIRST_BYTES)[:FIRST_BYTES]
    except OSError as error:
        raise InputError(f"cannot be read: {error.strerror or error}", label) from None
    if not first.startswith(GZIP):
        return Opened(label, _kind(first, label), raw, raw, size)
    unpacked = gzip.GzipFile(fileobj=raw)
    try:
        first = unpacked.peek(FIRST_BYTES)[:FIRST_BYTES]
    except (OSError, EOFError, zlib.error) as error:
        raise InputError(f"the gzip file is damaged ({error})", label) from None
    return Opened(label, _kind(first, label), cast(BinaryIO, unpacked), raw, size)


def _kind(first: bytes, label: str) -> Kind:
    if first.startswith(b"PAR1"):
        return "parquet"
    if not first:
        raise InputError("the file is empty; expected a header line and rows", label)
    if first.startswith((b"PK\x03\x04", b"\xd0\xcf\x11\xe0")):
        raise InputError("this is a workbook or an archive; save the sheet as CSV (UTF-8) and give that", label)
    if first.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise InputError("the text is UTF-16; save it as UTF-8", label)
    if b"\0" in first:
        raise InputError("this is not text; expected a header line and rows separated by commas", label)
    return "delimited"
