"""Exact confidence intervals of a single count, with no prior."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike
from scipy.special import betaincinv, gammaincinv

from recon.errors import InputError
from recon.validation import refuse, whole_numbers


def garwood(count: ArrayLike, share: float = 0.95) -> tuple[np.ndarray, np.ndarray]:
    """Return the central confidence interval of a Poisson mean (Garwood 1936), float64.

    It covers the mean with at least the given probability, whatever the mean. count: whole, 0 or more.
    Raises InputError.
    """
    k, tail = _counts(count, "count"), _tail(share)
    low = np.where(k > 0.0, gammaincinv(np.maximum(k, 1.0), tail), 0.0)
    return low, gammaincinv(k + 1.0, 1.0 - tail)


def clopper_pearson(
    count: ArrayLike, trials: ArrayLike, share: float = 0.95, ends_with_detection: ArrayLike = False
) -> tuple[np.ndarray, np.ndarray]:
    """Return the central confidence interval of a probability (Clopper and Pearson 1934), float64.

    It covers the probability with at least the given share. count: detections in so many trials, whole.
    ends_with_detection: boolean, where the record was stopped by its last detection (inverse binomial).

    Raises InputError.
    """
    k, n, tail = _counts(count, "count"), _counts(trials, "trials"), _tail(share)
    k, n = np.broadcast_arrays(k, n)
    if np.any(k > n):
        refuse("count", k, k > n, "no more detections than trials")
    failed = n - k
    low = np.where(k > 0.0, betaincinv(np.maximum(k, 1.0), failed + 1.0, tail), 0.0)
    a = np.where(ends_with_detection, k, k + 1.0)
    open_end = (failed > 0.0) & (a > 0.0)
    high = np.where(open_end, betaincinv(np.maximum(a, 1.0), np.maximum(failed, 1.0), 1.0 - tail), 1.0)
    return low, high


def _counts(values: ArrayLike, name: str) -> np.ndarray:
    return np.asarray(whole_numbers(values, name), np.float64)


def _tail(share: float) -> float:
    if not 0.0 < share < 1.0:
        raise InputError(f"share is {share!r}; give a probability between 0 and 1, such as 0.95.")
    return 0.5 * (1.0 - share)
