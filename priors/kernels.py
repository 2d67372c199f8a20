"""What the compiled kernels of the priors share: compile options and bands of rows."""

from __future__ import annotations

import os
from typing import Any

# Threads that wait by spinning slow a loaded machine down tenfold; read when the thread pool first starts.
os.environ.setdefault("OMP_WAIT_POLICY", "PASSIVE")

import numba

# Sums may be reordered and contracted for speed; infinities and NaN keep their meaning.
COMPILE: dict[str, Any] = {
    "cache": True,
    "error_model": "numpy",
    "fastmath": {"contract", "reassoc", "nsz", "arcp"},
}


@numba.njit(inline="always", **COMPILE)
def row(image, i):
    """Return row i of a map; a coefficient that is the same in every row is kept as a single row."""
    return image[0] if image.shape[0] == 1 else image[i]


def bands(rows: int) -> int:
    """Return into how many bands of rows a kernel splits an image: one a thread, at least 8 rows each."""
    return max(1, min(numba.get_num_threads(), rows // 8))
