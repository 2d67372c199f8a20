"""The weight of a depth prior and the uncertainty of depth, both from tags that were held out."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from scipy.ndimage import gaussian_filter

from recon.likelihoods.detection_times import DetectionTimes
from recon.problem import Prior, Problem
from recon.weights import Choice, Fold, HeldOutFit, at_factor, choose, for_part
from recon.weights.held_out import fitted

FOLDS = 2  # halves of the tags: fewer fits than thirds, and no worse (measured)
SEED = 20_240_518
LIMIT = 1000  # iterations of a fit to half the tags: longer ones changed nothing (measured)
BLUR = 2.0  # pixels: the variance between the halves is averaged so far
# Measured on 4 scenes at 5 levels of flux; see DEVELOPERS.md.
STANDARD = 1.65  # of the standard deviation that the halves show: half the width that holds 68 % of errors
FLOOR = 0.015  # of the pulse's core, which no depth is surer than


def chosen_terms(
    terms: Sequence[Prior],
    is_open: Sequence[bool],
    likelihood: DetectionTimes,
    start: np.ndarray,
    bounds: tuple[float, float],
    tolerance: float,
    callback: Callable[[float], object] | None = None,
) -> tuple[list[Prior], Choice, tuple[HeldOutFit, ...]]:
    """Return the priors with the open weights that predict held-out tags best, the choice, and its fits.

    The tags are shared out, half and half (`DetectionTimes.folds`): fits to one half are scored by the other.
    The other half is fitted at the weight chosen, for the uncertainty. Edge weights and start are those of
    all tags, which favours no weight within a surface. The second weight of a prior keeps its default.
    """
    (fit, score), (other, other_score) = likelihood.folds(FOLDS, SEED)
    scaled = _scaled(terms, fit, likelihood, start)
    fold = Fold(fit, score, scaled, tuple(is_open), bounds, start, tolerance, LIMIT)
    choice, images = choose([fold], callback, second_order=False)
    best = float(choice.factors[np.argmin(choice.score)])
    problem = Problem(other, at_factor(_scaled(terms, other, likelihood, start), is_open, best), bounds)
    fits = (HeldOutFit(images[0], score), HeldOutFit(fitted(problem, start, tolerance, LIMIT), other_score))
    return at_factor(terms, is_open, choice.factor), choice, fits


def fits_to_halves(
    terms: Sequence[Prior],
    likelihood: DetectionTimes,
    image: np.ndarray,
    bounds: tuple[float, float],
    tolerance: float,
) -> tuple[HeldOutFit, ...]:
    """Return the fits to either half of the tags, at weights given for all."""
    fits = []
    for fit, score in likelihood.folds(FOLDS, SEED):
        problem = Problem(fit, _scaled(terms, fit, likelihood, image), bounds)
        fits.append(HeldOutFit(fitted(problem, image, tolerance, LIMIT), score))
    return tuple(fits)


def depth_uncertainty(halves: Sequence[HeldOutFit], core: float) -> np.ndarray:
    """Return the standard uncertainty of each pixel if its surface is right, m (float32).

    Fits to disjoint halves of the tags differ by twice the noise of a fit to all (grouped jackknife,
    Quenouille 1956); errors are that and what the prior smooths away, which grows with it.
    """
    share = (len(halves) - 1.0) / len(halves)
    variance = gaussian_filter(
        share * np.var([half.image for half in halves], axis=0, dtype=np.float64, ddof=1), BLUR
    )
    return np.hypot(STANDARD * np.sqrt(variance), FLOOR * core).astype(np.float32)


def _scaled(
    terms: Sequence[Prior], part: DetectionTimes, whole: DetectionTimes, image: np.ndarray
) -> tuple[Prior, ...]:
    """Return the priors at the weights that a part of the tags needs."""
    known, all_ = (float(np.mean(each.fisher_information(image))) for each in (part, whole))
    if not (known > 0.0 and all_ > 0.0):
        return tuple(terms)
    return tuple(for_part(term, known, all_) for term in terms)
