"""Time histograms: what they hold, and that their tags say the same."""

import dataclasses

import numpy as np
import pytest

import recon
from recon.acquisition import Counts, DeadTime, GaussianPulse, TimeHistogram, TimeTags, time_histogram
from recon.errors import InputError

PERIOD = 1e-7
SETTINGS = {"trials": 1000, "period": PERIOD, "pulse": GaussianPulse(1e-9), "bin_width": 1e-9}


def random_times(seed, first, stop, number=300):
    rng = np.random.default_rng(seed)
    return rng.integers(0, 3, number), rng.integers(0, 4, number), rng.uniform(first, stop, number)


@pytest.mark.parametrize("seed", [1, 2])
@pytest.mark.parametrize(
    ("first", "bins", "gate"), [(0.0, 100, None), (2e-8, 30, (2e-8, 5e-8)), (0, 64, (0, 6.4e-8))]
)
def test_the_tags_of_a_histogram_are_the_times_in_bins(seed, first, bins, gate):
    """Against numpy's histogram of known times: binning the tags again gives the same."""
    row, column, time = random_times(seed, first, first + bins * 1e-9)
    edges = first + 1e-9 * np.arange(bins + 1)
    cube = np.histogramdd((row, column, time), (np.arange(4) - 0.5, np.arange(5) - 0.5, edges))[0]
    histogram = TimeHistogram(cube.astype(int), first_edge=first, **SETTINGS)
    assert (histogram.shape, histogram.bins) == ((3, 4), bins)
    np.testing.assert_allclose(histogram.edges, edges, rtol=1e-14)
    tags = histogram.tags()
    assert isinstance(tags, TimeTags)
    assert tags.interval == 1e-9
    again = np.histogramdd(
        (tags.row, tags.column, tags.time), (np.arange(4) - 0.5, np.arange(5) - 0.5, edges)
    )[0]
    np.testing.assert_array_equal(again, cube)
    centres = (edges[1:] + edges[:-1]) / 2
    assert np.abs(tags.time[:, None] - centres).min(axis=1).max() < 1e-20
    assert (tags.gate is None) == (gate is None)
    if gate is not None:
        np.testing.assert_allclose(tags.gate, gate, rtol=1e-14, atol=1e-22)


def test_the_tags_have_the_settings_of_the_histogram():
    rng = np.random.default_rng(3)
    settings = SETTINGS | {
        "trials": rng.integers(90, 99, (3, 4)),
        "gain": rng.random((3, 4)) + 0.1,
        "background": rng.random((3, 4)),
        "mask": rng.random((3, 4)) < 0.5,
        "time_zero": -1e-9,
        "offset": rng.random((3, 4)) * 1e-9,
        "refractive_index": 1.33,
        "dead_time": DeadTime(5e-8, reset_every_period=True),
    }
    histogram = TimeHistogram(rng.poisson(0.1, (3, 4, 25)), first_edge=1e-8, **settings)
    tags = histogram.tags()
    for name in settings.keys() - {"bin_width"}:
        np.testing.assert_array_equal(getattr(tags, name), getattr(histogram, name), strict=True)
    assert tags.unambiguous_range == histogram.unambiguous_range
    for one, other in [(tags.counts(), histogram.counts())]:
        assert isinstance(other, Counts)
        assert other.several_per_trial
        for entry in dataclasses.fields(Counts):
            np.testing.assert_array_equal(getattr(one, entry.name), getattr(other, entry.name))
    np.testing.assert_array_equal(histogram.counts().detections, histogram.detections.sum(axis=2))
    np.testing.assert_allclose(histogram.counts().background, settings["background"] * 0.25, rtol=1e-12)


def test_nothing_may_have_been_detected():
    histogram = TimeHistogram(np.zeros((3, 4, 100), np.uint8), **SETTINGS)
    assert histogram.tags().time.shape == (0,)
    assert histogram.counts().detections.sum() == 0


@pytest.mark.parametrize(
    ("given", "kept"),
    [("u1", "u1"), (">u2", "u2"), ("i4", "i4"), ("i8", "u1"), ("f8", "u1")],
)
def test_numbers_are_kept_small_and_read_only(given, kept):
    detections = np.full((2, 2, 5), 7, given)
    histogram = TimeHistogram(detections, **SETTINGS)
    assert histogram.detections.dtype == np.dtype(kept)
    assert not histogram.detections.flags.writeable
    assert not np.shares_memory(histogram.detections, detections)
    assert recon.TimeHistogram is TimeHistogram


