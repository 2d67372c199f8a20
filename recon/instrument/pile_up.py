"""What recording only the first photon of a period does to a histogram."""

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.errors import InputError
from recon.instrument.exposure import histogram_and_periods
from recon.validation import POSITIVE, first, real_values

LARGEST_MEAN = 1e30  # photons a pulse; the first then comes 11.5 rms early
_Z = np.arange(-2600, 1801) / 200.0  # the trapezium rule on so smooth an integrand is exact to rounding


def pile_up_correction(histogram: ArrayLike, periods: ArrayLike) -> NDArray[np.float64]:
    """Expected detections per period and bin without pile-up, where a period records its first only.

    histogram: (..., bins), N_i. periods: N, a number or (...).
    -ln[1 - N_i / (N - sum over j < i of N_j)] (Coates 1968, J. Phys. E 1:878). Infinite in a bin that
    takes every period left, NaN after it. Raises InputError if a histogram holds more than its periods.
    """
    counts, periods = histogram_and_periods(histogram, periods)
    most = counts.sum(axis=-1)
    bad = most > periods
    if bad.any():
        place = first(bad)
        where = f" at {place}" if place else ""
        raise InputError(
            f"histogram{where} holds {most[place]:g} detections in {periods[place]:g} periods; "
            "give first detections only, at most one a period."
        )
    left = periods[..., None] - np.cumsum(counts, axis=-1) + counts
    with np.errstate(divide="ignore", invalid="ignore"):
        return -np.log1p(-counts / left)


def first_photon_walk(mean_photons: ArrayLike) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """How early the first photon of a Gaussian pulse comes: (mean, mode), in units of the pulse's rms.

    mean_photons: S, detections expected in a pulse without dead time, above 0 and up to 1e30, any shape.

    The first photon, if there is one, has density S phi(z) exp(-S Phi(z)) / (1 - exp(-S)). The mode
    solves z = -S phi(z), which is z = -sqrt(W(S^2 / (2 pi))) with W the Lambert function.
    Raises InputError.
    """
    from scipy.special import lambertw, ndtr

    s = real_values(mean_photons, "mean_photons", POSITIVE).astype(np.float64)
    bad = s > LARGEST_MEAN
    if bad.any():
        place = first(bad)
        where = f" at {place}" if place else ""
        raise InputError(f"mean_photons{where} is {s[place]:g}; give at most {LARGEST_MEAN:g}.")
    each = s[..., None]
    density = np.exp(np.log(each) - _Z**2 / 2 - each * ndtr(_Z)) / math.sqrt(2 * math.pi)
    mean = (_Z * density).sum(axis=-1) * (_Z[1] - _Z[0]) / -np.expm1(-s)
    return mean, -np.sqrt(lambertw(s**2 / (2 * math.pi)).real)


def best_on_off_flux() -> float:
    """Expected detections per trial at which a detector that only says "some" or "none" tells most.

    The variance of the estimated log flux from N trials is (exp(x) - 1) / (N x^2), least at
    x = 2 + W(-2 exp(-2)) = 1.5936, with W the Lambert function (Fisher 1922, the dilution series).
    """
    from scipy.special import lambertw

    return 2.0 + float(lambertw(-2 * math.exp(-2)).real)
