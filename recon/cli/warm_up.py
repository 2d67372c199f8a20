"""Compiling kernels beside other work.

The first run after installing compiles every kernel it needs, on one core. What a later acquisition needs
is compiled by a second process meanwhile, into the cache on disk that both share.
"""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager

_FRAMES = """
import numpy as np
import recon
recon.reconstruct(recon.simulate.frames(np.full((16, 16), 2.0), 0.125, 30, seed=0))
"""


@contextmanager
def compiling_for_frames() -> Iterator[None]:
    """Compile what frames need in a process of its own, which ends with the block at the latest."""
    process = subprocess.Popen(
        [sys.executable, "-c", _FRAMES],
        stdin=subprocess.DEVNULL,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
    )
    try:
        yield
    finally:
        if process.poll() is None:
            process.terminate()
        process.wait()
