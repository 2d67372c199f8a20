"""A prior as a researcher might write it, in numpy alone: total variation without a kink at zero."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import cvxpy as cp
import numpy as np

from priors.contract import Prior


@dataclass(frozen=True)
class HuberVariation(Prior):
    """weight times the sum over pixels of h(|D x|), D the forward differences (Huber 1964).

    h(r) = r^2 / (2 rounding) for r <= rounding, r - rounding / 2 beyond.
    """

    weight: float
    rounding: float = 0.1

    def forward(self, x: np.ndarray, v: np.ndarray | None = None) -> np.ndarray:
        p = np.zeros((2, *x.shape), x.dtype)
        p[0, :-1] = np.diff(x, axis=0)
        p[1, :, :-1] = np.diff(x, axis=1)
        return p

    def adjoint(self, y: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
        down, right = y[0, :-1], y[1, :, :-1]
        x = np.zeros(shape, y.dtype)
        x[:-1] -= down
        x[1:] += down
        x[:, :-1] -= right
        x[:, 1:] += right
        return x

    def norm_squared(self, shape: tuple[int, int]) -> float:
        return 8.0

    def penalty(self, p: np.ndarray) -> float:
        r = np.hypot(p[0], p[1])
        inner = np.minimum(r, self.rounding)
        return self.weight * float(np.sum(inner**2 / (2.0 * self.rounding) + (r - inner)))

    def dual_prox(self, y: np.ndarray, sigma: float) -> np.ndarray:
        q = y / (1.0 + sigma * self.rounding / self.weight)
        return q * (self.weight / np.maximum(np.hypot(q[0], q[1]), self.weight))

    def conjugate(self, y: np.ndarray) -> float:
        """A float32 dual may stand outside the disc by a rounding error."""
        if float(np.max(np.hypot(y[0], y[1]))) > self.weight * (1.0 + 1e-6):
            return np.inf
        return self.rounding / (2.0 * self.weight) * float(np.sum(np.square(y), dtype=np.float64))

    def expression(self, x: cp.Expression, shape: tuple[int, int]) -> tuple[cp.Expression, list[Any]]:
        down, right = _differences(shape[0]) @ x, x @ _differences(shape[1]).T
        size = cp.norm(cp.vstack([cp.vec(down, order="C"), cp.vec(right, order="C")]), 2, axis=0)
        return self.weight / (2.0 * self.rounding) * cp.sum(cp.huber(size, self.rounding)), []


def _differences(n: int) -> np.ndarray:
    """Return the matrix of forward differences of n numbers, its last row zero."""
    return np.eye(n, k=1) - np.diag(np.arange(n) < n - 1).astype(float)
