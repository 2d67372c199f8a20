"""Weights from all the data at once: the discrepancy rule, and an unbiased estimate of the risk.

Both walk along the same path of factors as `held_out.choose`, with one fit a factor (three for the risk).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np

from recon.errors import InputError
from recon.likelihoods.contract import Likelihood
from recon.problem import Prior, Problem
from recon.weights.held_out import LIMIT, MOST, RATIO, Choice, at_factor, chosen_at, downhill, fitted
from recon.weights.response import response
from recon.weights.scoring import scoring_step

SEED = 20_240_520
CLOSE = 2e-5  # tolerance of the fits whose difference is taken
NUDGE = 0.25  # of the noise: by so much data are moved


@dataclass
class _Fits:
    """Fits to all data along the path, each started from the nearest one before."""

    likelihood: Likelihood
    terms: Sequence[Prior]
    is_open: Sequence[bool]
    bounds: tuple[float, float]
    callback: Callable[[float], object] | None = None
    images: dict[float, np.ndarray] = field(default_factory=dict)

    def problem(self, factor: float) -> Problem:
        return Problem(self.likelihood, at_factor(self.terms, self.is_open, factor), self.bounds)

    def at(self, factor: float) -> np.ndarray:
        if factor not in self.images:
            if self.callback is not None:
                self.callback(factor)
            near = min(self.images, key=lambda other: abs(math.log(other / factor)), default=None)
            start = None if near is None else self.images[near]
            self.images[factor] = fitted(self.problem(factor), start)
        return self.images[factor]


def discrepancy(
    likelihood: Likelihood,
    terms: Sequence[Prior],
    is_open: Sequence[bool],
    bounds: tuple[float, float],
    callback: Callable[[float], object] | None = None,
) -> Choice:
    """Return the factor at which residuals are as large as noise (Morozov 1966).

    The sum over pixels with data of (dL/dx)^2 / I, I the Fisher information at the image, is their number,
    as it is on average at the truth; (count - mean)^2 / mean for Poisson counts. It smooths more than is
    best, since an image that is right would leave no less. `score` is the sum less the number. callback:
    called with every factor that is tried.
    """
    fits, found = _Fits(likelihood, terms, is_open, bounds, callback), {}

    def excess(factor: float) -> float:
        if factor not in found:
            off, information, _ = scoring_step(likelihood, fits.at(factor))
            found[factor] = float(np.sum(off**2 * information - 1.0, where=likelihood.has_data))
        return found[factor]

    at = 0
    direction = 1 if excess(1.0) < 0.0 else -1
    while len(found) < MOST and (excess(RATIO**at) < 0.0) == (direction > 0):
        at += direction
    factors = np.array(sorted(found))
    score = np.array([found[f] for f in factors])
    crossed = score.min() < 0.0 <= score.max()
    factor = float(np.exp(np.interp(0.0, score, np.log(factors)))) if crossed else RATIO**at
    side = "below" if score[-1] < 0.0 else "above"
    note = "" if crossed else f"residuals stay {side} noise at any weight tried"
    return Choice(factor, None, factors, score, np.full(factors.size, np.nan), 0, not crossed, note)


def least_risk(
    likelihood: Likelihood,
    terms: Sequence[Prior],
    is_open: Sequence[bool],
    bounds: tuple[float, float],
    callback: Callable[[float], object] | None = None,
) -> Choice:
    """Return the factor with the least unbiased estimate of the squared error.

        sum of (x - v)^2 + 2 var(v) dx / dv,     v the unbiased estimate of each pixel

    is the squared error but for a constant, for Gaussian readings exactly (Stein 1981), for Poisson counts
    to first order (Chen 1975; Hudson 1978). The sum of var dx / dv is found from fits to data
    moved by a quarter of their noise, up or down at random (Ramani, Blu and Unser 2008), the same for all
    weights. callback: called with every factor that is tried.

    Raises InputError for a likelihood whose score is not linear (`Likelihood.has_linear_score`).
    """
    if not likelihood.has_linear_score:
        raise InputError(
            f"weight is 'risk', but {type(likelihood).__name__} has no unbiased estimate of the risk; give"
            " 'auto', which needs none."
        )
    fits, found = _Fits(likelihood, terms, is_open, bounds, callback), {}
    signs = np.random.default_rng(SEED).choice((-1.0, 1.0), size=likelihood.shape)

    def risk(factor: float) -> float:
        if factor not in found:
            x = fits.at(factor)
            off, information, _ = scoring_step(likelihood, x)
            root = np.sqrt(information)
            gives = response(fits.problem(factor), NUDGE * signs * root, x, CLOSE, LIMIT)
            moved = _variance(likelihood, x - off) / NUDGE * root * signs * gives
            found[factor] = float(np.sum(off**2 + moved, where=likelihood.has_data))
        return found[factor]

    best = downhill(risk, found)
    factors = np.array(sorted(found))
    score = np.array([found[f] for f in factors])
    return chosen_at(best, factors, score - score.min(), np.full(factors.size, np.nan))


WHOLE_DATA: dict[str, Callable[..., Choice]] = {"discrepancy": discrepancy, "risk": least_risk}


def _variance(likelihood: Likelihood, estimate: np.ndarray) -> np.ndarray:
    """Return an unbiased estimate of the variance of the unbiased estimate: that of the law at it."""
    with np.errstate(divide="ignore", invalid="ignore"):
        variance = 1.0 / likelihood.fisher_information(estimate)
    return np.where(np.isfinite(variance), variance, 0.0)
