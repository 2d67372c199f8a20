"""Compiled passes over E, the number of periods in which a pixel was awake at a range (`LiveExposure`).

Pixel q loses level[k] of its periods from edge[k] to edge[k + 1], k from begin[q] to begin[q + 1], and the
last level from its last edge over the period's end to its first. low, step, pieces, shares, period
describe the pulse (`RangePulse`). A range may lie anywhere; all sums are float64.
"""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE
from recon.likelihoods.detection_time_kernels import cumulative, density, locate, turned


@numba.njit(parallel=True, **COMPILE)
def fill(y, start, begin, trials, zero, blind, turns, reset, opening, width, period, edge, level):
    """Write edges and levels.

    zero: range of the period's start, a map or (1, 1). blind: length of a blind window, -1 without dead
    time; turns: whole periods more; reset: whether it ends with the period. opening, width: the gate,
    from the period's start; width -1 without a gate.
    """
    rows, columns = trials.shape
    for i in prange(rows):
        for j in range(columns):
            q = i * columns + j
            tags = y[start[q] : start[q + 1]]
            edges, levels = edge[begin[q] : begin[q + 1]], level[begin[q] : begin[q + 1]]
            begins = zero[0, 0] if zero.size == 1 else zero[i, j]
            m = 0
            if blind >= 0.0 and tags.size > 0:
                for k in range(tags.size):
                    edges[m] = tags[k]
                    edges[m + 1] = turned(tags[k] + blind, 0.0, period)
                    m += 2
                if reset:
                    edges[m] = begins
                    m += 1
            if width >= 0.0:
                edges[m] = turned(begins + opening, 0.0, period)
                edges[m + 1] = turned(begins + opening + width, 0.0, period)
                m += 2
            edges.sort()
            for k in range(m):
                following = edges[k + 1] if k + 1 < m else edges[0] + period
                middle = 0.5 * (edges[k] + following)
                since = turned(middle - begins, 0.0, period)
                lost = 0.0
                if blind >= 0.0 and tags.size > 0:
                    back = min(blind, since) if reset else blind
                    lost += locate(tags, middle, period) - locate(tags, middle - back, period)
                    lost += turns * tags.size
                if width >= 0.0 and turned(since - opening, 0.0, period) > width:
                    lost = trials[i, j]
                levels[k] = min(lost, trials[i, j])


@numba.njit(**COMPILE)
def loss(edge, level, z, low, step, pieces, shares, period):
    """Return the periods that one pixel loses to a pulse at z, integral of level p, and its z-derivatives."""
    m = edge.size
    if m == 0:
        return 0.0, 0.0, 0.0
    high = low + step * pieces.shape[0]
    k = locate(edge, z + low, period)
    turns = k // m
    k -= turns * m
    shift = turns * period - z
    before = level[m - 1 if k == 0 else k - 1]
    total, first, second = before, 0.0, 0.0
    for _ in range(m):
        u = max(edge[k] + shift, low)
        if u >= high:
            break
        jump = level[k] - before
        if jump != 0.0:
            p, slope, _ = density(u, low, step, pieces)
            total += jump * (1.0 - cumulative(u, low, step, shares, period))
            first += jump * p
            second -= jump * slope
        before = level[k]
        k += 1
        if k == m:
            k = 0
            shift += period
    return total, first, second


@numba.njit(parallel=True, **COMPILE)
def losses(z, edge, level, begin, used, low, step, pieces, shares, period, lost, first, second):
    """Write `loss` of every pixel that is used."""
    rows, columns = used.shape
    for i in prange(rows):
        for j in range(columns):
            if used[i, j]:
                q = i * columns + j
                here = slice(begin[q], begin[q + 1])
                lost[i, j], first[i, j], second[i, j] = loss(
                    edge[here], level[here], z[i, j], low, step, pieces, shares, period
                )


