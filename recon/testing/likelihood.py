"""The conformance check of a likelihood."""

from __future__ import annotations

import numpy as np

from recon.likelihoods.contract import Likelihood
from recon.testing import conjugates, derivatives, draws, majorising, points, proximal, proximal_steps, values
from recon.testing.errors import require
from recon.testing.expressions import check_expression


def check_likelihood(likelihood: Likelihood, seed: int = 0) -> None:
    """Check that a likelihood keeps the contract of `recon.likelihoods.contract`.

    likelihood: an instance on a small image (some 50 pixels; the time grows with their number), best
        with pixels without data, with no detection, and with many among them.
    seed: of the random images and draws.

    Checked: the declared domain and bounds; value_map >= 0, value its sum, zero at a perfect fit;
    gradient and curvature against differences; exactly nothing where there is no data; residuals;
    Fisher information and draws against the Bartlett identities. If convex: convexity, prox and
    proximal_step, the conjugate over boxes, the cvxpy expression (unless it raises
    NotImplementedError). If not: majorise, and the same for the likelihoods that it returns.

    Raises ConformanceError, one sentence, at the first property that does not hold.
    """
    is_one = isinstance(likelihood, Likelihood)
    require(is_one, likelihood, "is not a likelihood", type(likelihood), "a subclass of Likelihood")
    rng = np.random.default_rng(seed)
    values.check_declarations(likelihood)
    _check_curve(likelihood, rng)
    values.check_perfect_fit(likelihood, rng)
    values.check_residuals(likelihood, rng)
    draws.check_draws(likelihood, rng)
    if likelihood.convex:
        _check_convex(likelihood, rng)
    else:
        for above in majorising.check_majorise(likelihood, rng):
            _check_curve(above, rng)
            _check_convex(above, rng)


def _check_curve(likelihood: Likelihood, rng: np.random.Generator) -> None:
    values.check_values(likelihood, rng)
    values.check_missing_pixels(likelihood, rng)
    derivatives.check_derivatives(likelihood, rng)


def _check_convex(likelihood: Likelihood, rng: np.random.Generator) -> None:
    values.check_convexity(likelihood, rng)
    proximal.check_prox(likelihood, rng)
    proximal_steps.check_proximal_step(likelihood, rng)
    conjugates.check_conjugate(likelihood, rng)
    _check_likelihood_expression(likelihood, rng)


def _check_likelihood_expression(likelihood: Likelihood, rng: np.random.Generator) -> None:
    import cvxpy as cp

    x = cp.Variable(likelihood.shape)
    try:
        expression, constraints = likelihood.expression(x)
    except NotImplementedError:  # the conic solver is then out of reach, and says so
        return
    anywhere, _, near, typical = points.images(likelihood, rng)  # conic solvers fail close to a domain's end
    for image in (anywhere, near, typical):
        check_expression(likelihood, x, expression, constraints, image, likelihood.value(image))
