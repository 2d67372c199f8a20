"""Compiled passes over pixels for the Neyman Type A law of every frame.

All take eta (rows, columns), dose (rows or 1, columns), a boolean map `usable`, a `FrameTally` taken
apart (frames, start, count, times) and `neyman.coefficients()`; all write a map, in float64. Pixels that
are not usable are left as they are.
"""

from __future__ import annotations

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE, row
from recon.likelihoods.neyman import law, posterior


@numba.njit(**COMPILE)
def pixel(p, lam, eta, frames, start, count, times, table):
    """Sums over the frames of pixel p: log probability, mean of the primaries, variance of the primaries."""
    terms = law(lam, eta)
    logarithm, mean, variance = 0.0, 0.0, 0.0
    empty = frames
    for pair in range(start[p], start[p + 1]):
        h = np.int64(times[pair])
        log_probability, m, v = posterior(np.int64(count[pair]), terms, table)
        empty -= h
        logarithm += h * log_probability
        mean += h * m
        variance += h * v
    log_probability, m, v = posterior(0, terms, table)
    return logarithm + empty * log_probability, mean + empty * m, variance + empty * v


@numba.njit(parallel=True, **COMPILE)
def log_likelihood(eta, dose, usable, frames, start, count, times, table, out):
    """Write sum over frames of log P(y)."""
    for i in prange(eta.shape[0]):
        lam = row(dose, i)
        for j in range(eta.shape[1]):
            if usable[i, j]:
                p = i * eta.shape[1] + j
                out[i, j] = pixel(p, lam[j], eta[i, j], frames, start, count, times, table)[0]


@numba.njit(parallel=True, **COMPILE)
def primaries(eta, dose, usable, frames, start, count, times, table, mean, variance):
    """Write the mean and the variance of the pixel's number of primaries, given what its frames show."""
    for i in prange(eta.shape[0]):
        lam = row(dose, i)
        for j in range(eta.shape[1]):
            if usable[i, j]:
                p = i * eta.shape[1] + j
                _, mean[i, j], variance[i, j] = pixel(
                    p, lam[j], eta[i, j], frames, start, count, times, table
                )
