"""Compiled passes over frames that have moved.

counts: (frames, rows, columns); shifts: (frames, 2); factors: (frames, rows); dose: (rows or 1, columns);
usable: boolean map of the pixels of a frame. Pixel p of frame f sees the image at p - shifts[f],
interpolated bilinearly; pixels that would see beyond the image are left out.
"""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE, row
from recon.likelihoods.neyman import law, posterior


@numba.njit(inline="always", **COMPILE)
def placed(shift, size):
    """Return the whole and fractional part of -shift, and the range of pixels that see inside the image."""
    whole = math.floor(-shift)
    part = -shift - whole
    first = max(0, -whole)
    last = min(size, size - whole - (1 if part > 0.0 else 0))
    return whole, part, first, last


@numba.njit(**COMPILE)
def gather(counts, shifts, factors, dose, usable, electrons, primaries):
    """Add every frame, moved back, to the maps of electrons and of expected primaries.

    Maps have a row and a column more than the image, which take nothing but zeros.
    """
    frames, rows, columns = counts.shape
    for f in range(frames):
        down, v, top, bottom = placed(shifts[f, 0], rows)
        right, h, left, end = placed(shifts[f, 1], columns)
        for i in range(top, bottom):
            lam = row(dose, i)
            above, below = i + down, min(i + down + 1, rows)
            factor = np.float64(factors[f, i])
            for j in range(left, end):
                if usable[i, j]:
                    expected = factor * lam[j]
                    primaries[above, j + right] += (1.0 - v) * (1.0 - h) * expected
                    primaries[above, j + right + 1] += (1.0 - v) * h * expected
                    primaries[below, j + right] += v * (1.0 - h) * expected
                    primaries[below, j + right + 1] += v * h * expected
            for j in range(left, end):
                y = np.float64(counts[f, i, j])
                if y > 0.0 and usable[i, j]:
                    electrons[above, j + right] += (1.0 - v) * (1.0 - h) * y
                    electrons[above, j + right + 1] += (1.0 - v) * h * y
                    electrons[below, j + right] += v * (1.0 - h) * y
                    electrons[below, j + right + 1] += v * h * y


@numba.njit(inline="always", **COMPILE)
def _between(image, i, j, v, h):
    upper = (1.0 - h) * image[i, j] + h * image[i, j + 1]
    lower = (1.0 - h) * image[i + 1, j] + h * image[i + 1, j + 1]
    return (1.0 - v) * upper + v * lower


@numba.njit(parallel=True, **COMPILE)
def shift_scores(counts, shifts, factors, dose, usable, eta, slopes, unseen, table, score):
    """Write the derivative of the log likelihood of every frame to its shift, (frames, 2).

    eta: (rows + 1, columns + 1), above zero; slopes: (2, rows + 1, columns + 1), its derivatives along rows
    and columns; unseen: slopes exp(-eta). The last row and column are met with weight zero alone.
    """
    frames, rows, columns = counts.shape
    for f in prange(frames):
        down, v, top, bottom = placed(shifts[f, 0], rows)
        right, h, left, end = placed(shifts[f, 1], columns)
        first, second = 0.0, 0.0
        for i in range(top, bottom):
            lam = row(dose, i)
            factor = np.float64(factors[f, i])
            a, b = 0.0, 0.0
            for j in range(left, end):
                weight = lam[j] if usable[i, j] else 0.0
                a += weight * _between(unseen[0], i + down, j + right, v, h)
                b += weight * _between(unseen[1], i + down, j + right, v, h)
            first += factor * a
            second += factor * b
            for j in range(left, end):
                y = np.int64(counts[f, i, j])
                if y > 0 and usable[i, j]:
                    x = _between(eta, i + down, j + right, v, h)
                    _, mean, _ = posterior(y, law(factor * lam[j], x), table)
                    s = y / x - mean
                    first -= s * _between(slopes[0], i + down, j + right, v, h)
                    second -= s * _between(slopes[1], i + down, j + right, v, h)
                    first -= factor * lam[j] * _between(unseen[0], i + down, j + right, v, h)
                    second -= factor * lam[j] * _between(unseen[1], i + down, j + right, v, h)
        score[f, 0], score[f, 1] = first, second
