"""Compiling kernels beside other work.

The first run after installing compiles every kernel it needs, on one core. What a later acquisition needs
is compiled by a second process meanwhile, into the cache on disk that both share.
"""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager

# In the order in which the demo comes to need them, less what it begins with itself.
_LATER = """
import numpy as np
import recon
from recon.imaging.depth import depth_belief
flat = np.full((16, 16), 2.0)
tags = recon.simulate.time_tags(flat, flat, 10, 1e-7, recon.GaussianPulse(3e-10), 0.05, 0.05, seed=0)
times = recon.likelihoods.DetectionTimes(tags, flat.astype(np.float32))
start = depth_belief(times).depth
times.value(start), times.fisher_information(start), times.majorise(start), times.signal_tags(start)
times.gated(start, 0.2)
frames = recon.simulate.frames(flat, 0.125, 30, seed=0)
marks = recon.likelihoods.PoissonMarks(frames)
marks.majorise(marks.estimate()), marks.value(marks.estimate())
recon.reconstruct(frames)
"""


@contextmanager
def compiling_ahead() -> Iterator[None]:
    """Compile the kernels of depth and yield in a process that ends with the block at the latest."""
    process = subprocess.Popen(
        [sys.executable, "-c", _LATER],
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
