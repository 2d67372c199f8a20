"""The one way into the solvers."""

from __future__ import annotations

import math
import time
from collections.abc import Callable

import numpy as np

from recon.diagnostics import Diagnostics, Status, Trace
from recon.errors import InputError
from recon.problem import Problem
from recon.result import Solution
from recon.solvers.conic import conic
from recon.solvers.contract import Solver, State
from recon.solvers.majorise_minimise import majorise_minimise
from recon.solvers.primal_dual import primal_dual

SOLVERS: dict[str, Solver] = {
    "primal-dual": primal_dual,
    "conic": conic,
    "majorise-minimise": majorise_minimise,
}


def solve(
    problem: Problem,
    solver: str | Solver | None = None,
    tolerance: float = 1e-4,
    max_iterations: int = 30_000,
    start: np.ndarray | None = None,
    callback: Callable[[State], object] | None = None,
) -> Solution:
    """Minimise likelihood + priors within the bounds, and say how closely it was done.

        minimise over x in [low, high]:   half deviance(x) + sum of the priors(x)

    solver: "primal-dual" (the default), "conic" (cvxpy; small images), "majorise-minimise" (the default
        where the likelihood is not convex), or a generator function of your own (`recon.solvers.contract`).
    tolerance: relative gap at which to stop, in (0, 1): (objective - dual value) / objective.
    max_iterations: the limit, at which the last iterate is kept.
    start: image to start from (rows, columns); `Likelihood.starting_image` if left out.
    callback: called with every state that is measured; the solve stops if it returns True.

    Returns a Solution. A numerical failure never raises: the status says what happened and what to
    do. Raises InputError for an argument that cannot be used or a problem that the solver cannot take.
    """
    if not isinstance(problem, Problem):
        raise InputError(f"problem is a {type(problem).__name__}; give a recon.Problem.")
    chosen, name = _choose(solver, problem)
    tolerance, max_iterations = _limits(tolerance, max_iterations)
    image = _start(start, problem)
    began = time.perf_counter()
    rows: list[tuple[int, float, float, float, float]] = []
    status = Status.ITERATION_LIMIT
    for state in chosen(problem, image, tolerance):
        seconds = time.perf_counter() - began
        # An infinite objective may pass: an early iterate can explain a detection by nothing.
        failed = math.isnan(state.objective) or not np.isfinite(state.image.sum(dtype=np.float64))
        if failed and state.ended is None:
            status = Status.NOT_FINITE
            break
        image = np.array(state.image, np.float32)
        rows.append((state.iteration, state.objective, state.dual_value, state.relative_gap, seconds))
        if callback is not None and callback(state) is True:
            status = Status.STOPPED
        elif state.relative_gap <= tolerance:
            status = Status.CONVERGED
        elif state.ended is not None:
            status = state.ended
        elif state.iteration < max_iterations:
            continue
        break
    return Solution(image, status, _diagnostics(problem, image, rows, name, time.perf_counter() - began))


def _choose(solver: str | Solver | None, problem: Problem) -> tuple[Solver, str]:
    if solver is None:
        solver = "primal-dual" if problem.likelihood.convex else "majorise-minimise"
    if callable(solver):
        return solver, getattr(solver, "__name__", "solver")
    if solver not in SOLVERS:
        raise InputError(f"solver is {solver!r}; give one of {', '.join(SOLVERS)}, or leave it out.")
    return SOLVERS[solver], solver


def _limits(tolerance: float, max_iterations: int) -> tuple[float, int]:
    if not (isinstance(tolerance, float | int) and 0.0 < tolerance < 1.0):
        raise InputError(f"tolerance is {tolerance!r}; give a relative gap between 0 and 1, such as 1e-4.")
    if isinstance(max_iterations, bool) or not (
        isinstance(max_iterations, int | np.integer) and max_iterations >= 1
    ):
        raise InputError(f"max_iterations is {max_iterations!r}; give a whole number of at least 1.")
    return float(tolerance), int(max_iterations)


def _start(start: np.ndarray | None, problem: Problem) -> np.ndarray:
    if start is None:
        return problem.likelihood.starting_image()
    image = np.asarray(start)
    if image.shape != tuple(problem.shape) or image.dtype.kind not in "iuf":
        raise InputError(
            f"start has shape {image.shape} and type {image.dtype}; give numbers of shape"
            f" {tuple(problem.shape)}."
        )
    bad = ~np.isfinite(image)
    if bad.any():
        place = tuple(int(i) for i in np.argwhere(bad)[0])
        raise InputError(f"start at {place} is {image[place]}; give finite numbers.")
    return image.astype(np.float32)


def _diagnostics(
    problem: Problem,
    image: np.ndarray,
    rows: list[tuple[int, float, float, float, float]],
    name: str,
    seconds: float,
) -> Diagnostics:
    table = np.array(rows, dtype=np.float64).reshape(-1, 5)
    last = table[-1] if len(table) else np.array([0, math.inf, -math.inf, math.inf, seconds])
    pixels = max(int(np.count_nonzero(problem.likelihood.has_data)), 1)
    low, high = problem.bounds
    return Diagnostics(
        objective=float(last[1]),
        dual_value=float(last[2]),
        relative_gap=float(last[3]),
        iterations=int(last[0]),
        seconds=seconds,
        deviance_per_pixel=2.0 * problem.likelihood.value(image) / pixels,
        pixels_at_bounds=int(np.count_nonzero((image <= low) | (image >= high))),
        solver=name,
        trace=Trace(table[:, 0].astype(np.int64), table[:, 1], table[:, 2], table[:, 3], table[:, 4]),
    )
