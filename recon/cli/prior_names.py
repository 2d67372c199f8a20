"""The names of priors on the command line."""

from __future__ import annotations

import priors
from recon.errors import InputError
from recon.problem import default_depth_prior, default_prior

CLASSES = {  # looked up in `priors` when asked for
    "total-variation": "TotalVariation",
    "generalized-variation": "GeneralizedVariation",
    "wavelet-sparsity": "WaveletSparsity",
    "smoothness": "Smoothness",
}


def prior_named(name: str | None, weight: float | None, of_depth: bool) -> priors.Prior | None:
    """Return the prior with that weight, None where neither is given.

    A weight alone is that of the prior of a reconstruction that names none. Raises InputError for an
    unknown name and PriorError for a weight that is not above zero.
    """
    if name is None and weight is None:
        return None
    if name is None:
        return (default_depth_prior() if of_depth else default_prior()).with_weight(weight)
    if name not in CLASSES:
        raise InputError(f"--prior is {name!r}; give one of {', '.join(CLASSES)}.")
    return getattr(priors, CLASSES[name])(weight=weight)
