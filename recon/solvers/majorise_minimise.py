"""Majorise-minimise for likelihoods that are not convex (Hunter and Lange 2004).

At the image x0 the likelihood L is replaced by a convex M with M + c >= L everywhere and M + c = L at x0;
lowering M + priors from x0 then lowers L + priors at least as much. Each convex problem is solved by
the primal-dual method from where the last one stopped, only as closely as the progress is worth.

The gap of a state is M(x0) + priors(x0) - dual value of the convex problem: what the majorant could
still be lowered by from x0. It is zero just where x0 is stationary.
"""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np

from recon.diagnostics import Status, relative_gap
from recon.problem import Problem
from recon.solvers.contract import State, Unsuitable
from recon.solvers.primal_dual import CORRECTION, PrimalDual

CLOSE_ENOUGH = 0.2  # an inner solve ends when its gap is this share of what the majorant could be lowered by
FIRST_CHECK = 10  # iterations
SPREAD = 1.4  # iterations of a check over those of the last one: a certificate can cost as much as 20
ENOUGH = 300  # iterations of an inner solve that has lowered the objective
LONGEST = 1000  # iterations of one that has not
STEADIER = 50.0  # times the step, for a bound that rounding keeps low
PATIENCE = 6000  # iterations for such a bound


def majorise_minimise(problem: Problem, start: np.ndarray, tolerance: float) -> Iterator[State]:
    """Yield a state after every majorisation; the true objective never rises from one to the next."""
    if problem.likelihood.convex:
        raise Unsuitable(
            f"solver majorise-minimise is for likelihoods that are not convex and"
            f" {type(problem.likelihood).__name__} is; leave solver out."
        )
    image = np.clip(start, *problem.bounds).astype(np.float32)
    blocks = [prior.block(problem.shape) for prior in problem.priors]
    likelihood_value = problem.likelihood.value(image)
    step = None
    iterations = 0
    while True:
        majorant = problem.likelihood.majorise(image)
        correction = CORRECTION if step is None else 0.0
        run = PrimalDual(Problem(majorant, problem.priors, problem.bounds), image, blocks, step, correction)
        before = run.measure()
        scale = likelihood_value - majorant.value(image)  # from the majorant's objective to the true one
        objective = before.objective + scale
        state, lowered = _minimise(run, before.objective, objective, tolerance)
        iterations += run.iteration
        best = before.objective - max(before.dual_value, state.dual_value)
        gap = relative_gap(objective, objective - best, image.size)
        if not lowered and gap > tolerance:
            # The image is as good as the bound can tell. Duals that have come from other majorants may be far
            # from this one's, and short steps of the image, which are long ones of the duals, multiply its
            # rounding: where a pixel has no data the bound pays for that with the whole width of the box.
            blocks = [prior.block(problem.shape) for prior in problem.priors]
            run = PrimalDual(run.problem, image, blocks, STEADIER * run.step, correction=0.0)
            state, lowered = _minimise(run, before.objective, objective, tolerance, PATIENCE)
            iterations += run.iteration
            best = min(best, before.objective - state.dual_value)
            gap = relative_gap(objective, objective - best, image.size)
        step = run.step
        if lowered:
            candidate = state.image.copy()
            candidate_value = problem.likelihood.value(candidate)
            objective = candidate_value + state.objective - majorant.value(candidate)
            image, likelihood_value = candidate, candidate_value
        ended = None if lowered or gap <= tolerance else Status.NOT_MONOTONE
        yield State(iterations, image, objective, objective - best, gap, ended)


def _minimise(
    run: PrimalDual, start: float, true_start: float, tolerance: float, longest: int = LONGEST
) -> tuple[State, bool]:
    """Solve the convex problem closely enough; return the state and whether it is below the start."""
    due = FIRST_CHECK
    while True:
        while run.iteration < due:
            run.advance()
        due = math.ceil(SPREAD * due)
        state = run.measure()
        left = state.objective - state.dual_value
        possible = start - state.dual_value
        if state.objective <= start and left <= CLOSE_ENOUGH * possible:
            return state, True
        lowered = state.objective <= start
        if lowered and run.iteration >= ENOUGH:
            return state, True
        if possible <= 0.5 * tolerance * abs(true_start) or run.iteration >= longest:
            return state, lowered
