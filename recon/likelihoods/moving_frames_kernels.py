"""Compiled passes for frames that have moved: what they say about the image at rest.

A class holds the frames of one shift: whole = (down, right), part = (v, h), so that pixel (i, j) of a frame
sees the four image pixels from (i + down, j + right) on, with the weights (1 - v, v) x (1 - h, h). Maps have
a row and a column more than the image, which only ever take the weight zero.
"""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE, row
from recon.likelihoods.neyman import law, posterior

CHUNKS = 8  # maps that are filled side by side and added up at the end


@numba.njit(inline="always", **COMPILE)
def window(whole, part, size):
    """Return the range of a frame's rows or columns that see inside the image alone."""
    return max(0, -whole), min(size, size - whole - (1 if part > 0.0 else 0))


@numba.njit(**COMPILE)
def find(counts, usable, dose, factors, whole, part, kind, place, frame, count, lam):
    """Write the entries above zero, or, given nowhere to write, return their number.

    place: of the first image pixel seen, in rows of columns + 1; frame: its class; lam: the dose.
    """
    frames, rows, columns = counts.shape
    n = 0
    for f in range(frames):
        c = kind[f]
        top, bottom = window(whole[c, 0], part[c, 0], rows)
        left, end = window(whole[c, 1], part[c, 1], columns)
        for i in range(top, bottom):
            for j in range(left, end):
                y = counts[f, i, j]
                if y > 0 and usable[i, j]:
                    if place.size:
                        place[n] = (i + whole[c, 0]) * (columns + 1) + j + whole[c, 1]
                        frame[n] = c
                        count[n] = y
                        lam[n] = row(dose, i)[j] * factors[f, i]
                    n += 1
    return n


@numba.njit(parallel=True, **COMPILE)
def exposures(usable, dose, total, whole, part, out):
    """Write the expected primaries that see each pixel, and their sum weighted by the square of the weight.

    total: (classes, rows), the sum of the factors of the frames of a class. out: (CHUNKS, 2, ...) zeros.
    """
    rows, columns = usable.shape
    for chunk in prange(CHUNKS):
        for c in range(chunk, len(total), CHUNKS):
            v, h = part[c, 0], part[c, 1]
            top, bottom = window(whole[c, 0], v, rows)
            left, end = window(whole[c, 1], h, columns)
            for i in range(top, bottom):
                lam = row(dose, i)
                for j in range(left, end):
                    if usable[i, j]:
                        a, b = i + whole[c, 0], j + whole[c, 1]
                        for k in range(4):
                            w = (v if k > 1 else 1.0 - v) * (h if k % 2 else 1.0 - h)
                            out[chunk, 0, a + k // 2, b + k % 2] += w * lam[j] * total[c, i]
                            out[chunk, 1, a + k // 2, b + k % 2] += w * w * lam[j] * total[c, i]


@numba.njit(parallel=True, **COMPILE)
def every_frame(eta, usable, dose, total, whole, part, place, frame, count, lam, table, out):
    """Add up four maps over all frames; every pixel of a frame gives its four image pixels their share.

    0: log P(y), by weight; 1: the primaries expected given y, by weight; 2: electrons, by weight x yield;
    3: the second derivative of -log P to the pixel.
    eta: (rows + 1, columns + 1), the last ones any; out: (CHUNKS, 4, rows + 1, columns + 1), zeros.
    Entries without electrons have a closed form, and are summed once a class as if all were; the entries
    with electrons then put theirs in place of it.
    """
    rows, columns = usable.shape
    flat = eta.ravel()
    for chunk in prange(CHUNKS):
        maps = out[chunk]
        left_alone = np.empty(columns)
        mean = np.empty(columns)
        for c in range(chunk, len(total), CHUNKS):
            v, h = part[c, 0], part[c, 1]
            top, bottom = window(whole[c, 0], v, rows)
            left, end = window(whole[c, 1], h, columns)
            shift = whole[c, 1]
            for i in range(top, bottom):
                doses = row(dose, i)
                a = i + whole[c, 0]
                for j in range(left, end):
                    b = j + shift
                    upper = (1.0 - h) * eta[a, b] + h * eta[a, b + 1]
                    lower = (1.0 - h) * eta[a + 1, b] + h * eta[a + 1, b + 1]
                    mean[j] = doses[j] * total[c, i] if usable[i, j] else 0.0
                    left_alone[j] = mean[j] * math.exp(-(1.0 - v) * upper - v * lower)
                for k in range(4):
                    w = (v if k > 1 else 1.0 - v) * (h if k % 2 else 1.0 - h)
                    values, primaries = maps[0, a + k // 2], maps[1, a + k // 2]
                    bends = maps[3, a + k // 2]
                    to = shift + k % 2
                    for j in range(left, end):
                        values[j + to] -= w * (mean[j] - left_alone[j])
                        primaries[j + to] += w * left_alone[j]
                        bends[j + to] -= w * w * left_alone[j]
        values, primaries = maps[0].ravel(), maps[1].ravel()
        electrons, bends = maps[2].ravel(), maps[3].ravel()
        events = len(place)
        for n in range(chunk * events // CHUNKS, (chunk + 1) * events // CHUNKS):
            p, c, y = place[n], frame[n], np.float64(count[n])
            v, h = part[c, 0], part[c, 1]
            x = (1.0 - v) * ((1.0 - h) * flat[p] + h * flat[p + 1])
            x += v * ((1.0 - h) * flat[p + columns + 1] + h * flat[p + columns + 2])
            terms = law(np.float64(lam[n]), x)
            logarithm, m, variance = posterior(np.int64(count[n]), terms, table)
            for k in range(4):
                w = (v if k > 1 else 1.0 - v) * (h if k % 2 else 1.0 - h)
                q = p + (k // 2) * (columns + 1) + k % 2
                if w > 0.0:
                    values[q] += w * (logarithm - terms[5])
                    primaries[q] += w * (m - terms[3])
                    electrons[q] += y * w * flat[q] / x
                    bends[q] += w * w * (y / (x * x) - variance + terms[3])
