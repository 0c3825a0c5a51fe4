"""Open a file or standard input and tell by its first bytes, not by its name, what it is."""

import gzip
import sys
from dataclasses import dataclass
from io import BufferedReader
from pathlib import Path
from typing import BinaryIO, Literal, cast

from perpend.refusal import InputError

STANDARD_INPUT = "-"
FIRST_BYTES = 4096

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


def open_input(name: str) -> Opened:
    """Open `name`, or standard input for ``-``.

    Raises
    ------
    InputError
        Where there is no such file, it cannot be read, it is empty, or it does not hold rows.
    """
    live = name == STANDARD_INPUT
    label = "standard input" if live else name
    raw: BufferedReader
    try:
        if live:
            raw = cast(BufferedReader, sys.stdin.buffer)
            size = None
        else:
            path = Path(name)
            if path.is_dir():
                raise InputError("expected a file, got a folder", label)
            raw = path.open("rb")
            size = path.stat().st_size if path.is_file() else None
        first = raw.peek(FIRST_BYTES)[:FIRST_BYTES]
    except FileNotFoundError:
        raise InputError("there is no such file", label) from None
    except OSError as error:
        raise InputError(f"cannot be read: {error.strerror or error}", label) from None
    if first.startswith(b"\x1f\x8b"):
        unpacked = gzip.GzipFile(fileobj=raw)
        try:
            first = unpacked.peek(FIRST_BYTES)[:FIRST_BYTES]
        except (OSError, EOFError) as error:
            raise InputError(f"the gzip file is damaged ({error})", label) from None
        return Opened(label, _kind(first, label), cast(BinaryIO, unpacked), raw, size)
    return Opened(label, _kind(first, label), raw, raw, size)


def _kind(first: bytes, label: str) -> Kind:
    if first.startswith(b"PAR1"):
        return "parquet"
    if not first:
        raise InputError("the file is empty; expected a header line and rows", label)
    if first.startswith((b"PK\x03\x04", b"\xd0\xcf\x11\xe0")):
        raise InputError(
            "this is a workbook or an archive; save the sheet as CSV (UTF-8) and give that", label
        )
    if first.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise InputError("the text is UTF-16; save it as UTF-8", label)
    if b"\0" in first:
        raise InputError("this is not text; expected a header line and rows separated by commas", label)
    return "delimited"
