"""The best range of a pixel that loses exposure to dead time or a gate.

The objective (`detection_time_ascent`) may then be largest where there is no tag at all: where the pulse
would have gone unseen. Ascents start at every tag and at the peaks on a fine grid of all places from
which a tag or an edge of the live exposure can be seen; of a stretch where neither can, one place stands
for all. A place is skipped where all tags in sight, each at the pulse's peak, and the largest loss in
sight would not reach the best found so far.
"""

from __future__ import annotations

import math

import numba

from recon.kernels import COMPILE
from recon.likelihoods.detection_time_ascent import FAINT, SPACING, ascend, climb, sums
from recon.likelihoods.detection_time_kernels import cumulative, density, locate

DETAIL = 12.0  # steps between places at most: a sampled pulse has detail a tenth as wide as its core
BEYOND = 1e-6  # share of the pulse that may lie out of sight at either end


@numba.njit(**COMPILE)
def best_live(tags, mode, core, shape, live):
    """Return the best range, in [0, period), and the maximum; there is an edge, and perhaps no tag."""
    noise, low, _, step, pieces, period = shape
    signal, edge, level, shares = live
    n, m = tags.size, edge.size
    at, top = 0.0, -1.0
    last = -math.inf
    for y in tags:  # the best tag first, for a high bar
        if y - last >= SPACING * core:
            last = y
            value = sums(tags, y - mode, shape, live)[0]
            if value > top:
                at, top = y - mode, value
    if n > 0:
        at, top = ascend(tags, at, core, shape, live)
    peak = math.log1p(1.01 * density(mode, low, step, pieces)[0] / noise)  # it may lie between two knots
    left, right = _sight(noise, low, step, pieces, shares)
    beyond = cumulative(left, low, step, shares, period) + 1.0 - cumulative(right, low, step, shares, period)
    left, right = left - core, right + core  # an ascent may move by as much
    most = level.max()
    places = math.ceil(period / min(SPACING * core, DETAIL * step))
    spacing = period / places
    last = -math.inf
    for y in tags:
        if y - last >= SPACING * core:
            last, place = y, y - mode
            seen = min(locate(tags, place + right, period) - locate(tags, place + left, period), n)
            bar = seen * peak + FAINT * n + signal * beyond * most
            if bar + signal * most > top:
                one, last_one = locate(edge, place + left, period), locate(edge, place + right, period)
                if bar + signal * _largest(level, one, last_one) > top:
                    found, reached = ascend(tags, place, core, shape, live)
                    if reached > top:
                        at, top = found, reached
    before = middle = -math.inf
    g = -1
    tag, last_tag = locate(tags, left - spacing, period), locate(tags, right - spacing, period)
    one, last_one = locate(edge, left - spacing, period), locate(edge, right - spacing, period)
    while g <= places:
        place = g * spacing
        if n > 0:
            tag = climb(tags, tag, place + left, period)
            last_tag = climb(tags, last_tag, place + right, period)
        one = climb(edge, one, place + left, period)
        last_one = climb(edge, last_one, place + right, period)
        seen = min(last_tag - tag, n)
        value = -math.inf
        bar = seen * peak + FAINT * n + signal * beyond * most
        if bar + signal * most > top and bar + signal * _largest(level, one, last_one) > top:
            value = sums(tags, place, shape, live)[0]
        flat = before == middle == value
        if middle > -math.inf and before <= middle >= value and (middle > top or not flat):
            found, reached = ascend(tags, place - spacing, core, shape, live)
            if reached > top:
                at, top = found, reached
        before, middle = middle, value
        g += 1
        if seen == 0 and last_one == one:
            if value > top:
                at, top = place, value
            following = edge[last_one % m] + (last_one // m) * period
            if n > 0:
                following = min(following, tags[last_tag % n] + (last_tag // n) * period)
            ahead = math.floor((following - right) / spacing)
            if ahead > g:
                g, before, middle = ahead, -math.inf, -math.inf
    return at - period * math.floor(at / period), top


@numba.njit(**COMPILE)
def _largest(level, first, last):
    """Return the largest level round the edges first to last - 1, counted as `locate` does."""
    m = level.size
    largest = level[(first - 1) % m]
    for k in range(first, min(last, first + m)):
        largest = max(largest, level[k % m])
    return largest


@numba.njit(**COMPILE)
def _sight(noise, low, step, pieces, shares):
    """Return the ends of the part of the pulse that stands out of the noise, or holds nearly all of it."""
    first, last = 0, pieces.shape[0]
    while first < last and math.exp(pieces[first, 0]) < FAINT * noise and shares[first, 0] < BEYOND:
        first += 1
    while (
        last > first and math.exp(pieces[last - 1, 0]) < FAINT * noise and shares[last - 1, 0] > 1.0 - BEYOND
    ):
        last -= 1
    return low + step * first, low + step * last
