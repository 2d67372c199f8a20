"""Reflectivity and depth from time tags, each with the help of the other."""

from __future__ import annotations

from dataclasses import replace

from recon.acquisition import TimeTags
from recon.imaging.depth import DepthImage, depth
from recon.imaging.image import PhysicalImage
from recon.imaging.reflectivity import counting_likelihood, gated_reflectivity, live_counts
from recon.imaging.task import Effort, image_of
from recon.problem import Prior, Sum


def ranging(
    tags: TimeTags,
    depth_prior: Prior | Sum | None = None,
    reflectivity_prior: Prior | Sum | None = None,
    effort: Effort | None = None,
) -> tuple[PhysicalImage, DepthImage]:
    """Return the reflectivity and the depth image.

    A first reflectivity comes from the number of tags alone; given it, `depth`; given that, the
    reflectivity from the tags near the return.
    """
    effort = effort or Effort()
    likelihood = counting_likelihood(live_counts(tags))
    rough = replace(effort, weight="rule")  # what it is for does not need the best weight
    first = image_of("first_reflectivity", likelihood, reflectivity_prior, "1", rough)
    surface = depth(tags, first.image, depth_prior, effort)
    return gated_reflectivity(tags, surface.image, reflectivity_prior, effort), surface
