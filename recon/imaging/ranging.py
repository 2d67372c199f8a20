"""Reflectivity and depth from time tags, each with the help of the other."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from recon.acquisition import TimeTags
from recon.imaging.background_check import allowed_background, background_check
from recon.imaging.depth import DepthImage, depth
from recon.imaging.image import PhysicalImage
from recon.imaging.reflectivity import counting_likelihood, gated_reflectivity, live_counts
from recon.imaging.task import Effort, image_of
from recon.likelihoods.detection_times import DetectionTimes
from recon.problem import Prior, Sum

ROUNDS = (
    3  # more of both with a dead time: detections in a pulse hide the rest of it, so each moves the other
)
TOO_MUCH = 0.9  # factor of the declared background below which less is taken


def ranging(
    tags: TimeTags,
    depth_prior: Prior | Sum | None = None,
    reflectivity_prior: Prior | Sum | None = None,
    effort: Effort | None = None,
) -> tuple[PhysicalImage, DepthImage]:
    """Return the reflectivity and the depth image.

    A first reflectivity comes from the number of tags alone; given it, `depth`; given that, the
    reflectivity from the tags near the return. With a gate, which may have cut the pulse, the two are found
    once more, and with a dead time three times more.

    Where more background is declared than the quietest part of the period holds, no more than that is
    taken, and the depth image says so.
    """
    effort = effort or Effort()
    factor = allowed_background(tags)
    if factor < TOO_MUCH:
        taken = replace(tags, background=np.asarray(tags.background) * factor)
        brightness, surface = ranging(taken, depth_prior, reflectivity_prior, effort)
        return brightness, _told(surface, tags, brightness.image, factor)
    rough = replace(effort, weight="rule", judge=False)  # what it is for does not need the best weight
    likelihood = counting_likelihood(live_counts(tags))
    first = image_of("first_reflectivity", likelihood, reflectivity_prior, "1", rough)
    rounds = ROUNDS if tags.dead_time is not None else int(tags.gate is not None)
    surface = depth(tags, first.image, depth_prior, rough if rounds else effort)
    for left in reversed(range(rounds)):
        brightness = gated_reflectivity(tags, surface.image, reflectivity_prior, replace(effort, judge=False))
        surface = depth(tags, brightness.image, depth_prior, rough if left else effort)
    return gated_reflectivity(tags, surface.image, reflectivity_prior, effort), surface


def _told(surface: DepthImage, tags: TimeTags, reflectivity: np.ndarray, factor: float) -> DepthImage:
    """Return the depth image with what is to say of a background that was declared too high."""
    times = DetectionTimes(tags, reflectivity)
    check = background_check(times, tags.background, surface.image, surface.wrong_surface)
    said = check.words or "the background declared is more than the quietest part of the period holds"
    note = f"{said}; {factor:.2g} times the declared background was taken"
    others = (other for other in surface.notes if other != surface.background.words)
    return replace(surface, background=check, notes=(note, *others))
