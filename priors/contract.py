"""What a prior must offer.

A prior is weight times a convex penalty of an image; a larger weight always means a smoother image.
In every prior here it has the form

    value(x) = min over v of g(K (x, v)),

with K linear and g convex; v is an auxiliary image that most priors do without. The solvers work with
K, its adjoint and the conjugate g*:

    g*(y) = max over p of <p, y> - g(p).

A researcher's prior subclasses `Prior` and writes `forward`, `adjoint`, `norm_squared`, `penalty`,
`dual_prox`, `conjugate` and `expression` in numpy. Everything else follows; a prior that must be
fast also returns a compiled `Block` from `block`.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Iterator
from dataclasses import replace
from typing import TYPE_CHECKING, Any, Protocol

import numpy as np

from priors.validation import PriorError

if TYPE_CHECKING:
    import cvxpy as cp


class Block(Protocol):
    """The state of one prior inside a primal-dual solve: its duals, its auxiliary image, its steps.

    Every method works in place on float32 images of the solve's shape.
    """

    norm_squared: float
    """An upper bound of the squared norm of K."""

    def step(
        self,
        extrapolated: np.ndarray,
        sigma: float,
        tau: float,
        relaxation: float,
        adjoint: np.ndarray,
        fresh: bool,
    ) -> None:
        """Advance the duals by one over-relaxed step; write (fresh) or add K' y (image part) to `adjoint`.

        y~ = prox of sigma g* at y + sigma K (extrapolated, v-), then y += relaxation (y~ - y). An
        auxiliary image steps first: v~ = v - tau K_v' y, v- = 2 v~ - v, v += relaxation (v~ - v).
        """

    def certify(self, image: np.ndarray, adjoint: np.ndarray, fresh: bool) -> tuple[float, float]:
        """Return g(K (image, v)) and g* at a dual point that is feasible, and put its K' y in `adjoint`.

        The dual point is the current one, moved into the domain of g* where it is outside (and onto
        K_v' y = 0 where there is an auxiliary image), so that the bound it gives is true.
        """

    def mark(self) -> None:
        """Remember the duals, as the start of a stretch of steps."""

    def moved(self) -> float:
        """Return the squared distance of the duals from the last `mark` (float64)."""

    def forget(self) -> None:
        """Release the memory of `mark`."""


class Prior(ABC):
    """Weight times a convex penalty of an image of shape (rows, columns)."""

    conic_only: bool = False
    """True if the prior exists only as a cvxpy expression."""

    def __add__(self, other: Prior) -> Sum:
        if not isinstance(other, Prior):
            return NotImplemented
        return Sum(self, other)

    def terms(self) -> Iterator[Prior]:
        """Yield the priors that this one is the sum of (itself, unless it is a Sum)."""
        yield self

    weight: float | None = 1.0
    """The factor of the penalty; None while it is to be chosen from the data."""

    def typical_weight(self, information: float) -> float:
        """Return a first guess of the weight, for an image whose pixels have this Fisher information each."""
        raise PriorError(f"{type(self).__name__} has no rule for its weight; give weight=... yourself.")

    def with_weight(self, weight: float) -> Prior:
        """Return the same prior with another weight (for a frozen dataclass with a field `weight`)."""
        return replace(self, weight=weight)  # type: ignore[type-var]

    def check_shape(self, shape: tuple[int, int]) -> None:  # noqa: B027 - most priors suit every shape
        """Raise PriorError if a map in the settings does not fit images of this shape."""

    def auxiliary_shape(self, shape: tuple[int, int]) -> tuple[int, ...] | None:
        """Return the shape of v for images of `shape`, or None."""
        return None

    @abstractmethod
    def forward(self, x: np.ndarray, v: np.ndarray | None = None) -> np.ndarray:
        """Return K (x, v) as one array."""

    @abstractmethod
    def adjoint(self, y: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
        """Return the image part of K' y, shape (rows, columns)."""

    def auxiliary_adjoint(self, y: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
        """Return the auxiliary part of K' y."""
        raise NotImplementedError(f"{type(self).__name__} has no auxiliary image")

    @abstractmethod
    def norm_squared(self, shape: tuple[int, int]) -> float:
        """Return an upper bound of the squared norm of K, as tight as is cheap."""

    @abstractmethod
    def penalty(self, p: np.ndarray) -> float:
        """Return g(p), weight included, for p = K (x, v)."""

    @abstractmethod
    def dual_prox(self, y: np.ndarray, sigma: float) -> np.ndarray:
        """Return the minimiser q of g*(q) + |q - y|^2 / (2 sigma)."""

    @abstractmethod
    def conjugate(self, y: np.ndarray) -> float:
        """Return g*(y); inf outside its domain."""

    def feasible(self, y: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
        """Return a point near y in the domain of g* with K_v' y = 0."""
        if self.auxiliary_shape(shape) is not None:
            raise NotImplementedError(
                f"{type(self).__name__} has an auxiliary image and must write feasible()"
            )
        return self.dual_prox(y, 1e-6)

    def value(self, x: np.ndarray) -> float:
        """Return the weighted penalty of the image x.

        A prior with an auxiliary image overrides this (it takes a solve of its own).
        """
        return self.penalty(self.forward(np.asarray(x, dtype=np.float64)))

    @abstractmethod
    def expression(self, x: cp.Expression, shape: tuple[int, int]) -> tuple[cp.Expression, list[Any]]:
        """Return the weighted penalty as a convex cvxpy expression of x, and constraints it needs."""

    def block(self, shape: tuple[int, int]) -> Block:
        """Return the state of this prior for a primal-dual solve of images of `shape`."""
        from priors.array_block import ArrayBlock

        return ArrayBlock(self, shape)


class Sum:
    """Several priors whose penalties add up."""

    def __init__(self, *parts: Prior | Sum) -> None:
        self._terms: tuple[Prior, ...] = tuple(term for part in parts for term in part.terms())

    def __add__(self, other: Prior | Sum) -> Sum:
        if not isinstance(other, Prior | Sum):
            return NotImplemented
        return Sum(self, other)

    __radd__ = __add__

    def __repr__(self) -> str:
        return " + ".join(repr(term) for term in self._terms)

    def terms(self) -> Iterator[Prior]:
        """Yield the priors one by one."""
        yield from self._terms

    def value(self, x: np.ndarray) -> float:
        """Return the sum of the weighted penalties of the image x."""
        return sum(term.value(x) for term in self._terms)


def require_image(x: np.ndarray) -> np.ndarray:
    """Return x as a two-dimensional float array, or raise PriorError."""
    image = np.asarray(x)
    if image.ndim != 2 or image.size == 0:
        raise PriorError(f"the image has shape {image.shape}; priors act on images of shape (rows, columns).")
    return image if image.dtype in (np.float32, np.float64) else image.astype(np.float64)
