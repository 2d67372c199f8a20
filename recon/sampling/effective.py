"""How much a set of chains is worth: effective samples and split R-hat.

Gelman et al. 2013, Bayesian Data Analysis, 3rd ed., sections 11.4 and 11.5; Vehtari, Gelman, Simpson,
Carpenter and Buerkner 2021 (without their ranks, as what is reported are means and standard deviations).
"""

from __future__ import annotations

import numpy as np

COLUMNS = 64  # series transformed together, which bounds the memory


def effective_samples(series: np.ndarray) -> np.ndarray:
    """Return how many independent draws would give the mean as well, for every column (float64).

    series: (chains, draws, columns). Each chain is split in halves, and the sum of autocorrelations ends by
    the initial monotone sequence (Geyer 1992). Never more than the number of draws; 0 where a
    column does not move or there are fewer than 4 draws a half.
    """
    halves = _halves(np.asarray(series))
    found = [_effective(halves[:, :, c : c + COLUMNS]) for c in range(0, halves.shape[2], COLUMNS)]
    return np.concatenate(found)


def split_r_hat(series: np.ndarray) -> np.ndarray:
    """Return split R-hat of every column of a series (chains, draws, columns)."""
    halves = _halves(np.asarray(series)).astype(np.float64)
    count = halves.shape[1]
    if count < 2:
        return np.full(halves.shape[2], np.inf)
    return r_hat(halves.mean(axis=1), halves.var(axis=1, ddof=1), count)


def r_hat(means: np.ndarray, variances: np.ndarray, count: int) -> np.ndarray:
    """Return R-hat from the means and variances of chains of `count` draws each; chains are axis 0.

    sqrt(((count - 1) / count W + B) / W), W the mean of the variances and B the variance of the means;
    inf where nothing moved.
    """
    within = variances.mean(axis=0)
    between = means.var(axis=0, ddof=1)
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = np.sqrt((count - 1) / count + between / within)
    return np.where(within > 0.0, ratio, np.inf)


def _halves(series: np.ndarray) -> np.ndarray:
    """Return each chain as two, the middle draw of an odd number left out."""
    half = series.shape[1] // 2
    return np.concatenate([series[:, :half], series[:, series.shape[1] - half :]])


def _effective(halves: np.ndarray) -> np.ndarray:
    chains, count, columns = halves.shape
    if count < 4:
        return np.zeros(columns)
    values = halves.astype(np.float64)
    means = values.mean(axis=1)
    values -= means[:, None]
    padded = 1 << (2 * count - 1).bit_length()
    power = np.square(np.abs(np.fft.rfft(values, padded, axis=1)))
    covariance = np.fft.irfft(power, padded, axis=1)[:, :count].mean(axis=0) / count
    within = covariance[0] * count / (count - 1)
    pooled = covariance[0] + means.var(axis=0, ddof=1)
    with np.errstate(divide="ignore", invalid="ignore"):
        correlation = 1.0 - (within - covariance * count / (count - 1)) / pooled
    pairs = correlation[0 : count - 1 : 2] + correlation[1:count:2]
    # Sums of neighbours fall and stay above zero in a reversible chain; noise takes over where they do not.
    alive = np.logical_and.accumulate(pairs > 0.0, axis=0)
    pairs = np.minimum.accumulate(np.where(alive, pairs, 0.0), axis=0)
    time = np.maximum(2.0 * pairs.sum(axis=0) - 1.0, 1.0)
    return np.where(covariance[0] > 0.0, chains * count / time, 0.0)
