"""The error of the conformance suite, and the comparisons that raise it."""

from __future__ import annotations

from typing import Any, NoReturn

import numpy as np
from numpy.typing import ArrayLike


class ConformanceError(AssertionError):
    """A class does not do what its contract says.

    The message is one sentence: the class, the property, the point, what was got and what was expected.
    """


def fail(subject: object, claim: str, got: Any, expected: Any, where: str = "") -> NoReturn:
    """Raise ConformanceError."""
    place = f" at {where}" if where else ""
    raise ConformanceError(f"{type(subject).__name__}: {claim}{place}; got {got}, expected {expected}.")


def require(condition: object, subject: object, claim: str, got: Any, expected: Any, where: str = "") -> None:
    """Raise ConformanceError unless the condition holds."""
    if not condition:
        fail(subject, claim, got, expected, where)


def require_close(
    subject: object,
    claim: str,
    got: ArrayLike,
    expected: ArrayLike,
    allowed: ArrayLike,
    x: ArrayLike | None = None,
) -> None:
    """Raise ConformanceError where |got - expected| > allowed or either is NaN, naming the worst place.

    x: the image at which the comparison was made, quoted at that place.
    """
    got, expected = np.broadcast_arrays(np.asarray(got, np.float64), np.asarray(expected, np.float64))
    with np.errstate(invalid="ignore"):
        excess = np.where(got == expected, -np.inf, np.abs(got - expected) - allowed)
    _require_no_excess(subject, claim, got, expected, excess, "", x)


def require_finite(subject: object, claim: str, got: np.ndarray, x: ArrayLike | None = None) -> None:
    """Raise ConformanceError unless every number is finite, naming the first place."""
    bad = np.argwhere(~np.isfinite(got))
    if bad.size:
        place = tuple(bad[0])
        fail(subject, claim, f"{got[place]:.9g}", "a finite number", _point(place, got.shape, x))


def require_at_most(
    subject: object,
    claim: str,
    got: ArrayLike,
    limit: ArrayLike,
    allowed: ArrayLike = 0.0,
    x: ArrayLike | None = None,
) -> None:
    """Raise ConformanceError where got > limit + allowed or either is NaN, naming the worst place."""
    got, limit = np.broadcast_arrays(np.asarray(got, np.float64), np.asarray(limit, np.float64))
    with np.errstate(invalid="ignore"):
        excess = np.where(got <= limit, -np.inf, got - limit - allowed)
    _require_no_excess(subject, claim, got, limit, excess, "at most ", x)


def _require_no_excess(
    subject: object,
    claim: str,
    got: np.ndarray,
    expected: np.ndarray,
    excess: np.ndarray,
    relation: str,
    x: ArrayLike | None,
) -> None:
    excess = np.where(np.isnan(excess), np.inf, excess)
    if not np.any(excess > 0.0):
        return
    place = np.unravel_index(int(np.argmax(excess)), excess.shape)
    fail(subject, claim, f"{got[place]:.9g}", f"{relation}{expected[place]:.9g}", _point(place, got.shape, x))


def _point(place: tuple, shape: tuple[int, ...], x: ArrayLike | None) -> str:
    parts = [f"pixel ({', '.join(str(int(i)) for i in place)})"] if place else []
    if x is not None:
        parts.append(f"x = {float(np.broadcast_to(x, shape)[place]):.9g}")
    return ", ".join(parts)
