"""What is said, in one line, where the input or the usage cannot be worked with."""

LONGEST_SHOWN = 32


class InputError(Exception):
    """Input or usage that cannot be worked with: the command line shows it as one line and exits with 2.

    Parameters
    ----------
    what : str
        Expected and got, and what to do.
    place : str
        File, line and column as far as they are known.
    """

    def __init__(self, what: str, place: str = "") -> None:
        super().__init__(f"{place}: {what}" if place else what)


def shown(text: str) -> str:
    """Quote a piece of the user's input so that it stays short and on one line."""
    short = text if len(text) <= LONGEST_SHOWN else text[: LONGEST_SHOWN - 3] + "..."
    return f"'{short}'" if short.isprintable() else "'" + short.encode("unicode_escape").decode("ascii") + "'"


def listed(names: list[str], most: int = 4) -> str:
    """Join names for a sentence, at most `most` of them."""
    text = ", ".join(shown(name) for name in names[:most])
    return text if len(names) <= most else f"{text} and {len(names) - most} more"
