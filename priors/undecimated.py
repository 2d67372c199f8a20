"""The undecimated wavelet transform (a trous; Holschneider et al. 1989) of an image of any size.

The image is continued beyond its border by half-sample mirroring, as far as the filters reach, so
nothing wraps round. Level j = 1, 2, ... filters the low-pass image of the level before with the
wavelet's two filters, 2^(j-1) samples apart and over sqrt(2), along rows and along columns. At every
pixel and level that gives three details: (low, high), (high, low) and (high, high). Filters so scaled
make a tight frame of the plane (the squares of all details and of the last low-pass image add up to
those of the image); at the border mirrored pixels count again.
"""

from __future__ import annotations

import numpy as np
import pywt

from priors.validation import PriorError

MOST_LEVELS = 4


def orthogonal(name: str) -> pywt.Wavelet:
    """Return an orthogonal wavelet by its name in PyWavelets, or raise PriorError."""
    try:
        wavelet = pywt.Wavelet(name)
    except (ValueError, TypeError, AttributeError):
        wavelet = None
    if wavelet is None or not wavelet.orthogonal:
        raise PriorError(
            f"wavelet is {name!r}; give an orthogonal one, such as haar, db2 to db38,"
            " sym2 to sym20 or coif1 to coif17."
        )
    return wavelet


class Undecimated:
    """The details of images of one shape, and the exact adjoint."""

    def __init__(self, shape: tuple[int, int], wavelet: str, levels: int | None) -> None:
        filters = orthogonal(wavelet)
        self.shape = shape
        self.wavelet = wavelet
        # PyWavelets convolves with the decomposition filters: a correlation with these.
        self.low, self.high = (_padded(taps) / np.sqrt(2.0) for taps in (filters.rec_lo, filters.rec_hi))
        self.levels = _levels(shape, filters.dec_len, levels)
        reach = [(self.low.size - 1) * (2**j - 1) for j in range(self.levels + 1)]
        self.left = reach[-1] // 2
        self.offsets = [self.left - r // 2 for r in reach[1:]]
        self.sizes = [(shape[0] + reach[-1] - r, shape[1] + reach[-1] - r) for r in reach]
        self.rows, self.columns = (_mirrored(n, reach[-1], self.left) for n in shape)

    def extend(self, x: np.ndarray) -> np.ndarray:
        """Return the image continued beyond its border."""
        return x[np.ix_(self.rows, self.columns)]

    def fold(self, extended: np.ndarray) -> np.ndarray:
        """Return the adjoint of `extend`."""
        rows, columns = self.shape
        out = extended[self.left : self.left + rows].copy()
        for i in _outside(self.rows.size, self.left, rows):
            out[self.rows[i]] += extended[i]
        folded = out[:, self.left : self.left + columns].copy()
        for i in _outside(self.columns.size, self.left, columns):
            folded[:, self.columns[i]] += out[:, i]
        return folded

    def forward(self, x: np.ndarray) -> np.ndarray:
        """Return the details, shape (levels, 3, rows, columns)."""
        rows, columns = self.shape
        details = np.empty((self.levels, 3, rows, columns), x.dtype)
        image = self.extend(x)
        for level, offset in enumerate(self.offsets):
            gap = 2**level
            low, high = (_filtered(image, f, gap, 0) for f in (self.low, self.high))
            inside = (slice(offset, offset + rows), slice(offset, offset + columns))
            details[level, 0] = _filtered(low, self.high, gap, 1)[inside]
            details[level, 1] = _filtered(high, self.low, gap, 1)[inside]
            details[level, 2] = _filtered(high, self.high, gap, 1)[inside]
            image = _filtered(low, self.low, gap, 1)
        return details

    def adjoint(self, details: np.ndarray) -> np.ndarray:
        """Return the adjoint of `forward`, an image."""
        rows, columns = self.shape
        image = np.zeros(self.sizes[-1], details.dtype)
        for level in range(self.levels - 1, -1, -1):
            gap, offset = 2**level, self.offsets[level]
            wide = np.zeros((3, *self.sizes[level + 1]), details.dtype)
            wide[:, offset : offset + rows, offset : offset + columns] = details[level]
            low = _spread(image, self.low, gap, 1) + _spread(wide[0], self.high, gap, 1)
            high = _spread(wide[1], self.low, gap, 1) + _spread(wide[2], self.high, gap, 1)
            image = _spread(low, self.low, gap, 0) + _spread(high, self.high, gap, 0)
        return self.fold(image)

    @property
    def norm_squared(self) -> float:
        """An upper bound of the squared norm of `forward`: 1 in the plane, more at a mirroring border."""
        from priors.undecimated_norm import bound

        return bound(self)


def _levels(shape: tuple[int, int], length: int, levels: int | None) -> int:
    """Return the levels; None takes those for which the mirrored margins stay within the image, 1 to 4."""
    within, wanted = (2 * min(shape), MOST_LEVELS) if levels is None else (4 * max(shape), levels)
    most = 1
    while most < wanted and (length - 1) * (2 ** (most + 1) - 1) <= within:
        most += 1
    if levels is not None and levels > most:
        raise PriorError(
            f"levels is {levels}, too many for images of shape {tuple(shape)} and filters of {length} taps;"
            f" give at most {most}."
        )
    return most


def _padded(taps: list[float]) -> np.ndarray:
    """Return the taps between zeros, a multiple of four in all: the compiled passes take four at a time."""
    return np.pad(taps, len(taps) % 4 // 2)


def _mirrored(n: int, reach: int, left: int) -> np.ndarray:
    """Return which pixel stands at each place of the continued row."""
    place = (np.arange(n + reach) - left) % (2 * n)
    return np.where(place < n, place, 2 * n - 1 - place)


def _outside(size: int, left: int, n: int) -> list[int]:
    return [*range(left), *range(left + n, size)]


def _filtered(image: np.ndarray, taps: np.ndarray, gap: int, axis: int) -> np.ndarray:
    """Return the correlation with taps `gap` apart, where they lie inside the image."""
    moved = np.moveaxis(image, axis, 0)
    n = moved.shape[0] - (taps.size - 1) * gap
    total = sum(moved.dtype.type(f) * moved[t * gap : t * gap + n] for t, f in enumerate(taps))
    return np.moveaxis(total, 0, axis)


def _spread(image: np.ndarray, taps: np.ndarray, gap: int, axis: int) -> np.ndarray:
    """Return the adjoint of `_filtered`."""
    moved = np.moveaxis(image, axis, 0)
    n = moved.shape[0]
    out = np.zeros((n + (taps.size - 1) * gap, *moved.shape[1:]), image.dtype)
    for t, f in enumerate(taps):
        out[t * gap : t * gap + n] += moved.dtype.type(f) * moved
    return np.moveaxis(out, 0, axis)
