"""A plot of time against size; needs the extra ``plot``."""

import importlib.util
from collections.abc import Iterable
from pathlib import Path
from typing import Any

from perpend.bench.turns import Comparison
from perpend.refusal import InputError

_FORMATS = (".png", ".svg", ".pdf")
# Colour is never the only sign: each contender has a mark and a dash of its own.
_LOOKS = {
    "stream by add": {"marker": "o", "linestyle": "-", "color": "#14606b"},
    "stream by add_rows": {"marker": "s", "linestyle": "--", "color": "#14606b"},
    "numpy.linalg.qr": {"marker": "^", "linestyle": ":", "color": "#8a5a00"},
}


def need_plot(name: str) -> None:
    """Find out before minutes of timing, not after, whether the plot can be written.

    Raises
    ------
    InputError
        Where the plotting library or the folder is missing, or the name ends as no picture's does.
    """
    if importlib.util.find_spec("matplotlib") is None:
        raise InputError("--plot needs the extra: pip install 'perpend[plot]'")
    if Path(name).suffix.lower() not in _FORMATS:
        raise InputError(f"--plot: expected a name that ends in {', '.join(_FORMATS[:-1])} or {_FORMATS[-1]}", name)
    if Path(name).is_dir() or not Path(name).resolve().parent.is_dir():
        raise InputError("--plot: cannot be written: expected the name of a file in a folder that exists", name)


def draw(comparisons: Iterable[Comparison]) -> Any:
    """Draw time against size for streaming and batch.

    Parameters
    ----------
    comparisons : iterable of Comparison
        From `across_sizes`.

    Returns
    -------
    Figure
        Of matplotlib: seconds against entries a vector, both logarithmic; below, the share of batch's time.
    """
    from matplotlib.figure import Figure
    from matplotlib.ticker import EngFormatter

    from perpend.dressing import INK, dress

    found = list(comparisons)
    figure = Figure(figsize=(7.5, 6.2), layout="constrained")
    upper, lower = figure.subplots(2, 1, sharex=True, height_ratios=[3, 2])
    whats = list(dict.fromkeys(each.what for each in found))
    for what in whats:
        own = [each for each in found if each.what == what]
        sizes = [each.dim for each in own]
        upper.plot(sizes, [each.seconds for each in own], label=what, **_LOOKS[what])
        lower.plot(sizes, [each.ratio for each in own], label=what, **_LOOKS[what])
    other = [each for each in found if each.what == whats[0]]
    label = f"batch: {other[0].against}"
    upper.plot(
        [each.dim for each in other], [each.other_seconds for each in other], label=label, **_LOOKS[other[0].against]
    )
    lower.axhline(1, color=_LOOKS[other[0].against]["color"], linestyle=":")
    upper.set_xscale("log")
    upper.set_yscale("log")
    upper.yaxis.set_major_formatter(EngFormatter("s"))
    upper.set_ylabel("time for the whole stream")
    upper.legend(frameon=False, labelcolor=INK)
    upper.tick_params(labelbottom=False)
    lower.set_ylim(bottom=0)
    lower.set_ylabel("share of batch's time")
    lower.set_xticks([each.dim for each in other], [f"{each.dim:,}" for each in other])
    lower.minorticks_off()
    lower.set_xlabel(f"entries a vector; {other[0].rank} vectors, one thread each")
    for axes in (upper, lower):
        dress(axes, grid="y")
        axes.margins(x=0.04)
    return figure


def write_plot(comparisons: Iterable[Comparison], name: str) -> None:
    """Draw into a file, in the form its name asks for.

    Raises
    ------
    InputError
        Where it cannot be written.
    """
    figure = draw(comparisons)
    try:
        figure.savefig(name, dpi=150)
    except OSError as error:
        raise InputError(f"--plot: cannot be written: {error.strerror or error}", name) from None
