"""Sharing data out into parts that are independent, and that add up."""

import numpy as np
import pytest

import recon
from recon.likelihoods import BernoulliTrials, Gaussian, Poisson
from recon.likelihoods.part import PixelPart

SHAPE = (40, 50)


@pytest.mark.parametrize("seed", range(3))
def test_the_parts_of_poisson_counts_add_up_and_are_independent(seed: int) -> None:
    counts = recon.simulate.counts(np.full(SHAPE, 2.0), 1, several_per_trial=True, seed=seed)
    pairs = Poisson(counts).folds(3, seed)
    parts = np.array([score._count for _, score in pairs])
    np.testing.assert_array_equal(parts.sum(axis=0), counts.detections)
    for fit, score in pairs:
        np.testing.assert_array_equal(fit._count + score._count, counts.detections)
        np.testing.assert_allclose(fit._slope + score._slope, 1.0, rtol=1e-6)
    # parts of a Poisson number are Poisson numbers without correlation: mean and variance 2/3
    assert abs(parts.mean() - 2.0 / 3.0) < 5.0 * np.sqrt(2.0 / 3.0 / parts.size)
    together = np.corrcoef(parts[0].ravel(), parts[1].ravel())[0, 1]
    assert abs(together) < 5.0 / np.sqrt(parts[0].size)


@pytest.mark.parametrize("seed", range(3))
def test_the_parts_of_trials_add_up_and_are_as_even_as_can_be(seed: int) -> None:
    trials = np.random.default_rng(seed).integers(0, 20, SHAPE)
    counts = recon.simulate.counts(np.full(SHAPE, 0.3), trials, seed=seed)
    parts = [score for _, score in BernoulliTrials(counts).folds(3, seed)]
    np.testing.assert_array_equal(sum(part._k for part in parts), counts.detections)
    np.testing.assert_array_equal(sum(part._n for part in parts), trials)
    assert np.ptp([part._n for part in parts], axis=0).max() <= 1.0
    p = -np.expm1(-0.3)
    n, k = sum(part._n.sum() for part in parts[:1]), parts[0]._k.sum()
    assert abs(k - n * p) < 5.0 * np.sqrt(n * p * (1.0 - p))


def test_a_record_that_ends_with_a_detection_hides_whole_pixels() -> None:
    counts = recon.simulate.counts(np.full(SHAPE, 0.1), None, stop_after=1, seed=0)
    pairs = BernoulliTrials(counts, 1).folds(3, 0)
    shown = np.array([score.has_data for _, score in pairs])
    np.testing.assert_array_equal(shown.sum(axis=0), 1)
    for fit, score in pairs:
        np.testing.assert_array_equal(fit.has_data, ~score.has_data)


@pytest.mark.parametrize("seed", range(3))
def test_the_parts_of_readings_have_independent_errors(seed: int) -> None:
    truth = np.random.default_rng(seed).uniform(0.0, 3.0, (200, 200))
    readings = truth + 0.5 * np.random.default_rng(seed + 10).standard_normal(truth.shape)
    for fit, score in Gaussian(readings, 0.25).folds(4, seed):
        one, other = (part._target - truth for part in (fit, score))
        np.testing.assert_allclose(one.var(), 0.25 * 4.0 / 3.0, rtol=0.03)
        np.testing.assert_allclose(other.var(), 0.25 * 4.0, rtol=0.03)
        assert abs(np.corrcoef(one.ravel(), other.ravel())[0, 1]) < 0.02


@pytest.mark.parametrize("seed", range(2))
def test_the_score_is_least_at_the_truth(seed: int) -> None:
    truth = np.random.default_rng(seed).uniform(0.5, 3.0, (200, 200))
    counts = recon.simulate.counts(truth, 1, background=0.5, several_per_trial=True, seed=seed)
    trials = recon.simulate.counts(truth, 50, gain=0.1, background=0.05, seed=seed)
    for likelihood in (Poisson(counts), BernoulliTrials(trials)):
        at = [likelihood.score_map(factor * truth).sum() for factor in (0.8, 1.0, 1.2)]
        assert at[1] < min(at[0], at[2])


def test_a_likelihood_of_some_pixels_is_a_likelihood() -> None:
    counts = recon.simulate.counts(np.full((12, 14), 3.0), 1, background=0.2, several_per_trial=True, seed=0)
    shown = np.random.default_rng(0).random((12, 14)) < 0.6
    part = PixelPart(Poisson(counts), shown)
    image = np.full((12, 14), 2.0)
    assert part.value(image) == pytest.approx(Poisson(counts).value_map(image)[shown].sum())
    fresh = PixelPart(Poisson(counts), np.ones((12, 14), bool))
    np.testing.assert_array_equal(fresh.prox(image, 0.3), Poisson(counts).prox(image, 0.3))
    np.testing.assert_array_equal(part.prox(image, 0.3)[~shown], image[~shown])
    # with nothing to say, a pixel's conjugate is that of the bounds alone
    slope = np.linspace(-1.0, 1.0, 12 * 14).reshape(12, 14)
    free = np.maximum(slope * 0.0, slope * 5.0)
    np.testing.assert_allclose(part.conjugate_map(slope, 0.0, 5.0)[~shown], free[~shown])
    np.testing.assert_allclose(
        part.conjugate_map(slope, 0.0, 5.0)[shown], Poisson(counts).conjugate_map(slope, 0.0, 5.0)[shown]
    )
