"""The best range of a pixel: the global maximum of the objective of `detection_time_ascent`.

Ascents by Newton's rule with halved steps start at every tag, and at the peaks on a fine grid of places
that two tags or more can see. A place is skipped where all tags that can see it, each at the pulse's
peak, would not reach the best found so far. Tags are sorted, so an ascent looks only at those within the
pulse's length. Where a pixel loses exposure, `detection_time_live_search` takes over, and where it has
many tags, `detection_time_scan`.
"""

from __future__ import annotations

import math

import numba
from numba import prange

from recon.kernels import COMPILE
from recon.likelihoods.detection_time_ascent import FAINT, SPACING, ascend, climb, sums
from recon.likelihoods.detection_time_kernels import density, locate
from recon.likelihoods.detection_time_live_search import best_live
from recon.likelihoods.detection_time_scan import MANY, best_scanned, sight


@numba.njit(parallel=True, **COMPILE)
def best(
    y, start, noise, used, signal, edge, level, begin, mode, core, low, step, pieces, shares, period, z, top
):
    """Write the best range, in [0, period), and the maximum, in pixels that are used and have a tag or edge.

    mode: where p is largest, to within a step; core: a length that an ascent's step does not exceed.
    """
    rows, columns = used.shape
    high = low + step * pieces.shape[0]
    for i in prange(rows):
        for j in range(columns):
            q = i * columns + j
            if used[i, j]:
                tags = y[start[q] : start[q + 1]]
                shape = (noise[i, j], low, high, step, pieces, period)
                if begin[q + 1] > begin[q]:
                    here = slice(begin[q], begin[q + 1])
                    live = (signal[i, j], edge[here], level[here], shares)
                    if tags.size < MANY:
                        z[i, j], top[i, j] = best_live(tags, mode, core, shape, live)
                    else:
                        z[i, j], top[i, j] = best_scanned(tags, mode, core, shape, live)
                elif start[q + 1] > start[q]:
                    if tags.size < MANY:
                        z[i, j], top[i, j] = _best_of(tags, mode, core, shape)
                    else:
                        z[i, j], top[i, j] = best_scanned(tags, mode, core, shape, None)


@numba.njit(parallel=True, **COMPILE)
def best_whole(y, start, noise, used, mode, core, low, step, pieces, period, z, top):
    """Do what `best` does where no pixel loses exposure; compiled in half the time."""
    rows, columns = used.shape
    high = low + step * pieces.shape[0]
    for i in prange(rows):
        for j in range(columns):
            q = i * columns + j
            if used[i, j] and start[q + 1] > start[q]:
                tags = y[start[q] : start[q + 1]]
                shape = (noise[i, j], low, high, step, pieces, period)
                if tags.size < MANY:
                    z[i, j], top[i, j] = _best_of(tags, mode, core, shape)
                else:
                    z[i, j], top[i, j] = best_scanned(tags, mode, core, shape, None)


@numba.njit(**COMPILE)
def _best_of(tags, mode, core, shape):
    noise, low, _, step, pieces, period = shape
    n = tags.size
    at, top = tags[0] - mode, -1.0
    if n > 1:  # the best tag first, for a high bar
        last = -math.inf
        for y in tags:
            if y - last >= SPACING * core:
                last = y
                value = sums(tags, y - mode, shape, None)[0]
                if value > top:
                    at, top = y - mode, value
    at, top = ascend(tags, at, core, shape, None)
    if n > 1:
        peak = math.log1p(1.01 * density(mode, low, step, pieces)[0] / noise)  # it may lie between two knots
        left, right = sight(noise, low, step, pieces, FAINT)
        spacing = SPACING * core
        last, place = -math.inf, tags[0] - right
        lower = locate(tags, place + left - core, period)
        upper = locate(tags, place + right + core, period)
        for y in tags:
            if y - last >= spacing:
                last = y
                if _bar(tags, y - mode, left, right, core, period) * peak + FAINT * n > top:
                    found, value = ascend(tags, y - mode, core, shape, None)
                    if value > top:
                        at, top = found, value
            before = middle = -math.inf
            place = max(place, y - right)
            while middle > -math.inf or place < y - left:
                value = -math.inf
                if place < y - left:
                    lower = climb(tags, lower, place + left - core, period)
                    upper = climb(tags, upper, place + right + core, period)
                    seen = min(upper - lower, n)
                    if seen > 1 and seen * peak + FAINT * n > top:
                        value = sums(tags, place, shape, None)[0]
                if middle > -math.inf and before <= middle >= value:
                    found, reached = ascend(tags, place - spacing, core, shape, None)
                    if reached > top:
                        at, top = found, reached
                before, middle = middle, value
                place += spacing
    return at - period * math.floor(at / period), top


@numba.njit(**COMPILE)
def _bar(tags, z, left, right, core, period):
    """Return how many tags can see places within a core of z."""
    return min(locate(tags, z + right + core, period) - locate(tags, z + left - core, period), tags.size)
