"""Proximal Langevin steps within bounds, with momentum and a Metropolis test.

Langevin dynamics dx = p dt, dp = -grad U dt, with the momentum p drawn anew after every trajectory, has
exp(-U) for its law of x. A step of length h drifts half, kicks, and drifts half:

    x <- x + h p / 2,    p <- p - h pull(x),    x <- x + h p / 2,

with pull the gradient of Moreau envelopes (Pereyra 2016). With an envelope of width h^2 / 4 the step of a
single term is the implicit midpoint rule: its point of evaluation m = prox(x + h p / 2) obeys
m = (x + x') / 2. So it is stable for every h and loses no energy where the term is quadratic. That is
the width of the likelihood's envelope; a prior's is 2 h^2, with which steps are longest (measured).
At a bound the image bounces and its momentum turns (Neal 2011), which keeps volume and energy.

After a trajectory of several steps the true energy decides (Duane et al. 1987): the draw is accepted with
probability min(1, exp(H - H')), H = U(x) + |p|^2 / 2. Drift, kick and bounce keep volume and can be
reversed, whatever function of x the pull is; hence the law of the draws is exp(-U) itself,
and the smoothing costs acceptance, never accuracy. One step a trajectory is Pereyra's Px-MALA.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from recon.sampling.energy import Energy

SMOOTHING = 2.0  # width of a prior's envelope over h^2 and |K|^2


@dataclass
class Chain:
    """Where a chain stands: image (float64), energy, and its random numbers."""

    image: np.ndarray
    energy: float
    random: np.random.Generator


def trajectory(chain: Chain, energy: Energy, step: float, steps: int) -> float:
    """Advance a chain by one trajectory, in place; return the probability with which it was accepted."""
    p = chain.random.standard_normal(chain.image.shape)
    before = chain.energy + 0.5 * float(np.vdot(p, p))
    x = chain.image + 0.5 * step * p
    bounce(x, p, energy.low, energy.high)
    for index in range(steps):
        p -= step * energy.pull(x, step, SMOOTHING * step * step)
        x += (step if index < steps - 1 else 0.5 * step) * p
        bounce(x, p, energy.low, energy.high)
    chance = chain.random.random()
    found = energy.value(x)
    change = before - found - 0.5 * float(np.vdot(p, p))
    accepted = math.exp(min(change, 0.0)) if math.isfinite(change) else 0.0
    if chance < accepted:
        chain.image, chain.energy = x, found
    return accepted


def bounce(x: np.ndarray, p: np.ndarray, low: float, high: float) -> None:
    """Fold x into [low, high], as often as it takes, and turn p at every fold; in place."""
    if x.min() >= low and x.max() <= high:
        return
    if not math.isfinite(high):
        out = x < low
        x[out] = 2.0 * low - x[out]
        p[out] = -p[out]
    elif not math.isfinite(low):
        out = x > high
        x[out] = 2.0 * high - x[out]
        p[out] = -p[out]
    else:
        width = high - low
        along = np.mod(x - low, 2.0 * width)
        turned = along > width
        x[...] = low + np.where(turned, 2.0 * width - along, along)
        np.clip(x, low, high, out=x)
        p[turned] = -p[turned]
