"""States: what is read back goes on bit for bit; everything else is refused, whatever the bytes are."""

import copy
import json
import pickle
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from safetensors import safe_open
from safetensors.numpy import load as read_container
from safetensors.numpy import save as make_container

from perpend import Basis, StateError, Tracker

GOLDEN = Path(__file__).parent / "golden"
DTYPES = ["float64", "float32"]


def grown(dtype="float64"):
    basis = Basis(5, 4, dtype=dtype, tolerance=(1e-6, 0.125))
    basis.add_rows(np.random.default_rng(8).normal(size=(4, 5)))
    basis.drop(0)
    return basis


def learned(dtype="float64"):
    tracker = Tracker(4, 2, memory=30, guard=1, dtype=dtype)
    rows = np.random.default_rng(9).normal(size=(50, 4)) * [5, 2, 1, 0.5] + 70
    rows[11, 2] = np.nan
    tracker.update_rows(rows)
    return tracker


@pytest.fixture(params=[grown, learned], ids=["basis", "tracker"])
def made(request):
    return request.param


def figures(owner):
    """What the object shows, in full."""
    if isinstance(owner, Basis):
        names = ["vectors", "triangular", "rank", "dim", "capacity"]
    else:
        names = ["axes", "energies", "mean", "noise_energy", "explained", "gap", "samples", "skipped", "total_weight"]
    return {name: np.asarray(getattr(owner, name)).tolist() for name in names}


def again(owner):
    return type(owner).from_bytes(owner.to_bytes())


row = st.lists(st.floats(-1e6, 1e6, width=32), min_size=6, max_size=6)
basis_calls = st.lists(
    st.one_of(
        st.tuples(st.just("add"), row),
        st.tuples(st.just("add_rows"), st.lists(row, min_size=1, max_size=4)),
        st.tuples(st.just("drop"), st.integers(0, 5)),
        st.tuples(st.just("split"), row),
        st.tuples(st.just("restart"), st.none()),
    ),
    max_size=25,
)
tracker_calls = st.lists(
    st.one_of(
        st.tuples(st.just("update"), row),
        st.tuples(st.just("gap"), row),
        st.tuples(st.just("update_rows"), st.lists(row, min_size=1, max_size=20)),
        st.tuples(st.just("merge"), row),
        st.tuples(st.just("split"), row),
        st.tuples(st.just("restart"), st.none()),
    ),
    max_size=25,
)


def call(owner, name, argument):
    """Do one thing; what it gives, as bytes."""
    if name == "restart":
        return b""
    if name == "drop":
        if argument < owner.rank:
            owner.drop(argument)
        return b""
    if name == "gap":
        return bytes([owner.update([np.nan, *argument[1:]], elapsed=3)])
    if name == "merge":
        other = Tracker(6, 2, memory=15, guard=2, dtype=str(owner.axes.dtype))
        other.update(argument)
        return owner.merge(other)
    outcome = getattr(owner, name)(argument)
    if name == "add":
        return outcome.coefficients.tobytes() + np.float64(outcome.residual_norm).tobytes()
    if name in ("split", "add_rows") and outcome is not None:
        return b"".join(part.tobytes() for part in outcome)
    return outcome


def run_with_restarts(owner, calls):
    restarted = again(owner)
    for name, argument in calls:
        if name == "restart":
            restarted = again(restarted)
        assert call(restarted, name, argument) == call(owner, name, argument)
        assert restarted.to_bytes() == owner.to_bytes()


@pytest.mark.parametrize("dtype", DTYPES)
@settings(max_examples=50, deadline=None)
@given(calls=basis_calls, capacity=st.none() | st.integers(0, 6))
def test_a_basis_restored_at_any_moment_goes_on_bit_for_bit(dtype, calls, capacity):
    run_with_restarts(Basis(6, capacity, dtype=dtype), calls)


@pytest.mark.parametrize("dtype", DTYPES)
@settings(max_examples=50, deadline=None)
@given(calls=tracker_calls)
def test_a_tracker_restored_at_any_moment_goes_on_bit_for_bit(dtype, calls):
    run_with_restarts(Tracker(6, 2, memory=15, guard=2, dtype=dtype), calls)


