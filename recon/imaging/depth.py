"""Depth from detection times, given the reflectivity.

The steps, each of which can be called by itself: `depth_belief` says how probable each depth of each pixel
is, given all tags; its median is the start. `open_settings` sets what a prior leaves open, `scene_bounds`
says between which depths the scene lies, and `recon.solve` lowers the true objective, DetectionTimes +
priors, from the start: each step takes every tag as signal or background with the probabilities it has
there.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from recon.acquisition import TimeTags
from recon.errors import InputError
from recon.imaging.background_check import BackgroundCheck, background_check
from recon.imaging.depth_belief import DepthBelief, depth_belief
from recon.imaging.depth_trust import chosen_terms, depth_uncertainty, fits_to_halves
from recon.imaging.image import PhysicalImage
from recon.imaging.task import Effort
from recon.likelihoods.detection_times import DetectionTimes
from recon.problem import Prior, Problem, Sum, default_depth_prior
from recon.solvers import solve
from recon.uncertainty import RegionAverage, region_average
from recon.validation import NONNEGATIVE, number_or_map
from recon.weights import Choice

__all__ = ["DepthBelief", "DepthImage", "depth", "depth_belief", "open_settings", "scene_bounds"]

TOLERANCE = 1e-2  # of depth, where the user gives none: closer solves changed no error (measured)
STEP = 2.0  # of the pulse's core: the step of depth at which an edge weighs half (measured)
MARGIN = 8.0  # of the pulse's core: room in front of and behind the scene
SURFACE = 3.0  # of the pulse's core: depths closer than this are the same surface
DOUBTFUL = 0.02  # chance of another surface from which on an interval reaches to it
FAINTEST = 0.1  # of the mean reflectivity: the least that is taken for the reflectivity of a target
DIMMEST = 0.1  # signal detections: the least that a target is taken to cause


@dataclass(frozen=True, eq=False)
class DepthImage(PhysicalImage):
    """A depth image (m), and how its pixels came by it.

    uncertainty is calibrated on halves of the tags (`depth_trust`), the surface being right; that it may be
    wrong is what `wrong_surface` says.

    start: the depth image that solving started from, the median of the belief.
    signal_tags: float32, how many of a pixel's tags are expected to be signal. Where it is below a half,
        the pixel counts as `filled`.
    target: float32, the probability that there is a target at all.
    wrong_surface: float32, the probability that a target is further than three cores of the pulse from the
        image.
    farthest: float32 (2, rows, columns), depths between which 95 % of the belief lie if there is a target.
    background: whether the tags away from the surface are as many as the declared background says.
    """

    start: np.ndarray
    signal_tags: np.ndarray
    target: np.ndarray
    wrong_surface: np.ndarray
    farthest: np.ndarray
    background: BackgroundCheck

    def interval(self, share: float = 0.95) -> tuple[np.ndarray, np.ndarray]:
        """See `PhysicalImage.interval`; if there is a target.

        Where another surface has a chance of 2 % or more, the wider interval reaches as far as 95 % of
        the belief do.
        """
        low, high = super().interval(share)
        if share != 0.95:
            return low, high
        doubtful = self.wrong_surface >= DOUBTFUL
        return (
            np.where(doubtful, np.minimum(low, self.farthest[0]), low),
            np.where(doubtful, np.maximum(high, self.farthest[1]), high),
        )

    def region(self, region: np.ndarray) -> RegionAverage:
        """See `PhysicalImage.region`; one step for all pixels, as a pixel of few tags knows no depth."""
        return region_average(self.problem.likelihood, self.image, region, shared=True)

    @property
    def maps(self) -> dict[str, np.ndarray]:
        """What there is besides the image and its uncertainty, by name; shares and numbers, float32."""
        return {
            "signal_tags": self.signal_tags, "target": self.target, "wrong_surface": self.wrong_surface,
        }  # fmt: skip


def depth(
    tags: TimeTags,
    reflectivity: np.ndarray,
    prior: Prior | Sum | None = None,
    effort: Effort | None = None,
) -> DepthImage:
    """Return the depth image that lowers half the deviance of the tags + prior, from the belief's median on.

    reflectivity: (rows, columns), known or estimated before. Where it is less than a tenth of its mean, or
        than a tenth of a detection, that is taken, so that tags can speak for a dark target and their
        lack against any.
    prior: generalized variation if left out; what it leaves open, `open_settings` sets.
    effort: how closely to solve (to a gap of 1e-2 if left out), and whom to tell.

    Raises InputError.
    """
    effort = effort or Effort()
    reflectivity = np.asarray(number_or_map(reflectivity, "reflectivity", tags.shape, NONNEGATIVE))
    likelihood = DetectionTimes(tags, np.maximum(reflectivity, faintest_target(tags, reflectivity)))
    belief = depth_belief(likelihood)
    start = belief.depth
    prior = default_depth_prior() if prior is None else prior
    terms, bounds = open_settings(prior, likelihood, start), scene_bounds(likelihood, start)
    tolerance = TOLERANCE if effort.tolerance is None else effort.tolerance
    is_open = [term.weight is None for term in prior.terms()]
    enough, choice, halves = likelihood.can_be_shared_out, None, ()
    if effort.weight != "rule" and any(is_open) and enough:
        told = effort.of_weight("depth")
        terms, choice, halves = chosen_terms(terms, is_open, likelihood, start, bounds, tolerance, told)
    problem = Problem(likelihood, terms, bounds)
    solution = solve(
        problem,
        tolerance=tolerance,
        max_iterations=effort.max_iterations,
        start=start,
        callback=effort.of_state("depth"),
    )
    signal = likelihood.signal_tags(solution.image).astype(np.float32)
    reach = SURFACE * likelihood.pulse.core
    wrong = 1.0 - belief.probability_within(solution.image - reach, solution.image + reach)
    if effort.judge and enough and not halves:
        halves = fits_to_halves(terms, likelihood, solution.image, bounds, tolerance)
    if halves:
        uncertainty = depth_uncertainty(halves, likelihood.pulse.core)
    else:
        uncertainty = 0.5 * (belief.quantile(0.84) - belief.quantile(0.16))
    check = background_check(likelihood, tags.background, solution.image, wrong)
    return DepthImage(
        image=solution.image,
        unit="m",
        uncertainty=uncertainty,
        filled=signal < 0.5,
        problem=problem,
        tolerance=tolerance,
        held_out=halves,
        choice=choice,
        notes=tuple(_notes(tags, check, choice, enough)),
        status=solution.status,
        diagnostics=solution.diagnostics,
        start=start,
        signal_tags=signal,
        target=1.0 - belief.absent,
        wrong_surface=wrong,
        farthest=np.array([belief.quantile(0.025), belief.quantile(0.975)]),
        background=check,
    )


def _notes(tags: TimeTags, check: BackgroundCheck, choice: Choice | None, enough: bool) -> Iterator[str]:
    if choice is not None and choice.note:
        yield choice.note
    if not enough:
        yield "too few tags to hold any out: the weight is the rule of thumb's, the uncertainty the belief's"
    if not check.fits:
        yield check.words
    if tags.dead_time is not None and tags.dead_time.not_modelled:
        yield tags.dead_time.not_modelled


def faintest_target(tags: TimeTags, reflectivity: np.ndarray) -> np.ndarray:
    """Return the least reflectivity (rows, columns) that a target is taken to have."""
    with np.errstate(divide="ignore"):
        dimmest = DIMMEST / (np.asarray(tags.trials, np.float64) * tags.gain)
    dimmest = np.where(np.isfinite(dimmest), dimmest, 0.0)
    return np.broadcast_to(np.maximum(dimmest, FAINTEST * np.mean(reflectivity)), tags.shape)


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


def scene_bounds(likelihood: DetectionTimes, start: np.ndarray) -> tuple[float, float]:
    """Return the depths between which the scene lies: those of the start, and some room.

    Narrow bounds make for a sharp certificate: what a pixel without data could gain is as large as they
    are wide.
    """
    period, room = likelihood.pulse.period, MARGIN * likelihood.pulse.core
    low, high = float(start.min()) - room, float(start.max()) + room
    return max(low, 0.0), min(high, period)
