"""Draws under a prior that is a minimum over an auxiliary image."""

import numpy as np
import pytest

import priors
import recon
from recon.likelihoods import Gaussian
from recon.sampling import sample


def test_three_pixels_under_generalized_variation() -> None:
    """A minimum over slopes: of three pixels in a row it is weight * |a - 2 b + c|; a sum over a grid."""
    readings, weight = np.array([[0.0, 1.5, 0.5]]), 1.5
    prior = priors.GeneralizedVariation(weight)
    for image in np.random.default_rng(0).normal(size=(3, 1, 3)):
        bend = abs(image[0, 0] - 2.0 * image[0, 1] + image[0, 2])
        assert prior.value(image) == pytest.approx(weight * bend, rel=1e-4, abs=1e-5)
    grid = np.meshgrid(*[np.linspace(-4.0, 6.0, 150)] * 3, indexing="ij")
    energy = sum(0.5 * (x - r) ** 2 for x, r in zip(grid, readings[0], strict=True))
    mass = np.exp(-energy - weight * np.abs(grid[0] - 2.0 * grid[1] + grid[2]))
    mass /= mass.sum()
    mean = np.array([np.sum(mass * x) for x in grid])
    sd = np.sqrt([np.sum(mass * (x - m) ** 2) for x, m in zip(grid, mean, strict=True)])
    drawn = sample(recon.Problem(Gaussian(readings, 1.0), prior, (-4.0, 6.0)), draws=120, burn_in=60)
    error = 1.0 / np.sqrt(drawn.effective_samples)
    assert drawn.r_hat < 1.1
    assert np.abs((drawn.mean[0] - mean) / sd).max() < min(4.0 * error, 0.3)
    assert np.abs(drawn.standard_deviation[0] / sd - 1.0).max() < min(4.0 * error, 0.3)
