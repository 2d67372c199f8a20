"""The compiled pass that pools the evidence of neighbouring pixels for every depth."""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE

# There is no NaN here, and a largest value is found eight at a time only where none can be.
NO_NAN = COMPILE | {"fastmath": COMPILE["fastmath"] | {"nnan"}}


@numba.njit(**NO_NAN)
def _add(score, run, weight):
    """Add weight times the run to the score; return the highest score there."""
    highest = np.float32(0.0)
    for m in range(run.size):
        s = score[m] + weight * run[m]
        score[m] = s
        highest = max(highest, s)
    return highest


@numba.njit(parallel=True, **COMPILE)
def pooled(y, start, used, kind, evidence, first, scene, period, window, place, top):
    """Write the place where the pooled evidence is largest, in [0, period), and the evidence there.

    The evidence for depth z is the sum over tags, of all pixels in the window around, of
    window[offset] evidence[kind of pixel](y - z); a kind is one ratio of signal to background.

    y, start: as in `detection_time_kernels`; kind: (rows, columns), which row of `evidence` serves a pixel.
    evidence: (kinds, phases, length) float32; [., f, b] belongs to a tag (f + 1/2) / phases of a bin above a bin
        edge, for the depth at the centre of the bin `first + b` from the tag's.
    window: (2 r + 1, 2 r + 1) float32 weights. top stays 0 where no tag is in the window.
    """
    rows, columns = used.shape
    reach = window.shape[0] // 2
    phases, length = evidence.shape[1:]
    bins = scene.size
    per_bin = bins / period
    for i in prange(rows):
        score = scene.copy()
        for j in range(columns):
            best, at = np.float32(0.0), 0
            for a in range(max(i - reach, 0), min(i + reach + 1, rows)):
                for b in range(max(j - reach, 0), min(j + reach + 1, columns)):
                    weight = window[a - i + reach, b - j + reach]
                    if not used[a, b] or weight == 0.0:
                        continue
                    q = a * columns + b
                    for k in range(start[q], start[q + 1]):
                        x = y[k] * per_bin
                        whole = int(x)
                        run = evidence[kind[a, b], min(int((x - whole) * phases), phases - 1)]
                        begin = (whole + first) % bins
                        straight = min(length, bins - begin)
                        highest = _add(score[begin : begin + straight], run[:straight], weight)
                        if straight < length:
                            highest = max(highest, _add(score, run[straight:], weight))
                        if highest > best:  # scores only rise, so the last highest is the highest
                            best, at = highest, begin
            if best > 0.0:
                for m in range(length):
                    if score[(at + m) % bins] == best:
                        at = (at + m) % bins
                        break
                place[i, j] = _vertex(score, at, bins) / per_bin
                top[i, j] = best
            for a in range(max(i - reach, 0), min(i + reach + 1, rows)):
                for b in range(max(j - reach, 0), min(j + reach + 1, columns)):
                    q = a * columns + b
                    for k in range(start[q], start[q + 1]):
                        begin = (int(y[k] * per_bin) + first) % bins
                        straight = min(length, bins - begin)
                        score[begin : begin + straight] = scene[begin : begin + straight]
                        score[: length - straight] = scene[: length - straight]


@numba.njit(**COMPILE)
def _vertex(score, at, bins):
    """Return the place, in bins, of the top of the parabola through the highest bin and its neighbours."""
    before, here, after = score[at - 1], score[at], score[(at + 1) % bins]
    bend = 2.0 * here - before - after
    shift = 0.5 * (after - before) / bend if bend > 0.0 else 0.0
    place = at + 0.5 + min(max(shift, -0.5), 0.5)
    return place - bins * math.floor(place / bins)
