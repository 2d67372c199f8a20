"""Time tags: how they are sorted and counted, and what is refused."""

import dataclasses

import numpy as np
import pytest

from recon.acquisition import Counts, GaussianPulse, SampledPulse, TimeTags
from recon.errors import InputError

PERIOD = 1e-7
SETTINGS = {"shape": (4, 5), "trials": 1000, "period": PERIOD, "pulse": GaussianPulse(1e-9)}


def random_tags(seed, shape, number):
    rng = np.random.default_rng(seed)
    return rng.integers(0, shape[0], number), rng.integers(0, shape[1], number), rng.random(number) * PERIOD


@pytest.mark.parametrize("shape", [(4, 5), (1, 3), (300, 700), (3, 70000), (70000, 3)])
@pytest.mark.parametrize("seed", [1, 2])
def test_tags_are_sorted_by_pixel_in_the_order_given(seed, shape):
    row, column, time = random_tags(seed, shape, 5000)
    tags = TimeTags(row, column, time, **{**SETTINGS, "shape": shape})
    order = np.lexsort((np.arange(5000), column, row))
    np.testing.assert_array_equal(tags.row, row[order])
    np.testing.assert_array_equal(tags.column, column[order])
    np.testing.assert_array_equal(tags.time, time[order])
    assert tags.start.dtype == np.int64
    assert tags.start.shape == (shape[0] * shape[1] + 1,)
    pixel = row[order] * shape[1] + column[order]
    np.testing.assert_array_equal(tags.start, np.searchsorted(pixel, np.arange(tags.start.size)))


@pytest.mark.parametrize("seed", [1, 2])
def test_counts_are_the_tags_of_every_pixel(seed):
    row, column, time = random_tags(seed, (4, 5), 60)
    mask = np.ones((4, 5), bool)
    mask[0, 0] = False
    gain = np.full((4, 5), 0.3, np.float32)
    tags = TimeTags(row, column, time, gain=gain, background=0.1, mask=mask, **{**SETTINGS, "trials": 2.5})
    expected = np.zeros((4, 5), int)
    np.add.at(expected, (row, column), 1)
    counts = tags.counts()
    assert isinstance(counts, Counts)
    assert counts.several_per_trial
    np.testing.assert_array_equal(counts.detections, expected)
    assert (counts.trials, counts.background) == (2.5, 0.1)
    np.testing.assert_array_equal(counts.gain, gain)
    np.testing.assert_array_equal(counts.exposure, np.where(mask, 2.5, 0))


def test_fields_are_read_only_copies():
    row, column, time = (np.sort(a) for a in random_tags(1, (1, 5), 20))
    offset = np.zeros((1, 5))
    tags = TimeTags(row, column, time, offset=offset, **{**SETTINGS, "shape": (1, 5)})
    for given, name in [(row, "row"), (column, "column"), (time, "time"), (offset, "offset")]:
        assert not np.shares_memory(given, getattr(tags, name))
        assert not getattr(tags, name).flags.writeable
    assert not tags.start.flags.writeable
    again = dataclasses.replace(tags, interval=1e-9)
    assert again.interval == 1e-9
    np.testing.assert_array_equal(again.time, tags.time)


def test_unambiguous_range():
    """c T / 2 = 14.98962 m for 100 ns: exact SI value of c."""
    tags = TimeTags([0], [0], [0], **SETTINGS)
    assert tags.unambiguous_range == pytest.approx(14.98962, abs=5e-6)
    assert dataclasses.replace(tags, refractive_index=1.5).unambiguous_range == pytest.approx(
        9.99308, abs=5e-6
    )


@pytest.mark.parametrize("kind", [list, lambda _: np.zeros(0, np.float32), lambda _: np.zeros(0, np.uint16)])
def test_nothing_may_have_been_detected(kind):
    tags = TimeTags(*[kind(())] * 3, dither=kind(()), gate=(0, 1e-8), **SETTINGS)
    assert (tags.row.dtype, tags.column.dtype, tags.time.dtype) == (np.int32, np.int32, np.float64)
    assert tags.dither.dtype == np.float64
    assert tags.time.shape == (0,)
    assert not tags.start.any()
    assert tags.start.shape == (21,)
    np.testing.assert_array_equal(tags.counts().detections, np.zeros((4, 5)))


