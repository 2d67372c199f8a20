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
    on_weight: Callable[[str, float], object] | None = None
    """Called with the name of the image and each factor of the rule of thumb that is tried."""
    weight: str = "auto"
    """How to set weights that a prior leaves open, see `recon.reconstruct`."""
    judge: bool = True
    """Whether to hold data out for the uncertainty; if not, it is that of each pixel by itself."""

    def of_weight(self, name: str) -> Callable[[float], object] | None:
        """Return whom to tell of the factors that are tried for an image."""
        told = self.on_weight
        return None if told is None else lambda factor: told(name, factor)

    def of_state(self, name: str) -> Callable[[State], object] | None:
        """Return whom to tell of the states of an image."""
        told = self.callback
        return None if told is None else lambda state: told(name, state)


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
    prior = default_prior() if prior is None else prior
    settled = settle(prior, likelihood, bounds, effort.weight, folds, effort.of_weight(name))
    terms, choice = settled.terms, settled.choice
    problem = Problem(likelihood, terms, bounds)
    tolerance = TOLERANCE if effort.tolerance is None else effort.tolerance
    solution = solve(
        problem,
        solver="conic" if any(term.conic_only for term in terms) else None,
        tolerance=tolerance,
        max_iterations=effort.max_iterations,
        start=start,
        callback=effort.of_state(name),
    )
    fits = settled.fits
    if effort.judge and not fits:
        fits = held_out_fits(terms, likelihood, bounds, solution.image, folds)
    chosen = "" if choice is None else choice.note
    alone = ALONE if effort.judge and not fits else ""
    return PhysicalImage(
        image=solution.image,
        unit=unit,
        uncertainty=judged(problem, solution.image, fits),
        filled=~likelihood.has_data,
        problem=problem,
        tolerance=tolerance,
        held_out=fits,
        choice=choice,
        notes=tuple(note for note in (*notes, chosen, alone) if note),
        status=solution.status,
        diagnostics=solution.diagnostics,
    )


def judged(problem: Problem, image: np.ndarray, fits: tuple[HeldOutFit, ...]) -> np.ndarray:
    """Return the uncertainty of an image: calibrated if there are fits, else of each pixel by itself."""
    if fits:
        return calibrated_uncertainty(problem.likelihood, image, fits)
    return local_uncertainty(problem.likelihood, image, problem.bounds)
