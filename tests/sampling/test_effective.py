"""Effective samples and R-hat against series whose autocorrelation is known."""

import numpy as np
import pytest
from scipy.signal import lfilter

from recon.sampling import effective_samples, split_r_hat


def autoregressive(phi: float, chains: int, draws: int, columns: int, seed: int) -> np.ndarray:
    """Return stationary AR(1) series: each draw is phi times the one before plus noise."""
    noise = np.random.default_rng(seed).standard_normal((chains, draws, columns))
    noise[:, 1:] *= np.sqrt(1.0 - phi**2)
    return lfilter([1.0], [1.0, -phi], noise, axis=1)


@pytest.mark.parametrize("phi", [0.0, 0.3, 0.7, 0.9])
@pytest.mark.parametrize("seed", range(2))
def test_effective_samples_of_an_autoregressive_series(phi: float, seed: int) -> None:
    # The variance of a mean of n draws is sigma^2 / n (1 + phi) / (1 - phi).
    found = effective_samples(autoregressive(phi, 4, 2000, 70, seed))
    wanted = 8000 * (1.0 - phi) / (1.0 + phi)
    assert found.shape == (70,)
    assert np.mean(found) == pytest.approx(wanted, rel=0.08)
    assert found.min() > 0.4 * wanted


def test_effective_samples_never_exceed_the_draws() -> None:
    assert effective_samples(autoregressive(-0.8, 4, 500, 5, 0)).max() <= 2000.0


def test_what_does_not_move_is_worth_nothing() -> None:
    still = np.repeat(np.arange(4.0)[:, None, None], 100, axis=1)
    assert effective_samples(still)[0] == 0.0
    assert split_r_hat(still)[0] == np.inf
    assert effective_samples(np.zeros((4, 5, 1)))[0] == 0.0


@pytest.mark.parametrize("seed", range(3))
def test_r_hat_is_one_for_chains_alike(seed: int) -> None:
    assert np.all(np.abs(split_r_hat(autoregressive(0.0, 4, 2000, 20, seed)) - 1.0) < 0.005)


def test_r_hat_of_chains_at_different_places() -> None:
    series = autoregressive(0.0, 2, 4000, 1, 0)
    series[1] += 3.0
    # Halves at 0, 0, 3, 3 with unit variance: B = 3, W = 1, hence 2.
    assert split_r_hat(series)[0] == pytest.approx(2.0, rel=0.03)
    assert effective_samples(series)[0] < 20.0


def test_r_hat_of_a_chain_that_drifts() -> None:
    series = autoregressive(0.0, 4, 1000, 1, 0) + np.linspace(0.0, 4.0, 1000)[:, None]
    assert split_r_hat(series)[0] > 1.2
