"""The yield that fits a pixel's frames best: the global maximum of the Neyman Type A likelihood.

In u = log eta the log likelihood has the slope Y - G, with Y the electrons of all frames and
G = eta E[M | frames]. Newton's rule finds one optimum. Bright frames can have several: few primaries that
gave much, or many that gave little. So the rest of the range is swept, outward from the optimum, with
steps as long as a bound allows: E[M] falls as eta rises, hence G rises by no more than a factor
exp(du) over du, and between two points the log likelihood is at most

    (value at the first) + Y (exp(-+x) - 1 +- x),     x = step - |log(G / Y)| at the second, if x > 0.

Steps of half the width of an optimum, 1 / sqrt(Y), are taken whatever the bound.
"""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE, row
from recon.likelihoods.frame_tally import FrameTally
from recon.likelihoods.neyman import coefficients
from recon.likelihoods.neyman_fast_estimate import fast_estimate
from recon.likelihoods.neyman_kernels import pixel

_CLOSE = 1e-6  # a Newton step this small leaves an error of about its square
_STEPS = 64  # bounds the sweep of pixels so bright that optima are too narrow to tell apart


def best_yield(dose: np.ndarray, usable: np.ndarray, seen: FrameTally) -> np.ndarray:
    """Return the yield of greatest likelihood of each usable pixel (float64), zero in others.

    dose: primaries per frame, (rows or 1, columns).
    """
    if len(dose) == 1 and dose.min() == dose.max():
        eta = fast_estimate(float(dose[0, 0]), usable, seen)
    else:
        eta = np.full(usable.shape, np.nan)
    maximise(dose, usable, *seen.parts, coefficients(), eta)
    eta[~usable] = 0.0
    return eta


@numba.njit(parallel=True, **COMPILE)
def maximise(dose, usable, start, count, times, kind, factor, empty, table, eta):
    """Write the best eta of each usable pixel that is NaN. Arguments: see `neyman_kernels`."""
    for i in prange(eta.shape[0]):
        lam = row(dose, i)
        for j in range(eta.shape[1]):
            if usable[i, j] and math.isnan(eta[i, j]):
                p = i * eta.shape[1] + j
                eta[i, j] = _best((p, lam[j], start, count, times, kind, factor, empty, table))


@numba.njit(**COMPILE)
def _best(data):
    """Return the best eta of a pixel."""
    p, lam, start, count, times, kind, factor, empty, _ = data
    electrons, hit, total = 0.0, 0.0, empty[p]
    for pair in range(start[p], start[p + 1]):
        electrons += np.float64(count[pair]) * times[pair]
        hit += times[pair]
        total += times[pair] * (factor[kind[pair]] if kind.size else 1.0)
    if electrons == 0.0:
        return 0.0
    # A frame with electrons had one primary or more; over all frames at most one for each electron left
    # electrons, and at most the dose left none.
    low = math.log(electrons / (electrons + lam * total))
    high = math.log(electrons / hit)
    middle = min(max(math.log(electrons / (lam * total)), low), high)
    first = _polish(low, middle, high, electrons, data)
    best = _sweep(first, high, first, electrons, data)
    return math.exp(_sweep(first, low, best, electrons, data)[0])


@numba.njit(**COMPILE)
def _at(u, electrons, data):
    """Return the log likelihood, log(G / Y) and the derivative of that."""
    p, lam, start, count, times, kind, factor, empty, table = data
    eta = math.exp(u)
    value, mean, variance = pixel(p, lam, eta, start, count, times, kind, factor, empty, table)
    return value, math.log(eta * mean / electrons), 1.0 - eta * variance / mean


@numba.njit(**COMPILE)
def _polish(left, u, right, electrons, data):
    """Return the optimum between left, where G < Y, and right, and its value; bisect where Newton leaves."""
    for _ in range(_STEPS):
        _, excess, derivative = _at(u, electrons, data)
        if excess < 0.0:
            left = u
        else:
            right = u
        new = u - excess / derivative
        if not left <= new <= right:
            new = 0.5 * (left + right)
        change = abs(new - u)
        u = new
        if change < _CLOSE:
            break
    return u, _at(u, electrons, data)[0]


@numba.njit(**COMPILE)
def _sweep(optimum, end, best, electrons, data):
    """Look for optima better than best from an optimum on to the end; return the best and its value."""
    u, value = optimum
    falling = True
    direction = math.copysign(1.0, end - u)
    shortest = max(0.5 / math.sqrt(electrons), abs(end - u) / _STEPS)
    step = shortest
    while direction * (end - u) > _CLOSE:
        step = min(step, direction * (end - u))
        next_value, excess, _ = _at(u + direction * step, electrons, data)
        x = max(step - direction * excess, 0.0)
        gain = electrons * (math.exp(-direction * x) - 1.0 + direction * x)
        if step > shortest and value + gain > best[1]:
            step = max(0.5 * step, shortest)
            continue
        if direction * excess > 0.0 and not falling:
            left, right = min(u, u + direction * step), max(u, u + direction * step)
            other = _polish(left, 0.5 * (left + right), right, electrons, data)
            if other[1] > best[1]:
                best = other
        u, value, falling = u + direction * step, next_value, direction * excess > 0.0
        step *= 2.0
    return best
