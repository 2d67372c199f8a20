"""Compiled passes of second-order total generalized variation; the map is that of `priors.slopes`."""

from __future__ import annotations

import numba
import numpy as np
from numba import prange

from priors.difference_kernels import adjoint_row
from priors.kernels import COMPILE, row

_HALF_ROOT = np.float32(np.sqrt(0.5))


@numba.njit(inline="always", **COMPILE)
def _edge(exists, i, rows, nothing):
    """Return row i of the map of existing edges along rows; none above the image or below its last row."""
    if i < 0 or i >= rows - 1:
        return nothing
    return row(exists, i)


@numba.njit(inline="always", **COMPILE)
def _across(exists, i, nothing):
    """Return row i of the map of existing edges along columns; none above the image."""
    return nothing if i < 0 else row(exists, i)


@numba.njit(**COMPILE)
def _pull_row(
    q_rr,
    q_cc,
    q_rc,
    q_rr_below,
    q_rc_below,
    m_r_above,
    m_r,
    m_r_below,
    m_c_above,
    m_c,
    m_c_below,
    inverse_r,
    inverse_c,
    out_r,
    out_c,
):
    """Write a row of E' q: what the second-order duals ask of the slopes."""
    mixed_r, mixed_c = inverse_r * _HALF_ROOT, inverse_c * _HALF_ROOT
    columns = out_r.shape[0]
    for j in range(columns):
        out_r[j] = inverse_r * m_r[j] * (m_r_above[j] * q_rr[j] - m_r_below[j] * q_rr_below[j])
        out_c[j] = mixed_r * m_c[j] * (m_c_above[j] * q_rc[j] - m_c_below[j] * q_rc_below[j])
    for j in range(1, columns):
        right = mixed_c * m_r[j] * m_r[j - 1] * q_rc[j]
        out_r[j] += right
        out_c[j] += inverse_c * m_c[j] * m_c[j - 1] * q_cc[j]
    for j in range(columns - 1):
        out_r[j] -= mixed_c * m_r[j] * m_r[j + 1] * q_rc[j + 1]
        out_c[j] -= inverse_c * m_c[j] * m_c[j + 1] * q_cc[j + 1]


