"""Total generalized variation of second order (Bredies, Kunisch and Pock 2010): slopes without stairs."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from priors import validation
from priors.contract import Prior, require_image
from priors.slopes import Slopes

if TYPE_CHECKING:
    import cvxpy as cp

    from priors.generalized_block import GeneralizedBlock

CONIC_PIXELS = 4096


@dataclass(frozen=True, eq=False)
class GeneralizedVariation(Prior):
    """weight times the second-order total generalized variation of the image.

        weight * min over v of  sum |D x - v|  +  second_order * h * sum |E v|

    D x are the forward differences over the pixel spacing (times the edge weight, as is v in that term);
    v is a field of slopes; E v is its symmetrised difference (v_rr, v_cc, (v_rc + v_cr) / sqrt(2)), over
    the spacing; |.| is the Euclidean norm at a pixel and h the geometric mean of the two spacings. A
    plane costs nothing; an edge costs what it does in total variation.

    weight: positive number; larger means smoother. None leaves it to be chosen from the data by
        `recon.reconstruct`.
    second_order: positive number; larger means straighter slopes, and in the limit total variation
        about the best plane. About 2 suits most images (common practice).
    spacing, edge_weights, mask: as in `TotalVariation`, edge weights above zero.

    Raises PriorError for a setting out of range, or maps that do not fit the image.
    """

    weight: float | None = None
    second_order: float = 2.0
    spacing: float | tuple[float, float] = 1.0
    edge_weights: np.ndarray | None = None
    mask: np.ndarray | None = None

    def __post_init__(self) -> None:
        set_field = object.__setattr__
        set_field(self, "weight", validation.weight(self.weight))
        set_field(self, "second_order", validation.positive("second_order", self.second_order))
        set_field(self, "spacing", validation.pixel_spacing(self.spacing))
        set_field(self, "edge_weights", validation.edge_weights(self.edge_weights, above_zero=True))
        set_field(self, "mask", validation.image_mask(self.mask))

    def check_shape(self, shape: tuple[int, int]) -> None:
        """See `Prior.check_shape`."""
        validation.same_shape("mask", self.mask, shape)
        validation.same_shape("edge_weights", self.edge_weights, shape)

    def typical_weight(self, information: float) -> float:
        """See `Prior.typical_weight`; as for total variation."""
        return 1.3 * information**0.5 * max(self.spacing)

    @property
    def limits(self) -> tuple[float, float]:
        """The factors of the first-order and second-order sums, slopes being counted per h."""
        h = (self.spacing[0] * self.spacing[1]) ** 0.5
        return self.weight / h, self.weight * self.second_order / h

    def slopes(self, shape: tuple[int, int]) -> Slopes:
        """Return the linear map K for images of `shape`; lengths in units of h suit x and v alike."""
        h = (self.spacing[0] * self.spacing[1]) ** 0.5
        relative = self.spacing[0] / h, self.spacing[1] / h
        return Slopes(validation.image_shape(shape), relative, self.mask, self.edge_weights)

    def auxiliary_shape(self, shape: tuple[int, int]) -> tuple[int, ...]:
        """Return (2, rows, columns): the slope along rows and along columns."""
        return (2, *shape)

    def forward(self, x: np.ndarray, v: np.ndarray | None = None) -> np.ndarray:
        """Return D x - v and E v, shape (5, rows, columns); v is zero if left out."""
        x = require_image(x)
        return self.slopes(x.shape).forward(x, np.zeros((2, *x.shape), x.dtype) if v is None else v)

    def adjoint(self, y: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
        """See `Prior.adjoint`."""
        return self.slopes(shape).adjoint(y)

    def auxiliary_adjoint(self, y: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
        """See `Prior.auxiliary_adjoint`."""
        return self.slopes(shape).auxiliary_adjoint(y)

    def norm_squared(self, shape: tuple[int, int]) -> float:
        """See `Prior.norm_squared`."""
        return self.slopes(shape).norm_squared

    def _sizes(self, p: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        first = np.hypot(p[0], p[1])
        second = np.sqrt(np.square(p[2]) + np.square(p[3]) + np.square(p[4]))
        return first, second

    def penalty(self, p: np.ndarray) -> float:
        """See `Prior.penalty`."""
        first, second = (float(np.sum(size, dtype=np.float64)) for size in self._sizes(p))
        return self.limits[0] * first + self.limits[1] * second

    def dual_prox(self, y: np.ndarray, sigma: float) -> np.ndarray:
        """Return y moved to the nearest point of the domain of g*."""
        first, second = self._sizes(y)
        scales = [
            limit / np.maximum(size, limit) for limit, size in zip(self.limits, (first, second), strict=True)
        ]
        return np.concatenate([y[:2] * scales[0], y[2:] * scales[1]])

    def conjugate(self, y: np.ndarray) -> float:
        """Return 0 inside the domain (to rounding), inf outside."""
        first, second = (float(size.max()) for size in self._sizes(y))
        inside = first <= self.limits[0] * (1 + 1e-5) and second <= self.limits[1] * (1 + 1e-5)
        return 0.0 if inside else np.inf

    def feasible(self, y: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
        """Return y's second-order duals and the first-order ones that K_v' y = 0 asks for, scaled down."""
        projected = self.dual_prox(y, 1.0)
        projected[:2] = self.slopes(shape).balancing(projected[2:])
        largest = float(np.hypot(projected[0], projected[1]).max())
        return projected * min(1.0, self.limits[0] / largest) if largest > 0.0 else projected

    def value(self, x: np.ndarray) -> float:
        """Return the weighted penalty, minimised over v.

        By a conic solver for small images; for others by the primal-dual method, to a relative gap of
        1e-6 or as near as single precision gets.
        """
        image = require_image(x)
        self.check_shape(image.shape)
        if image.size > CONIC_PIXELS:
            from priors.generalized_block import minimise_over_slopes

            return minimise_over_slopes(self, image)
        import cvxpy as cp

        expression, _ = self.expression(cp.Constant(image), image.shape)
        return float(cp.Problem(cp.Minimize(expression)).solve(solver=cp.CLARABEL))

    def expression(self, x: cp.Expression, shape: tuple[int, int]) -> tuple[cp.Expression, list[Any]]:
        """See `Prior.expression`."""
        import cvxpy as cp

        first, second = self.slopes(shape).expression(x)
        sums = cp.sum(cp.norm(first, 2, axis=0)), cp.sum(cp.norm(second, 2, axis=0))
        return self.limits[0] * sums[0] + self.limits[1] * sums[1], []

    def block(self, shape: tuple[int, int]) -> GeneralizedBlock:
        """See `Prior.block`."""
        from priors.generalized_block import GeneralizedBlock

        return GeneralizedBlock(self, shape)
