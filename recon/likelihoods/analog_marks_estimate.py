"""The yield that fits a pixel's readings best.

The log likelihood of every class of readings is tabulated at steps of STEP in log eta, for a few doses.
The largest sum over a pixel's readings, at the nearest dose, is where the search starts: Newton's rule on
the likelihood itself, and where that leaves the bracket or does not climb a step of expectation-
maximisation, which always does (Dempster, Laird and Rubin 1977).
"""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE, row
from recon.likelihoods.analog_marks_kernels import pixel
from recon.likelihoods.frame_tally import FrameTally
from recon.likelihoods.mark_table import MarkTable
from recon.likelihoods.mark_table_kernels import electrons, weighted
from recon.likelihoods.neyman import coefficients

STEP = 0.125
LEAST = 1e-8  # yields below it count as none
_DOSE_STEP = 0.25
_CLOSE = 1e-4  # a Newton step this small leaves an error of about its square
_ROUNDS = 60


def best_yield(
    dose: np.ndarray, usable: np.ndarray, seen: FrameTally, marks: MarkTable, mean_factor: np.ndarray
) -> np.ndarray:
    """Return the yield of greatest likelihood of each usable pixel (float64), zero in others.

    dose: primaries per frame, (rows or 1, columns). mean_factor: (rows,), of the frames.
    The largest yield considered is beyond twice that of a single primary with the largest reading; in a
    pixel whose every hit is saturated, the likelihood may rise to it.
    """
    gain, _, noise = marks.law
    saturated = np.isinf(marks.high)
    largest = np.max(np.where(saturated, 4.0, 1.0) * marks.low, initial=0.0)
    top = 1.0 + 2.0 * (largest + 4.0 * math.sqrt(noise)) / gain
    used = (mean_factor[:, None] * dose)[usable if len(dose) > 1 else usable.any(axis=1)]
    bottom = 0.1 / (seen.frames * float(used.max()) + 10.0)
    u = np.arange(math.log(bottom), math.log(top) + STEP, STEP)
    logs = np.log([used.min(), used.max()])
    doses = np.linspace(*logs, 1 + math.ceil((logs[1] - logs[0]) / _DOSE_STEP))
    logarithm = np.empty((doses.size, marks.low.size, u.size))
    _tabulate(np.exp(doses), np.exp(u), marks.parts, marks.most, coefficients(), logarithm)
    eta = np.zeros(usable.shape)
    _search(
        dose, usable, *seen.parts, marks.parts, marks.most, coefficients(), mean_factor, doses, np.exp(u),
        logarithm, eta,
    )  # fmt: skip
    return eta


@numba.njit(parallel=True, **COMPILE)
def _tabulate(lam, eta, marks, most, table, logarithm):
    """Write log P(class), less its peak, for every dose, class and yield."""
    for n in prange(lam.size * eta.size):
        i, k = n // eta.size, n % eta.size
        scratch = np.empty((4, most))
        number = electrons(lam[i], eta[k], table, scratch)
        for c in range(logarithm.shape[1]):
            p = weighted(c, lam[i], eta[k], number, scratch, marks, table)[0]
            logarithm[i, c, k] = math.log(max(p, 1e-300))  # roughly, where a yield is out of the question


@numba.njit(parallel=True, **COMPILE)
def _search(
    dose, usable, start, count, times, kind, factor, empty, marks, most, table, mean_factor, doses, nodes,
    logarithm, eta,
):  # fmt: skip
    """Write the best yield of each usable pixel."""
    for i in prange(eta.shape[0]):
        lam = row(dose, i)
        seen = (start, count, times, kind, factor, empty)
        scratch, total = np.empty((4, most)), np.empty(nodes.size)
        for j in range(eta.shape[1]):
            if usable[i, j]:
                p = i * eta.shape[1] + j
                near = int(np.argmin(np.abs(doses - math.log(lam[j] * mean_factor[i]))))
                total[:] = 0.0
                for pair in range(start[p], start[p + 1]):
                    weight, terms = np.float64(times[pair]), logarithm[near, np.int64(count[pair]) - 1]
                    for k in range(nodes.size):
                        total[k] += weight * terms[k]
                best = int(np.argmax(total))
                left = nodes[best - 1] if best > 0 else 0.0
                right = nodes[min(best + 1, nodes.size - 1)]
                begin = nodes[best]
                if 0 < best < nodes.size - 1:  # the top of the parabola through three nodes
                    rise, bend = total[best + 1] - total[best - 1], total[best - 1] + total[best + 1]
                    begin *= math.exp(-0.5 * STEP * rise / min(bend - 2.0 * total[best], -1e-300))
                eta[i, j] = _climb(p, lam[j], left, begin, right, seen, marks, table, scratch)


@numba.njit(**COMPILE)
def _climb(p, lam, left, eta, right, seen, marks, table, scratch):
    """Return the top of the likelihood, from eta on; left and right are where it is expected."""
    value, first, second, primaries = pixel(p, lam, eta, seen, marks, table, scratch)
    for _ in range(_ROUNDS):
        new = eta - first / second
        newton = second < 0.0 and left <= new <= right
        if not newton:
            new = eta + eta * first / primaries  # expected electrons over expected primaries
        if not new > LEAST:
            new = LEAST
        next_value, next_first, next_second, next_primaries = pixel(
            p, lam, new, seen, marks, table, scratch
        )  # fmt: skip
        if newton and next_value < value - 1e-9 * abs(value):
            new = eta + eta * first / primaries
            next_value, next_first, next_second, next_primaries = pixel(
                p, lam, new, seen, marks, table, scratch
            )  # fmt: skip
        change = abs(new - eta)
        eta, value, first, second, primaries = new, next_value, next_first, next_second, next_primaries
        if change <= (_CLOSE if newton else _CLOSE**2) * eta:
            break
        falls = eta <= 2.0 * LEAST or (left == 0.0 and eta < 1e-2 * right and first < 0.0)
        if falls and pixel(p, lam, LEAST, seen, marks, table, scratch)[1] <= 0.0:
            return 0.0
    return eta
