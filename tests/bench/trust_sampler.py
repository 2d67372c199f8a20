"""Posterior draws against a long run of another sampler, and how many they are worth a second."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

import priors
import recon
from recon.likelihoods import Gaussian, Poisson
from recon.sampling import sample
from tests.bench.measure import Row, at_least, at_most
from tests.sampling.single_site import reference, scene

GROUP = "trust"
WEIGHT = 1.2
BOUNDS = {"Gaussian": (-20.0, 20.0), "Poisson": (0.0, 20.0)}
BACKGROUND = {"Gaussian": None, "Poisson": 0.5}


def rows() -> Iterator[Row]:
    """Yield the rows of this group."""
    for kind in BOUNDS:
        yield from accuracy(kind)
    for kind in BOUNDS:
        yield speed(kind, 16, 1000)
        yield speed(kind, 128, 250)


def problem(kind: str, size: int) -> tuple[np.ndarray, recon.Problem]:
    """Return data of about 2 a pixel, and their problem under total variation."""
    rng, truth = np.random.default_rng(0), scene(size)
    if kind == "Gaussian":
        data = truth + rng.standard_normal(truth.shape)
        likelihood = Gaussian(data, 1.0)
    else:
        data = rng.poisson(truth + BACKGROUND[kind]).astype(float)
        likelihood = Poisson.from_arrays(data, 1.0, BACKGROUND[kind])
    return data, recon.Problem(likelihood, priors.TotalVariation(WEIGHT), BOUNDS[kind])


def accuracy(kind: str) -> Iterator[Row]:
    """Mean and standard deviation of 16 x 16 pixels: how far off, root mean square."""
    data, task = problem(kind, 16)
    mean, sd, error = reference(data, WEIGHT, BOUNDS[kind], 400_000, 1, BACKGROUND[kind])
    drawn = sample(task, draws=4000)
    off = 100.0 * float(np.sqrt(np.mean(((drawn.mean - mean) / sd) ** 2)))
    ratio = drawn.standard_deviation / sd
    spread = 100.0 * float(np.sqrt(np.mean((ratio - 1.0) ** 2)))
    own = 100.0 * float(np.sqrt(np.mean((error / sd) ** 2)))
    detail = f"reference off by {own:.1f} %; {drawn.words}"
    yield at_most(GROUP, f"{kind} + TV, 16 x 16, mean", off, "% of deviation", 3.0, detail)
    detail = f"ratio of deviations {ratio.mean():.4f} on average"
    yield at_most(GROUP, f"{kind} + TV, 16 x 16, deviation", spread, "%", 3.0, detail)


def speed(kind: str, size: int, draws: int) -> Row:
    """Effective draws a second of the median pixel, burn-in included."""
    drawn = sample(problem(kind, size)[1], draws=draws)
    detail = (
        f"worst pixel {drawn.effective_samples / drawn.seconds:.3g}, objective"
        f" {drawn.objective_effective_samples / drawn.seconds:.3g} a second; R-hat {drawn.r_hat:.3f},"
        f" {drawn.steps:.0f} steps of {drawn.step:.3f} a draw, {drawn.seconds:.0f} s"
    )
    rate = drawn.median_effective_samples / drawn.seconds
    return at_least(GROUP, f"{kind} + TV, {size} x {size}, draws", rate, "effective / s", 0.0, detail)
