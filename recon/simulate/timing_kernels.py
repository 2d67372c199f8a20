"""Compiled walk of a detector through its photons, one by one in the order of their arrival."""

from __future__ import annotations

import numba
import numpy as np
from numba import prange

from recon.kernels import COMPILE


@numba.njit(**COMPILE)
def by_pixel(pixel, pixels):
    """Return the order that lists photons pixel by pixel, and where each pixel starts in it."""
    start = np.zeros(pixels + 1, np.int64)
    for p in pixel:
        start[p + 1] += 1
    for p in range(pixels):
        start[p + 1] += start[p]
    order = np.empty(pixel.size, np.int64)
    free = start[:-1].copy()
    for i in range(pixel.size):
        order[free[pixel[i]]] = i
        free[pixel[i]] += 1
    return order, start


@numba.njit(parallel=True, **COMPILE)
def walk(order, start, turn, time, period, detector, electronics, reset):
    """Put every pixel's photons in order of arrival; return which of that order are recorded.

    turn: number of the period a photon comes in; time: s within it. detector, electronics: dead times
    in s. reset: both are armed again when a period starts.
    """
    recorded = np.zeros(order.size, np.bool_)
    for p in prange(start.size - 1):
        here = order[start[p] : start[p + 1]]
        moment = np.empty(here.size)
        for i in range(here.size):
            moment[i] = turn[here[i]] * period + time[here[i]]
        here[:] = here[np.argsort(moment)]
        fired = -1  # photon that last made the detector answer
        clocked = -1  # photon last recorded
        for i in range(here.size):
            photon = here[i]
            if fired >= 0 and not (reset and turn[photon] > turn[fired]):
                # periods and times apart, so that long exposures lose no digits
                gap = (turn[photon] - turn[fired]) * period + (time[photon] - time[fired])
                if gap < detector:
                    continue
            fired = photon
            if clocked >= 0 and not (reset and turn[photon] > turn[clocked]):
                gap = (turn[photon] - turn[clocked]) * period + (time[photon] - time[clocked])
                if gap < electronics:
                    continue
            clocked = photon
            recorded[start[p] + i] = True
    return recorded
