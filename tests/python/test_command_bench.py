"""``perpend bench``."""

import importlib.util

import numpy as np
import pytest

from perpend import bench
from perpend.bench.picture import draw
from perpend.cli import main


def test_the_check_asserts_every_answer_and_times_nothing(capsys):
    assert main(["bench", "--check"]) == 0
    printed = capsys.readouterr().out
    assert "numpy.linalg.qr" in printed
    assert "kernel path" in printed


def test_a_mistyped_option_is_named_with_the_one_meant(capsys):
    assert main(["bench", "--chek"]) == 2
    complaint = capsys.readouterr().err
    assert complaint.startswith("perpend bench: ")
    assert "did you mean --check?" in complaint
    assert complaint.count("\n") == 1


def test_time_against_size_has_a_line_for_each_way_and_a_mark_of_its_own():
    pytest.importorskip("matplotlib")
    made = [
        bench.Comparison(what, "numpy.linalg.qr", dim, 32, dim * share, dim * 1e-6, 0.6)
        for dim in (100, 1_000, 10_000)
        for what, share in (("stream by add", 4e-7), ("stream by add_rows", 2e-7))
    ]
    upper, lower = draw(made).axes
    lines = {line.get_label(): line for line in upper.lines}
    assert list(lines) == ["stream by add", "stream by add_rows", "batch: numpy.linalg.qr"]
    assert len({line.get_marker() for line in lines.values()}) == 3
    assert len({line.get_linestyle() for line in lines.values()}) == 3
    np.testing.assert_allclose(lower.lines[1].get_ydata(), 0.2)
    np.testing.assert_allclose(lines["batch: numpy.linalg.qr"].get_xdata(), [100, 1_000, 10_000])


def test_answers_are_asserted_at_every_size():
    compared = list(bench.across_sizes((40, 90), rank=8, check=True))
    assert [(each.what, each.dim) for each in compared] == [
        (what, dim) for dim in (40, 90) for what in ("stream by add", "stream by add_rows")
    ]


@pytest.mark.parametrize("end", ["png", "svg", "pdf"])
def test_the_plot_is_written_in_the_form_its_name_asks_for(end, tmp_path, monkeypatch, capsys):
    pytest.importorskip("matplotlib")
    monkeypatch.setattr("perpend.bench.turns.turns", lambda ours, theirs: (1e-3, 2e-3))
    target = tmp_path / f"sizes.{end}"
    monkeypatch.setattr(bench, "compare", lambda check: [])
    assert main(["bench", "--plot", str(target)]) == 0
    assert target.read_bytes()[:4] in (b"\x89PNG", b"<?xm", b"%PDF")
    assert f"The plot: {target}" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("arguments", "complaint"),
    [
        (["--plot", "sizes.bmp"], "ends in .png, .svg or .pdf"),
        (["--plot", "no/folder/sizes.png"], "a folder that exists"),
        (["--plot", "sizes.png", "--check"], "give one of them"),
    ],
)
def test_a_plot_that_cannot_be_is_refused_before_anything_is_timed(arguments, complaint, capsys):
    pytest.importorskip("matplotlib")
    assert main(["bench", *arguments]) == 2
    said = capsys.readouterr()
    assert complaint in said.err
    assert said.err.count("\n") == 1
    assert said.out == ""


def test_without_the_plotting_library_one_line_says_what_to_install(monkeypatch, capsys):
    found = importlib.util.find_spec
    monkeypatch.setattr(importlib.util, "find_spec", lambda name: None if name == "matplotlib" else found(name))
    assert main(["bench", "--plot", "sizes.png"]) == 2
    assert capsys.readouterr().err == "perpend bench: --plot needs the extra: pip install 'perpend[plot]'\n"
