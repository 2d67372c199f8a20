"""Compiled passes for L(x) = idle mu - k log(1 - exp(-mu)), mu = gain x + background, idle = n - k.

The derivative of the second term is k h(mu), h(mu) = 1 / (exp(mu) - 1). A Newton step that models h
by c / mu + e (same value and slope at the current point) turns the prox into a quadratic in mu that
always has one positive root, is exact for small mu, and converges from any start.
"""

from __future__ import annotations

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE, row

_SMALLEST = np.float32(1e-12)


@numba.njit(inline="always", **COMPILE)
def _exp_of_minus(z):
    """exp(-z) for z >= 0 in float32, to 2e-7 relative; written out so that the loop is vectorised."""
    t = min(z * np.float32(1.4426950408889634), np.float32(125.0))
    n = np.int32(t + np.float32(0.5))
    f = np.float32(n) - t
    power = np.float32(1.5403530393381609e-4)  # Taylor series of 2^f, |f| <= 1/2
    power = power * f + np.float32(1.3333558146428443e-3)
    power = power * f + np.float32(9.6181291076284772e-3)
    power = power * f + np.float32(5.5504108664821580e-2)
    power = power * f + np.float32(2.4022650695910071e-1)
    power = power * f + np.float32(6.9314718055994531e-1)
    power = power * f + np.float32(1.0)
    return power * np.int32((np.int32(127) - n) << np.int32(23)).view(np.float32)


@numba.njit(inline="always", **COMPILE)
def _detecting(mu):
    """h(mu) = 1 / (exp(mu) - 1) for mu > 0 in float32, relative error near rounding at both ends."""
    square = min(mu, np.float32(1.0)) ** 2  # the series in Bernoulli numbers serves mu < 1
    tail = np.float32(1.0 / 12.0) + square * (
        np.float32(-1.0 / 720.0) + square * (np.float32(1.0 / 30240.0) - square * np.float32(1.0 / 1209600.0))
    )
    small = np.float32(1.0) / mu - np.float32(0.5) + mu * tail
    decay = _exp_of_minus(max(mu, np.float32(1.0)))
    return small if mu < np.float32(1.0) else decay / (np.float32(1.0) - decay)


@numba.njit(parallel=True, **COMPILE)
def proximal_step(x, adjoint, extrapolated, count, idle, gain, background, step, relaxation, low, high):
    """See `Likelihood.proximal_step`: two Newton steps from the current image."""
    for i in prange(x.shape[0]):
        g, b = row(gain, i), row(background, i)
        for j in range(x.shape[1]):
            s = step * g[j] * g[j]
            start = g[j] * (x[i, j] - step * adjoint[i, j]) + b[j]
            linear = start - s * idle[i, j]
            k = s * count[i, j]
            mu = max(g[j] * x[i, j] + b[j], _SMALLEST)
            for _ in range(2):
                h = _detecting(mu)
                slope = h * (np.float32(1.0) + h) * mu
                half = np.float32(0.5) * (linear + k * (h - slope))
                mu = max(half + np.sqrt(half * half + k * slope * mu), _SMALLEST)
            proposed = min(max((mu - b[j]) / g[j], low), high)
            change = proposed - x[i, j]
            extrapolated[i, j] = proposed + change
            x[i, j] += relaxation * change


@numba.njit(inline="always", **COMPILE)
def _half_deviance(mu, k, idle):
    total = idle * mu
    if k > 0.0:
        n = k + idle
        total -= k * np.log(-np.expm1(-mu) * n / k)
        if idle > 0.0:
            total += idle * np.log1p(-k / n)
    return total


@numba.njit(parallel=True, **COMPILE)
def value(x, count, idle, gain, background):
    """Return half the deviance summed over pixels."""
    sums = np.zeros(x.shape[0])
    for i in prange(x.shape[0]):
        g, b = row(gain, i), row(background, i)
        total = 0.0
        for j in range(x.shape[1]):
            mu = np.float64(g[j]) * np.float64(x[i, j]) + np.float64(b[j])
            total += _half_deviance(mu, np.float64(count[i, j]), np.float64(idle[i, j]))
        sums[i] = total
    return sums.sum()


@numba.njit(parallel=True, **COMPILE)
def conjugate(u, count, idle, gain, background, low, high):
    """Return the sum over pixels of max over x in [low, high] of u x - half deviance.

    The maximiser satisfies exp(mu) = 1 + k / (n - k - u / gain); it is moved into the box.
    """
    sums = np.zeros(u.shape[0])
    for i in prange(u.shape[0]):
        gains, others = row(gain, i), row(background, i)
        total = 0.0
        for j in range(u.shape[1]):
            g, b = np.float64(gains[j]), np.float64(others[j])
            k = np.float64(count[i, j])
            slack = np.float64(idle[i, j]) - np.float64(u[i, j]) / g
            if slack > 0.0:
                x = min(max((np.log1p(k / slack) - b) / g, low), high)
            elif slack < 0.0 or k > 0.0:
                x = high
            else:
                x = low
            if x == np.inf:
                total = np.inf
            else:
                total += u[i, j] * x - _half_deviance(g * x + b, k, np.float64(idle[i, j]))
        sums[i] = total
    return sums.sum()
