"""A likelihood of some of its pixels only: the others have no data."""

from __future__ import annotations

import numpy as np

from recon.likelihoods.contract import Interval, Likelihood


class PixelPart(Likelihood):
    """What a likelihood says of the pixels where `shown` is True; everywhere else it says nothing.

    whole: any likelihood. shown: boolean (rows, columns).
    """

    def __init__(self, whole: Likelihood, shown: np.ndarray) -> None:
        self.whole, self.shown = whole, shown
        self.shape, self.convex = whole.shape, whole.convex

    @property
    def has_data(self) -> np.ndarray:
        """See `Likelihood.has_data`."""
        return self.whole.has_data & self.shown

    @property
    def domain(self) -> Interval:
        """See `Likelihood.domain`."""
        return self.whole.domain

    @property
    def default_bounds(self) -> tuple[float, float]:
        """See `Likelihood.default_bounds`."""
        return self.whole.default_bounds

    @property
    def constant(self) -> float:
        """That of the whole: what the hidden pixels are worth at a perfect fit is not told apart."""
        return self.whole.constant

    def estimate(self) -> np.ndarray:
        """See `Likelihood.estimate`; the mean of the shown pixels elsewhere."""
        image, seen = self.whole.estimate(), self.has_data
        return np.where(seen, image, image[seen].mean() if seen.any() else image.mean()).astype(np.float32)

    def starting_image(self) -> np.ndarray:
        """See `Likelihood.starting_image`."""
        return self.whole.starting_image()

    def _masked(self, values: np.ndarray) -> np.ndarray:
        return np.where(self.shown, values, 0.0)

    def value_map(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.value_map`."""
        return self._masked(self.whole.value_map(x))

    @property
    def scores_add_up(self) -> bool:
        """See `Likelihood.scores_add_up`."""
        return self.whole.scores_add_up

    def score_map(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.score_map`."""
        return self._masked(self.whole.score_map(x))

    def gradient(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.gradient`."""
        return self._masked(self.whole.gradient(x))

    def curvature(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.curvature`."""
        return self._masked(self.whole.curvature(x))

    def fisher_information(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.fisher_information`."""
        return self._masked(self.whole.fisher_information(x))

    def residuals(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.residuals`."""
        return self._masked(self.whole.residuals(x))

    def draw(self, x: np.ndarray, seed: int | np.random.Generator) -> PixelPart:
        """See `Likelihood.draw`."""
        return PixelPart(self.whole.draw(x, seed), self.shown)

    def prox(self, v: np.ndarray, step: float) -> np.ndarray:
        """See `Likelihood.prox`."""
        return np.where(self.shown, self.whole.prox(v, step), v)

    def conjugate_map(self, u: np.ndarray, low: float, high: float) -> np.ndarray:
        """See `Likelihood.conjugate_map`."""
        with np.errstate(invalid="ignore"):
            free = np.where(u == 0.0, 0.0, np.where(np.asarray(u) > 0.0, u * np.float64(high), u * low))
        return np.where(self.shown, self.whole.conjugate_map(u, low, high), free)

    def majorise(self, x: np.ndarray) -> Likelihood:
        """See `Likelihood.majorise`."""
        return PixelPart(self.whole.majorise(x), self.shown)
