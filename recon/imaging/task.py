"""The step that every kind of image shares: weigh the prior, solve, say how good every pixel is."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from recon.imaging.image import PhysicalImage
from recon.likelihoods.contract import Likelihood
from recon.problem import Prior, Problem, Sum, default_prior
from recon.solvers import State, solve
from recon.uncertainty import calibrated_uncertainty, local_uncertainty
from recon.weights import HeldOutFit, held_out_fits, settle
from recon.weights.settle import Pairs

ALONE = "nothing could be held out: the uncertainty is that of each pixel by its own data"
TOLERANCE = 5e-4  # where the user gives none; single precision can end above 1e-4 on large images


@dataclass(frozen=True)
class Effort:
    """How closely to solve, and whom to tell; see `recon.solve`."""

    tolerance: float | None = None
    """None = what is close enough for the kind of image."""
    max_iterations: int = 30_000
    callback: Callable[[str, State], object] | None = None
    """Called with the name of the image and the state."""
    weight: str = "auto"
    """How to set weights that a prior leaves open: "auto" by held-out data, "rule" by a rule of thumb."""
    judge: bool = True
    """Whether to hold data out for the uncertainty; if not, it is that of each pixel by itself."""


def image_of(
    name: str,
    likelihood: Likelihood,
    prior: Prior | Sum | None,
    unit: str,
    effort: Effort,
    start: np.ndarray | None = None,
    folds: Callable[[int, int], Pairs] | None = None,
    notes: tuple[str, ...] = (),
) -> PhysicalImage:
    """Return the image that minimises likelihood + prior within the likelihood's default bounds.

    folds: see `recon.weights.settle`. notes: see `PhysicalImage`.
    """
    bounds = likelihood.default_bounds
    settled = settle(default_prior() if prior is None else prior, likelihood, bounds, effort.weight, folds)
    terms, choice = settled.terms, settled.choice
    problem = Problem(likelihood, terms, bounds)
    told = effort.callback
    tolerance = TOLERANCE if effort.tolerance is None else effort.tolerance
    solution = solve(
        problem,
        solver="conic" if any(term.conic_only for term in terms) else None,
        tolerance=tolerance,
        max_iterations=effort.max_iterations,
        start=start,
        callback=None if told is None else lambda state: told(name, state),
    )
    uncertainty, also = _judged(problem, solution.image, settled.fits, effort, folds)
    return PhysicalImage(
        image=solution.image,
        unit=unit,
        uncertainty=uncertainty,
        filled=~likelihood.has_data,
        problem=problem,
        tolerance=tolerance,
        choice=choice,
        notes=notes + ((choice.note,) if choice is not None and choice.note else ()) + also,
        status=solution.status,
        diagnostics=solution.diagnostics,
    )


def _judged(
    problem: Problem,
    image: np.ndarray,
    fits: tuple[HeldOutFit, ...],
    effort: Effort,
    folds: Callable[[int, int], Pairs] | None,
) -> tuple[np.ndarray, tuple[str, ...]]:
    """Return the uncertainty of an image, and what to say of it."""
    likelihood = problem.likelihood
    if effort.judge and not fits:
        fits = held_out_fits(problem.priors, likelihood, problem.bounds, image, folds)
    if fits:
        return calibrated_uncertainty(likelihood, image, fits, problem.bounds), ()
    alone = local_uncertainty(likelihood, image, problem.bounds)
    return alone, (ALONE,) if effort.judge else ()
