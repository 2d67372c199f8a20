"""What a likelihood must offer.

A likelihood is the negative log-likelihood of an acquisition as a function of an image x of shape
(rows, columns), L(x). Its `value` is half the deviance,

    value(x) = L(x) - constant,     constant = L at a perfect fit,

which is zero when the image explains every pixel exactly, so that a relative gap means something;
`constant` gives the negative log-likelihood back. Pixels with no data contribute exactly zero.

A researcher's likelihood subclasses `Likelihood`. With `convex = True` it writes `value_map`,
`constant`, `gradient`, `curvature`, `prox`, `conjugate_map`, `fisher_information`, `residuals`,
`draw` and, for the conic solver, `expression`. With `convex = False` it writes `majorise` in place
of `prox`, `conjugate_map` and `expression`. Everything is per pixel (separable).
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    import cvxpy as cp


LEAST_SHARED = 30  # detections, or pixels with data, below which nothing can be held out


@dataclass(frozen=True)
class Interval:
    """An interval of image values; an open end is a value the likelihood cannot take."""

    low: float
    high: float
    low_open: bool = False
    high_open: bool = False

    def __contains__(self, value: float) -> bool:
        above = value > self.low or (value == self.low and not self.low_open)
        below = value < self.high or (value == self.high and not self.high_open)
        return above and below


class Likelihood(ABC):
    """Half the deviance of an acquisition as a function of an image."""

    convex: bool = True
    """Whether value is convex in the image; if not, `majorise` gives a convex likelihood above it."""

    has_linear_score: bool = False
    """Whether gradient(x) / fisher_information(x) is x less an unbiased estimate that no x enters."""

    shape: tuple[int, int]
    """(rows, columns) of the image."""

    @property
    @abstractmethod
    def domain(self) -> Interval:
        """The image values at which value is finite, whatever the pixel."""

    @property
    @abstractmethod
    def default_bounds(self) -> tuple[float, float]:
        """Bounds to solve within when the user gives none; finite wherever a certificate needs it."""

    @property
    @abstractmethod
    def constant(self) -> float:
        """The negative log-likelihood at a perfect fit, summed over pixels."""

    @abstractmethod
    def estimate(self) -> np.ndarray:
        """Return the image that fits each pixel best by itself (float32); the mean where there is no data."""

    def starting_image(self) -> np.ndarray:
        """Return the image that a solve starts from: `estimate`, or its mean where that can mislead.

        Where the likelihood is not convex a pixel can stay where its own data put it, however unlikely its
        neighbours make that; from a flat image it leaves only as far as its data pull it.
        """
        image = self.estimate()
        return image if self.convex else np.full_like(image, image.mean(dtype=np.float64))

    @abstractmethod
    def value_map(self, x: np.ndarray) -> np.ndarray:
        """Return half the deviance of each pixel (float64)."""

    def value(self, x: np.ndarray) -> float:
        """Return half the deviance, summed over pixels in float64."""
        return float(np.sum(self.value_map(x), dtype=np.float64))

    @abstractmethod
    def gradient(self, x: np.ndarray) -> np.ndarray:
        """Return dL/dx of each pixel (float64)."""

    @abstractmethod
    def curvature(self, x: np.ndarray) -> np.ndarray:
        """Return d2L/dx2 of each pixel (float64)."""

    @abstractmethod
    def fisher_information(self, x: np.ndarray) -> np.ndarray:
        """Return the expected curvature of each pixel if x were true (float64)."""

    @abstractmethod
    def residuals(self, x: np.ndarray) -> np.ndarray:
        """Return the deviance residuals: sqrt(2 value_map), positive where the data ask for a larger x."""

    @abstractmethod
    def draw(self, x: np.ndarray, seed: int | np.random.Generator) -> Likelihood:
        """Return the same likelihood on data drawn as if x were true."""

    @property
    @abstractmethod
    def has_data(self) -> np.ndarray:
        """A boolean map, False where a pixel contributes nothing."""

    def folds(self, number: int, seed: int) -> list[tuple[Likelihood, Likelihood]]:
        """Return pairs of independent likelihoods of the same image, to fit one and score the other.

        Every part of the data is scored in one of the `number` pairs. This default hides whole pixels, which
        suits any likelihood; those whose data can be divided within a pixel do so, and lose less.
        """
        from recon.likelihoods.part import PixelPart

        fold = np.random.default_rng(seed).integers(number, size=self.shape)
        return [(PixelPart(self, fold != f), PixelPart(self, fold == f)) for f in range(number)]

    @property
    def can_be_shared_out(self) -> bool:
        """Whether there are data enough that `folds` leaves each something to say."""
        return int(np.count_nonzero(self.has_data)) >= LEAST_SHARED

    def score_map(self, x: np.ndarray) -> np.ndarray:
        """Return what an image is scored by that was fitted to other data, pixel by pixel (float64).

        In expectation it is least, over all images, at the truth. This default is `value_map`, the
        predictive log-likelihood; where there is an unbiased estimate of the image it is the squared
        distance from that.
        """
        return self.value_map(x)

    @property
    def scores_add_up(self) -> bool:
        """Whether the `score_map` of unlike pixels may be summed as it is; if not, over their information."""
        return False

    # Convex likelihoods ------------------------------------------------------------------------

    def prox(self, v: np.ndarray, step: float) -> np.ndarray:
        """Return the minimiser over the domain of L(x) + |x - v|^2 / (2 step), pixel by pixel."""
        raise NotImplementedError(f"{type(self).__name__} has no prox")

    def conjugate_map(self, u: np.ndarray, low: float, high: float) -> np.ndarray:
        """Return max over x in [low, high] of u x - value(x), pixel by pixel (float64)."""
        raise NotImplementedError(f"{type(self).__name__} has no conjugate")

    def conjugate(self, u: np.ndarray, low: float, high: float) -> float:
        """Return the sum of `conjugate_map` over pixels."""
        return float(np.sum(self.conjugate_map(u, low, high), dtype=np.float64))

    def proximal_step(
        self,
        x: np.ndarray,
        adjoint: np.ndarray,
        extrapolated: np.ndarray,
        step: float,
        relaxation: float,
        low: float,
        high: float,
    ) -> None:
        """Advance x by one over-relaxed step of a primal-dual solve, in place (float32 images).

        x~ = clip(prox(x - step adjoint, step), low, high); extrapolated = 2 x~ - x;
        x += relaxation (x~ - x).
        """
        proposed = np.clip(self.prox(x - step * adjoint, step), low, high)
        extrapolated[...] = 2.0 * proposed - x
        x += relaxation * (proposed - x)

    def expression(self, x: cp.Expression) -> tuple[cp.Expression, list[Any]]:
        """Return value(x) as a convex cvxpy expression of x, and constraints it needs."""
        raise NotImplementedError(f"{type(self).__name__} has no cvxpy expression")

    # Other likelihoods -------------------------------------------------------------------------

    def majorise(self, x: np.ndarray) -> Likelihood:
        """Return a convex likelihood M with M.value(z) + c >= value(z), equal at z = x."""
        raise NotImplementedError(f"{type(self).__name__} is convex and needs no majorising")
