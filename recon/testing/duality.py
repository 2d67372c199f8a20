"""Penalty g, conjugate g* and dual_prox of a prior against one another."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np

from recon.testing.errors import require, require_at_most, require_close
from recon.testing.linear_maps import random_pair

RELATIVE = 1e-6
"""As far as float32 duals let a conjugate forgive points just outside its domain."""

SIZES = (1e-3, 1e-1, 1.0, 1e1, 1e3)
SIGMAS = (0.03, 1.0, 30.0)


def duals(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> Iterator[np.ndarray]:
    """Yield random dual points, from much smaller to much larger than the usual weights."""
    like = prior.forward(*random_pair(prior, shape, rng))
    for size in SIZES:
        yield size * rng.standard_normal(like.shape)


def conjugate_inside(prior: Any, q: np.ndarray) -> float:
    """Return g*(q), q being moved by a rounding error towards 0 if it lies just outside the domain."""
    value = prior.conjugate(q)
    return value if np.isfinite(value) else prior.conjugate((1.0 - RELATIVE) * q)


def check_dual_prox(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> None:
    """Check dual_prox through Moreau's identity.

    q minimises g*(q) + |q - y|^2 / (2 sigma) exactly when p = (y - q) / sigma is a subgradient of g* at q,
    that is when g(p) + g*(q) = <p, q>.
    """
    for y in duals(prior, shape, rng):
        for sigma in SIGMAS:
            before = y.copy()
            q = prior.dual_prox(y, sigma)
            require(np.array_equal(y, before), prior, "dual_prox overwrites its argument", "another y", "y")
            require(q.shape == y.shape, prior, "dual_prox has the wrong shape", q.shape, y.shape)
            p = (y - q) / sigma
            conjugate, product = conjugate_inside(prior, q), float(np.sum(p * q))
            where = f"sigma = {sigma:g} and y of size {np.max(np.abs(y)):.3g}"
            claim = f"conjugate is not finite at dual_prox(y), at {where}"
            require(np.isfinite(conjugate), prior, claim, conjugate, "a finite number")
            total, size = prior.penalty(p) + conjugate, abs(product) + float(np.sum(np.abs(p * q)))
            claim = f"penalty(p) + conjugate(q) is not <p, q>, q = dual_prox(y), sigma p = y - q, at {where}"
            require_close(prior, claim, total, product, RELATIVE * (size + abs(conjugate)))


def check_conjugate(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> None:
    """Check the inequality of Fenchel and Young, g(p) + g*(q) >= <p, q>, q inside the domain and outside."""
    for y in duals(prior, shape, rng):
        q = prior.dual_prox(y, 1.0)
        for dual in (q, 0.5 * q, y):
            for direction in (rng.standard_normal(y.shape), dual, y - q):
                for size in SIZES:
                    p = size * direction
                    product, penalty = float(np.sum(p * dual)), prior.penalty(p)
                    claim = "the inequality penalty(p) + conjugate(y) >= <p, y> fails"
                    slack = 10.0 * RELATIVE * (float(np.sum(np.abs(p * dual))) + penalty)
                    require_at_most(prior, claim, product - penalty, prior.conjugate(dual), slack)


def check_feasible(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> None:
    """Check that feasible(y) lies in the domain of g*, and on K_v' y = 0 if there is an auxiliary image."""
    for y in duals(prior, shape, rng):
        q = prior.feasible(y, shape)
        claim = f"conjugate is not finite at feasible(y), for y of size {np.max(np.abs(y)):.3g}"
        require(np.isfinite(prior.conjugate(q)), prior, claim, prior.conjugate(q), "a finite number")
        if prior.auxiliary_shape(shape) is not None:
            left = prior.auxiliary_adjoint(q, shape)
            scale = np.sqrt(prior.norm_squared(shape)) * np.max(np.abs(q))
            require_close(prior, "auxiliary_adjoint is not zero at feasible(y)", left, 0.0, RELATIVE * scale)
