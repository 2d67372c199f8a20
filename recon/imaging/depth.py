"""Depth from detection times, given the reflectivity.

The steps, each of which can be called by itself: `pooled_depth` finds where the signal is;
`open_settings` sets what a prior leaves open; `recon.solve` minimises the true objective,
DetectionTimes + priors, from there.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from recon.acquisition import TimeTags
from recon.imaging.evidence import PooledDepth, pooled_depth, pooled_from
from recon.imaging.image import PhysicalImage
from recon.imaging.task import Effort, image_of
from recon.likelihoods.detection_times import DetectionTimes
from recon.problem import Prior, Sum, default_prior

__all__ = ["DepthImage", "PooledDepth", "depth", "open_settings", "pooled_depth"]

STEP = 2.0  # of the pulse's core: the step of depth at which an edge weighs half (measured)


@dataclass(frozen=True, eq=False)
class DepthImage(PhysicalImage):
    """A depth image (m), and how its pixels came by it.

    start: the depth image that solving started from.
    signal_tags: float32, how many of a pixel's tags are expected to be signal. Where it is below a half,
        the pixel counts as `filled`, and its uncertainty is that of a uniform law between the bounds.
    """

    start: PooledDepth
    signal_tags: np.ndarray


def depth(
    tags: TimeTags, reflectivity: np.ndarray, prior: Prior | Sum | None = None, effort: Effort | None = None,
    window: float | None = None,
) -> DepthImage:
    """Return the depth image: half deviance of the tags + prior, majorised and minimised from `pooled_depth`.

    reflectivity: (rows, columns), known or estimated before.
    prior: total variation if left out; what it leaves open, `open_settings` sets.
    effort: how closely to solve, and whom to tell.
    window: rms, in pixels, of the window of `pooled_depth`; chosen from the data if left out.

    Raises InputError.
    """
    likelihood = DetectionTimes(tags, reflectivity)
    start = pooled_from(likelihood, window)
    terms = open_settings(default_prior() if prior is None else prior, likelihood, start.image)
    solved = image_of("depth", likelihood, Sum(*terms), "m", effort or Effort(), start.image)
    signal = likelihood.signal_tags(solved.image).astype(np.float32)
    filled = signal < 0.5
    anywhere = np.float32((solved.bounds[1] - solved.bounds[0]) / np.sqrt(12.0))
    solved = replace(solved, filled=filled, uncertainty=np.where(filled, anywhere, solved.uncertainty))
    return DepthImage(**vars(solved), start=start, signal_tags=signal)


def open_settings(prior: Prior | Sum, likelihood: DetectionTimes, start: np.ndarray) -> list[Prior]:
    """Return the priors with every weight set.

    A prior that leaves its weight open takes its rule of thumb, for the mean Fisher information of all
    pixels, and, if it can take edge weights and has none, those of the start: the cost of a step of depth there
    is 1 / (1 + step / (2 cores of the pulse)) of what it would be, so that the jumps of a scene,
    hundreds of times the noise, cost about as much as small ones (Candes, Wakin and Boyd 2008).
    """
    terms = list(prior.terms())
    if all(term.weight is not None for term in terms):
        return terms
    core = likelihood.pulse.core
    information = float(np.mean(likelihood.fisher_information(start))) or 1.0 / core**2
    return [_settled(term, information, start, core) if term.weight is None else term for term in terms]


def _settled(term: Prior, information: float, start: np.ndarray, core: float) -> Prior:
    if hasattr(term, "edge_weights") and term.edge_weights is None:
        term = replace(term, edge_weights=_edges(start, core))
    return term.with_weight(term.typical_weight(information))


def _edges(start: np.ndarray, core: float) -> np.ndarray:
    """Return weights of the differences to the next row and column, shape (2, rows, columns)."""
    start = start.astype(np.float64)
    steps = np.abs([np.diff(start, axis=0, append=start[-1:]), np.diff(start, axis=1, append=start[:, -1:])])
    return 1.0 / (1.0 + steps / (STEP * core))
