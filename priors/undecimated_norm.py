"""An upper bound of the squared norm of the undecimated wavelet transform."""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from priors.undecimated import Undecimated
from priors.undecimated_block import Passes

STEPS = 40
MARGIN = 1.05
LEAST = 1e-3
"""Of a single pixel, which has no details but rounding."""
ENOUGH = 64
"""Pixels beyond the filters' reach at which one border no longer feels the other."""


def bound(transform: Undecimated) -> float:
    """Return the bound, by power iteration and a margin for its last few per cent.

    What raises the norm above one happens at the border: a small image stands for a large one. No pixel
    stands more than twice in a row mirrored to twice its length, a circle on which the frame is tight;
    so the norm is at most 2 for rows and 2 for columns.
    """
    reach = transform.rows.size - transform.shape[0]
    shape = tuple(min(n, reach + ENOUGH) for n in transform.shape)
    norm = _power_iteration(shape, transform.wavelet, transform.levels)
    return min(4.0, max(LEAST, MARGIN * norm))


@lru_cache(maxsize=64)
def _power_iteration(shape: tuple[int, int], wavelet: str, levels: int) -> float:
    transform = Undecimated(shape, wavelet, levels)
    passes = Passes(transform)
    details = np.empty((levels, 3, *shape), np.float32)
    unlimited = np.full((levels, 3), np.inf, np.float32)
    x = np.random.default_rng(0).standard_normal(shape, np.float32)
    norm = 1.0
    for _ in range(STEPS):
        x /= norm
        details[...] = 0.0
        passes.analyse(x, details, 1.0, 1.0, unlimited)
        passes.synthesise(details, x, True)
        norm = float(np.linalg.norm(x)) or 1.0
    return norm
