"""The names of priors on the command line."""

from __future__ import annotations

import priors
from recon.errors import InputError

CLASSES = {  # looked up in `priors` when asked for
    "total-variation": "TotalVariation",
    "generalized-variation": "GeneralizedVariation",
    "wavelet-sparsity": "WaveletSparsity",
    "smoothness": "Smoothness",
}


def prior_named(name: str | None, weight: float | None) -> priors.Prior | None:
    """Return the prior with that weight, None where neither is given.

    A weight alone is that of total variation, the prior of a reconstruction that names none. Raises
    InputError for an unknown name and PriorError for a weight that is not above zero.
    """
    if name is None and weight is None:
        return None
    name = "total-variation" if name is None else name
    if name not in CLASSES:
        raise InputError(f"--prior is {name!r}; give one of {', '.join(CLASSES)}.")
    return getattr(priors, CLASSES[name])(weight=weight)
