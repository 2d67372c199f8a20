"""Lone bright pixels: counts that the law all but excludes, and that no neighbour shares."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from recon.fit.count_laws import CountLaw, WaitingLaw, count_law
from recon.likelihoods.contract import Likelihood
from recon.weights.scoring import lifted

RARE = 1e-3  # chance of as much or more, below which a pixel is bright
RATHER_RARE = 0.02  # the same of pixels that are left out to see whether the others scatter, too
DARKEST = 0.05  # of the mean of an image: no pixel is taken to be darker where single pixels are judged
FAR = 1.0  # standard deviations above the mean, below which no tail is worked out


def lone_pixels(likelihood: Likelihood, x: np.ndarray, rare: float = RARE) -> np.ndarray:
    """Return the map of pixels brighter than the law allows whose four neighbours are not.

    A pixel is bright if the chance of as much light or more is below `rare`, at the image with its peaks of a
    single pixel cut: a fit follows a hot pixel. Its neighbours speak against a fault of the pixel if they,
    together, hold more than their mean by two standard deviations: the scene is brighter there. None
    where the law has no closed form.
    """
    shown = likelihood.has_data
    law = count_law(likelihood, without_peaks(x))
    bright = np.zeros(shown.shape, bool)
    if law is None:
        return bright
    suspects = shown if isinstance(law, WaitingLaw) else _suspects(law, shown)
    bright[suspects] = law.tails(suspects)[1] < rare
    if isinstance(law, WaitingLaw):  # fewer trials are more light, and one is the least: what lies
        return bright  # around a pixel cannot be told from its sum of trials
    excess = _around(np.where(shown, law.number - law.mean, 0.0))
    noise = _around(np.where(shown, law.variance, 0.0))
    return bright & (excess <= 2.0 * np.sqrt(noise) + 1.0)


@dataclass(frozen=True)
class Brightest:
    """The lone bright pixel that the law allows least.

    row, column: where it is. number, mean, variance: what it holds and its law, at the image without peaks.
    chance: of as much light or more in any of all pixels, by Bonferroni's bound.
    """

    row: int
    column: int
    number: float
    mean: float
    variance: float
    chance: float


def brightest_lone(likelihood: Likelihood, x: np.ndarray, lone: np.ndarray) -> Brightest | None:
    """Return the least likely of the lone bright pixels; None without any, or without a law of single pixels.

    lone: those of `lone_pixels`. Dark regions count as `DARKEST`: a fit makes them zero, where a single
    detection would be too much.
    """
    law = count_law(likelihood, lifted(without_peaks(x), likelihood, DARKEST))
    if law is None or isinstance(law, WaitingLaw) or not lone.any():
        return None
    tails = law.tails(lone)[1]
    row, column = (int(axis[np.argmin(tails)]) for axis in np.nonzero(lone))
    number, mean, variance = (float(of[row, column]) for of in (law.number, law.mean, law.variance))
    chance = min(1.0, float(tails.min()) * int(np.count_nonzero(likelihood.has_data)))
    return Brightest(row, column, number, mean, variance, chance)


def without_peaks(x: np.ndarray) -> np.ndarray:
    """Return the image, no pixel above the largest of its eight neighbours."""
    x = np.asarray(x, np.float64)
    rows, columns = x.shape
    padded = np.pad(x, 1, constant_values=-np.inf)
    largest = np.full(x.shape, -np.inf)
    for i in range(3):
        for j in range(3):
            if (i, j) != (1, 1):
                np.maximum(largest, padded[i : i + rows, j : j + columns], out=largest)
    return np.where(np.isfinite(largest), np.minimum(x, largest), x)


def _suspects(law: CountLaw, shown: np.ndarray) -> np.ndarray:
    return shown & (law.number > law.mean + FAR * np.sqrt(law.variance))


def _around(values: np.ndarray) -> np.ndarray:
    """Return the sum over the four neighbours."""
    out = np.zeros(values.shape)
    out[1:] += values[:-1]
    out[:-1] += values[1:]
    out[:, 1:] += values[:, :-1]
    out[:, :-1] += values[:, 1:]
    return out
