"""Compiled pass over frames: what every line of every frame says about its primaries and its yield."""

from __future__ import annotations

import math

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE, row
from recon.likelihoods.neyman import law, posterior


@numba.njit(parallel=True, **COMPILE)
def line_scores(counts, eta, dose, usable, factors, table, score, information):
    """Write the score and the observed information of every line of every frame.

    Parameters: u = log of the line's dose, v = log of its yield. With the expected primaries E = E[M|y] and
    their variance V = Var[M|y], a pixel adds E - lam and y - eta E to the scores, and to the information
    (less the second derivatives) uu = lam - V, uv = eta V, vv = eta E - eta^2 V.

    counts: (frames, rows, columns); eta: (rows, columns), above zero; dose: (rows or 1, columns);
    factors: (frames, rows); score: (frames, rows, 2); information: (frames, rows, 3) for uu, uv, vv.
    Frames without electrons have E = V = lam exp(-eta): their sums over a line are taken once.
    """
    frames, rows, columns = counts.shape
    for i in prange(rows):
        lam = row(dose, i)
        left = np.empty(columns)
        none = np.zeros(5)
        for j in range(columns):
            if usable[i, j]:
                x = eta[i, j]
                a = lam[j] * math.exp(-x)
                left[j] = a
                none[0] += a - lam[j]
                none[1] -= x * a
                none[2] += lam[j] - a
                none[3] += x * a
                none[4] += x * a * (1.0 - x)
        for f in range(frames):
            factor = np.float64(factors[f, i])
            u, v = factor * none[0], factor * none[1]
            uu, uv, vv = factor * none[2], factor * none[3], factor * none[4]
            for j in range(columns):
                y = np.int64(counts[f, i, j])
                if y > 0 and usable[i, j]:
                    x = eta[i, j]
                    a = factor * left[j]
                    _, mean, variance = posterior(y, law(factor * lam[j], x), table)
                    u += mean - a
                    v += y - x * (mean - a)
                    uu -= variance - a
                    uv += x * (variance - a)
                    vv += x * (mean - a) - x * x * (variance - a)
            score[f, i, 0], score[f, i, 1] = u, v
            information[f, i, 0], information[f, i, 1], information[f, i, 2] = uu, uv, vv
