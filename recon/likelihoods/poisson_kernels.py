"""Compiled passes for L(x) = slope x - count log(x + offset), the Poisson law of a count.

slope and offset are maps, or a single row where they are the same everywhere.
"""

from __future__ import annotations

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE, row


@numba.njit(parallel=True, **COMPILE)
def proximal_step(x, adjoint, extrapolated, count, slope, offset, step, relaxation, low, high):
    """See `Likelihood.proximal_step`: the prox is the positive root of a quadratic in x + offset."""
    for i in prange(x.shape[0]):
        a, b = row(slope, i), row(offset, i)
        for j in range(x.shape[1]):
            half = np.float32(0.5) * (x[i, j] - step * (adjoint[i, j] + a[j]) + b[j])
            root = half + np.sqrt(half * half + step * count[i, j])
            proposed = min(max(root - b[j], low), high)
            change = proposed - x[i, j]
            extrapolated[i, j] = proposed + change
            x[i, j] += relaxation * change


@numba.njit(inline="always", **COMPILE)
def _half_deviance(mean, count):
    """Half the deviance of a count from its mean."""
    if count > 0.0:
        return mean - count + count * np.log(count / mean)
    return mean


@numba.njit(parallel=True, **COMPILE)
def value(x, count, slope, offset):
    """Return half the deviance summed over pixels."""
    sums = np.zeros(x.shape[0])
    for i in prange(x.shape[0]):
        a, b = row(slope, i), row(offset, i)
        total = 0.0
        for j in range(x.shape[1]):
            mean = np.float64(a[j]) * (np.float64(x[i, j]) + np.float64(b[j]))
            total += _half_deviance(mean, np.float64(count[i, j]))
        sums[i] = total
    return sums.sum()


@numba.njit(parallel=True, **COMPILE)
def conjugate(u, count, slope, offset, low, high):
    """Return the sum over pixels of max over x in [low, high] of u x - half deviance.

    The maximiser is count / (slope - u) - offset, moved into the box.
    """
    sums = np.zeros(u.shape[0])
    for i in prange(u.shape[0]):
        a, b = row(slope, i), row(offset, i)
        total = 0.0
        for j in range(u.shape[1]):
            slack = np.float64(a[j]) - np.float64(u[i, j])
            k = np.float64(count[i, j])
            if slack > 0.0:
                x = min(max(k / slack - b[j], low), high)
            elif slack < 0.0 or k > 0.0:
                x = high
            else:
                x = low
            if x == np.inf:
                total = np.inf
            else:
                total += u[i, j] * x - _half_deviance(a[j] * (x + b[j]), k)
        sums[i] = total
    return sums.sum()
