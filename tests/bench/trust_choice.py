"""The weight chosen from the data against the best, which needs the truth; what the choice costs."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator

import numpy as np

import priors
import recon
from recon.bundled import bundled
from recon.files import load_truth
from recon.imaging import PhysicalImage
from recon.likelihoods import BernoulliTrials, Likelihood, Poisson
from recon.weights import settle
from tests.bench.measure import Row, at_most
from tests.bench.scenes import photograph
from tests.bench.trust_scenes import block_means

GROUP = "trust"
SEEDS = range(5)
PEAKS = (1, 2, 4, 10)
FACTORS = (
    0.35,
    0.5,
    0.7,
    0.85,
    1.0,
    1.2,
    1.4,
    2.0,
    2.8,
)  # of the chosen weight, among which the best is sought
BOUNDS = (0.0, 5.0)


def poisson(truth: np.ndarray, peak: int, seed: int) -> Likelihood:
    """Return counts of at most `peak` a pixel on average."""
    return Poisson(recon.simulate.counts(truth, 1, gain=float(peak), several_per_trial=True, seed=seed))


def trials(truth: np.ndarray, peak: int, seed: int) -> Likelihood:
    """Return as many in 50 trials of one detection at most."""
    return BernoulliTrials(recon.simulate.counts(truth, 50, gain=peak / 50, seed=seed))


def first(truth: np.ndarray, peak: int, seed: int) -> Likelihood:
    """Return a record that waits for the first detection in each pixel; the peak is of no account."""
    counts = recon.simulate.counts(np.maximum(truth, 0.02), None, gain=0.05, stop_after=1, seed=seed)
    return BernoulliTrials(counts, 1)


def loss(likelihood: Likelihood, prior: priors.Prior, truth: np.ndarray) -> float:
    """Return how many decibels the chosen weight loses against the best of the factors."""
    terms = settle(prior, likelihood, BOUNDS).terms
    image, errors = None, []
    for factor in FACTORS:
        scaled = [term.with_weight(term.weight * factor) for term in terms]
        problem = recon.Problem(likelihood, scaled, BOUNDS)
        image = recon.solve(problem, tolerance=1e-3, start=image, max_iterations=4000).image
        errors.append(float(np.mean((image - truth) ** 2)))
    return 10.0 * np.log10(errors[FACTORS.index(1.0)] / min(errors))


def losses(
    name: str, draw: Callable[..., Likelihood], prior: priors.Prior, truth: np.ndarray, mean: float
) -> Iterator[Row]:
    """Mean and largest loss over peaks and seeds."""
    peaks = PEAKS if draw is not first else (1,)
    found = {peak: [loss(draw(truth, peak, seed), prior, truth) for seed in SEEDS] for peak in peaks}
    every = [value for values in found.values() for value in values]
    by_peak = ", ".join(f"peak {peak} {np.mean(values):.3f}" for peak, values in found.items())
    yield at_most(GROUP, f"chosen weight, {name}, mean", float(np.mean(every)), "dB", mean, by_peak)
    if draw is not first:
        yield at_most(GROUP, f"chosen weight, {name}, worst", max(every), "dB", 0.3, f"{len(every)} draws")


def rows() -> Iterator[Row]:
    """Yield the rows of this group."""
    large, small = photograph(), block_means(photograph(), 4)
    tv, wavelets = priors.TotalVariation(), priors.WaveletSparsity()
    yield from losses("TV, Poisson, 512 x 512", poisson, tv, large, 0.15)
    yield from losses("TV, trials, 512 x 512", trials, tv, large, 0.15)
    yield from losses("wavelets, Poisson, 128 x 128", poisson, wavelets, small, 0.15)
    yield from losses("wavelets, trials, 128 x 128", trials, wavelets, small, 0.15)
    yield from losses("TV, first detections, 512 x 512", first, tv, large, 0.3)
    yield from bundled_acquisitions()
    yield cost()


def bundled_acquisitions() -> Iterator[Row]:
    """Root mean square error (of depth the mean absolute one) over that of the best factor, less 1."""
    for file in ("bench.h5", "coupon.h5"):
        acquisition, truth = recon.load(bundled(file)), load_truth(bundled(file))
        for name, image in recon.reconstruct(acquisition).images.items():
            found = [_error(image, factor, truth[name]) for factor in FACTORS]
            excess = 100.0 * (found[FACTORS.index(1.0)] / min(found) - 1.0)
            yield at_most(
                GROUP, f"chosen weight, {file}, {name}", excess, "% more error", 3.0, f"{min(found):.4g}"
            )


def _error(image: PhysicalImage, factor: float, truth: np.ndarray) -> float:
    scaled = [term.with_weight(term.weight * factor) for term in image.priors]
    problem = recon.Problem(image.problem.likelihood, scaled, image.bounds)
    start = getattr(image, "start", None)
    off = recon.solve(problem, tolerance=image.tolerance, start=start).image - truth
    return float(np.mean(np.abs(off)) if start is not None else np.sqrt(np.mean(off**2)))


def cost() -> Row:
    """The whole choice at 512 x 512 over one cold solve at the chosen weight; medians of three."""
    likelihood = poisson(photograph(), 4, 0)
    ratios = []
    for _ in range(4):
        began = time.perf_counter()
        settled = settle(priors.TotalVariation(), likelihood, BOUNDS)
        middle = time.perf_counter()
        recon.solve(recon.Problem(likelihood, settled.terms, BOUNDS), tolerance=5e-4)
        ratios.append((middle - began) / (time.perf_counter() - middle))
    tried = f"{len(settled.choice.factors)} factors of {settled.choice.folds} folds; stretch 15"
    return at_most(GROUP, "choice over one cold solve", float(np.median(ratios[1:])), "x", 40.0, tried)
