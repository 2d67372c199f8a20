"""The bootstrap against the spread that is known where nothing is smoothed, or all is."""

import numpy as np
import pytest

import priors
import recon
from recon.errors import InputError
from recon.likelihoods import BernoulliTrials, Gaussian, Poisson
from recon.uncertainty import Bootstrap, bootstrap

FAINT = priors.Smoothness(1e-2)


def free(kind: str):
    """A problem of pixels by themselves, the image taken for true, and the spread of its refits."""
    shape, x = (8, 10), 2.0
    image = np.full(shape, x, np.float32)
    if kind == "poisson":
        return Poisson.from_arrays(np.full(shape, 60), 30.0, 0.5), image, np.sqrt((x + 0.5) / 30.0)
    if kind == "gaussian":
        return Gaussian.from_arrays(image, np.float32(4.0)), image, 0.5
    counts = recon.Counts(np.full(shape, 300), 1000, 0.2)
    image = np.full(shape, -np.log(0.7) / 0.2, np.float32)
    return BernoulliTrials(counts), image, np.sqrt(0.3 / 0.7 / 1000.0) / 0.2  # delta method


@pytest.mark.parametrize("kind", ["poisson", "gaussian", "trials"])
def test_the_spread_of_pixels_by_themselves(kind: str) -> None:
    likelihood, image, expected = free(kind)
    bounds = (-20.0, 20.0) if kind == "gaussian" else (0.0, 20.0)
    found = bootstrap(recon.Problem(likelihood, FAINT, bounds), image, replicates=60, seed=1)
    assert found.images.shape == (60, 8, 10)
    # 80 pixels, each with 59 degrees: the mean variance is known to 2 in 69 pairs
    variance = np.mean(found.standard_deviation.astype(np.float64) ** 2)
    assert variance == pytest.approx(expected**2, rel=4.0 * np.sqrt(2.0 / (80 * 59)))
    assert np.mean(found.bias) == pytest.approx(0.0, abs=4.0 * expected / np.sqrt(80 * 60))


def test_the_spread_of_a_flat_image_is_that_of_its_mean() -> None:
    likelihood = Poisson.from_arrays(np.full((8, 10), 60), 30.0, 0.5)
    problem = recon.Problem(likelihood, priors.TotalVariation(20.0), (0.0, 20.0))
    found = bootstrap(problem, np.full((8, 10), 2.0, np.float32), replicates=80, seed=2)
    spread = found.standard_deviation
    np.testing.assert_allclose(spread, spread[0, 0], rtol=0.05)
    assert spread.mean() == pytest.approx(np.sqrt(2.5 / 30.0 / 80.0), rel=4.0 / np.sqrt(2 * 79))


def test_the_spread_of_a_smooth_image_of_gaussian_readings() -> None:
    """The diagonal of H H' rms^2, H = (Q + w D'D)^-1 Q, by cosines."""
    shape, rms, weight = (12, 12), 0.5, 6.0
    truth = np.fromfunction(lambda i, j: 3.0 + np.cos(i / 3.0), shape).astype(np.float32)
    problem = recon.Problem(Gaussian(truth.astype(float), rms**2), priors.Smoothness(weight), (-30.0, 30.0))
    image = recon.solve(problem, tolerance=1e-6).image
    found = bootstrap(problem, image, replicates=150, seed=3)
    k = np.arange(12)
    basis = np.cos(np.pi * np.outer(k + 0.5, k) / 12.0)
    basis /= np.linalg.norm(basis, axis=0)
    eigenvalue = 2.0 - 2.0 * np.cos(np.pi * k / 12.0)
    share = 1.0 / (1.0 + weight * rms**2 * (eigenvalue[:, None] + eigenvalue[None]))
    variance = rms**2 * np.einsum("ik,jl,kl->ij", basis**2, basis**2, share**2)
    assert np.mean(found.standard_deviation**2) == pytest.approx(variance.mean(), rel=0.08)
    assert np.corrcoef(found.standard_deviation.ravel(), np.sqrt(variance).ravel())[0, 1] > 0.8
    # one more smoothing costs what the first one did, in shape
    coefficients = basis.T @ image.astype(np.float64) @ basis
    lost = basis @ ((share - 1.0) * coefficients) @ basis.T
    deviation = np.sqrt(variance / 150)
    assert np.mean(((found.bias - lost) / deviation) ** 2) < 2.0


