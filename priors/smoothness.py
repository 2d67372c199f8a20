"""Quadratic smoothness (Tikhonov regularisation of the first differences)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from priors import penalties
from priors.difference_prior import DifferencePrior

if TYPE_CHECKING:
    import cvxpy as cp


@dataclass(frozen=True, eq=False)
class Smoothness(DifferencePrior):
    """weight / 2 times the sum over pixels of a^2 + b^2.

    a and b are the differences to the next row and column, times the edge weight, over the pixel
    spacing, as in `TotalVariation`; the other settings and errors are the same too.
    """

    weight: float | None = None
    spacing: float | tuple[float, float] = 1.0
    edge_weights: np.ndarray | None = None
    mask: np.ndarray | None = None

    def typical_weight(self, information: float) -> float:
        """See `Prior.typical_weight`; averages over about three pixels each way."""
        return 4.0 * information * max(self.spacing) ** 2

    _kernel = penalties.QUADRATIC

    def penalty(self, p: np.ndarray) -> float:
        """See `Prior.penalty`."""
        return 0.5 * self.weight * float(np.sum(np.square(p), dtype=np.float64))

    def dual_prox(self, y: np.ndarray, sigma: float) -> np.ndarray:
        """See `Prior.dual_prox`."""
        return y / (1.0 + sigma / self.weight)

    def feasible(self, y: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
        """Return y: the conjugate is finite everywhere."""
        return y

    def conjugate(self, y: np.ndarray) -> float:
        """Return |y|^2 / (2 weight)."""
        return float(np.sum(np.square(y), dtype=np.float64)) / (2.0 * self.weight)

    def expression(self, x: cp.Expression, shape: tuple[int, int]) -> tuple[cp.Expression, list[Any]]:
        """See `Prior.expression`."""
        import cvxpy as cp

        down, right = self.differences(shape).expression(x)
        return 0.5 * self.weight * (cp.sum_squares(down) + cp.sum_squares(right)), []
