"""The command ``perpend``: arguments in, exit code out, one line on the error stream for what is wrong."""

import argparse
import difflib
import math
import os
import sys
from collections.abc import Callable, Sequence
from typing import Any, NoReturn

from perpend._core import __version__
from perpend.intake.delimited import SEPARATORS, Dialect
from perpend.refusal import InputError, shown
from perpend.voice import hush, plain

BAD_INPUT, INTERRUPTED = 2, 130
WHERE_HELP = "perpend {} --help says more"

ABOUT = """\
Watch the rows of a machine with many channels: learn the few directions in
which healthy operation moves, and say when a row leaves them and which
channels are suspected."""

CAUTIONS = """\
It advises; it is no protective system. Trips, interlocks and safety functions
stay with the equipment made and certified for them, and local codes and
licensed practice come first."""

EXIT_CODES = """\
exit codes: 0 no alarm, 3 an alarm was raised, 2 bad input or usage,
130 interrupted"""

INPUT_HELP = """\
The input has a header with the names of the channels, then one row a tick,
its cells separated by commas, semicolons or tabs; gzip works too, and Parquet
with the extra of that name. An empty cell is a gap, and so are nan, NA and
null in either case. Infinity is refused."""


class _Parser(argparse.ArgumentParser):
    """Says what is wrong in one line instead of printing the usage."""

    def error(self, message: str) -> NoReturn:
        raise InputError(f"{message.removeprefix('argument ')}; {self.prog} --help says more")


def main(argv: Sequence[str] | None = None) -> int:
    """Run the command line.

    Parameters
    ----------
    argv : sequence of str, optional
        Arguments; those of the process if not given.

    Returns
    -------
    int
        0 no alarm, 3 an alarm was raised, 2 bad input or usage, 130 interrupted.
    """
    arguments = list(sys.argv[1:] if argv is None else argv)
    called = " ".join(["perpend", *(name for name in arguments[:1] if name in ("demo", "watch", "bench"))])
    # Closed by whoever started it: what is said there goes nowhere, for as long as the process lasts.
    if sys.stdout is None:
        sys.stdout = open(os.devnull, "w")  # noqa: SIM115
    if sys.stderr is None:
        sys.stderr = open(os.devnull, "w")  # noqa: SIM115
    try:
        code = _dispatch(arguments)
        try:
            sys.stdout.flush()
        except BrokenPipeError:
            hush()
    except InputError as error:
        return _complain(called, str(error), BAD_INPUT)
    except BrokenPipeError:
        hush()
        return 0
    except OSError as error:
        return _complain(called, f"{error.filename or 'output'}: {error.strerror or error}", BAD_INPUT)
    except KeyboardInterrupt:
        return _complain(called, "interrupted", INTERRUPTED)
    return code


def _complain(called: str, what: str, code: int) -> int:
    print(f"{called}: {plain(' '.join(what.split()))}", file=sys.stderr)
    return code


def _dispatch(arguments: list[str]) -> int:
    parser = _parser()
    if not arguments:
        raise InputError("expected a command: try perpend demo, or perpend watch FILE; perpend --help says more")
    found, unknown = parser.parse_known_args(arguments)
    if unknown:
        raise InputError(_unknown(found.command, unknown[0]))
    run: Callable[[argparse.Namespace], int] = found.run
    return run(found)


def _unknown(command: str, argument: str) -> str:
    if not argument.startswith("-"):
        return f"one FILE only, got {shown(argument)} as well; perpend {command} --help says more"
    near = difflib.get_close_matches(argument.partition("=")[0], _options(command), n=1)
    advice = f"did you mean {near[0]}?" if near else f"perpend {command} --help lists the options"
    return f"there is no option {shown(argument)}; {advice}"


def _options(command: str) -> list[str]:
    for action in _parser()._actions:
        if isinstance(action, argparse._SubParsersAction):
            chosen = action.choices[command]
            return [option for each in chosen._actions for option in each.option_strings if len(option) > 2]
    return []


