"""Compiled passes of the sum-product algorithm along rows and columns, over lists of bins of depth.

Pixel q has the bins place[e], ascending, e from first[q] to first[q + 1], and beside them the state that
there is no target. A pixel's neighbour is, given the pixel's state, distributed as

    bin d:   same |d - d'| near + wide |d - d'| far + anew scene(d')  over bins d',  leave: no target
    none:    come scene(d') over bins d',  1 - come: no target

with near and far two-sided geometric laws. Messages are kept between the bins that are listed.
"""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE

POWERS = 256  # of the geometric laws that are tabulated; beyond them they are nothing


@numba.njit(parallel=True, **COMPILE)
def chains(
    place, first, likely, absent, before, before_absent, scene, law, damping, down, shape, after, after_absent
):
    """Write the log of the messages that reach each state along its column (down) or its row.

    likely, absent: likelihoods of a pixel's own data; before, before_absent: log messages that count with
    them, times damping; after, after_absent: what is written. law: near's base, same (1 -
    base) / (1 + base), far's and apart's alike, anew, come, leave.
    """
    rows, columns = shape
    longest = 0
    for q in range(rows * columns):
        longest = max(longest, first[q + 1] - first[q])
    lines = columns if down else rows
    length = rows if down else columns
    near, far = _powers(law[0]), _powers(law[2])
    for line in prange(lines):
        message, held = np.empty(longest, np.float32), np.empty(longest, np.float32)
        for backward in range(2):
            previous = -1
            leave_sum, none = np.float32(0.0), np.float32(0.0)
            for s in range(length):
                t = length - 1 - s if backward else s
                q = t * columns + line if down else line * columns + t
                lo, hi = first[q], first[q + 1]
                if previous < 0:
                    for e in range(hi - lo):
                        message[e] = 1.0
                    message_none = np.float32(1.0)
                else:
                    a, b = first[previous], first[previous + 1]
                    _send(place[a:b], held, place[lo:hi], leave_sum, none, law, near, far, message)
                    message_none = law[5] * leave_sum + (1.0 - law[5]) * none
                if backward:
                    for e in range(lo, hi):
                        after[e] = math.log(after[e] * message[e - lo])
                    after_absent[q] = math.log(after_absent[q] * message_none)
                else:
                    for e in range(lo, hi):
                        after[e] = message[e - lo]
                    after_absent[q] = message_none
                # the state of this pixel, as the next one hears of it
                total = np.float32(0.0)
                for e in range(lo, hi):
                    held[e - lo] = message[e - lo] * likely[e] * math.exp(damping * before[e])
                    total += held[e - lo]
                none = message_none * absent[q] * math.exp(damping * before_absent[q])
                scale = np.float32(1.0) / (total + none)
                none *= scale
                leave_sum = np.float32(0.0)
                for e in range(lo, hi):
                    held[e - lo] *= scale
                    leave_sum += held[e - lo] * scene[place[e]]
                previous = q


@numba.njit(**COMPILE)
def _send(places, held, to, anew, none, law, near, far, message):
    """Write what a pixel's states `held` say about a neighbour's bins."""
    constant = law[4] * anew + law[6] * none
    same, wide = law[1], law[3]
    n = places.size
    f, g, at, k = np.float32(0.0), np.float32(0.0), 0, 0
    for e in range(to.size):
        while k < n and places[k] <= to[e]:
            gap = min(places[k] - at, POWERS - 1)
            f, g, at = f * near[gap] + held[k], g * far[gap] + held[k], places[k]
            k += 1
        gap = min(to[e] - at, POWERS - 1)
        message[e] = constant + same * f * near[gap] + wide * g * far[gap]
    f, g, at, k = np.float32(0.0), np.float32(0.0), max(places[n - 1], to[to.size - 1]), n - 1
    for e in range(to.size - 1, -1, -1):
        while k >= 0 and places[k] > to[e]:
            gap = min(at - places[k], POWERS - 1)
            f, g, at = f * near[gap] + held[k], g * far[gap] + held[k], places[k]
            k -= 1
        gap = min(at - to[e], POWERS - 1)
        message[e] += same * f * near[gap] + wide * g * far[gap]


@numba.njit(**COMPILE)
def _powers(base):
    powers = np.zeros(POWERS, np.float32)
    powers[0] = 1.0
    for k in range(1, POWERS - 1):
        powers[k] = powers[k - 1] * base
    return powers


@numba.njit(parallel=True, **COMPILE)
def believe(first, place, likely, messages, scene, damping, out, odds):
    """Write the probability of every bin, likelihood times the scene's law times damped messages.

    odds: (pixels,), the mean of the likelihood under what all but the pixel itself says.
    """
    for q in prange(first.size - 1):
        lo, hi = first[q], first[q + 1]
        top = np.float32(-math.inf)
        for e in range(lo, hi):
            top = max(top, math.log(scene[place[e]]) + damping * messages[e])
        others, total = np.float32(0.0), np.float32(0.0)
        for e in range(lo, hi):
            other = math.exp(math.log(scene[place[e]]) + damping * messages[e] - top)
            others += other
            out[e] = max(other * likely[e], np.float32(1e-37))
            total += out[e]
        odds[q] = total / others
        for e in range(lo, hi):
            out[e] /= total


@numba.njit(parallel=True, **COMPILE)
def kept(first, probability, least, most, keep):
    """Mark, in every pixel, the bins of `least` times the likeliest one's probability, `most` of them."""
    for q in prange(first.size - 1):
        lo, hi = first[q], first[q + 1]
        top = np.float32(0.0)
        for e in range(lo, hi):
            top = max(top, probability[e])
        floor = least * top
        number = most + 1
        while number > most and floor < top:
            number = 0
            for e in range(lo, hi):
                number += probability[e] >= floor
            if number > most:
                floor = min(1.5 * floor, top)
        number = 0
        for e in range(lo, hi):
            keep[e] = probability[e] >= floor and number < most
            number += keep[e]


@numba.njit(parallel=True, **COMPILE)
def quantile(first, place, probability, share, out):
    """Write the place, in bins, below which a share of a pixel's probability of all bins lies."""
    for q in prange(first.size - 1):
        lo, hi = first[q], first[q + 1]
        total = 0.0
        for e in range(lo, hi):
            total += probability[e]
        wanted, below = share * total, 0.0
        out[q] = place[hi - 1] + 1.0
        for e in range(lo, hi):
            if below + probability[e] >= wanted:
                out[q] = place[e] + (wanted - below) / probability[e]
                break
            below += probability[e]


@numba.njit(parallel=True, **COMPILE)
def mass(first, place, probability, low, high, out):
    """Write the probability of depth between low and high (in bins), of all bins' of the pixel."""
    for q in prange(first.size - 1):
        inside, total = 0.0, 0.0
        for e in range(first[q], first[q + 1]):
            total += probability[e]
            overlap = min(high[q], place[e] + 1.0) - max(low[q], place[e])
            inside += max(overlap, 0.0) * probability[e]
        out[q] = inside / total
