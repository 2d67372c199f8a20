"""The linear map of second-order total generalized variation, and its exact adjoint.

For an image x and a field of slopes v, with o the edge weight, h the pixel spacing, and m = 1 where an
edge joins two existing pixels (a slope lives on the edge to the next pixel), else 0:

    K (x, v)[0] = o_r m_r ((x[i+1, j] - x[i, j]) / h_r - v_r)       K (x, v)[1]: the same along columns
    K (x, v)[2] = m_r m_r[i-1] (v_r - v_r[i-1]) / h_r               K (x, v)[3]: v_c along columns
    K (x, v)[4] = (m_c m_c[i-1] (v_c - v_c[i-1]) / h_r + m_r m_r[, j-1] (v_r - v_r[, j-1]) / h_c) / sqrt(2)
"""

from __future__ import annotations

from typing import Any

import numpy as np

from priors.differences import edges


class Slopes:
    """K on images of one shape."""

    def __init__(
        self,
        shape: tuple[int, int],
        spacing: tuple[float, float] = (1.0, 1.0),
        mask: np.ndarray | None = None,
        edge_weights: np.ndarray | None = None,
    ) -> None:
        self.shape = shape
        self.inverse_spacing = (1.0 / spacing[0], 1.0 / spacing[1])
        exists = edges(shape, mask)
        self.exists = tuple(e.astype(np.float32) for e in exists)
        weights = np.ones((2, 1, 1), np.float32) if edge_weights is None else edge_weights
        weights = np.broadcast_to(weights, (2, *shape))
        self.weights = (self.exists[0] * weights[0], self.exists[1] * weights[1])
        self.plain = mask is None and edge_weights is None

    @property
    def norm_squared(self) -> float:
        """An upper bound of the squared norm of K.

        By blocks: |K|^2 <= the norm of the 2 x 2 matrix of squared bounds, first-order rows
        (o |D|, o) and second-order rows (0, |E|), with |D|^2 = |E|^2 <= 4 / h_r^2 + 4 / h_c^2.
        """
        steep = 4.0 * (self.inverse_spacing[0] ** 2 + self.inverse_spacing[1] ** 2)
        largest = max(float(w.max()) for w in self.weights) ** 2
        bounds = np.array([[np.sqrt(largest * steep), np.sqrt(largest)], [0.0, np.sqrt(steep)]])
        return float(np.linalg.norm(bounds, 2) ** 2)

    def _pairs(self) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
        """Return, for the four second differences, where both slopes exist, over the spacing."""
        m_r, m_c = self.exists
        i_r, i_c = self.inverse_spacing
        r_down, c_right, c_down, r_right = (np.zeros(self.shape, np.float64) for _ in range(4))
        r_down[1:] = m_r[1:] * m_r[:-1] * i_r
        c_right[:, 1:] = m_c[:, 1:] * m_c[:, :-1] * i_c
        c_down[1:] = m_c[1:] * m_c[:-1] * (i_r / np.sqrt(2.0))
        r_right[:, 1:] = m_r[:, 1:] * m_r[:, :-1] * (i_c / np.sqrt(2.0))
        return r_down, c_right, c_down, r_right

    def forward(self, x: np.ndarray, v: np.ndarray) -> np.ndarray:
        """Return K (x, v), shape (5, rows, columns)."""
        r_down, c_right, c_down, r_right = self._pairs()
        out = np.zeros((5, *self.shape), np.result_type(x.dtype, v.dtype, np.float32))
        out[0, :-1] = np.diff(x, axis=0) * self.inverse_spacing[0]
        out[1, :, :-1] = np.diff(x, axis=1) * self.inverse_spacing[1]
        out[0] = self.weights[0] * (out[0] - v[0])
        out[1] = self.weights[1] * (out[1] - v[1])
        out[2, 1:] = r_down[1:] * np.diff(v[0], axis=0)
        out[3, :, 1:] = c_right[:, 1:] * np.diff(v[1], axis=1)
        out[4, 1:] = c_down[1:] * np.diff(v[1], axis=0)
        out[4, :, 1:] += r_right[:, 1:] * np.diff(v[0], axis=1)
        return out

    def adjoint(self, y: np.ndarray) -> np.ndarray:
        """Return the image part of K' y."""
        out = np.zeros(self.shape, np.result_type(y.dtype, np.float32))
        down = (self.weights[0] * (self.inverse_spacing[0] * y[0]))[:-1]
        right = (self.weights[1] * (self.inverse_spacing[1] * y[1]))[:, :-1]
        out[:-1] -= down
        out[1:] += down
        out[:, :-1] -= right
        out[:, 1:] += right
        return out

    def auxiliary_adjoint(self, y: np.ndarray) -> np.ndarray:
        """Return the slope part of K' y, shape (2, rows, columns)."""
        out = self._second_adjoint(y[2:])
        out[0] -= self.weights[0] * y[0]
        out[1] -= self.weights[1] * y[1]
        return out

    def balancing(self, q: np.ndarray) -> np.ndarray:
        """Return the first-order duals p for which K_v' (p, q) = 0, shape (2, rows, columns)."""
        pull = self._second_adjoint(q)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.stack([np.where(w > 0.0, a / w, 0.0) for a, w in zip(pull, self.weights, strict=True)])

    def _second_adjoint(self, q: np.ndarray) -> np.ndarray:
        r_down, c_right, c_down, r_right = self._pairs()
        out = np.zeros((2, *self.shape), np.result_type(q.dtype, np.float32))
        for target, coefficient, dual, axis in (
            (0, r_down, q[0], 0), (1, c_right, q[1], 1), (1, c_down, q[2], 0), (0, r_right, q[2], 1),
        ):  # fmt: skip
            flow = np.moveaxis(coefficient * dual, axis, 0)[1:]
            image = np.moveaxis(out[target], axis, 0)
            image[1:] += flow
            image[:-1] -= flow
        return out

    def expression(self, x: Any) -> tuple[Any, Any]:
        """Return the first-order (2, pixels) and second-order (3, pixels) parts as cvxpy expressions."""
        import cvxpy as cp
        import scipy.sparse as sparse

        rows, columns = self.shape
        n = rows * columns

        def along(axis: int, diagonal: int) -> Any:
            """Differences to the next pixel (1) or from the last (-1)."""
            length = self.shape[axis]
            single = sparse.diags([-1.0 * diagonal, 1.0 * diagonal], [0, diagonal], shape=(length, length))
            if axis == 0:
                return sparse.kron(single, sparse.identity(columns)).tocsr()
            return sparse.kron(sparse.identity(rows), single).tocsr()

        def diagonal(image: np.ndarray) -> Any:
            return sparse.diags(np.asarray(image, np.float64).ravel())

        r_down, c_right, c_down, r_right = self._pairs()
        flat = cp.vec(x, order="C")
        v_r, v_c = cp.Variable(n), cp.Variable(n)
        i_r, i_c = self.inverse_spacing
        first = [
            diagonal(self.weights[0]) @ (i_r * (along(0, 1) @ flat) - v_r),
            diagonal(self.weights[1]) @ (i_c * (along(1, 1) @ flat) - v_c),
        ]
        second = [
            diagonal(r_down) @ (along(0, -1) @ v_r),
            diagonal(c_right) @ (along(1, -1) @ v_c),
            diagonal(c_down) @ (along(0, -1) @ v_c) + diagonal(r_right) @ (along(1, -1) @ v_r),
        ]
        return cp.vstack(first), cp.vstack(second)
