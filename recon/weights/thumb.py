"""Choosing the weight of a prior from the data."""

from __future__ import annotations

import math

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.problem import Prior, Sum

# The weight that suits a scene grows as this power of the information; measured: .3 to .35 for total
# variation, .2 for wavelets, .1 for quadratic smoothness.
GROWTH = 0.3


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
    """Return a prior, weighed for all data, at that for a part; part, whole: the information of each."""
    return term.with_weight(term.weight * (part / whole) ** GROWTH)
