"""Forward differences of an image and their exact adjoint: spacing, missing pixels, edge weights.

    (D x)[0, i, j] = e_r[i, j] (x[i+1, j] - x[i, j]),     (D x)[1, i, j] = e_c[i, j] (x[i, j+1] - x[i, j])

e = edge weight / spacing where both pixels of the edge exist, and 0 otherwise (so 0 in the last row
for e_r and in the last column for e_c). With no mask and no edge weights every row of e_r and e_c is
the same, and one is kept; the missing edges at the border are then seen to by the differences.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from priors.validation import same_shape


class Differences:
    """Forward differences on images of one shape."""

    def __init__(
        self,
        shape: tuple[int, int],
        spacing: tuple[float, float] = (1.0, 1.0),
        mask: np.ndarray | None = None,
        edge_weights: np.ndarray | None = None,
    ) -> None:
        same_shape("mask", mask, shape)
        same_shape("edge_weights", edge_weights, shape)
        self.shape = shape
        full = (1, shape[1]) if mask is None and edge_weights is None else shape
        scale = np.ones((2, *full), np.float32)
        if edge_weights is not None:
            scale *= edge_weights
        if mask is not None:
            scale *= edges(shape, mask)
        scale /= np.asarray(spacing, np.float32)[:, None, None]
        self.coefficients = scale

    @property
    def norm_squared(self) -> float:
        """An upper bound of the squared norm: 4 (max e_r^2 + max e_c^2)."""
        e_r, e_c = (float(np.max(e)) for e in self.coefficients)
        rows, columns = self.shape
        return max(4.0 * (e_r**2 * (rows > 1) + e_c**2 * (columns > 1)), 1e-12)

    def forward(self, x: np.ndarray) -> np.ndarray:
        """Return D x, shape (2, rows, columns)."""
        out = np.zeros((2, *x.shape), np.result_type(x.dtype, np.float32))
        e_r, e_c = (np.broadcast_to(e, x.shape) for e in self.coefficients)
        out[0, :-1] = e_r[:-1] * np.diff(x, axis=0)
        out[1, :, :-1] = e_c[:, :-1] * np.diff(x, axis=1)
        return out

    def adjoint(self, y: np.ndarray) -> np.ndarray:
        """Return D' y, shape (rows, columns)."""
        e_r, e_c = (np.broadcast_to(e, y.shape[1:]) for e in self.coefficients)
        out = np.zeros(y.shape[1:], np.result_type(y.dtype, np.float32))
        down = e_r[:-1] * y[0, :-1]
        right = e_c[:, :-1] * y[1, :, :-1]
        out[:-1] -= down
        out[1:] += down
        out[:, :-1] -= right
        out[:, 1:] += right
        return out

    def expression(self, x: Any) -> tuple[Any, Any]:
        """Return the two difference images as cvxpy expressions, zero where there is no edge."""
        import cvxpy as cp

        rows, columns = self.shape
        e_r, e_c = (np.broadcast_to(e, self.shape).astype(float) for e in self.coefficients)
        down: Any = np.zeros((1, columns))
        right: Any = np.zeros((rows, 1))
        if rows > 1:
            down = cp.vstack([cp.multiply(e_r[:-1], x[1:] - x[:-1]), down])
        if columns > 1:
            right = cp.hstack([cp.multiply(e_c[:, :-1], x[:, 1:] - x[:, :-1]), right])
        return down, right


def edges(shape: tuple[int, int], mask: np.ndarray | None) -> np.ndarray:
    """Return where the edge to the next row, and to the next column, joins two existing pixels."""
    exists = np.ones(shape, bool) if mask is None else mask
    joined = np.zeros((2, *shape), bool)
    joined[0, :-1] = exists[:-1] & exists[1:]
    joined[1, :, :-1] = exists[:, :-1] & exists[:, 1:]
    return joined
