"""What the compiled kernels of the engine share."""

from __future__ import annotations

import os
from typing import Any

# Threads that wait by spinning slow a loaded machine down tenfold; read when the thread pool first starts.
os.environ.setdefault("OMP_WAIT_POLICY", "PASSIVE")

import numba
import numpy as np
from numba import prange

# Sums may be reordered and contracted for speed; infinities and NaN keep their meaning.
COMPILE: dict[str, Any] = {
    "cache": True,
    "error_model": "numpy",
    "fastmath": {"contract", "reassoc", "nsz", "arcp"},
}


@numba.njit(inline="always", **COMPILE)
def row(image, i):
    """Return row i of a map; a setting that is the same in every row is kept as a single row."""
    return image[0] if image.shape[0] == 1 else image[i]


def as_rows(setting: float | np.ndarray, shape: tuple[int, int]) -> np.ndarray:
    """Return a setting as float32 rows for a kernel: the whole map, or one row of a constant."""
    array = np.asarray(setting, dtype=np.float32)
    return np.full((1, shape[1]), array, np.float32) if array.ndim == 0 else np.ascontiguousarray(array)


@numba.njit(parallel=True, **COMPILE)
def squared_distance(a, b):
    """Return the sum of (a - b)^2 over two images, in float64."""
    sums = np.zeros(a.shape[0])
    for i in prange(a.shape[0]):
        total = 0.0
        for j in range(a.shape[1]):
            difference = np.float64(a[i, j]) - np.float64(b[i, j])
            total += difference * difference
        sums[i] = total
    return sums.sum()
