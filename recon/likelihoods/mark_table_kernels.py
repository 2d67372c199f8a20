"""Probabilities of readings given the number of electrons, and of classes of readings under the yield."""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE
from recon.likelihoods.neyman import law, posterior

_ROOT_HALF = math.sqrt(0.5)
_HALF_LOG_2PI = 0.5 * math.log(2.0 * math.pi)
RARE = 1e-10  # a sum over the weights below it may have lost terms that were left out
_NONE = 1e-26  # probabilities of numbers of electrons below it end the list


@numba.njit(**COMPILE)
def log_interval(low, high, n, shape):
    """Log of the probability that n electrons read from low up to high."""
    gain, variance, noise = shape[0], shape[1], shape[2]
    spread = math.sqrt(variance * n + noise)
    a, b = (low - gain * n) / spread, (high - gain * n) / spread
    if a < 0.0 and b < -a:
        a, b = -b, -a  # the Gaussian law is symmetric: have the bulk on the left
    if a < 0.0:
        p = 0.5 * (math.erf(b * _ROOT_HALF) - math.erf(a * _ROOT_HALF))
        return math.log(p)
    if a < 30.0:
        return math.log(0.5 * (math.erfc(a * _ROOT_HALF) - math.erfc(b * _ROOT_HALF)))
    ratio = _mills(a)
    logarithm = -0.5 * a * a - _HALF_LOG_2PI + math.log(ratio)
    if math.isinf(b):
        return logarithm
    return logarithm + math.log(-math.expm1(-0.5 * (b - a) * (b + a) + math.log(_mills(b) / ratio)))


@numba.njit(**COMPILE)
def _mills(a):
    """Mills' ratio of a large a, by Laplace's continued fraction."""
    return 1.0 / (a + 1.0 / (a + 2.0 / (a + 3.0 / a)))


@numba.njit(parallel=True, **COMPILE)
def weigh(low, high, begin, start, shape, peak, weight):
    """Write the weights of every class, and their peaks (see `mark_table.MarkTable`)."""
    for c in prange(low.size):
        if math.isinf(high[c]):  # as they are: both tails
            size, peak[c] = (start[c + 1] - start[c]) // 2, 0.0
            for n in range(size):
                weight[start[c] + n] = math.exp(log_interval(low[c], np.inf, n, shape))
                weight[start[c] + size + n] = math.exp(log_interval(-np.inf, low[c], n, shape))
            continue
        top = -np.inf
        for w in range(start[c], start[c + 1]):
            weight[w] = log_interval(low[c], high[c], begin[c] + (w - start[c]), shape)
            top = max(top, weight[w])
        peak[c] = top
        for w in range(start[c], start[c + 1]):
            weight[w] = math.exp(weight[w] - top)


@numba.njit(**COMPILE)
def electrons(lam, eta, table, out):
    """Write, of N = 0, 1, .., out[:, N] = P, P'/eta-derivative, second derivative, P E[M|N].

    Derivatives are those of P by eta: P (N / eta - E[M|N]), P ((N / eta - E[M|N])^2 - N / eta^2 + Var[M|N]).

    Returns how many numbers of electrons were written; the others are too rare to matter.
    """
    terms = law(lam, eta)
    rising = eta * (1.0 + lam) + 5.0 * math.sqrt(eta)  # from here on P falls, unless eta is very large
    for n in range(out.shape[1]):
        log_probability, m, v = posterior(n, terms, table)
        p = math.exp(log_probability)
        if n > rising and p < _NONE and eta < 200.0:
            return n
        score = n / eta - m
        out[0, n] = p
        out[1, n] = p * score
        # n (n - 1) / eta^2 first: for one electron it vanishes exactly, however small eta is
        out[2, n] = p * (n * (n - 1.0) / (eta * eta) - 2.0 * n * m / eta + m * m + v)
        out[3, n] = p * m
    return out.shape[1]


@numba.njit(**COMPILE)
def weighted(c, lam, eta, number, given, marks, table):
    """Return the sums of P, P', P'' and P E[M|N] over the weights of a class, less its peak.

    number, given: what `electrons` returned and wrote. Sums of P below RARE may lack terms.
    """
    _, high, begin, start, _, weight, _ = marks
    if math.isinf(high[c]):
        return _saturated(weight[start[c] : start[c + 1]], lam, eta, number, given, table)
    first = begin[c]
    last = first + start[c + 1] - start[c]
    p, d, s, m = 0.0, 0.0, 0.0, 0.0
    shift = start[c] - first
    for n in range(first, min(last, number)):
        w = weight[n + shift]
        p += w * given[0, n]
        d += w * given[1, n]
        s += w * given[2, n]
        m += w * given[3, n]
    return p, d, s, m


@numba.njit(**COMPILE)
def reading(c, lam, eta, number, given, marks, table):
    """Return log P(class), its first and second derivative by eta over P, and E[M|class]."""
    p, d, s, m = weighted(c, lam, eta, number, given, marks, table)
    if p > RARE:
        return marks[4][c] + math.log(p), d / p, s / p, m / p
    return _in_logs(marks[0][c], marks[1][c], lam, eta, marks[6], table)


@numba.njit(**COMPILE)
def _saturated(weights, lam, eta, number, given, table):
    """What `weighted` returns for the saturated class: what is left by the readings below the ceiling."""
    size = weights.size // 2
    p, d, s, m = 1.0, 0.0, 0.0, lam
    for n in range(min(size, number)):
        w = weights[size + n]
        p -= w * given[0, n]
        d -= w * given[1, n]
        s -= w * given[2, n]
        m -= w * given[3, n]
    if p > 1e-5:
        return p, d, s, m
    # so little is left that the difference is rounding
    p, d, s, m = 0.0, 0.0, 0.0, 0.0
    terms = law(lam, eta)
    n = 0
    while True:
        log_probability, mean, v = posterior(n, terms, table)
        q = math.exp(log_probability) * (weights[n] if n < size else 1.0)
        p += q
        d += q * (n / eta - mean)
        s += q * (n * (n - 1.0) / (eta * eta) - 2.0 * n * mean / eta + mean * mean + v)
        m += q * mean
        n += 1
        if n >= size and n > (1.0 + lam) * eta and not q > 1e-18 * p:
            return p, d, s, m


@numba.njit(**COMPILE)
def _in_logs(low, high, lam, eta, shape, table):
    """What `reading` returns, summed over all numbers of electrons relative to the largest term."""
    terms = law(lam, eta)
    top, p, d, s, m = -np.inf, 0.0, 0.0, 0.0, 0.0
    n = 0
    while True:
        log_probability, mean, v = posterior(n, terms, table)
        term = log_probability + log_interval(low, high, n, shape)
        if term > top:
            scale = math.exp(top - term)
            p, d, s, m, top = p * scale, d * scale, s * scale, m * scale, term
        if term > -np.inf:
            q = math.exp(term - top)
            p += q
            d += q * (n / eta - mean)
            s += q * (n * (n - 1.0) / (eta * eta) - 2.0 * n * mean / eta + mean * mean + v)
            m += q * mean
        n += 1
        far = shape[0] * n > low and n > (1.0 + lam) * eta + 5.0 * math.sqrt(eta) + 2.0
        if far and not term > top - 42.0:
            break
        if math.isnan(term) or n > 4000000:
            break
    if p == 0.0:
        return -np.inf, math.nan, math.nan, lam
    return top + math.log(p), d / p, s / p, m / p
