"""A prior that exists only as a cvxpy expression."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any, NoReturn

import numpy as np

from priors import validation
from priors.contract import Prior, require_image
from priors.validation import PriorError

if TYPE_CHECKING:
    import cvxpy as cp


class Custom(Prior):
    """weight times a convex cvxpy expression of the image, for the conic solver.

    expression: a function that takes the image as a cvxpy expression of shape (rows, columns) and
        returns a convex scalar, for example `lambda x: cvxpy.norm1(x[1:] - x[:-1])`.
    weight: positive number; larger means smoother, if the expression is a penalty of roughness.

    Raises PriorError if what the function returns is not a convex scalar.
    """

    conic_only = True

    def __init__(self, expression: Callable[[cp.Expression], cp.Expression], weight: float = 1.0) -> None:
        if not callable(expression):
            raise PriorError(
                f"expression is a {type(expression).__name__}; give a function of the image that returns a"
                " convex cvxpy scalar."
            )
        self._function = expression
        self.weight = validation.positive("weight", weight)

    def __repr__(self) -> str:
        return f"Custom({self._function!r}, weight={self.weight})"

    def with_weight(self, weight: float) -> Custom:
        """See `Prior.with_weight`."""
        return Custom(self._function, weight)

    def expression(self, x: cp.Expression, shape: tuple[int, int]) -> tuple[cp.Expression, list[Any]]:
        """See `Prior.expression`."""
        import cvxpy as cp

        result = self._function(x)
        if not isinstance(result, cp.Expression) or not result.is_scalar():
            what = getattr(result, "shape", type(result).__name__)
            raise PriorError(f"expression returned {what}; return one cvxpy scalar.")
        if not result.is_convex():
            raise PriorError(
                "expression returned what cvxpy cannot tell to be convex; write it by its convex rules."
            )
        return self.weight * result, []

    def value(self, x: np.ndarray) -> float:
        """Return weight * expression at the image."""
        import cvxpy as cp

        image = require_image(x)
        return float(self.expression(cp.Constant(image), image.shape)[0].value)

    def _refuse(self, *_: object) -> NoReturn:
        raise PriorError('Custom exists only as a cvxpy expression; give solver="conic".')

    forward = adjoint = norm_squared = penalty = dual_prox = conjugate = block = _refuse