@numba.njit(parallel=True, **COMPILE)
def gated(z, reach, y, start, trials, edge, level, begin, low, step, shares, period, inside, pulse, uniform):
    """Write the tags from z - reach to z + reach, and the integrals there of E p and of E / period."""
    rows, columns = trials.shape
    for i in prange(rows):
        for j in range(columns):
            q = i * columns + j
            tags = y[start[q] : start[q + 1]]
            edges, levels = edge[begin[q] : begin[q + 1]], level[begin[q] : begin[q + 1]]
            half = min(reach[0, 0] if reach.size == 1 else reach[i, j], 0.5 * period)
            a, b = z[i, j] - half, z[i, j] + half
            if tags.size > 0:
                inside[i, j] = locate(tags, b, period) - locate(tags, a, period)
            top = cumulative(half, low, step, shares, period)
            by_pulse = trials[i, j] * (top - cumulative(-half, low, step, shares, period))
            by_time = trials[i, j] * 2.0 * half / period
            m = edges.size
            if m > 0:
                k = locate(edges, a, period)
                left = a
                share = cumulative(-half, low, step, shares, period)
                for _ in range(m + 1):
                    turns = math.floor(k / m)
                    right = min(edges[k - turns * m] + turns * period, b)
                    last = levels[(k - 1) - m * math.floor((k - 1) / m)]
                    next_share = cumulative(right - z[i, j], low, step, shares, period)
                    by_pulse -= last * (next_share - share)
                    by_time -= last * (right - left) / period
                    left, share = right, next_share
                    k += 1
                    if right >= b:
                        break
            pulse[i, j], uniform[i, j] = max(by_pulse, 0.0), max(by_time, 0.0)


@numba.njit(parallel=True, **COMPILE)
def levels_at(place, pixel, edge, level, begin, period, lost):
    """Write the level of a pixel at a place, one pair after the other."""
    for t in prange(place.size):
        here = slice(begin[pixel[t]], begin[pixel[t] + 1])
        edges, levels = edge[here], level[here]
        m = edges.size
        if m > 0:
            k = np.searchsorted(edges, turned(place[t], 0.0, period))
            lost[t] = levels[m - 1 if k == 0 else k - 1]


@numba.njit(parallel=True, **COMPILE)
def information(
    z, y, start, noise, signal, trials, used, stride, edge, level, begin, low, step, pieces, period, out
):
    """Write the integral of E signal p'^2 / (p + noise), by the midpoint rule with E's mean in each strip.

    stride 0: exact tags, strips as wide as the pieces. Otherwise the clock puts tags on multiples of stride
    only, and the mean is taken over the phases that the pixel's tags show.
    """
    rows, columns = used.shape
    for i in prange(rows):
        for j in range(columns):
            if used[i, j]:
                q = i * columns + j
                edges, levels = edge[begin[q] : begin[q + 1]], level[begin[q] : begin[q + 1]]
                total, phases = 0.0, 0
                if stride == 0.0 or start[q + 1] == start[q]:
                    width, phases = step if stride == 0.0 else stride, 1
                    total = _strips(
                        edges, levels, trials[i, j], noise[i, j], z[i, j], low + 0.5 * width, width,
                        low, step, pieces, period,
                    )  # fmt: skip
                else:
                    known, each = -1.0, 0.0
                    for k in range(start[q], start[q + 1]):
                        phase = turned(y[k] - z[i, j] - low, 0.0, stride)
                        if abs(phase - known) > 1e-6 * stride:  # most clocks have one phase
                            known = phase
                            each = _strips(
                                edges, levels, trials[i, j], noise[i, j], z[i, j], low + phase, stride,
                                low, step, pieces, period,
                            )  # fmt: skip
                        total += each
                        phases += 1
                out[i, j] = signal[i, j] * total / phases


@numba.njit(**COMPILE)
def _strips(edges, levels, trials, noise, z, first, width, low, step, pieces, period):
    """Return the integral of E p'^2 / (p + noise) over strips about z + first, z + first + width and on."""
    high = low + step * pieces.shape[0]
    m = edges.size
    left = z + first - 0.5 * width
    k, level, following = 0, 0.0, math.inf
    if m > 0:
        k = locate(edges, left, period)
        level = levels[(k - 1) - m * math.floor((k - 1) / m)]
        following = edges[k - m * math.floor(k / m)] + period * math.floor(k / m)
    total, u = 0.0, first
    while u < high:
        right = z + u + 0.5 * width
        lost = 0.0
        while following < right:
            lost += level * (following - left)
            left = following
            level = levels[k - m * math.floor(k / m)]
            k += 1
            following = edges[k - m * math.floor(k / m)] + period * math.floor(k / m)
        lost += level * (right - left)
        left = right
        p, slope, _ = density(u, low, step, pieces)
        total += (trials * width - lost) * slope * slope / (p + noise)
        u += width
    return max(total, 0.0)
