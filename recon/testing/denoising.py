"""A small denoising problem solved with the block of a prior: its certificate must close."""

from __future__ import annotations

from typing import Any

import numpy as np

from recon.testing.blocks import check_bound
from recon.testing.errors import require_at_most

ITERATIONS = 4000
CHECKED_EVERY = 50
GAP = 5e-3


def check_denoising(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> None:
    """Minimise |x - f|^2 / 2 + value(x) to a certified gap by primal-dual steps (Chambolle, Pock 2011)."""
    f = _noisy_image(prior, shape, rng)
    x, extrapolated, adjoint = f.copy(), f.copy(), np.zeros(shape, np.float32)
    block = prior.block(shape)
    tau = 1.0
    sigma, relaxation = 1.0 / (tau * block.norm_squared), 1.7
    objective, bound = np.inf, -np.inf
    for iteration in range(1, ITERATIONS + 1):
        block.step(extrapolated, sigma, tau, relaxation, adjoint, True)
        proposed = (x + tau * (f - adjoint)) / (1.0 + tau)
        extrapolated = (2.0 * proposed - x).astype(np.float32)
        x = (x + relaxation * (proposed - x)).astype(np.float32)
        if iteration % CHECKED_EVERY == 0:
            certified = np.empty(shape, np.float32)
            penalty, conjugate = block.certify(x, certified, True)
            pull = certified.astype(np.float64)
            objective = 0.5 * float(np.sum(np.square(x - f, dtype=np.float64))) + penalty
            bound = float(np.sum(pull * f)) - 0.5 * float(np.sum(np.square(pull))) - conjugate
            if objective - bound <= GAP * abs(objective):
                break
    claim = f"the certificate of a denoising problem does not close in {ITERATIONS} primal-dual steps"
    require_at_most(prior, claim, objective - bound, GAP * abs(objective))
    claim = "the certified bound of a denoising problem lies above its objective"
    require_at_most(prior, claim, bound - objective, 0.0, 1e-5 * abs(objective))
    check_bound(prior, certified, conjugate, x.astype(np.float64))


def _noisy_image(prior: Any, shape: tuple[int, int], rng: np.random.Generator) -> np.ndarray:
    """Return a step with noise, of a height at which the data and the prior weigh about the same."""
    f = 0.3 * rng.standard_normal(shape)
    f[shape[0] // 2 :, shape[1] // 3 :] += 1.0
    value, energy = prior.value(f), 0.5 * float(np.sum(np.square(f)))
    return (f * min(max(2.0 * value / energy, 1e-3), 1e3)).astype(np.float32)
