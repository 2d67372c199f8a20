"""What the likelihoods of secondary electrons share."""

from __future__ import annotations

from abc import abstractmethod

import numpy as np

from recon.likelihoods.contract import LEAST_SHARED, Likelihood
from recon.likelihoods.inputs import pixelwise_bound


class Marks(Likelihood):
    """A likelihood of the yield eta of each pixel, 0 or more; not convex."""

    convex = False
    _has_data: np.ndarray

    @property
    def has_data(self) -> np.ndarray:
        """See `Likelihood.has_data`."""
        return self._has_data

    @property
    def default_bounds(self) -> tuple[float, float]:
        """Zero, and a value that no pixel's own estimate comes near."""
        return 0.0, pixelwise_bound(self.estimate())

    @property
    @abstractmethod
    def electrons(self) -> float:
        """How many electrons were detected in all, of readings about how many."""

    @property
    def can_be_shared_out(self) -> bool:
        """See `Likelihood.can_be_shared_out`."""
        return self.electrons >= LEAST_SHARED
