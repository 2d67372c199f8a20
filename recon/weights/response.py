"""How far an image gives way to a pull on its data."""

from __future__ import annotations

import numpy as np

from recon.likelihoods.tilted import Tilted
from recon.problem import Problem
from recon.solvers import solve


def response(
    problem: Problem, slope: np.ndarray, image: np.ndarray, tolerance: float, limit: int
) -> np.ndarray:
    """Return x+ - x- (float64): the solutions with the likelihood tilted by slope, and by minus that.

    image: the solution without, from which both start. tolerance, limit: of the fits, gap and iterations.
    """
    up, down = (
        solve(
            Problem(Tilted(problem.likelihood, way * slope, image), problem.priors, problem.bounds),
            tolerance=tolerance,
            max_iterations=limit,
            start=image,
        ).image
        for way in (1.0, -1.0)
    )
    return up.astype(np.float64) - down
