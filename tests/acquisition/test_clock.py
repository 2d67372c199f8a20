"""When within the period a detection can be, and how a clock says so: gate, dither and ticks."""

import dataclasses
from fractions import Fraction

import numpy as np
import pytest

from recon.acquisition import GaussianPulse, TimeTags
from recon.errors import InputError

PERIOD = 1e-7
SETTINGS = {"shape": (4, 5), "trials": 1000, "period": PERIOD, "pulse": GaussianPulse(1e-9)}


@pytest.mark.parametrize("seed", [1, 2])
def test_the_background_of_the_counts_is_that_within_the_gate(seed):
    rng = np.random.default_rng(seed)
    background = rng.random((4, 5))
    time = 2e-8 + 6e-8 * rng.random(30)
    tags = TimeTags(
        [0] * 30, [0] * 30, time, gate=[2e-8, np.float32(8e-8)], background=background, **SETTINGS
    )
    np.testing.assert_array_equal(tags.background, background)
    np.testing.assert_allclose(tags.counts().background, background * 0.6, rtol=1e-6)
    assert tags.counts().trials == 1000
    assert tags.gate == (2e-8, float(np.float32(8e-8)))
    assert [type(end) for end in tags.gate] == [float, float]
    again = dataclasses.replace(tags, trials=7)
    np.testing.assert_array_equal(again.counts().background, tags.counts().background)


@pytest.mark.parametrize("gate", [None, (0, PERIOD)])
def test_a_gate_of_the_whole_period_changes_nothing(gate):
    background = np.random.default_rng(1).random((4, 5)).astype(np.float32)
    tags = TimeTags([0], [0], [0], gate=gate, background=background, **SETTINGS)
    assert tags.counts().background.tobytes() == background.tobytes()
    assert tags.counts().background.dtype == np.float32


@pytest.mark.parametrize(
    ("gate", "message"),
    [
        (
            (-1e-9, 5e-8),
            r"gate at \(0,\) is -1e-09; give None, or \(start, stop\) in seconds from 0 to period",
        ),
        ((0, 2e-7), r"gate at \(1,\) is 2e-07"),
        ((5e-8, 5e-8), r"gate is \(5e-08, 5e-08\); give a start before the stop"),
        ((5e-8, 1e-8), r"gate is \(5e-08, 1e-08\); give a start"),
        ((0, np.nan), r"gate at \(1,\) is nan"),
        (5e-8, r"gate has shape \(\); give \(start, stop\)"),
        ((0, 1e-8, 5e-8), r"gate has shape \(3,\)"),
        ((), "gate is empty"),
        ((2e-8, 5e-8), r"time at \(1,\) is 1e-08; give seconds within gate \(2e-08, 5e-08\), or leave"),
        ((0, 2e-8), r"time at \(0,\) is 3e-08; give seconds within gate"),
    ],
)
def test_impossible_gates_are_named(gate, message):
    with pytest.raises(InputError, match=message):
        TimeTags([0, 0], [0, 0], [3e-8, 1e-8], gate=gate, **SETTINGS)


def test_the_centre_of_an_interval_lies_in_the_gate():
    TimeTags([0], [0], [2.1e-8], gate=(2e-8, 5e-8), interval=1e-8, **SETTINGS)
    with pytest.raises(InputError, match="within gate"):
        TimeTags([0], [0], [1.9e-8], gate=(2e-8, 5e-8), interval=1e-8, **SETTINGS)


@pytest.mark.parametrize("seed", [1, 2])
def test_dither_stays_with_its_detection(seed):
    rng = np.random.default_rng(seed)
    row, column = rng.integers(0, 4, 500), rng.integers(0, 5, 500)
    time, dither = rng.random(500) * PERIOD, rng.normal(size=500).astype(np.float32)
    tags = TimeTags(row, column, time, dither=dither, **SETTINGS)
    order = np.lexsort((np.arange(500), column, row))
    np.testing.assert_array_equal(tags.time, time[order])
    np.testing.assert_array_equal(tags.dither, dither[order])
    assert tags.dither.dtype == np.float64
    assert not tags.dither.flags.writeable
    assert TimeTags(row, column, time, **SETTINGS).dither is None
    np.testing.assert_array_equal(dataclasses.replace(tags, trials=7).dither, tags.dither)


