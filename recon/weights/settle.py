"""Setting what a prior leaves open."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from recon.errors import InputError
from recon.likelihoods.contract import Likelihood
from recon.problem import Prior, Sum
from recon.weights.held_out import Choice, Fold, at_factor, choose
from recon.weights.thumb import weigh

FOLDS = 3
SEED = 20_240_517  # of the folds: the same data give the same weight
RULES = ("auto", "rule")

Pairs = Sequence[tuple[Likelihood, Likelihood]]


def checked_rule(rule: str) -> str:
    """Return the name of a way to set open weights. Raises InputError."""
    if rule not in RULES:
        raise InputError(
            f"weight is {rule!r}; give one of {', '.join(RULES)}, or set the weight of the prior."
        )
    return rule


def settle(
    prior: Prior | Sum,
    likelihood: Likelihood,
    bounds: tuple[float, float],
    rule: str = "auto",
    folds: Callable[[int, int], Pairs] | None = None,
    callback: Callable[[float], object] | None = None,
) -> tuple[list[Prior], Choice | None]:
    """Return the priors, every weight set, and how they were chosen (None if nothing was held out).

    rule: "auto" = by held-out data (`held_out.choose`), "rule" = the rule of thumb.
    folds: called with a number and a seed, gives the likelihoods to fit and to score; that of the
        likelihood if left out.
    """
    terms = list(prior.terms())
    is_open = tuple(term.weight is None for term in terms)
    settled = weigh(prior, likelihood)
    if rule == "rule" or not any(is_open) or any(term.conic_only for term in terms):
        return settled, None
    if not likelihood.can_be_shared_out:
        nothing = np.empty(0)
        note = "too few detections to hold any out: the weight is the rule of thumb's"
        return settled, Choice(1.0, None, nothing, nothing, nothing, 0, False, note)
    pairs = (folds or likelihood.folds)(FOLDS, SEED)
    chosen = choose(
        [Fold(fit, score, tuple(weigh(prior, fit)), is_open, _wider(bounds, fit)) for fit, score in pairs],
        callback,
    )
    return at_factor(settled, is_open, chosen.factor, chosen.second_order), chosen


def _wider(bounds: tuple[float, float], likelihood: Likelihood) -> tuple[float, float]:
    """Return bounds that do not cut off what a share of the data makes larger."""
    return bounds[0], max(bounds[1], likelihood.default_bounds[1])
