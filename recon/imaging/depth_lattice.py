"""Depth cut into bins of half a pulse, and coarser ones above them, with the scene's own law of depth."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.ndimage import gaussian_filter1d

from recon.errors import InputError
from recon.likelihoods.detection_times import DetectionTimes

FINE = 2  # bins in the pulse's core
SPLIT_BITS = 2
SPLIT = 1 << SPLIT_BITS  # bins of a level that make one of the level above
TOP = 64  # bins of the coarsest level, at most
LONGEST = 1 << 22  # bins of the finest level
BLURS = (1.5, 3.0)  # of the pulse's core: the scene's law is the mean of these two smoothings
ANYWHERE = 0.03  # share of the scene that may be at any depth
MOST = 10.0  # times the mean number of tags (and no less than one) that a pixel counts for


@dataclass(frozen=True, eq=False)
class DepthLattice:
    """Bins of depth from 0 to the unambiguous range.

    width: of the finest bins, m.
    scene: one array a level, the finest first: the probability of each bin for a pixel of this scene of which
        nothing else is known. `SPLIT` bins of a level make one of the next.
    """

    width: float
    scene: tuple[np.ndarray, ...]

    @property
    def levels(self) -> int:
        """Number of levels."""
        return len(self.scene)


def depth_lattice(likelihood: DetectionTimes) -> DepthLattice:
    """Return the lattice of an acquisition; its scene is the histogram of all tags less the background.

    A pixel with many times more tags than others counts no more than a bright one: it may be a hot one.

    Raises InputError if the period is too long for the pulse.
    """
    pulse = likelihood.pulse
    bins = math.ceil(pulse.period * FINE / pulse.core)
    if bins > LONGEST:
        raise InputError(
            f"period is {pulse.period / pulse.core:.3g} times as long as the pulse; give at most"
            f" {LONGEST // FINE} times."
        )
    scene = [_scene(likelihood, bins)]
    while scene[-1].size > TOP:
        finer = scene[-1]
        padded = np.zeros(-(-finer.size // SPLIT) * SPLIT)
        padded[: finer.size] = finer
        scene.append(padded.reshape(-1, SPLIT).sum(axis=1))
    return DepthLattice(pulse.period / bins, tuple(law.astype(np.float32) for law in scene))


def trust(likelihood: DetectionTimes) -> np.ndarray:
    """Return the weight of every pixel's tags in pooled evidence, (rows, columns) float32."""
    tags = tags_used(likelihood)
    return np.minimum(1.0, MOST * max(1.0, float(tags.mean())) / np.maximum(tags, 1)).astype(np.float32)


def tags_used(likelihood: DetectionTimes) -> np.ndarray:
    """Return the number of tags of every pixel, 0 where they tell nothing."""
    return np.where(likelihood.has_data, np.diff(likelihood.start).reshape(likelihood.shape), 0)


def _scene(likelihood: DetectionTimes, bins: int) -> np.ndarray:
    tags, weight = tags_used(likelihood), trust(likelihood)
    each = np.repeat(np.where(likelihood.has_data, weight, 0.0).ravel(), np.diff(likelihood.start))
    place = np.minimum(likelihood.y * (bins / likelihood.pulse.period), bins - 1).astype(np.int32)
    histogram = np.bincount(place, each, bins).astype(np.float64)
    noise = likelihood.noise * likelihood.pulse.period
    background = float(np.sum(tags * weight * noise / (1.0 + noise))) / bins
    laws = []
    for blur in BLURS:
        signal = np.maximum(gaussian_filter1d(histogram, blur * FINE, mode="wrap") - background, 0.0)
        total = signal.sum()
        laws.append(signal / total if total > 0.0 else np.full(bins, 1.0 / bins))
    return (1.0 - ANYWHERE) * 0.5 * (laws[0] + laws[1]) + ANYWHERE / bins
