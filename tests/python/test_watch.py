"""The monitoring loop as Python sees it."""

import threading

import numpy as np
import pytest

import perpend
from perpend import Watch

CHANNELS = 10
NAMES = [f"probe_{letter}" for letter in "abcdefghij"]


def healthy(count, seed=0, channels=CHANNELS):
    """Rows of three shared movements on noise, each channel at its own level."""
    rng = np.random.default_rng(seed)
    mixing = np.random.default_rng(99).standard_normal((3, channels))
    movement = rng.standard_normal((count, 3)) * [2, 1.5, 1]
    return 10 * np.arange(channels) + movement @ mixing + 0.4 * rng.standard_normal((count, channels))


@pytest.fixture
def watch():
    watch = Watch(CHANNELS, NAMES)
    watch.settle_on(healthy(400))
    return watch


def test_the_loop_of_the_documentation_settles_alarms_and_names_its_suspect():
    watch = Watch(channels=CHANNELS, names=NAMES, memory=5_000, settle=200, false_alarm=1e-3)
    rows = healthy(400, 1)
    rows[300:, 4] += 8
    phases = set()
    for tick, row in enumerate(rows):
        reading = watch.tick(row)
        phases.add(reading.phase)
        assert reading.tick == tick
        assert not reading.alarm or tick >= 302
    assert phases >= {"settling", "healthy", "exceeding", "alarmed"}
    assert reading.alarm
    (name, share), *others = reading.suspects(3)
    assert name == "probe_e"
    assert 0.5 < share <= 1
    assert all(share >= other for _, other in others)
    event = watch.events[0]
    assert event["start"] == 302
    assert event["end"] is None
    assert event["suspects"][0][0] == "probe_e"
    assert "spe" in event["exceeds"]


def test_a_reading_does_not_change_when_the_watch_goes_on(watch):
    rows = healthy(300, 2)
    reading = watch.tick(rows[0])
    before = (reading.spe, reading.t2, reading.contributions().tolist(), reading.suspects(5))
    watch.replay(rows)
    assert before == (reading.spe, reading.t2, reading.contributions().tolist(), reading.suspects(5))


def test_contributions_have_a_channel_each_and_sum_to_the_spe(watch):
    reading = watch.tick(healthy(1, 3)[0])
    contributions = reading.contributions()
    assert contributions.shape == (CHANNELS,)
    np.testing.assert_allclose(contributions.sum(), reading.spe, rtol=40 * np.finfo(float).eps)


def test_expected_lies_beside_the_row_in_its_own_units(watch):
    rows = healthy(200, 6)
    readings = [watch.tick(row) for row in rows]
    off = rows - [reading.expected() for reading in readings]
    contributions = np.array([reading.contributions() for reading in readings])
    spread = healthy(400).std(axis=0)
    rounding = 1e3 * np.finfo(float).eps * np.abs(rows).max()
    np.testing.assert_allclose(np.abs(off), spread * np.sqrt(contributions), rtol=0, atol=rounding)


def test_expected_fills_gaps_and_is_nothing_where_nothing_was_judged():
    rows = healthy(400, 7)
    rows[:, 2] = 4.0
    watch = Watch(CHANNELS, settle=300)
    assert np.isnan(watch.tick(rows[0]).expected()).all()
    assert watch.energies.shape == (0,)
    watch.replay(rows[1:300])
    row, missing = rows[300].copy(), rows[300].copy()
    missing[6] = np.nan
    whole, filled = watch.copy().tick(row).expected(), watch.tick(missing).expected()
    assert np.isnan(whole).tolist() == np.isnan(filled).tolist() == [channel == 2 for channel in range(CHANNELS)]
    assert abs(filled[6] - row[6]) < 3 * 0.4 * np.sqrt(2)
    assert np.isnan(watch.tick(np.full(CHANNELS, np.nan)).expected()).all()


def test_corrected_says_of_a_faulty_channel_what_the_others_do(watch):
    row = healthy(1, 8)[0]
    wrong = row.copy()
    wrong[7] += 30
    reading = watch.tick(wrong)
    assert reading.suspects(1)[0][0] == "probe_h"
    assert abs(reading.corrected()[7] - row[7]) < 4 * 0.4
    assert abs(reading.expected()[7] - row[7]) > 4 * 0.4


def test_energies_are_descending_one_an_axis_and_a_copy(watch):
    energies = watch.energies
    assert energies.shape == (watch.rank,)
    assert (np.diff(energies) < 0).all()
    assert energies.sum() < CHANNELS
    energies[:] = 0
    assert (watch.energies > 0).all()


