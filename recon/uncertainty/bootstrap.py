"""A parametric bootstrap: what the image would be, had chance drawn other data."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from recon.diagnostics import Status
from recon.errors import InputError
from recon.problem import Problem
from recon.solvers import solve

TOLERANCE = 1e-3  # of the fits: noise is far larger
LONGEST = 4000  # iterations of a fit


@dataclass(frozen=True, eq=False)
class Bootstrap:
    """Images refitted to data drawn as if an image were true.

    images: float32 (replicates, rows, columns). image: the one that was taken for true.
    unfinished: how many of the fits ended short of the tolerance.
    """

    image: np.ndarray
    images: np.ndarray
    unfinished: int

    @property
    def standard_deviation(self) -> np.ndarray:
        """How far chance moves each pixel (float32)."""
        return self.images.std(axis=0, ddof=1, dtype=np.float64).astype(np.float32)

    @property
    def bias(self) -> np.ndarray:
        """Mean of the refits less the image they were drawn from (float32): what one more smoothing costs."""
        return (self.images.mean(axis=0, dtype=np.float64) - self.image).astype(np.float32)

    def interval(self, share: float = 0.95) -> tuple[np.ndarray, np.ndarray]:
        """Return the basic bootstrap interval of each pixel (Davison and Hinkley 1997), float32 maps.

        From twice the image less an upper quantile of the refits to twice the image less a lower one.
        """
        if not 0.0 < share < 1.0:
            raise InputError(f"share is {share!r}; give a probability between 0 and 1, such as 0.95.")
        tail = 0.5 * (1.0 - share)
        low, high = np.quantile(self.images, (tail, 1.0 - tail), axis=0)
        return (2.0 * self.image - high).astype(np.float32), (2.0 * self.image - low).astype(np.float32)

    @property
    def words(self) -> str:
        """What these spreads are, in a sentence or two."""
        said = (
            "the bootstrap says how far chance moves the image; what the prior has smoothed away already is"
            " not in it, so that it is narrower than the error"
        )
        if not self.unfinished:
            return said
        return f"NOT CONVERGED: {self.unfinished} of {len(self.images)} refits; {said}"


def bootstrap(
    problem: Problem,
    image: np.ndarray,
    replicates: int = 20,
    seed: int = 0,
    callback: Callable[[int], object] | None = None,
) -> Bootstrap:
    """Draw data as if the image were true, refit each time, and return the images (Efron 1979).

    problem: likelihood, priors at given weights, bounds. image: (rows, columns), usually its solution.
    replicates: 2 or more; their images are kept. callback: called with the number of refits done.

    Raises InputError.
    """
    for name, value, least in (("replicates", replicates, 2), ("seed", seed, 0)):
        if isinstance(value, bool) or not isinstance(value, int | np.integer) or value < least:
            raise InputError(f"{name} is {value!r}; give a whole number of at least {least}.")
    image = np.asarray(image, np.float32)
    generator = np.random.default_rng(seed)
    images = np.empty((replicates, *image.shape), np.float32)
    conic = any(term.conic_only for term in problem.priors)
    unfinished = 0
    for index in range(replicates):
        drawn = problem.likelihood.draw(image, generator)
        solution = solve(
            Problem(drawn, problem.priors, problem.bounds),
            solver="conic" if conic else None,
            tolerance=TOLERANCE,
            max_iterations=LONGEST,
            start=image,
        )
        images[index] = solution.image
        unfinished += solution.status is not Status.CONVERGED
        if callback is not None:
            callback(index + 1)
    return Bootstrap(image, images, unfinished)
