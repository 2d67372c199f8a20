"""The conic solver: the same problem through cvxpy (Clarabel), in float64, for small images.

The reference that the tests compare with, and the way to try a prior that exists only as an
expression.
"""

from __future__ import annotations

import warnings
from collections.abc import Iterator

import numpy as np

from recon.diagnostics import Status, relative_gap
from recon.problem import Problem
from recon.solvers.contract import State, Unsuitable

LARGEST = 256 * 256  # pixels; beyond it an interior-point method needs minutes and gigabytes


def conic(problem: Problem, start: np.ndarray, tolerance: float) -> Iterator[State]:
    """Yield one state, the optimum to about a thousandth of the tolerance."""
    if not problem.likelihood.convex:
        raise Unsuitable(
            f"solver conic needs a convex likelihood and {type(problem.likelihood).__name__} is not;"
            " leave solver out, and majorise-minimise is used."
        )
    if start.size > LARGEST:
        raise Unsuitable(
            f"solver conic takes images of at most {LARGEST} pixels and this one has {start.size};"
            " crop it, or use the primal-dual solver."
        )
    import cvxpy as cp

    x = cp.Variable(problem.shape)
    total, constraints = problem.likelihood.expression(x)
    for prior in problem.priors:
        expression, needed = prior.expression(x, problem.shape)
        total = total + expression
        constraints = constraints + needed
    low, high = problem.bounds
    if np.isfinite(low):
        constraints = [*constraints, x >= low]
    if np.isfinite(high):
        constraints = [*constraints, x <= high]
    task = cp.Problem(cp.Minimize(total), constraints)
    precision = max(1e-3 * tolerance, 1e-9)
    options = {"tol_gap_rel": precision, "tol_gap_abs": precision, "tol_feas": precision}
    failed = State(0, start, np.inf, -np.inf, np.inf, Status.SOLVER_FAILED)
    try:
        data, chain, inverse = task.get_problem_data(cp.CLARABEL, solver_opts=options)
        answer = chain.solve_via_data(task, data, solver_opts=options)
        with warnings.catch_warnings():  # of an inaccurate solution: the gap says how far it can be trusted
            warnings.simplefilter("ignore", UserWarning)
            task.unpack_results(answer, chain, inverse)
    except cp.SolverError:
        yield failed
        return
    if x.value is None or task.status not in (cp.OPTIMAL, cp.OPTIMAL_INACCURATE):
        yield failed
        return
    objective = float(task.value)
    # The solver's own objective leaves out the constant terms.
    dual_value = objective - float(answer.obj_val - answer.obj_val_dual)
    image = np.clip(x.value, low, high)
    gap = relative_gap(objective, min(dual_value, objective), image.size)
    yield State(int(answer.iterations), image, objective, dual_value, gap)
