"""Confidence intervals of reflectivity, pixel by pixel, with no prior."""

from __future__ import annotations

import numpy as np

from recon.acquisition import Counts
from recon.errors import InputError
from recon.imaging.reflectivity import stopping_rule
from recon.uncertainty.exact import clopper_pearson, garwood


def exact_interval(counts: Counts, share: float = 0.95) -> tuple[np.ndarray, np.ndarray]:
    """Return the central confidence interval of the reflectivity of each pixel from its own counts (float64).

    Garwood 1936 where a trial can detect several times, Clopper and Pearson 1934 where at most once, taken
    from the mean number of detections per trial to (that - background) / gain, not below 0. inf above
    where every trial detected; 0 to inf where there is no data.

    share: probability with which the interval holds the truth, at least. Raises InputError.
    """
    if not isinstance(counts, Counts):
        raise InputError(f"counts is a {type(counts).__name__}; give recon.Counts.")
    trials = np.broadcast_to(np.asarray(counts.trials, np.float64), counts.shape)
    seen = np.asarray(counts.exposure) > 0.0
    with np.errstate(divide="ignore", invalid="ignore"):
        if counts.several_per_trial:
            ends = [end / trials for end in garwood(counts.detections, share)]
        else:
            wanted, _ = stopping_rule(counts)
            at_end = False if wanted is None else counts.detections == wanted
            probable = clopper_pearson(
                counts.detections, np.where(seen, trials, counts.detections), share, at_end
            )
            ends = [-np.log1p(-p) for p in probable]
        low, high = (np.maximum((end - counts.background) / counts.gain, 0.0) for end in ends)
    return np.where(seen, low, 0.0), np.where(seen, high, np.inf)
