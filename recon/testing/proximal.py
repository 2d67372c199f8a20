"""Prox of a likelihood against its definition, and the solver's step against the prox."""

from __future__ import annotations

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.testing import points
from recon.testing.errors import require, require_at_most, require_close

STEPS = (1e-3, 1e-1, 1.0, 1e2)
SINGLE = 1e-5
FAR, NEAR = 0.1, 1e-3


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


def check_proximal_step(likelihood: Likelihood, rng: np.random.Generator) -> None:
    """Check the in-place float32 step against what the contract says it does with the prox.

    A compiled step may iterate from x, if its error vanishes where a solve settles: it may be a tenth
    (FAR) of a way as long as the image, and a thousandth (NEAR) of a tenth of the minimum's width.
    """
    low, high = points.span(likelihood)
    low, high = 0.9 * low + 0.1 * high, 0.1 * low + 0.9 * high
    for image in points.images(likelihood, rng):
        x = np.clip(image, low, high).astype(np.float32)
        curvature = np.maximum(likelihood.curvature(x), 0.0)
        for step in steps(likelihood, image):
            away = rng.standard_normal(x.shape) * (high - low) / step
            _check_step(likelihood, x, away, step, FAR, (low, high), float(rng.uniform(1.0, 1.9)))
            width = 1.0 / np.sqrt(curvature + 1.0 / step)
            target = np.clip(x + 0.1 * width * rng.standard_normal(x.shape), low, high)
            towards = (x - target) / step - likelihood.gradient(target)
            _check_step(likelihood, x, towards, step, NEAR, (low, high), float(rng.uniform(1.0, 1.9)))


def _check_step(
    likelihood: Likelihood, x: np.ndarray, adjoint: np.ndarray, step: float, iterated: float,
    bounds: tuple[float, float], relaxation: float,
) -> None:
    start, x, adjoint = x.astype(np.float64), x.copy(), adjoint.astype(np.float32)
    kept, extrapolated = adjoint.astype(np.float64), np.full_like(x, np.nan)
    proposed = np.clip(np.asarray(likelihood.prox(start - step * kept, step), np.float64), *bounds)
    likelihood.proximal_step(x, adjoint, extrapolated, step, relaxation, *bounds)
    claim = "proximal_step overwrites adjoint"
    require(np.array_equal(adjoint, kept), likelihood, claim, "other numbers", "the same")
    size = np.abs(start) + np.abs(proposed) + step * (np.abs(kept) + np.abs(likelihood.gradient(start)))
    allowed = SINGLE * size + 2.0 * iterated * np.abs(proposed - start)  # both outputs double an error
    outputs = (
        ("x", x, start + relaxation * (proposed - start)),
        ("extrapolated image", extrapolated, 2.0 * proposed - start),
    )
    for name, got, expected in outputs:
        claim = f"proximal_step leaves another {name} than the clipped prox does, at step {step:.3g}"
        require_close(likelihood, claim, got, expected, allowed, start)
