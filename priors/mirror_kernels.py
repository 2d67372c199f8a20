"""Compiled continuation of an image beyond its border by mirroring, and its adjoint."""

from __future__ import annotations

import numba
from numba import prange

from priors.kernels import COMPILE


@numba.njit(**COMPILE)
def _extend_row(source, columns, left, target):
    width = source.shape[0]
    target[left : left + width] = source
    for c in range(left):
        target[c] = source[columns[c]]
    for c in range(left + width, target.shape[0]):
        target[c] = source[columns[c]]


@numba.njit(parallel=True, **COMPILE)
def extend(image, rows, columns, left, out):
    """Put pixel (rows[r], columns[c]) of the image at (r, c) of `out`; from `left` on they are its own."""
    for r in prange(out.shape[0]):
        _extend_row(image[rows[r]], columns, left, out[r])


@numba.njit(**COMPILE)
def _fold_row(source, columns, left, target):
    width = target.shape[0]
    inner = source[left : left + width]
    for c in range(width):
        target[c] += inner[c]
    for c in range(left):
        target[columns[c]] += source[c]
    for c in range(left + width, source.shape[0]):
        target[columns[c]] += source[c]


@numba.njit(parallel=True, **COMPILE)
def fold(extended, order, starts, columns, left, out):
    """Add to `out` the adjoint of `extend`; rows order[starts[i]] to order[starts[i + 1] - 1] show row i."""
    for i in prange(out.shape[0]):
        for k in range(starts[i], starts[i + 1]):
            _fold_row(extended[order[k]], columns, left, out[i])
