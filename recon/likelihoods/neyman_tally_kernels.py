"""Compiled passes over a stack of frames that make its tally (see `frame_tally`).

counts: (frames, rows, columns); usable: boolean map. Maps of pixels are written flat.
"""

from __future__ import annotations

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE


@numba.njit(parallel=True, **COMPILE)
def count_all(counts, usable, values, shown, pairs, empty, electrons):
    """Write shown[i, y, j], the frames in which pixel (i, j) shows y > 0, and the sums over y of each pixel.

    values: 0, 1, .., the largest count, in the type of counts; shown: (rows, values, columns), zeros.
    Every line is compared with every value: many comparisons, but a vector of them at a time.
    """
    frames, rows, columns = counts.shape
    fours = frames - frames % 4
    one, zero = shown.dtype.type(1), shown.dtype.type(0)
    for i in prange(rows):
        for f in range(0, fours, 4):
            a, b, c, d = counts[f, i], counts[f + 1, i], counts[f + 2, i], counts[f + 3, i]
            for n in range(1, values.size):
                y, line = values[n], shown[i, n]
                for j in range(columns):
                    line[j] += (
                        (one if a[j] == y else zero)
                        + (one if b[j] == y else zero)
                        + (one if c[j] == y else zero)
                        + (one if d[j] == y else zero)
                    )
        for f in range(fours, frames):
            a = counts[f, i]
            for n in range(1, values.size):
                for j in range(columns):
                    shown[i, n, j] += one if a[j] == values[n] else zero
        for j in range(columns):
            pixel = i * columns + j
            if usable[i, j]:
                kinds, hit, total = 0, 0, 0
                for n in range(1, values.size):
                    times = np.int64(shown[i, n, j])
                    kinds += times > 0
                    hit += times
                    total += n * times
                pairs[pixel], empty[pixel], electrons[pixel] = kinds, frames - hit, total


@numba.njit(parallel=True, **COMPILE)
def write_all(shown, start, count, times):
    """Write the pairs of every pixel from its start on."""
    rows, values, columns = shown.shape
    for i in prange(rows):
        for j in range(columns):
            pair, end = start[i * columns + j], start[i * columns + j + 1]
            for y in range(1, values):
                if pair < end:
                    count[pair] = y
                    times[pair] = shown[i, y, j]
                    pair += shown[i, y, j] > 0


@numba.njit(parallel=True, **COMPILE)
def pairs(counts, largest, usable, factors, kinds, order, start, count, times, kind, empty, electrons):
    """Write the pairs of each usable pixel from its start on; given nowhere to write, write their number.

    factors, kinds: (frames, rows), the dose of each line and its class; order: (rows, frames), the frames
    by class. With one class kinds and order are empty, and factors is 1.
    """
    frames, rows, columns = counts.shape
    one = kinds.size == 0
    for i in prange(rows):
        hits = np.empty((columns, frames + 1), counts.dtype)
        frame = np.empty((1 if one else columns, frames + 1), np.int32)
        number = np.zeros(columns, np.int64)
        if one:
            for f in range(frames):
                for j in range(columns):  # only counts above zero advance: no branch to mispredict
                    hits[j, number[j]] = counts[f, i, j]
                    number[j] += counts[f, i, j] > 0
        else:
            for n in range(frames):
                f = order[i, n]
                for j in range(columns):
                    hits[j, number[j]] = counts[f, i, j]
                    frame[j, number[j]] = f
                    number[j] += counts[f, i, j] > 0
        every = 0.0
        for f in range(frames):
            every += 1.0 if one else factors[f, i]
        shown = np.zeros(largest + 1, np.uint32)
        different = np.empty(frames, np.int64)
        for j in range(columns):
            if not usable[i, j]:
                continue
            pixel = i * columns + j
            written, total, lit = 0, 0, 0.0
            first = 0
            while first < number[j]:  # the hits of one class
                this = 0 if one else kinds[frame[j, first], i]
                fresh, n = 0, first
                while n < number[j] and (one or kinds[frame[j, n], i] == this):
                    y = hits[j, n]
                    if shown[y] == 0:
                        different[fresh] = y
                        fresh += 1
                    shown[y] += 1
                    total += y
                    lit += 1.0 if one else factors[frame[j, n], i]
                    n += 1
                first = n
                for m in range(fresh):
                    if count.size:
                        pair = start[pixel] + written + m
                        count[pair] = different[m]
                        times[pair] = shown[different[m]]
                        if kind.size:
                            kind[pair] = this
                    shown[different[m]] = 0
                written += fresh
            if count.size == 0:
                start[pixel] = written
                electrons[pixel] = total
                empty[pixel] = 0.0 if number[j] == frames else max(every - lit, 0.0)
