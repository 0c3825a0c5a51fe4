"""The report: one page that needs nothing else, opens from disk, and shows what was found."""

import html
import re
import shutil
import subprocess
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest

pytest.importorskip("matplotlib", reason="the extra report is not installed")

from perpend import Watch
from perpend.cli import main
from perpend.intake import Row
from perpend.report.history import BEFORE, DURING, EPISODES, RUNS, History

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")
NAMES = ["flow", "pressure <1>", "price $", "speed & torque", "level", "power"]
ROWS = 600


def write(path: Path, rows: np.ndarray) -> None:
    lines = [",".join(["time", *NAMES])]
    for index, row in enumerate(rows.tolist()):
        cells = ["" if value != value else repr(value) for value in row]
        lines.append(",".join([f"2026-03-{1 + index // 288:02} {index // 12 % 24:02}:{index * 5 % 60:02}", *cells]))
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")


def rows(seed: int) -> np.ndarray:
    random = np.random.default_rng(seed)
    axes = np.random.default_rng(3).standard_normal((2, len(NAMES)))
    return random.standard_normal((ROWS, 2)) @ axes * 2 + 0.3 * random.standard_normal((ROWS, len(NAMES))) + 20


@pytest.fixture(scope="module")
def page(tmp_path_factory) -> Path:
    """Report on a run with a gap and a shifted channel."""
    folder = tmp_path_factory.mktemp("report")
    write(folder / "learn.csv", rows(1))
    watched = rows(2)
    watched[50:60] = np.nan
    watched[400:460, 1] += 15
    write(folder / "watched.csv", watched)
    report = folder / "report.html"
    code = main(["watch", str(folder / "watched.csv"), "--learn", str(folder / "learn.csv"), "--report", str(report)])
    assert code == 3
    return report


class Outline(HTMLParser):
    """Collects tags with their attributes, and ids."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.ids: list[str] = []
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))
        self.ids += [value or "" for name, value in attrs if name == "id"]


def test_nothing_is_asked_from_outside(page):
    text = page.read_text(encoding="utf-8")
    outline = Outline(text)
    for tag, attributes in outline.tags:
        assert tag not in ("script", "img", "iframe", "object", "embed")
        for name in ("src", "href", "xlink:href"):
            value = attributes.get(name) or "#"
            assert value.startswith(("#", "data:")), (tag, value)
    assert not re.search(r"@import|url\((?!#)", text)
    assert "default-src 'none'" in text


def test_every_drawing_has_its_words_and_names_are_unique(page):
    outline = Outline(page.read_text(encoding="utf-8"))
    drawings = [attributes for tag, attributes in outline.tags if tag == "svg"]
    assert len(drawings) >= 10
    assert all(each["role"] == "img" and len(each["aria-label"] or "") > 30 for each in drawings)
    assert len(outline.ids) == len(set(outline.ids))


def test_the_alarm_table_the_suspects_and_the_cautions_are_there(page):
    text = page.read_text(encoding="utf-8")
    table = text[text.index('<table id="alarms">') : text.index("</table>")]
    assert 'data-label="suspects">pressure &lt;1&gt;' in table
    for name in ("readings", "logbook", "drift", "energies", "suspects-1", "trace-1"):
        assert f'<figure id="{name}">' in text
    plain = html.unescape(re.sub(r"<[^>]+>", " ", text))
    assert "no protective system" in plain
    assert "60 cells in 10 rows" in plain
    assert "speed & torque" in plain or "pressure <1>" in plain


def test_a_suspect_is_drawn_beside_what_is_expected_of_it(page):
    text = page.read_text(encoding="utf-8")
    start = text.index('<figure id="trace-1">')
    drawn = text[start : text.index("</figure>", start)]
    assert ">measured</text>" in drawn
    assert ">expected</text>" in drawn
    assert "pressure &lt;1&gt;</text>" in drawn


def test_the_history_takes_the_same_room_however_long_the_run():
    watch = Watch(3, settle=30)
    found = rows(5)[:, :3]
    history, kept = History(watch), []
    for number in range(6_000):
        reading = watch.tick(found[number % 400])
        history.take(Row(number + 1, "", found[number % 400], None), reading)
        if number + 1 in (30, 6_000):
            kept.append(history.bands())
    assert len(history) == 6_000
    assert len(kept[0]["spe"].where) == 30
    assert RUNS // 2 <= len(kept[1]["spe"].where) <= RUNS
    assert kept[1]["time"].highest[-1] == 6_000
    assert np.nanmax(kept[1]["energy_1"].highest) == pytest.approx(watch.energies[0], rel=0.5)
    assert history.lanes["settling"] == 30


def test_colours_follow_the_page_and_text_is_text(page):
    text = page.read_text(encoding="utf-8")
    svg = text[text.index("<svg") : text.index("</svg>")]
    assert "var(--trace)" in svg
    assert "#14606b" not in svg
    assert "<text" in svg
    assert "prefers-color-scheme: dark" in text


def test_a_quiet_run_has_a_report_too(page):
    target = page.parent / "quiet.html"
    learned = str(page.parent / "learn.csv")
    code = main(["watch", learned, "--settle", "300", "--report", str(target)])
    assert code in (0, 3)
    assert "Cautions" in target.read_text(encoding="utf-8")


def test_the_report_never_overwrites_the_input_and_needs_a_folder(page, capsys):
    watched = page.parent / "watched.csv"
    before = watched.read_bytes()
    assert main(["watch", str(watched), "--report", str(watched)]) == 2
    assert watched.read_bytes() == before
    assert main(["watch", str(watched), "--report", str(page.parent / "no" / "r.html")]) == 2
    assert "a folder that exists" in capsys.readouterr().err


def test_the_demo_has_its_report(tmp_path):
    target = tmp_path / "demo.html"
    assert main(["demo", "--report", str(target)]) == 3
    assert "dairy, invented" in target.read_text(encoding="utf-8")


def test_the_history_of_an_alarm_is_bounded():
    assert EPISODES * (BEFORE + DURING) < 10_000


def shot(page: Path, target: Path, width: int, *options: str) -> np.ndarray:
    """Return the page as a browser shows it: shape (height, width, 3), 0 to 1."""
    from matplotlib.image import imread

    assert CHROMIUM is not None
    command = [CHROMIUM, "--headless", "--no-sandbox", "--disable-gpu", "--hide-scrollbars", *options]
    command += [f"--user-data-dir={target.parent / 'profile'}", f"--window-size={width},2400", f"--screenshot={target}"]
    subprocess.run([*command, page.as_uri()], capture_output=True, timeout=120, check=True)
    return np.asarray(imread(target))[:, :, :3]


def near(picture: np.ndarray, colour: str) -> int:
    """Count pixels of a colour, to a tenth of each channel."""
    wanted = [int(colour[place : place + 2], 16) / 255 for place in (1, 3, 5)]
    return int((np.abs(picture - wanted).max(axis=2) < 0.1).sum())


@pytest.mark.skipif(CHROMIUM is None, reason="no browser to open the report in")
def test_a_browser_shows_the_plots_wide_narrow_and_dark(page, tmp_path):
    wide = shot(page, tmp_path / "wide.png", 1600)
    narrow = shot(page, tmp_path / "narrow.png", 500)
    dark = shot(page, tmp_path / "dark.png", 1600, "--blink-settings=preferredColorScheme=0")
    for picture in (wide, narrow):
        assert near(picture, "#14606b") > 2000
        assert near(picture, "#b3261e") > 50
        assert picture.mean() > 0.8
    assert near(dark, "#6fc7cf") > 2000
    assert dark.mean() < 0.3
