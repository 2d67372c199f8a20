"""Fisher information of one reading about the yield.

    J(eta, lam) = sum over classes of readings of P'(class)^2 / P(class)

Classes are as fine as those of the data near the offset, and grow with the spread of the readings beyond.
"""

from __future__ import annotations

import math
from collections.abc import Callable

import numba
import numpy as np

from recon.acquisition.mark_law import MarkLaw
from recon.kernels import COMPILE
from recon.likelihoods.mark_table import class_width, mark_table
from recon.likelihoods.mark_table_kernels import RARE, electrons, weighted
from recon.likelihoods.neyman import coefficients

_FINE = 12.0  # classes to a standard deviation of the readings


def mark_shares(law: MarkLaw) -> Callable[[np.ndarray, np.ndarray], np.ndarray]:
    """Return the function (lam, eta) -> J eta / lam, a matrix, of readings of a law."""

    def shares(lam: np.ndarray, eta: np.ndarray) -> np.ndarray:
        marks = mark_table(*_all_classes(law, float(lam.max()), float(eta.max())), law)
        scratch = np.empty((4, marks.most))
        out = np.empty((lam.size, eta.size))
        for i, k in np.ndindex(out.shape):
            out[i, k] = _share(lam[i], eta[k], marks.parts, coefficients(), scratch)
        return out

    return shares


def _all_classes(law: MarkLaw, lam: float, eta: float) -> tuple[np.ndarray, np.ndarray]:
    """Return the ends of classes that hold all readings there can be, less the offset."""
    primaries = lam + 8.0 * math.sqrt(lam) + 8.0
    most = primaries * eta + 8.0 * math.sqrt(primaries * eta) + 8.0
    end = law.gain * most + 8.0 * math.sqrt(law.variance * most + law.noise**2)
    ceiling = law.ceiling - law.offset
    width = class_width(law)
    ends = [-(math.ceil(8.0 * law.noise / width) + 0.5) * width]
    while ends[-1] < min(end, ceiling):
        spread = math.sqrt(law.variance * max(ends[-1], 0.0) / law.gain + law.noise**2)
        ends.append(ends[-1] + max(width, width * math.floor(spread / (_FINE * width))))
    if ends[-1] >= ceiling:
        ends[-1:] = [ceiling, math.inf]
    return np.array(ends[:-1]), np.array(ends[1:])


@numba.njit(**COMPILE)
def _share(lam, eta, marks, table, scratch):
    number = electrons(lam, eta, table, scratch)
    total = 0.0
    for c in range(marks[0].size):
        p, slope, _, _ = weighted(c, lam, eta, number, scratch, marks, table)
        if p > RARE:
            total += math.exp(marks[4][c]) * slope * slope / p
    return total * eta / lam
