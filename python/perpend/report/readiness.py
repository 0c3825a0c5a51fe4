"""Find out before a run, not after it, whether its report can be written."""

import importlib.util
from pathlib import Path

from perpend.refusal import InputError


def need_plots(name: str) -> None:
    """Check that a report can be drawn and has a folder to go to.

    Raises
    ------
    InputError
        Where the plotting library or the folder is missing.
    """
    if importlib.util.find_spec("matplotlib") is None:
        raise InputError("--report needs the extra: pip install 'perpend[report]'")
    if Path(name).is_dir() or not Path(name).resolve().parent.is_dir():
        raise InputError("--report: cannot be written: expected the name of a file in a folder that exists", name)
