"""A sampler of another kind: one pixel at a time, random-walk Metropolis, for total variation.

The target is written out again here, from its definition: exp(-(data term + weight * sum of
sqrt(a^2 + b^2))) within bounds, a and b the differences to the next row and to the next column.
"""

from __future__ import annotations

import math

import numba
import numpy as np


@numba.njit
def _corner(x, i, j):
    a = x[i + 1, j] - x[i, j] if i + 1 < x.shape[0] else 0.0
    b = x[i, j + 1] - x[i, j] if j + 1 < x.shape[1] else 0.0
    return math.sqrt(a * a + b * b)


@numba.njit
def _around(x, i, j, weight):
    total = _corner(x, i, j)
    if i > 0:
        total += _corner(x, i - 1, j)
    if j > 0:
        total += _corner(x, i, j - 1)
    return weight * total


@numba.njit
def _data(value, datum, background, poisson):
    if not poisson:
        return 0.5 * (value - datum) ** 2
    mean = value + background
    return mean - datum * math.log(mean) if datum > 0.0 else mean


@numba.njit
def _walk(data, background, poisson, weight, low, high, width, burn_in, sweeps, random, batches):
    x = data.copy()
    rows, columns = x.shape
    for i in range(rows):
        for j in range(columns):
            x[i, j] = min(max(x[i, j] - background, low + 0.5), high)
    first, second = np.zeros((batches, rows, columns)), np.zeros((batches, rows, columns))
    length = sweeps // batches
    for sweep in range(burn_in + length * batches):
        for i in range(rows):
            for j in range(columns):
                old = x[i, j]
                new = old + width * random.standard_normal()
                if new < low or new > high:
                    continue
                before = _around(x, i, j, weight) + _data(old, data[i, j], background, poisson)
                x[i, j] = new
                after = _around(x, i, j, weight) + _data(new, data[i, j], background, poisson)
                if math.log(random.random()) >= before - after:
                    x[i, j] = old
        # A step of the whole image at once carries what single pixels carry slowly.
        shift = 3.0 * width / math.sqrt(rows * columns) * random.standard_normal()
        change, inside = 0.0, True
        for i in range(rows):
            for j in range(columns):
                new = x[i, j] + shift
                inside = inside and low <= new <= high
                if inside:
                    change += _data(new, data[i, j], background, poisson)
                    change -= _data(x[i, j], data[i, j], background, poisson)
        if inside and math.log(random.random()) < -change:
            x += shift
        if sweep >= burn_in:
            batch = (sweep - burn_in) // length
            first[batch] += x / length
            second[batch] += x * x / length
    return first, second


def reference(
    data: np.ndarray,
    weight: float,
    bounds: tuple[float, float],
    sweeps: int,
    seed: int,
    background: float | None = None,
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return posterior mean, standard deviation and the error of the mean (from 20 batches).

    background: None for Gaussian readings of unit variance, else that of Poisson counts.
    """
    random = np.random.default_rng(seed)
    first, second = _walk(
        data.astype(np.float64), background or 0.0, background is not None, weight, *bounds, 0.8,
        sweeps // 10, sweeps, random, 20,
    )  # fmt: skip
    mean = first.mean(axis=0)
    return mean, np.sqrt(second.mean(axis=0) - mean**2), first.std(axis=0, ddof=1) / np.sqrt(20)


def scene(size: int = 16) -> np.ndarray:
    """Return a disc on a flat ground, 2 on average."""
    i, j = np.mgrid[:size, :size] / size
    image = 1.0 + ((i - 0.5) ** 2 + (j - 0.4) ** 2 < 0.08)
    return 2.0 * image / image.mean()
