"""Simulated data, fitted as the real data were: what a statistic is like if the model is right.

A fit takes part of the noise for image, so residuals scatter less than the law says; how much less, the
degrees of freedom, only refitting tells (the parametric bootstrap of Efron 1979). An image that was smoothed
has lost structure, though, and data drawn from it lose less when they are smoothed again. A second set of
draws, from a rougher image, fitted to the real data with 0.7 times the weights, shows how the dispersion
changes with the structure there is to lose.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from recon.fit.count_laws import CountLaw, count_law
from recon.fit.dispersion import dispersion
from recon.fit.quantile_residuals import quantile_residuals
from recon.fit.structure import structure
from recon.fit.tails import RATHER_RARE, lone_pixels, without_peaks
from recon.imaging.image import PhysicalImage
from recon.likelihoods.contract import Likelihood
from recon.problem import Problem
from recon.solvers import solve
from recon.weights.scoring import FLOOR

DRAWS = 5  # of each kind
LONE_DRAWS = 2  # for the number of lone pixels, which is nearly Poisson
ROUGHER = 0.7  # of the weights
TOLERANCE = 1e-3


@dataclass(frozen=True, eq=False)
class Summary:
    """The statistics of one data set and its fit.

    dispersion: NaN without a law in closed form. deviance: twice the likelihood's value. structure: see
    `recon.fit.structure`. lone: number of lone bright pixels. trimmed: the dispersion of what is not rather
    bright and lone.
    """

    dispersion: float
    deviance: float
    structure: np.ndarray
    lone: float
    trimmed: float


@dataclass(frozen=True, eq=False)
class Refits:
    """Summaries of draws: from the image and from a rougher one.

    known_plain, known_rough: of the same draws, at the image they were drawn from, where the mean of the
    dispersion is known to be 1. lone: numbers of lone bright pixels of draws from the image without peaks of
    a single pixel, which may be what hot pixels left in it.
    """

    plain: list[Summary]
    rough: list[Summary]
    known_plain: list[Summary]
    known_rough: list[Summary]
    lone: list[float]

    def offset(self) -> tuple[float, float]:
        """Return what fitting does to the dispersion, and the standard error of that."""
        return _difference(self.plain, self.known_plain)

    def rough_offset(self) -> tuple[float, float]:
        """The same of data drawn from the rougher image."""
        return _difference(self.rough, self.known_rough)

    @property
    def trimmed(self) -> float:
        """The trimmed dispersion that is expected."""
        return float(np.mean([s.trimmed for s in self.plain]))


def _difference(fits: list[Summary], known: list[Summary]) -> tuple[float, float]:
    values = [fit.dispersion - one.dispersion for fit, one in zip(fits, known, strict=True)]
    return float(np.mean(values)), float(np.std(values, ddof=1) / np.sqrt(len(values)))


def standard_residuals(likelihood: Likelihood, law: CountLaw | None, x: np.ndarray) -> np.ndarray:
    """Return (k - m) / sqrt(v), NaN without data; deviance residuals where there is no law."""
    shown = likelihood.has_data
    if law is None:
        return np.where(shown, likelihood.residuals(x), np.nan)
    with np.errstate(divide="ignore", invalid="ignore"):
        # where next to nothing is expected, a detection would decide alone
        return np.where(shown, (law.number - law.mean) / np.sqrt(law.variance + 1e-2), np.nan)


def summary(likelihood: Likelihood, x: np.ndarray) -> Summary:
    """Return the statistics of a likelihood at an image."""
    shown = likelihood.has_data
    law = count_law(likelihood, x)
    value = 2.0 * likelihood.value(x)
    found = structure(standard_residuals(likelihood, law, x))
    lone = float(np.sum(lone_pixels(likelihood, x)))
    rest = shown & ~lone_pixels(likelihood, x, RATHER_RARE)
    if law is not None and law.has_moments:
        return Summary(dispersion(law, shown), value, found, lone, dispersion(law, rest))
    residuals = likelihood.residuals(x) if law is None else quantile_residuals(likelihood, x)
    index, trimmed = (
        float(np.mean(residuals[which] ** 2)) if which.any() else np.nan for which in (shown, rest)
    )
    return Summary(index, value, found, lone, trimmed)


def fitted(image: PhysicalImage, likelihood: Likelihood, factor: float, start: np.ndarray) -> np.ndarray:
    """Return the image of a likelihood, with the priors of `image`, their weights times a factor."""
    terms = [term.with_weight(term.weight * factor) for term in image.priors]
    solver = "conic" if any(term.conic_only for term in terms) else None
    problem = Problem(likelihood, terms, image.bounds)
    tolerance = max(TOLERANCE, image.tolerance)
    return solve(problem, solver=solver, tolerance=tolerance, max_iterations=4000, start=start).image


def refits(image: PhysicalImage, seed: int, callback: Callable[[float], object] | None = None) -> Refits:
    """Draw from the image and from a rougher one, and fit each draw.

    callback: called with the share that is done.
    """
    likelihood = image.problem.likelihood
    rough = fitted(image, likelihood, ROUGHER, image.image)
    found: list[tuple[list[Summary], list[Summary]]] = []
    kinds = ((image.image, DRAWS), (rough, DRAWS), (without_peaks(image.image), LONE_DRAWS))
    for kind, (truth, number) in enumerate(kinds):
        # a pixel that waits for what never comes waits for ever
        truth = np.maximum(truth, max(FLOOR * float(truth.mean()), image.bounds[0]))
        fits, known = [], []
        for b in range(number):
            drawn = likelihood.draw(truth, np.random.default_rng((seed, kind, b)))
            known.append(summary(drawn, truth))
            fits.append(summary(drawn, fitted(image, drawn, 1.0, image.image)))
            if callback is not None:
                callback((kind * DRAWS + b + 1.0) / (2.0 * DRAWS + LONE_DRAWS))
        found.append((fits, known))
    (plain, known_plain), (rougher, known_rough), (smooth, _) = found
    return Refits(plain, rougher, known_plain, known_rough, [s.lone for s in smooth])
