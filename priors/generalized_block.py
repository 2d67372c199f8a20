"""The compiled primal-dual state of second-order total generalized variation."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np
from scipy.ndimage import minimum_filter

from priors import generalized_kernels as kernels
from priors.difference_kernels import squared_distance
from priors.kernels import bands

RETREATS = 16  # steps of `certify`

if TYPE_CHECKING:
    from priors.generalized_variation import GeneralizedVariation


class GeneralizedBlock:
    """Slopes, and duals of both orders; see `priors.contract.Block`."""

    def __init__(self, prior: GeneralizedVariation, shape: tuple[int, int]) -> None:
        slopes = prior.slopes(shape)
        self.norm_squared = slopes.norm_squared
        self.slopes = np.zeros((2, *shape), np.float32)
        self.first = np.zeros((2, *shape), np.float32)
        self.second = np.zeros((3, *shape), np.float32)
        self._ahead = np.empty((2, *shape), np.float32)
        keep = slice(0, 1) if slopes.plain else slice(None)
        self._weights = tuple(np.ascontiguousarray(w[keep]) for w in slopes.weights)
        self._exists = tuple(np.ascontiguousarray(e[keep]) for e in slopes.exists)
        self._inverse = tuple(np.float32(i) for i in slopes.inverse_spacing)
        self._limits = tuple(np.float32(limit) for limit in prior.limits)
        steep = 4.0 * sum(i * i for i in slopes.inverse_spacing)
        self._rates = _rates(self._weights, shape, steep)
        self._bands = bands(shape[0])
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
        kernels.pull(self.second, *self._exists, *self._inverse, self._ahead, self._bands)
        kernels.slope_step(
            self.slopes, self._ahead, self.first, *self._weights, np.float32(tau), np.float32(relaxation)
        )
        kernels.dual_step(
            extrapolated,
            self._ahead,
            self.first,
            self.second,
            adjoint,
            *self._weights,
            *self._exists,
            *self._inverse,
            *self._limits,
            np.float32(sigma),
            np.float32(relaxation),
            fresh,
            self._bands,
        )

    def certify(self, image: np.ndarray, adjoint: np.ndarray, fresh: bool) -> tuple[float, float]:
        """See `Block.certify`; the dual point is near that of `GeneralizedVariation.feasible`.

        The second-order duals are moved to where the first-order ones they ask for stay inside their disc, by
        accelerated gradient steps (Nesterov 1983) as long at each pixel as the edge weights around it allow.
        What is beyond even so is scaled down: it is the worst pixel that decides the scale.
        """
        first, second = self._limits
        pull, dual = self._ahead, self.second.copy()
        kernels.retreat(
            dual, np.zeros_like(pull), *self._exists, *self._inverse, second, self._rates, self._bands
        )
        ahead, momentum = dual.copy(), 1.0
        for _ in range(RETREATS):
            kernels.pull(ahead, *self._exists, *self._inverse, pull, self._bands)
            kernels.excess(pull, *self._weights, first)
            kernels.retreat(ahead, pull, *self._exists, *self._inverse, second, self._rates, self._bands)
            following = 0.5 * (1.0 + math.sqrt(1.0 + 4.0 * momentum * momentum))
            overshoot = np.float32((momentum - 1.0) / following)
            dual, ahead, momentum = ahead, ahead + overshoot * (ahead - dual), following
        kernels.pull(dual, *self._exists, *self._inverse, pull, self._bands)
        for part, weights in zip(pull, self._weights, strict=True):
            np.divide(part, weights, out=part, where=weights > 0.0)
        largest = float(np.sqrt(np.max(np.einsum("kij,kij->ij", pull, pull))))
        if largest > first:
            pull *= first / np.float32(largest)
        kernels.adjoint(pull, *self._weights, *self._inverse, adjoint, fresh, self._bands)
        sums = kernels.penalties(
            image, self.slopes, *self._weights, *self._exists, *self._inverse, self._bands
        )
        return float(first) * sums[0] + float(second) * sums[1], 0.0

    def mark(self) -> None:
        """See `Block.mark`."""
        self._marked = (self.first.copy(), self.second.copy())

    def moved(self) -> float:
        """See `Block.moved`."""
        pairs = zip((self.first, self.second), self._marked, strict=True)
        return sum(squared_distance(now, then) for now, then in pairs)

    def forget(self) -> None:
        """See `Block.forget`."""
        self._marked = None


def _rates(weights: tuple[np.ndarray, ...], shape: tuple[int, int], steep: float) -> np.ndarray:
    """Return how far a retreat may step at each pixel: by the square of the lightest weight it can touch."""
    lightest = np.full(shape, np.inf, np.float32)
    for part in weights:
        np.minimum(lightest, np.where(part > 0.0, part, np.inf), out=lightest)
    near = minimum_filter(lightest, 3)
    return np.where(np.isfinite(near), near * near * np.float32(0.95 / steep), 0.0).astype(np.float32)


def minimise_over_slopes(prior: GeneralizedVariation, image: np.ndarray, tolerance: float = 1e-6) -> float:
    """Return the penalty of an image: the primal-dual method on the slopes alone, the image held."""
    x = np.asarray(image, np.float32)
    block = prior.block(x.shape)
    adjoint = np.zeros_like(x)
    tau = max(float(np.ptp(x)), 1e-6) / prior.limits[0] / 4.0
    sigma = 1.0 / (tau * block.norm_squared)
    best, bound, still = np.inf, -np.inf, 0
    while still < 20:  # checks in a row without progress: single precision ends here
        for _ in range(100):
            block.step(x, sigma, tau, 1.9, adjoint, True)
        value, _ = block.certify(x, adjoint, True)
        reached = float(np.sum(x * adjoint, dtype=np.float64))
        progress = max(best - value, reached - bound) > 0.1 * tolerance * abs(value)
        still = 0 if progress else still + 1
        best, bound = min(best, value), max(bound, reached)
        if best - bound <= tolerance * best:
            break
    return best
