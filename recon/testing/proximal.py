"""Prox of a likelihood against its definition."""

from __future__ import annotations

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.testing import points
from recon.testing.errors import require, require_at_most

STEPS = (1e-3, 1e-1, 1.0, 1e2)


def steps(likelihood: Likelihood, x: np.ndarray) -> list[float]:
    """Return steps from much smaller to much larger than the squared width of a pixel's likelihood."""
    information = likelihood.fisher_information(x)
    unit = 1.0 / float(np.median(information[information > 0.0])) if np.any(information > 0.0) else 1.0
    return [unit * step for step in STEPS]


def check_prox(likelihood: Likelihood, rng: np.random.Generator) -> None:
    """Check that prox(v, step) minimises L(x) + |x - v|^2 / (2 step), by optimality and by rivals.

    Every solve moves the prox into its bounds, which lie in the domain, so it is judged there.
    """
    low, high = points.span(likelihood)
    domain = likelihood.domain
    for x in points.images(likelihood, rng):
        for step in steps(likelihood, x):
            v = x + (np.sqrt(step) + 0.1 * (high - low)) * rng.standard_normal(x.shape)
            before = v.copy()
            prox = np.asarray(likelihood.prox(v, step))
            require(np.array_equal(v, before), likelihood, "prox overwrites its argument", "another v", "v")
            require(prox.shape == v.shape, likelihood, "prox has the wrong shape", prox.shape, v.shape)
            precision = float(np.finfo(prox.dtype).eps)
            prox = np.clip(prox.astype(np.float64), domain.low, domain.high)
            _check_optimality(likelihood, prox, v, step, precision)
            _check_rivals(likelihood, prox, v, step)


def _check_optimality(
    likelihood: Likelihood, prox: np.ndarray, v: np.ndarray, step: float, precision: float
) -> None:
    """Check the sign of the objective's slope at the prox: none inside the domain, inward at an end.

    The slope is divided by the root of the objective's curvature, which makes it the distance from the
    minimiser over the width of the minimum.
    """
    slope = likelihood.gradient(prox) + (prox - v) / step
    width = 1.0 / np.sqrt(np.maximum(likelihood.curvature(prox), 0.0) + 1.0 / step)
    allowed = 1e-6 + 16.0 * precision * (np.abs(v) + np.abs(prox)) / width
    claim = f"(v - prox(v)) / step is not the gradient there, in widths of the minimum, at step {step:.3g}"
    down = np.where(prox <= likelihood.domain.low, 0.0, slope * width)
    up = np.where(prox >= likelihood.domain.high, 0.0, slope * width)
    require_at_most(likelihood, claim, down, 0.0, allowed, prox)
    require_at_most(likelihood, claim, -up, 0.0, allowed, prox)


def _check_rivals(likelihood: Likelihood, prox: np.ndarray, v: np.ndarray, step: float) -> None:
    """Check that the objective is no lower beside the prox: it is convex, so nowhere."""
    domain = likelihood.domain

    def objective(x: np.ndarray) -> np.ndarray:
        return likelihood.value_map(x) + (x - v) ** 2 / (2.0 * step)

    reached = objective(prox)
    width = 1.0 / np.sqrt(np.maximum(likelihood.curvature(prox), 0.0) + 1.0 / step)
    for away in (-1.0, -0.01, 0.01, 1.0):
        rival = prox + away * width
        rival = np.where((rival > domain.low) & (rival < domain.high), rival, prox)
        claim = f"prox is not the minimiser: a pixel beside it has a lower objective, at step {step:.3g}"
        allowed = 1e-9 * (1.0 + np.abs(reached))
        require_at_most(likelihood, claim, reached, objective(rival), allowed, prox)
