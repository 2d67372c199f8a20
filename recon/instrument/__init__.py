"""Plan, check and calibrate an instrument."""

from recon.instrument.dead_time import (
    count_variance,
    non_paralysable_rate,
    paralysable_rate,
    true_rate,
    two_source_dead_time,
)
from recon.instrument.exposure import live_exposure
from recon.instrument.forecast import forecast
from recon.instrument.gaps import exceeds_declared, shortest_gap
from recon.instrument.pile_up import best_on_off_flux, first_photon_walk, pile_up_correction

__all__ = [
    "best_on_off_flux",
    "count_variance",
    "exceeds_declared",
    "first_photon_walk",
    "forecast",
    "live_exposure",
    "non_paralysable_rate",
    "paralysable_rate",
    "pile_up_correction",
    "shortest_gap",
    "true_rate",
    "two_source_dead_time",
]