@pytest.mark.parametrize(
    ("dither", "message"),
    [
        ([0, np.nan], r"dither at \(1,\) is nan; give a time in seconds"),
        ([0, np.inf], r"dither at \(1,\) is inf"),
        ([0], r"dither has shape \(1,\) and time \(2,\); give one delay per detection"),
        ([], r"dither has shape \(0,\) and time \(2,\)"),
        (0, r"dither has shape \(\) and time"),
        ([True, False], "dither holds bool"),
    ],
)
def test_impossible_dithers_are_named(dither, message):
    with pytest.raises(InputError, match=message):
        TimeTags([0, 0], [0, 0], [0, 0], dither=dither, **SETTINGS)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_the_gate_is_one_of_true_times(seed):
    """Detections are drawn within the gate, delayed and read modulo the period: accepted; others: not."""
    rng = np.random.default_rng(seed)
    start, stop = np.sort(rng.random(2)) * PERIOD
    true = start + (stop - start) * rng.random(400)
    dither = rng.normal(size=400) * 3 * PERIOD
    read = np.remainder(true + dither, PERIOD)
    zeros = np.zeros(400, int)
    tags = TimeTags(zeros, zeros, read, dither=dither, gate=(start, stop), **SETTINGS)
    np.testing.assert_allclose(np.remainder(tags.time - tags.dither, PERIOD), true, atol=1e-6 * PERIOD)

    beyond = stop + (PERIOD - (stop - start)) * rng.uniform(0.01, 0.99)
    read[7] = np.remainder(beyond + dither[7], PERIOD)
    with pytest.raises(InputError, match=r"time at \(7,\) is .*; give seconds within gate .* once dither"):
        TimeTags(zeros, zeros, read, dither=dither, gate=(start, stop), **SETTINGS)


def test_a_clock_may_round_a_dithered_time_out_of_the_gate():
    """True time 20 ns, delay 4 ns, ticks of 10 ns: read as 25 ns, 21 ns without the delay, or 15 and 19."""
    gate = {"gate": (2e-8, 5e-8), "interval": 1e-8}
    TimeTags([0, 0], [0, 0], [1.5e-8, 2.5e-8], dither=[-4e-9, 4e-9], **gate, **SETTINGS)
    with pytest.raises(InputError, match="within gate"):
        TimeTags([0], [0], [1.5e-8], dither=[1e-9], **gate, **SETTINGS)


@pytest.mark.parametrize("tick", [25e-12, 4e-12, 1e-9 / 3, 3.3e-8, PERIOD])
def test_ticks_are_centres_of_intervals(tick):
    last = int(Fraction(PERIOD) / Fraction(tick) - Fraction(1, 2))
    ticks = np.unique([0, last // 3, last - (last > 0)])
    zeros = np.zeros(ticks.size, np.uint8)
    tags = TimeTags.from_ticks(zeros, zeros, ticks.astype(np.uint32), tick=tick, background=0.5, **SETTINGS)
    exact = [float((int(n) + Fraction(1, 2)) * Fraction(tick)) for n in ticks]
    np.testing.assert_allclose(tags.time, exact, rtol=1e-15)
    assert (tags.interval, tags.period, tags.background) == (tick, PERIOD, 0.5)
    with pytest.raises(InputError, match=rf"ticks at \(0,\) is {last + 1}; give whole numbers from 0 to"):
        TimeTags.from_ticks([0], [0], [last + 1], tick=tick, **SETTINGS)


@pytest.mark.parametrize(
    ("ticks", "tick", "message"),
    [
        (
            [100],
            1e-9,
            r"ticks at \(0,\) is 100; give whole numbers from 0 to 99, ticks with their centre before",
        ),
        ([-1], 1e-9, r"ticks at \(0,\) is -1; give"),
        ([0.5], 1e-9, r"ticks at \(0,\) is 0\.5; give whole numbers"),
        ([0], 0, r"tick is 0\.0; give seconds above 0 and up to period"),
        ([0], 2e-7, "tick is 2e-07; give seconds above 0"),
        ([0, 1], 1e-9, r"row has shape \(1,\), column \(1,\) and time \(2,\)"),
    ],
)
def test_impossible_ticks_are_named(ticks, tick, message):
    with pytest.raises(InputError, match=message):
        TimeTags.from_ticks([0], [0], ticks, tick=tick, **SETTINGS)


def test_no_ticks_at_all():
    assert TimeTags.from_ticks([], [], [], tick=1e-12, **SETTINGS).time.shape == (0,)
