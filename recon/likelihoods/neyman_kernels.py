"""Compiled passes over pixels for the Neyman Type A law of every frame.

All take eta (rows, columns), dose (rows or 1, columns), a boolean map `usable`, the parts of a `FrameTally`
(start, count, times, kind, factor, empty) and `neyman.coefficients()`; all write a map, in float64. Pixels
that are not usable are left as they are.
"""

from __future__ import annotations

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE, row
from recon.likelihoods.neyman import law, posterior


@numba.njit(**COMPILE)
def pixel(p, lam, eta, start, count, times, kind, factor, empty, table):
    """Sums over the frames of pixel p: log probability, mean of the primaries, variance of the primaries."""
    terms = law(lam, eta)
    log_p0, a = terms[5], terms[3]
    logarithm, mean, variance = empty[p] * log_p0, empty[p] * a, empty[p] * a
    if kind.size == 0:
        for pair in range(start[p], start[p + 1]):
            h = np.int64(times[pair])
            log_probability, m, v = posterior(np.int64(count[pair]), terms, table)
            logarithm += h * log_probability
            mean += h * m
            variance += h * v
        return logarithm, mean, variance
    seen = -1
    for pair in range(start[p], start[p + 1]):
        if kind[pair] != seen:
            seen = np.int64(kind[pair])
            terms = law(lam * factor[seen], eta)
        h = np.int64(times[pair])
        log_probability, m, v = posterior(np.int64(count[pair]), terms, table)
        logarithm += h * log_probability
        mean += h * m
        variance += h * v
    return logarithm, mean, variance


@numba.njit(parallel=True, **COMPILE)
def log_likelihood(eta, dose, usable, start, count, times, kind, factor, empty, table, out):
    """Write sum over frames of log P(y)."""
    for i in prange(eta.shape[0]):
        lam = row(dose, i)
        for j in range(eta.shape[1]):
            if usable[i, j]:
                p = i * eta.shape[1] + j
                out[i, j] = pixel(
                    p, lam[j], eta[i, j], start, count, times, kind, factor, empty, table
                )[0]  # fmt: skip


@numba.njit(parallel=True, **COMPILE)
def primaries(eta, dose, usable, start, count, times, kind, factor, empty, table, mean, variance):
    """Write the mean and the variance of the pixel's number of primaries, given what its frames show."""
    for i in prange(eta.shape[0]):
        lam = row(dose, i)
        for j in range(eta.shape[1]):
            if usable[i, j]:
                p = i * eta.shape[1] + j
                _, mean[i, j], variance[i, j] = pixel(
                    p, lam[j], eta[i, j], start, count, times, kind, factor, empty, table
                )
