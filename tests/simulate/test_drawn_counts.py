"""Drawn numbers of detections against the closed laws of counting."""

import numpy as np
import pytest
from scipy import stats

from recon.simulate import counts

SHAPE = (150, 200)
PIXELS = SHAPE[0] * SHAPE[1]
UNLIKELY = 1e-3


@pytest.mark.parametrize(("mean", "trials"), [(0.05, 40), (0.4, 7), (3.0, 5), (1e-9, 10**9)])
def test_fixed_trials_are_binomial(mean, trials, seed, chance):
    drawn = counts(np.full(SHAPE, mean), trials, seed=seed)
    law = stats.binom.pmf(np.arange(41), trials, -np.expm1(-mean))
    assert chance(drawn.detections, law[: trials + 1]) > UNLIKELY
    assert drawn.trials == trials
    assert not drawn.several_per_trial


def test_clicks_equal_photons_drawn_trial_by_trial(seed):
    mean, trials = 0.9, 6
    rng = np.random.default_rng(100 + seed)
    photons = rng.poisson(mean, size=(PIXELS, trials))
    slow = np.count_nonzero(photons, axis=1)
    fast = counts(np.full(SHAPE, mean), trials, seed=seed).detections.ravel()
    table = [np.bincount(sample, minlength=trials + 1)[1:] for sample in (slow, fast)]  # 0 is rare
    assert stats.chi2_contingency(table).pvalue > UNLIKELY


def test_pile_up_of_one_trial(seed):
    """1 - exp(-.05) = .048771, and P(two or more | one or more) = .02479 (Poisson law, recomputed)."""
    image = np.full((1000, 1000), 0.05)
    clicks = counts(image, 1, seed=seed).detections
    assert clicks.mean() == pytest.approx(0.048771, abs=4 * np.sqrt(0.0488 * 0.9512 / image.size))
    photons = counts(image, 1, several_per_trial=True, seed=seed).detections
    some = np.count_nonzero(photons)
    share = np.count_nonzero(photons > 1) / some
    assert share == pytest.approx(0.02479, abs=4 * np.sqrt(0.02479 / some))


def test_waiting_for_the_first_detection_is_geometric(seed, chance):
    drawn = counts(np.full(SHAPE, 0.3), None, stop_after=1, seed=seed)
    assert np.all(drawn.detections == 1)
    assert chance(drawn.trials.astype(int) - 1, stats.geom.pmf(1 + np.arange(60), -np.expm1(-0.3))) > UNLIKELY


@pytest.mark.parametrize("wanted", [2, 5])
def test_waiting_for_more_is_negative_binomial(wanted, seed, chance):
    drawn = counts(np.full(SHAPE, 0.7), None, stop_after=wanted, seed=seed)
    assert np.all(drawn.detections == wanted)
    law = stats.nbinom.pmf(np.arange(80), wanted, -np.expm1(-0.7))
    assert chance(drawn.trials.astype(int) - wanted, law) > UNLIKELY


@pytest.mark.parametrize(
    ("wanted", "variance", "naive"),
    [(2, 0.01558428, 0.16537), (3, 0.00653683, 0.13911), (5, 0.00275400, 0.12118), (10, 0.00109435, 0.10976)],
)
def test_inverse_sampling(wanted, variance, naive, seed):
    """p = .1: (k - 1)/(N - 1) is unbiased with this variance, k/N has this mean (Haldane 1945)."""
    drawn = counts(np.full(SHAPE, -np.log(0.9)), None, stop_after=wanted, seed=seed)
    unbiased = (wanted - 1) / (drawn.trials - 1)
    assert unbiased.mean() == pytest.approx(0.1, abs=4 * np.sqrt(variance / PIXELS))
    spread = np.std((unbiased - 0.1) ** 2) / np.sqrt(PIXELS)
    assert np.mean((unbiased - 0.1) ** 2) == pytest.approx(variance, abs=4 * spread)
    ratio = wanted / drawn.trials
    assert ratio.mean() == pytest.approx(naive, abs=4 * ratio.std() / np.sqrt(PIXELS))


def test_mean_of_one_over_the_wait(seed):
    """Geometric: E[1/N] = -p ln p/(1 - p) = .255843 at p = .1 (recomputed)."""
    wait = counts(np.full(SHAPE, -np.log(0.9)), None, stop_after=1, seed=seed).trials
    assert np.mean(1 / wait) == pytest.approx(0.255843, abs=4 * np.std(1 / wait) / np.sqrt(PIXELS))


def test_a_limited_wait(seed, chance):
    p = -np.expm1(-0.25)
    drawn = counts(np.full(SHAPE, 0.25), 5, stop_after=2, seed=seed)
    none, one = stats.binom.pmf([0, 1], 5, p)
    assert chance(drawn.detections, np.array([none, one, 1 - none - one])) > UNLIKELY
    assert np.all(drawn.trials[drawn.detections < 2] == 5)
    reached = drawn.trials[drawn.detections == 2].astype(int)
    law = stats.nbinom.pmf(np.arange(4), 2, p)
    assert chance(reached - 2, law / law.sum()) > UNLIKELY


def test_several_per_trial_is_poisson(seed, chance):
    drawn = counts(np.full(SHAPE, 0.8), 2.5, gain=1.5, background=0.2, several_per_trial=True, seed=seed)
    assert drawn.several_per_trial
    assert chance(drawn.detections, stats.poisson.pmf(np.arange(40), 2.5 * (1.5 * 0.8 + 0.2))) > UNLIKELY


@pytest.mark.parametrize("several", [False, True])
def test_every_map_counts_where_it_stands(several, seed):
    repeats = 4000
    image = np.array([[0.0, 0.3, 0.3, 0.3, 0.3]])
    trials = np.array([[10, 10, 30, 10, 10]])
    gain = np.array([[1.0, 1.0, 1.0, 2.5, 1.0]])
    background = np.array([[0.0, 0.0, 0.0, 0.0, 0.4]])
    maps = [np.repeat(array, repeats, axis=0) for array in (image, trials, gain, background)]
    drawn = counts(*maps, several_per_trial=several, seed=seed)
    mean = np.array([0.0, 0.3, 0.3, 0.75, 0.7])
    expected = trials[0] * (mean if several else -np.expm1(-mean))
    error = drawn.detections.std(axis=0) / np.sqrt(repeats)
    assert np.all(np.abs(drawn.detections.mean(axis=0) - expected) <= 4 * error)
    np.testing.assert_array_equal(drawn.trials, maps[1])
    np.testing.assert_array_equal(drawn.gain, maps[2])
    np.testing.assert_array_equal(drawn.background, maps[3])


@pytest.mark.parametrize("rule", [{}, {"stop_after": 2}, {"several_per_trial": True}])
def test_the_seed_decides(rule):
    image = np.full((30, 40), 0.2)
    first, again, other = (counts(image, 9, seed=s, **rule) for s in (5, 5, 6))
    np.testing.assert_array_equal(first.detections, again.detections)
    np.testing.assert_array_equal(first.trials, again.trials)
    assert np.any(first.detections != other.detections)
    rng = np.random.default_rng(5)
    np.testing.assert_array_equal(counts(image, 9, seed=rng, **rule).detections, first.detections)
    assert np.any(counts(image, 9, seed=rng, **rule).detections != first.detections)
