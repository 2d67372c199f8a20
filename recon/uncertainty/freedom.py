"""How many numbers an image takes from the data: its effective degrees of freedom."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from recon.problem import Problem
from recon.uncertainty.local import local_uncertainty
from recon.weights.response import response

PROBES = 2
NUDGE = 0.5  # of the noise: by so much data are moved
LONGEST = 4000  # iterations of a fit
SEED = 20_240_519


@dataclass(frozen=True)
class Freedom:
    """Effective degrees of freedom, and the standard error of the estimate."""

    number: float
    standard_error: float


def degrees_of_freedom(problem: Problem, image: np.ndarray, tolerance: float = 2e-5) -> Freedom:
    """Return the effective degrees of freedom of a solution: the sum of dx / dv, v each pixel's own estimate.

    The data of every pixel are moved up or down at random, b = 1 or -1, by half the noise u that they leave,
    as a slope b / (2 u) of the likelihood, and the other way; the image gives way by x+ - x-, and the number
    is the sum of b u I (x+ - x-), I the Fisher information, mean of two draws (Ye 1998; Ramani, Blu and
    Unser 2008). A pixel that nothing smooths counts one, a flat image one in all; a pixel at a bound none.

    tolerance: of the fits. The standard error is that of the draws.
    """
    likelihood, rng = problem.likelihood, np.random.default_rng(SEED)
    u = local_uncertainty(likelihood, image, problem.bounds).astype(np.float64)
    zero = np.isfinite(likelihood.domain.low)
    with np.errstate(divide="ignore", invalid="ignore"):
        # where the image is near zero the law has no width; there the size of a detection counts
        information = likelihood.fisher_information(np.where(zero, np.maximum(image, 0.5 * u), image))
    asked = likelihood.has_data & np.isfinite(information) & (u > 0.0) & np.isfinite(u)
    found = []
    for _ in range(PROBES):
        signs = np.where(asked, rng.choice((-1.0, 1.0), size=image.shape), 0.0)
        slope = NUDGE * signs / np.where(asked, u, 1.0)
        gives = response(problem, slope, image, tolerance, LONGEST)
        moved = signs * np.where(asked, u * information, 0.0) * gives
        found.append(float(moved.sum()) / (2.0 * NUDGE))
    error = float(np.std(found, ddof=1) / np.sqrt(PROBES))
    return Freedom(float(np.mean(found)), error)
