"""Compiled passes over tags and pixels for L(z) = -sum over tags of log(p(y - z) + noise), noise > 0.

y are the tags' ranges, those of pixel q at start[q] to start[q + 1], ascending; noise (rows, columns) is
the background per metre over the expected signal; low, step, pieces, period describe p (`RangePulse`).
Pixels that are not used are left as they are. All sums are float64; the cost is linear in the tags.
"""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE


@numba.njit(inline="always", **COMPILE)
def turned(u, low, period):
    """Return u moved by whole periods into [low, low + period)."""
    u -= period * math.floor((u - low) / period)
    return low if u >= low + period else u  # where rounding lifted it to the end


@numba.njit(inline="always", **COMPILE)
def density(u, low, step, pieces):
    """Return p, p' and p'' at u in [low, low + period)."""
    x = (u - low) / step
    cell = int(x)
    if cell >= pieces.shape[0]:
        return 0.0, 0.0, 0.0
    v = x - cell
    c = pieces[cell]
    p = math.exp(c[0] + v * (c[1] + v * (c[2] + v * (c[3] + v * (c[4] + v * c[5])))))
    slope = (c[1] + v * (2.0 * c[2] + v * (3.0 * c[3] + v * (4.0 * c[4] + v * 5.0 * c[5])))) / step
    bend = (2.0 * c[2] + v * (6.0 * c[3] + v * (12.0 * c[4] + v * 20.0 * c[5]))) / (step * step)
    return p, p * slope, p * (bend + slope * slope)


@numba.njit(inline="always", **COMPILE)
def cumulative(u, low, step, shares, period):
    """Return the integral of p from low to any u; shares is that of `RangePulse`."""
    turns = math.floor((u - low) / period)
    x = (u - low - turns * period) / step
    cell = int(x)
    if cell >= shares.shape[0]:
        return turns + 1.0
    v = x - cell
    c = shares[cell]
    return turns + (c[0] + v * (c[1] + v * (c[2] + v * (c[3] + v * (c[4] + v * c[5])))))


@numba.njit(**COMPILE)
def locate(places, place, period):
    """Return how many of ascending places, repeated every period without end, lie below a place.

    Those below 0 count as less than none.
    """
    turns = math.floor(place / period)
    return int(turns) * places.size + np.searchsorted(places, place - turns * period)


@numba.njit(parallel=True, **COMPILE)
def ranges(time, start, columns, delay, metres, period):
    """Return the tags' ranges in [0, period), ascending within each pixel; delay has a row or (1, 1)."""
    y = np.empty(time.size)
    for i in prange((start.size - 1) // columns):
        for j in range(columns):
            q = i * columns + j
            late = delay[0, 0] if delay.size == 1 else delay[i, j]
            for k in range(start[q], start[q + 1]):
                y[k] = turned(metres * (time[k] - late), 0.0, period)
            if start[q + 1] > start[q] + 1:
                y[start[q] : start[q + 1]].sort()
    return y


@numba.njit(parallel=True, **COMPILE)
def excess(z, y, start, noise, used, low, step, pieces, period, out):
    """Write the sum over tags of log(1 + p / noise)."""
    rows, columns = used.shape
    for i in prange(rows):
        for j in range(columns):
            if used[i, j]:
                q = i * columns + j
                total = 0.0
                for k in range(start[q], start[q + 1]):
                    p = density(turned(y[k] - z[i, j], low, period), low, step, pieces)[0]
                    total += math.log1p(p / noise[i, j])
                out[i, j] = total


@numba.njit(parallel=True, **COMPILE)
def derivatives(z, y, start, noise, used, share, low, step, pieces, period, gradient, curvature, signal):
    """Write dL/dz, d2L/dz2, and the sum over tags of (p + share noise) / (p + noise)."""
    rows, columns = used.shape
    for i in prange(rows):
        for j in range(columns):
            if used[i, j]:
                q = i * columns + j
                first, second, weight = 0.0, 0.0, 0.0
                for k in range(start[q], start[q + 1]):
                    u = turned(y[k] - z[i, j], low, period)
                    p, slope, bend = density(u, low, step, pieces)
                    total = p + noise[i, j]
                    pull = slope / total
                    first += pull
                    second += pull * pull - bend / total
                    weight += (p + share * noise[i, j]) / total
                gradient[i, j], curvature[i, j], signal[i, j] = first, second, weight


@numba.njit(parallel=True, **COMPILE)
def coarse_information(z, y, start, noise, used, stride, low, step, pieces, period, out):
    """Write the sum over tags of the expected curvature of one tag that a clock puts on multiples of stride.

    It is the mean of (p' / (p + noise))^2 over the places that the clock allows, whose shares are stride
    (p + noise) / (1 + noise period).
    """
    rows, columns = used.shape
    high = low + step * pieces.shape[0]
    for i in prange(rows):
        for j in range(columns):
            if used[i, j]:
                q = i * columns + j
                total = 0.0
                for k in range(start[q], start[q + 1]):
                    u = low + turned(y[k] - z[i, j] - low, 0.0, stride)
                    while u < high:
                        p, slope, _ = density(u, low, step, pieces)
                        total += slope * slope / (p + noise[i, j])
                        u += stride
                out[i, j] = total * stride / (1.0 + noise[i, j] * period)
