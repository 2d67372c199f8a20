"""Compiled passes of the undecimated wavelet transform; see `priors.undecimated` for the map.

Filters have an even number of taps, taken two at a time: the loops over columns are then few, long and
vectorised.
"""

from __future__ import annotations

import numba
import numpy as np
from numba import prange

from priors.kernels import COMPILE


@numba.njit(**COMPILE)
def _two_taps(a, b, u, v, out, first):
    """out (+)= a u + b v."""
    if first:
        for c in range(out.shape[0]):
            out[c] = a * u[c] + b * v[c]
    else:
        for c in range(out.shape[0]):
            out[c] += a * u[c] + b * v[c]


@numba.njit(**COMPILE)
def _dual_row(detail, y, sigma, relaxation, weight):
    """Over-relaxed step of a row of duals: y~ = clip(y + sigma detail) to the weight."""
    for c in range(y.shape[0]):
        proposed = min(max(y[c] + sigma * detail[c], -weight), weight)
        y[c] += relaxation * (proposed - y[c])


@numba.njit(parallel=True, **COMPILE)
def analyse(image, out, y, offset, low, high, gap, sigma, relaxation, weight, advance, bands):
    """Put the low-pass image of a level in `out`; advance the duals y (3, rows, columns) by the details.

    Without `advance` the duals stay. Returns the sum of the details' absolute values, only without `advance`.
    """
    length, rows = low.shape[0], out.shape[0]
    height, width = y.shape[1:]
    sums = np.zeros(rows)
    for band in prange(bands):
        smooth, rough = np.empty(image.shape[1], np.float32), np.empty(image.shape[1], np.float32)
        details = np.empty((3, width), np.float32)
        for r in range(band * rows // bands, (band + 1) * rows // bands):
            for t in range(0, length, 2):
                u, v = image[r + t * gap], image[r + t * gap + gap]
                _two_taps(low[t], low[t + 1], u, v, smooth, t == 0)
                _two_taps(high[t], high[t + 1], u, v, rough, t == 0)
            for t in range(0, length, 2):
                _two_taps(low[t], low[t + 1], smooth[t * gap :], smooth[t * gap + gap :], out[r], t == 0)
            i = r - offset
            if i < 0 or i >= height:
                continue
            for t in range(0, length, 2):
                near, far = offset + t * gap, offset + t * gap + gap
                _two_taps(high[t], high[t + 1], smooth[near:], smooth[far:], details[0], t == 0)
                _two_taps(low[t], low[t + 1], rough[near:], rough[far:], details[1], t == 0)
                _two_taps(high[t], high[t + 1], rough[near:], rough[far:], details[2], t == 0)
            if advance:
                for k in range(3):
                    _dual_row(details[k], y[k, i], sigma, relaxation, weight)
            else:
                total = 0.0
                for k in range(3):
                    for c in range(width):
                        total += np.abs(details[k, c])
                sums[r] = total
    return sums.sum()


@numba.njit(**COMPILE)
def _add(a, u, out):
    for c in range(u.shape[0]):
        out[c] += a * u[c]


@numba.njit(**COMPILE)
def _add_duals(a, b, y, i, smooth, rough, weight):
    """Add a row of the duals, clipped to the weight, with the row filters' taps a (low) and b (high)."""
    for c in range(smooth.shape[0]):
        first = min(max(y[0, i, c], -weight), weight)
        second = min(max(y[1, i, c], -weight), weight)
        third = min(max(y[2, i, c], -weight), weight)
        # Low along rows meets the (low, high) detail; high meets the other two.
        smooth[c] += a * first
        rough[0, c] += b * second
        rough[1, c] += b * third


@numba.njit(parallel=True, **COMPILE)
def synthesise(image, y, out, offset, low, high, gap, weight, last, bands):
    """Put in `out` the adjoint of a level: of its low-pass image (none at the last level) and its duals."""
    length, rows = low.shape[0], out.shape[0]
    height, width = y.shape[1:]
    margin = (length - 1) * gap
    for band in prange(bands):
        # Columns are still filtered: one row each for the low and the high filter, with a margin of zeros.
        through_low = np.zeros(out.shape[1] + margin, np.float32)
        through_high = np.zeros(out.shape[1] + margin, np.float32)
        rough = np.zeros((2, width), np.float32)
        smooth = np.zeros(width, np.float32)
        for r in range(band * rows // bands, (band + 1) * rows // bands):
            through_low[:] = 0.0
            rough[:] = 0.0
            smooth[:] = 0.0
            for t in range(length):
                source = r - t * gap
                if not last and 0 <= source < image.shape[0]:
                    _add(low[t], image[source], through_low[margin : margin + image.shape[1]])
                i = source - offset
                if 0 <= i < height:
                    _add_duals(low[t], high[t], y, i, smooth, rough, weight)
            through_high[:] = 0.0
            inside = slice(margin + offset, margin + offset + width)
            _add(np.float32(1.0), rough[0], through_low[inside])
            _add(np.float32(1.0), smooth, through_high[inside])
            _add(np.float32(1.0), rough[1], through_high[inside])
            for t in range(0, length, 2):
                near, far = margin - t * gap, margin - t * gap - gap
                _two_taps(low[t], low[t + 1], through_low[near:], through_low[far:], out[r], t == 0)
                _two_taps(high[t], high[t + 1], through_high[near:], through_high[far:], out[r], False)
