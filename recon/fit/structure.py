"""Whether residuals of neighbours go together: what smoothing took away, or a wrong place."""

from __future__ import annotations

import numpy as np

BLOCKS = (4, 8)  # pixels a side
NAMES = (
    "residuals of neighbours in a row",
    "residuals of neighbours in a column",
    *(f"residuals of blocks of {side} x {side}" for side in BLOCKS),
)


def structure(residuals: np.ndarray) -> np.ndarray:
    """Return the autocorrelations at one column, one row, and for each block size.

    residuals: (rows, columns), NaN without data. That of blocks is the mean square of a block's sum over that
    of as many independent residuals, less 1. 0 where there are no pairs.
    """
    known = np.isfinite(residuals)
    r = np.where(known, residuals, 0.0)
    square = float(np.sum(r * r)) / max(int(known.sum()), 1)
    if square == 0.0:
        return np.zeros(2 + len(BLOCKS))
    found = [_pairs(r[:, 1:], r[:, :-1], known[:, 1:] & known[:, :-1]) / square]
    found.append(_pairs(r[1:], r[:-1], known[1:] & known[:-1]) / square)
    for side in BLOCKS:
        sums, numbers = _blocks(r, side), _blocks(known.astype(float), side)
        found.append(float(np.sum(sums**2) / (square * max(float(numbers.sum()), 1.0)) - 1.0))
    return np.array(found)


def _pairs(one: np.ndarray, other: np.ndarray, both: np.ndarray) -> float:
    return float(np.sum(one * other)) / max(int(both.sum()), 1)


def _blocks(values: np.ndarray, side: int) -> np.ndarray:
    for axis in (0, 1):
        values = np.add.reduceat(values, np.arange(0, values.shape[axis], side), axis=axis)
    return values
