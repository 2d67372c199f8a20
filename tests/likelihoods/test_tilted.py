"""A tilted likelihood against brute force, and against likelihoods that are tilted by other data."""

import numpy as np
import pytest
from scipy.optimize import minimize_scalar

import recon
from recon.likelihoods import BernoulliTrials, Gaussian, Poisson, PoissonMarks
from recon.likelihoods.tilted import Tilted

SHAPE = (3, 4)
BOX = (0.05, 6.0)


def wholes():
    rng = np.random.default_rng(7)
    scene = rng.uniform(0.2, 3.0, SHAPE)
    mask = np.ones(SHAPE, bool)
    mask[1, 2] = False
    found = rng.poisson(scene * 4.0)
    found[0, 0] = 0
    precision = np.where(mask, rng.uniform(1.0, 5.0, SHAPE), 0.0).astype(np.float32)
    clicks = rng.binomial(9, -np.expm1(-0.3 * scene))
    clicks[0, :2] = 0, 9
    return {
        "gaussian": Gaussian.from_arrays(scene, precision),
        "poisson": Poisson(recon.Counts(found, 4, 1.0, 0.1, mask, several_per_trial=True)),
        "trials": BernoulliTrials(recon.Counts(clicks, 9, 0.3, 0.02, mask)),
    }


def tilted(kind, seed=0):
    whole = wholes()[kind]
    rng = np.random.default_rng(seed)
    return Tilted(whole, rng.normal(0.0, 0.8, SHAPE), rng.uniform(0.5, 2.0, SHAPE))


def smallest(function, low=BOX[0], high=BOX[1]):
    """The argument and value of the least value of a convex function of a number, ends included."""
    found = minimize_scalar(function, bounds=(low, high), method="bounded", options={"xatol": 1e-11})
    return min((function(x), x) for x in (found.x, low, high))


def one(likelihood, place, x):
    """The value of a pixel at a number."""
    return float(likelihood.value_map(np.full(SHAPE, x))[place])


@pytest.mark.parametrize("kind", wholes())
def test_the_value_is_that_of_the_whole_and_a_slope(kind: str) -> None:
    likelihood = tilted(kind)
    x = np.random.default_rng(1).uniform(0.2, 3.0, SHAPE)
    seen = likelihood.has_data
    rng = np.random.default_rng(0)
    slope, centre = rng.normal(0.0, 0.8, SHAPE), rng.uniform(0.5, 2.0, SHAPE)
    expected = likelihood.whole.value_map(x) - np.where(seen, slope * (x - centre), 0.0)
    np.testing.assert_allclose(likelihood.value_map(x), expected, rtol=1e-12)
    assert likelihood.value(x) == pytest.approx(expected.sum(), rel=1e-12)
    np.testing.assert_array_equal(likelihood.value_map(x)[~seen], 0.0)


@pytest.mark.parametrize("kind", wholes())
def test_the_gradient_against_differences(kind: str) -> None:
    likelihood, h = tilted(kind), 1e-5
    x = np.random.default_rng(2).uniform(0.3, 3.0, SHAPE)
    slope = (likelihood.value_map(x + h) - likelihood.value_map(x - h)) / (2.0 * h)
    np.testing.assert_allclose(likelihood.gradient(x), slope, rtol=1e-6, atol=1e-7)
    bend = (likelihood.gradient(x + h) - likelihood.gradient(x - h)) / (2.0 * h)
    np.testing.assert_allclose(likelihood.curvature(x), bend, rtol=1e-5, atol=1e-6)


@pytest.mark.parametrize("kind", wholes())
@pytest.mark.parametrize("step", [0.02, 0.5, 10.0])
def test_the_prox_against_a_search(kind: str, step: float) -> None:
    likelihood = tilted(kind, 3)
    v = np.random.default_rng(4).uniform(0.3, 4.0, SHAPE)
    found = np.clip(likelihood.prox(v, step), *BOX)
    for place in np.ndindex(SHAPE):
        best = smallest(lambda x, p=place: one(likelihood, p, x) + (x - v[p]) ** 2 / (2.0 * step))[1]
        assert found[place] == pytest.approx(best, abs=2e-5), place


