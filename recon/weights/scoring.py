"""Steps of Fisher scoring: how far an image is from what each pixel's own data say."""

from __future__ import annotations

import math

import numpy as np

from recon.likelihoods.contract import Likelihood

FLOOR = 1e-3  # of the mean of an image: what is scored where it is zero, lest one detection decide


def lifted(image: np.ndarray, likelihood: Likelihood, share: float = FLOOR) -> np.ndarray:
    """Return the image, where it can end at zero no pixel less than a share of the mean.

    At zero a law has no width, and a single detection would decide.
    """
    low = likelihood.domain.low
    if not math.isfinite(low):
        return image
    return np.maximum(image, low + share * max(float(image.mean(dtype=np.float64)) - low, 0.0))


def scoring_step(
    likelihood: Likelihood, image: np.ndarray, share: float = FLOOR
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return (dL/dx) / I at the lifted image, I the Fisher information, and where there is such a step.

    That is the image less each pixel's own estimate, where the score is linear, and to first order elsewhere.
    Both are 0 where there is no step: no data, or no information. share: see `lifted`.
    """
    x = lifted(np.asarray(image, np.float64), likelihood, share)
    with np.errstate(divide="ignore", invalid="ignore"):
        information = likelihood.fisher_information(x)
        step = likelihood.gradient(x) / information
    known = likelihood.has_data & np.isfinite(step) & np.isfinite(information)
    return np.where(known, step, 0.0), np.where(known, information, 0.0), known
