"""The compiled primal-dual state of translation-invariant wavelet sparsity."""

from __future__ import annotations

import numpy as np

from priors import undecimated_kernels as kernels
from priors.difference_kernels import squared_distance
from priors.kernels import bands
from priors.undecimated import Undecimated


class UndecimatedBlock:
    """Duals of the details of every level; see `priors.contract.Block`."""

    def __init__(self, transform: Undecimated, weights: np.ndarray) -> None:
        self.norm_squared = transform.norm_squared
        self.dual = np.zeros((transform.levels, 3, *transform.shape), np.float32)
        self._transform = transform
        self._weights = weights.astype(np.float32)
        self._filters = transform.low.astype(np.float32), transform.high.astype(np.float32)
        self._images = [np.zeros(size, np.float32) for size in transform.sizes]
        self._bands = bands(transform.shape[0])
        self._marked: np.ndarray | None = None

    def _analyse(self, image: np.ndarray, sigma: float, relaxation: float, advance: bool) -> float:
        np.copyto(self._images[0], self._transform.extend(image))
        total = 0.0
        for level, offset in enumerate(self._transform.offsets):
            weight = self._weights[level]
            total += float(weight) * kernels.analyse(
                self._images[level],
                self._images[level + 1],
                self.dual[level],
                offset,
                *self._filters,
                2**level,
                np.float32(sigma),
                np.float32(relaxation),
                weight,
                advance,
                self._bands,
            )
        return total

    def _synthesise(self, limits: np.ndarray, adjoint: np.ndarray, fresh: bool) -> None:
        levels = self._transform.levels
        for level in range(levels - 1, -1, -1):
            kernels.synthesise(
                self._images[level + 1],
                self.dual[level],
                self._images[level],
                self._transform.offsets[level],
                *self._filters,
                2**level,
                limits[level],
                level == levels - 1,
                self._bands,
            )
        folded = self._transform.fold(self._images[0])
        if fresh:
            adjoint[...] = folded
        else:
            adjoint += folded

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
        self._analyse(extrapolated, sigma, relaxation, True)
        self._synthesise(np.full_like(self._weights, np.inf), adjoint, fresh)

    def certify(self, image: np.ndarray, adjoint: np.ndarray, fresh: bool) -> tuple[float, float]:
        """See `Block.certify`."""
        value = self._analyse(image, 0.0, 0.0, False)
        self._synthesise(self._weights, adjoint, fresh)
        return value, 0.0

    def mark(self) -> None:
        """See `Block.mark`."""
        self._marked = self.dual.copy()

    def moved(self) -> float:
        """See `Block.moved`."""
        pairs = zip(self.dual, self._marked, strict=True)
        return sum(squared_distance(now, then) for now, then in pairs)

    def forget(self) -> None:
        """See `Block.forget`."""
        self._marked = None
