"""Frames of analog readings, with factors of the dose, and with frames that were lost."""

import numpy as np
import pytest

from recon.acquisition import Frames, MarkLaw
from recon.errors import InputError

LAW = MarkLaw(gain=30.0, variance=80.0, offset=10.0, noise=4.0)
CAPPED = MarkLaw(gain=30.0, offset=10.0, noise=4.0, ceiling=90.0)


@pytest.fixture(params=[1, 2])
def readings(request):
    return np.random.default_rng(request.param).normal(40.0, 30.0, (7, 4, 5))


@pytest.fixture(params=[1, 2])
def counts(request):
    return np.random.default_rng(request.param).integers(0, 9, (7, 4, 5)).astype(float)


@pytest.mark.parametrize("dtype", [np.float32, np.float64, ">f4", np.int16, np.uint16])
def test_readings_are_kept_as_float32(readings, dtype):
    given = np.abs(readings).astype(dtype)
    frames = Frames(given, 0.1, law=LAW)
    assert frames.counts.dtype == np.float32
    assert not frames.counts.flags.writeable
    np.testing.assert_array_equal(frames.counts, given.astype(np.float32))
    assert frames.saturated == 0.0
    assert frames.dropped == ()


def test_negative_readings_need_a_law(readings):
    place = tuple(np.argwhere(readings < 0)[0].tolist())
    assert Frames(readings, 0.1, law=LAW).counts.min() < 0
    with pytest.raises(InputError, match=r"readings, not counts, law=recon\.MarkLaw"):
        Frames(np.round(readings), 0.1)
    counts = np.zeros((7, 4, 5))
    counts[place] = -2
    with pytest.raises(InputError, match=rf"counts at \({place[0]}, {place[1]}, {place[2]}\) is -2"):
        Frames(counts, 0.1)


def test_saturated_readings_are_the_ceiling(readings):
    mask = np.ones((4, 5), bool)
    mask[1, 2] = False
    frames = Frames(readings, 0.1, mask, law=CAPPED)
    full = readings >= 90.0
    assert full.any()
    np.testing.assert_array_equal(frames.counts, np.where(full, 90.0, readings).astype(np.float32))
    assert frames.saturated == pytest.approx(full[:, mask].mean(), rel=1e-12)


@pytest.mark.parametrize(("value", "shown"), [(np.nan, "nan"), (np.inf, "inf"), (-1e300, r"-1e\+300")])
def test_impossible_readings_are_named(readings, value, shown):
    readings[6, 3, 4] = value
    for law in (LAW, CAPPED):
        with pytest.raises(InputError, match=rf"counts at \(6, 3, 4\) is {shown}; give finite readings"):
            Frames(readings, 0.1, law=law)


@pytest.mark.parametrize("law", [30.0, {"gain": 1.0}, MarkLaw])
def test_what_is_no_law_is_refused(readings, law):
    with pytest.raises(InputError, match=r"law is \w+; give a recon\.MarkLaw"):
        Frames(readings, 0.1, law=law)


def test_factors_of_the_dose(counts):
    assert np.array_equal(Frames(counts, 0.1).factors, np.ones((7, 4), np.float32))
    each, lines = np.linspace(0.5, 1.5, 7), np.linspace(0.5, 1.5, 28).reshape(7, 4)
    for current, factors in [(each, np.repeat(each[:, None], 4, axis=1)), (lines, lines)]:
        frames = Frames(counts, 0.1, current=current)
        np.testing.assert_array_equal(frames.current, current)
        assert not frames.current.flags.writeable
        assert not np.shares_memory(frames.current, current)
        assert frames.factors.dtype == np.float32
        np.testing.assert_array_equal(frames.factors, factors.astype(np.float32))


@pytest.mark.parametrize(
    ("current", "message"),
    [
        (np.ones(9), "current has 9 entries for 7 frames; give one factor of the dose for each frame"),
        (np.ones((4, 7)), "current has 4 entries for 7 frames"),
        (np.ones((7, 5)), "current has 5 entries a frame for 4 rows"),
        (np.ones((7, 4, 5)), r"current has shape \(7, 4, 5\)"),
        (1.0, r"current has shape \(\)"),
        ([1.0, 1, 1, 0, 1, 1, 1], r"current at \(3,\) is 0\.0; give factors of the dose"),
        ([1.0, 1, 1, np.nan, 1, 1, 1], r"current at \(3,\) is nan"),
        (-np.ones((7, 4)), r"current at \(0, 0\) is -1\.0"),
        (np.full(7, 1e-12), r"current at \(0,\) is 1e-12; .* such as current / current\.mean\(\)"),
        (["1"] * 7, "current holds"),
    ],
)
def test_impossible_factors_are_refused(counts, current, message):
    with pytest.raises(InputError, match=message):
        Frames(counts, 0.1, current=current)


@pytest.mark.parametrize("law", [None, LAW])
@pytest.mark.parametrize("lines", [False, True])
def test_lost_frames_are_dropped_with_their_factors(counts, law, lines):
    counts[[2, 5]] = np.nan
    counts[5, 0, 1] = -np.inf
    current = np.arange(1.0, 29.0).reshape(7, 4) if lines else np.arange(1.0, 8.0)
    current[2] = np.nan  # its monitor was lost too
    with pytest.warns(UserWarning, match=r"no finite number in frames 2, 5 of 7; they are left out") as said:
        frames = Frames(counts, 0.1, law=law, current=current)
    assert len(said) == 1
    assert said[0].filename == __file__
    assert frames.dropped == (2, 5)
    assert frames.frames == 5
    kept = [0, 1, 3, 4, 6]
    np.testing.assert_array_equal(frames.counts, counts[kept])
    np.testing.assert_array_equal(frames.current, current[kept])
    assert not frames.counts.flags.writeable
    assert not frames.current.flags.writeable
    assert np.isnan(counts[2]).all(), "the array given was changed"


def test_places_are_those_of_the_stack_given(counts):
    counts[2] = np.nan
    counts[4, 1, 1] = np.nan
    with pytest.raises(InputError, match=r"counts at \(4, 1, 1\) is nan"):
        Frames(counts, 0.1)
    counts[4, 1, 1] = 0
    with pytest.raises(InputError, match=r"current at \(6,\) is 0\.0"):
        Frames(counts, 0.1, current=[1.0, 1, 1, 1, 1, 1, 0])


@pytest.mark.parametrize("law", [None, LAW])
def test_a_stack_without_numbers_is_refused(law):
    with pytest.raises(InputError, match="counts holds no finite number in any frame"):
        Frames(np.full((3, 2, 2), np.nan), 0.1, law=law)


@pytest.mark.parametrize(
    ("dose", "message"),
    [
        (None, "dose is None; give the expected primaries per pixel and frame"),
        (0, r"dose is 0\.0; give the expected primaries per pixel and frame"),
        (np.zeros((4, 5)), r"dose at \(0, 0\) is 0\.0; give the expected primaries"),
    ],
)
def test_a_dose_that_is_missing_is_asked_for(counts, dose, message):
    with pytest.raises(InputError, match=message):
        Frames(counts, dose)
