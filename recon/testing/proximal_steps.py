"""The in-place float32 step of a likelihood against what the contract says it does with the prox.

A compiled step may iterate from the image it is given and stop early, if that cannot be seen where a
solve settles. So the step must be right over a short way, over which the curvature hardly changes; and
over a long way, when it is repeated for the same v = x - step adjoint.
"""

from __future__ import annotations

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.testing import points
from recon.testing.errors import require, require_at_most, require_close
from recon.testing.proximal import steps

SINGLE = 1e-5
SHORT = 0.1
UNFINISHED = 1e-3
"""Part of a short way that may be left to later steps."""

REPEATS = 10

Bounds = tuple[float, float]


def check_proximal_step(likelihood: Likelihood, rng: np.random.Generator) -> None:
    """Check proximal_step over short ways and long ones, for steps of several lengths."""
    low, high = points.span(likelihood)
    bounds = (0.9 * low + 0.1 * high, 0.1 * low + 0.9 * high)
    for image in points.images(likelihood, rng):
        x = np.clip(image, *bounds).astype(np.float32)
        for step in steps(likelihood, image):
            target = np.clip(_short_way(likelihood, x.astype(np.float64), step, rng), *bounds)
            adjoint = (x - target) / step - likelihood.gradient(target)
            _check_step(likelihood, x, adjoint, step, bounds, float(rng.uniform(1.0, 1.9)))
            v = x + rng.standard_normal(x.shape) * (high - low)
            _check_repeated(likelihood, x, v, step, bounds)


def _short_way(likelihood: Likelihood, x: np.ndarray, step: float, rng: np.random.Generator) -> np.ndarray:
    """Return an image a tenth of the minimum's width from x, nearer where the curvature changes much."""
    curvature = np.maximum(likelihood.curvature(x), 0.0)
    target = x + SHORT / np.sqrt(curvature + 1.0 / step) * rng.standard_normal(x.shape)
    for _ in range(30):
        inside = (target > likelihood.domain.low) & (target < likelihood.domain.high)
        target = np.where(inside, target, x)
        change = np.abs(likelihood.curvature(target) - curvature)
        target = np.where(change > SHORT * curvature, 0.5 * (x + target), target)
    return target


def _exact(likelihood: Likelihood, v: np.ndarray, step: float, bounds: Bounds) -> np.ndarray:
    return np.clip(np.asarray(likelihood.prox(v, step), np.float64), *bounds)


def _rounding(
    likelihood: Likelihood, x: np.ndarray, v: np.ndarray, step: float, proposed: np.ndarray
) -> np.ndarray:
    return SINGLE * (np.abs(x) + np.abs(v) + np.abs(proposed) + step * np.abs(likelihood.gradient(x)))


def _check_step(
    likelihood: Likelihood,
    start: np.ndarray,
    adjoint: np.ndarray,
    step: float,
    bounds: Bounds,
    relaxation: float,
) -> None:
    x, adjoint, extrapolated = start.copy(), adjoint.astype(np.float32), np.full_like(start, np.nan)
    start, kept = start.astype(np.float64), adjoint.astype(np.float64)
    likelihood.proximal_step(x, adjoint, extrapolated, step, relaxation, *bounds)
    claim = "proximal_step overwrites adjoint"
    require(np.array_equal(adjoint, kept), likelihood, claim, "other numbers", "the same")
    v = start - step * kept
    proposed = _exact(likelihood, v, step, bounds)
    allowed = _rounding(likelihood, start, v, step, proposed) + UNFINISHED * np.abs(proposed - start)
    outputs = (
        ("x", x, start + relaxation * (proposed - start)),
        ("extrapolated image", extrapolated, 2.0 * proposed - start),
    )
    for name, got, expected in outputs:
        claim = f"proximal_step leaves another {name} than the clipped prox does, at step {step:.3g}"
        require_close(likelihood, claim, got, expected, 2.0 * allowed, start)


def _check_repeated(
    likelihood: Likelihood, start: np.ndarray, v: np.ndarray, step: float, bounds: Bounds
) -> None:
    x, extrapolated = start.copy(), np.empty_like(start)
    for _ in range(REPEATS):
        before = x.astype(np.float64)
        adjoint = ((before - v) / step).astype(np.float32)
        likelihood.proximal_step(x, adjoint, extrapolated, step, 1.0, *bounds)
        allowed = SINGLE * (np.abs(before) + np.abs(x) + max(map(abs, bounds)))
        claim = f"proximal_step leaves x above its upper bound, at step {step:.3g}"
        require_at_most(likelihood, claim, x, bounds[1], allowed, before)
        claim = f"proximal_step leaves x below its lower bound, at step {step:.3g}"
        require_at_most(likelihood, claim, -x, -bounds[0], allowed, before)
        claim = f"proximal_step leaves an extrapolated image that is not 2 x~ - x, at step {step:.3g}"
        require_close(likelihood, claim, extrapolated, 2.0 * x - before, 2.0 * allowed, before)
    expected = _exact(likelihood, v, step, bounds)
    claim = f"proximal_step does not come to the clipped prox in {REPEATS} goes at one v, at step {step:.3g}"
    require_close(likelihood, claim, x, expected, _rounding(likelihood, start, v, step, expected), start)
