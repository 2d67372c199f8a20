"""The tests of numbers: too little or too much scatter, and lone bright pixels."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
from scipy.stats import t

from recon.fit import words
from recon.fit.count_laws import CountLaw, count_law
from recon.fit.dispersion import dispersion_deviation
from recon.fit.refits import DRAWS, Refits, Summary, refits, summary
from recon.fit.statistic import Finding, Statistic, normal_statistic, simulated_statistic
from recon.fit.structure import NAMES
from recon.fit.tails import Brightest, brightest_lone
from recon.imaging.image import PhysicalImage
from recon.likelihoods.poisson import Poisson

OVER, UNDER, LONE, BRIGHTEST = 0.03, 0.003, 0.003, 0.001  # chances of a false alarm
# Differences that are let pass: of the dispersion, and of the share of lone bright pixels.
PASSED, PASSED_LONE = 0.02, 3e-3
LOST = 1.5  # steps towards the rougher image, for the structure that is lost in smoothing (measured)
ALL_SCATTER = 0.5  # share of an excess of dispersion that is left without bright pixels, if all scatter


def judged_numbers(
    image: PhysicalImage,
    seed: int,
    told: Callable[[float], object],
    before: list[Finding],
    alarm: float = OVER,
) -> tuple[list[Statistic], list[Finding]]:
    """Return what the numbers themselves say, and what of it does not fit.

    told: called with the share of the draws that is done. before: what the weight's test found. alarm: the
    chance of a false alarm of overdispersion.
    """
    likelihood = image.problem.likelihood
    law = count_law(likelihood, image.image)
    drawn = refits(image, seed, told)
    observed = summary(likelihood, image.image)
    statistics = [
        simulated_statistic("deviance", observed.deviance, np.array([s.deviance for s in drawn.plain]))
    ]
    for k, name in enumerate(NAMES):
        sample = np.array([s.structure[k] for s in drawn.plain])
        statistics.append(simulated_statistic(name, observed.structure[k], sample))
    under, over = _index_statistics(image, law, observed, drawn, alarm)
    statistics += [under, over]
    hot = False
    if law is not None:
        brightest = brightest_lone(likelihood, image.image)
        lone = [_lone_statistic(observed, drawn, int(np.count_nonzero(likelihood.has_data)))]
        if brightest is not None:
            lone.append(_brightest_statistic(brightest))
        statistics += lone
        # a law that is too narrow has lone bright pixels, too, but all others scatter as well
        left = observed.trimmed - drawn.trimmed
        hot = any(one.denies for one in lone) and not (
            over.denies and left > ALL_SCATTER * (over.observed - over.expected)
        )
    # noise left in the image is missing in the residuals, structure lost from it is added to them
    rough, smoothed = (any(f.cause == f"weight too {how}" for f in before) for how in ("small", "large"))
    findings = [words.hot_pixels(lone[0], brightest)] if hot else []
    if under.denies and not rough:
        findings.append(words.pile_up(under, isinstance(likelihood, Poisson)))
    elif over.denies and not smoothed and not hot:
        findings.append(words.overdispersion(over))
    return statistics, findings


def _lone_statistic(observed: Summary, drawn: Refits, pixels: int) -> Statistic:
    """Return the number of lone bright pixels; they are nearly Poisson."""
    number, expected = len(drawn.lone), float(np.mean(drawn.lone))
    deviation = float(np.sqrt(max(expected, 1.0) * (1.0 + 1.0 / number)))
    found = normal_statistic("lone bright pixels", observed.lone, expected, deviation, 1, LONE)
    few = observed.lone - expected < max(PASSED_LONE * pixels, 3.0)
    return replace(found, p_value=1.0) if few else found


def _brightest_statistic(one: Brightest) -> Statistic:
    """Return the number of the least likely lone pixel, its chance by Bonferroni's bound over all pixels."""
    return Statistic(
        "brightest lone pixel", one.number, one.mean, float(np.sqrt(one.variance)), one.chance, BRIGHTEST
    )


def _index_statistics(
    image: PhysicalImage, law: CountLaw | None, observed: Summary, drawn: Refits, alarm: float
) -> tuple[Statistic, Statistic]:
    """Return the dispersion, asked whether it is too small, and beyond lost structure, whether too large."""
    likelihood = image.problem.likelihood
    known = [one.dispersion for one in drawn.known_plain + drawn.known_rough]
    if law is None:
        base, spread = float(np.mean(known)), float(np.std(known, ddof=1))
    else:
        base, spread = 1.0, dispersion_deviation(law, likelihood.has_data)
    (plain, plain_error), (rough, rough_error) = drawn.offset(), drawn.rough_offset()
    texture = max(LOST * (rough - plain), 0.0)
    error = np.hypot(spread, np.hypot(plain_error, LOST * rough_error))
    name = "dispersion"
    index, fitted = observed.dispersion, base + plain
    under = normal_statistic(name, index, fitted, np.hypot(spread, plain_error), -1, UNDER)
    over = normal_statistic(f"{name} beyond lost structure", index, fitted + texture, error, 1, alarm)
    if law is None:  # Student's law: the spread comes from the draws
        under, over = (
            replace(one, p_value=float(t.sf(side * one.z, 2 * DRAWS - 1)))
            for one, side in ((under, -1), (over, 1))
        )
    return _passed(under), _passed(over)


def _passed(one: Statistic) -> Statistic:
    """Return the statistic, its p 1 if the difference is too small to matter."""
    return replace(one, p_value=1.0) if abs(one.observed - one.expected) < PASSED else one
