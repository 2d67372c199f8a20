"""Value of a prior: convex, the least penalty over auxiliary images, larger for a larger weight."""

from __future__ import annotations

import dataclasses
from typing import Any

import numpy as np

from recon.testing.errors import require, require_at_most, require_close
from recon.testing.expressions import check_expression
from recon.testing.linear_maps import random_pair

EXACT = 1e-9
SOLVED = 1e-3
"""Relative accuracy asked of a value that takes a solve of its own."""


def _accuracy(prior: Any, shape: tuple[int, int]) -> float:
    solved = prior.conic_only or prior.auxiliary_shape(shape) is not None
    return SOLVED if solved else EXACT


def check_value(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> None:
    """Check that value is the penalty of K x, or with an auxiliary image no more than that of K (x, v)."""
    for _ in range(2):
        x, v = random_pair(prior, shape, rng)
        value = prior.value(x)
        require(np.isfinite(value), prior, "value of a random image", value, "a finite number")
        if v is None:
            penalty = prior.penalty(prior.forward(x))
            claim = "value(x) is not penalty(forward(x))"
            require_close(prior, claim, value, penalty, EXACT * (1.0 + penalty))
        else:
            for size in (0.0, 0.1, 1.0):
                penalty = prior.penalty(prior.forward(x, size * v))
                claim = "value(x) is above penalty(forward(x, v)) of an auxiliary image v"
                require_at_most(prior, claim, value, penalty, SOLVED * (1.0 + penalty))


def check_convex(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> None:
    """Check by midpoints that value is convex in the image."""
    accuracy = _accuracy(prior, shape)
    x = rng.standard_normal(shape)
    value = prior.value(x)
    for away in (0.3, 10.0):
        z = x + away * rng.standard_normal(shape)
        ends, middle = value + prior.value(z), prior.value(0.5 * (x + z))
        claim = "value is not convex: the middle of two images lies above their mean"
        require_at_most(prior, claim, middle, 0.5 * ends, accuracy * (1.0 + abs(ends)))


def check_weight(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> None:
    """Check that twice the weight is twice the value, which is never negative: larger means smoother."""
    heavier = _with_twice_the_weight(prior)
    if heavier is None:
        return
    accuracy = _accuracy(prior, shape)
    x = rng.standard_normal(shape)
    value, more = prior.value(x), heavier.value(x)
    claim = "a larger weight gives a smaller value"
    require_at_most(prior, claim, value, more, accuracy * (1.0 + abs(value)))
    claim = "twice the weight does not give twice the value"
    require_close(prior, claim, more, 2.0 * value, 4.0 * accuracy * (1.0 + abs(value)))


def _with_twice_the_weight(prior: Any) -> Any:
    """Return a copy of a dataclass prior with twice the weight, or None where that cannot be had."""
    if not dataclasses.is_dataclass(prior) or not hasattr(prior, "weight"):
        return None
    return dataclasses.replace(prior, weight=2.0 * prior.weight)


def check_prior_expression(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> None:
    """Check the cvxpy expression against value."""
    import cvxpy as cp

    x = cp.Variable(shape)
    expression, constraints = prior.expression(x, shape)
    image = rng.standard_normal(shape)
    check_expression(prior, x, expression, constraints, image, prior.value(image))