def _parser() -> argparse.ArgumentParser:
    parser = _Parser(
        prog="perpend",
        description=ABOUT,
        epilog=f"{CAUTIONS}\n\n{EXIT_CODES}",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    parser.add_argument("--version", action="version", version=f"perpend {__version__}")
    commands = parser.add_subparsers(dest="command", metavar="COMMAND", required=True)
    _add_demo(commands)
    _add_watch(commands)
    _add_bench(commands)
    return parser


def _add_demo(commands: Any) -> None:
    demo = commands.add_parser(
        "demo",
        help="an invented scenario, start to finish",
        description=(
            "Watch an invented ice-water chiller plant of a dairy through five\ntroubles, and set truth beside finding."
        ),
        epilog=CAUTIONS,
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    demo.add_argument("--seed", type=_whole(0), metavar="N", help="another run of the same plant")
    demo.add_argument("--rows", metavar="FILE", help="write the rows as CSV for perpend watch, and judge nothing")
    demo.add_argument("--report", metavar="FILE", help="write one self-contained HTML page with plots")
    demo.set_defaults(run=_run_demo)


def _add_watch(commands: Any) -> None:
    watch = commands.add_parser(
        "watch",
        help="judge rows from a file or standard input",
        description="Judge rows one after another, each before it is learned.",
        epilog=f"{INPUT_HELP}\n\n{CAUTIONS}\n\n{EXIT_CODES}",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    watch.add_argument("source", metavar="FILE", help="rows to watch; - for standard input, judged as they arrive")
    add = watch.add_argument
    add("--learn", metavar="FILE", help="settle on exactly this file's rows first")
    add(
        "--time",
        metavar="COLUMN",
        help="the clock (guessed for the usual forms, and said); none for no clock",
    )
    add("--ignore", metavar="COLUMN", action="append", default=[], help="leave a column out; may be repeated")
    add(
        "--memory",
        type=_memory,
        metavar="ROWS",
        help="rows after which a row's weight has fallen to 1/e; none forgets nothing",
    )
    add(
        "--settle",
        type=_whole(20),
        metavar="ROWS",
        help="rows to learn units, rank and first limits from",
    )
    add(
        "--false-alarm",
        type=_probability,
        metavar="SHARE",
        help="share of healthy rows that may pass one limit or another",
    )
    add(
        "--rank",
        type=_whole(1),
        metavar="N",
        help="principal axes; chosen when settling ends if not given",
    )
    add("--confirm", type=_confirm, metavar="N/M", help="N exceeding rows of the last M raise the alarm")
    add("--readings", metavar="FILE", help="write every reading, .csv or .jsonl")
    add("--report", metavar="FILE", help="write one self-contained HTML page with plots")
    add(
        "--state",
        metavar="FILE",
        help="resume from it, and keep it current; the rows given follow those it has seen",
    )
    add(
        "--separator",
        choices=[*SEPARATORS.values()],
        help="between cells; what the header shows if not given",
    )
    add("--decimal", choices=["point", "comma"], default="point", help="how decimals are written")
    watch.set_defaults(run=_run_watch)


def _add_bench(commands: Any) -> None:
    bench = commands.add_parser(
        "bench",
        help="streaming against batch QR on this machine",
        description=(
            "Time the basis, vector by vector, against batch QR and an updated QR: a\ntable of ratios, "
            "one thread each, every answer asserted before it is timed."
        ),
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    bench.add_argument("--check", action="store_true", help="assert every answer on small cases, time nothing")
    bench.add_argument(
        "--plot", metavar="FILE", help="draw time against size for streaming and batch too: .png, .svg or .pdf"
    )
    bench.set_defaults(run=_run_bench)


def _run_bench(found: argparse.Namespace) -> int:
    from perpend import bench
    from perpend.bench.picture import need_plot, write_plot

    if found.plot is not None and found.check:
        raise InputError("--check times nothing that --plot could draw; give one of them")
    if found.plot is not None:
        need_plot(found.plot)
    for line in bench.conditions():
        print(line)
    bench.told(bench.compare(check=found.check))
    if found.plot is not None:
        write_plot(bench.told(bench.across_sizes()), found.plot)
        print(f"The plot: {found.plot}")
    return 0


def _run_demo(found: argparse.Namespace) -> int:
    from perpend.demo.story import run_demo, write_rows

    if found.rows is not None:
        return write_rows(found.rows, found.seed)
    return run_demo(found.seed, found.report)


def _run_watch(found: argparse.Namespace) -> int:
    from perpend.watching import WatchRequest, run_watch

    if found.learn is not None and found.settle is not None:
        raise InputError("--learn settles on all of its file's rows; give --learn or --settle, not both")
    settings = {
        name: value
        for name, value in (
            ("rank", found.rank),
            ("settle", found.settle),
            ("false_alarm", found.false_alarm),
        )
        if value is not None
    }
    if found.memory is not None:
        settings["memory"] = None if math.isinf(found.memory) else found.memory
    if found.confirm is not None:
        settings["confirm"], settings["of"] = found.confirm
    separators = {name: separator for separator, name in SEPARATORS.items()}
    return run_watch(
        WatchRequest(
            source=found.source,
            learn=found.learn,
            time=found.time,
            ignored=tuple(found.ignore),
            dialect=Dialect(separators.get(found.separator), "," if found.decimal == "comma" else "."),
            readings=found.readings,
            report=found.report,
            state=found.state,
            settings=settings,
        )
    )


def _whole(least: int) -> Callable[[str], int]:
    def read(text: str) -> int:
        try:
            value = int(text)
        except ValueError:
            value = least - 1
        if value < least:
            raise argparse.ArgumentTypeError(f"expected a whole number, at least {least}, got {shown(text)}")
        return value

    return read


def _memory(text: str) -> float:
    """Read a memory in rows; infinity stands for ``none``."""
    if text == "none":
        return math.inf
    value = _float(text)
    if not 2 <= value < math.inf:
        raise argparse.ArgumentTypeError(f"expected 2 rows or more, or none, got {shown(text)}")
    return value


def _probability(text: str) -> float:
    value = _float(text)
    if not 1e-9 <= value <= 0.2:
        raise argparse.ArgumentTypeError(f"expected a share from 1e-9 to 0.2, such as 1e-3, got {shown(text)}")
    return value


def _confirm(text: str) -> tuple[int, int]:
    parts = text.split("/")
    try:
        numbers = [int(part) for part in parts]
    except ValueError:
        numbers = []
    if len(numbers) == 1:
        numbers *= 2
    if len(numbers) != 2 or not 1 <= numbers[0] <= numbers[1]:
        raise argparse.ArgumentTypeError(f"expected N/M with N up to M, such as 3/5, got {shown(text)}")
    return numbers[0], numbers[1]


def _float(text: str) -> float:
    try:
        return float(text)
    except ValueError:
        return math.nan
