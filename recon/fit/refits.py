"""Simulated data, fitted as the real data were: what a statistic is like if the model is right.

A fit takes part of the noise for image, so residuals scatter less than the law says; how much less, the
degrees of freedom, only refitting tells (the parametric bootstrap of Efron 1979). An image that was smoothed
has lost structure, though, and data drawn from it lose less when they are smoothed again. How much a scene
has to lose is seen from two pairs of draws that are fitted alike: from the image and from a rougher one,
fitted to the real data with 0.7 times the weights; and from the image and from a smoother one, with twice
the weights, both fitted with twice the weights.
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

DRAWS = 4  # of each kind
LONE_DRAWS = 2  # for the number of lone pixels, which is nearly Poisson
ROUGHER, SMOOTHER = 0.7, 2.0  # times the weights
TOLERANCE = 1e-3


@dataclass(frozen=True, eq=False)
class Summary:
    """The statistics of one data set and its fit.

    dispersion: of squared residuals where the law has no closed form. deviance: twice the likelihood's value.
    structure: see `recon.fit.structure`.
    """

    dispersion: float
    deviance: float
    structure: np.ndarray


@dataclass(frozen=True, eq=False)
class Drawn:
    """Draws from one image, each fitted again: summaries at the fits, and at the image they come from."""

    fits: list[Summary]
    known: list[Summary]

    def offset(self) -> tuple[float, float]:
        """Return what fitting does to the dispersion, and the standard error of that."""
        values = [fit.dispersion - one.dispersion for fit, one in zip(self.fits, self.known, strict=True)]
        return float(np.mean(values)), float(np.std(values, ddof=1) / np.sqrt(len(values)))


@dataclass(frozen=True, eq=False)
class Refits:
    """Summaries of draws.

    plain: from the image. rough: from the rougher image. heavy: those of plain, fitted with `SMOOTHER` times
    the weights. smooth: from the image so fitted, with as much. smoother: that image; heavy_fits: the draws
    of heavy, and their images. lone: numbers of lone bright pixels of draws from the image without peaks of a
    single pixel, which may be what hot pixels left in it.
    """

    plain: Drawn
    rough: Drawn
    heavy: Drawn
    smooth: Drawn
    smoother: np.ndarray
    heavy_fits: list[tuple[Likelihood, np.ndarray]]
    lone: list[float]


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
    law = count_law(likelihood, x)
    found = structure(standard_residuals(likelihood, law, x))
    return Summary(_dispersion(likelihood, law, x, likelihood.has_data), 2.0 * likelihood.value(x), found)


def trimmed(likelihood: Likelihood, x: np.ndarray) -> float:
    """Return the dispersion of what is not rather bright and lone."""
    rest = likelihood.has_data & ~lone_pixels(likelihood, x, RATHER_RARE)
    return _dispersion(likelihood, count_law(likelihood, x), x, rest)


def _dispersion(likelihood: Likelihood, law: CountLaw | None, x: np.ndarray, shown: np.ndarray) -> float:
    if law is not None and law.has_moments:
        return dispersion(law, shown)
    residuals = likelihood.residuals(x) if law is None else quantile_residuals(likelihood, x)
    return float(np.mean(residuals[shown] ** 2)) if shown.any() else np.nan


def fitted(image: PhysicalImage, likelihood: Likelihood, factor: float, start: np.ndarray) -> np.ndarray:
    """Return the image of a likelihood, with the priors of `image`, their weights times a factor."""
    terms = [term.with_weight(term.weight * factor) for term in image.priors]
    solver = "conic" if any(term.conic_only for term in terms) else None
    problem = Problem(likelihood, terms, image.bounds)
    tolerance = max(TOLERANCE, image.tolerance)
    return solve(problem, solver=solver, tolerance=tolerance, max_iterations=4000, start=start).image


def refits(image: PhysicalImage, seed: int, callback: Callable[[float], object] | None = None) -> Refits:
    """Draw from the image, a rougher one and a smoother one, and fit each draw.

    callback: called with the share that is done.
    """
    likelihood, done, fits_to_make = image.problem.likelihood, 0, 4 * DRAWS + LONE_DRAWS

    def fits(drawn: list[Likelihood], factor: float, start: np.ndarray) -> list[np.ndarray]:
        nonlocal done
        found = []
        for one in drawn:
            found.append(fitted(image, one, factor, start))
            done += 1
            if callback is not None:
                callback(done / fits_to_make)
        return found

    def summaries(drawn: list[Likelihood], images: list[np.ndarray]) -> list[Summary]:
        return [summary(one, fit) for one, fit in zip(drawn, images, strict=True)]

    def draws(kind: int, number: int) -> list[Likelihood]:
        rngs = (np.random.default_rng((seed, kind, b)) for b in range(number))
        return [likelihood.draw(truths[kind], rng) for rng in rngs]

    x, low = image.image, image.bounds[0]
    rougher, smoother = (fitted(image, likelihood, factor, x) for factor in (ROUGHER, SMOOTHER))
    # a pixel that waits for what never comes waits for ever
    truths = [
        np.maximum(truth, max(FLOOR * float(truth.mean()), low))
        for truth in (x, rougher, smoother, without_peaks(x))
    ]
    plain, rough, smooth = (draws(kind, DRAWS) for kind in range(3))
    even = draws(3, LONE_DRAWS)
    known, known_rough, known_smooth = (
        summaries(drawn, [truth] * DRAWS)
        for drawn, truth in zip((plain, rough, smooth), truths[:3], strict=True)
    )
    heavy = fits(plain, SMOOTHER, smoother)
    return Refits(
        plain=Drawn(summaries(plain, fits(plain, 1.0, x)), known),
        rough=Drawn(summaries(rough, fits(rough, 1.0, x)), known_rough),
        heavy=Drawn(summaries(plain, heavy), known),
        smooth=Drawn(summaries(smooth, fits(smooth, SMOOTHER, smoother)), known_smooth),
        smoother=smoother,
        heavy_fits=list(zip(plain, heavy, strict=True)),
        lone=[float(lone_pixels(*one).sum()) for one in zip(even, fits(even, 1.0, x), strict=True)],
    )