def test_replay_gives_arrays_named_as_the_readings():
    rows = healthy(600, 4)
    rows[500:, 1] += 5
    rows[550, 2] = np.nan
    rows[300:340, 3] = rows[300, 3]
    rows[400:440, 4] = np.nan
    arrays = Watch(CHANNELS, settle=100).replay(rows)
    watch = Watch(CHANNELS, settle=100)
    readings = [watch.tick(row) for row in rows]
    for name in ("phase", "alarm", "tick", "rank"):
        assert arrays[name].tolist() == [getattr(reading, name) for reading in readings]
    for name in ("spe", "spe_limit", "t2", "t2_limit", "spe_smooth", "t2_smooth_limit", "weight", "widening"):
        np.testing.assert_array_equal(arrays[name], [getattr(reading, name) for reading in readings])
    drift = [np.nan if reading.drift is None else reading.drift for reading in readings]
    np.testing.assert_array_equal(arrays["drift"], drift)
    assert arrays["missing"].tolist() == [len(reading.missing) for reading in readings]
    assert arrays["contributions"].shape == (600, CHANNELS)
    for name in ("stuck", "vanished"):
        flags = [[channel in getattr(reading, name) for channel in watch.names] for reading in readings]
        np.testing.assert_array_equal(arrays[name], flags)
    assert arrays["exceeds"].shape == (600, 4)
    np.testing.assert_array_equal(arrays["exceeds"].any(axis=1), [bool(r.exceeds) for r in readings])


def test_replay_of_no_rows_gives_empty_arrays_of_the_same_types(watch):
    empty = watch.replay(np.empty((0, CHANNELS)))
    full = watch.replay(healthy(3, 5))
    assert empty.keys() == full.keys()
    for name, array in empty.items():
        assert len(array) == 0
        assert array.dtype == full[name].dtype


def test_gaps_are_named_and_bad_rows_refused(watch):
    row = healthy(1, 6)[0]
    row[[2, 7]] = np.nan
    assert watch.tick(row).missing == ["probe_c", "probe_h"]
    assert np.isnan(watch.tick(np.full(CHANNELS, np.nan)).spe)
    row[3] = np.inf
    with pytest.raises(ValueError, match="got inf at index 3"):
        watch.tick(row)
    with pytest.raises(ValueError, match="expected 10 entries, got 9"):
        watch.tick(row[:9])
    rows = healthy(5, 7)
    rows[4, 0] = -np.inf
    ticks = watch.ticks
    with pytest.raises(ValueError, match="row 4"):
        watch.replay(rows)
    with pytest.raises(ValueError, match="row 4"):
        watch.settle_on(rows)
    with pytest.raises(TypeError):
        watch.tick(["a"] * CHANNELS)
    assert watch.ticks == ticks


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"rank": CHANNELS}, "rank: expected 1 to channels - 1 = 9"),
        ({"memory": 0.5}, "memory"),
        ({"settle": 5}, "settle: expected 20 rows or more"),
        ({"false_alarm": 0}, "false_alarm"),
        ({"confirm": 4, "of": 3}, "confirm: expected 1 to of = 3"),
        ({"hold": 0}, "hold"),
        ({"settle": -1}, "-1"),
        ({"limits": "guess"}, "limits"),
        ({"names": ["a"]}, "names: expected 10, got 1"),
        ({"names": ["a"] * CHANNELS}, "got a twice"),
    ],
)
def test_settings_out_of_range_say_what_was_expected(arguments, message):
    with pytest.raises(ValueError, match=message):
        Watch(CHANNELS, **arguments)
    with pytest.raises(TypeError):
        Watch(CHANNELS, dtype="int32")


def test_inputs_of_any_kind_give_the_same_reading():
    rows = healthy(400)
    probe = np.round(healthy(1, 8)[0], 3)
    kinds = [
        probe,
        probe.tolist(),
        probe.astype(">f8"),
        np.repeat(probe, 2)[::2],
        np.ma.masked_array(probe, mask=False),
    ]
    spe = []
    for kind in kinds:
        watch = Watch(CHANNELS)
        watch.settle_on(np.asfortranarray(rows))
        spe.append(watch.tick(kind).spe)
    assert len(set(spe)) == 1


def test_the_operator_can_freeze_resume_and_accept(watch):
    watch.freeze()
    assert watch.frozen
    assert watch.tick(healthy(1, 9)[0]).weight == 0
    watch.resume()
    assert watch.tick(healthy(1, 9)[0]).weight == 1
    shifted = healthy(30, 10)
    shifted[:, 0] += 9
    watch.replay(shifted)
    assert watch.phase == "alarmed"
    watch.accept()
    assert watch.events[-1]["end"] is not None
    assert watch.tick(shifted[0]).phase == "adopting"


def test_constant_stuck_and_vanished_channels_are_named():
    rows = healthy(300, 11)
    rows[:, 5] = 4.2
    watch = Watch(CHANNELS, NAMES)
    watch.settle_on(rows)
    assert watch.constant == ["probe_f"]
    more = healthy(20, 12)
    more[:, 5] = 4.2
    more[:, 1] = more[0, 1]
    more[:, 8] = np.nan
    for row in more:
        reading = watch.tick(row)
    assert reading.stuck == ["probe_b"]
    assert reading.vanished == ["probe_i"]
    assert np.isfinite(reading.spe)


def test_threads_take_turns(watch):
    rows = healthy(500, 13)
    workers = [threading.Thread(target=lambda: [watch.tick(row) for row in rows]) for _ in range(4)]
    for worker in workers:
        worker.start()
    for worker in workers:
        worker.join()
    assert watch.ticks == 2000


def test_names_and_repr(watch):
    assert watch.names == NAMES
    assert Watch(3).names == ["channel_0", "channel_1", "channel_2"]
    assert "channels=10" in repr(watch)
    assert "healthy" in repr(watch.tick(healthy(1, 14)[0]))
    assert {"Watch", "Reading"} <= set(perpend.__all__)
