"""The best range of a pixel with many tags: the objective on a grid first, by a table, then ascents.

A table holds log(1 + p / noise) on the grid for a tag at each of a few places between two nodes; adding one
run of it per tag gives the objective at all nodes, to within the phase of the tags. Ascents start at its
peaks that come near the best one.
"""

from __future__ import annotations

import math

import numba
import numpy as np

from recon.kernels import COMPILE
from recon.likelihoods.detection_time_ascent import SPACING, ascend, sums
from recon.likelihoods.detection_time_kernels import density
from recon.likelihoods.live_exposure_kernels import loss

MANY = 12  # tags from which on the table pays
PHASES = 8
DETAIL = 12.0  # steps between nodes at most: a sampled pulse has detail a tenth as wide as its core
DIM = 1e-4  # of the noise; where p is lower the table ends
NEAR, NEARER = 2.0, 0.02  # what a peak may be below the best, and what share of it


@numba.njit(**COMPILE)
def best_scanned(tags, mode, core, shape, live):
    """Return the best range, in [0, period), and the maximum."""
    _, low, _, step, pieces, period = shape
    nodes = math.ceil(period / min(SPACING * core, DETAIL * step))
    spacing = period / nodes
    score = _scores(tags, nodes, spacing, shape)
    at = spacing * np.argmax(score)
    at, top = ascend(tags, at, core, shape, live)
    for y in (tags[0], tags[tags.size // 2]):
        value = sums(tags, y - mode, shape, live)[0]
        if value > top:
            at, top = ascend(tags, y - mode, core, shape, live)
    most = 0.0
    if live is not None:  # decided when compiling
        most = live[0] * live[2].max()
    margin = NEAR + NEARER * top
    before = middle = -math.inf
    for g in range(-1, nodes + 2):  # one node more at each end: the period closes on itself
        k = g % nodes
        value = -math.inf
        if score[k] + most + margin > top:
            value = score[k]
            if live is not None:
                signal, edge, level, shares = live
                value += signal * loss(edge, level, spacing * k, low, step, pieces, shares, period)[0]
        if before <= middle >= value and middle + margin > top:
            found, reached = ascend(tags, spacing * (g - 1), core, shape, live)
            if reached > top:
                at, top = found, reached
        before, middle = middle, value
    return at - period * math.floor(at / period), top


@numba.njit(**COMPILE)
def _scores(tags, nodes, spacing, shape):
    """Return the sum over tags of log(1 + p / noise) at the nodes, roughly."""
    noise, _, _, step, pieces, _ = shape
    low, high = sight(noise, shape[1], step, pieces, DIM)
    first = math.floor(-high / spacing)
    length = min(math.ceil(-low / spacing) + 2 - first, nodes)
    table = np.zeros((PHASES, length))
    for f in range(PHASES):
        for m in range(length):
            u = spacing * ((f + 0.5) / PHASES - first - m)
            if low <= u < high:
                table[f, m] = math.log1p(density(u, shape[1], step, pieces)[0] / noise)
    score = np.zeros(nodes + length)
    for y in tags:
        whole = math.floor(y / spacing)
        run = table[min(int((y / spacing - whole) * PHASES), PHASES - 1)]
        begin = (whole + first) % nodes
        for m in range(length):
            score[begin + m] += run[m]
    score[:length] += score[nodes:]
    return score[:nodes]


@numba.njit(**COMPILE)
def sight(noise, low, step, pieces, faint):
    """Return the ends of the part of the pulse that is at least a share `faint` of the noise."""
    first, last = 0, pieces.shape[0]
    while first < last and math.exp(pieces[first, 0]) < faint * noise:
        first += 1
    while last > first and math.exp(pieces[last - 1, 0]) < faint * noise:
        last -= 1
    return low + step * first, low + step * last
