"""Reduces a stack of frames to what a likelihood of separate frames needs.

A pixel's frames are exchangeable: how many of them show each number of electrons is all there is to
know. Frames that show none are known from what is missing, so a pixel that few primaries hit keeps a
few pairs, however many frames it has.
"""

from __future__ import annotations

from dataclasses import dataclass

import numba
import numpy as np
from numba import prange

from recon.errors import InputError
from recon.kernels import COMPILE
from recon.validation import first

LARGEST = 1 << 20  # a scratch array as long as the largest count is kept by each thread


@dataclass(frozen=True, eq=False)
class FrameTally:
    """Pairs (count, times): `times` frames of a pixel show `count` electrons, count > 0, in no order.

    frames: the number of frames.
    start: (rows * columns + 1,) int64; the pairs of pixel p are those from start[p] up to start[p + 1].
    count, times: (pairs,) uint16, or uint32 where a number does not fit.
    """

    frames: int
    start: np.ndarray
    count: np.ndarray
    times: np.ndarray

    def electrons(self) -> np.ndarray:
        """Return the sum of the counts of each pixel, (rows * columns,) int64."""
        total = np.zeros(self.count.size + 1, np.int64)
        np.cumsum(self.count.astype(np.int64) * self.times, out=total[1:])
        return np.diff(total[self.start])


def tally(counts: np.ndarray, usable: np.ndarray) -> FrameTally:
    """Return the tally of counts (frames, rows, columns), without pairs in pixels that are not usable.

    Raises InputError if a count is above LARGEST.
    """
    largest = int(counts.max())
    if largest > LARGEST:
        place = first(counts > LARGEST)
        raise InputError(
            f"counts at {place} is {counts[place]}, above {LARGEST}; give electrons one by one, not readings."
        )
    dtype = np.uint16 if max(largest, len(counts)) <= np.iinfo(np.uint16).max else np.uint32
    start = np.zeros(usable.size + 1, np.int64)
    nothing = np.empty(0, dtype)
    _pairs(counts, largest, usable, start[1:], nothing, nothing)
    np.cumsum(start, out=start)
    count, times = np.empty(start[-1], dtype), np.empty(start[-1], dtype)
    _pairs(counts, largest, usable, start[:-1], count, times)
    return FrameTally(len(counts), start, count, times)


@numba.njit(parallel=True, **COMPILE)
def _pairs(counts, largest, usable, start, count, times):
    """Write the pairs of each usable pixel from its start on; given nowhere to write, write their number."""
    frames, rows, columns = counts.shape
    for i in prange(rows):
        hits = np.empty((columns, frames + 1), counts.dtype)
        number = np.zeros(columns, np.int64)
        for f in range(frames):
            for j in range(columns):  # only counts above zero advance: no branch to mispredict
                hits[j, number[j]] = counts[f, i, j]
                number[j] += counts[f, i, j] > 0
        shown = np.zeros(largest + 1, times.dtype)
        kinds = np.empty(frames, times.dtype)
        for j in range(columns):
            pairs = 0
            for n in range(number[j] if usable[i, j] else 0):
                y = hits[j, n]
                if shown[y] == 0:
                    kinds[pairs] = y
                    pairs += 1
                shown[y] += 1
            pixel = i * columns + j
            for n in range(pairs):
                if count.size:
                    count[start[pixel] + n] = kinds[n]
                    times[start[pixel] + n] = shown[kinds[n]]
                shown[kinds[n]] = 0
            if count.size == 0:
                start[pixel] = pairs
