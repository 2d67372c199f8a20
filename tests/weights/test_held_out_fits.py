"""Fits to parts of the data at weights given for all, their scores, and where a solve starts."""

import math

import numpy as np
import pytest

import priors
import recon
from recon.likelihoods import BernoulliTrials, Gaussian, Poisson, PoissonMarks
from recon.weights import HeldOutFit, for_part, held_out_fits, held_out_scores, settle, weigh
from recon.weights.settle import SEED

SCENE = np.full((40, 48), 0.5)
SCENE[10:30, 12:36] = 1.5
BOX = (0.0, 10.0)


def poisson(seed: int, level: float = 6.0) -> Poisson:
    return Poisson(recon.simulate.counts(SCENE, 1, level, several_per_trial=True, seed=seed))


@pytest.mark.parametrize("prior", [priors.Smoothness(3.0), priors.TotalVariation(3.0)])
def test_the_weight_for_a_part(prior) -> None:
    for part, whole in ((1.0, 2.0), (5.0, 5.0), (2.0, 30.0)):
        assert for_part(prior, part, whole).weight == pytest.approx(3.0 * (part / whole) ** 0.3, rel=1e-9)


@pytest.mark.parametrize("level", [1.0, 4.0, 16.0])
def test_the_weight_for_a_part_suits_it(level: float) -> None:
    """The best of total variation, by the truth, for a quarter of the data, from the best for all."""
    factors = 1.3 ** np.arange(-6, 7)

    def best(exposure: float) -> float:
        logs = []
        for seed in range(3):
            likelihood = poisson(seed, exposure)
            weight = weigh(priors.TotalVariation(), likelihood)[0].weight
            tried = [priors.TotalVariation(weight * factor) for factor in factors]
            images = [recon.solve(recon.Problem(likelihood, prior, BOX)).image for prior in tried]
            errors = [np.mean((image - SCENE) ** 2) for image in images]
            logs.append(np.log(weight * factors[int(np.argmin(errors))]))
        return float(np.exp(np.mean(logs)))

    whole = priors.TotalVariation(best(level))
    assert for_part(whole, 1.0, 4.0).weight == pytest.approx(best(level / 4.0), rel=0.3)


@pytest.mark.parametrize("prior", [priors.Smoothness(2.0), priors.TotalVariation(2.0)])
def test_fits_to_three_quarters_minimise_what_they_should(prior) -> None:
    """The objective of each fit against a solve of its own."""
    likelihood = poisson(0)
    flat = np.ones(SCENE.shape, np.float32)
    fits = held_out_fits([prior], likelihood, BOX, flat)
    assert len(fits) == 4
    for fit, (part, score) in zip(fits, likelihood.folds(4, SEED), strict=True):
        x = np.full(SCENE.shape, 0.7)
        np.testing.assert_array_equal(fit.score.value_map(x), score.value_map(x))
        term = prior.with_weight(2.0 * 0.75**0.3)
        problem = recon.Problem(part, term, BOX)
        best = recon.solve(problem, tolerance=1e-4).diagnostics.objective
        assert problem.objective(fit.image) == pytest.approx(best, rel=3e-3)


def test_fits_at_a_weight_given_are_those_of_the_same_weight_chosen() -> None:
    """The fits that chose a weight, and fits at it, up to the step of the path."""
    likelihood = poisson(1)
    settled = settle(priors.TotalVariation(), likelihood, BOX)
    again = held_out_fits(settled.terms, likelihood, BOX, np.ones(SCENE.shape, np.float32))
    assert len(again) == len(settled.fits) == 4
    for one, other in zip(settled.fits, again, strict=True):
        assert np.sqrt(np.mean((one.image - other.image) ** 2)) < 0.05


def test_nothing_is_held_out_of_too_little() -> None:
    found = np.zeros((16, 16), int)
    found[:2, :5] = 1
    likelihood = Poisson(recon.Counts(found, 1, several_per_trial=True))
    assert not likelihood.can_be_shared_out
    assert held_out_fits([priors.TotalVariation(1.0)], likelihood, BOX, np.ones((16, 16), np.float32)) == ()


