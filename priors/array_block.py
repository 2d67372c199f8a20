"""The primal-dual state of a prior that is written in numpy only."""

from __future__ import annotations

import numpy as np

from priors.contract import Prior


class ArrayBlock:
    """Runs any `Prior` through its numpy methods; see `priors.contract.Block`."""

    def __init__(self, prior: Prior, shape: tuple[int, int]) -> None:
        self.prior = prior
        self.shape = shape
        self.norm_squared = float(prior.norm_squared(shape))
        auxiliary = prior.auxiliary_shape(shape)
        self.auxiliary = None if auxiliary is None else np.zeros(auxiliary, np.float32)
        self.dual = np.zeros_like(prior.forward(np.zeros(shape, np.float32), self.auxiliary))
        self._marked: np.ndarray | None = None

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
        ahead = None
        if self.auxiliary is not None:
            change = -tau * self.prior.auxiliary_adjoint(self.dual, self.shape)
            ahead = self.auxiliary + 2.0 * change
            self.auxiliary += relaxation * change
        proposed = self.prior.dual_prox(self.dual + sigma * self.prior.forward(extrapolated, ahead), sigma)
        self.dual += relaxation * (proposed - self.dual)
        self._put(self.prior.adjoint(self.dual, self.shape), adjoint, fresh)

    def certify(self, image: np.ndarray, adjoint: np.ndarray, fresh: bool) -> tuple[float, float]:
        """See `Block.certify`."""
        dual = self.prior.feasible(self.dual, self.shape)
        self._put(self.prior.adjoint(dual, self.shape), adjoint, fresh)
        return self.prior.penalty(self.prior.forward(image, self.auxiliary)), self.prior.conjugate(dual)

    def mark(self) -> None:
        """See `Block.mark`."""
        self._marked = self.dual.copy()

    def moved(self) -> float:
        """See `Block.moved`."""
        return float(np.sum(np.square(self.dual - self._marked), dtype=np.float64))

    def forget(self) -> None:
        """See `Block.forget`."""
        self._marked = None

    @staticmethod
    def _put(image: np.ndarray, adjoint: np.ndarray, fresh: bool) -> None:
        if fresh:
            adjoint[...] = image
        else:
            adjoint += image
