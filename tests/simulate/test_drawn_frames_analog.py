"""Drawn readings against the compound Poisson law and against electrons drawn one by one."""

import numpy as np
import pytest
from scipy import stats

from recon.acquisition import MarkLaw
from recon.errors import InputError
from recon.simulate import frames

SHAPE = (100, 120)
UNLIKELY = 1e-3
LAWS = [
    MarkLaw(gain=1.0, noise=0.05),
    MarkLaw(gain=30.0, variance=250.0, offset=12.0, noise=6.0),
    MarkLaw(gain=2.0, variance=4.0, offset=-3.0, noise=1.5),
]


@pytest.mark.parametrize("law", LAWS, ids=["sharp", "wide", "exponential"])
@pytest.mark.parametrize(("lam", "eta"), [(0.125, 0.5), (0.125, 5.0), (2.0, 2.0)])
def test_mean_and_variance(lam, eta, law, seed):
    """offset + gain m and m (variance + (1 + eta) gain^2) + noise^2 with m = lam eta.

    A compound Poisson sum has variance lam E[S^2] (Feller 1971, XII.2); here S sums the readings of a
    Poisson number of electrons, with E[S^2] = eta (variance + gain^2) + eta^2 gain^2.
    """
    drawn = frames(np.full(SHAPE, eta), lam, 5, law=law, seed=seed).counts
    assert drawn.dtype == np.float32
    drawn = drawn.ravel().astype(float)
    mean = law.offset + law.gain * lam * eta
    variance = lam * eta * (law.variance + (1 + eta) * law.gain**2) + law.noise**2
    assert drawn.mean() == pytest.approx(mean, abs=4 * np.sqrt(variance / drawn.size))
    square = (drawn - mean) ** 2
    assert square.mean() == pytest.approx(variance, abs=4 * square.std() / np.sqrt(drawn.size))


def test_electrons_read_one_by_one(seed):
    law, lam, eta, number = LAWS[1], 1.2, 1.8, 40_000
    rng = np.random.default_rng(100 + seed)
    primaries = rng.poisson(lam, number)
    electrons = rng.poisson(eta, primaries.sum())
    pixel = np.repeat(np.repeat(np.arange(number), primaries), electrons)
    marks = rng.normal(law.gain, np.sqrt(law.variance), pixel.size)
    slow = np.bincount(pixel, weights=marks, minlength=number) + rng.normal(law.offset, law.noise, number)
    fast = frames(np.full((200, 200), eta), lam, 1, law=law, seed=seed).counts.ravel()
    assert stats.ks_2samp(slow, fast).pvalue > UNLIKELY


def test_sharp_readings_show_the_law_of_the_electrons(seed, chance):
    """Neyman 1939, Type A: with noise a hundredth of the gain the number of electrons can be read off."""
    lam, eta = 0.5, 1.5
    primaries = np.arange(100)
    each = stats.poisson.pmf(np.arange(40)[:, None], primaries * eta)
    neyman = each @ stats.poisson.pmf(primaries, lam)
    law = MarkLaw(gain=10.0, offset=5.0, noise=0.1)
    drawn = frames(np.full(SHAPE, eta), lam, 4, law=law, seed=seed).counts
    whole = np.round((drawn - 5.0) / 10.0)
    assert chance(whole.astype(int), neyman) > UNLIKELY
    rest = (drawn - 5.0 - 10.0 * whole).ravel()
    assert stats.kstest(rest, stats.norm(0.0, 0.1).cdf).pvalue > UNLIKELY


def test_saturated_readings_stand_at_the_ceiling(seed):
    """A Poisson number of primaries; the share above is that of the same readings without a ceiling."""
    eta = np.full(SHAPE, 3.0)
    free = frames(eta, 1.0, 4, law=MarkLaw(gain=2.0, variance=0.5, noise=0.3), seed=seed).counts
    law = MarkLaw(gain=2.0, variance=0.5, noise=0.3, ceiling=8.0)
    capped = frames(eta, 1.0, 4, law=law, seed=seed)
    np.testing.assert_array_equal(capped.counts, np.minimum(free, 8.0))
    assert capped.saturated == pytest.approx(np.mean(free >= 8.0))
    assert 0.1 < capped.saturated < 0.6
    assert capped.law == law


@pytest.mark.parametrize("law", [2.0, MarkLaw, {"gain": 1.0}])
def test_what_is_no_law_is_refused(law):
    with pytest.raises(InputError, match=r"law is \w+; give a recon\.MarkLaw"):
        frames(np.ones((3, 4)), 1.0, 2, law=law, seed=0)
