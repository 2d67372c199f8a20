"""Draws acquisitions from known images, particle by particle.

The source of truth of the tests: photons, primaries and electrons are drawn one process at a time, and
no formula is shared with the likelihoods.
"""

from recon.simulate.beam import frames
from recon.simulate.beam_faults import flicker
from recon.simulate.counting import counts
from recon.simulate.timing import time_tags

__all__ = ["counts", "flicker", "frames", "time_tags"]
