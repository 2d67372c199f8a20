"""The yield that fits best, where every pixel has the same dose: E[M|y] is then read off a table.

With u = log eta, an optimum solves G(u) = Y, the electrons of all frames, with

    G(u) = sum over frames of g(u) = eta E[M|y; eta],     g'(u) = eta E[M|y] - eta^2 Var[M|y],

a sum of functions that all pixels share. They are tabulated with their slopes at steps of STEP in u;
between two nodes a cubic (Hermite) is within 1e-8 of them. At an optimum the curvature in u is Y - sum of
eta^2 Var[M|y]. Where Y exceeds the sum of the largest values that the terms take in the range of u, every
optimum is a maximum, hence there is one. Pixels of which that is not known are left to `neyman_estimate`.
"""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE
from recon.likelihoods.frame_tally import FrameTally
from recon.likelihoods.neyman import coefficients, law, posterior

STEP = 1.0 / 32.0
_MARGIN = 1.05  # the largest value is sought at nodes; between them it may be a little larger
_MOST = 1 << 20  # entries of a table


def fast_estimate(lam: float, usable: np.ndarray, seen: FrameTally) -> np.ndarray:
    """Return the best yield of each pixel (float64), NaN where it is not known to be the best."""
    eta = np.full(usable.shape, np.nan)
    largest = int(seen.count.max(initial=0))
    entries = 1 + largest * seen.factor.size
    low, high = np.zeros(len(usable)), np.zeros(len(usable))
    _limits(lam, usable, *seen.parts, seen.electrons, low, high)
    first = math.floor(low.min() / STEP) - 1  # a node more at either end is safe from rounding
    nodes = math.ceil(high.max() / STEP) - first + 2
    if entries * nodes > _MOST:
        return eta
    primaries, most = np.zeros((nodes, entries, 2)), np.zeros((nodes, entries))
    _tabulate(lam, first, largest, seen.factor, coefficients(), primaries, most)
    np.maximum.accumulate(most, axis=0, out=most)
    _solve(lam, usable, *seen.parts, seen.electrons, first, largest, primaries, most, eta)
    return eta


@numba.njit(parallel=True, **COMPILE)
def _limits(lam, usable, start, count, times, kind, factor, empty, electrons, low, high):
    """Write, of each row, the least and the greatest log eta that an optimum can have."""
    for i in prange(usable.shape[0]):
        least, greatest = 1.0, 1.0
        for j in range(usable.shape[1]):
            p = i * usable.shape[1] + j
            if usable[i, j] and electrons[p] > 0:
                hit, dose = _hit(p, lam, start, times, kind, factor, empty)
                least = min(least, electrons[p] / (electrons[p] + dose))
                greatest = max(greatest, electrons[p] / hit)
        low[i], high[i] = math.log(least), math.log(greatest)


@numba.njit(inline="always", **COMPILE)
def _hit(p, lam, start, times, kind, factor, empty):
    """Return the number of frames with electrons and the dose of all frames."""
    hit, total = 0.0, empty[p]
    for pair in range(start[p], start[p + 1]):
        hit += times[pair]
        if kind.size:
            total += times[pair] * factor[kind[pair]]
    return hit, lam * (total if kind.size else total + hit)


@numba.njit(parallel=True, **COMPILE)
def _tabulate(lam, first, largest, factor, table, primaries, most):
    """Write g and its slope, and eta^2 Var[M|y]; entry 0 is y = 0, then each class from y = 1 on."""
    for k in prange(most.shape[0]):
        eta = math.exp((first + k) * STEP)
        for c in range(factor.size):
            terms = law(lam * factor[c], eta)
            for y in range(1, largest + 1):
                entry = c * largest + y
                _, mean, variance = posterior(y, terms, table)
                most[k, entry] = eta * eta * variance
                primaries[k, entry, 0] = eta * mean
                primaries[k, entry, 1] = eta * mean - most[k, entry]
        a = lam * math.exp(-eta)
        most[k, 0] = eta * eta * a
        primaries[k, 0, 0] = eta * a
        primaries[k, 0, 1] = eta * a - most[k, 0]


@numba.njit(inline="always", **COMPILE)
def _entry(pair, count, kind, largest):
    """The place of a pair in the tables."""
    entry = np.int64(count[pair])
    return entry + np.int64(kind[pair]) * largest if kind.size else entry


@numba.njit(parallel=True, **COMPILE)
def _solve(
    lam, usable, start, count, times, kind, factor, empty, electrons, first, largest, primaries, most, eta
):
    """Write the yield of each usable pixel that has one optimum."""
    for i in prange(usable.shape[0]):
        for j in range(usable.shape[1]):
            p = i * usable.shape[1] + j
            if usable[i, j]:
                tallied = (start, count, times, kind, factor, empty)
                eta[i, j] = _yield(p, lam, float(electrons[p]), tallied, first, largest, primaries, most)


@numba.njit(**COMPILE)
def _yield(p, lam, y, tallied, first, largest, primaries, most):
    """Return the yield of a pixel with y electrons, NaN if it may have several optima."""
    start, count, times, kind, factor, empty = tallied
    if y == 0.0:
        return 0.0
    hit, dose = _hit(p, lam, start, times, kind, factor, empty)
    top = math.ceil(math.log(y / hit) / STEP) + 1 - first
    bound = empty[p] * most[top, 0]
    for pair in range(start[p], start[p + 1]):
        bound += times[pair] * most[top, _entry(pair, count, kind, largest)]
    if _MARGIN * bound > y:
        return math.nan
    # As in continuous time: a frame with electrons had one primary or little more.
    guess = y / (hit * (1.0 + min(0.5 * lam, 1.0)) + dose * math.exp(-min(y / dose, y / hit)))
    k = int(math.log(guess) / STEP - first)
    below, above = -1, top + 1
    left, left_slope, right, right_slope = 0.0, 0.0, 0.0, 0.0
    while above - below > 1:
        k = min(max(k, below + 1), above - 1)
        node = primaries[k]
        value, slope = empty[p] * node[0, 0], empty[p] * node[0, 1]
        for pair in range(start[p], start[p + 1]):
            entry = _entry(pair, count, kind, largest)
            value += times[pair] * node[entry, 0]
            slope += times[pair] * node[entry, 1]
        # Newton's rule for log G, with a logarithm good near its root
        move = 2.0 * (y - value) / (y + value) * value / (slope * STEP)
        if value < y:
            below, left, left_slope = k, value, slope * STEP
            k += max(1, int(min(move, 1e6)) + 1)
        else:
            above, right, right_slope = k, value, slope * STEP
            k -= max(1, int(min(-move, 1e6)) + 1)
        if not below < k < above:
            k = (below + above) // 2
    return math.exp((first + below + _place(y, left, left_slope, right, right_slope)) * STEP)


@numba.njit(inline="always", **COMPILE)
def _place(y, left, left_slope, right, right_slope):
    """Return where between two nodes, from 0 to 1, the cubic through them takes the value y."""
    rise = right - left
    second, third = 3.0 * rise - 2.0 * left_slope - right_slope, left_slope + right_slope - 2.0 * rise
    t = (y - left) / rise
    for _ in range(2):
        excess = left - y + t * (left_slope + t * (second + t * third))
        t -= excess / (left_slope + t * (2.0 * second + 3.0 * t * third))
    return t
