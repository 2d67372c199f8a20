"""A likelihood pulled to one side, to see how far an image gives way."""

from __future__ import annotations

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.likelihoods.part import PixelPart


class Tilted(PixelPart):
    """L(x) - sum of slope (x - centre).

    whole: any likelihood. slope, centre: (rows, columns); slope is taken as 0 in pixels without data.
    """

    def __init__(self, whole: Likelihood, slope: np.ndarray, centre: np.ndarray) -> None:
        super().__init__(whole, np.ones(whole.shape, bool))
        self.slope = np.where(whole.has_data, slope, 0.0)
        self.centre = np.asarray(centre, np.float64)

    def value_map(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.value_map`; it may be negative."""
        return self.whole.value_map(x) - self.slope * (x - self.centre)

    def gradient(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.gradient`."""
        return self.whole.gradient(x) - self.slope

    def prox(self, v: np.ndarray, step: float) -> np.ndarray:
        """See `Likelihood.prox`: that of the whole, at v + step slope."""
        return self.whole.prox(v + step * self.slope, step)

    def conjugate_map(self, u: np.ndarray, low: float, high: float) -> np.ndarray:
        """See `Likelihood.conjugate_map`."""
        shifted = self.whole.conjugate_map(u + self.slope, low, high)
        return shifted - self.slope * self.centre

    def majorise(self, x: np.ndarray) -> Likelihood:
        """See `Likelihood.majorise`."""
        tilted = Tilted(self.whole.majorise(x), self.slope, self.centre)
        tilted.slope = self.slope  # where the majorant is flat, too
        return tilted
