"""Exact intervals of a count: published tables, scipy, and their coverage summed over all outcomes."""

import numpy as np
import pytest
from scipy import stats

from recon.errors import InputError
from recon.uncertainty import clopper_pearson, garwood

SHARES = (0.5, 0.68, 0.95, 0.99)

# Garwood 1936, 95 %, four decimals.
POISSON = {
    0: (0.0, 3.6889), 1: (0.0253, 5.5716), 2: (0.2422, 7.2247), 3: (0.6187, 8.7673),
    5: (1.6235, 11.6683), 10: (4.7954, 18.3904),
}  # fmt: skip
# Clopper and Pearson 1934, 95 %, four decimals.
BINOMIAL = {
    (0, 10): (0.0, 0.3085), (1, 10): (0.0025, 0.4450), (3, 10): (0.0667, 0.6525),
    (5, 10): (0.1871, 0.8129), (10, 100): (0.0490, 0.1762),
}  # fmt: skip


@pytest.mark.parametrize("count", POISSON)
def test_the_table_of_garwood(count: int) -> None:
    np.testing.assert_allclose(np.array(garwood(count)).ravel(), POISSON[count], atol=5.1e-5)


@pytest.mark.parametrize("share", SHARES)
def test_chi_squared_quantiles(share: float) -> None:
    k, tail = np.array([0, 1, 2, 7, 50, 1000, 100_000]), 0.5 * (1.0 - share)
    low, high = garwood(k, share)
    expected = np.where(k > 0, 0.5 * stats.chi2.ppf(tail, 2 * np.maximum(k, 1)), 0.0)
    np.testing.assert_allclose(low, expected, rtol=1e-9)
    np.testing.assert_allclose(high, 0.5 * stats.chi2.ppf(1.0 - tail, 2 * k + 2), rtol=1e-9)


@pytest.mark.parametrize("share", SHARES)
def test_poisson_coverage_summed_over_counts(share: float) -> None:
    k = np.arange(400)
    low, high = garwood(k, share)
    for mean in np.geomspace(1e-3, 200.0, 300):
        held = stats.poisson.pmf(k, mean)[(low <= mean) & (mean <= high)].sum()
        assert held >= share - 1e-9


def test_a_poisson_interval_is_no_wider_than_it_must_be() -> None:
    """At its own ends a count is just as unlikely as the tail allows."""
    k = np.arange(1, 60)
    low, high = garwood(k, 0.95)
    np.testing.assert_allclose(stats.poisson.sf(k - 1, low), 0.025, rtol=1e-8)
    np.testing.assert_allclose(stats.poisson.cdf(k, high), 0.025, rtol=1e-8)


@pytest.mark.parametrize(("count", "trials"), BINOMIAL)
def test_the_table_of_clopper_and_pearson(count: int, trials: int) -> None:
    found = np.array(clopper_pearson(count, trials)).ravel()
    np.testing.assert_allclose(found, BINOMIAL[count, trials], atol=5.1e-5)


