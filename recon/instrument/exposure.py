"""The exposure in which a detector with a dead time could respond, from its own histogram."""

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.acquisition import DeadTime
from recon.errors import InputError
from recon.validation import DURATION, NONNEGATIVE, number, real_values


def live_exposure(
    histogram: ArrayLike, periods: ArrayLike, bin_width: float, dead_time: DeadTime
) -> NDArray[np.float64]:
    """Periods in which the detector could respond, bin by bin: (..., bins).

    E_b = periods - sum over b' of histogram_b' * (times that the dead window of a detection in b' covers b)

    histogram: (..., bins), detections; the bins cover the whole period. periods: a number or (...).
    bin_width: s. dead_time: DeadTime.

    The window starts anywhere in the bin of its detection alike, so that it covers half of that bin, and
    parts of two at its end. Free-running, it goes on into the next period, and once more over all bins
    for every period that fits into it; with `reset_every_period` it ends with the period at the latest.
    The detections that could have come are then Poisson, E_b times the expected detections per bin and
    period. The bins are to be so fine that a period expects few detections in one, lam: the relative
    error is near lam^2 / 12. Never below 0, though chance may take the sum there.

    A non-paralysable detector is dead at most once at a time, which makes this exact (renewal theory; Cox
    1962). Windows of before the first period, or running on after the last, are one window's worth of error.
    Raises InputError.
    """
    counts, periods = histogram_and_periods(histogram, periods)
    blind = blind_bins(bin_width, dead_time)
    covered = _covered(counts, blind, dead_time.reset_every_period)
    return np.maximum(periods[..., None] - covered, 0.0)


def cover(blind: float) -> NDArray[np.float64]:
    """Expected share of bin b + j that a window of `blind` bins covers, from anywhere in bin b alike.

    j = 0, 1, ..., floor(blind) + 1.
    """
    edges = np.arange(math.floor(blind) + 3, dtype=np.float64)
    return np.diff(_before(edges) - _before(edges - blind))


def blind_bins(bin_width: float, dead_time: DeadTime) -> float:
    """The blind time in bins."""
    if not isinstance(dead_time, DeadTime):
        raise InputError(f"dead_time is {type(dead_time).__name__}; give a DeadTime.")
    return dead_time.blind / number(bin_width, "bin_width", DURATION)


def histogram_and_periods(
    histogram: ArrayLike, periods: ArrayLike
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """(..., bins) and (...), checked."""
    counts = real_values(histogram, "histogram", NONNEGATIVE).astype(np.float64, copy=False)
    if counts.ndim == 0:
        raise InputError("histogram is one number; give the bins of a period, (..., bins).")
    periods = real_values(periods, "periods", NONNEGATIVE).astype(np.float64, copy=False)
    if periods.ndim and periods.shape != counts.shape[:-1]:
        raise InputError(
            f"periods has shape {periods.shape}; give one number or the shape {counts.shape[:-1]}."
        )
    return counts, np.broadcast_to(periods, counts.shape[:-1])


def _before(edge: NDArray[np.float64]) -> NDArray[np.float64]:
    """Expected length of what lies between a place anywhere in [0, 1] and the edge after it."""
    return np.where(edge <= 1, np.clip(edge, 0, 1) ** 2 / 2, edge - 0.5)


def _covered(counts: NDArray[np.float64], blind: float, reset: bool) -> NDArray[np.float64]:
    """How many dead windows cover each bin."""
    bins = counts.shape[-1]
    turns, rest = (0, min(blind, float(bins))) if reset else divmod(blind, bins)
    share = cover(rest)
    last = share.size - 1  # bins back from which a window may still reach
    before = np.zeros((*counts.shape[:-1], last)) if reset else counts[..., np.arange(-last, 0) % bins]
    row = np.concatenate([before, counts], axis=-1)
    total = turns * counts.sum(axis=-1, keepdims=True)
    for back in {0, last - 1, last}:
        total = total + share[back] * row[..., last - back : last - back + bins]
    if last > 2:  # the bins between, which a window covers whole
        sums = np.cumsum(np.concatenate([np.zeros((*row.shape[:-1], 1)), row], axis=-1), axis=-1)
        total = total + sums[..., last : last + bins] - sums[..., 2 : 2 + bins]
    return total