def test_a_tracker_that_follows_a_share_goes_on_with_the_axes_it_had():
    tracker = Tracker(6, 4, share=0.9, memory=40)
    rows = np.random.default_rng(4).normal(size=(300, 6)) * [9, 5, 3, 1, 0.5, 0.1]
    tracker.update_rows(rows[:150])
    assert tracker.rank < 4
    restored = again(tracker)
    assert (restored.rank, restored.share) == (tracker.rank, 0.9)
    for owner in (tracker, restored):
        owner.update_rows(rows[150:])
    assert figures(restored) == figures(tracker)


@pytest.mark.parametrize("dtype", DTYPES)
def test_bytes_files_pickles_and_copies_hold_the_same_state(made, dtype, tmp_path):
    owner = made(dtype)
    path = tmp_path / "a state"
    state = owner.to_bytes()
    owner.save(path)
    assert path.read_bytes() == state
    restored = [
        type(owner).load(path),
        type(owner).load(str(path)),
        type(owner).from_bytes(bytearray(owner.to_bytes())),
        type(owner).from_bytes(memoryview(owner.to_bytes())),
        type(owner).from_bytes(np.frombuffer(owner.to_bytes(), np.uint8)),
        owner.copy(),
        copy.copy(owner),
        copy.deepcopy([owner])[0],
        *(pickle.loads(pickle.dumps(owner, protocol)) for protocol in range(pickle.HIGHEST_PROTOCOL + 1)),
    ]
    # Figures come after: to read axes brings them up to date, which is a change of state.
    shown = figures(owner)
    for other in restored:
        assert other.to_bytes() == state
        assert figures(other) == shown


def test_the_two_go_separate_ways(made):
    owner = made()
    before = figures(owner)
    restored = again(owner)
    if isinstance(restored, Basis):
        restored.drop(0)
    else:
        restored.update([1.0, 2.0, 3.0, 4.0])
    assert figures(restored) != before == figures(owner)


def test_a_state_is_the_same_bytes_in_another_process(made):
    program = f"import sys; sys.path.insert(0, {str(Path(__file__).parent)!r}); import test_state as t; " + (
        f"sys.stdout.buffer.write(t.{made.__name__}().to_bytes())"
    )
    outcome = subprocess.run([sys.executable, "-c", program], capture_output=True, check=True)
    assert outcome.stdout == made().to_bytes()


@pytest.mark.parametrize("dtype", DTYPES)
def test_a_general_reader_finds_the_arrays(dtype, tmp_path):
    basis, tracker = grown(dtype), learned(dtype)
    basis.save(tmp_path / "basis")
    with safe_open(tmp_path / "basis", "np") as container:
        assert container.metadata()["class"] == "Basis"
        assert container.metadata()["dtype"] == dtype
        np.testing.assert_array_equal(container.get_tensor("basis.vectors"), basis.vectors, strict=True)
        np.testing.assert_array_equal(container.get_tensor("basis.triangular"), basis.triangular, strict=True)
    energies, axes = tracker.energies, tracker.axes
    arrays = read_container(tracker.to_bytes())
    np.testing.assert_array_equal(arrays["tracker.mean"], tracker.mean, strict=True)
    np.testing.assert_array_equal(arrays["tracker.axes"], axes, strict=True)
    np.testing.assert_array_equal(arrays["tracker.energies"][:2], energies, strict=True)
    # The scatter is (R Q)^T (R Q), its trace the energies of all directions times the weight.
    scatter = arrays["tracker.factor"] @ arrays["tracker.directions"].astype(float)
    eps = float(np.finfo(dtype).eps)
    assert (scatter**2).sum() == pytest.approx(arrays["tracker.energies"].sum() * tracker.total_weight, rel=64 * eps)


def test_objects_that_have_learned_nothing_are_restored(tmp_path):
    for owner in (Basis(3), Basis(1, 0), Tracker(3, 1), Tracker(2, 2, center=False)):
        owner.save(tmp_path / "empty")
        assert type(owner).load(tmp_path / "empty").to_bytes() == owner.to_bytes()


