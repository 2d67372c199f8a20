"""Compiling kernels beside other work.

The first run after installing compiles every kernel it needs, on one core. A second process compiles
meanwhile, into the cache on disk that both share, beginning at the end.
"""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager

# What the demo comes to need last, first: two processes that went the same way would compile the same.
_LATER = """
import numpy as np
import priors
import recon
flat = np.full((16, 16), 2.0, np.float32)
frames = recon.Frames(np.random.default_rng(0).poisson(0.3, (30, 16, 16)), 0.125)
marks = recon.likelihoods.PoissonMarks(frames)
marks.majorise(marks.estimate()), marks.value(marks.estimate()), marks.fisher_information(flat)
readings = recon.likelihoods.Gaussian(flat, 1.0)
recon.solve(recon.Problem(readings, priors.GeneralizedVariation(1.0), (0.0, 4.0)), max_iterations=50)
row, column = (place.ravel() for place in np.mgrid[:16, :16])
pulse = recon.GaussianPulse(3e-10)
tags = recon.TimeTags(
    row, column, np.full(256, 1e-8), shape=(16, 16), trials=10, period=1e-7, pulse=pulse,
    gain=0.05, background=0.05,
)
times = recon.likelihoods.DetectionTimes(tags, flat)
times.gated(flat, 0.2), times.signal_tags(flat), times.majorise(flat), times.value(flat)
times.fisher_information(flat)
from recon.imaging.depth import depth_belief
depth_belief(times)
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
