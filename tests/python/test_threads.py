"""One object in the hands of eight threads: the result is that of some order of their calls."""

import threading
import time

import numpy as np
import pytest

from perpend import Basis, Tracker, Watch

EPS = np.finfo(float).eps
THREADS = 8
RNG = np.random.default_rng(31)


def together(*tasks):
    """Runs each task in a thread of its own; raises what one of them raised, and fails where one does not end."""
    failures, start = [], threading.Barrier(len(tasks))

    def run(task):
        start.wait()
        try:
            task()
        except BaseException as failure:
            failures.append(failure)

    threads = [threading.Thread(target=run, args=(task,), daemon=True) for task in tasks]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(120)
    assert not any(thread.is_alive() for thread in threads), "a thread hangs"
    if failures:
        raise failures[0]


def test_adds_reads_saves_and_copies_of_a_basis_leave_every_vector_once(tmp_path):
    basis = Basis(64)
    vectors = RNG.standard_normal((THREADS, 8, 64))
    answers = RNG.standard_normal(64)

    def hammer(index):
        mine = vectors[index]
        for vector in mine[:4]:
            assert basis.add(vector).accepted
            copied = basis.copy()
            # Each a state of some moment, whole: factor and vectors belong together.
            restored = Basis.from_bytes(basis.to_bytes())
            for one in (copied, restored):
                assert one.orthogonality_error() <= 10 * EPS * np.sqrt(64)
                assert one.triangular.shape == (one.rank, one.rank)
                weights, norm = one.solve(answers)
                assert len(weights) == one.rank
                assert norm <= np.linalg.norm(answers)
            basis.save(tmp_path / f"state{index}")
            assert Basis.load(tmp_path / f"state{index}").rank <= 64
        assert basis.add_rows(mine[4:])[0].all()

    together(*(lambda index=index: hammer(index) for index in range(THREADS)))
    assert basis.rank == 64
    # The vectors stand in the columns of Q^T R in the order of their additions: some order of all of them.
    columns = basis.triangular.T @ basis.vectors
    order = [int(np.argmin(np.abs(vectors.reshape(64, 64) - column).max(axis=1))) for column in columns]
    assert sorted(order) == list(range(64))
    serial = Basis(64)
    for place in order:
        serial.add(vectors.reshape(64, 64)[place])
    np.testing.assert_allclose(basis.triangular, serial.triangular, rtol=0, atol=64 * 64 * EPS * 10)
    # Of one thread, the order is its own.
    for index in range(THREADS):
        places = [order.index(8 * index + number) for number in range(8)]
        assert places == sorted(places)


def test_updates_reads_saves_and_copies_of_a_tracker_give_the_scatter_of_all_rows(tmp_path):
    tracker = Tracker(12, 4)
    rows = RNG.standard_normal((THREADS, 300, 12)) * np.arange(1, 13)

    def hammer(index):
        mine = rows[index]
        for number, row in enumerate(mine[:100]):
            assert tracker.update(row)
            if number % 10 == 9:
                copied = Tracker.from_bytes(tracker.to_bytes())
                assert copied.samples == copied.total_weight
                assert copied.orthogonality_error() <= 1e-14
                energies, axes = tracker.energies, tracker.axes
                assert (np.diff(energies) <= 0).all()
                np.testing.assert_allclose(axes @ axes.T, np.eye(4), atol=1e-14)
                tracker.save(tmp_path / f"state{index}")
                assert Tracker.load(tmp_path / f"state{index}").samples >= number
        tracker.update_rows(mine[100:])

    together(*(lambda index=index: hammer(index) for index in range(THREADS)))
    assert tracker.samples == THREADS * 300
    # Nothing is forgotten and nothing given up, so that rows commute.
    everything = rows.reshape(-1, 12)
    exact = np.linalg.eigvalsh(np.cov(everything.T, bias=True))[::-1]
    np.testing.assert_allclose(tracker.energies, exact[:4], rtol=2400 * EPS)
    np.testing.assert_allclose(tracker.mean, everything.mean(axis=0), rtol=0, atol=2400 * EPS)


