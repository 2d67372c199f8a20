"""Gradient and curvature against differences.

A difference over an interval equals the mean of the derivative over it. The mean is taken by
Gauss-Legendre quadrature, so that the interval can be wide and rounding does not drown the difference.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.testing import points
from recon.testing.errors import fail, require_close

RELATIVE = 1e-6
ROUNDING = 1e-12
HALVINGS = 16

Map = Callable[[np.ndarray], np.ndarray]


def check_derivatives(likelihood: Likelihood, rng: np.random.Generator) -> None:
    """Check gradient against value_map and curvature against gradient."""
    low, high = points.span(likelihood)
    for x in points.images(likelihood, rng):
        radius = 0.2 * np.minimum(0.5 * (high - low), np.minimum(x - low, high - x))
        _compare(
            likelihood,
            "gradient is not the derivative of value_map",
            likelihood.value_map,
            likelihood.gradient,
            x,
            radius,
            1.0,
        )
        score = np.sqrt(np.maximum(likelihood.fisher_information(x), 0.0))
        _compare(
            likelihood,
            "curvature is not the derivative of gradient",
            likelihood.gradient,
            likelihood.curvature,
            x,
            radius,
            score,
        )


def _compare(
    likelihood: Likelihood,
    claim: str,
    function: Map,
    derivative: Map,
    x: np.ndarray,
    radius: np.ndarray,
    unit: float | np.ndarray,
) -> None:
    """Raise ConformanceError unless the mean of derivative around x is the slope of function there.

    unit: the natural size of function, below which its rounding is forgiven.
    """
    for _ in range(HALVINGS):
        below, above = x - radius, x + radius
        mean, size = _mean(derivative, below, above, 7)
        start, end = function(below), function(above)
        slope = (end - start) / (above - below)
        noise = ROUNDING * (np.abs(start) + np.abs(end) + np.abs(x) * size + unit) / (above - below)
        allowed = RELATIVE * size + noise
        wild = ~(np.abs(mean - _mean(derivative, below, above, 4)[0]) <= 0.1 * allowed)
        missed = ~(np.abs(mean - slope) <= allowed)  # perhaps a feature between the nodes
        if not np.any(wild | missed):
            return
        radius = np.where(wild | missed, 0.5 * radius, radius)
    require_close(likelihood, claim, np.where(wild, slope, mean), slope, allowed, x)
    place = tuple(int(i) for i in np.argwhere(wild)[0])
    where = f"pixel {place}, x = {x[place]:.9g}"
    fail(likelihood, f"{claim.split()[0]} is not smooth", "values that jump", "a continuous function", where)


def _mean(derivative: Map, below: np.ndarray, above: np.ndarray, nodes: int) -> tuple[np.ndarray, np.ndarray]:
    """Return the mean of derivative over [below, above], and the largest size it has there."""
    mean, size = np.zeros(below.shape), np.zeros(below.shape)
    for node, weight in zip(*np.polynomial.legendre.leggauss(nodes), strict=True):
        part = derivative(below + 0.5 * (1.0 + node) * (above - below))
        mean += 0.5 * weight * part
        size = np.maximum(size, np.abs(part))
    return mean, size
