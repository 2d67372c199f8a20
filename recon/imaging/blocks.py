"""Sums over blocks of pixels, which are taken as independent where neighbours may not be."""

from __future__ import annotations

import numpy as np

SIDE = 8  # pixels


def sum_with_error(image: np.ndarray) -> tuple[float, float]:
    """Return the sum of a map and its standard error, from its blocks of 8 x 8 pixels."""
    blocks = image
    for axis in (0, 1):
        blocks = np.add.reduceat(blocks, np.arange(0, blocks.shape[axis], SIDE), axis=axis)
    number = max(blocks.size, 2)
    spread = float(np.sum((blocks - blocks.mean()) ** 2)) * number / (number - 1)
    return float(image.sum()), float(np.sqrt(spread))