def test_times_up_to_but_not_including_the_period():
    last = np.nextafter(PERIOD, 0)
    assert TimeTags([0, 0], [0, 0], [0.0, last], **SETTINGS).time.tolist() == [0.0, last]
    with pytest.raises(InputError, match=r"time at \(1,\) is 1e-07; give seconds from 0 to less than period"):
        TimeTags([0, 0], [0, 0], [0.0, PERIOD], **SETTINGS)


@pytest.mark.parametrize(
    ("row", "column", "time", "message"),
    [
        ([0, 4], [0, 0], [0, 0], r"row at \(1,\) is 4; give whole numbers from 0 to 3"),
        ([0, -1], [0, 0], [0, 0], r"row at \(1,\) is -1; give"),
        ([0, 1.5], [0, 0], [0, 0], r"row at \(1,\) is 1\.5; give"),
        ([0, 0], [5, 0], [0, 0], r"column at \(0,\) is 5; give whole numbers from 0 to 4"),
        ([0, 0], [2**40, 0], [0, 0], r"column at \(0,\) is 1099511627776; give"),
        ([0, 0], [0, 0], [0, -1e-12], r"time at \(1,\) is -1e-12; give seconds"),
        ([0, 0], [0, 0], [np.nan, 0], r"time at \(0,\) is nan; give seconds"),
        ([0, 0], [0, 0], [np.inf, 0], r"time at \(0,\) is inf; give seconds"),
        ([0, 0], [0, 0], [0], r"row has shape \(2,\), column \(2,\) and time \(1,\)"),
        ([[0]], [[0]], [[0]], r"row has shape \(1, 1\)"),
        ([], [0], [0], r"row has shape \(0,\), column \(1,\)"),
        (np.zeros((0, 2)), [], [], "row is empty"),
        (np.ma.masked_all(0), [], [], "row is a masked array"),
        (np.zeros(0, bool), [], [], "row holds bool"),
        ([], [], [[]], "time is empty"),
        ([True], [0], [0], "row holds bool"),
        ([0], [0], ["now"], "time holds str"),
    ],
)
def test_impossible_tags_are_named(row, column, time, message):
    with pytest.raises(InputError, match=message):
        TimeTags(row, column, time, **SETTINGS)


@pytest.mark.parametrize(
    ("setting", "value", "message"),
    [
        ("period", 0, r"period is 0\.0; give a time in seconds"),
        ("period", np.nan, "period is nan"),
        ("pulse", 1e-9, "pulse is float; give a GaussianPulse or a SampledPulse"),
        ("pulse", GaussianPulse, "pulse is type"),
        ("shape", (4,), r"shape has 1 entries; give \(rows, columns\)"),
        ("shape", 4, "shape has 1 entries"),
        ("shape", (0, 5), r"shape at \(0,\) is 0"),
        ("shape", (10**6, 10**6), "1000000000000 pixels; give at most"),
        ("shape", (10**60, 1), "shape "),
        ("trials", 0, "trials is 0 in every usable pixel"),
        ("trials", -1, r"trials is -1\.0"),
        (
            "trials",
            np.pad([[0]], ((0, 3), (0, 4)), constant_values=9),
            r"detections at \(0, 0\) is 1 where trials is 0",
        ),
        ("gain", 0, r"gain is 0\.0"),
        ("background", np.ones((5, 4)), r"background has shape \(5, 4\)"),
        ("mask", np.zeros((4, 5), bool), "mask is False everywhere"),
        ("time_zero", np.inf, "time_zero is inf"),
        ("offset", np.full((4, 5), np.nan), r"offset at \(0, 0\) is nan"),
        ("refractive_index", 0.5, r"refractive_index is 0\.5; give a refractive index"),
        ("interval", 0, r"interval is 0\.0; give None, or seconds above 0"),
        ("interval", 2e-7, "interval is 2e-07; give None, or seconds above 0 and up to period"),
    ],
)
def test_impossible_settings_are_named(setting, value, message):
    with pytest.raises(InputError, match=message):
        TimeTags([0], [0], [0], **{**SETTINGS, setting: value})


def test_sampled_pulses_are_accepted():
    pulse = SampledPulse([0, 1e-9, 3e-9], [0, 1, 0])
    assert TimeTags([0], [0], [0], **{**SETTINGS, "pulse": pulse}).pulse is pulse