def test_the_basic_interval_covers_a_mean() -> None:
    """At many counts and nothing smoothed, as often as said."""
    held = 0
    for seed in range(8):
        counts = np.random.default_rng(seed).poisson(100.0, (6, 10))
        problem = recon.Problem(Poisson.from_arrays(counts, 50.0), FAINT, (0.0, 20.0))
        low, high = bootstrap(problem, (counts / 50.0).astype(np.float32), 80, seed).interval(0.9)
        held += np.count_nonzero((low <= 2.0) & (high >= 2.0))
    # 480 pixels; 80 replicates leave a little off the ends
    assert held / 480 == pytest.approx(0.89, abs=4.0 * np.sqrt(0.09 / 480))


def test_quantiles_are_turned_over() -> None:
    images = np.arange(101, dtype=np.float32)[:, None, None] ** 2 * np.ones((1, 2, 3), np.float32)
    found = Bootstrap(np.full((2, 3), 900.0, np.float32), images, 0)
    low, high = found.interval(0.9)
    np.testing.assert_allclose(low, 1800.0 - 95.0**2, rtol=1e-6)
    np.testing.assert_allclose(high, 1800.0 - 5.0**2, rtol=1e-6)
    np.testing.assert_allclose(found.standard_deviation, np.std(np.arange(101.0) ** 2, ddof=1), rtol=1e-6)
    np.testing.assert_allclose(found.bias, np.mean(np.arange(101.0) ** 2) - 900.0, rtol=1e-6)


def test_the_same_seed_draws_the_same_and_is_told() -> None:
    likelihood, image, _ = free("poisson")
    problem, told = recon.Problem(likelihood, FAINT, (0.0, 20.0)), []
    first = bootstrap(problem, image, 3, 5, told.append)
    assert told == [1, 2, 3]
    np.testing.assert_array_equal(first.images, bootstrap(problem, image, 3, 5).images)
    assert np.any(first.images != bootstrap(problem, image, 3, 6).images)


def test_what_is_said_of_it() -> None:
    image, images = np.ones((2, 2), np.float32), np.ones((7, 2, 2), np.float32)
    done, late = Bootstrap(image, images, 0).words, Bootstrap(image, images, 3).words
    assert "NOT CONVERGED" not in done
    assert "narrower than the error" in done
    assert late == f"NOT CONVERGED: 3 of 7 refits; {done}"


def test_finished_refits_are_counted_as_such() -> None:
    truth = np.full((24, 24), 2.0)
    counts = recon.simulate.counts(truth, 1, 4.0, several_per_trial=True, seed=0)
    problem = recon.Problem(Poisson(counts), priors.TotalVariation(2.0))
    image = recon.solve(problem, tolerance=1e-4).image
    assert bootstrap(problem, image, 4).unfinished == 0


def test_pixels_without_data_stay_so() -> None:
    found, mask = np.full((12, 12), 5), np.ones((12, 12), bool)
    mask[4:7, 4:7] = False
    counts = recon.Counts(found, 1, 5.0, mask=mask, several_per_trial=True)
    problem = recon.Problem(Poisson(counts), priors.TotalVariation(2.0))
    image = recon.solve(problem).image
    spread = bootstrap(problem, image, 10).standard_deviation
    assert np.all(np.isfinite(spread))
    assert spread.max() < 1.0


def test_what_cannot_be_used_is_refused() -> None:
    likelihood, image, _ = free("poisson")
    problem = recon.Problem(likelihood, FAINT, (0.0, 20.0))
    for bad in (1, 0, 2.0, True, "9"):
        with pytest.raises(InputError, match=r"replicates is .*; give a whole number of at least 2"):
            bootstrap(problem, image, bad)
    with pytest.raises(InputError, match="seed is -1"):
        bootstrap(problem, image, 2, -1)
    with pytest.raises(InputError, match="share is 1"):
        bootstrap(problem, image, 2).interval(1.0)
    with pytest.raises(InputError, match="shape"):
        bootstrap(problem, image[:3], 2)