def test_scores_are_the_squared_error_but_for_a_constant() -> None:
    """Differences of two images over many seeds, against the true ones."""
    i, j = np.mgrid[:40, :48]
    one = (SCENE + 0.1 * np.sin(i / 3.0)).astype(np.float32)
    other = (SCENE + 0.2 * np.cos(j / 5.0)).astype(np.float32)
    true = np.sum((one - SCENE) ** 2) - np.sum((other - SCENE) ** 2)
    found = []
    for seed in range(200):
        parts = [score for _, score in poisson(seed).folds(3, seed)]
        scores = held_out_scores([[HeldOutFit(image, part) for part in parts] for image in (one, other)])
        assert all(score.shape == SCENE.shape for score in scores)
        found.append(np.sum(scores[0] - scores[1]))
    error = np.std(found) / np.sqrt(len(found))
    assert error < 0.1 * abs(3.0 * true)
    assert np.mean(found) == pytest.approx(3.0 * true, abs=4.0 * error)


def test_scores_of_pixels_that_wait_are_near_the_squared_error() -> None:
    """The predictive log-likelihood over the information, doubled, for images near the truth."""
    truth = np.full((60, 80), 0.4)
    one, other = (truth * 1.06).astype(np.float32), (truth * 1.0).astype(np.float32)
    found = []
    for seed in range(60):
        counts = recon.simulate.counts(truth, None, 0.25, stop_after=4, seed=seed)
        likelihood = BernoulliTrials(counts, 4, None)
        parts = [score for _, score in likelihood.folds(3, seed)]
        scores = held_out_scores([[HeldOutFit(image, part) for part in parts] for image in (other, one)])
        found.append(np.sum(scores[1] - scores[0]))
    error = np.std(found) / np.sqrt(len(found))
    true = 0.5 * np.sum((one - truth) ** 2)
    assert np.mean(found) == pytest.approx(true, abs=4.0 * error + 0.1 * true)
    assert error < 0.3 * true


@pytest.mark.parametrize("seed", range(3))
def test_readings_of_either_sign_are_scored_as_they_are(seed: int) -> None:
    """A scene moved below zero has the weight of the same scene above it."""
    noise = 0.4 * np.random.default_rng(seed).standard_normal(SCENE.shape)
    above, below = (
        settle(priors.TotalVariation(), Gaussian(SCENE + level + noise, 0.16), (-20.0, 20.0))
        for level in (5.0, -5.0)
    )
    assert below.choice.score.max() == pytest.approx(above.choice.score.max(), rel=0.05)
    assert below.terms[0].weight == pytest.approx(above.terms[0].weight, rel=0.02)


@pytest.mark.parametrize("seed", range(4))
def test_yields_at_a_primary_a_pixel_start_flat(seed: int) -> None:
    """From a flat image the solve goes lower, and nearer to the truth, than from each pixel's own fit."""
    eta = 1.0 + 2.0 * SCENE
    likelihood = PoissonMarks(recon.simulate.frames(eta, 1.0, 1, seed=seed))
    prior = priors.TotalVariation(recon.weights.weigh(priors.TotalVariation(), likelihood)[0].weight)
    problem = recon.Problem(likelihood, prior)
    flat, own = likelihood.starting_image(), likelihood.estimate()
    assert flat.dtype == np.float32
    assert np.ptp(flat) == 0.0
    assert flat[0, 0] == pytest.approx(own.mean(dtype=np.float64), rel=1e-5)
    one, other = (recon.solve(problem, tolerance=1e-4, start=image) for image in (flat, own))
    left_out = recon.solve(problem, tolerance=1e-4)
    assert one.diagnostics.objective < other.diagnostics.objective
    assert left_out.diagnostics.objective == pytest.approx(one.diagnostics.objective, rel=1e-6)
    error = [math.sqrt(np.mean((solution.image - eta) ** 2)) for solution in (one, other)]
    assert error[0] < error[1]


def test_convex_likelihoods_start_from_their_estimate() -> None:
    for likelihood in (poisson(0), Gaussian(SCENE, 0.1)):
        np.testing.assert_array_equal(likelihood.starting_image(), likelihood.estimate())
