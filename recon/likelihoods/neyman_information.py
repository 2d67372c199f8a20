"""Fisher information of one frame about the yield, under the Neyman Type A law.

    J(eta, lam) = sum over y of P(y) (y / eta - E[M|y])^2

lam / eta is what would be known if the primaries were counted too. The share of it that is left,
J eta / lam, lies between 1 / (1 + eta) and 1 and is smooth in log eta and log lam: for an image it is
summed at Chebyshev points that span its yields and doses, and read off the polynomial through them,
which is within 1e-7 (1e-9 where the span is a decade or less).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numba
import numpy as np
from numba import prange
from numpy.polynomial.chebyshev import chebpts1, chebval2d, chebvander

from recon.kernels import COMPILE
from recon.likelihoods.frame_tally import dose_classes
from recon.likelihoods.neyman import coefficients, law, posterior

# Beyond these the share is, to 1e-9, what it is at them: it tends to 1 for small eta, and to limits
# that depend on eta alone for small and large lam.
_YIELDS = (1e-9, np.inf)
_DOSES = (1e-9, 1e9)
_REACH = 9.5  # standard deviations or more on either side that the sum takes in


@dataclass(frozen=True, eq=False)
class LogAxis:
    """Chebyshev points that span the logs of some values, and the polynomial through them.

    nodes: the points; weights: turn a function at the nodes into the coefficients of the polynomial.
    """

    nodes: np.ndarray
    weights: np.ndarray
    limits: tuple[float, float]
    middle: float
    half: float

    @classmethod
    def spanning(cls, values: np.ndarray, limits: tuple[float, float]) -> LogAxis:
        """Return the axis of all values, none taken to lie outside the limits."""
        logs = np.log(np.clip([np.min(values), np.max(values)], *limits))
        low, high = (float(end) for end in logs)
        if low == high:
            return cls(np.exp([low]), np.ones((1, 1)), limits, low, np.inf)
        degree = 7 + math.ceil(5.0 * (high - low))
        middle, half = 0.5 * (low + high), max(0.5 * (high - low), 1e-3)
        points = chebpts1(degree + 1)
        weights = chebvander(points, degree).T * (2.0 / points.size)
        weights[0] *= 0.5
        return cls(np.exp(middle + half * points), weights, limits, middle, half)

    def place(self, values: np.ndarray) -> np.ndarray:
        """Return where on [-1, 1] the values lie."""
        return (np.log(np.clip(values, *self.limits)) - self.middle) / self.half

    def vander(self, values: np.ndarray) -> np.ndarray:
        """Return what the coefficients are multiplied by to give the polynomial at the values."""
        return chebvander(self.place(values), self.nodes.size - 1)


def line_classes(factors: np.ndarray) -> list[tuple[np.ndarray, np.ndarray]]:
    """Return the factors of the dose (frames, rows) that each row meets, and how often it meets each."""
    kind, factor = dose_classes(factors)
    counted = (np.bincount(line, minlength=factor.size) for line in kind.T)
    return [(factor[times > 0], times[times > 0]) for times in counted]


def frame_information(eta: np.ndarray, dose: np.ndarray) -> np.ndarray:
    """Return J of every pixel (float64); inf where eta = 0.

    eta: (rows, columns), 0 or more; dose: primaries per frame, (rows or 1, columns).
    """
    return stack_information(eta, dose, [(np.ones(1), np.ones(1))] * len(eta))


def stack_information(
    eta: np.ndarray,
    dose: np.ndarray,
    lines: list[tuple[np.ndarray, np.ndarray]],
    shares: Callable[[np.ndarray, np.ndarray], np.ndarray] | None = None,
) -> np.ndarray:
    """Return the sum of J over the frames of every pixel (float64); inf where eta = 0.

    eta: (rows, columns), 0 or more; dose: primaries per frame, (rows or 1, columns), for a factor of 1.
    lines: factors of the dose and how often each row meets them, as `line_classes` returns them.
    shares: J eta / lam of vectors (lam, eta), as a matrix; None = that of counted electrons.
    """
    factors = np.concatenate([factor for factor, _ in lines])
    ends = np.array([dose.min() * factors.min(), dose.max() * factors.max()])
    yields, doses = LogAxis.spanning(eta, _YIELDS), LogAxis.spanning(dose, _DOSES)
    every = doses if factors.size == len(lines) and np.all(factors == 1.0) else LogAxis.spanning(ends, _DOSES)
    share = (shares or counted_shares)(every.nodes, yields.nodes)
    polynomial = every.weights @ share @ yields.weights.T
    out = np.empty(eta.shape)
    for i, (factor, times) in enumerate(lines):
        # the sum over the row's frames, at the nodes of the dose
        vander = every.vander(np.multiply.outer(doses.nodes, factor))
        summed = doses.weights @ (np.einsum("nfk,f->nk", vander, times * factor) @ polynomial)
        out[i] = chebval2d(doses.place(dose[i % len(dose)]), yields.place(eta[i]), summed)
    np.maximum(out, 0.0, out=out)  # where saturated readings tell nothing, the polynomial is about 0
    with np.errstate(divide="ignore"):
        return out * dose / eta


def counted_shares(lam: np.ndarray, eta: np.ndarray) -> np.ndarray:
    """Return J eta / lam of counted electrons, (lam, eta)."""
    out = np.empty((lam.size, eta.size))
    _sum_shares(lam, eta, coefficients(), out)
    return out


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
