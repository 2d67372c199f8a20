"""The compiled pass that writes what a pixel's own tags say about each of its bins of depth."""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE

LEAST = np.float32(1e-30)
FULL = np.float32(80.0)  # exponents beyond it are of bins that are not listed


@numba.njit(parallel=True, **COMPILE)
def evidence(
    begin, phase, start, kind, trust, table, signal, edge, level, edges, pulse, shift, width, first, bins,
    likely, absent,
):  # fmt: skip
    """Write, for every bin of a pixel's list, the likelihood of its tags there, and that of no target.

    begin, phase: (tags,), first finest bin of a tag's table and the place of the tag within its bin; those of
        pixel q at start[q] to start[q + 1].
    kind, trust: (pixels,) int32 and float32; kind -1 = the tags tell nothing.
    table: (kinds, phases, length) float32, log(1 + p / noise) for a tag against the bins from `begin` on.
    signal: (pixels,), the signal detections expected if the target is there, times trust.
    edge, level, edges: (m; share of the trials lost; (pixels + 1,)), the live exposure; no edge = all of it.
    pulse: (taps,) float32, the pulse's masses on the finest bins, about its middle.
    shift: log2 of the finest bins in a bin of the list. width: m, of the finest.
    first: see `DepthBelief`. bins: its place, and how many finest bins there are. likely: (entries,),
    absent: (pixels,) float32, both over the largest that is listed.

    likely = the mean over the bin of exp(sum over tags of trust log(1 + p / noise) + signal lost) and
    absent = exp(signal).
    """
    place, finest = bins
    length = table.shape[2]
    split = 1 << shift
    coarse = -(-finest // split)
    for chunk in prange(64):
        score = np.zeros(finest + length, np.float32)
        lost = np.empty(finest, np.float32)
        total = np.zeros(coarse, np.float32)
        listed = np.zeros(coarse, np.bool_)
        last = (chunk + 1) * kind.size // 64
        for q in range(chunk * kind.size // 64, last):
            lo, hi = first[q], first[q + 1]
            tags = 0 if kind[q] < 0 else start[q + 1] - start[q]
            live = edges[q + 1] > edges[q] and signal[q] > 0.0
            dense = live or tags * length > finest
            for e in range(lo, hi):
                listed[place[e]] = True
            top = signal[q]
            for k in range(start[q], start[q] + tags):
                run = table[kind[q], phase[k]]
                for m in range(length):
                    score[begin[k] + m] += trust[q] * run[m]
            if tags:
                for m in range(length):  # what reached over the period's end
                    score[m] += score[finest + m]
                    score[finest + m] = 0.0
            if live:
                _losses(edge[edges[q] : edges[q + 1]], level[edges[q] : edges[q + 1]], width, pulse, lost)
                for m in range(finest):
                    score[m] += signal[q] * lost[m]
            if dense:
                for m in range(finest):
                    if listed[m >> shift]:
                        top = max(top, score[m])
            elif tags:
                for k in range(start[q], start[q] + tags):
                    for n in range(begin[k], begin[k] + length):
                        m = n if n < finest else n - finest
                        if listed[m >> shift]:
                            top = max(top, score[m])
            for e in range(lo, hi):
                listed[place[e]] = False
            flat = math.exp(-top)
            absent[q] = max(math.exp(signal[q] - top), LEAST)
            if not live and not tags:
                likely[lo:hi] = max(flat, LEAST)
                continue
            if dense:
                for m in range(finest):
                    total[m >> shift] += math.exp(min(score[m] - top, FULL)) - flat
                    score[m] = 0.0
            else:
                for k in range(start[q], start[q] + tags):
                    for n in range(begin[k], begin[k] + length):
                        m = n if n < finest else n - finest
                        if score[m] != 0.0:
                            total[m >> shift] += math.exp(min(score[m] - top, FULL)) - flat
                            score[m] = 0.0
            for e in range(lo, hi):
                size = min(split, finest - place[e] * split)
                likely[e] = max(flat + total[place[e]] / size, LEAST)
            if dense:
                total[:] = 0.0
            else:
                for k in range(start[q], start[q] + tags):
                    for n in range(begin[k], begin[k] + length):
                        total[(n if n < finest else n - finest) >> shift] = 0.0


@numba.njit(**COMPILE)
def _losses(edge, level, width, pulse, lost):
    """Write the share of the trials that a pulse at the middle of each finest bin loses."""
    bins, m = lost.size, edge.size
    mean = np.empty(bins)
    k, now, at = 0, level[m - 1], 0.0
    for b in range(bins):
        end = (b + 1) * width
        total = 0.0
        while k < m and edge[k] < end:
            total += now * (edge[k] - at)
            at, now = edge[k], level[k]
            k += 1
        mean[b] = (total + now * (end - at)) / width
        at = end
    half = pulse.size // 2
    for b in range(bins):
        total = 0.0
        for t in range(pulse.size):
            n = b + t - half
            total += pulse[t] * mean[n % bins]
        lost[b] = total
