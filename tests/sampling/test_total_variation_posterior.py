"""Draws under total variation against another sampler, pixel by pixel, of the same law."""

import numpy as np
import pytest

import priors
import recon
from recon.likelihoods import Gaussian, Poisson
from recon.sampling import sample
from tests.sampling.single_site import reference, scene


@pytest.mark.parametrize("kind", ["gaussian", "poisson"])
def test_mean_and_spread_under_total_variation(kind: str) -> None:
    rng, truth = np.random.default_rng(3), scene()
    if kind == "gaussian":
        data, background, bounds = truth + rng.standard_normal(truth.shape), None, (-20.0, 20.0)
        likelihood = Gaussian(data, 1.0)
    else:
        data, background, bounds = rng.poisson(truth + 0.5).astype(float), 0.5, (0.0, 20.0)
        likelihood = Poisson.from_arrays(data, 1.0, background)
    mean, sd, error = reference(data, 1.2, bounds, 40_000, 1, background)
    posterior = sample(recon.Problem(likelihood, priors.TotalVariation(1.2), bounds), draws=400)
    assert posterior.converged
    # In standard deviations, the error of a mean is 1 / sqrt(effective draws): about 0.05 here, over pixels.
    off = (posterior.mean - mean) / sd
    expected = np.hypot(
        1.0 / np.sqrt(posterior.median_effective_samples), np.sqrt(np.mean((error / sd) ** 2))
    )
    assert abs(off.mean()) < 0.03
    assert np.sqrt(np.mean(off**2)) < 1.5 * expected
    ratio = posterior.standard_deviation / sd
    assert ratio.mean() == pytest.approx(1.0, abs=0.03)
    assert np.sqrt(np.mean((ratio - 1.0) ** 2)) < 1.5 * expected