def test_every_truncation_and_every_flipped_bit_is_refused_or_means_the_same(made):
    owner = made()
    state = owner.to_bytes()
    for length in range(len(state)):
        with pytest.raises(StateError):
            type(owner).from_bytes(state[:length])
    for place in range(len(state)):
        for flip in (1, 2, 4, 8, 16, 32, 64, 128, 255):
            changed = bytearray(state)
            changed[place] ^= flip
            try:
                restored = type(owner).from_bytes(changed)
            except StateError:
                continue
            assert restored.to_bytes() == state


@given(data=st.binary(max_size=400))
def test_bytes_of_chance_are_refused(data):
    for owner in (Basis, Tracker):
        with pytest.raises(StateError):
            owner.from_bytes(data)


def test_refusals_say_what_is_wrong(tmp_path):
    state = grown().to_bytes()
    path = tmp_path / "basis.state"
    path.write_bytes(state)
    with pytest.raises(StateError, match=r"basis\.state: class: expected Tracker, got Basis"):
        Tracker.load(path)
    path.write_bytes(state[:-1])
    with pytest.raises(StateError, match=r"basis\.state: not a whole safetensors container"):
        Basis.load(path)
    with pytest.raises(StateError, match="header: expected at most"):
        Basis.from_bytes(b"\xff" * 8 + state[8:])
    with pytest.raises(StateError, match="checksum: expected crc32:"):
        Basis.from_bytes(state[:-1] + bytes([state[-1] ^ 1]))
    with pytest.raises(StateError, match="schema: expected 1, got 2: a later release wrote it"):
        Basis.from_bytes(state.replace(b'"schema":"1"', b'"schema":"2"'))
    with pytest.raises(StateError, match="schema: expected a word of that name"):
        Basis.from_bytes(make_container({"weights": np.ones(3)}))
    with pytest.raises(TypeError, match="data: expected bytes, got int"):
        Basis.from_bytes(7)
    with pytest.raises(TypeError, match="data: expected bytes, got str"):
        Basis.from_bytes("abc")
    assert issubclass(StateError, ValueError)


def golden(dtype):
    """What the golden files of a release hold: made with this program, by this release."""
    basis = Basis(6, 5, dtype=dtype, tolerance=(1e-7, 0.0))
    numbers = np.random.default_rng(1999)
    basis.add_rows(numbers.normal(size=(6, 6)).round(3))
    basis.drop(1)
    tracker = Tracker(6, 2, memory=25, guard=2, dtype=dtype)
    rows = (numbers.normal(size=(80, 6)) * [4, 3, 1, 0.5, 0.5, 0.2] + 300).round(3)
    rows[40, 5] = np.nan
    tracker.update_rows(rows)
    return {"basis": basis, "tracker": tracker}


@pytest.mark.parametrize("path", sorted(GOLDEN.glob("[bt]*.safetensors")), ids=lambda path: path.stem)
def test_files_of_earlier_releases_load_with_their_figures(path):
    expected = json.loads(path.with_suffix(".json").read_text())
    owner = {"basis": Basis, "tracker": Tracker}[path.stem.split("-")[0]].load(path)
    eps = np.finfo(path.stem.split("-")[1]).eps
    for name, figure in figures(owner).items():
        # What is stored is exact; what is computed from it may round differently on another kernel path: k eps.
        np.testing.assert_allclose(figure, expected[name], rtol=64 * eps, atol=64 * eps, err_msg=name)
    assert owner.orthogonality_error() < 10 * eps * 2


def test_there_are_golden_files_of_both_classes_and_types():
    stems = {"-".join(path.stem.split("-")[:2]) for path in GOLDEN.glob("[bt]*.safetensors")}
    assert stems == {f"{name}-{dtype}" for name in ("basis", "tracker") for dtype in DTYPES}


if __name__ == "__main__":
    # Adds the golden files of a new schema under its number; those of older ones are never written again.
    for dtype in DTYPES:
        for name, owner in golden(dtype).items():
            path = GOLDEN / f"{name}-{dtype}-schema{sys.argv[1]}.safetensors"
            with path.open("xb") as file:
                shown = figures(owner)
                file.write(owner.to_bytes())
            path.with_suffix(".json").write_text(json.dumps(shown, indent=1) + "\n")
