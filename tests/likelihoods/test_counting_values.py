"""Counting laws against published values, on detections drawn one by one."""

import numpy as np
import pytest

import recon

SHAPE = (400, 500)
PIXELS = SHAPE[0] * SHAPE[1]


def waiting(p: float, wanted: int, seed: int) -> np.ndarray:
    """Return the trials that each pixel made until its wanted-th detection."""
    flat = np.full(SHAPE, -np.log1p(-p))
    return recon.simulate.counts(flat, None, stop_after=wanted, seed=seed).trials


@pytest.mark.parametrize("seed", [0, 1])
@pytest.mark.parametrize(
    ("wanted", "variance", "naive"),
    [(2, 0.01558428, 0.16537), (3, 0.00653683, 0.13911), (5, 0.00275400, 0.12118), (10, 0.00109435, 0.10976)],
)
def test_waiting_for_several_detections(wanted: int, variance: float, naive: float, seed: int) -> None:
    """Haldane 1945: (k-1)/(N-1) is unbiased, k/N is not; p = 0.1."""
    trials = waiting(0.1, wanted, seed)
    unbiased = (wanted - 1) / (trials - 1)
    assert unbiased.mean() == pytest.approx(0.1, abs=5 * np.sqrt(variance / PIXELS))
    assert unbiased.var() == pytest.approx(variance, rel=0.03)
    assert (wanted / trials).mean() == pytest.approx(naive, abs=5 * np.sqrt(variance / PIXELS) * 1.5)


@pytest.mark.parametrize("seed", [0, 1])
def test_waiting_for_the_first_detection(seed: int) -> None:
    """E[1/N] = -p ln p / (1 - p) for the geometric law: .255843 at p = .1 (recomputed)."""
    trials = waiting(0.1, 1, seed)
    assert (1.0 / trials).mean() == pytest.approx(0.255843, abs=5 * (1.0 / trials).std() / np.sqrt(PIXELS))


@pytest.mark.parametrize("wanted", [1, 3])
def test_the_fit_of_one_pixel_is_the_share_of_trials_that_detected(wanted: int) -> None:
    """The maximum-likelihood p of every stopping rule is k/n."""
    trials = waiting(0.2, wanted, 3)
    counts = recon.Counts(np.full(SHAPE, wanted), trials)
    estimate = recon.likelihoods.BernoulliTrials(counts, stop_after=wanted).estimate()
    several = trials > wanted
    np.testing.assert_allclose(-np.expm1(-estimate[several]), (wanted / trials)[several], rtol=1e-5)


@pytest.mark.parametrize("seed", [0, 1])
@pytest.mark.parametrize(
    ("mean", "transformed", "variance"),
    [(0.1, 1.334913, 0.11801), (1.0, 2.186906, 0.71744), (4.0, 4.062173, 0.99875), (10.0, 6.363890, 1.00091)],
)
def test_the_root_of_a_count(mean: float, transformed: float, variance: float, seed: int) -> None:
    """Anscombe 1948: mean and variance of 2 sqrt(k + 3/8), of counts simulated and drawn."""
    flat = np.full(SHAPE, mean)
    counts = recon.simulate.counts(flat, 1, several_per_trial=True, seed=seed)
    drawn = recon.likelihoods.Poisson(counts).draw(flat, seed).estimate()
    for k in (counts.detections, drawn):
        root = 2.0 * np.sqrt(np.asarray(k, float) + 0.375)
        assert root.mean() == pytest.approx(transformed, abs=5 * np.sqrt(variance / PIXELS))
        assert root.var() == pytest.approx(variance, rel=0.02)


@pytest.mark.parametrize("seed", [0, 1, 2])
def test_a_trial_detects_with_the_probability_of_one_photon_or_more(seed: int) -> None:
    """1 - exp(-x): .048771 at x = .05 (recomputed)."""
    counts = recon.simulate.counts(np.full(SHAPE, 0.05), 10, seed=seed)
    share = counts.detections.mean() / 10
    assert share == pytest.approx(0.048771, abs=5 * np.sqrt(0.0488 * 0.9512 / (10 * PIXELS)))
