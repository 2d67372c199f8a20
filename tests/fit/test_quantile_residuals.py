"""Quantile residuals are standard normal at the true image, whatever the law, and moments are those of it."""

import numpy as np
import pytest
from scipy import stats

import recon
from recon.fit import quantile_residuals
from recon.fit.count_laws import count_law
from recon.fit.dispersion import dispersion, dispersion_deviation
from recon.fit.quantile_residuals import histogram
from recon.likelihoods import BernoulliTrials, Gaussian, Poisson, PoissonMarks

SHAPE = (40, 50)
SEEDS = range(3)
TRUTH = (0.2 + 2.0 * np.random.default_rng(7).random(SHAPE)).astype(np.float32).astype(float)


def poisson(seed):
    return Poisson(recon.Counts(np.random.default_rng(seed).poisson(TRUTH), 1, several_per_trial=True))


def binomial(seed):
    return BernoulliTrials(recon.simulate.counts(TRUTH, 5, gain=0.3, background=0.05, seed=seed))


def geometric(seed):
    drawn = recon.simulate.counts(TRUTH, None, gain=0.3, stop_after=1, seed=seed)
    return BernoulliTrials(drawn, 1)


def third(seed):
    return BernoulliTrials(recon.simulate.counts(TRUTH, None, gain=0.3, stop_after=3, seed=seed), 3)


def limited(seed):
    drawn = recon.simulate.counts(TRUTH, 6, gain=0.3, stop_after=3, seed=seed)
    return BernoulliTrials(drawn, 3, 6)


def marks(seed):
    return PoissonMarks(recon.simulate.frames(TRUTH, 0.4, 5, seed=seed))


def gaussian(seed):
    noise = np.random.default_rng(seed).standard_normal(SHAPE)
    return Gaussian.from_arrays(TRUTH + 0.5 * noise, np.full(SHAPE, 4.0))


LAWS = [poisson, binomial, geometric, third, limited, marks, gaussian]


@pytest.mark.parametrize("law", LAWS, ids=lambda f: f.__name__)
@pytest.mark.parametrize("seed", SEEDS)
def test_standard_normal_at_the_truth(law, seed):
    found = quantile_residuals(law(seed), TRUTH, seed=100 + seed)
    assert stats.kstest(found.ravel(), "norm").pvalue > 1e-3


@pytest.mark.parametrize("law", LAWS, ids=lambda f: f.__name__)
def test_positive_where_the_data_ask_for_more(law):
    """At an image that is too dark."""
    assert np.mean(quantile_residuals(law(0), 0.6 * TRUTH)) > 0.1
    assert np.mean(quantile_residuals(law(0), 1.6 * TRUTH)) < -0.1


@pytest.mark.parametrize("seed", SEEDS)
def test_not_normal_at_a_wrong_image(seed):
    assert stats.kstest(quantile_residuals(poisson(seed), 1.2 * TRUTH).ravel(), "norm").pvalue < 1e-3


def test_nan_without_data():
    mask = np.ones(SHAPE, bool)
    mask[3] = False
    counts = recon.Counts(np.ones(SHAPE, int), 1, mask=mask, several_per_trial=True)
    found = quantile_residuals(Poisson(counts), TRUTH)
    np.testing.assert_array_equal(np.isfinite(found), mask)
    table = histogram(found)
    assert table.counts.sum() == mask.sum() == pytest.approx(table.expected.sum())


def test_tails_are_those_of_scipy():
    for make, scipy_law in (
        (poisson, lambda x: stats.poisson(x)),
        (binomial, lambda x: stats.binom(5, -np.expm1(-0.3 * x - 0.05))),
    ):
        law = count_law(make(0), TRUTH)
        more, least = law.tails(np.ones(SHAPE, bool))
        expected = scipy_law(TRUTH)
        np.testing.assert_allclose(more.ravel(), expected.sf(law.number).ravel(), rtol=1e-6, atol=1e-12)
        np.testing.assert_allclose(least.ravel(), expected.sf(law.number - 1).ravel(), rtol=1e-6, atol=1e-12)
    law = count_law(third(0), TRUTH)
    more, least = law.tails(np.ones(SHAPE, bool))
    expected = stats.nbinom(3, -np.expm1(-0.3 * TRUTH))
    np.testing.assert_allclose(least.ravel(), expected.cdf(law.number - 3).ravel(), rtol=1e-6)
    np.testing.assert_allclose(more.ravel(), expected.cdf(law.number - 4).ravel(), rtol=1e-6, atol=1e-12)


def moments(frozen):
    mean, variance, _, excess = frozen.stats(moments="mvsk")
    return mean, variance, excess * variance**2


def test_moments_are_those_of_scipy():
    for make, frozen in (
        (poisson, stats.poisson(TRUTH)),
        (binomial, stats.binom(5, -np.expm1(-0.3 * TRUTH - 0.05))),
        (third, stats.nbinom(3, -np.expm1(-0.3 * TRUTH), loc=3)),
    ):
        law = count_law(make(1), TRUTH)
        for found, expected in zip((law.mean, law.variance, law.fourth), moments(frozen), strict=True):
            np.testing.assert_allclose(found, expected, rtol=1e-6, atol=1e-6)


def test_moments_of_the_electrons_of_frames():
    """Against a million draws of one pixel."""
    rng = np.random.default_rng(0)
    drawn = rng.poisson(1.3 * rng.poisson(2.0, 1_000_000))
    law = count_law(PoissonMarks(recon.Frames(np.zeros((5, 2, 2), int), 0.4)), np.full((2, 2), 1.3))
    assert law.mean[0, 0] == pytest.approx(drawn.mean(), rel=5e-3)
    assert law.variance[0, 0] == pytest.approx(drawn.var(), rel=1e-2)
    assert law.fourth[0, 0] == pytest.approx(stats.kstat(drawn.astype(float), 4), rel=0.05)


@pytest.mark.parametrize("law", [poisson, binomial, geometric, third, marks], ids=lambda f: f.__name__)
def test_the_dispersion_is_one_at_the_truth(law):
    """Its mean over draws, and their spread against the closed form."""
    everyone = np.ones(SHAPE, bool)
    found = [dispersion(count_law(law(seed), TRUTH), everyone) for seed in range(60)]
    deviation = dispersion_deviation(count_law(law(0), TRUTH), everyone)
    assert np.mean(found) == pytest.approx(1.0, abs=4.0 * deviation / np.sqrt(60))
    assert np.std(found) == pytest.approx(deviation, rel=0.35)


def test_the_dispersion_of_one_level():
    """Poisson numbers of one mean m: the index is that of Fisher (1925), its variance (2 + 1 / m) / n."""
    counts = poisson(2)
    level = np.full(SHAPE, 1.3)
    law = count_law(counts, level)
    everyone = np.ones(SHAPE, bool)
    assert dispersion(law, everyone) == pytest.approx(np.mean((counts._count - 1.3) ** 2) / 1.3)
    assert dispersion_deviation(law, everyone) == pytest.approx(np.sqrt((2.0 + 1.0 / 1.3) / level.size))
