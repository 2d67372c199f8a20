"""Compiled passes of the undecimated wavelet transform; see `priors.undecimated` for the map.

Filters come with a multiple of four taps and are taken four at a time: the loops over columns are then
few, long and vectorised, whatever the filter, and one compilation serves all wavelets. What a band of
rows does is compiled apart from the loop over bands, which takes half the time.
"""

from __future__ import annotations

import numba
import numpy as np
from numba import prange

from priors.kernels import COMPILE

ZERO = np.float32(0.0)


@numba.njit(**COMPILE)
def _four(taps, t):
    return taps[t], taps[t + 1], taps[t + 2], taps[t + 3]


@numba.njit(**COMPILE)
def _split(low, high, u, v, w, x, smooth, rough):
    """Add to `smooth` and `rough` four taps of the low and of the high filter."""
    a, b, c, d = low
    e, f, g, h = high
    for i in range(smooth.shape[0]):
        smooth[i] += a * u[i] + b * v[i] + c * w[i] + d * x[i]
        rough[i] += e * u[i] + f * v[i] + g * w[i] + h * x[i]


@numba.njit(**COMPILE)
def _along(low, high, gap, row, smooth, rough):
    """Put in `smooth` and `rough` the low and the high filter along a row."""
    smooth[:] = ZERO
    rough[:] = ZERO
    for t in range(0, low.shape[0], 4):
        i = t * gap
        j, k, m = i + gap, i + 2 * gap, i + 3 * gap
        _split(_four(low, t), _four(high, t), row[i:], row[j:], row[k:], row[m:], smooth, rough)


@numba.njit(**COMPILE)
def _advance(detail, dual, sigma, relaxation, weight):
    """Over-relaxed step of a row of duals: y~ = clip(y + sigma detail) to the weight."""
    for c in range(dual.shape[0]):
        proposed = min(max(dual[c] + sigma * detail[c], -weight), weight)
        dual[c] += relaxation * (proposed - dual[c])


@numba.njit(**COMPILE)
def _analyse_rows(image, out, y, offset, low, high, gap, sigma, relaxation, weights, advance, start, stop):
    height, width = y.shape[1:]
    smooth, rough = np.empty(image.shape[1], np.float32), np.empty(image.shape[1], np.float32)
    across = np.empty(out.shape[1], np.float32)
    details = np.empty((3, width), np.float32)
    total = 0.0
    for r in range(start, stop):
        smooth[:] = ZERO
        rough[:] = ZERO
        for t in range(0, low.shape[0], 4):
            i = r + t * gap
            j, k, m = i + gap, i + 2 * gap, i + 3 * gap
            _split(_four(low, t), _four(high, t), image[i], image[j], image[k], image[m], smooth, rough)
        _along(low, high, gap, smooth, out[r], across)
        if r < offset or r >= offset + height:
            continue
        details[0] = across[offset : offset + width]
        _along(low, high, gap, rough[offset:], details[1], details[2])
        for k in range(3):
            if advance:
                _advance(details[k], y[k, r - offset], sigma, relaxation, weights[k])
            else:
                total += weights[k] * np.sum(np.abs(details[k]).astype(np.float64))
    return total


@numba.njit(parallel=True, **COMPILE)
def analyse(image, out, y, offset, low, high, gap, sigma, relaxation, weights, advance, bands):
    """Put the low-pass image of a level in `out`; advance the duals y (3, rows, columns) by the details.

    Without `advance` the duals stay, and the weighted sum of the details' absolute values is returned.
    """
    rows = out.shape[0]
    totals = np.zeros(bands)
    for band in prange(bands):
        totals[band] = _analyse_rows(
            image,
            out,
            y,
            offset,
            low,
            high,
            gap,
            sigma,
            relaxation,
            weights,
            advance,
            band * rows // bands,
            (band + 1) * rows // bands,
        )
    return totals.sum()


@numba.njit(**COMPILE)
def _gather(taps, u, v, w, x, out):
    """Add to `out` four taps of one filter."""
    a, b, c, d = taps
    for i in range(out.shape[0]):
        out[i] += a * u[i] + b * v[i] + c * w[i] + d * x[i]


@numba.njit(**COMPILE)
def _merge(low, u, v, w, x, high, p, q, r, s, out):
    """Add to `out` four taps of the low filter on u to x and of the high one on p to s."""
    a, b, c, d = low
    e, f, g, h = high
    for i in range(out.shape[0]):
        out[i] += a * u[i] + b * v[i] + c * w[i] + d * x[i] + e * p[i] + f * q[i] + g * r[i] + h * s[i]


@numba.njit(**COMPILE)
def _met(tap, row, rows):
    """Return a tap and the row it meets; a row outside counts nothing."""
    return (tap, row) if 0 <= row < rows else (ZERO, 0)


@numba.njit(**COMPILE)
def _four_met(taps, t, row, gap, rows):
    a, i = _met(taps[t], row, rows)
    b, j = _met(taps[t + 1], row - gap, rows)
    c, k = _met(taps[t + 2], row - 2 * gap, rows)
    d, m = _met(taps[t + 3], row - 3 * gap, rows)
    return (a, b, c, d), i, j, k, m


@numba.njit(**COMPILE)
def _synthesise_rows(image, y, out, offset, low, high, gap, last, start, stop):
    height, width = y.shape[1:]
    margin = (low.shape[0] - 1) * gap
    # Columns are still to be filtered: a row each for the low and the high filter, in a margin of zeros.
    smooth = np.zeros(out.shape[1] + margin, np.float32)
    rough = np.zeros(out.shape[1] + margin, np.float32)
    wide = smooth[margin : margin + image.shape[1]]
    smooth_inside = smooth[margin + offset : margin + offset + width]
    rough_inside = rough[margin + offset : margin + offset + width]
    for r in range(start, stop):
        wide[:] = ZERO
        rough_inside[:] = ZERO
        for t in range(0, low.shape[0], 4):
            if not last:
                a, i, j, k, m = _four_met(low, t, r - t * gap, gap, image.shape[0])
                _gather(a, image[i], image[j], image[k], image[m], wide)
            a, i, j, k, m = _four_met(low, t, r - t * gap - offset, gap, height)
            b, i, j, k, m = _four_met(high, t, r - t * gap - offset, gap, height)
            _gather(b, y[1, i], y[1, j], y[1, k], y[1, m], smooth_inside)
            _merge(a, y[0, i], y[0, j], y[0, k], y[0, m], b, y[2, i], y[2, j], y[2, k], y[2, m], rough_inside)
        target = out[r]
        target[:] = ZERO
        for t in range(0, low.shape[0], 4):
            i = margin - t * gap
            j, k, m = i - gap, i - 2 * gap, i - 3 * gap
            _merge(
                _four(low, t),
                smooth[i:],
                smooth[j:],
                smooth[k:],
                smooth[m:],
                _four(high, t),
                rough[i:],
                rough[j:],
                rough[k:],
                rough[m:],
                target,
            )


@numba.njit(parallel=True, **COMPILE)
def synthesise(image, y, out, offset, low, high, gap, last, bands):
    """Put in `out` the adjoint of a level: of its low-pass image (none at the last level) and its duals."""
    rows = out.shape[0]
    for band in prange(bands):
        _synthesise_rows(
            image, y, out, offset, low, high, gap, last, band * rows // bands, (band + 1) * rows // bands
        )
