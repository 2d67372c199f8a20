"""Counts: what is kept, in which type, and what is refused."""

import dataclasses

import numpy as np
import pytest

from recon.acquisition import Counts
from recon.errors import InputError

SHAPE = (5, 6)


@pytest.fixture(params=[1, 2, 3])
def detections(request):
    return np.random.default_rng(request.param).integers(0, 5, SHAPE)


def changed(array, place, value):
    array = np.array(array, dtype=np.result_type(array, type(value)))
    array[place] = value
    return array


@pytest.mark.parametrize(
    "dtype", [np.uint8, np.int16, ">i4", np.int64, np.uint64, np.float16, float, np.longdouble]
)
def test_any_type_of_whole_number_is_kept_as_int32(detections, dtype):
    counts = Counts(detections.astype(dtype), 100)
    assert counts.detections.dtype == np.dtype(np.int32)
    np.testing.assert_array_equal(counts.detections, detections)


def test_counts_beyond_int32_are_kept_exactly():
    counts = Counts([[2**53, 3]], 2.0**60)
    assert counts.detections.tolist() == [[2**53, 3]]


def test_fields_are_read_only_copies(detections):
    given = {name: np.full(SHAPE, 7.0) for name in ("trials", "gain", "background")}
    counts = Counts(detections, mask=np.ones(SHAPE, bool), **given)
    for name in (*given, "detections", "mask"):
        kept = getattr(counts, name)
        assert not np.shares_memory(kept, given.get(name, detections))
        with pytest.raises(ValueError, match="read-only"):
            kept[0, 0] = 0
    with pytest.raises(dataclasses.FrozenInstanceError):
        counts.gain = 2.0


@pytest.mark.parametrize(
    ("given", "kept"),
    [(np.float16, np.float32), (np.float32, np.float32), (np.uint16, np.float32), (np.int64, np.float64)],
)
def test_maps_keep_single_precision_where_it_is_exact(detections, given, kept):
    counts = Counts(detections, 100, gain=np.full(SHAPE, 3, given))
    assert counts.gain.dtype == kept
    assert isinstance(counts.trials, float)


def test_exposure_is_zero_where_masked(detections):
    mask = np.ones(SHAPE, bool)
    mask[1, 2] = False
    expected = np.where(mask, 100.0, 0.0)
    assert Counts(detections, 100).exposure == 100.0
    np.testing.assert_array_equal(Counts(detections, 100, mask=mask).exposure, expected)
    np.testing.assert_array_equal(Counts(detections, np.full(SHAPE, 100), mask=mask).exposure, expected)


def test_a_masked_pixel_may_hold_impossible_counts(detections):
    mask = np.ones(SHAPE, bool)
    mask[2, 3] = False
    hot = changed(detections, (2, 3), 5000)
    assert Counts(hot, 100, mask=mask).detections[2, 3] == 5000
    assert Counts(hot, changed(np.full(SHAPE, 100), (2, 3), 0), mask=mask).shape == SHAPE


def test_exposure_may_have_a_fraction_where_a_trial_may_detect_several(detections):
    counts = Counts(detections + 1, 0.25, several_per_trial=True)
    assert counts.trials == 0.25


@pytest.mark.parametrize(
    ("value", "message"),
    [
        (-3, r"detections at \(4, 1\) is -3; give whole numbers"),
        (2.5, r"detections at \(4, 1\) is 2\.5; give whole numbers"),
        (np.nan, r"detections at \(4, 1\) is nan; give whole numbers"),
        (np.inf, r"detections at \(4, 1\) is inf; give whole numbers"),
        (1e300, r"detections at \(4, 1\) is 1e\+300; give whole numbers between 0 and 2\*\*53"),
        (101, r"detections at \(4, 1\) is 101, above trials 100; .*several_per_trial=True"),
    ],
)
def test_impossible_detections_are_named(detections, value, message):
    with pytest.raises(InputError, match=message):
        Counts(changed(detections, (4, 1), value), 100)


