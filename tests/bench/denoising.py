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

FAMILIES: dict[str, Callable[[float], priors.Prior | priors.Sum]] = {
    "TV": lambda w: priors.TotalVariation(w),
    "wavelets": lambda w: priors.WaveletSparsity(w),
    "TV + wavelets": lambda w: priors.TotalVariation(0.5 * w) + priors.WaveletSparsity(0.5 * w),
}


def rows() -> Iterator[Row]:
    """Yield the rows of this group."""
    truth = photograph()
    for peak, (plain, best) in WANTED.items():
        scores = {name: best_score(truth, peak, family) for name, family in FAMILIES.items()}
        listed = ", ".join(
            f"{name} {score:.2f} (weight {weight:.2f})" for name, (score, weight) in scores.items()
        )
        yield at_least(GROUP, f"peak {peak}, TV", scores["TV"][0], "dB", plain, listed)
        top = max(scores, key=lambda name: scores[name][0])
        yield at_least(GROUP, f"peak {peak}, best prior", scores[top][0], "dB", best, top)


def best_score(
    truth: np.ndarray, peak: float, family: Callable[[float], priors.Prior | priors.Sum]
) -> tuple[float, float]:
    """Return the mean PSNR over the seeds at the best common weight, and that weight."""
    counts = [
        recon.simulate.counts(truth, 1, gain=float(peak), several_per_trial=True, seed=seed) for seed in SEEDS
    ]
    likelihoods = [Poisson(c) for c in counts]
    unit = np.sqrt(peak / truth.mean())
    starts: list[np.ndarray | None] = [None] * len(SEEDS)
    best, worse = (-np.inf, 0.0), 0
    for factor in np.geomspace(0.5, 4.0, 16):
        scores = []
        for index, likelihood in enumerate(likelihoods):
            problem = recon.Problem(likelihood, family(float(factor * unit)), bounds=(0.0, 4.0))
            solution = recon.solve(problem, tolerance=3e-4, start=starts[index])
            starts[index] = solution.image
            scores.append(-10.0 * np.log10(np.mean((solution.image - truth) ** 2)))
        score = float(np.mean(scores))
        worse = worse + 1 if score < best[0] else 0
        best = max(best, (score, float(factor * unit)))
        if worse == 3:
            break
    return best
