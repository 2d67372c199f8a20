"""Compiled passes for L(x) = precision / 2 (x - target)^2."""

from __future__ import annotations

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE, row


@numba.njit(parallel=True, **COMPILE)
def proximal_step(x, adjoint, extrapolated, target, precision, step, relaxation, low, high):
    """See `Likelihood.proximal_step`."""
    for i in prange(x.shape[0]):
        q = row(precision, i)
        for j in range(x.shape[1]):
            pull = step * q[j]
            moved = x[i, j] - step * adjoint[i, j]
            proposed = (moved + pull * target[i, j]) / (np.float32(1.0) + pull)
            proposed = min(max(proposed, low), high)
            change = proposed - x[i, j]
            extrapolated[i, j] = proposed + change
            x[i, j] += relaxation * change


@numba.njit(parallel=True, **COMPILE)
def value(x, target, precision):
    """Return half the deviance summed over pixels."""
    sums = np.zeros(x.shape[0])
    for i in prange(x.shape[0]):
        q = row(precision, i)
        total = 0.0
        for j in range(x.shape[1]):
            off = np.float64(x[i, j]) - np.float64(target[i, j])
            total += q[j] * off * off
        sums[i] = total
    return 0.5 * sums.sum()


@numba.njit(parallel=True, **COMPILE)
def conjugate(u, target, precision, low, high):
    """Return the sum over pixels of max over x in [low, high] of u x - precision / 2 (x - target)^2."""
    sums = np.zeros(u.shape[0])
    for i in prange(u.shape[0]):
        q = row(precision, i)
        total = 0.0
        for j in range(u.shape[1]):
            pull, t = np.float64(u[i, j]), np.float64(target[i, j])
            if q[j] > 0.0:
                x = min(max(t + pull / q[j], low), high)
                total += pull * x - 0.5 * q[j] * (x - t) * (x - t)
            elif pull > 0.0:
                total += pull * high
            elif pull < 0.0:
                total += pull * low
        sums[i] = total
    return sums.sum()
