"""The problem to solve: likelihood + priors + bounds."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from priors.contract import Block, Prior, Sum
from priors.generalized_variation import GeneralizedVariation
from priors.total_variation import TotalVariation
from recon.errors import InputError
from recon.likelihoods.contract import Likelihood

# The engine reaches the priors through here alone.
__all__ = ["Block", "Prior", "Problem", "Sum", "default_depth_prior", "default_prior"]


@dataclass(frozen=True, init=False, eq=False)
class Problem:
    """minimise over images x with low <= x <= high:  likelihood.value(x) + sum of prior.value(x).

    likelihood: a `recon.likelihoods.Likelihood`; its value is half the deviance.
    priors: one prior, a sum of priors, or several in a list; their values include their weights.
    bounds: (low, high) for every pixel; None takes the likelihood's `default_bounds`. With finite
        bounds the dual value is always finite, so every solve ends with a certificate.

    Raises InputError for bounds out of order or outside the likelihood's domain, and PriorError for
    a prior that does not fit the image.
    """

    likelihood: Likelihood
    priors: tuple[Prior, ...]
    bounds: tuple[float, float]

    def __init__(
        self,
        likelihood: Likelihood,
        priors: Prior | Sum | Iterable[Prior | Sum] = (),
        bounds: tuple[float, float] | None = None,
    ) -> None:
        if not isinstance(likelihood, Likelihood):
            raise InputError(
                f"likelihood is a {type(likelihood).__name__}; give a recon.likelihoods object, for example"
                " recon.likelihoods.Poisson(counts)."
            )
        object.__setattr__(self, "likelihood", likelihood)
        object.__setattr__(self, "priors", _flatten(priors))
        object.__setattr__(self, "bounds", _bounds(bounds, likelihood))
        for prior in self.priors:
            prior.check_shape(self.shape)

    @property
    def shape(self) -> tuple[int, int]:
        """(rows, columns)."""
        return self.likelihood.shape

    def objective(self, x: np.ndarray) -> float:
        """Return likelihood.value(x) + sum of prior.value(x)."""
        return self.likelihood.value(x) + sum(prior.value(x) for prior in self.priors)


def default_prior() -> Prior:
    """Return the prior used where the user names none: isotropic total variation, weight to be chosen."""
    return TotalVariation()


def default_depth_prior() -> Prior:
    """Return the prior of depth where the user names none: generalized variation, weight to be chosen.

    Surfaces slope; total variation would make stairs of them.
    """
    return GeneralizedVariation()


def _flatten(priors: Prior | Sum | Iterable[Prior | Sum]) -> tuple[Prior, ...]:
    parts = [priors] if isinstance(priors, Prior | Sum) else list(priors)
    for part in parts:
        if not isinstance(part, Prior | Sum):
            raise InputError(
                f"priors holds a {type(part).__name__}; give priors such as priors.TotalVariation(1.0)."
            )
    terms = tuple(term for part in parts for term in part.terms())
    for term in terms:
        if term.weight is None:
            raise InputError(
                f"the weight of {type(term).__name__} is not set; give it, or let recon.reconstruct"
                " choose it."
            )
    return terms


def _bounds(bounds: tuple[float, float] | None, likelihood: Likelihood) -> tuple[float, float]:
    if bounds is None:
        return likelihood.default_bounds
    try:
        low, high = (float(b) for b in bounds)
    except (TypeError, ValueError):
        raise InputError(f"bounds is {bounds!r}; give a (low, high) pair of numbers.") from None
    if not low < high:
        raise InputError(f"bounds is ({low}, {high}); give a low end below the high end.")
    domain = likelihood.domain
    if low < domain.low or high > domain.high:
        raise InputError(
            f"bounds is ({low}, {high}) but the likelihood is defined from {domain.low} to {domain.high};"
            " give bounds inside."
        )
    return low, high
