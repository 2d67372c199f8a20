"""Conjugate of a likelihood over a box against the inequality of Fenchel and Young, and where it is tight."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.testing import points
from recon.testing.errors import require_at_most, require_close

GOLDEN = (np.sqrt(5.0) - 1.0) / 2.0
RELATIVE = 1e-8


def check_conjugate(likelihood: Likelihood, rng: np.random.Generator) -> None:
    """Check conjugate_map over boxes inside the domain, and over the whole of it."""
    for x in points.images(likelihood, rng):
        for low, high in _boxes(likelihood, rng):
            _check_tight(likelihood, x, low, high)
            if np.isfinite(low) and np.isfinite(high):
                _check_search(likelihood, x, low, high, rng)
    for low, high in _boxes(likelihood, rng):
        _check_sum(likelihood, likelihood.gradient(x), low, high)


def _boxes(likelihood: Likelihood, rng: np.random.Generator) -> Iterator[tuple[float, float]]:
    domain, (low, high) = likelihood.domain, points.span(likelihood)
    inner = np.sort(low + (high - low) * rng.uniform(0.05, 0.95, 2))
    yield float(inner[0]), float(inner[1])
    yield float(inner[0]), float(inner[0])
    yield low, high
    yield domain.low, domain.high


def _closed(likelihood: Likelihood, x: np.ndarray) -> np.ndarray:
    """Return value_map, read as inf at an open end of the domain (where log 0 may warn)."""
    with np.errstate(divide="ignore", invalid="ignore"):
        deviance = likelihood.value_map(x)
    return np.where(np.isnan(deviance), np.inf, deviance)


def _check_tight(likelihood: Likelihood, x: np.ndarray, low: float, high: float) -> None:
    """Check conjugate(u) at u = gradient(x), where x moved into the box is the maximiser by convexity."""
    u = likelihood.gradient(x)
    best = np.clip(x, low, high)
    expected = u * best - _closed(likelihood, best)
    got = likelihood.conjugate_map(u, low, high)
    size = 1.0 + np.abs(u * best) + np.abs(u * x) + np.abs(expected)
    claim = f"conjugate_map over [{low:.6g}, {high:.6g}] is not u x - value_map(x) at its maximiser"
    require_close(likelihood, claim, got, expected, RELATIVE * size, best)


def _check_sum(likelihood: Likelihood, u: np.ndarray, low: float, high: float) -> None:
    """Check that conjugate is the sum of conjugate_map, of a float32 u too."""
    for given in (u, u.astype(np.float32)):
        pixels = likelihood.conjugate_map(given.astype(np.float64), low, high)
        allowed = 1e-6 * float(np.sum(1.0 + np.abs(pixels)))
        got = likelihood.conjugate(given, low, high)
        claim = f"conjugate of a {given.dtype} u over [{low:.6g}, {high:.6g}] is not the sum of conjugate_map"
        require_close(likelihood, claim, got, np.sum(pixels), allowed)


def _check_search(
    likelihood: Likelihood, x: np.ndarray, low: float, high: float, rng: np.random.Generator
) -> None:
    """Check conjugate_map at any u, beyond the gradient's range too, against random x and a search."""
    unit = np.max(np.abs(likelihood.gradient(x))) + 1.0 / (high - low + abs(high) + 1e-300)
    u = unit * rng.standard_normal(x.shape) * 10.0 ** rng.uniform(-2.0, 1.0, x.shape)
    got = likelihood.conjugate_map(u, low, high)
    size = 1.0 + np.abs(u) * max(abs(low), abs(high))
    claim = f"conjugate_map over [{low:.6g}, {high:.6g}] is below u x - value_map(x) of an x in the box"
    for _ in range(3):
        inside = rng.uniform(low, high, x.shape)
        product = u * inside - _closed(likelihood, inside)
        require_at_most(likelihood, claim, product, got, RELATIVE * size, inside)
    best = _search(likelihood, u, low, high)
    claim = f"conjugate_map over [{low:.6g}, {high:.6g}] is not the largest u x - value_map(x) in the box"
    found = u * best - _closed(likelihood, best)
    require_close(likelihood, claim, got, found, RELATIVE * (size + np.abs(found)), best)


def _search(likelihood: Likelihood, u: np.ndarray, low: float, high: float) -> np.ndarray:
    """Return the maximiser of u x - value_map(x) in [low, high] by golden-section search, ends included."""

    def objective(x: np.ndarray) -> np.ndarray:
        return u * x - _closed(likelihood, x)

    left, right = np.full(u.shape, low), np.full(u.shape, high)
    for _ in range(90):
        inner, outer = right - GOLDEN * (right - left), left + GOLDEN * (right - left)
        rises = objective(outer) > objective(inner)
        left, right = np.where(rises, inner, left), np.where(rises, right, outer)
    best = 0.5 * (left + right)
    for end in (low, high):
        end_image = np.full(u.shape, end)
        best = np.where(objective(end_image) > objective(best), end_image, best)
    return best
