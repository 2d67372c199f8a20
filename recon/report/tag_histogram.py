"""How far tags lie from the surface, and how far they would if the depth image were true."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from recon.fit.quantile_residuals import Histogram
from recon.imaging import DepthImage

if TYPE_CHECKING:
    from recon.imaging import PhysicalImage
    from recon.likelihoods.detection_times import DetectionTimes

REACH, CLASSES = 6.0, 48  # cores of the pulse to either side, and into how many classes they are parted
DRAWS = 4  # whose mean stands for what is expected
SEED = 9


def tag_histogram(surface: PhysicalImage) -> Histogram | None:
    """Return the histogram of tags by their distance from the surface, m; None for what is no depth image.

    expected: the mean of draws at the depth image. Unlike the outer classes of residuals, these hold no more
    than what falls into them.
    """
    if not isinstance(surface, DepthImage):
        return None
    likelihood = surface.problem.likelihood
    reach = min(REACH * likelihood.pulse.core, 0.5 * likelihood.pulse.period)
    edges = np.linspace(-reach, reach, CLASSES + 1)
    rng = np.random.default_rng(SEED)
    drawn = [_numbers(likelihood.draw(surface.image, rng), surface.image, edges) for _ in range(DRAWS)]
    return Histogram(edges, _numbers(likelihood, surface.image, edges), np.mean(drawn, axis=0))


def _numbers(likelihood: DetectionTimes, surface: np.ndarray, edges: np.ndarray) -> np.ndarray:
    period, tags = likelihood.pulse.period, np.diff(likelihood.start)
    away = likelihood.y - np.repeat(np.asarray(surface, np.float64).ravel(), tags)
    away -= period * np.round(away / period)
    return np.histogram(away[np.repeat(likelihood.exposed.ravel(), tags)], edges)[0]
