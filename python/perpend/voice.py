"""Say a run's lines on standard output, whoever listens and whatever a name holds."""

import os
import sys


def plain(text: str) -> str:
    """Write what a terminal would obey, or what would turn the text around, as escapes; line ends and all else stay.

    Parameters
    ----------
    text : str
        Anything, such as the name of a channel.

    Returns
    -------
    str
        The same to read, nothing in it to obey.
    """
    if text.isprintable():
        return text
    kept = (each if each == "\n" or each.isprintable() else _escaped(each) for each in text)
    return "".join(kept)


def _escaped(character: str) -> str:
    return character.encode("unicode_escape").decode("ascii")


class Voice:
    """Standard output that survives its reader: when nobody listens any more, the run goes on in silence."""

    def write(self, text: str) -> None:
        """Write text, made plain."""
        try:
            sys.stdout.write(plain(text))
        except BrokenPipeError:
            hush()

    def flush(self) -> None:
        """Send what was written."""
        try:
            sys.stdout.flush()
        except BrokenPipeError:
            hush()


def hush() -> None:
    """Let what is said from now on go nowhere: the interpreter must not complain about it when it closes either."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