@pytest.mark.parametrize("share", SHARES)
def test_binomial_against_scipy(share: float) -> None:
    for trials in (1, 2, 13, 200):
        k = np.arange(trials + 1)
        low, high = clopper_pearson(k, trials, share)
        for count in k[:: max(trials // 20, 1)]:
            expected = stats.binomtest(int(count), trials).proportion_ci(share, "exact")
            assert low[count] == pytest.approx(expected.low, abs=1e-10)
            assert high[count] == pytest.approx(expected.high, abs=1e-10)


@pytest.mark.parametrize("trials", [1, 5, 40])
@pytest.mark.parametrize("share", SHARES)
def test_binomial_coverage_summed_over_counts(share: float, trials: int) -> None:
    k = np.arange(trials + 1)
    low, high = clopper_pearson(k, trials, share)
    for p in np.linspace(0.0, 1.0, 401):
        assert stats.binom.pmf(k, trials, p)[(low <= p) & (p <= high)].sum() >= share - 1e-9


@pytest.mark.parametrize("wanted", [1, 2, 5])
@pytest.mark.parametrize("share", SHARES)
def test_inverse_binomial_coverage_summed_over_trials(share: float, wanted: int) -> None:
    trials = np.arange(wanted, 20_000)
    low, high = clopper_pearson(wanted, trials, share, True)
    for p in np.concatenate([np.geomspace(2e-3, 0.5, 60), np.linspace(0.5, 1.0, 60)]):
        chance = stats.nbinom.pmf(trials - wanted, wanted, p)
        assert chance.sum() == pytest.approx(1.0, abs=1e-9)
        assert chance[(low <= p) & (p <= high)].sum() >= share - 1e-9


def test_an_inverse_binomial_interval_is_no_wider_than_it_must_be() -> None:
    """At its own ends a number of trials is just as unlikely as the tail allows."""
    for wanted in (1, 4):
        trials = np.arange(wanted + 1, 200)
        low, high = clopper_pearson(wanted, trials, 0.95, True)
        np.testing.assert_allclose(stats.nbinom.cdf(trials - wanted, wanted, low), 0.025, rtol=1e-8)
        np.testing.assert_allclose(stats.nbinom.sf(trials - wanted - 1, wanted, high), 0.025, rtol=1e-8)


@pytest.mark.parametrize("most", [6, 30])
@pytest.mark.parametrize("wanted", [1, 3])
def test_coverage_where_waiting_was_given_up(wanted: int, most: int) -> None:
    """Summed over every end: the last detection at any trial, or too few at the last one."""
    at = np.arange(wanted, most + 1)
    low, high = clopper_pearson(wanted, at, 0.9, True)
    few = np.arange(wanted)
    low_few, high_few = clopper_pearson(few, most, 0.9, False)
    for p in np.linspace(0.001, 0.999, 301):
        held = stats.nbinom.pmf(at - wanted, wanted, p)[(low <= p) & (p <= high)].sum()
        held += stats.binom.pmf(few, most, p)[(low_few <= p) & (p <= high_few)].sum()
        assert held >= 0.9 - 1e-9


def test_nothing_and_everything_detected() -> None:
    assert garwood(0)[0] == 0.0
    assert tuple(map(float, clopper_pearson(0, 0))) == (0.0, 1.0)
    low, high = clopper_pearson(7, 7)
    assert float(high) == 1.0
    assert float(low) == pytest.approx(0.025 ** (1.0 / 7.0), rel=1e-12)  # of p^7 = tail
    assert float(clopper_pearson(7, 7, 0.95, True)[1]) == 1.0
    assert float(clopper_pearson(0, 9, 0.95, True)[0]) == 0.0


def test_maps_keep_their_shape_and_broadcast() -> None:
    k = np.array([[0, 1, 2], [3, 4, 5]])
    for low, high in (
        garwood(k),
        clopper_pearson(k, np.array([[9, 10, 11]])),
        clopper_pearson(k, 9, 0.5, k > 2),
    ):
        assert low.shape == high.shape == (2, 3)
        assert low.dtype == high.dtype == np.float64
        assert np.all(low < high)
    single = clopper_pearson(2, 11)
    pair = clopper_pearson(k, np.array([[9, 10, 11]]))
    assert pair[0][0, 2] == pytest.approx(float(single[0]), rel=1e-12)


def test_what_cannot_be_used_is_refused() -> None:
    with pytest.raises(InputError, match="count"):
        garwood(-1)
    with pytest.raises(InputError, match="count"):
        garwood([1.5])
    with pytest.raises(InputError, match="count"):
        garwood([np.nan])
    for share in (0.0, 1.0, 95, -0.1, np.nan):
        with pytest.raises(InputError, match="share is"):
            garwood(1, share)
        with pytest.raises(InputError, match="share is"):
            clopper_pearson(1, 2, share)
    with pytest.raises(InputError, match=r"count at \(1,\) is 5.0; give no more detections"):
        clopper_pearson([1, 5], 4)
    with pytest.raises(InputError, match="trials"):
        clopper_pearson(1, 2.5)
