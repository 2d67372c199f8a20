"""The convex likelihood that lies above a likelihood that is not convex."""

from __future__ import annotations

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.testing import points
from recon.testing.errors import require, require_at_most, require_close

RELATIVE = 1e-6
"""The convex likelihood may keep its images in float32."""


def check_majorise(likelihood: Likelihood, rng: np.random.Generator) -> list[Likelihood]:
    """Check that majorise(x) touches at x and lies above elsewhere; return the convex likelihoods."""
    majorisers = []
    for x in points.images(likelihood, rng):
        above = likelihood.majorise(x)
        claim = "majorise returns a likelihood that is not convex"
        require(above.convex, likelihood, claim, "convex = False", "True")
        claim = "majorise changes the shape"
        require(above.shape == likelihood.shape, likelihood, claim, above.shape, likelihood.shape)
        gradient, score = likelihood.gradient(x), np.sqrt(likelihood.fisher_information(x))
        allowed = RELATIVE * (np.abs(gradient) + score + np.abs(x) * above.curvature(x))
        claim = "the gradient of majorise(x) is not that of the likelihood"
        require_close(likelihood, claim, above.gradient(x), gradient, allowed, x)
        touching = likelihood.value_map(x) - above.value_map(x)
        for z in points.images(likelihood, rng):
            nearby = points.inside(likelihood, x + 0.1 * (z - x))
            for other in (z, nearby):
                value, bound = likelihood.value_map(other), above.value_map(other) + touching
                slack = allowed * np.abs(other - x) + RELATIVE * (1.0 + value)
                claim = "majorise(x), moved to touch at x, lies below value_map at another image"
                require_at_most(likelihood, claim, value, bound, slack, other)
        majorisers.append(above)
    return majorisers
