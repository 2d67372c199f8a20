"""Total variation (Rudin, Osher and Fatemi 1992), isotropic and anisotropic."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from priors import penalties
from priors.difference_prior import DifferencePrior

if TYPE_CHECKING:
    import cvxpy as cp


@dataclass(frozen=True, eq=False)
class TotalVariation(DifferencePrior):
    """weight times the total variation of the image.

        isotropic:     weight * sum over pixels of sqrt(a^2 + b^2)
        anisotropic:   weight * sum over pixels of |a| + |b|

    with a and b the forward differences to the next row and to the next column, times the edge
    weight, over the pixel spacing; 0 where there is no next pixel.

    weight: positive number, in half deviances per unit of image difference; larger means smoother. None
        leaves it to be chosen from the data by `recon.reconstruct`.
    isotropic: which of the two penalties.
    spacing: distance between pixel centres, one number or a (row, column) pair.
    edge_weights: None, or numbers >= 0 that multiply the differences leaving a pixel: shape
        (rows, columns), or (2, rows, columns) for the row and the column direction.
    mask: None, or booleans (rows, columns), False where there is no pixel: no difference crosses there.

    Raises PriorError for a setting out of range, or maps that do not fit the image.
    """

    weight: float | None = None
    isotropic: bool = True
    spacing: float | tuple[float, float] = 1.0
    edge_weights: np.ndarray | None = None
    mask: np.ndarray | None = None

    def typical_weight(self, information: float) -> float:
        """See `Prior.typical_weight`; best on photographs with noise at 1 to 10 counts a pixel (measured)."""
        return 1.25 * information**0.5 * max(self.spacing)

    @property
    def _kernel(self) -> int:
        return penalties.ISOTROPIC if self.isotropic else penalties.ANISOTROPIC

    def penalty(self, p: np.ndarray) -> float:
        """See `Prior.penalty`."""
        size = np.hypot(p[0], p[1]) if self.isotropic else np.abs(p)
        return self.weight * float(np.sum(size, dtype=np.float64))

    def dual_prox(self, y: np.ndarray, sigma: float) -> np.ndarray:
        """Return y moved to the nearest point of the domain of g*."""
        if not self.isotropic:
            return np.clip(y, -self.weight, self.weight)
        return y * (self.weight / np.maximum(np.hypot(y[0], y[1]), self.weight))

    def conjugate(self, y: np.ndarray) -> float:
        """Return 0 inside the domain |y| <= weight (to rounding), inf outside."""
        size = np.hypot(y[0], y[1]) if self.isotropic else np.abs(y)
        return 0.0 if float(np.max(size)) <= self.weight * (1.0 + 1e-5) else np.inf

    def expression(self, x: cp.Expression, shape: tuple[int, int]) -> tuple[cp.Expression, list[Any]]:
        """See `Prior.expression`."""
        import cvxpy as cp

        down, right = self.differences(shape).expression(x)
        if not self.isotropic:
            return self.weight * (cp.sum(cp.abs(down)) + cp.sum(cp.abs(right))), []
        pairs = cp.vstack([cp.vec(down, order="C"), cp.vec(right, order="C")])
        return self.weight * cp.sum(cp.norm(pairs, 2, axis=0)), []
