"""What an instrument recorded, with its settings: validated once, immutable."""

from recon.acquisition.counts import Counts
from recon.acquisition.dead_time import DeadTime
from recon.acquisition.frames import Frames
from recon.acquisition.mark_law import MarkLaw
from recon.acquisition.pulses import GaussianPulse, SampledPulse
from recon.acquisition.time_histogram import TimeHistogram
from recon.acquisition.time_tags import TimeTags

__all__ = [
    "Counts",
    "DeadTime",
    "Frames",
    "GaussianPulse",
    "MarkLaw",
    "SampledPulse",
    "TimeHistogram",
    "TimeTags",
]