@pytest.mark.parametrize("name", ["trials", "gain", "background"])
@pytest.mark.parametrize("value", [-1.0, np.nan, np.inf, -np.inf])
def test_impossible_settings_are_named(detections, name, value):
    with pytest.raises(InputError, match=rf"{name} is {value}; give "):
        Counts(detections, **{"trials": 100, name: value})
    for dtype in (np.float32, np.float64):
        setting = changed(np.full(SHAPE, 100, dtype), (3, 0), dtype(value))
        with pytest.raises(InputError, match=rf"{name} at \(3, 0\) is {value}; give "):
            Counts(detections, **{"trials": 100, name: setting})


@pytest.mark.parametrize("dtype", [np.float32, np.float64])
def test_gain_must_be_above_zero_but_may_be_tiny(detections, dtype):
    tiny = np.finfo(dtype).smallest_subnormal
    assert Counts(detections, 100, gain=np.full(SHAPE, tiny)).gain[0, 0] == tiny
    with pytest.raises(InputError, match=r"gain at \(0, 2\) is 0\.0; give a finite number above 0"):
        Counts(detections, 100, gain=changed(np.full(SHAPE, tiny), (0, 2), dtype(0)))


def test_trials_and_detections_must_agree(detections):
    trials = np.full(SHAPE, 100.0)
    with pytest.raises(InputError, match=r"trials at \(2, 2\) is 99\.5; give a whole number, or several_per"):
        Counts(detections, changed(trials, (2, 2), 99.5))
    with pytest.raises(InputError, match=r"trials is 99\.5; give a whole number"):
        Counts(detections, 99.5)
    seen = changed(detections, (1, 1), 2)
    for several in (False, True):
        with pytest.raises(
            InputError, match=r"detections at \(1, 1\) is 2 where trials is 0; give the trials"
        ):
            Counts(seen, changed(trials, (1, 1), 0.0), several_per_trial=several)


def test_zero_exposure_everywhere_is_refused(detections):
    mask = np.zeros(SHAPE, bool)
    with pytest.raises(InputError, match="mask is False everywhere"):
        Counts(detections, 100, mask=mask)
    mask[0, 0] = True
    for trials, usable in [
        (0, None),
        (np.zeros(SHAPE), None),
        (0, mask),
        (changed(mask * 0, (1, 1), 9), mask),
    ]:
        with pytest.raises(InputError, match="trials is 0 in every usable pixel"):
            Counts(np.zeros(SHAPE), trials, mask=usable)


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"gain": np.ones((6, 5))}, r"gain has shape \(6, 5\); give one number or a map of shape \(5, 6\)"),
        ({"gain": [1.0]}, r"gain has shape \(1,\)"),
        ({"mask": np.ones((6, 5), bool)}, r"mask has shape \(6, 5\)"),
        ({"mask": np.ones(SHAPE)}, r"mask .*type float64; give a boolean map"),
        ({"background": "dark"}, "background holds str"),
        ({"background": None}, "background holds object"),
        ({"several_per_trial": 1}, "several_per_trial is int; give True or False"),
    ],
)
def test_wrong_kinds_and_shapes_are_named(detections, settings, message):
    with pytest.raises(InputError, match=message):
        Counts(detections, 100, **settings)


@pytest.mark.parametrize(
    "detections",
    [5, [1, 2], np.zeros((2, 2, 2)), [], np.zeros((0, 4)), [[1], [2, 3]], "12", [["1"]], [[None]], None,
     np.ones(SHAPE, bool), np.ones(SHAPE, complex), np.ones(SHAPE, object), np.zeros(SHAPE, "M8[s]"),
     np.ma.masked_array(np.ones(SHAPE), mask=True), {1: 2}, [[10**400]]],
)  # fmt: skip
def test_what_is_no_image_of_counts_is_refused(detections):
    with pytest.raises(InputError, match="detections "):
        Counts(detections, 100)


def test_long_maps_are_searched_for_fractions_to_the_end():
    trials = np.full((1500, 1500), 9.0)
    trials[1400, 7] = 8.5
    with pytest.raises(InputError, match=r"trials at \(1400, 7\) is 8\.5"):
        Counts(np.zeros(trials.shape, np.uint8), trials)
