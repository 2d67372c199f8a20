"""Compiled passes over pixels for readings of electrons that primaries released.

All take eta (rows, columns), dose (rows or 1, columns), a boolean map `usable`, the parts of a
`FrameTally` of classes of readings (class c is the count c + 1), of a `MarkTable` and
`neyman.coefficients()`; `most` is `MarkTable.most`. All write maps, in float64.
"""

from __future__ import annotations

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE, row
from recon.likelihoods.mark_table_kernels import electrons, reading


@numba.njit(**COMPILE)
def pixel(p, lam, eta, seen, marks, table, scratch):
    """Sums over the frames of pixel p: log P, its first and second derivative by eta, E[M|reading].

    scratch: (4, most), overwritten.
    """
    start, count, times, kind, factor, _ = seen
    value, first, second, primaries = 0.0, 0.0, 0.0, 0.0
    last, dose, number = -1, lam, 0
    for pair in range(start[p], start[p + 1]):
        this = np.int64(kind[pair]) if kind.size else 0
        if this != last:
            last, dose = this, lam * factor[this]
            number = electrons(dose, eta, table, scratch)
        log_p, d, s, m = reading(np.int64(count[pair]) - 1, dose, eta, number, scratch, marks, table)
        h = np.float64(times[pair])
        value += h * log_p
        first += h * d
        second += h * (s - d * d)
        primaries += h * m
    return value, first, second, primaries


@numba.njit(parallel=True, **COMPILE)
def sums(eta, dose, usable, start, count, times, kind, factor, empty, marks, most, table, out):
    """Write out[0..3], what `pixel` returns."""
    for i in prange(eta.shape[0]):
        lam = row(dose, i)
        seen = (start, count, times, kind, factor, empty)
        scratch = np.empty((4, most))
        for j in range(eta.shape[1]):
            if usable[i, j]:
                p = i * eta.shape[1] + j
                value, first, second, primaries = pixel(
                    p, lam[j], eta[i, j], seen, marks, table, scratch
                )  # fmt: skip
                out[0, i, j] = value
                out[1, i, j] = first
                out[2, i, j] = second
                out[3, i, j] = primaries
