"""Setting what a prior leaves open."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from recon.errors import InputError
from recon.likelihoods.contract import Likelihood
from recon.problem import Prior, Problem, Sum
from recon.weights.held_out import Choice, Fold, HeldOutFit, at_factor, choose, fitted
from recon.weights.thumb import for_part, typical_information, weigh
from recon.weights.whole_data import WHOLE_DATA

FOLDS = 4
SEED = 20_240_517  # of the folds: the same data give the same weight
RULES = ("auto", "rule", *WHOLE_DATA)

Pairs = Sequence[tuple[Likelihood, Likelihood]]


def checked_rule(rule: str) -> str:
    """Return the name of a way to set open weights. Raises InputError."""
    if rule not in RULES:
        raise InputError(
            f"weight is {rule!r}; give one of {', '.join(RULES)}, or set the weight of the prior."
        )
    return rule


@dataclass(frozen=True, eq=False)
class Settled:
    """Priors with every weight set.

    choice: how open weights were chosen, None if nothing was held out for it.
    fits: the fits nearest to the chosen weight; empty if nothing was held out.
    """

    terms: list[Prior]
    choice: Choice | None = None
    fits: tuple[HeldOutFit, ...] = ()


def settle(
    prior: Prior | Sum,
    likelihood: Likelihood,
    bounds: tuple[float, float],
    rule: str = "auto",
    folds: Callable[[int, int], Pairs] | None = None,
    callback: Callable[[float], object] | None = None,
) -> Settled:
    """Return the priors, every weight set, and how they were chosen.

    rule: "auto" = by held-out data (`held_out.choose`), "rule" = the rule of thumb, "discrepancy" and "risk"
        = by all data (`whole_data`).
    folds: called with a number and a seed, gives the likelihoods to fit and to score; that of the
        likelihood if left out.
    callback: called with every factor that is tried.
    """
    terms = list(prior.terms())
    is_open = tuple(term.weight is None for term in terms)
    settled = weigh(prior, likelihood)
    if rule == "rule" or not any(is_open) or any(term.conic_only for term in terms):
        return Settled(settled)
    if not likelihood.can_be_shared_out:
        nothing = np.empty(0)
        note = "too few detections to hold any out: the weight is the rule of thumb's"
        return Settled(settled, Choice(1.0, None, nothing, nothing, nothing, 0, False, note))
    if rule in WHOLE_DATA:
        chosen = WHOLE_DATA[rule](likelihood, settled, is_open, bounds, callback)
        return Settled(at_factor(settled, is_open, chosen.factor), chosen)
    pairs = (folds or likelihood.folds)(FOLDS, SEED)
    chosen, images = choose(folds_at(settled, is_open, likelihood, pairs, bounds), callback)
    fits = tuple(HeldOutFit(image, score) for image, (_, score) in zip(images, pairs, strict=True))
    return Settled(at_factor(settled, is_open, chosen.factor, chosen.second_order), chosen, fits)


def held_out_fits(
    terms: Sequence[Prior],
    likelihood: Likelihood,
    bounds: tuple[float, float],
    start: np.ndarray,
    folds: Callable[[int, int], Pairs] | None = None,
) -> tuple[HeldOutFit, ...]:
    """Return fits to parts of the data, at weights given for all of them; empty if too few."""
    if not likelihood.can_be_shared_out or any(term.conic_only for term in terms):
        return ()
    pairs = (folds or likelihood.folds)(FOLDS, SEED)
    return tuple(
        HeldOutFit(fitted(Problem(one.fit, one.terms, one.bounds), start, one.tolerance), one.score)
        for one in folds_at(terms, (True,) * len(terms), likelihood, pairs, bounds)
    )


def folds_at(
    terms: Sequence[Prior],
    is_open: tuple[bool, ...],
    likelihood: Likelihood,
    pairs: Pairs,
    bounds: tuple[float, float],
    start: np.ndarray | None = None,
) -> list[Fold]:
    """Return the pairs as folds, to be fitted at weights that suit a part if the given ones suit all data.

    The upper bound is raised to what a share of the data can show.
    """
    whole, folds = typical_information(likelihood), []
    for fit, score in pairs:
        known = typical_information(fit)
        parts = tuple(for_part(term, known, whole) for term in terms)
        wide = bounds[0], max(bounds[1], fit.default_bounds[1])
        folds.append(Fold(fit, score, parts, is_open, wide, start))
    return folds
