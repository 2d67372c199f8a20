"""How good every pixel is: the local Fisher information."""

from __future__ import annotations

import numpy as np

from recon.likelihoods.contract import Likelihood

CLOSE = 1e-4  # relative change at which the uncertainty has settled


def local_uncertainty(likelihood: Likelihood, image: np.ndarray, bounds: tuple[float, float]) -> np.ndarray:
    """Return the standard uncertainty u of each pixel from its own data alone (float32).

    u solves u^2 I(x + u) = 1, I the Fisher information: 1 / sqrt(I(x)) where detections are many (Fisher
    1922), and still of the size of one detection where the image is zero, where 1 / sqrt(I) vanishes for
    a Poisson law (the upper end of its central interval, as in Garwood 1936). It takes no credit for what
    the prior averages. Where a pixel has no data, u is that of a uniform law between the bounds.
    """
    x = np.asarray(image, np.float64)
    low, high = bounds
    widest = (high - low) / np.sqrt(12.0) if np.isfinite(high - low) else np.inf
    seen = likelihood.has_data
    u = np.zeros(x.shape)
    with np.errstate(divide="ignore", invalid="ignore"):
        level = np.full(x.shape, float(np.mean(x)))
        u = np.nan_to_num(1.0 / np.sqrt(likelihood.fisher_information(level)), posinf=0.0)
        u = np.where(u > 0.0, u, widest)  # a law at zero has no width to begin with
        for _ in range(30):  # a contraction by a half or better for counting laws
            before = u
            u = np.nan_to_num(1.0 / np.sqrt(likelihood.fisher_information(x + u)), posinf=widest)
            if np.all(np.abs(u - before) <= CLOSE * u):
                break
    u = np.where(seen, u, widest)
    return u.astype(np.float32)
