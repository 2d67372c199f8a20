"""The orthonormal wavelet transform of an image of any size.

PyWavelets' periodization is orthonormal only where every level halves an even length. Other images
are first continued, by half-sample mirroring at the end of rows and columns, to a multiple of
2^levels; the map is then no longer orthonormal, and its adjoint is still exact. Coefficients lie in
one array like the (continued) image, the coarsest low-pass image first, as usual.
"""

from __future__ import annotations

import numpy as np
import pywt

from priors.undecimated import MOST_LEVELS, orthogonal
from priors.validation import PriorError

MODE = "periodization"


def levels_of(size: tuple[int, ...], levels: int | None) -> int:
    """Return the levels for images of this size, continued or not; None takes 4, fewer for small images."""
    if levels is None:
        return max(1, min(MOST_LEVELS, int(np.ceil(np.log2(min(size))))))
    if levels > 1 and 2**levels > 2 * max(size):
        raise PriorError(
            f"levels is {levels}, too many for images of shape {tuple(size)}; give at most"
            f" {max(1, int(np.log2(2 * max(size))))}."
        )
    return levels


def scales(size: tuple[int, ...], levels: int) -> tuple[np.ndarray, np.ndarray]:
    """Return the level of every coefficient (levels + 1: low-pass), and whether both its filters are high."""
    along = []
    for n in size:
        level = np.full(n, levels + 1)
        for j in range(levels, 0, -1):
            level[n >> j : n >> (j - 1)] = j
        along.append(level)
    rows, columns = np.ix_(*along)
    return np.minimum(rows, columns), (rows == columns) & (rows <= levels)


class Decimated:
    """The details of images of one shape (zeros in place of the low-pass image), and the exact adjoint."""

    def __init__(self, shape: tuple[int, int], wavelet: str, levels: int | None) -> None:
        self.wavelet = orthogonal(wavelet)
        self.shape = shape
        self.levels = levels_of(shape, levels)
        unit = 2**self.levels
        self.size = tuple(-(-n // unit) * unit for n in shape)
        self._rows, self._columns = (_continued(n, size) for n, size in zip(shape, self.size, strict=True))
        self._low_pass = (slice(self.size[0] // unit), slice(self.size[1] // unit))

    @property
    def orthonormal(self) -> bool:
        """Whether the image needs no continuation."""
        return self.size == tuple(self.shape)

    def coefficients(self, x: np.ndarray) -> np.ndarray:
        """Return details and coarsest low-pass image in one array like the (continued) image."""
        out = x[np.ix_(self._rows, self._columns)]
        for rows, columns in self._halves():
            low, (down, right, both) = pywt.dwt2(out[: 2 * rows, : 2 * columns], self.wavelet, MODE)
            out[:rows, :columns], out[:rows, columns : 2 * columns] = low, right
            out[rows : 2 * rows, :columns], out[rows : 2 * rows, columns : 2 * columns] = down, both
        return out

    def image(self, coefficients: np.ndarray) -> np.ndarray:
        """Return the (continued) image of the coefficients: the inverse, and so the adjoint."""
        out = coefficients.copy()
        for rows, columns in reversed(self._halves()):
            low, right = out[:rows, :columns], out[:rows, columns : 2 * columns]
            down, both = out[rows : 2 * rows, :columns], out[rows : 2 * rows, columns : 2 * columns]
            out[: 2 * rows, : 2 * columns] = pywt.idwt2((low, (down, right, both)), self.wavelet, MODE)
        return out

    def _halves(self) -> list[tuple[int, int]]:
        """Return the shapes of the low-pass images, finest first."""
        return [(self.size[0] >> level, self.size[1] >> level) for level in range(1, self.levels + 1)]

    def forward(self, x: np.ndarray) -> np.ndarray:
        """Return the details."""
        details = self.coefficients(x)
        details[self._low_pass] = 0.0
        return details

    def adjoint(self, details: np.ndarray) -> np.ndarray:
        """Return the adjoint of `forward`, an image."""
        coefficients = details.copy()
        coefficients[self._low_pass] = 0.0
        extended = self.image(coefficients)
        tall = np.zeros((self.shape[0], extended.shape[1]), extended.dtype)
        np.add.at(tall, self._rows, extended)
        out = np.zeros((self.shape[1], self.shape[0]), extended.dtype)
        np.add.at(out, self._columns, tall.T)
        return out.T.copy()

    @property
    def norm_squared(self) -> float:
        """An upper bound of the squared norm: how often one pixel stands in the continued image."""
        return float(np.bincount(self._rows).max() * np.bincount(self._columns).max())


def _continued(n: int, size: int) -> np.ndarray:
    place = np.arange(size) % (2 * n)
    return np.where(place < n, place, 2 * n - 1 - place)