@numba.njit(parallel=True, **COMPILE)
def pull(q, m_r, m_c, inverse_r, inverse_c, out, bands):
    """Put E' q in `out`, shape (2, rows, columns)."""
    rows, columns = q.shape[1:]
    nothing = np.zeros(columns, np.float32)
    for band in prange(bands):
        for i in range(band * rows // bands, (band + 1) * rows // bands):
            below = min(i + 1, rows - 1)
            m_c_below = row(m_c, i + 1) if i + 1 < rows else nothing
            _pull_row(
                q[0, i],
                q[1, i],
                q[2, i],
                q[0, below],
                q[2, below],
                _edge(m_r, i - 1, rows, nothing),
                _edge(m_r, i, rows, nothing),
                _edge(m_r, i + 1, rows, nothing),
                _across(m_c, i - 1, nothing),
                row(m_c, i),
                m_c_below,
                inverse_r,
                inverse_c,
                out[0, i],
                out[1, i],
            )


@numba.njit(parallel=True, **COMPILE)
def slope_step(v, ahead, p, w_r, w_c, tau, relaxation):
    """Advance the slopes; `ahead` holds E' q on entry and 2 v~ - v on return."""
    rows, columns = v.shape[1:]
    for i in prange(rows):
        a, b = row(w_r, i), row(w_c, i)
        for j in range(columns):
            change_r = tau * (a[j] * p[0, i, j] - ahead[0, i, j])
            change_c = tau * (b[j] * p[1, i, j] - ahead[1, i, j])
            ahead[0, i, j] = v[0, i, j] + np.float32(2.0) * change_r
            ahead[1, i, j] = v[1, i, j] + np.float32(2.0) * change_c
            v[0, i, j] += relaxation * change_r
            v[1, i, j] += relaxation * change_c


@numba.njit(**COMPILE)
def _first_row(x, v, i, w_r, w_c, inverse_r, inverse_c, nothing, out):
    """Write row i of o (D x - v), shape (2, columns)."""
    rows, columns = x.shape
    here, below = x[i], x[min(i + 1, rows - 1)]
    v_r, v_c, out_r, out_c = v[0, i], v[1, i], out[0], out[1]
    weights_r = nothing if i == rows - 1 else row(w_r, i)
    weights_c = row(w_c, i)
    for j in range(columns):
        out_r[j] = weights_r[j] * (inverse_r * (below[j] - here[j]) - v_r[j])
    for j in range(columns - 1):
        out_c[j] = weights_c[j] * (inverse_c * (here[j + 1] - here[j]) - v_c[j])
    out_c[columns - 1] = np.float32(0.0)


@numba.njit(**COMPILE)
def _second_row(v, i, m_r, m_c, inverse_r, inverse_c, nothing, out):
    """Write row i of E v, shape (3, columns)."""
    rows, columns = v.shape[1:]
    mixed_r, mixed_c = inverse_r * _HALF_ROOT, inverse_c * _HALF_ROOT
    up = max(i - 1, 0)
    v_r, v_c, v_r_above, v_c_above = v[0, i], v[1, i], v[0, up], v[1, up]
    here_r, above_r = _edge(m_r, i, rows, nothing), _edge(m_r, i - 1, rows, nothing)
    here_c, above_c = row(m_c, i), _across(m_c, i - 1, nothing)
    out_rr, out_cc, out_rc = out[0], out[1], out[2]
    out_cc[0] = np.float32(0.0)
    for j in range(columns):
        out_rr[j] = inverse_r * here_r[j] * above_r[j] * (v_r[j] - v_r_above[j])
        out_rc[j] = mixed_r * here_c[j] * above_c[j] * (v_c[j] - v_c_above[j])
    for j in range(1, columns):
        out_cc[j] = inverse_c * here_c[j] * here_c[j - 1] * (v_c[j] - v_c[j - 1])
        out_rc[j] += mixed_c * here_r[j] * here_r[j - 1] * (v_r[j] - v_r[j - 1])


@numba.njit(parallel=True, **COMPILE)
def dual_step(
    x, v, p, q, out, w_r, w_c, m_r, m_c, inverse_r, inverse_c, first, second, sigma, relaxation, fresh, bands
):
    """Advance the duals with the extrapolated image and slopes, and put D' (o p) in `out`."""
    rows, columns = x.shape
    nothing = np.zeros(columns, np.float32)
    for band in prange(bands):
        buffer = np.empty((5, columns), np.float32)
        for i in range(band * rows // bands, (band + 1) * rows // bands):
            _first_row(x, v, i, w_r, w_c, inverse_r, inverse_c, nothing, buffer[:2])
            _second_row(v, i, m_r, m_c, inverse_r, inverse_c, nothing, buffer[2:])
            for j in range(columns):
                a = p[0, i, j] + sigma * buffer[0, j]
                b = p[1, i, j] + sigma * buffer[1, j]
                scale = first / np.sqrt(max(a * a + b * b, first * first))
                p[0, i, j] += relaxation * (a * scale - p[0, i, j])
                p[1, i, j] += relaxation * (b * scale - p[1, i, j])
            for j in range(columns):
                a = q[0, i, j] + sigma * buffer[2, j]
                b = q[1, i, j] + sigma * buffer[3, j]
                c = q[2, i, j] + sigma * buffer[4, j]
                scale = second / np.sqrt(max(a * a + b * b + c * c, second * second))
                q[0, i, j] += relaxation * (a * scale - q[0, i, j])
                q[1, i, j] += relaxation * (b * scale - q[1, i, j])
                q[2, i, j] += relaxation * (c * scale - q[2, i, j])
    adjoint(p, w_r, w_c, inverse_r, inverse_c, out, fresh, bands)


@numba.njit(parallel=True, **COMPILE)
def adjoint(p, w_r, w_c, inverse_r, inverse_c, out, fresh, bands):
    """Put D' (o p) in `out`."""
    rows, columns = out.shape
    nothing = np.zeros(columns, np.float32)
    for band in prange(bands):
        buffer = np.zeros((3, columns), np.float32)
        for i in range(band * rows // bands, (band + 1) * rows // bands):
            here, across = row(w_r, i), row(w_c, i)
            upper = row(w_r, max(i - 1, 0))
            above = nothing if i == 0 else p[0, i - 1]
            own = nothing if i == rows - 1 else p[0, i]
            for j in range(columns):
                buffer[0, j] = inverse_r * upper[j]
                buffer[1, j] = inverse_r * here[j]
                buffer[2, j] = inverse_c * across[j]
            adjoint_row(above, own, p[1, i], buffer[0], buffer[1], buffer[2], out[i], fresh)


@numba.njit(parallel=True, **COMPILE)
def penalties(x, v, w_r, w_c, m_r, m_c, inverse_r, inverse_c, bands):
    """Return the sums over pixels of |o (D x - v)| and |E v|."""
    rows, columns = x.shape
    nothing = np.zeros(columns, np.float32)
    firsts, seconds = np.zeros(rows), np.zeros(rows)
    for band in prange(bands):
        buffer = np.empty((5, columns), np.float32)
        for i in range(band * rows // bands, (band + 1) * rows // bands):
            _first_row(x, v, i, w_r, w_c, inverse_r, inverse_c, nothing, buffer[:2])
            _second_row(v, i, m_r, m_c, inverse_r, inverse_c, nothing, buffer[2:])
            total, bent = 0.0, 0.0
            for j in range(columns):
                total += np.sqrt(buffer[0, j] ** 2 + buffer[1, j] ** 2)
                bent += np.sqrt(buffer[2, j] ** 2 + buffer[3, j] ** 2 + buffer[4, j] ** 2)
            firsts[i], seconds[i] = total, bent
    return firsts.sum(), seconds.sum()


@numba.njit(parallel=True, **COMPILE)
def excess(pull, w_r, w_c, first):
    """Turn E' q into 1/o times the excess, beyond the disc, of the first-order duals it asks for."""
    rows, columns = pull.shape[1:]
    for i in prange(rows):
        a, b = row(w_r, i), row(w_c, i)
        for j in range(columns):
            inverse_a = np.float32(1.0) / a[j] if a[j] > 0.0 else np.float32(0.0)
            inverse_b = np.float32(1.0) / b[j] if b[j] > 0.0 else np.float32(0.0)
            asked_r, asked_c = pull[0, i, j] * inverse_a, pull[1, i, j] * inverse_b
            size = np.sqrt(max(asked_r * asked_r + asked_c * asked_c, first * first))
            beyond = np.float32(1.0) - first / size
            pull[0, i, j] = beyond * asked_r * inverse_a
            pull[1, i, j] = beyond * asked_c * inverse_b


@numba.njit(parallel=True, **COMPILE)
def retreat(q, beyond, m_r, m_c, inverse_r, inverse_c, second, rate, bands):
    """Move the second-order duals against E beyond, staying in the ball of radius `second`."""
    rows, columns = q.shape[1:]
    nothing = np.zeros(columns, np.float32)
    for band in prange(bands):
        buffer = np.empty((3, columns), np.float32)
        for i in range(band * rows // bands, (band + 1) * rows // bands):
            _second_row(beyond, i, m_r, m_c, inverse_r, inverse_c, nothing, buffer)
            for j in range(columns):
                a = q[0, i, j] - rate[i, j] * buffer[0, j]
                b = q[1, i, j] - rate[i, j] * buffer[1, j]
                c = q[2, i, j] - rate[i, j] * buffer[2, j]
                scale = second / np.sqrt(max(a * a + b * b + c * c, second * second))
                q[0, i, j], q[1, i, j], q[2, i, j] = a * scale, b * scale, c * scale
