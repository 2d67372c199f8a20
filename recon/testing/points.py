"""The images a likelihood is tested at."""

from __future__ import annotations

import numpy as np

from recon.likelihoods.contract import Likelihood


def span(likelihood: Likelihood) -> tuple[float, float]:
    """Return a finite interval that the test images fill.

    Each end is that of the domain if it is finite, else that of the default bounds, else the estimate's
    with a margin.
    """
    estimate = np.asarray(likelihood.estimate(), np.float64)
    margin = float(np.ptp(estimate)) + 0.1 * float(np.max(np.abs(estimate))) or 1.0
    domain, bounds = likelihood.domain, likelihood.default_bounds
    low = next(v for v in (domain.low, bounds[0], float(estimate.min()) - margin) if np.isfinite(v))
    high = next(v for v in (domain.high, bounds[1], float(estimate.max()) + margin) if np.isfinite(v))
    return float(low), float(high)


def inside(likelihood: Likelihood, x: np.ndarray) -> np.ndarray:
    """Return x moved into the span, a thousandth of its width from the ends."""
    low, high = span(likelihood)
    return np.clip(np.asarray(x, np.float64), low + 1e-3 * (high - low), high - 1e-3 * (high - low))


def typical(likelihood: Likelihood, rng: np.random.Generator) -> np.ndarray:
    """Return an image near the level of the data, well inside the span: what could be true."""
    low, high = span(likelihood)
    seen = inside(likelihood, likelihood.estimate())[likelihood.has_data]
    level = float(np.mean(seen)) if seen.size else 0.5 * (low + high)
    return level + 0.3 * min(level - low, high - level) * rng.uniform(-1.0, 1.0, likelihood.shape)


def images(likelihood: Likelihood, rng: np.random.Generator) -> list[np.ndarray]:
    """Return images inside the domain: anywhere in the span, close to its low end, near the data."""
    low, high = span(likelihood)
    shape = likelihood.shape
    anywhere = rng.uniform(low, high, shape)
    close = low + (high - low) * 10.0 ** rng.uniform(-4.0, -1.0, shape)
    near = inside(likelihood, likelihood.estimate())
    curvature = np.asarray(likelihood.curvature(near), np.float64)
    spread = np.minimum((high - low) / 10.0, 1.0 / np.sqrt(np.maximum(curvature, 1e-300)))
    near = inside(likelihood, near + 0.5 * spread * rng.standard_normal(shape))
    return [inside(likelihood, anywhere), close, near, typical(likelihood, rng)]
