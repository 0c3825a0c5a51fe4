"""What the README says, run as it stands there."""

import re
from pathlib import Path

import pytest

README = Path(__file__).parents[2] / "README.md"


def python_blocks():
    return re.findall(r"```python\n(.*?)```", README.read_text(encoding="utf-8"), flags=re.S)


def test_the_loop_runs_as_written_and_suspects_the_probe_that_reads_too_high(capsys):
    names = {}
    exec(compile(python_blocks()[0], "README.md", "exec"), names)
    printed = capsys.readouterr().out
    assert names["reading"].alarm
    assert 1_500 <= names["watch"].ticks <= 1_520
    assert printed.index("channel_3") == min(printed.index(name) for name in re.findall(r"channel_\d", printed))


def test_every_example_runs_after_the_ones_before_it():
    names = {}
    blocks = python_blocks()
    assert len(blocks) >= 2
    for block in blocks:
        exec(compile(block, "README.md", "exec"), names)
    assert names["basis"].orthogonality_error() < 1e-15


@pytest.mark.parametrize("command", ["perpend demo", ".ci/run rust python", "perpend watch"])
def test_the_commands_named_exist(command):
    text = README.read_text(encoding="utf-8")
    assert command in text
    if command.startswith("."):
        assert (README.parent / command.split()[0]).exists()
