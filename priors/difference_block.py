"""The compiled primal-dual state of a penalty of the difference pair at each pixel."""

from __future__ import annotations

import numpy as np

from priors import difference_kernels as kernels
from priors.differences import Differences
from priors.kernels import bands


class DifferenceBlock:
    """Duals of total variation or of the quadratic; see `priors.contract.Block`."""

    def __init__(self, differences: Differences, weight: float, penalty: int) -> None:
        rows, columns = differences.shape
        self.norm_squared = differences.norm_squared
        self.y_r = np.zeros((rows, columns), np.float32)
        self.y_c = np.zeros((rows, columns), np.float32)
        self._coefficients = differences.coefficients
        self._weight = weight
        self._penalty = penalty
        self._bands = bands(rows)
        self._marked: tuple[np.ndarray, np.ndarray] | None = None

    def step(
        self,
        extrapolated: np.ndarray,
        sigma: float,
        tau: float,
        relaxation: float,
        adjoint: np.ndarray,
        fresh: bool,
    ) -> None:
        """See `Block.step`."""
        shrink = 1.0 / (1.0 + sigma / self._weight)
        kernels.step(
            extrapolated,
            self.y_r,
            self.y_c,
            adjoint,
            *self._coefficients,
            np.float32(self._weight),
            np.float32(shrink),
            self._penalty,
            np.float32(sigma),
            np.float32(relaxation),
            fresh,
            self._bands,
        )

    def certify(self, image: np.ndarray, adjoint: np.ndarray, fresh: bool) -> tuple[float, float]:
        """See `Block.certify`."""
        return kernels.certify(
            image,
            self.y_r,
            self.y_c,
            adjoint,
            *self._coefficients,
            np.float32(self._weight),
            self._penalty,
            fresh,
            self._bands,
        )

    def mark(self) -> None:
        """See `Block.mark`."""
        if self._marked is None:
            self._marked = (self.y_r.copy(), self.y_c.copy())
        else:
            np.copyto(self._marked[0], self.y_r)
            np.copyto(self._marked[1], self.y_c)

    def moved(self) -> float:
        """See `Block.moved`."""
        return kernels.squared_distance(self.y_r, self._marked[0]) + kernels.squared_distance(
            self.y_c, self._marked[1]
        )

    def forget(self) -> None:
        """See `Block.forget`."""
        self._marked = None
