"""The linear map K of a prior: linear, with an exact adjoint and a true bound of its norm."""

from __future__ import annotations

from typing import Any

import numpy as np

from recon.testing.errors import require, require_at_most, require_close

ROUNDING = 1e-11
LOOSE = 4.0
POWER_ITERATIONS = 500


def random_pair(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> tuple[np.ndarray, Any]:
    """Return a random image and a random auxiliary image (None where the prior has none)."""
    auxiliary = prior.auxiliary_shape(shape)
    return rng.standard_normal(shape), None if auxiliary is None else rng.standard_normal(auxiliary)


def check_linear(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> None:
    """Check that K (a (x, v) + (z, w)) = a K (x, v) + K (z, w)."""
    (x, v), (z, w) = random_pair(prior, shape, rng), random_pair(prior, shape, rng)
    both = prior.forward(-2.5 * x + z, None if v is None else -2.5 * v + w)
    expected = -2.5 * prior.forward(x, v) + prior.forward(z, w)
    require_close(prior, "forward is not linear", both, expected, ROUNDING * np.max(np.abs(expected)))


def check_adjoint(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> None:
    """Check <K (x, v), y> = <x, K' y> + <v, K_v' y>, naming the first pixel at fault."""
    x, v = random_pair(prior, shape, rng)
    p = prior.forward(x, v)
    y = rng.standard_normal(p.shape)
    parts = [("adjoint", x, prior.adjoint(y, shape))]
    if v is not None:
        parts.append(("auxiliary_adjoint", v, prior.auxiliary_adjoint(y, shape)))
    for name, image, back in parts:
        got, expected = np.shape(back), image.shape
        require(got == expected, prior, f"{name} has the wrong shape", got, expected)
    product = sum(float(np.sum(image * back)) for _, image, back in parts)
    size = np.linalg.norm(p) * np.linalg.norm(y)
    if abs(float(np.sum(p * y)) - product) <= ROUNDING * size:
        return
    for number, (name, image, back) in enumerate(parts):
        exact = np.empty(image.shape)
        for place in np.ndindex(image.shape):
            unit = [np.zeros(part.shape) for _, part, _ in parts]
            unit[number][place] = 1.0
            exact[place] = np.sum(prior.forward(*unit) * y)
        claim = f"{name} is not the exact transpose of forward"
        require_close(prior, claim, back, exact, ROUNDING * np.max(np.abs(exact)))
    claim = "the products <K (x, v), y> and <x, K' y> + <v, K_v' y> differ"
    require_close(prior, claim, product, np.sum(p * y), ROUNDING * size)


def check_norm(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> None:
    """Check that norm_squared is not below |K|^2 (found by power iteration), nor four times above it."""
    x, v = random_pair(prior, shape, rng)
    largest = 0.0
    for _ in range(POWER_ITERATIONS):
        size = np.sqrt(np.sum(np.square(x)) + (0.0 if v is None else np.sum(np.square(v))))
        if size == 0.0:  # K is zero
            break
        x, v = x / size, None if v is None else v / size
        p = prior.forward(x, v)
        largest = float(np.sum(np.square(p)))
        x, v = prior.adjoint(p, shape), None if v is None else prior.auxiliary_adjoint(p, shape)
    where = f"images of shape {shape}"
    for name, bound in (("norm_squared", prior.norm_squared(shape)),
                        ("norm_squared of block", prior.block(shape).norm_squared)):  # fmt: skip
        require(np.isfinite(bound) and bound > 0.0, prior, f"{name} is not positive", bound, "above 0", where)
        claim = f"{name} is below the squared norm of K for {where}"
        require_at_most(prior, claim, largest, bound, 1e-6 * largest)
        if largest > 0.0:
            claim = f"{name} is more than {LOOSE:g} times the squared norm of K for {where}: it slows solves"
            require_at_most(prior, claim, bound, LOOSE * largest, 1e-6 * largest)
