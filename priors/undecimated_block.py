"""The compiled primal-dual state of translation-invariant wavelet sparsity."""

from __future__ import annotations

import numpy as np

from priors import mirror_kernels
from priors import undecimated_kernels as kernels
from priors.difference_kernels import squared_distance
from priors.kernels import bands
from priors.undecimated import Undecimated


class UndecimatedBlock:
    """Duals of the details of every level; see `priors.contract.Block`.

    weights: of the details, shape (levels, 3).
    """

    def __init__(self, transform: Undecimated, weights: np.ndarray) -> None:
        self.norm_squared = transform.norm_squared
        self.dual = np.zeros((transform.levels, 3, *transform.shape), np.float32)
        self._passes = Passes(transform)
        self._weights = weights.astype(np.float32)
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
        self._passes.analyse(extrapolated, self.dual, sigma, relaxation, self._weights)
        self._passes.synthesise(self.dual, adjoint, fresh)

    def certify(self, image: np.ndarray, adjoint: np.ndarray, fresh: bool) -> tuple[float, float]:
        """See `Block.certify`."""
        value = self._passes.penalty(image, self.dual, self._weights)
        self._passes.synthesise(self.dual, adjoint, fresh, self._weights)
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


class Passes:
    """The compiled map of images of one shape, and the two low-pass images it works in."""

    def __init__(self, transform: Undecimated) -> None:
        self._transform = transform
        self._low, self._high = transform.low.astype(np.float32), transform.high.astype(np.float32)
        self._order = np.argsort(transform.rows, kind="stable")
        self._starts = np.searchsorted(transform.rows[self._order], np.arange(transform.shape[0] + 1))
        memory = [np.zeros(np.prod(size), np.float32) for size in transform.sizes[:2]]
        self._images = [
            memory[level % 2][: np.prod(size)].reshape(size) for level, size in enumerate(transform.sizes)
        ]
        self._bands = bands(transform.shape[0])

    def analyse(
        self, image: np.ndarray, dual: np.ndarray, sigma: float, relaxation: float, weights: np.ndarray
    ) -> None:
        """Advance the duals by the details of the image."""
        self._analyse(image, dual, sigma, relaxation, weights, True)

    def penalty(self, image: np.ndarray, dual: np.ndarray, weights: np.ndarray) -> float:
        """Return the weighted sum of the details' absolute values; the duals only lend their shape."""
        return self._analyse(image, dual, 0.0, 0.0, weights, False)

    def synthesise(
        self, dual: np.ndarray, adjoint: np.ndarray, fresh: bool, limits: np.ndarray | None = None
    ) -> None:
        """Write (fresh) or add to `adjoint` K' of the duals, clipped to the limits if there are any."""
        transform = self._transform
        last = transform.levels - 1
        for level in range(last, -1, -1):
            y = dual[level]
            if limits is not None:
                limit = limits[level][:, None, None]
                y = np.clip(y, -limit, limit)
            kernels.synthesise(
                self._images[level + 1],
                y,
                self._images[level],
                transform.offsets[level],
                self._low,
                self._high,
                2**level,
                level == last,
                self._bands,
            )
        if fresh:
            adjoint[...] = 0.0
        mirror_kernels.fold(
            self._images[0], self._order, self._starts, transform.columns, transform.left, adjoint
        )

    def _analyse(
        self,
        image: np.ndarray,
        dual: np.ndarray,
        sigma: float,
        relaxation: float,
        weights: np.ndarray,
        advance: bool,
    ) -> float:
        transform = self._transform
        mirror_kernels.extend(image, transform.rows, transform.columns, transform.left, self._images[0])
        total = 0.0
        for level, offset in enumerate(transform.offsets):
            total += kernels.analyse(
                self._images[level],
                self._images[level + 1],
                dual[level],
                offset,
                self._low,
                self._high,
                2**level,
                np.float32(sigma),
                np.float32(relaxation),
                weights[level],
                advance,
                self._bands,
            )
        return total
