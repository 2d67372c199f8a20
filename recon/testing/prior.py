"""The conformance check of a prior."""

from __future__ import annotations

from typing import Any

import numpy as np

from recon.testing import blocks, denoising, duality, linear_maps, penalties
from recon.testing.errors import require


def check_prior(prior: Any, shape: tuple[int, int] = (7, 9), seed: int = 0) -> None:
    """Check that a prior keeps the contract of `priors.contract`; of a sum, that every term does.

    prior: a `priors.Prior`, or a sum of them.
    shape: (rows, columns) of the images to check it on; the time grows with their number.
    seed: of the random images.

    Checked: value, its convexity, and its growth with `weight` (of a dataclass that has one); the cvxpy
    expression against it. Unless the prior is conic only, also: K linear, its adjoint exact and
    norm_squared a true bound, at most four times too large; dual_prox, conjugate and penalty against
    one another; feasible; the steps of the block against the contract's; that its certificate is true,
    and closes on a small denoising problem.

    Raises ConformanceError, one sentence, at the first property that does not hold.
    """
    require(hasattr(prior, "terms"), prior, "is not a prior", type(prior), "a subclass of priors.Prior")
    for term in prior.terms():
        term.check_shape(shape)
        rng = np.random.default_rng(seed)
        if not term.conic_only:
            linear_maps.check_linear(term, shape, rng)
            linear_maps.check_adjoint(term, shape, rng)
            linear_maps.check_norm(term, shape, rng)
            penalties.check_value(term, shape, rng)
            duality.check_dual_prox(term, shape, rng)
            duality.check_conjugate(term, shape, rng)
            duality.check_feasible(term, shape, rng)
        penalties.check_convex(term, shape, rng)
        penalties.check_weight(term, shape, rng)
        penalties.check_prior_expression(term, shape, rng)
        if not term.conic_only:
            blocks.check_block(term, shape, rng)
            denoising.check_denoising(term, shape, rng)
