"""The cvxpy expression of a likelihood or a prior against its value."""

from __future__ import annotations

import warnings
from typing import TYPE_CHECKING, Any

import numpy as np

from recon.testing.errors import require, require_close

if TYPE_CHECKING:
    import cvxpy as cp


def check_expression(
    subject: object,
    x: cp.Variable,
    expression: cp.Expression,
    constraints: list[Any],
    image: np.ndarray,
    value: float,
) -> None:
    """Check that a cvxpy expression of x is convex and has the given value at the image.

    Auxiliary variables of the expression are minimised over, x being held.
    """
    import cvxpy as cp

    claim = "expression is not one convex number by the rules of disciplined convex programming"
    convex = expression.is_scalar() and expression.is_convex()
    got = f"{expression.curvature} of shape {expression.shape}"
    require(convex, subject, claim, got, "CONVEX of shape ()")
    claim = "a constraint of expression breaks the rules of disciplined convex programming"
    require(all(c.is_dcp() for c in constraints), subject, claim, "another constraint", "convex ones")
    variables = {v.id: v for part in (expression, *constraints) for v in part.variables()}
    if set(variables) <= {x.id}:
        x.value = image
        broken = max((float(np.max(c.violation())) for c in constraints), default=0.0)
        claim = "constraints of expression exclude an image of the domain"
        require(broken <= 1e-9, subject, claim, f"a violation of {broken:.3g}", "none")
        got, tolerance = float(expression.value), 1e-6
    else:
        problem = cp.Problem(cp.Minimize(expression), [*constraints, x == image])
        with warnings.catch_warnings():  # the value is judged below
            warnings.filterwarnings("ignore", message="Solution may be inaccurate")
            got, tolerance = float(problem.solve()), 1e-4
    claim = "expression has another value than value"
    require_close(subject, claim, got, value, tolerance * (abs(value) + 1e-2 * (1.0 + abs(value))))
