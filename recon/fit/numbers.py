"""The tests of numbers: too little or too much scatter, and lone bright pixels."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from scipy.stats import norm, t

from recon.fit import words
from recon.fit.count_laws import CountLaw, count_law
from recon.fit.dispersion import dispersion_deviation
from recon.fit.refits import Refits, Summary, refits, summary, trimmed
from recon.fit.statistic import Finding, Statistic, normal_statistic, simulated_statistic
from recon.fit.structure import NAMES
from recon.fit.tails import Brightest, brightest_lone
from recon.imaging.image import PhysicalImage
from recon.likelihoods.contract import Likelihood
from recon.likelihoods.poisson import Poisson

OVER, UNDER, LONE, BRIGHTEST = 0.03, 0.003, 0.003, 1e-5  # chances of a false alarm
# Differences that are let pass: of the dispersion if too small and if too large, and of the share of lone
# bright pixels.
PASSED, PASSED_OVER, PASSED_LONE = 0.02, 0.01, 3e-3
LOST = 1.5  # times what draws show of structure to lose: what a fit has lost (measured, see DEVELOPERS.md)
LENIENT = 10.0  # times the chance of a false alarm, for the one of two tests that only vetoes
ALL_SCATTER = 0.5  # share of an excess of dispersion that is left without bright pixels, if all scatter


def judged_numbers(
    image: PhysicalImage,
    lone: np.ndarray,
    seed: int,
    told: Callable[[float], object],
    before: list[Finding],
    alarm: float = OVER,
) -> tuple[list[Statistic], list[Finding], float]:
    """Return what the numbers themselves say, what of it does not fit, and the least overdispersion told.

    lone: map of lone bright pixels. told: called with the share of the draws that is done. before: what the
    weight's test found. alarm: the chance of a false alarm of overdispersion.
    """
    likelihood = image.problem.likelihood
    law = count_law(likelihood, image.image)
    drawn = refits(image, seed, told)
    observed = summary(likelihood, image.image)
    statistics = [
        simulated_statistic("deviance", observed.deviance, np.array([s.deviance for s in drawn.plain.fits]))
    ]
    for k, name in enumerate(NAMES):
        sample = np.array([s.structure[k] for s in drawn.plain.fits])
        statistics.append(simulated_statistic(name, observed.structure[k], sample))
    index = _index_law(law, likelihood, drawn)
    under = _too_little(index, observed, drawn)
    heavy = summary(likelihood, drawn.smoother)
    over, least = _too_much(index, observed, heavy, drawn, alarm)
    statistics += [under, over]
    hot = False
    if law is not None:
        brightest = brightest_lone(likelihood, image.image, lone)
        bright = [_lone_statistic(float(lone.sum()), int(np.count_nonzero(likelihood.has_data)), drawn)]
        if brightest is not None:
            bright.append(_brightest_statistic(brightest))
        statistics += bright
        # a law that is too narrow has lone bright pixels, too, but all others scatter as well
        hot = any(one.denies for one in bright) and not (
            over.denies and _left(likelihood, drawn) > ALL_SCATTER * (over.observed - over.expected)
        )
    # noise left in the image is missing in the residuals, structure lost from it is added to them
    rough, smoothed = (any(f.cause == f"weight too {how}" for f in before) for how in ("small", "large"))
    findings = [words.hot_pixels(bright[0], brightest)] if hot else []
    if under.denies and not rough:
        findings.append(words.pile_up(under, isinstance(likelihood, Poisson)))
    elif over.denies and not smoothed and not hot:
        findings.append(words.overdispersion(over))
    return statistics, findings, least


def _left(likelihood: Likelihood, drawn: Refits) -> float:
    """Return the excess of dispersion at the smoother image that is left without lone bright pixels."""
    return trimmed(likelihood, drawn.smoother) - float(np.mean([trimmed(*one) for one in drawn.heavy_fits]))


def _lone_statistic(observed: float, pixels: int, drawn: Refits) -> Statistic:
    """Return the number of lone bright pixels; they are nearly Poisson."""
    number, expected = len(drawn.lone), float(np.mean(drawn.lone))
    deviation = float(np.sqrt(max(expected, 1.0) * (1.0 + 1.0 / number)))
    found = normal_statistic("lone bright pixels", observed, expected, deviation, 1, LONE)
    few = observed - expected < max(PASSED_LONE * pixels, 3.0)
    return replace(found, p_value=1.0) if few else found


def _brightest_statistic(one: Brightest) -> Statistic:
    """Return the number of the least likely lone pixel, its chance by Bonferroni's bound over all pixels."""
    return Statistic(
        "brightest lone pixel", one.number, one.mean, float(np.sqrt(one.variance)), one.chance, BRIGHTEST
    )


@dataclass(frozen=True)
class _IndexLaw:
    """Mean and standard deviation of the dispersion at the true image; the upper tail of its law, by z."""

    mean: float
    deviation: float
    tail: Callable[[float], float]

    def chance(self, excess: float, deviation: float) -> float:
        """Return how likely so much more, or yet more, is."""
        return float(self.tail(excess / deviation)) if deviation > 0.0 else 0.5


def _index_law(law: CountLaw | None, likelihood: Likelihood, drawn: Refits) -> _IndexLaw:
    if law is not None:
        return _IndexLaw(1.0, dispersion_deviation(law, likelihood.has_data), norm.sf)
    known = [one.dispersion for one in drawn.plain.known + drawn.rough.known + drawn.smooth.known]
    student = t(len(known) - 1)  # the deviation comes from the draws
    return _IndexLaw(float(np.mean(known)), float(np.std(known, ddof=1)), student.sf)


def _too_little(law: _IndexLaw, observed: Summary, drawn: Refits) -> Statistic:
    offset, error = drawn.plain.offset()
    expected, deviation = law.mean + offset, float(np.hypot(law.deviation, error))
    off = observed.dispersion - expected
    p_value = 1.0 if abs(off) < PASSED else law.chance(-off, deviation)
    return Statistic("dispersion", observed.dispersion, expected, deviation, p_value, UNDER)


def _too_much(
    law: _IndexLaw, observed: Summary, observed_heavy: Summary, drawn: Refits, alarm: float
) -> tuple[Statistic, float]:
    """Return the dispersion at the smoother image, beyond lost structure, and what excess would be too much.

    That image takes less of the noise, but more structure is missing from it; at the image itself it is the
    other way round. The model is denied where both ask for it, the latter at a lenient level: the p-value is
    that of the smoother image, or a tenth of the other's if that is larger.
    """
    (plain, plain_error), (rough, rough_error) = drawn.plain.offset(), drawn.rough.offset()
    (heavy, heavy_error), (smooth, smooth_error) = drawn.heavy.offset(), drawn.smooth.offset()
    missing = law.mean + plain + LOST * max(rough - plain, 0.0)
    near = law.chance(
        observed.dispersion - missing,
        float(np.hypot(law.deviation, np.hypot(plain_error, LOST * rough_error))),
    )
    lost = LOST * max(heavy - smooth, 0.0)
    deviation = float(np.hypot(law.deviation, np.hypot((1.0 + LOST) * heavy_error, LOST * smooth_error)))
    index, expected = observed_heavy.dispersion, law.mean + heavy + lost
    p_value = max(law.chance(index - expected, deviation), near / LENIENT)
    if index - expected < PASSED_OVER:
        p_value = 1.0
    found = Statistic("dispersion beyond lost structure", index, expected, deviation, p_value, alarm)
    return found, lost + max(PASSED_OVER, float(norm.isf(alarm)) * deviation)