def test_sums_beyond_the_type_of_a_bin():
    histogram = TimeHistogram(np.full((1, 1, 100), 255, np.uint8), **SETTINGS)
    assert histogram.counts().detections.tolist() == [[25500]]
    assert histogram.tags().start.tolist() == [0, 25500]


@pytest.mark.parametrize("bins", [3, 7, 49, 1000, 4096])
def test_bins_that_cover_the_period_but_for_rounding_are_no_gate(bins):
    histogram = TimeHistogram(
        np.ones((1, 1, bins), int),
        **{**SETTINGS, "bin_width": PERIOD / bins, "first_edge": 1e-9 * PERIOD / bins},
    )
    assert histogram.gate is None
    assert histogram.tags().time.max() < PERIOD


def test_a_gap_that_is_no_rounding_is_a_gate():
    one = np.ones((1, 1, 100), int)
    assert TimeHistogram(one, **SETTINGS | {"bin_width": np.float32(1e-9)}).gate is None
    assert TimeHistogram(one, **SETTINGS | {"bin_width": 1e-9 * (1 - 1e-3)}).gate == (0, 1e-7 * (1 - 1e-3))
    assert TimeHistogram(one[:, :, 1:], first_edge=1e-9, **SETTINGS).gate == (1e-9, PERIOD)


@pytest.mark.parametrize(
    ("detections", "settings", "message"),
    [
        (np.ones((3, 4)), {}, r"detections has shape \(3, 4\); give a \(rows, columns, bins\) array"),
        (np.ones((3, 4, 0)), {}, "detections is empty"),
        (np.full((1, 1, 2), -1), {}, r"detections at \(0, 0, 0\) is -1; give whole numbers between 0 and"),
        (np.full((1, 1, 2), 0.5), {}, r"detections at \(0, 0, 0\) is 0\.5"),
        (np.full((1, 1, 2), 2**32), {}, r"detections at \(0, 0, 0\) is 4294967296"),
        (np.ones((1, 1, 101), int), {}, r"the 101 bins of detections run from 0\.0 s to 1\.01e-07 s; make"),
        (
            np.ones((1, 1, 5), int),
            {"first_edge": 96e-9},
            "first_edge is 9.6e-08 and bin_width 1e-09, so that",
        ),
        (np.ones((1, 1, 5), int), {"first_edge": -1e-11}, "first_edge is -1e-11"),
        (np.ones((1, 1, 5), int), {"first_edge": np.nan}, "first_edge is nan; give a time"),
        (
            np.ones((1, 1, 5), int),
            {"bin_width": 0},
            r"bin_width is 0\.0; give seconds above 0 and up to period",
        ),
        (np.ones((1, 1, 5), int), {"bin_width": 2e-7}, "bin_width is 2e-07; give seconds"),
        (np.ones((1, 1, 5), int), {"pulse": 3}, "pulse is int"),
        (np.ones((1, 1, 5), int), {"trials": np.ones((2, 1))}, r"trials has shape \(2, 1\)"),
        (np.ones((1, 1, 5), int), {"trials": 0}, "trials is 0"),
        (np.ones((1, 1, 5), int), {"background": -1}, r"background is -1\.0"),
        (np.ones((1, 1, 5), int), {"mask": np.zeros((1, 1), bool)}, "mask is False everywhere"),
    ],
)
def test_impossible_histograms_are_named(detections, settings, message):
    with pytest.raises(InputError, match=message):
        TimeHistogram(detections, **{**SETTINGS, **settings})


def test_more_tags_than_memory_holds_are_refused(monkeypatch):
    histogram = TimeHistogram(np.full((1, 2, 5), 2**32 - 1, np.uint32), **SETTINGS)
    monkeypatch.setattr(time_histogram, "memory_limit", lambda: 10**9)
    with pytest.raises(
        InputError, match=r"detections has a sum of 42949672950, more than \d+, .*; give fewer rows"
    ):
        histogram.tags()
