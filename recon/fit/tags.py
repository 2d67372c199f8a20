"""Whether time tags lie about the surface as the pulse says, and away from it as the background says."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
from scipy.stats import norm

from recon.fit.statistic import Statistic, normal_statistic, simulated_statistic
from recon.imaging.depth import DepthImage
from recon.likelihoods.detection_times import DetectionTimes
from recon.problem import Problem
from recon.solvers import solve

REACH = 3.0  # of the pulse's core, within which tags are asked
CERTAIN = 0.02  # largest chance of a wrong surface in a pixel that is asked
DRAWS = 5
REFITS = 2  # tags near a surface are many, so that few draws tell what is expected
ROUGHLY = 3e-2  # gap of a refit: what is left moves surfaces by little of the pulse
LIMIT = 200  # iterations of a refit
PASSED = 0.15  # relative difference of the width that is let pass: the shape of a pulse is known no better
FEW = 100  # tags within reach below which the width is not asked


def spread(likelihood: DetectionTimes, z: np.ndarray, asked: np.ndarray) -> tuple[float, int]:
    """Return the rms distance (m) from the surface of the tags within three cores of it, and their number.

    asked: boolean (rows, columns).
    """
    period, reach = likelihood.pulse.period, REACH * likelihood.pulse.core
    tags = np.diff(likelihood.start)
    away = likelihood.y - np.repeat(np.asarray(z, np.float64).ravel(), tags)
    away -= period * np.round(away / period)
    near = np.repeat(asked.ravel(), tags) & (np.abs(away) <= reach)
    number = int(np.count_nonzero(near))
    return (float(np.sqrt(np.mean(away[near] ** 2))) if number else np.nan), number


def width_statistic(
    surface: DepthImage, seed: int, threshold: float, callback: Callable[[float], object] | None = None
) -> Statistic | None:
    """Return the spread of the tags against that of tags drawn at the depth image and fitted again.

    Refits start from the depth image. p is 1 where the width differs by less than 15 %. None where fewer
    than a hundred tags lie near a surface that is certain.
    """
    likelihood = surface.problem.likelihood
    asked = likelihood.exposed & (surface.wrong_surface < CERTAIN)
    observed, number = spread(likelihood, surface.image, asked)
    if number < FEW:
        return None
    drawn = []
    for b in range(REFITS):
        other = likelihood.draw(surface.image, np.random.default_rng((seed, 7, b)))
        problem = Problem(other, surface.priors, surface.bounds)
        again = solve(problem, tolerance=ROUGHLY, max_iterations=LIMIT, start=surface.image).image
        drawn.append(spread(other, again, asked)[0])
        if callback is not None:
            callback((b + 1.0) / REFITS)
    expected = float(np.mean(drawn))
    # half the relative variance of a mean square, never more than that of a normal law
    deviation = expected * np.sqrt((1.0 + 1.0 / REFITS) / (2.0 * number))
    name = "spread of the tags about the surface"
    found = normal_statistic(name, observed, expected, deviation, threshold=threshold)
    return replace(found, p_value=1.0) if abs(observed / expected - 1.0) < PASSED else found


def share_statistic(surface: DepthImage, seed: int) -> Statistic:
    """Return the share of the tags that is signal, against that of tags drawn at the depth image."""
    likelihood = surface.problem.likelihood

    def share(one: DetectionTimes) -> float:
        used = one.has_data
        tags = np.diff(one.start).reshape(one.shape)[used].sum()
        return float(one.signal_tags(surface.image)[used].sum() / max(tags, 1))

    drawn = [share(likelihood.draw(surface.image, np.random.default_rng((seed, 8, b)))) for b in range(DRAWS)]
    return simulated_statistic("share of the tags that is signal", share(likelihood), np.array(drawn))


def background_statistic(surface: DepthImage, threshold: float) -> Statistic | None:
    """Return the background found away from the surface against the one declared (`BackgroundCheck`).

    p is 1 where that check lets the difference pass. None where no tag could be asked.
    """
    check = surface.background
    if not check.pixels or not np.isfinite(check.standard_error):
        return None
    z = (check.found - check.declared) / check.standard_error
    p = 1.0 if check.fits else float(2.0 * norm.sf(abs(z)))
    return Statistic(
        "background away from the surface", check.found, check.declared, check.standard_error, p, threshold
    )
