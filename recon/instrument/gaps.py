"""The dead time that a record of detections shows."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.acquisition import DeadTime
from recon.errors import InputError
from recon.validation import real_values

CHANCE = 1e-3  # below which a statement is made


def shortest_gap(moments: ArrayLike) -> float:
    """Shortest time in s between two detections: no less than the dead time, and near it in a long record.

    moments: (detections,), two or more, absolute s of the detections of one detector, in any order.
    What is seen is the longer of the dead times of detector and electronics. Raises InputError.
    """
    return float(_gaps(moments).min())


def exceeds_declared(moments: ArrayLike, dead_time: DeadTime) -> str:
    """A sentence if the record shows a longer dead time than declared; empty if not.

    moments: (detections,), absolute s of the detections of one free-running detector in steady light
        (pulsed light leaves gaps of its own), in any order.

    Were `dead_time.blind` right, the N gaps beyond it would be exponential, and the shortest of them
    above the share r of their sum with chance (1 - N r)^(N - 1) (the law of the spacings of random
    points; Fisher 1929). The sentence comes where that chance is below 1e-3. Raises InputError.
    """
    if not isinstance(dead_time, DeadTime):
        raise InputError(f"dead_time is {type(dead_time).__name__}; give a DeadTime.")
    gaps = _gaps(moments)
    beyond = gaps - dead_time.blind
    if beyond.min() <= 0 or (1 - beyond.min() / beyond.mean()) ** (gaps.size - 1) >= CHANCE:
        return ""
    return (
        f"The shortest of {gaps.size} gaps between detections is {gaps.min():.4g} s, too long for the "
        f"declared dead time of {dead_time.blind:.4g} s; declare the longer one."
    )


def _gaps(moments: ArrayLike) -> NDArray[np.float64]:
    values = real_values(moments, "moments").astype(np.float64)
    if values.ndim != 1 or values.size < 2:
        raise InputError(f"moments has shape {values.shape}; give a list of two detections or more.")
    return np.diff(np.sort(values))
