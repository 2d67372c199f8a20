"""Fisher information of one frame about the yield, under the Neyman Type A law.

    J(eta, lam) = sum over y of P(y) (y / eta - E[M|y])^2

lam / eta is what would be known if the primaries were counted too. The share of it that is left,
J eta / lam, lies between 1 / (1 + eta) and 1 and is smooth in log eta and log lam: for an image it is
summed at Chebyshev points that span its yields and doses, and read off the polynomial through them,
which is within 1e-7 (1e-9 where the span is a decade or less).
"""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange
from numpy.polynomial.chebyshev import chebpts1, chebval2d, chebvander

from recon.kernels import COMPILE
from recon.likelihoods.neyman import coefficients, law, posterior

# Beyond these the share is, to 1e-9, what it is at them: it tends to 1 for small eta, and to limits
# that depend on eta alone for small and large lam.
_YIELDS = (1e-9, np.inf)
_DOSES = (1e-9, 1e9)
_REACH = 9.5  # standard deviations or more on either side that the sum takes in


def frame_information(eta: np.ndarray, dose: np.ndarray) -> np.ndarray:
    """Return J of every pixel (float64); inf where eta = 0.

    eta: (rows, columns), 0 or more; dose: primaries per frame, (rows or 1, columns).
    """
    lam_nodes, lam_weights, lam_place = _axis(dose, _DOSES)
    eta_nodes, eta_weights, eta_place = _axis(eta, _YIELDS)
    shares = np.empty((lam_nodes.size, eta_nodes.size))
    _sum_shares(lam_nodes, eta_nodes, coefficients(), shares)
    polynomial = lam_weights @ shares @ eta_weights.T
    share = np.empty(eta.shape)
    for i in range(len(eta)):
        share[i] = chebval2d(lam_place[i % len(dose)], eta_place[i], polynomial)
    with np.errstate(divide="ignore"):
        return share * dose / eta


def _axis(values: np.ndarray, limits: tuple[float, float]) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return points that span the values, weights that turn a function there into the coefficients of a
    polynomial, and where on [-1, 1] the values lie."""
    logs = np.log(np.clip(values, *limits))
    low, high = float(logs.min()), float(logs.max())
    if low == high:
        return np.exp(logs[:1, 0]), np.ones((1, 1)), np.zeros_like(logs)
    degree = 7 + math.ceil(5.0 * (high - low))
    middle, half = 0.5 * (low + high), max(0.5 * (high - low), 1e-3)
    points = chebpts1(degree + 1)
    weights = chebvander(points, degree).T * (2.0 / points.size)
    weights[0] *= 0.5
    return np.exp(middle + half * points), weights, (logs - middle) / half


@numba.njit(parallel=True, **COMPILE)
def _sum_shares(lam, eta, table, out):
    """Write J eta / lam for every pair of lam and eta."""
    for n in prange(out.size):
        i, j = n // eta.size, n % eta.size
        out[i, j] = share_of_information(lam[i], eta[j], table)


@numba.njit(**COMPILE)
def share_of_information(lam, eta, table):
    """J eta / lam, for one pixel.

    A dose of many primaries blurs into one bell, in which every stride-th y stands for all, by the
    trapezoid rule.
    """
    deviation = math.sqrt(lam * eta * (1.0 + eta))
    most = lam + _REACH * math.sqrt(lam) + 10.0
    last = most * eta + _REACH * math.sqrt(most * eta) + 10.0
    y, stride = 0, 1
    if lam > 100.0 and lam * eta > _REACH * deviation:
        y, stride = int(lam * eta - _REACH * deviation), max(1, int(0.5 * deviation))
    terms = law(lam, eta)
    total = 0.0
    while y <= last:
        log_probability, mean, _ = posterior(y, terms, table)
        total += math.exp(log_probability) * (y / eta - mean) ** 2
        y += stride
    return total * stride * eta / lam
