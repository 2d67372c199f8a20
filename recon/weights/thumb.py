"""Choosing the weight of a prior from the data."""

from __future__ import annotations

import math

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.problem import Prior, Sum


def typical_information(likelihood: Likelihood) -> float:
    """Return the mean Fisher information of a pixel with data, at a flat image of the mean estimate.

    Returns 1 / (mean estimate or 1)^2 where the information is not finite (no detection at all).
    """
    estimate, seen = likelihood.estimate(), likelihood.has_data
    level = float(np.mean(estimate[seen], dtype=np.float64)) if seen.any() else 0.0
    with np.errstate(divide="ignore", invalid="ignore"):
        information = likelihood.fisher_information(np.full(likelihood.shape, level, np.float32))
    mean = float(np.sum(information)) / max(int(np.count_nonzero(seen)), 1)
    if math.isfinite(mean) and mean > 0.0:
        return mean
    return 1.0 / max(abs(level), 1e-3) ** 2


def weigh(prior: Prior | Sum, likelihood: Likelihood) -> list[Prior]:
    """Return the priors with every weight set: those left open take their rule of thumb for this data."""
    terms = list(prior.terms())
    if all(term.weight is not None for term in terms):
        return terms
    information = typical_information(likelihood)
    return [
        term if term.weight is not None else term.with_weight(term.typical_weight(information))
        for term in terms
    ]


def for_part(term: Prior, part: float, whole: float) -> Prior:
    """Return a prior, weighed for all data, at the weight for a part of them, given the information of both.

    The weight follows the information as the prior's rule of thumb does, or as its square root.
    """
    try:
        share = term.typical_weight(part) / term.typical_weight(whole)
    except ValueError:  # a prior without a rule
        share = math.sqrt(part / whole)
    return term.with_weight(term.weight * share)
