"""Denoising a photograph at a few counts a pixel, each prior at its best weight."""

from __future__ import annotations

from collections.abc import Callable, Iterator

import numpy as np

import priors
import recon
from recon.likelihoods import Poisson
from tests.bench.measure import Row, at_least
from tests.bench.scenes import photograph

GROUP = "denoising"
SEEDS = (0, 1, 2)
# check-values of the project: recomputed for this photograph at these peaks.
WANTED = {1: (20.9, 21.4), 2: (22.3, 22.6), 4: (23.5, 23.8), 10: (25.2, 25.5)}

# Factors of sqrt(peak / mean of the photograph), about the square root of a pixel's information.
FAMILIES: dict[str, tuple[Callable[[float], priors.Prior | priors.Sum], tuple[float, ...]]] = {
    "TV": (priors.TotalVariation, (1.2, 1.56, 1.92, 2.74)),
    "wavelets + TV": (
        lambda w: priors.WaveletSparsity(w) + priors.TotalVariation(0.3 * w),
        (1.08, 1.32, 1.56, 1.8),
    ),
}


def rows() -> Iterator[Row]:
    """Yield the rows of this group."""
    truth = photograph()
    for peak, (plain, best) in WANTED.items():
        scores = {name: best_score(truth, peak, *family) for name, family in FAMILIES.items()}
        listed = ", ".join(f"{name} {score:.2f} (weight {w:.2f})" for name, (score, w) in scores.items())
        yield at_least(GROUP, f"peak {peak}, TV", scores["TV"][0], "dB", plain, listed)
        top = max(scores, key=lambda name: scores[name][0])
        yield at_least(GROUP, f"peak {peak}, best prior", scores[top][0], "dB", best, top)


def best_score(
    truth: np.ndarray,
    peak: float,
    family: Callable[[float], priors.Prior | priors.Sum],
    factors: tuple[float, ...],
) -> tuple[float, float]:
    """Return the mean PSNR over the seeds at the best common weight, and that weight."""
    likelihoods = [
        Poisson(recon.simulate.counts(truth, 1, gain=float(peak), several_per_trial=True, seed=seed))
        for seed in SEEDS
    ]
    starts: list[np.ndarray | None] = [None] * len(SEEDS)
    best = (-np.inf, 0.0)
    for factor in factors:
        weight = float(factor * np.sqrt(peak / truth.mean()))
        scores = []
        for index, likelihood in enumerate(likelihoods):
            problem = recon.Problem(likelihood, family(weight), bounds=(0.0, 4.0))
            starts[index] = recon.solve(problem, tolerance=1e-3, start=starts[index]).image
            scores.append(-10.0 * np.log10(np.mean((starts[index] - truth) ** 2)))
        best = max(best, (float(np.mean(scores)), weight))
    return best
