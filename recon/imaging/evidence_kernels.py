"""The compiled pass that pools the evidence of neighbouring pixels for every depth."""

from __future__ import annotations

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE

# No NaN occurs here, and only where none can is a largest value found several at a time.
NO_NAN = COMPILE | {"fastmath": COMPILE["fastmath"] | {"nnan"}}


@numba.njit(parallel=True, **NO_NAN)
def pooled(begin, phase, start, kind, trust, evidence, scene, window, place, top):
    """Write the place, in bins, where the pooled evidence is largest, and the evidence there.

    The evidence for a bin is scene[bin] plus the sum over tags, of all pixels in the window around, of
    window[offset] trust[pixel] evidence[kind[pixel], phase, bin - begin], round the period.

    begin, phase: (tags,), those of pixel q at start[q] to start[q + 1].
    kind, trust: (rows, columns), int32 and float32; kind -1 = skip the pixel.
    evidence: (kinds, phases, length) float32, 0 or more; scene: (bins,) float32, 0 or more, length < bins.
    window: (2 r + 1, 2 r + 1) float32. top stays 0 where no tag is in the window.

    A bin near either end of the period stands in the score twice; the copies from `length` on to
    `length + bins` receive all there is. Adding never lowers a score, so the highest seen while
    adding is the highest there is, and no pass over all bins is needed.
    """
    rows, columns = kind.shape
    reach = window.shape[0] // 2
    length, bins = evidence.shape[2], scene.size
    empty = np.concatenate((scene, scene, scene))[: bins + 2 * length]
    for i in prange(rows):
        score = empty.copy()
        for j in range(columns):
            best, at, written = np.float32(0.0), 0, 0
            first_column, last_column = max(j - reach, 0), min(j + reach, columns - 1)
            for a in range(max(i - reach, 0), min(i + reach + 1, rows)):
                for b in range(first_column, last_column + 1):
                    weight = window[a - i + reach, b - j + reach] * trust[a, b]
                    if kind[a, b] < 0 or weight == 0.0:
                        continue
                    for k in range(start[a * columns + b], start[a * columns + b + 1]):
                        run = evidence[kind[a, b], phase[k]]
                        bin_ = begin[k]
                        while bin_ < bins + length:
                            highest = np.float32(0.0)
                            for m in range(length):
                                s = score[bin_ + m] + weight * run[m]
                                score[bin_ + m] = s
                                highest = max(highest, s)
                            if highest > best:
                                best, at = highest, bin_
                            bin_ += bins
                        written += length
            if best > 0.0:
                while score[at] != best:
                    at += 1
                place[i, j] = _vertex(score, at) % bins
                top[i, j] = best
            if written > bins:
                score[:] = empty
            elif written:
                for a in range(max(i - reach, 0), min(i + reach + 1, rows)):
                    q = a * columns
                    for k in range(start[q + first_column], start[q + last_column + 1]):
                        for bin_ in range(begin[k], bins + length, bins):
                            for m in range(bin_, bin_ + length):
                                score[m] = empty[m]


@numba.njit(**NO_NAN)
def _vertex(score, at):
    """Return the place of the top of the parabola through the highest bin and its neighbours."""
    if at == 0 or at == score.size - 1:
        return at + 0.5
    rise, bend = score[at + 1] - score[at - 1], 2.0 * score[at] - score[at - 1] - score[at + 1]
    return at + 0.5 + (0.5 * rise / bend if bend > 0.0 else 0.0)
