"""Draws against posteriors known in closed form."""

import numpy as np
import pytest
from scipy import stats

import priors
import recon
from recon.likelihoods import Gaussian, Poisson
from recon.sampling import sample


def differences(rows: int, columns: int) -> np.ndarray:
    """Return all differences between neighbours, as a matrix."""
    one = [np.diff(np.eye(n), axis=0) for n in (rows, columns)]
    return np.vstack([np.kron(one[0], np.eye(columns)), np.kron(np.eye(rows), one[1])])


@pytest.mark.parametrize("weight", [0.3, 5.0])
def test_gaussian_readings_and_smoothness(weight: float) -> None:
    rng = np.random.default_rng(1)
    readings, variance = rng.normal(3.0, 1.0, (6, 7)), rng.uniform(0.2, 2.0, (6, 7))
    posterior = sample(recon.Problem(Gaussian(readings, variance), priors.Smoothness(weight)), draws=600)
    d = differences(6, 7)
    covariance = np.linalg.inv(np.diag(1.0 / variance.ravel()) + weight * d.T @ d)
    mean = (covariance @ (readings / variance).ravel()).reshape(6, 7)
    sd = np.sqrt(np.diag(covariance)).reshape(6, 7)
    error = 1.0 / np.sqrt(posterior.effective_samples)
    assert posterior.converged
    assert np.abs((posterior.mean - mean) / sd).max() < 4.0 * error
    assert np.abs(posterior.standard_deviation / sd - 1.0).max() < 4.0 * error
    assert posterior.standard_deviation.mean() == pytest.approx(sd.mean(), rel=0.03)
    region = np.zeros((6, 7), bool)
    region[1:4, 2:6] = True
    share = region.ravel() / 12.0
    told = posterior.region(region)
    spread = np.sqrt(share @ covariance @ share)
    assert told.pixels == 12
    assert told.mean == pytest.approx(mean[region].mean(), abs=4.0 * error * spread)
    assert told.standard_deviation == pytest.approx(spread, rel=4.0 * error)
    for interval, z in ((told.interval_68, 0.9945), (told.interval_95, 1.9600)):
        middle, half = mean[region].mean(), z * spread
        assert interval == pytest.approx((middle - half, middle + half), abs=8.0 * error * spread)


@pytest.mark.parametrize("background", [0.0, 0.7])
@pytest.mark.parametrize("seed", range(2))
def test_poisson_counts_with_a_prior_of_no_weight(background: float, seed: int) -> None:
    # Each pixel by itself: x + background has a gamma law of shape count + 1, between the bounds.
    count = np.array([[0, 1, 2, 3], [5, 1, 0, 8]], float)
    problem = recon.Problem(
        Poisson.from_arrays(count, 1.5, background), priors.TotalVariation(1e-9), bounds=(0.0, 6.0)
    )
    posterior = sample(problem, draws=1000, seed=seed)
    law = stats.gamma(count + 1.0, scale=1.0 / 1.5)
    ends = law.cdf(background), law.cdf(6.0 + background)
    inside = np.linspace(0.0, 1.0, 4001)[1:-1, None, None]
    table = law.ppf(ends[0] + inside * (ends[1] - ends[0])) - background
    mean, sd = table.mean(axis=0), table.std(axis=0)
    assert posterior.converged
    assert np.abs((posterior.mean - mean) / sd).max() < 0.12
    assert np.abs(posterior.standard_deviation / sd - 1.0).max() < 0.09
    assert posterior.images.min() >= 0.0
    assert posterior.images.max() <= 6.0
    for share in (0.68, 0.95):
        tail = 0.5 * (1.0 - share)
        for found, part in zip(posterior.interval(share), (tail, 1.0 - tail), strict=True):
            below = (law.cdf(found + background) - ends[0]) / (ends[1] - ends[0])
            assert np.abs(below - part).max() < 5.0 * np.sqrt(
                part * (1.0 - part) / posterior.effective_samples
            )


def test_a_pixel_without_data_is_uniform_between_the_bounds() -> None:
    counts = Poisson.from_arrays(
        np.array([[4.0, 0.0]]), np.array([[1.0, 0.0]]), 0.0, np.array([[True, False]])
    )
    problem = recon.Problem(counts, priors.TotalVariation(1e-9), bounds=(1.0, 9.0))
    posterior = sample(problem, draws=2000)
    assert posterior.converged
    assert posterior.mean[0, 1] == pytest.approx(5.0, abs=0.25)
    assert posterior.standard_deviation[0, 1] == pytest.approx(8.0 / np.sqrt(12.0), rel=0.05)
    low, high = posterior.interval(0.68)
    assert (low[0, 1], high[0, 1]) == pytest.approx((1.0 + 8.0 * 0.16, 9.0 - 8.0 * 0.16), abs=0.4)


@pytest.mark.parametrize("gap", [0.0, 1.5])
def test_two_pixels_with_a_prior_that_matters(gap: float) -> None:
    """Total variation against a sum over a grid of images."""
    readings = np.array([[0.0, gap]])
    axis = np.linspace(-6.0, 7.0, 800)
    a, b = np.meshgrid(axis, axis, indexing="ij")
    energy = 0.5 * a**2 + 0.5 * (b - gap) ** 2 + 1.3 * np.abs(a - b)
    mass = np.exp(-energy)
    mass /= mass.sum()
    mean = np.array([np.sum(mass * a), np.sum(mass * b)])
    sd = np.sqrt([np.sum(mass * (a - mean[0]) ** 2), np.sum(mass * (b - mean[1]) ** 2)])
    posterior = sample(recon.Problem(Gaussian(readings, 1.0), priors.TotalVariation(1.3)), draws=1500)
    assert posterior.converged
    assert np.abs((posterior.mean[0] - mean) / sd).max() < 0.07
    assert np.abs(posterior.standard_deviation[0] / sd - 1.0).max() < 0.07
