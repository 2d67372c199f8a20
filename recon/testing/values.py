"""Value of a likelihood: half a deviance, zero at a perfect fit, nothing where there is no data."""

from __future__ import annotations

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.testing import points
from recon.testing.errors import require, require_at_most, require_close, require_finite

ROUNDING = 1e-9
PAIRS = 40
MAPS = ("value_map", "gradient", "curvature", "fisher_information", "residuals")


def check_declarations(likelihood: Likelihood) -> None:
    """Check shape, domain, bounds, constant, estimate and has_data."""
    shape, domain = likelihood.shape, likelihood.domain
    require(domain.low < domain.high, likelihood, "domain is empty", domain, "low below high")
    low, high = likelihood.default_bounds
    require(low < high, likelihood, "default_bounds are empty", (low, high), "low below high")
    require(
        domain.low <= low and high <= domain.high,
        likelihood,
        "default_bounds leave the domain",
        (low, high),
        f"bounds within [{domain.low}, {domain.high}]",
    )
    for end, is_open in ((domain.low, domain.low_open), (domain.high, domain.high_open)):
        if np.isfinite(end) and not is_open:
            image = np.full(shape, float(end))
            with np.errstate(divide="ignore", invalid="ignore"):
                deviance = likelihood.value_map(image)
            claim = "value_map is not finite at a closed end of the domain"
            require_finite(likelihood, claim, deviance, image)
    require(np.isfinite(likelihood.constant), likelihood, "constant", likelihood.constant, "a finite number")
    data, estimate = likelihood.has_data, likelihood.estimate()
    for name, array, dtype in (("has_data", data, np.bool_), ("estimate", estimate, np.float32)):
        got = f"{array.dtype} {array.shape}"
        expected = f"{np.dtype(dtype)} {tuple(shape)}"
        require(got == expected, likelihood, f"{name} has the wrong type or shape", got, expected)
    require(np.isfinite(estimate).all(), likelihood, "estimate is not finite", estimate, "finite numbers")


def check_values(likelihood: Likelihood, rng: np.random.Generator) -> None:
    """Check that maps are float64, that value is the sum of value_map >= 0, and what float32 gives."""
    for x in points.images(likelihood, rng):
        deviance = _map(likelihood, "value_map", x)
        require_at_most(likelihood, "value_map is negative", -deviance, 0.0, ROUNDING, x)
        for name in MAPS[1:]:
            _map(likelihood, name, x)
        total = float(np.sum(deviance))
        require_close(
            likelihood,
            "value is not the sum of value_map",
            likelihood.value(x),
            total,
            ROUNDING * (1.0 + total),
        )
        single = x.astype(np.float32)
        expected = likelihood.value_map(single.astype(np.float64))
        require_close(
            likelihood,
            "value_map of a float32 image differs from that of the same numbers in float64",
            likelihood.value_map(single),
            expected,
            1e-5 * (1.0 + expected),
            single,
        )


def _map(likelihood: Likelihood, name: str, x: np.ndarray) -> np.ndarray:
    got = getattr(likelihood, name)(x)
    found, expected = f"{got.dtype} {got.shape}", f"float64 {x.shape}"
    require(found == expected, likelihood, f"{name} has the wrong type or shape", found, expected)
    require_finite(likelihood, f"{name} is not finite inside the domain", got, x)
    return got


def check_perfect_fit(likelihood: Likelihood, rng: np.random.Generator) -> None:
    """Check that no image within the default bounds beats the estimate, and that a perfect fit is worth zero.

    A pixel whose best fit lies beyond the bounds (every trial detected, fewer detections than the
    background gives) has to stop somewhere, and is let off the first.
    """
    low, high = likelihood.default_bounds
    ends = [points.inside(likelihood, np.full(likelihood.shape, end)) for end in (low, high)]
    ends = [np.clip(end, low, high) for end in ends]
    inner = (likelihood.gradient(ends[0]) <= 0.0) & (likelihood.gradient(ends[1]) >= 0.0)
    estimate = likelihood.estimate().astype(np.float64)
    deviance = likelihood.value_map(estimate)
    for x in points.images(likelihood, rng):
        rival = np.where(inner, likelihood.value_map(np.clip(x, *ends)), np.inf)
        claim = "estimate fits worse than another image"
        require_at_most(likelihood, claim, deviance, rival, 1e-5 * (1.0 + deviance), estimate)
    with np.errstate(invalid="ignore"):
        information = np.maximum(likelihood.curvature(estimate), likelihood.fisher_information(estimate))
        stationary = np.abs(likelihood.gradient(estimate)) <= 1e-3 * np.sqrt(information)
    perfect = np.where(likelihood.has_data & stationary, deviance, 0.0)
    require_close(likelihood, "value_map is not zero at a perfect fit", perfect, 0.0, 1e-5, estimate)


def check_missing_pixels(likelihood: Likelihood, rng: np.random.Generator) -> None:
    """Check that pixels with no data contribute exactly zero."""
    missing = ~likelihood.has_data
    for x in points.images(likelihood, rng):
        for name in MAPS:
            got = np.where(missing, getattr(likelihood, name)(x), 0.0)
            require_close(likelihood, f"{name} is not zero where there is no data", got, 0.0, 0.0, x)


def check_convexity(likelihood: Likelihood, rng: np.random.Generator) -> None:
    """Check that no value lies above a chord and no curvature is negative."""
    low, high = points.span(likelihood)
    for _ in range(PAIRS):
        start = points.inside(likelihood, rng.uniform(low, high, likelihood.shape))
        reach = (high - low) * 10.0 ** rng.uniform(-3.0, 0.0, likelihood.shape)
        end = points.inside(likelihood, start + reach * rng.choice([-1.0, 1.0], likelihood.shape))
        ends = likelihood.value_map(start) + likelihood.value_map(end)
        middle = likelihood.value_map(0.5 * (start + end))
        claim = "value_map is declared convex and lies above its chord"
        require_at_most(likelihood, claim, middle, 0.5 * ends, ROUNDING * (1.0 + ends), 0.5 * (start + end))
        curvature = likelihood.curvature(start)
        claim = "curvature is negative in a likelihood declared convex"
        require_at_most(likelihood, claim, -curvature, 0.0, ROUNDING * np.max(np.abs(curvature)), start)


def check_residuals(likelihood: Likelihood, rng: np.random.Generator) -> None:
    """Check that residuals are the signed root of the deviance, positive where the data want a larger x."""
    for x in points.images(likelihood, rng):
        residuals, deviance = likelihood.residuals(x), 2.0 * likelihood.value_map(x)
        claim = "the square of residuals is not twice value_map"
        require_close(likelihood, claim, residuals**2, deviance, ROUNDING * (1.0 + deviance), x)
        upward = -np.sign(likelihood.gradient(x))
        if not likelihood.convex:  # the slope may point away from the best fit: then either sign will do
            upward = np.where(upward == np.sign(likelihood.estimate() - x), upward, 0.0)
        claim = "residuals have the wrong sign: positive means that the data ask for a larger x"
        require_at_most(likelihood, claim, -residuals * upward, 0.0, 1e-4, x)
