"""The best range of a pixel: the global maximum of the sum over its tags of log(1 + p(y - z) / noise).

Ascents by Newton's rule with halved steps start at every tag, and at the peaks on a fine grid of places
that two tags or more can see. A place is skipped where all tags that can see it, each at the pulse's
peak, would not reach the best found so far. Tags are sorted, so an ascent looks only at those within the
pulse's length.
"""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE
from recon.likelihoods.detection_time_kernels import density

FAINT = 1e-3  # of the noise; a tag where p is lower counts as out of sight when starts are skipped
SPACING = 0.25  # of the pulse's core, between starts
CLOSE = 1e-7  # of the core: the step at which an ascent ends
STEPS = 60  # most of one ascent


@numba.njit(parallel=True, **COMPILE)
def best(y, start, noise, used, mode, core, low, step, pieces, period, z, excess):
    """Write the best range, in [0, period), and the maximum, in pixels that are used and have a tag.

    mode: where p is largest, to within a step; core: a length that an ascent's step does not exceed.
    """
    rows, columns = used.shape
    for i in prange(rows):
        for j in range(columns):
            q = i * columns + j
            if used[i, j] and start[q + 1] > start[q]:
                tags = y[start[q] : start[q + 1]]
                z[i, j], excess[i, j] = _best_of(tags, noise[i, j], mode, core, low, step, pieces, period)


@numba.njit(**COMPILE)
def _best_of(tags, noise, mode, core, low, step, pieces, period):
    high = low + step * pieces.shape[0]
    n = tags.size
    at, top = tags[0] - mode, -1.0
    if n > 1:  # the best tag first, for a high bar
        last = -math.inf
        for y in tags:
            if y - last >= SPACING * core:
                last = y
                value = _sums(tags, y - mode, noise, low, high, step, pieces, period)[0]
                if value > top:
                    at, top = y - mode, value
    at, top = _ascend(tags, at, noise, core, low, high, step, pieces, period)
    if n > 1:
        peak = math.log1p(1.01 * density(mode, low, step, pieces)[0] / noise)  # it may lie between two knots
        left, right = _sight(noise, low, step, pieces)
        spacing = SPACING * core
        last, place = -math.inf, tags[0] - right
        lower = _locate(tags, place + left - core, period)
        upper = _locate(tags, place + right + core, period)
        for y in tags:
            if y - last >= spacing:
                last = y
                if _bar(tags, y - mode, left, right, core, period) * peak + FAINT * n > top:
                    found, value = _ascend(tags, y - mode, noise, core, low, high, step, pieces, period)
                    if value > top:
                        at, top = found, value
            before = middle = -math.inf
            place = max(place, y - right)
            while middle > -math.inf or place < y - left:
                value = -math.inf
                if place < y - left:
                    lower = _climb(tags, lower, place + left - core, period)
                    upper = _climb(tags, upper, place + right + core, period)
                    seen = min(upper - lower, n)
                    if seen > 1 and seen * peak + FAINT * n > top:
                        value = _sums(tags, place, noise, low, high, step, pieces, period)[0]
                if middle > -math.inf and before <= middle >= value:
                    found, reached = _ascend(
                        tags, place - spacing, noise, core, low, high, step, pieces, period
                    )
                    if reached > top:
                        at, top = found, reached
                before, middle = middle, value
                place += spacing
    return at - period * math.floor(at / period), top


@numba.njit(**COMPILE)
def _bar(tags, z, left, right, core, period):
    """Return how many tags can see places within a core of z."""
    return min(_locate(tags, z + right + core, period) - _locate(tags, z + left - core, period), tags.size)


@numba.njit(**COMPILE)
def _ascend(tags, z, noise, core, low, high, step, pieces, period):
    """Climb from z to a local maximum; return its place and value."""
    value, slope, bend = _sums(tags, z, noise, low, high, step, pieces, period)
    for _ in range(STEPS):
        move = slope / bend if bend > 0.0 else math.copysign(core, slope)
        move = min(max(move, -core), core)
        while True:
            if abs(move) < CLOSE * core:
                return z, value
            reached, new_slope, new_bend = _sums(tags, z + move, noise, low, high, step, pieces, period)
            if reached >= value:
                break
            move *= 0.5
        z, value, slope, bend = z + move, reached, new_slope, new_bend
    return z, value


@numba.njit(**COMPILE)
def _sums(tags, z, noise, low, high, step, pieces, period):
    """Return the sum over tags of log(1 + p / noise), its slope, and minus its second derivative."""
    n = tags.size
    k = _locate(tags, z + low, period)
    turns = k // n
    k -= turns * n
    shift = turns * period - z
    value, slope, bend = 0.0, 0.0, 0.0
    for _ in range(n):
        u = tags[k] + shift
        if u >= high:
            break
        p, first, second = density(max(u, low), low, step, pieces)
        total = p + noise
        pull = first / total
        value += math.log1p(p / noise)
        slope -= pull
        bend += pull * pull - second / total
        k += 1
        if k == n:
            k = 0
            shift += period
    return value, slope, bend


@numba.njit(**COMPILE)
def _locate(tags, place, period):
    """Return how many tags, repeated every period without end, lie below a place (less those below 0)."""
    turns = math.floor(place / period)
    return int(turns) * tags.size + np.searchsorted(tags, place - turns * period)


@numba.njit(**COMPILE)
def _sight(noise, low, step, pieces):
    """Return the ends of the part of the pulse that stands out of the noise."""
    first, last = 0, pieces.shape[0]
    while first < last and math.exp(pieces[first, 0]) < FAINT * noise:
        first += 1
    while last > first and math.exp(pieces[last - 1, 0]) < FAINT * noise:
        last -= 1
    return low + step * first, low + step * last


@numba.njit(**COMPILE)
def _climb(tags, k, place, period):
    """Return `_locate` of a place, from that of a lower one."""
    n = tags.size
    while tags[k % n] + (k // n) * period < place:
        k += 1
    return k
