"""Reduces a stack of frames to what a likelihood of separate frames needs.

A pixel's frames of one dose are exchangeable: how many of them show each number of electrons is all there
is to know. Frames that show none are known from what is missing: their total dose is enough. So a pixel
that few primaries hit keeps a few pairs, however many frames it has.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from recon.errors import InputError
from recon.validation import first

LARGEST = 1 << 20  # a scratch array as long as the largest count is kept by each thread
EXACT = 64  # so many doses are kept as they are
APART = 0.005  # more are put into classes this far apart, relative to the dose
_DENSE = 64  # counts below it are tallied in one pass, in a table no larger than the stack


@dataclass(frozen=True, eq=False)
class FrameTally:
    """Pairs (count, times): `times` frames of a pixel show `count` electrons, count > 0.

    frames: the number of frames.
    start: (rows * columns + 1,) int64; the pairs of pixel p are those from start[p] up to start[p + 1].
    count, times: (pairs,) uint16, or uint32 where a number does not fit.
    kind: (pairs,) uint16, the class of the frames' dose, ascending within a pixel; empty if there is one.
    factor: (classes,) float64, the dose of a class over that of the pixel.
    empty: (rows * columns,) float64, the sum of the factors of the frames that show no electrons.
    electrons: (rows * columns,) int64, the sum of the counts.
    """

    frames: int
    start: np.ndarray
    count: np.ndarray
    times: np.ndarray
    kind: np.ndarray
    factor: np.ndarray
    empty: np.ndarray
    electrons: np.ndarray

    @property
    def parts(self) -> tuple[np.ndarray, ...]:
        """What kernels take: start, count, times, kind, factor, empty."""
        return self.start, self.count, self.times, self.kind, self.factor, self.empty


def dose_classes(factors: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the class of every entry (uint16), and the factor of every class, ascending (float64).

    Up to EXACT different factors are classes by themselves. More are put into classes APART wide, each
    of which stands for the mean of its members: off by less than half a per cent, by nothing on average.
    """
    values, kind = np.unique(np.asarray(factors, np.float64), return_inverse=True)
    kind = kind.reshape(factors.shape)
    if values.size > EXACT:
        _, kind = np.unique(np.floor(np.log(factors) / np.log1p(APART)), return_inverse=True)
        kind = kind.reshape(factors.shape)
        members = np.bincount(kind.ravel())
        values = np.bincount(kind.ravel(), factors.ravel()) / members
    return kind.astype(np.uint16), values


def _tally_of_one(counts: np.ndarray, usable: np.ndarray) -> FrameTally:
    """Return the tally of a single frame (rows, columns)."""
    hit = usable & (counts > 0)
    count = counts[hit].astype(np.uint16 if counts.max() <= np.iinfo(np.uint16).max else np.uint32)
    start = np.concatenate([[0], np.cumsum(hit, dtype=np.int64)])
    electrons = np.where(usable, counts, 0).astype(np.int64).ravel()
    empty = np.where(hit, 0.0, 1.0).ravel()
    nothing = np.empty(0, np.uint16)
    return FrameTally(1, start, count, np.ones_like(count), nothing, np.ones(1), empty, electrons)


def tally(counts: np.ndarray, usable: np.ndarray, factors: np.ndarray | None = None) -> FrameTally:
    """Return the tally of counts (frames, rows, columns), without pairs in pixels that are not usable.

    factors: (frames, rows), the dose of every line of every frame over that of its pixels; None = all 1.

    Raises InputError if there are several frames and a count is above LARGEST.
    """
    from recon.likelihoods import neyman_tally_kernels as kernels

    largest = int(counts.max())
    if len(counts) == 1 and factors is None:
        return _tally_of_one(counts[0], usable)
    if largest > LARGEST:
        place = first(counts > LARGEST)
        raise InputError(
            f"counts at {place} is {counts[place]}, above {LARGEST}; give electrons one by one, not readings."
        )
    dtype = np.uint16 if max(largest, len(counts)) <= np.iinfo(np.uint16).max else np.uint32
    start = np.zeros(usable.size + 1, np.int64)
    empty, electrons = np.zeros(usable.size), np.zeros(usable.size, np.int64)
    one = factors is None
    kind, factor = (np.zeros((0, 0), np.uint16), np.ones(1)) if one else dose_classes(factors)
    if one and largest < min(_DENSE, len(counts)):
        rows, columns = usable.shape
        values = np.arange(largest + 1).astype(counts.dtype)
        shown = np.zeros((rows, values.size, columns), np.min_scalar_type(len(counts)))
        kernels.count_all(counts, usable, values, shown, start[1:], empty, electrons)
        np.cumsum(start, out=start)
        count, times = np.empty(start[-1], dtype), np.empty(start[-1], dtype)
        kernels.write_all(shown, start, count, times)
        return FrameTally(len(counts), start, count, times, np.empty(0, np.uint16), factor, empty, electrons)
    nothing, none = np.empty(0, dtype), np.empty(0, np.uint16)
    exact = np.ones((len(counts), 1)) if one else np.asarray(factors, np.float64)
    order = np.argsort(kind, axis=0, kind="stable").T.copy()
    settings = counts, largest, usable, exact, kind, order
    kernels.pairs(*settings, start[1:], nothing, nothing, none, empty, electrons)
    np.cumsum(start, out=start)
    count, times = np.empty(start[-1], dtype), np.empty(start[-1], dtype)
    kinds = none if one else np.empty(start[-1], np.uint16)
    kernels.pairs(*settings, start[:-1], count, times, kinds, empty, electrons)
    return FrameTally(len(counts), start, count, times, kinds, factor, empty, electrons)
