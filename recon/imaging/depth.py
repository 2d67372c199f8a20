"""Depth from detection times, given the reflectivity.

The steps, each of which can be called by itself: `pooled_depth` finds where the signal is,
`open_settings` sets what a prior leaves open, `scene_bounds` says between which depths the scene lies, and
`recon.solve` lowers the true objective, DetectionTimes + priors, from the first.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from recon.acquisition import TimeTags
from recon.errors import InputError
from recon.imaging.evidence import PooledDepth, pooled_depth, pooled_from
from recon.imaging.image import PhysicalImage
from recon.imaging.task import Effort
from recon.likelihoods.detection_times import DetectionTimes
from recon.problem import Prior, Problem, Sum, default_prior
from recon.solvers import solve
from recon.uncertainty import local_uncertainty

__all__ = ["DepthImage", "PooledDepth", "depth", "open_settings", "pooled_depth", "scene_bounds"]

STEP = 2.0  # of the pulse's core: the step of depth at which an edge weighs half (measured)
SLICE = 8.0  # of the pulse's core: thickness of the slices of `scene_bounds`


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
    tags: TimeTags,
    reflectivity: np.ndarray,
    prior: Prior | Sum | None = None,
    effort: Effort | None = None,
    window: float | None = None,
) -> DepthImage:
    """Return the depth image that lowers half the deviance of the tags + prior, from `pooled_depth` on.

    reflectivity: (rows, columns), known or estimated before.
    prior: total variation if left out; what it leaves open, `open_settings` sets.
    effort: how closely to solve, and whom to tell.
    window: rms, in pixels, of the window of `pooled_depth`; chosen from the data if left out.

    Raises InputError.
    """
    effort = effort or Effort()
    likelihood = DetectionTimes(tags, reflectivity)
    start = pooled_from(likelihood, window)
    terms = open_settings(default_prior() if prior is None else prior, likelihood, start.image)
    problem = Problem(likelihood, terms, scene_bounds(likelihood, start))
    told = effort.callback
    solution = solve(
        problem,
        tolerance=effort.tolerance,
        max_iterations=effort.max_iterations,
        start=start.image,
        callback=None if told is None else lambda state: told("depth", state),
    )
    signal = likelihood.signal_tags(solution.image).astype(np.float32)
    filled = signal < 0.5
    low, high = problem.bounds
    uncertainty = local_uncertainty(likelihood, solution.image, problem.bounds)
    uncertainty[filled] = (high - low) / np.sqrt(12.0)
    return DepthImage(
        image=solution.image,
        unit="m",
        uncertainty=uncertainty,
        filled=filled,
        priors=problem.priors,
        bounds=problem.bounds,
        status=solution.status,
        diagnostics=solution.diagnostics,
        start=start,
        signal_tags=signal,
    )


def open_settings(prior: Prior | Sum, likelihood: DetectionTimes, start: np.ndarray) -> list[Prior]:
    """Return the priors, every weight set.

    A prior that leaves its weight open takes its rule of thumb, for the mean Fisher information of all
    pixels, and, if it can take edge weights and has none, those of the start: where that steps by d, a
    difference weighs 1 / (1 + d / (2 cores of the pulse)), so that the jumps of a scene, a hundred times
    the pulse, do not cost a hundred times as much (after Candes, Wakin and Boyd 2008).

    Raises InputError for a prior that only the conic solver can take.
    """
    terms = list(prior.terms())
    for term in terms:
        if term.conic_only:
            raise InputError(
                f"prior {type(term).__name__} exists only as a cvxpy expression, which depth cannot take;"
                " give another, such as priors.TotalVariation()."
            )
    if all(term.weight is not None for term in terms):
        return terms
    core = likelihood.pulse.core
    information = float(np.mean(likelihood.fisher_information(start))) or 1.0 / core**2
    return [_settled(term, information, start, core) if term.weight is None else term for term in terms]


def _settled(term: Prior, information: float, start: np.ndarray, core: float) -> Prior:
    if hasattr(term, "edge_weights") and term.edge_weights is None:
        start = np.asarray(start, np.float64)
        down, right = np.diff(start, axis=0, append=start[-1:]), np.diff(start, axis=1, append=start[:, -1:])
        term = replace(term, edge_weights=1.0 / (1.0 + np.abs([down, right]) / (STEP * core)))
    return term.with_weight(term.typical_weight(information))


def scene_bounds(likelihood: DetectionTimes, start: PooledDepth) -> tuple[float, float]:
    """Return the depths between which the scene lies: slices of depth that hold as many pixels as a window.

    A stray depth of the start fills a window at most. Narrow bounds make for a sharp certificate: what a
    pixel without data could gain is as large as they are wide.
    """
    period, core = likelihood.pulse.period, likelihood.pulse.core
    slices = max(1, int(period / (SLICE * core)))
    counts, edges = np.histogram(start.image, slices, (0.0, period))
    held = np.flatnonzero(counts >= min(2.0 * np.pi * start.window**2, counts.max()))
    return float(edges[max(held[0] - 1, 0)]), float(edges[min(held[-1] + 2, slices)])
