"""Every prior of ours keeps the contract: images of several shapes, spacing, gaps, edge weights."""

import numba
import numpy as np
import pytest

import priors
from recon.testing import check_prior
from recon.testing.blocks import check_steps

SHAPE = (7, 9)
RNG = np.random.default_rng(4)
MASK = RNG.random(SHAPE) > 0.2
EDGES = RNG.uniform(0.2, 1.5, SHAPE)
EDGES_OF_BOTH = RNG.uniform(0.2, 1.5, (2, *SHAPE))
SETTINGS = {
    "plain": {},
    "spacing": {"spacing": (0.5, 2.0)},
    "gaps": {"mask": MASK},
    "edge weights": {"edge_weights": EDGES},
    "all": {"spacing": (0.02, 0.03), "mask": MASK, "edge_weights": EDGES_OF_BOTH},
}
KINDS = {
    "isotropic": lambda **settings: priors.TotalVariation(0.7, **settings),
    "anisotropic": lambda **settings: priors.TotalVariation(0.7, isotropic=False, **settings),
    "quadratic": lambda **settings: priors.Smoothness(0.7, **settings),
}


@pytest.fixture
def one_thread():
    """On tiny images threads only wait for one another, thousands of times in a value found by a solve."""
    threads = numba.get_num_threads()
    numba.set_num_threads(1)
    yield
    numba.set_num_threads(threads)


@pytest.mark.parametrize("settings", SETTINGS)
@pytest.mark.parametrize("kind", KINDS)
def test_prior_on_first_differences(kind, settings):
    check_prior(KINDS[kind](**SETTINGS[settings]), shape=SHAPE)


@pytest.mark.parametrize("shape", [(1, 8), (8, 1), (2, 2), (40, 5)])
@pytest.mark.parametrize("kind", KINDS)
def test_prior_on_first_differences_of_any_shape(kind, shape):
    check_prior(KINDS[kind](), shape=shape, seed=1)


@pytest.mark.parametrize("weight", [1e-3, 40.0])
@pytest.mark.parametrize("kind", [priors.TotalVariation, priors.Smoothness])
def test_prior_on_first_differences_at_any_weight(kind, weight):
    check_prior(kind(weight), shape=SHAPE, seed=2)


@pytest.mark.parametrize(("settings", "shape"), [("plain", (5, 4)), ("all", SHAPE)])
def test_generalized_variation(settings, shape, one_thread):
    check_prior(priors.GeneralizedVariation(0.7, **SETTINGS[settings]), shape=shape)


@pytest.mark.parametrize("shape", [(1, 8), (8, 1), (2, 2), (40, 5)])
def test_steps_of_generalized_variation_on_any_shape(shape):
    """Rows enough for several threads, whose bands meet."""
    check_steps(priors.GeneralizedVariation(0.7), shape, np.random.default_rng(3))
