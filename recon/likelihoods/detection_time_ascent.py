"""One pixel's objective of range, and the ascent to a maximum of it.

    sum over tags of log(1 + p(y - z) / noise)  +  signal * (periods that a pulse at z loses)

shape = (noise, low, high, step, pieces, period) describes the pulse over the background, live = (signal,
edge, level, shares) the live exposure, or None where nothing is lost.
"""

from __future__ import annotations

import math

import numba

from recon.kernels import COMPILE
from recon.likelihoods.detection_time_kernels import density, locate
from recon.likelihoods.live_exposure_kernels import loss

FAINT = 1e-3  # of the noise; a tag where p is lower counts as out of sight when starts are skipped
SPACING = 0.25  # of the pulse's core, between starts
CLOSE = 1e-7  # of the core: the step at which an ascent ends
STEPS = 60  # most of one ascent


@numba.njit(**COMPILE)
def ascend(tags, z, core, shape, live):
    """Climb from z to a local maximum; return its place and value."""
    value, slope, bend = sums(tags, z, shape, live)
    for _ in range(STEPS):
        move = slope / bend if bend > 0.0 else math.copysign(core, slope)
        move = min(max(move, -core), core)
        while True:
            if abs(move) < CLOSE * core:
                return z, value
            reached, new_slope, new_bend = sums(tags, z + move, shape, live)
            if reached >= value:
                break
            move *= 0.5
        z, value, slope, bend = z + move, reached, new_slope, new_bend
    return z, value


@numba.njit(**COMPILE)
def sums(tags, z, shape, live):
    """Return the objective, its slope, and minus its second derivative."""
    noise, low, high, step, pieces, period = shape
    value, slope, bend = 0.0, 0.0, 0.0
    n = tags.size
    if n > 0:
        k = locate(tags, z + low, period)
        turns = k // n
        k -= turns * n
        shift = turns * period - z
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
    if live is not None:  # decided when compiling
        signal, edge, level, shares = live
        lost, first, second = loss(edge, level, z, low, step, pieces, shares, period)
        value += signal * lost
        slope += signal * first
        bend -= signal * second
    return value, slope, bend


@numba.njit(**COMPILE)
def climb(places, k, place, period):
    """Return `locate` of a place, from that of a lower one."""
    n = places.size
    while places[k % n] + (k // n) * period < place:
        k += 1
    return k
