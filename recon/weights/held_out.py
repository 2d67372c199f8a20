"""The weight that predicts held-out data best.

The data are shared out into folds (`Likelihood.folds`). For each weight, every fold's image is fitted to the
other folds, and its own part scores it (Stone 1974): by the squared distance from an unbiased estimate, which
is the mean squared error but for a constant, or, where there is none, by the predictive log-likelihood over
the information of the pixel (`Likelihood.score_map`). Weights are factors of the rule of thumb for all data;
a fold is fitted at what suits its share of them (`thumb.for_part`).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence, Sized
from dataclasses import dataclass, field, replace

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.problem import Prior, Problem
from recon.solvers import solve
from recon.weights.scoring import lifted

RATIO = 1.4  # of neighbouring factors on the path: a parabola through three spans the best one
MOST = 16  # factors tried
TOLERANCE = 2e-3  # of the fits: changes the weight by less than 1 % (measured)
LIMIT = 4000  # iterations of a fit


@dataclass(frozen=True, eq=False)
class Fold:
    """A likelihood to fit and one to score, of the same image.

    terms: the priors of the fit at factor 1. open: those whose weights are to be chosen.
    bounds: of the fit. start: image to start from, or None. tolerance, limit: of the fit, gap and iterations.
    """

    fit: Likelihood
    score: Likelihood
    terms: tuple[Prior, ...]
    open: tuple[bool, ...]
    bounds: tuple[float, float]
    start: np.ndarray | None = None
    tolerance: float = TOLERANCE
    limit: int = LIMIT


@dataclass(frozen=True, eq=False)
class HeldOutFit:
    """An image fitted to all data but a part, and the likelihood of that part."""

    image: np.ndarray
    score: Likelihood


@dataclass(frozen=True, eq=False)
class Choice:
    """How the weight was chosen.

    factor: of the rule of thumb. second_order: the one chosen, for a prior that has one, else None.
    factors, score, standard_error: the curve, by rising factor: the held-out score (`Likelihood.score_map`,
        summed over pixels and folds) less that of the best factor tried, and the standard error of that
        difference (paired, over pixels).
    folds: how many. at_edge: whether the best factor is the last one tried at either end.
    note: what a reader should know, in a sentence; may be empty.
    """

    factor: float
    second_order: float | None
    factors: np.ndarray
    score: np.ndarray
    standard_error: np.ndarray
    folds: int
    at_edge: bool
    note: str = ""


@dataclass
class WeightPath:
    """Fits along the path, each started from the nearest one before."""

    folds: Sequence[Fold]
    callback: Callable[[float], object] | None
    images: dict[float, list[np.ndarray]] = field(default_factory=dict)
    scores: dict[float, list[np.ndarray]] = field(default_factory=dict)
    pilots: list[np.ndarray | float] = field(default_factory=list)

    def at(self, factor: float, second_order: float | None = None) -> float:
        """Return the held-out score at a factor, fitting if that has not been done."""
        key = factor if second_order is None else (factor, second_order)
        if key not in self.scores:
            if self.callback is not None:
                self.callback(factor)
            images = [self._fit(i, factor, second_order) for i in range(len(self.folds))]
            if second_order is None:
                self.images[factor] = images
            if not self.pilots:
                self.pilots = [
                    _pilot(fold.score, image) for fold, image in zip(self.folds, images, strict=True)
                ]
            self.scores[key] = [
                pilot * fold.score.score_map(lifted(image, fold.score))
                for fold, image, pilot in zip(self.folds, images, self.pilots, strict=True)
            ]
        return sum(float(np.sum(part)) for part in self.scores[key])

    def _fit(self, index: int, factor: float, second_order: float | None) -> np.ndarray:
        fold = self.folds[index]
        terms = at_factor(fold.terms, fold.open, factor, second_order)
        start = fold.start
        if self.images:
            near = min(self.images, key=lambda other: abs(math.log(other / factor)))
            start = self.images[near][index]
        return fitted(Problem(fold.fit, terms, fold.bounds), start, fold.tolerance, fold.limit)

    def difference(self, one: float, other: float) -> tuple[float, float]:
        """Return the score at one factor less that at another, and its standard error."""
        apart = [a - b for a, b in zip(self.scores[one], self.scores[other], strict=True)]
        square = sum(float(np.sum((d - d.mean()) ** 2)) for d in apart)
        return sum(float(d.sum()) for d in apart), math.sqrt(square)


def fitted(
    problem: Problem, start: np.ndarray | None, tolerance: float = TOLERANCE, limit: int = LIMIT
) -> np.ndarray:
    """Return the image of a fit to a part of the data."""
    return solve(problem, tolerance=tolerance, max_iterations=limit, start=start).image


def _pilot(score: Likelihood, image: np.ndarray) -> np.ndarray | float:
    """Return what a pixel's predictive log-likelihood counts for: 1 over its information at a first fit.

    Near the truth a log-likelihood is half the information times the squared distance, so that this makes
    it a squared distance, whatever the pixel; and weights that come from other data favour no image.
    """
    if score.scores_add_up:
        return 1.0
    information = score.fisher_information(lifted(image, score))
    seen = score.has_data & np.isfinite(information) & (information > 0.0)
    weight = np.zeros(image.shape)
    weight[seen] = 1.0 / information[seen]
    return weight


def held_out_scores(fits: Sequence[Sequence[HeldOutFit]]) -> list[np.ndarray]:
    """Return the held-out score of each pixel, summed over folds, for several sets of fits to the same folds.

    What a pixel counts for is set by the first set, see `_pilot`.
    """
    pilots = [_pilot(fit.score, fit.image) for fit in fits[0]]
    return [
        sum(
            pilot * fit.score.score_map(lifted(fit.image, fit.score))
            for pilot, fit in zip(pilots, each, strict=True)
        )
        for each in fits
    ]


def at_factor(
    terms: Sequence[Prior], is_open: Sequence[bool], factor: float, second_order: float | None = None
) -> list[Prior]:
    """Return the priors, the weights of the open ones times a factor."""
    scaled = []
    for term, open_ in zip(terms, is_open, strict=True):
        if open_:
            term = term.with_weight(term.weight * factor)
            if second_order is not None and hasattr(term, "second_order"):
                term = replace(term, second_order=second_order)
        scaled.append(term)
    return scaled


def choose(
    folds: Sequence[Fold],
    callback: Callable[[float], object] | None = None,
    second_order: bool = True,
) -> tuple[Choice, list[np.ndarray]]:
    """Return the factor with the best held-out score, found by walking downhill from factor 1, and its fits.

    callback: called with every factor that is tried. second_order: whether to choose that, too, where a
        prior has one.
    """
    path = WeightPath(folds, callback)
    best = downhill(path.at, path.images)
    factors = np.array(sorted(path.images))
    compared = [path.difference(f, best) for f in factors]
    score, error = (np.array(column) for column in zip(*compared, strict=True))
    second = _second_order(path, folds[0], best) if second_order else None
    return chosen_at(best, factors, score, error, len(folds), second), path.images[best]


def downhill(score: Callable[[float], float], tried: Sized) -> float:
    """Return the factor with the least score, in steps of `RATIO` from 1; tried: all factors so far."""
    at = 0
    for direction in (1, -1):
        while len(tried) < MOST and score(RATIO ** (at + direction)) < score(RATIO**at):
            at += direction
    return RATIO**at


def chosen_at(
    best: float,
    factors: np.ndarray,
    score: np.ndarray,
    error: np.ndarray,
    folds: int = 0,
    second_order: float | None = None,
) -> Choice:
    """Return the choice of the vertex near the best factor, or of that itself at an end of the path."""
    if best in (factors[0], factors[-1]):
        note = f"the best weight is at the end of the path, {best:.3g} times the rule of thumb"
        return Choice(best, second_order, factors, score, error, folds, True, note)
    factor = _vertex(factors, score, int(np.searchsorted(factors, best)))
    return Choice(factor, second_order, factors, score, error, folds, False)


def _vertex(factors: np.ndarray, score: np.ndarray, k: int) -> float:
    """Return the factor at the vertex of the parabola through the best score and its neighbours."""
    a, b, c = score[k - 1 : k + 2]
    bend = a - 2.0 * b + c
    shift = 0.5 * (a - c) / bend if bend > 0.0 else 0.0
    return float(factors[k] * RATIO ** np.clip(shift, -0.5, 0.5))


def _second_order(path: WeightPath, fold: Fold, factor: float) -> float | None:
    """Return the second-order weight with the best score of half, once and twice the given one."""
    open_terms = [term for term, open_ in zip(fold.terms, fold.open, strict=True) if open_]
    given = [term.second_order for term in open_terms if hasattr(term, "second_order")]
    if not given:
        return None
    scores = {given[0]: path.at(factor)}
    for times in (0.5, 2.0):
        scores[given[0] * times] = path.at(factor, given[0] * times)
    return min(scores, key=scores.__getitem__)
