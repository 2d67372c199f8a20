"""Effective degrees of freedom against closed forms."""

import numpy as np
import pytest

import priors
import recon
from recon.likelihoods import Gaussian, Poisson
from recon.uncertainty.freedom import degrees_of_freedom
from recon.uncertainty.local import local_uncertainty

BOX = (-50.0, 50.0)


def solved(likelihood, prior, bounds=BOX):
    """The problem and its solution, closely."""
    problem = recon.Problem(likelihood, prior, bounds)
    return problem, recon.solve(problem, tolerance=1e-5).image


def noisy(shape, rms, seed):
    i, j = np.mgrid[: shape[0], : shape[1]]
    scene = 1.0 + 2.0 * ((i // 8 + j // 8) % 2)
    return scene + rms * np.random.default_rng(seed).standard_normal(shape)


def cosine_eigenvalues(shape):
    """Those of the Laplacian with free ends, whose eigenvectors are cosines (Strang 1999)."""
    down, right = (2.0 - 2.0 * np.cos(np.pi * np.arange(n) / n) for n in shape)
    return down[:, None] + right[None, :]


@pytest.mark.parametrize("weight", [0.03, 1.0, 30.0])
@pytest.mark.parametrize("seed", range(2))
def test_quadratic_smoothing_of_gaussian_readings(weight: float, seed: int) -> None:
    """Trace of (Q + w D'D)^-1 Q, a sum over cosines; two random signs estimate it (Hutchinson 1990)."""
    shape, rms = (40, 48), 0.5
    likelihood = Gaussian(noisy(shape, rms, seed), rms**2)
    problem, image = solved(likelihood, priors.Smoothness(weight))
    found = degrees_of_freedom(problem, image)
    shares = 1.0 / (1.0 + weight * rms**2 * cosine_eigenvalues(shape))
    expected = shares.sum()
    # of b' H b with random signs, at most
    deviation = np.sqrt(2.0 * np.sum(shares**2) / 2.0)
    assert abs(found.number - expected) < 4.0 * deviation + 2e-3 * expected
    assert abs(found.number / expected - 1.0) < 0.2
    assert found.standard_error < 4.0 * deviation


def test_quadratic_smoothing_of_readings_with_maps() -> None:
    """Noise that differs and pixels without data: the trace of a dense matrix."""
    shape = (16, 20)
    rng = np.random.default_rng(3)
    variance = rng.uniform(0.1, 1.0, shape)
    mask = rng.random(shape) > 0.2
    reading = np.where(mask, noisy(shape, 0.5, 1), 0.0)
    precision = np.where(mask, 1.0 / variance, 0.0)
    likelihood = Gaussian.from_arrays(reading, precision.astype(np.float32))
    problem, image = solved(likelihood, priors.Smoothness(1.5))
    found = degrees_of_freedom(problem, image)
    laplacian = np.zeros((mask.size, mask.size))
    index = np.arange(mask.size).reshape(shape)
    for one, other in ((index[1:], index[:-1]), (index[:, 1:], index[:, :-1])):
        for a, b in zip(one.ravel(), other.ravel(), strict=True):
            laplacian[[a, b], [a, b]] += 1.0
            laplacian[a, b] -= 1.0
            laplacian[b, a] -= 1.0
    root = np.sqrt(precision.ravel())
    hat = root[:, None] * np.linalg.inv(np.diag(precision.ravel()) + 1.5 * laplacian) * root[None, :]
    deviation = np.sqrt(np.sum((hat - np.diag(np.diag(hat))) ** 2))  # of the mean of two draws
    assert abs(found.number - np.trace(hat)) < 4.0 * deviation + 0.01 * np.trace(hat)
    assert deviation < 0.2 * np.trace(hat)


@pytest.mark.parametrize(
    "kind",
    [
        "gaussian",
        "poisson",
    ],
)
def test_nothing_smoothed_and_all_smoothed(kind: str) -> None:
    """Each pixel one, and one in all."""
    shape = (24, 24)
    if kind == "gaussian":
        likelihood, bounds = Gaussian(noisy(shape, 0.2, 0), 0.04), BOX
    else:
        counts = recon.simulate.counts(noisy(shape, 0.0, 0), 1, 40.0, several_per_trial=True, seed=0)
        likelihood, bounds = Poisson(counts), (0.0, 50.0)
    free = degrees_of_freedom(*solved(likelihood, priors.TotalVariation(1e-4), bounds))
    assert free.number == pytest.approx(24 * 24, rel=0.03)
    flat = degrees_of_freedom(*solved(likelihood, priors.TotalVariation(1e4), bounds))
    # b' 1 1' b / n of two draws: one on average, and no more than a few
    assert 0.0 <= flat.number < 6.0


def test_a_flat_image_has_one_on_average() -> None:
    """The mean of chi-squared numbers of one degree, over sizes that draw other signs."""
    numbers = []
    for columns in range(6, 26):
        likelihood = Gaussian(noisy((20, columns), 0.3, columns), 0.09)
        numbers.append(degrees_of_freedom(*solved(likelihood, priors.Smoothness(1e5))).number)
    assert np.mean(numbers) == pytest.approx(1.0, abs=4.0 * np.sqrt(2.0 / (2 * len(numbers))))


@pytest.mark.parametrize("seed", range(4))
def test_total_variation_in_one_dimension_counts_its_flat_pieces(seed: int) -> None:
    """Tibshirani and Taylor 2012; the finite step of the estimate blurs that by a little."""
    rng, rms = np.random.default_rng(seed), 0.05
    scene = np.repeat(rng.uniform(0.0, 4.0, 30), 10)[None, :]
    likelihood = Gaussian(scene + rms * rng.standard_normal(scene.shape), rms**2)
    problem, image = solved(likelihood, priors.TotalVariation(60.0, isotropic=False))
    pieces = 1 + np.count_nonzero(np.abs(np.diff(image[0])) > 1e-3)
    found = degrees_of_freedom(problem, image)
    assert 25 <= pieces <= 80
    # b' P b, P a projector on the pieces: variance 2 (p - sum of 1 / size) a draw
    assert abs(found.number - pieces) < 4.0 * np.sqrt(pieces) * 0.95 + 0.1 * pieces


def test_pieces_counted_over_many_draws() -> None:
    """At a weight that the finite step of the estimate hardly moves."""
    ratios = []
    for seed in range(12):
        rng, rms = np.random.default_rng(100 + seed), 0.05
        scene = np.repeat(rng.uniform(0.0, 4.0, 24), 10 + seed)[None, :]
        likelihood = Gaussian(scene + rms * rng.standard_normal(scene.shape), rms**2)
        problem, image = solved(likelihood, priors.TotalVariation(300.0, isotropic=False))
        pieces = 1 + np.count_nonzero(np.abs(np.diff(image[0])) > 1e-3)
        ratios.append(degrees_of_freedom(problem, image).number / pieces)
    assert np.mean(ratios) == pytest.approx(1.0, abs=0.15)


def test_more_weight_takes_fewer_numbers() -> None:
    counts = recon.simulate.counts(noisy((48, 48), 0.0, 0), 1, 5.0, several_per_trial=True, seed=5)
    found = [
        degrees_of_freedom(*solved(Poisson(counts), priors.TotalVariation(weight), (0.0, 20.0))).number
        for weight in (0.3, 1.0, 3.0, 10.0)
    ]
    assert np.all(np.diff(found) < 0.0)
    assert found[0] < 48 * 48


@pytest.mark.parametrize("x", [0.0, 0.01, 1.0, 400.0])
def test_local_uncertainty_of_poisson_counts(x: float) -> None:
    """u^2 = (x + u) / n + b / n, the root of a quadratic."""
    slope, offset = 3.0, 0.2
    likelihood = Poisson.from_arrays(np.full((3, 4), 2), slope, offset)
    u = local_uncertainty(likelihood, np.full((3, 4), x), (0.0, np.inf))
    expected = 0.5 * (1.0 / slope + np.sqrt(1.0 / slope**2 + 4.0 * (x + offset) / slope))
    np.testing.assert_allclose(u, expected, rtol=3e-4)


def test_local_uncertainty_of_gaussian_readings_and_without_data() -> None:
    precision = np.array([[4.0, 0.0]], np.float32)
    likelihood = Gaussian.from_arrays(np.array([[1.0, 0.0]]), precision)
    u = local_uncertainty(likelihood, np.array([[1.0, 1.0]]), (-3.0, 9.0))
    np.testing.assert_allclose(u, [[0.5, 12.0 / np.sqrt(12.0)]], rtol=1e-6)
    u = local_uncertainty(likelihood, np.array([[-5.0, 1.0]]), (-np.inf, 9.0))
    np.testing.assert_allclose(u, [[0.5, np.inf]], rtol=1e-6)


@pytest.mark.parametrize("several", [False, True])
def test_local_uncertainty_where_nothing_was_detected(several: bool) -> None:
    """Of the size of one detection: between a half and twice 1 / exposure."""
    counts = recon.Counts(np.zeros((8, 8), int), 20, 0.5, several_per_trial=several)
    image = recon.reconstruct(counts).reflectivity
    assert np.all((image.uncertainty > 0.5 / 10.0) & (image.uncertainty < 2.0 / 10.0))
