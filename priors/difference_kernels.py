"""Compiled passes over an image for penalties of the difference pair at each pixel."""

from __future__ import annotations

import numba
import numpy as np
from numba import prange

from priors.kernels import COMPILE, row
from priors.penalties import ANISOTROPIC, ISOTROPIC, QUADRATIC


@numba.njit(inline="always", **COMPILE)
def _dual_prox(a, b, weight, shrink, penalty):
    """Prox of sigma g*; shrink = 1 / (1 + sigma / weight) serves the quadratic."""
    if penalty == ISOTROPIC:
        scale = weight / np.sqrt(max(a * a + b * b, weight * weight))
        return a * scale, b * scale
    if penalty == ANISOTROPIC:
        return min(max(a, -weight), weight), min(max(b, -weight), weight)
    return a * shrink, b * shrink


@numba.njit(**COMPILE)
def _dual_row(here, below, y_r, y_c, e_r, e_c, weight, shrink, penalty, sigma, relaxation):
    columns = here.shape[0]
    for j in range(columns - 1):
        a = y_r[j] + sigma * e_r[j] * (below[j] - here[j])
        b = y_c[j] + sigma * e_c[j] * (here[j + 1] - here[j])
        a, b = _dual_prox(a, b, weight, shrink, penalty)
        y_r[j] += relaxation * (a - y_r[j])
        y_c[j] += relaxation * (b - y_c[j])
    j = columns - 1
    a = y_r[j] + sigma * e_r[j] * (below[j] - here[j])
    a, b = _dual_prox(a, np.float32(0.0), weight, shrink, penalty)
    y_r[j] += relaxation * (a - y_r[j])


@numba.njit(**COMPILE)
def adjoint_row(above_r, here_r, here_c, e_above, e_r, e_c, out, fresh):
    """Write (fresh) or add a row of K' y; above_r is the row of y_r above, all zero for the first row."""
    edge = e_above[0] * above_r[0] - e_r[0] * here_r[0] - e_c[0] * here_c[0]
    if fresh:
        out[0] = edge
        for j in range(1, out.shape[0]):
            vertical = e_above[j] * above_r[j] - e_r[j] * here_r[j]
            out[j] = vertical + e_c[j - 1] * here_c[j - 1] - e_c[j] * here_c[j]
    else:
        out[0] += edge
        for j in range(1, out.shape[0]):
            vertical = e_above[j] * above_r[j] - e_r[j] * here_r[j]
            out[j] += vertical + e_c[j - 1] * here_c[j - 1] - e_c[j] * here_c[j]


@numba.njit(parallel=True, **COMPILE)
def step(x, y_r, y_c, out, e_r, e_c, weight, shrink, penalty, sigma, relaxation, fresh, bands):
    """Advance the duals and put K' y in `out`, in one pass: a row of duals, then the row of the adjoint."""
    rows, columns = x.shape
    nothing = np.zeros(columns, np.float32)
    for band in prange(bands):
        start, stop = band * rows // bands, (band + 1) * rows // bands
        for i in range(start, stop):
            below = x[min(i + 1, rows - 1)]
            _dual_row(
                x[i],
                below,
                y_r[i],
                y_c[i],
                row(e_r, i),
                row(e_c, i),
                weight,
                shrink,
                penalty,
                sigma,
                relaxation,
            )
            if i > start:
                adjoint_row(
                    y_r[i - 1], y_r[i], y_c[i], row(e_r, i - 1), row(e_r, i), row(e_c, i), out[i], fresh
                )
    for band in range(bands):  # the first row of a band needs the duals of the band above
        i = band * rows // bands
        above = y_r[i - 1] if i > 0 else nothing
        adjoint_row(above, y_r[i], y_c[i], row(e_r, max(i - 1, 0)), row(e_r, i), row(e_c, i), out[i], fresh)


@numba.njit(**COMPILE)
def _feasible_row(y_r, y_c, i, weight, penalty, out_r, out_c):
    """Write row i of the duals moved into the domain of g*."""
    for j in range(y_r.shape[1]):
        out_r[j], out_c[j] = _dual_prox(y_r[i, j], y_c[i, j], weight, np.float32(1.0), penalty)


@numba.njit(**COMPILE)
def _penalty_row(here, below, e_r, e_c, penalty):
    """Return the penalty of row i of the image at weight 1 (2 x for the quadratic), summed in float64."""
    columns = here.shape[0]
    total = 0.0
    for j in range(columns):
        right = here[j + 1] if j < columns - 1 else here[j]
        a = e_r[j] * (below[j] - here[j])
        b = e_c[j] * (right - here[j])
        if penalty == ISOTROPIC:
            total += np.sqrt(a * a + b * b)
        elif penalty == ANISOTROPIC:
            total += np.abs(a) + np.abs(b)
        else:
            total += a * a + b * b
    return total


@numba.njit(parallel=True, **COMPILE)
def certify(x, y_r, y_c, out, e_r, e_c, weight, penalty, fresh, bands):
    """Put K' of the feasible duals in `out`; return the penalty of x and the conjugate of those duals."""
    rows, columns = x.shape
    values, conjugates = np.zeros(rows), np.zeros(rows)
    for band in prange(bands):
        start, stop = band * rows // bands, (band + 1) * rows // bands
        buffer = np.zeros((4, columns), np.float32)
        if start > 0:
            _feasible_row(y_r, y_c, start - 1, weight, penalty, buffer[0], buffer[3])
        for i in range(start, stop):
            above, here, across = buffer[(i - start) % 2], buffer[(i - start + 1) % 2], buffer[2]
            _feasible_row(y_r, y_c, i, weight, penalty, here, across)
            adjoint_row(above, here, across, row(e_r, max(i - 1, 0)), row(e_r, i), row(e_c, i), out[i], fresh)
            values[i] = _penalty_row(x[i], x[min(i + 1, rows - 1)], row(e_r, i), row(e_c, i), penalty)
            if penalty == QUADRATIC:
                total = 0.0
                for j in range(columns):
                    total += here[j] * here[j] + across[j] * across[j]
                conjugates[i] = total
    scale = 0.5 * weight if penalty == QUADRATIC else 1.0 * weight
    return scale * values.sum(), conjugates.sum() / (2.0 * weight)


@numba.njit(parallel=True, **COMPILE)
def squared_distance(a, b):
    """Return the sum of (a - b)^2 over two float32 arrays of equal size, in float64."""
    a, b = a.reshape(a.shape[0], -1), b.reshape(b.shape[0], -1)
    sums = np.zeros(a.shape[0])
    for i in prange(a.shape[0]):
        total = 0.0
        for j in range(a.shape[1]):
            difference = np.float64(a[i, j]) - np.float64(b[i, j])
            total += difference * difference
        sums[i] = total
    return sums.sum()
