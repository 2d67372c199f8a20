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
from recon.likelihoods.neyman_kernels import pixel

_CLOSE = 1e-6  # a Newton step this small leaves an error of about its square
_STEPS = 64  # bounds the sweep of pixels so bright that optima are too narrow to tell apart


@numba.njit(parallel=True, **COMPILE)
def maximise(dose, usable, frames, start, count, times, table, eta, log_likelihood):
    """Write the best eta of each usable pixel, and its log likelihood. Arguments: see `neyman_kernels`."""
    for i in prange(eta.shape[0]):
        lam = row(dose, i)
        for j in range(eta.shape[1]):
            if usable[i, j]:
                data = (i * eta.shape[1] + j, lam[j], frames, start, count, times, table)
                eta[i, j], log_likelihood[i, j] = _best(data)


@numba.njit(**COMPILE)
def _best(data):
    """Return the best eta of a pixel and its log likelihood."""
    p, lam, frames, start, count, times, _ = data
    electrons, hit = 0.0, 0.0
    for pair in range(start[p], start[p + 1]):
        electrons += np.float64(count[pair]) * times[pair]
        hit += times[pair]
    if electrons == 0.0:
        return 0.0, 0.0
    # A frame with electrons had one primary or more; over all frames at most one for each electron left
    # electrons, and at most lam a frame left none.
    low = math.log(electrons / (electrons + lam * frames))
    high = math.log(electrons / hit)
    middle = min(max(math.log(electrons / (lam * frames)), low), high)
    first = _polish(low, middle, high, electrons, data)
    best = _sweep(first, high, first, electrons, data)
    u, value = _sweep(first, low, best, electrons, data)
    return math.exp(u), value


@numba.njit(**COMPILE)
def _at(u, electrons, data):
    """Return the log likelihood, log(G / Y) and the derivative of that."""
    p, lam, frames, start, count, times, table = data
    eta = math.exp(u)
    value, mean, variance = pixel(p, lam, eta, frames, start, count, times, table)
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