def healthy(rng, count):
    movement = rng.standard_normal((count, 2))
    return movement @ np.random.default_rng(1).standard_normal((2, 6)) + 0.3 * rng.standard_normal((count, 6))


def test_ticks_of_a_watch_are_those_of_the_serial_stream_in_the_order_of_their_numbers(tmp_path):
    probe = healthy(np.random.default_rng(77), 1)[0]
    watch, serial = Watch(6, settle=100), Watch(6, settle=100)
    readings, stop = {}, threading.Event()

    def tick(seed):
        for row in healthy(np.random.default_rng(seed), 400):
            reading = watch.tick(row)
            assert reading.tick not in readings
            readings[reading.tick] = (row, reading)
            if reading.phase != "settling":
                np.testing.assert_allclose(reading.contributions().sum(), reading.spe, rtol=24 * EPS)

    def read(path):
        before = 0
        while not stop.is_set():
            ticks, phase, rank = watch.ticks, watch.phase, watch.rank
            assert before <= ticks
            assert phase == "settling" or watch.rank > 0
            assert 0 <= rank < 6
            repr(watch)
            before = ticks
            # Each a state of some moment, whole.
            copied = watch.copy()
            watch.save(path)
            restored = Watch.load(path)
            assert ticks <= copied.ticks <= restored.ticks <= watch.ticks
            for one in (copied, restored):
                assert one.tick(probe).tick == one.ticks - 1

    def all_ticks():
        together(*(lambda seed=seed: tick(seed) for seed in range(6)))
        stop.set()

    together(all_ticks, lambda: read(tmp_path / "one"), lambda: read(tmp_path / "other"))
    assert watch.ticks == len(readings) == 2400
    for number in range(2400):
        row, reading = readings[number]
        again = serial.tick(row)
        assert (again.phase, again.alarm) == (reading.phase, reading.alarm)
        np.testing.assert_array_equal(
            [again.spe, again.spe_limit, again.t2, again.t2_limit, again.weight],
            [reading.spe, reading.spe_limit, reading.t2, reading.t2_limit, reading.weight],
        )
        np.testing.assert_array_equal(again.contributions(), reading.contributions())


def test_replays_of_a_watch_from_eight_threads_count_every_row_and_keep_each_reading_whole():
    watch = Watch(6, settle=100)
    found = []

    def replay(seed):
        rows = healthy(np.random.default_rng(seed), 3000)
        arrays = watch.replay(rows)
        found.append(arrays["tick"])
        judged = np.isfinite(arrays["spe"])
        sums = arrays["contributions"][judged].sum(axis=1)
        np.testing.assert_allclose(sums, arrays["spe"][judged], rtol=24 * EPS)
        watch.freeze()
        watch.resume()
        watch.accept()

    together(*(lambda seed=seed: replay(seed) for seed in range(THREADS)))
    assert sorted(np.concatenate(found)) == list(range(THREADS * 3000))


def filled(dim, rank):
    basis = Basis(dim, rank)
    basis.add_rows(RNG.standard_normal((rank, dim)))
    return basis


BLOCK_CALLS = {
    "Basis.add_rows": lambda: Basis(1000, 400).add_rows,
    "Basis.split_rows": lambda: filled(1000, 300).split_rows,
    "Tracker.update_rows": lambda: Tracker(1000, 20).update_rows,
    "Watch.replay": lambda: Watch(1000, settle=50, rank=5).replay,
    "Watch.settle_on": lambda: Watch(1000, rank=5).settle_on,
}


@pytest.mark.parametrize("make", BLOCK_CALLS.values(), ids=BLOCK_CALLS)
def test_a_block_call_lets_other_threads_go_on(make):
    call, rows = make(), RNG.standard_normal((1500, 1000))
    done, progress = threading.Event(), []

    def count():
        while not done.is_set():
            progress.append(time.perf_counter())
            time.sleep(0)

    counting = threading.Thread(target=count, daemon=True)
    counting.start()
    while not progress:
        time.sleep(0.001)
    begun = time.perf_counter()
    call(rows)
    ended = time.perf_counter()
    done.set()
    counting.join(60)
    # With the interpreter held throughout it would be none, or the one that was under way.
    assert sum(begun < moment < ended for moment in progress) > 10