@pytest.mark.parametrize("kind", wholes())
def test_the_conjugate_against_a_search(kind: str) -> None:
    likelihood = tilted(kind, 5)
    for size in (0.3, 3.0, 30.0):
        u = np.random.default_rng(6).normal(0.0, size, SHAPE)
        found = likelihood.conjugate_map(u, *BOX)
        for place in np.ndindex(SHAPE):
            most = -smallest(lambda x, p=place, u=u: one(likelihood, p, x) - u[p] * x)[0]
            assert found[place] == pytest.approx(most, abs=1e-6 * (1.0 + abs(most))), place
        assert likelihood.conjugate(u, *BOX) == pytest.approx(found.sum(), rel=1e-9)


def test_a_tilted_gaussian_is_a_moved_one() -> None:
    """q/2 (x - t)^2 - s x = q/2 (x - t - s/q)^2 + constant: the solve gives the same image."""
    import priors

    rng = np.random.default_rng(8)
    reading, precision = rng.normal(2.0, 0.5, (20, 24)), rng.uniform(2.0, 6.0, (20, 24)).astype(np.float32)
    slope = rng.normal(0.0, 1.0, (20, 24))
    prior, bounds = priors.TotalVariation(0.8), (-9.0, 9.0)
    whole = Gaussian.from_arrays(reading, precision)
    pulled = recon.Problem(Tilted(whole, slope, np.full((20, 24), 2.0)), prior, bounds)
    moved = recon.Problem(Gaussian.from_arrays(reading + slope / precision, precision), prior, bounds)
    one, other = (recon.solve(problem, tolerance=1e-6) for problem in (pulled, moved))
    np.testing.assert_allclose(one.image, other.image, atol=3e-3)


def test_a_tilted_poisson_has_another_exposure() -> None:
    """m - k log m less s x is that of counts with slope - s."""
    import priors

    rng = np.random.default_rng(9)
    count, slope = rng.poisson(6.0, (20, 24)), rng.uniform(-1.0, 1.0, (20, 24))
    prior, bounds = priors.TotalVariation(0.8), (0.0, 30.0)
    pulled = Tilted(Poisson.from_arrays(count, 3.0), slope, np.full((20, 24), 2.0))
    other = Poisson.from_arrays(count, (3.0 - slope).astype(np.float32))
    images = [
        recon.solve(recon.Problem(likelihood, prior, bounds), tolerance=1e-6).image
        for likelihood in (pulled, other)
    ]
    np.testing.assert_allclose(images[0], images[1], atol=5e-3)


def test_no_slope_is_the_whole() -> None:
    for whole in wholes().values():
        flat = Tilted(whole, np.zeros(SHAPE), np.ones(SHAPE))
        x = np.full(SHAPE, 0.7)
        np.testing.assert_array_equal(flat.value_map(x), whole.value_map(x))
        np.testing.assert_array_equal(flat.prox(x, 0.4), whole.prox(x, 0.4))
        np.testing.assert_array_equal(flat.conjugate_map(x, *BOX), whole.conjugate_map(x, *BOX))


@pytest.mark.parametrize("seed", range(3))
def test_majorising_what_is_not_convex(seed: int) -> None:
    """Above the tilted value but for a constant, and with its value and slope at the point."""
    rng = np.random.default_rng(seed)
    frames = recon.simulate.frames(rng.uniform(0.5, 4.0, SHAPE), 0.8, 6, seed=seed)
    likelihood = Tilted(PoissonMarks(frames), rng.normal(0.0, 0.5, SHAPE), np.full(SHAPE, 2.0))
    x = rng.uniform(0.5, 4.0, SHAPE)
    above = likelihood.majorise(x)
    assert above.convex
    np.testing.assert_allclose(above.gradient(x), likelihood.gradient(x), rtol=1e-5, atol=1e-6)
    gap = above.value_map(x) - likelihood.value_map(x)
    for z in rng.uniform(0.05, 8.0, (20, *SHAPE)):
        assert np.all(above.value_map(z) - gap >= likelihood.value_map(z) - 1e-6)
