"""Exact intervals of reflectivity on simulated counts of known truth."""

import numpy as np
import pytest
from scipy import stats

import recon
from recon.errors import InputError
from recon.imaging.exact_interval import exact_interval

ROWS, COLUMNS = 60, 80
SCENE = np.geomspace(0.02, 3.0, ROWS * COLUMNS).reshape(ROWS, COLUMNS)
GAIN, BACKGROUND = 0.2, 0.03


def drawn(kind: str, seed: int) -> recon.Counts:
    if kind == "counts":
        return recon.simulate.counts(SCENE, 12, GAIN, BACKGROUND, several_per_trial=True, seed=seed)
    if kind == "trials":
        return recon.simulate.counts(SCENE, 12, GAIN, BACKGROUND, seed=seed)
    wanted, most = {"first": (1, None), "third": (3, None), "limited": (2, 40)}[kind]
    return recon.simulate.counts(SCENE, most, GAIN, BACKGROUND, stop_after=wanted, seed=seed)


@pytest.mark.parametrize("kind", ["counts", "trials", "first", "third", "limited"])
@pytest.mark.parametrize("share", [0.5, 0.68, 0.95])
def test_the_truth_is_held_as_often_as_said(kind: str, share: float) -> None:
    """At least the share, less three standard errors of the simulation, and each side its half."""
    below = above = 0
    for seed in range(3):
        low, high = exact_interval(drawn(kind, seed), share)
        below += np.count_nonzero(low > SCENE)
        above += np.count_nonzero(high < SCENE)
    pixels, tail = 3 * SCENE.size, 0.5 * (1.0 - share)
    allowed = pixels * tail + 3.0 * np.sqrt(pixels * tail * (1.0 - tail))
    assert below <= allowed
    assert above <= allowed


def test_a_waiting_record_has_the_coverage_of_its_own_law() -> None:
    """With the first detection the interval is exact but for the steps of the trials, hence close to 68 %."""
    held = 0
    scene = np.full((100, 100), 0.01)
    for seed in range(3):
        low, high = exact_interval(recon.simulate.counts(scene, None, stop_after=1, seed=seed), 0.68)
        held += np.count_nonzero((low <= scene) & (scene <= high))
    assert held / 30_000 == pytest.approx(0.68, abs=0.015)


@pytest.mark.parametrize("kind", ["counts", "trials", "third"])
def test_the_image_of_each_pixel_by_itself_lies_within(kind: str) -> None:
    counts = drawn(kind, 4)
    low, high = exact_interval(counts)
    mean = counts.detections / counts.trials
    mean = mean if kind == "counts" else -np.log1p(-np.minimum(mean, 1.0 - 1e-12))
    own = np.maximum((mean - BACKGROUND) / GAIN, 0.0)
    assert np.all(low <= own)
    assert np.all((own <= high) | (counts.detections == counts.trials))


def test_closed_forms_of_single_counts() -> None:
    """Nothing in n: the upper end is that of exp(-n (gain x + b)) = tail, of both laws."""
    nothing = np.zeros((1, 2), int)
    for several in (False, True):
        counts = recon.Counts(nothing, 25, 0.5, 0.01, several_per_trial=several)
        low, high = exact_interval(counts)
        np.testing.assert_array_equal(low, 0.0)
        np.testing.assert_allclose(high, (-np.log(0.025) / 25 - 0.01) / 0.5, rtol=1e-9)
    exposure = recon.Counts(np.array([[4, 9]]), np.array([[2.5, 0.5]]), 2.0, 0.1, several_per_trial=True)
    low, high = exact_interval(exposure, 0.9)
    expected = (stats.chi2.ppf(0.95, [[10, 20]]) / 2.0 / [[2.5, 0.5]] - 0.1) / 2.0
    np.testing.assert_allclose(high, expected, rtol=1e-6)
    expected = (stats.chi2.ppf(0.05, [[8, 18]]) / 2.0 / [[2.5, 0.5]] - 0.1) / 2.0
    np.testing.assert_allclose(low, expected, rtol=1e-6)


def test_every_trial_detected_has_no_upper_end() -> None:
    low, high = exact_interval(recon.Counts(np.full((2, 2), 6), 6))
    np.testing.assert_array_equal(high, np.inf)
    np.testing.assert_allclose(low, -np.log1p(-(0.025 ** (1.0 / 6.0))), rtol=1e-9)


@pytest.mark.parametrize("several", [False, True])
def test_pixels_without_data(several: bool) -> None:
    """Masked, with whatever was recorded there, and never looked at."""
    found = np.array([[3, 9, 0, 1]])
    mask = np.array([[True, False, True, True]])
    trials = np.array([[5, 4, 0, 5]])
    low, high = exact_interval(recon.Counts(found, trials, mask=mask, several_per_trial=several))
    np.testing.assert_array_equal(low[0, 1:3], 0.0)
    np.testing.assert_array_equal(high[0, 1:3], np.inf)
    assert np.all(np.isfinite(high[0, [0, 3]]))
    assert np.all(low[0, [0, 3]] > 0.0)
    alone = exact_interval(recon.Counts(found[:, :1], 5, several_per_trial=several))
    assert (low[0, 0], high[0, 0]) == (alone[0][0, 0], alone[1][0, 0])


def test_a_masked_pixel_does_not_decide_how_others_stopped() -> None:
    whole = drawn("third", 0)
    mask = np.ones(SCENE.shape, bool)
    mask[0, :5] = False
    found, trials = np.array(whole.detections), np.array(whole.trials)
    found[0, :5], trials[0, :5] = 50, 60
    marked = exact_interval(recon.Counts(found, trials, GAIN, BACKGROUND, mask))
    plain = exact_interval(whole)
    for one, other in zip(marked, plain, strict=True):
        np.testing.assert_array_equal(one[mask], other[mask])


def test_ends_come_together_as_data_grow() -> None:
    scene = np.full((20, 20), 0.5)
    wide = []
    for trials in (100, 10_000):
        low, high = exact_interval(recon.simulate.counts(scene, trials, seed=1))
        wide.append(np.mean(high - low))
    assert wide[0] / wide[1] == pytest.approx(10.0, rel=0.1)  # more by the steps of few counts
    p = -np.expm1(-0.5)  # by the delta method, x = -log(1 - p)
    assert wide[1] == pytest.approx(2 * 1.96 * np.sqrt(p / (1.0 - p) / 10_000), rel=0.03)


def test_what_cannot_be_used_is_refused() -> None:
    counts = recon.Counts(np.ones((2, 2), int), 4)
    with pytest.raises(InputError, match="share is 95"):
        exact_interval(counts, 95)
    with pytest.raises(InputError, match=r"counts is a ndarray; give recon\.Counts"):
        exact_interval(np.ones((2, 2)))
