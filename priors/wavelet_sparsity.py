"""Sparsity of wavelet details: orthonormal, or translation-invariant.

Donoho and Johnstone 1994; Coifman and Donoho 1995 (averaging over shifts).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from priors import validation
from priors.contract import Block, Prior, require_image
from priors.decimated import Decimated, levels_of, scales
from priors.undecimated import Undecimated, orthogonal
from priors.validation import PriorError

if TYPE_CHECKING:
    import cvxpy as cp

FADING = {True: 2.0**-2.5, False: 0.5}
"""Weight of the details of a level relative to the next finer one: translation-invariant, or not."""
DIAGONAL = 2.0
"""Weight of (high, high) details relative to the other two: rarer in photographs than in noise."""
CONIC_PIXELS = 64 * 64


@dataclass(frozen=True, eq=False)
class WaveletSparsity(Prior):
    """weight times a sum over levels j = 1, 2, ... of the absolute wavelet details of the image.

        translation-invariant:  weight * sum_j 2^(-2.5 (j-1)) S_j
        orthonormal:            weight * sum_j 2^(-(j-1)) S_j
        S_j = sum |(low, high)| + sum |(high, low)| + 2 sum |(high, high)|  over the details of level j

    The coarsest low-pass image is free. Orthonormal details are as many as pixels; translation-invariant
    ones (`priors.undecimated`, filters over sqrt(2)) are three at every pixel and level. Coarse details
    weigh less, as in the norms of Besov spaces, which leaves wide structure alone; a translation-invariant
    2^-1 a level would be the average over all shifts of the plain sum of orthonormal details.
    The factors are measured on photographs at 1 to 10 counts a pixel: plain sums lose up to 2 dB.

    weight: positive number; larger means smoother. None leaves it to be chosen from the data by
        `recon.reconstruct`.
    wavelet: an orthogonal wavelet by its name in PyWavelets. Four vanishing moments (sym4) did best on
        photographs; haar is the fastest and leaves blocks.
    levels: number of levels; None takes 4, or fewer where the image is too small for the filters.
    translation_invariant: which of the two. The orthonormal one takes a tenth of the memory and loses 1
        to 2 dB at 4 to 10 counts a pixel (measured).

    A sum with `TotalVariation` of 0.3 times the weight does better than either.
    Images of any size are continued by mirroring (see `priors.undecimated` and `priors.decimated`).
    Raises PriorError for a setting out of range, or for more levels than an image can have.
    """

    weight: float | None = None
    wavelet: str = "sym4"
    levels: int | None = None
    translation_invariant: bool = True

    def __post_init__(self) -> None:
        object.__setattr__(self, "weight", validation.weight(self.weight))
        orthogonal(self.wavelet)
        levels = self.levels
        if levels is not None and (
            isinstance(levels, bool) or not isinstance(levels, int | np.integer) or not 1 <= levels <= 10
        ):
            raise PriorError(f"levels is {levels!r}; give a whole number from 1 to 10, or None.")

    def typical_weight(self, information: float) -> float:
        """See `Prior.typical_weight`; best on photographs with noise at 1 to 10 counts a pixel (measured)."""
        return (1.6 if self.translation_invariant else 3.0) * information**0.5

    def transform(self, shape: tuple[int, int]) -> Undecimated | Decimated:
        """Return the linear map K for images of `shape`."""
        kind = Undecimated if self.translation_invariant else Decimated
        return kind(validation.image_shape(shape), self.wavelet, self.levels)

    def check_shape(self, shape: tuple[int, int]) -> None:
        """Raise PriorError if images of this shape are too small for the levels."""
        self.transform(shape)

    def _weights(self, size: tuple[int, ...]) -> np.ndarray:
        """Return the weight of every detail, for an array of details of this size."""
        fading = FADING[self.translation_invariant]
        if self.translation_invariant:
            weights = np.outer(fading ** np.arange(size[0]), (1.0, 1.0, DIAGONAL))
            return self.weight * weights[:, :, None, None]
        levels = levels_of(size, self.levels)
        level, diagonal = scales(size, levels)
        weights = fading ** (level - 1.0) * np.where(diagonal, DIAGONAL, 1.0)
        return self.weight * np.where(level <= levels, weights, 0.0)

    def forward(self, x: np.ndarray, v: np.ndarray | None = None) -> np.ndarray:
        """Return the details: (levels, 3, rows, columns), or an array like the image of orthonormal ones."""
        x = require_image(x)
        return self.transform(x.shape).forward(x)

    def adjoint(self, y: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
        """See `Prior.adjoint`."""
        return self.transform(shape).adjoint(y)

    def norm_squared(self, shape: tuple[int, int]) -> float:
        """See `Prior.norm_squared`."""
        return self.transform(shape).norm_squared

    def penalty(self, p: np.ndarray) -> float:
        """See `Prior.penalty`."""
        return float(np.sum(self._weights(p.shape) * np.abs(p), dtype=np.float64))

    def dual_prox(self, y: np.ndarray, sigma: float) -> np.ndarray:
        """Return y moved to the nearest point of the domain of g*."""
        limits = np.asarray(self._weights(y.shape), y.dtype)
        return np.clip(y, -limits, limits)

    def conjugate(self, y: np.ndarray) -> float:
        """Return 0 inside the domain |y| <= weight of the detail (to rounding), inf outside."""
        inside = np.all(np.abs(y) <= self._weights(y.shape) * (1.0 + 1e-5))
        return 0.0 if inside else np.inf

    def prox(self, x: np.ndarray, step: float) -> np.ndarray:
        """Return the minimiser of value(z) + |z - x|^2 / (2 step): soft thresholds of orthonormal details.

        Raises PriorError where K is not orthonormal.
        """
        transform = self.transform(require_image(x).shape)
        if not isinstance(transform, Decimated) or not transform.orthonormal:
            raise PriorError(
                "prox needs an orthonormal transform; give translation_invariant=False and an image whose"
                " sides are multiples of 2^levels."
            )
        p = transform.coefficients(x)
        limits = step * self._weights(p.shape)
        return transform.image(np.sign(p) * np.maximum(np.abs(p) - limits, 0.0))

    def expression(self, x: cp.Expression, shape: tuple[int, int]) -> tuple[cp.Expression, list[Any]]:
        """See `Prior.expression`; K as a matrix, for images of at most 64 x 64 pixels."""
        import cvxpy as cp
        from scipy.sparse import coo_array, hstack

        n = shape[0] * shape[1]
        if n > CONIC_PIXELS:
            raise PriorError(
                f"shape is {shape}; WaveletSparsity as an expression takes at most {CONIC_PIXELS} pixels:"
                " crop the image, or use the primal-dual solver."
            )
        transform = self.transform(shape)
        columns = []
        for pixel in range(n):
            unit = np.zeros(n)
            unit[pixel] = 1.0
            details = transform.forward(unit.reshape(shape))
            columns.append(coo_array(details.reshape(-1, 1)))
        matrix = hstack(columns, format="csr")
        weights = np.broadcast_to(self._weights(details.shape), details.shape).ravel()
        return weights @ cp.abs(matrix @ cp.vec(x, order="C")), []

    def block(self, shape: tuple[int, int]) -> Block:
        """See `Prior.block`."""
        transform = self.transform(shape)
        if isinstance(transform, Decimated):
            return super().block(shape)
        from priors.undecimated_block import UndecimatedBlock

        return UndecimatedBlock(transform, self._weights((transform.levels,))[:, :, 0, 0])
