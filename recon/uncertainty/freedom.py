"""How many numbers an image takes from the data: its effective degrees of freedom."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from recon.likelihoods.tilted import Tilted
from recon.problem import Problem
from recon.solvers import solve
from recon.uncertainty.local import local_uncertainty

TOLERANCE = 1e-4
PROBES = 2
SEED = 20_240_519


@dataclass(frozen=True)
class Freedom:
    """Effective degrees of freedom, and the standard error of the estimate."""

    number: float
    standard_error: float


def degrees_of_freedom(problem: Problem, image: np.ndarray, max_iterations: int = 4000) -> Freedom:
    """Return the effective degrees of freedom of a solution: the trace of d(x sqrt I) / d(noise).

    Noise of one standard deviation and random sign b is put on the data of every pixel, as a slope
    b sqrt(I) of the likelihood, and taken off again; the image gives way by x+ - x-, and the number is
    the sum of b sqrt(I) (x+ - x-) / 2, the mean of two draws (Ye 1998; Ramani, Blu and Unser 2008). A pixel
    that nothing smooths counts one, a flat image one in all.

    The standard error is that of the draws. Conic problems are not for it (too slow).
    """
    likelihood, rng = problem.likelihood, np.random.default_rng(SEED)
    root = 1.0 / local_uncertainty(likelihood, image, problem.bounds).astype(np.float64)
    root = np.where(likelihood.has_data, root, 0.0)
    found = []
    for _ in range(PROBES):
        slope = root * rng.choice((-1.0, 1.0), size=image.shape)
        ends = [
            solve(
                Problem(Tilted(likelihood, sign * slope, image), problem.priors, problem.bounds),
                tolerance=TOLERANCE,
                max_iterations=max_iterations,
                start=image,
            ).image
            for sign in (1.0, -1.0)
        ]
        found.append(0.5 * float(np.sum(slope * (ends[0].astype(np.float64) - ends[1]))))
    error = float(np.std(found, ddof=1)) / np.sqrt(PROBES)
    return Freedom(float(np.mean(found)), error)
