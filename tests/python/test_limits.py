"""Limits keep the rate that was asked for, and the gate gives way when it should, on simulated streams."""

import numpy as np
import pytest

from perpend import Watch

CHANNELS = 24
SETTLE = 500


def stream(count, seed, correlation=0.0, period=None):
    """Rows of four shared movements and a noise of each channel's own size; `period` adds a slow swing and turn."""
    rng = np.random.default_rng(seed)
    mixing = rng.standard_normal((4, CHANNELS)) * [[2], [1.5], [1], [0.7]]
    size = 0.4 * (0.5 + rng.random(CHANNELS))
    parts = rng.standard_normal((count, 4 + CHANNELS))
    if correlation:
        for tick in range(1, count):
            parts[tick] = correlation * parts[tick - 1] + np.sqrt(1 - correlation**2) * parts[tick]
    rows = parts[:, :4] @ mixing + parts[:, 4:] * size
    if period:
        angle = 2 * np.pi * np.arange(count)[:, None] / period
        rows += np.sin(angle + 2 * np.pi * rng.random(CHANNELS)) * rng.standard_normal(CHANNELS)
        rows += (parts[:, :4] * np.sin(angle)) @ rng.standard_normal((4, CHANNELS)) * 0.5
    return rows


@pytest.mark.parametrize("limits", ["moments", "empirical", "spectrum"])
@pytest.mark.parametrize(
    ("options", "factor"),
    [({}, 1.5), ({"correlation": 0.5}, 2.5), ({"period": 100_000}, 2.5)],
    ids=["independent", "correlated", "drifting"],
)
def test_rows_beyond_a_limit_are_as_many_as_asked(limits, options, factor):
    asked = 0.01
    beyond = []
    for seed in range(3):
        readings = Watch(CHANNELS, false_alarm=asked, limits=limits).replay(stream(SETTLE + 12_000, seed, **options))
        beyond.append(readings["exceeds"][SETTLE:].any(axis=1).mean())
    # 36 000 rows, some 360 beyond: 5 % of sampling error, two and a half times that where episodes last.
    assert asked / factor / 1.1 < np.mean(beyond) < asked * factor, beyond


def test_limits_from_few_rows_are_wide_not_wrong():
    beyond, widenings = [], []
    for seed in range(20):
        readings = Watch(CHANNELS, settle=60, false_alarm=0.01).replay(stream(1_060, 50 + seed))
        beyond.append(readings["exceeds"][60:].any(axis=1).mean())
        widenings.append(readings["widening"][[60, -1]])
    assert np.mean(beyond) < 0.015
    first, last = np.mean(widenings, axis=0)
    assert first > 1.1 * last


def test_gaps_do_not_raise_the_rate():
    rng = np.random.default_rng(3)
    rows = stream(SETTLE + 10_000, 4)
    rows[rng.random(rows.shape) < 0.2] = np.nan
    readings = Watch(CHANNELS, false_alarm=0.01).replay(rows)
    assert readings["exceeds"][SETTLE:].any(axis=1).mean() < 0.015


def test_a_smoothed_limit_sees_a_small_lasting_shift_that_single_rows_do_not():
    rows = stream(8_000, 5)
    rows[6_000:, 3] += 1.4
    readings = Watch(CHANNELS).replay(rows)
    after = readings["exceeds"][6_050:6_300]
    assert after[:, 2].mean() > 2 * after[:, 0].mean()
    assert readings["alarm"][6_000:6_100].any()
    assert readings["alarm"][SETTLE:6_000].mean() < 0.002
