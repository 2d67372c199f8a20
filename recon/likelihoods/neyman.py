"""The Neyman Type A law: a Poisson number M of primaries, of mean lam, each with a Poisson number of
electrons, of mean eta; y is the number of electrons (Neyman 1939).

    P(y) = sum over M of  exp(-lam) lam^M / M!  exp(-M eta) (M eta)^y / y!

With a = lam exp(-eta), the mean number of primaries that leave no electron, Dobinski's formula gives

    P(y) = exp(-lam + a) eta^y T(y) / y!,     T(y) = sum over k of S(y, k) a^k,

S being the Stirling numbers of the second kind. Given y, M = K + a Poisson number of mean a, where K, the
primaries that left electrons, has weights S(y, k) a^k. Every term is positive, so for small y Horner's
rule in a or in 1/a is exact to rounding and cannot overflow. For large y the sum runs over M, outward
from its largest term; where the terms form a wide bell, one term in h stands for all: the trapezoid
rule, whose error exp(-2 pi^2 (width/h)^2) is below rounding.
"""

from __future__ import annotations

import math
from functools import cache

import numba
import numpy as np

from recon.kernels import COMPILE

LARGEST_POLYNOMIAL = 160  # above it the sum over M is faster
_NEGLIGIBLE = 1e-20
_HALF_LOG_2PI = 0.5 * math.log(2.0 * math.pi)


@cache
def coefficients() -> np.ndarray:
    """Return S(y, k) / y! for y up to LARGEST_POLYNOMIAL, k = 1..y, one y after the other (float64)."""
    table = np.empty(LARGEST_POLYNOMIAL * (LARGEST_POLYNOMIAL + 1) // 2)
    stirling, factorial, start = [1], 1, 0
    for y in range(1, LARGEST_POLYNOMIAL + 1):
        factorial *= y
        table[start : start + y] = [number / factorial for number in stirling]
        start += y
        padded = [0, *stirling, 0]
        stirling = [padded[k - 1] + k * padded[k] for k in range(1, y + 2)]
    return table


@numba.njit(**COMPILE)
def stirling_remainder(n):
    """log n! less its leading terms, (n + 1/2) log n - n + log(2 pi) / 2, for n >= 1."""
    if n < 16.0:
        return math.lgamma(n + 1.0) - (n + 0.5) * math.log(n) + n - _HALF_LOG_2PI
    square = 1.0 / (n * n)
    return (1 / 12 - square * (1 / 360 - square * (1 / 1260 - square / 1680))) / n


@numba.njit(**COMPILE)
def log_poisson(n, mean):
    """Log of the Poisson probability of n >= 1, with no loss where n and the mean are large and alike."""
    excess = (mean - n) / n
    logarithm = math.log1p(excess) if excess > -0.5 else math.log(mean / n)
    return n * (logarithm - excess) - 0.5 * math.log(n) - _HALF_LOG_2PI - stirling_remainder(n)


@numba.njit(inline="always", **COMPILE)
def law(lam, eta):
    """Return what does not depend on y: lam, eta, log eta, a, log a, log P(0)."""
    return lam, eta, math.log(eta), lam * math.exp(-eta), math.log(lam) - eta, lam * math.expm1(-eta)


@numba.njit(**COMPILE)
def posterior(y, law, table):
    """Return log P(y), and the mean and the variance of M given y.

    y: electrons, int64; law: `law(lam, eta)` with lam > 0, eta >= 0; table: `coefficients()`.
    """
    lam, eta, log_eta, a, log_a, log_p0 = law
    if y == 0:
        return log_p0, a, a
    if y > LARGEST_POLYNOMIAL:
        return _by_primaries(float(y), lam, eta, log_a)
    value, steps, variance = _polynomial(y, a, table)
    if a <= 1.0:
        return log_p0 + y * log_eta + log_a + math.log(value), a + (1.0 + steps), a + variance
    return log_p0 + y * (log_eta + log_a) + math.log(value), a + (y - steps), a + variance


@numba.njit(**COMPILE)
def _polynomial(y, a, table):
    """Return T(y) / (a y!) for a <= 1, T(y) / (a^y y!) for a > 1, and the mean and variance of a count.

    Horner's rule, in whichever of a and 1/a is below 1, for the polynomial and two derivatives. The
    count, K - 1 or y - K, is small where its variance is, so that the variance loses nothing.
    """
    start = y * (y - 1) // 2
    if a <= 1.0:
        argument, place, step = a, start + y - 1, -1
    else:
        argument, place, step = 1.0 / a, start, 1
    value, first, second = table[place], 0.0, 0.0
    for _ in range(y - 1):
        place += step
        second = second * argument + first
        first = first * argument + value
        value = value * argument + table[place]
    scale = argument / value
    mean = scale * first
    return value, mean, 2.0 * scale * argument * second + mean * (1.0 - mean)


@numba.njit(**COMPILE)
def _by_primaries(y, lam, eta, log_a):
    """Sum over M of the joint probability of M and y, relative to its largest term."""
    mode = _likeliest(y, log_a)
    width = mode / math.sqrt(y + mode)
    stride = max(1.0, np.floor(0.7 * width))
    slope = log_a - math.log(mode) + 1.0
    remainder = stirling_remainder(mode)
    total, first, second = 1.0, 0.0, 0.0
    for direction in (1.0, -1.0):
        offset = direction * stride
        while mode + offset >= 1.0:
            power = y - mode - offset - 0.5
            change = remainder - stirling_remainder(mode + offset)
            term = math.exp(offset * slope + power * math.log1p(offset / mode) + change)
            total += term
            first += term * offset
            second += term * offset * offset
            if not term >= _NEGLIGIBLE * total:  # also ends a sum of NaN
                break
            offset += direction * stride
    shift = first / total
    log_probability = log_poisson(mode, lam) + log_poisson(y, mode * eta) + math.log(stride * total)
    return log_probability, mode + shift, second / total - shift * shift


@numba.njit(**COMPILE)
def _likeliest(y, log_a):
    """The whole number near the M of the largest term: M log(M / a) = y, by Newton's rule in log M."""
    log_y = math.log(y)
    ratio = log_y - log_a
    log_m = log_y - math.log(ratio if ratio > 30.0 else math.log1p(math.exp(ratio)))
    for _ in range(4):
        each = math.exp(log_y - log_m)  # electrons per primary
        log_m += (each + log_a - log_m) / (each + 1.0)
    return max(1.0, np.rint(math.exp(log_m)))
