"""Reflectivity from counts, and from time tags."""

from __future__ import annotations

import numpy as np

from recon.acquisition import Counts, TimeTags
from recon.imaging.image import PhysicalImage
from recon.imaging.task import Effort, image_of
from recon.likelihoods.bernoulli_trials import BernoulliTrials
from recon.likelihoods.contract import Likelihood
from recon.likelihoods.detection_times import DetectionTimes
from recon.likelihoods.poisson import Poisson
from recon.likelihoods.range_pulse import RangePulse
from recon.problem import Prior, Sum

INSIDE = 0.98  # share of the pulse that the gate round a return holds
MANY = 30  # pixels from which on a record can look like waiting
SLACK = 1.0  # of the pulse's core, added to the gate for the error of the depth


def counting_likelihood(counts: Counts) -> Likelihood:
    """Return the law of the counts: Poisson where one trial can detect several times, else Bernoulli trials.

    The rule of stopping does not matter to the image, see `BernoulliTrials`, but to how data may be held
    out: it is taken from the record (`stopping_rule`).
    """
    return Poisson(counts) if counts.several_per_trial else BernoulliTrials(counts, *stopping_rule(counts))


def stopping_rule(counts: Counts) -> tuple[int | None, int | None]:
    """Return (detections waited for, most trials), each None if the record does not look like it.

    A record of waiting has the same number of detections in every pixel, after different numbers of
    trials; fewer only where the largest number of trials was made. That many pixels look so by chance is
    out of the question.
    """
    if isinstance(counts.trials, float):
        return None, None
    usable = np.asarray(counts.exposure) > 0.0
    k, n = counts.detections[usable], counts.trials[usable]
    wanted, most = int(k.max()), int(n.max())
    reached = k == wanted
    alike = np.all(reached | (n == most)) and 2 * np.count_nonzero(reached) > k.size
    if k.size < MANY or wanted < 1 or not alike or np.ptp(n[reached]) == 0:
        return None, None
    return wanted, None if reached.all() else most


def reflectivity(
    counts: Counts, prior: Prior | Sum | None = None, effort: Effort | None = None
) -> PhysicalImage:
    """Return the reflectivity image (a ratio): detections per trial less background, over the gain."""
    return image_of("reflectivity", counting_likelihood(counts), prior, "1", effort or Effort())


def live_counts(tags: TimeTags) -> Counts:
    """Return the number of tags of every pixel in the periods that dead time left it.

    As if the light came at any time of the period alike: enough to begin with, where depth is not known.
    """
    counts = tags.counts()
    if tags.dead_time is None:
        return counts
    open_share = 1.0 if tags.gate is None else (tags.gate[1] - tags.gate[0]) / tags.period
    uniform = DetectionTimes(tags, 1.0).live.uniform / open_share
    least = 1e-3 * np.asarray(tags.trials)  # a detector that is blind all the time says nothing
    return Counts(
        counts.detections,
        np.maximum(uniform, least),
        counts.gain,
        counts.background,
        counts.mask,
        several_per_trial=True,
    )


def gated_likelihood(tags: TimeTags, depth: np.ndarray, reach: float | None = None) -> Poisson:
    """Return the law of the tags in a gate round the return, as a function of the reflectivity x.

        mean = gain x A + background U

    A is the live exposure of the part of the pulse inside the gate, U that of the gate's share of the
    period (`DetectionTimes.gated`): background outside the gate no longer blurs the image, and what dead
    time and gates lose is accounted for exactly.

    depth: (rows, columns), m. reach: half the length of the gate, m; None takes what holds 98 % of the
    pulse, and a core of it more. Raises InputError.
    """
    times = DetectionTimes(tags, 1.0)
    reach = gate_reach(times.pulse) if reach is None else reach
    inside, pulse, uniform = times.gated(depth, reach)
    slope = np.asarray(tags.gain, np.float64) * pulse
    # a return that the detector could hardly have seen says nothing
    seen = pulse > 1e-3 * times.trials
    if tags.mask is not None:
        seen &= tags.mask
    with np.errstate(divide="ignore", invalid="ignore"):
        offset = np.where(seen, np.asarray(tags.background) * uniform / slope, 0.0)
    return Poisson.from_arrays(
        np.where(seen, inside, 0).astype(np.float32),
        np.where(seen, slope, 0.0).astype(np.float32),
        offset.astype(np.float32),
        seen,
    )


def gate_reach(pulse: RangePulse) -> float:
    """Return half the length, m, of a gate that holds nearly all of the pulse."""
    reach = pulse.core
    while pulse.cumulative(reach) - pulse.cumulative(-reach) < INSIDE and reach < 0.5 * pulse.period:
        reach += 0.25 * pulse.core
    return float(min(reach + SLACK * pulse.core, 0.5 * pulse.period))


def gated_reflectivity(
    tags: TimeTags, depth: np.ndarray, prior: Prior | Sum | None = None, effort: Effort | None = None
) -> PhysicalImage:
    """Return the reflectivity image (a ratio) from the tags in a gate round the return at `depth` (m)."""
    return image_of("reflectivity", gated_likelihood(tags, depth), prior, "1", effort or Effort())
