"""Drawn frames against the Neyman Type A law and against electrons drawn one primary at a time."""

import numpy as np
import pytest
from scipy import stats

from recon.simulate import frames

SHAPE = (100, 120)
UNLIKELY = 1e-3


def neyman(lam: float, eta: float, size: int) -> np.ndarray:
    """P(0), P(1), ...: the Poisson mixture of Poisson laws, summed over the numbers of primaries."""
    primaries = np.arange(200)
    each = stats.poisson.pmf(np.arange(size)[:, None], primaries * eta)
    return each @ stats.poisson.pmf(primaries, lam)


@pytest.mark.parametrize(
    ("lam", "eta", "published"),
    [
        (2.0, 3.0, [0.14950494, 0.04466048, 0.07366126, 0.08766655, 0.08830195]),
        (0.125, 2.0, [0.89755302, 0.03036765, 0.03088137]),
    ],
)
def test_the_law_of_a_frame(lam, eta, published, seed, chance):
    """Neyman 1939; Johnson, Kemp and Kotz (recurrence)."""
    law = neyman(lam, eta, 60)
    np.testing.assert_allclose(law[: len(published)], published, atol=1e-8)
    drawn = frames(np.full(SHAPE, eta), lam, 5, seed=seed).counts
    assert drawn.shape == (5, *SHAPE)
    assert chance(drawn, law) > UNLIKELY


@pytest.mark.parametrize(("lam", "eta"), [(0.125, 0.5), (0.125, 5.0), (3.0, 2.0), (16.0, 3.0)])
def test_mean_and_variance(lam, eta, seed):
    """lam eta and lam eta (1 + eta) (Neyman 1939)."""
    drawn = frames(np.full(SHAPE, eta), lam, 5, seed=seed).counts.ravel().astype(float)
    mean, variance = lam * eta, lam * eta * (1 + eta)
    assert drawn.mean() == pytest.approx(mean, abs=4 * np.sqrt(variance / drawn.size))
    square = (drawn - mean) ** 2
    assert square.mean() == pytest.approx(variance, abs=4 * square.std() / np.sqrt(drawn.size))


def test_electrons_drawn_primary_by_primary(seed):
    lam, eta, number = 1.5, 2.2, 60_000
    rng = np.random.default_rng(100 + seed)
    primaries = rng.poisson(lam, number)
    electrons = rng.poisson(eta, primaries.sum())
    slow = np.bincount(np.repeat(np.arange(number), primaries), weights=electrons, minlength=number)
    fast = frames(np.full((200, 300), eta), lam, 1, seed=seed).counts
    table = [np.bincount(np.minimum(sample.ravel(), 15).astype(int)) for sample in (slow, fast)]
    assert stats.chi2_contingency(table).pvalue > UNLIKELY


def test_frames_are_drawn_apart(seed):
    drawn = frames(np.full(SHAPE, 3.0), 0.5, 2, seed=seed).counts.reshape(2, -1)
    assert abs(np.corrcoef(drawn)[0, 1]) < 4 / np.sqrt(drawn.shape[1])


def test_yield_and_dose_maps_count_where_they_stand(seed):
    eta = np.repeat([[0.0, 1.0, 4.0, 4.0]], 3000, axis=0)
    dose = np.repeat([[0.5, 0.5, 0.5, 2.0]], 3000, axis=0)
    acquisition = frames(eta, dose, 4, seed=seed)
    np.testing.assert_array_equal(acquisition.dose, dose)
    expected = dose[0] * eta[0]
    error = np.sqrt(expected * (1 + eta[0]) / 12_000)
    assert np.all(np.abs(acquisition.counts.mean(axis=(0, 1)) - expected) <= 4 * error)


@pytest.mark.parametrize(("eta", "dtype"), [(1.0, np.uint8), (400.0, np.uint16), (90_000.0, np.uint32)])
def test_the_smallest_type_that_holds_the_counts(eta, dtype):
    drawn = frames(np.full((20, 20), eta), 2.0, 2, seed=0).counts
    assert drawn.dtype == dtype
    assert drawn.mean() == pytest.approx(2 * eta, rel=0.2)


def test_the_seed_decides():
    eta = np.full((20, 30), 2.0)
    first, again, other = (frames(eta, 0.5, 3, seed=s).counts for s in (5, 5, 6))
    np.testing.assert_array_equal(first, again)
    assert np.any(first != other)
    np.testing.assert_array_equal(frames(eta, 0.5, 3, seed=np.random.default_rng(5)).counts, first)
