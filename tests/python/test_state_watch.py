"""States of the watch: restarted at any tick, it goes on as if it had not been."""

import copy
import json
import pickle
import sys
from pathlib import Path

import numpy as np
import pytest
from safetensors import safe_open

from perpend import StateError, Watch

GOLDEN = Path(__file__).parent / "golden"
DTYPES = ["float64", "float32"]
NAMES = ["inlet", "outlet", "Pumpe \u00e4", "bearing", "load", "valve"]


def stream(count, seed):
    """Rows of one movement, gaps among them, with a lasting fault from row 300 on."""
    rng = np.random.default_rng(seed)
    rows = rng.standard_normal((count, 1)) * [3, -2, 1, 2, 1, 0.5] + 0.3 * rng.standard_normal((count, 6)) + 40
    rows[300:, 4] += 5
    rows[7::23, 2] = np.nan
    return rows


def watched(dtype="float64", count=420):
    watch = Watch(6, NAMES, settle=80, hold=60, memory=500, dtype=dtype)
    watch.replay(stream(count, 3))
    return watch


def figures(watch):
    """What the watch shows, and how it would judge a row."""
    reading = watch.copy().tick(stream(1, 4)[0])
    shown = {name: getattr(watch, name) for name in ("names", "rank", "phase", "ticks", "dropped", "constant")}
    numbers = {name: getattr(reading, name) for name in ("spe", "spe_limit", "t2", "t2_limit", "spe_smooth")}
    events = [(event["start"], event["end"], [name for name, _ in event["suspects"]]) for event in watch.events]
    return json.loads(json.dumps(shown | numbers | {"events": events}))


@pytest.mark.parametrize("dtype", DTYPES)
def test_restarted_at_any_tick_it_gives_the_readings_of_one_that_was_not(dtype):
    rows = stream(700, 5)
    plain = Watch(6, NAMES, settle=80, hold=60, memory=500, dtype=dtype)
    expected = plain.copy().replay(rows)
    assert {"settling", "healthy", "alarmed", "adopting"} <= set(expected["phase"])
    for start in range(0, 700, 35):
        part = plain.replay(rows[start : start + 35])
        for name, column in part.items():
            np.testing.assert_array_equal(column, expected[name][start : start + 35], err_msg=name)
        plain = Watch.from_bytes(plain.to_bytes())
    assert plain.names == NAMES


@pytest.mark.parametrize("dtype", DTYPES)
def test_bytes_files_pickles_and_copies_hold_the_same_watch(dtype, tmp_path):
    watch = watched(dtype)
    state = watch.to_bytes()
    watch.save(tmp_path / "state")
    assert (tmp_path / "state").read_bytes() == state
    restored = [
        Watch.load(tmp_path / "state"),
        Watch.from_bytes(memoryview(state)),
        watch.copy(),
        copy.copy(watch),
        copy.deepcopy(watch),
        pickle.loads(pickle.dumps(watch)),
    ]
    for other in restored:
        assert other.to_bytes() == state
        assert figures(other) == figures(watch)
    restored[0].tick(stream(1, 6)[0])
    assert watch.to_bytes() == state


def test_a_frozen_watch_that_has_not_settled_is_restored_as_such():
    watch = Watch(6, settle=80)
    watch.replay(stream(30, 7))
    watch.freeze()
    restored = Watch.from_bytes(watch.to_bytes())
    assert (restored.frozen, restored.phase, restored.ticks, restored.rank) == (True, "settling", 30, 0)


@pytest.mark.parametrize("dtype", DTYPES)
def test_a_general_reader_finds_axes_energies_and_names(dtype, tmp_path):
    watch = watched(dtype)
    watch.save(tmp_path / "state")
    with safe_open(tmp_path / "state", "np") as container:
        assert container.metadata()["class"] == "Watch"
        axes = container.get_tensor("watch.model.lens.axes")
        assert (axes.dtype, axes.shape) == (dtype, (watch.rank, 6))
        assert (np.diff(container.get_tensor("watch.model.lens.energies")) <= 0).all()
        text = container.get_tensor("watch.names").tobytes().decode()
        assert text == "".join(NAMES)


def test_what_is_no_watch_is_refused(tmp_path):
    state = watched().to_bytes()
    for bad in (b"", state[:-1], state[:2000], state + b"\0", bytes(len(state))):
        with pytest.raises(StateError):
            Watch.from_bytes(bad)
    with pytest.raises(StateError, match="checksum: expected crc32:"):
        Watch.from_bytes(state[:-1] + bytes([state[-1] ^ 1]))
    with pytest.raises(FileNotFoundError):
        Watch.load(tmp_path / "none")


@pytest.mark.parametrize("path", sorted(GOLDEN.glob("watch-*.safetensors")), ids=lambda path: path.stem)
def test_watches_of_earlier_releases_load_with_their_figures(path):
    expected = json.loads(path.with_suffix(".json").read_text())
    eps = float(np.finfo(path.stem.split("-")[1]).eps)
    for name, figure in figures(Watch.load(path)).items():
        # The row is projected anew, on another kernel path perhaps: some hundred roundings of it at most.
        assert (
            figure == pytest.approx(expected[name], rel=1024 * eps)
            if isinstance(figure, float)
            else (figure == expected[name])
        ), name


def test_there_are_golden_watches_of_both_types():
    stems = {"-".join(path.stem.split("-")[:2]) for path in GOLDEN.glob("watch-*.safetensors")}
    assert stems == {f"watch-{dtype}" for dtype in DTYPES}


if __name__ == "__main__":
    # Adds the golden files of a new schema under its number; those of older ones are never written again.
    for dtype in DTYPES:
        path = GOLDEN / f"watch-{dtype}-schema{sys.argv[1]}.safetensors"
        with path.open("xb") as file:
            file.write(watched(dtype).to_bytes())
        path.with_suffix(".json").write_text(json.dumps(figures(watched(dtype)), indent=1) + "\n")
