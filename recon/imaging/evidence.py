"""Where the signal is: the evidence of neighbouring pixels, pooled before the problem is solved.

One pixel's tags seldom say which of them are signal; together with its neighbours' they do. The evidence
of a pixel for depth z is the logarithm of the odds of signal against background,

    log(prior(z))  +  sum over tags in the window of  weight log(1 + p(y - z) / noise),

with the weight a Gaussian of the distance between pixels and prior(z) the depths of the whole scene,
from the histogram of all tags less its background, with a hundredth of it anywhere. A pixel with many
times more tags than others counts no more than a bright one: it may be a hot one.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.ndimage import distance_transform_edt, gaussian_filter1d

from recon.acquisition import TimeTags
from recon.errors import InputError
from recon.likelihoods.detection_times import DetectionTimes
from recon.validation import POSITIVE, number

FINE = 3  # bins in the pulse's core
PHASES = 4  # places of a tag within its bin
CUT = 3.0  # rms of the window at which it ends
FAINT = 0.03  # of the noise; fainter parts of the pulse are left out
ENOUGH = 30.0  # log odds that a window should gather, over the whole of it (measured on simulated scenes)
NARROWEST, WIDEST = 0.6, 6.0  # rms of the window that `suggested_window` gives, pixels
MOST = 10.0  # times the mean number of tags (and no less than one) that a pixel counts for
SCENE_BLUR = 5.0  # of the pulse's core: rms to which the scene's histogram is smoothed
ANYWHERE = 0.01  # share of the scene that may be at any depth
LONGEST = 1 << 22  # bins


@dataclass(frozen=True, eq=False)
class PooledDepth:
    """The depth that the pooled evidence likes best.

    image: float32 (rows, columns), m; from the nearest pixel with evidence where a window holds no tag.
    evidence: float32 (rows, columns), log odds of that depth; 0 where a window holds no tag.
    window: rms of the window, pixels.
    """

    image: np.ndarray
    evidence: np.ndarray
    window: float


def pooled_depth(tags: TimeTags, reflectivity: np.ndarray, window: float | None = None) -> PooledDepth:
    """Return the depth with the largest pooled evidence.

    reflectivity: (rows, columns), known or estimated before.
    window: rms of the spatial window in pixels; None takes `suggested_window`.

    Time and memory do not depend on the number of time bins. Raises InputError.
    """
    return pooled_from(DetectionTimes(tags, reflectivity), window)


def pooled_from(likelihood: DetectionTimes, window: float | None = None) -> PooledDepth:
    """Return `pooled_depth` of a likelihood that is already there."""
    from recon.imaging import evidence_kernels

    rms = suggested_window(likelihood) if window is None else number(window, "window", POSITIVE)
    if not likelihood.has_data.any():
        return PooledDepth(likelihood.estimate(), np.zeros(likelihood.shape, np.float32), rms)
    pulse = likelihood.pulse
    bins = math.ceil(pulse.period * FINE / pulse.core)
    if bins > LONGEST:
        raise InputError(
            f"period is {pulse.period / pulse.core:.3g} times as long as the pulse; give at most"
            f" {LONGEST // FINE} times."
        )
    width = pulse.period / bins
    kind, evidence, first = _evidence(likelihood, width, bins)
    place = likelihood.y / width
    whole = place.astype(np.int32)
    phase = np.minimum((place - whole) * PHASES, PHASES - 1).astype(np.uint8)
    begin = (whole + np.int32(first)) % np.int32(bins)
    best, top = np.zeros(likelihood.shape), np.zeros(likelihood.shape, np.float32)
    evidence_kernels.pooled(
        begin, phase, likelihood.start, kind, _trust(likelihood).astype(np.float32), evidence,
        _scene(likelihood, bins), _window(rms), best, top,
    )  # fmt: skip
    image = (width * best).astype(np.float32)
    if not top.all():
        nearest = distance_transform_edt(top == 0.0, return_distances=False, return_indices=True)
        image = image[tuple(nearest)]
    return PooledDepth(image, top, rms)


def suggested_window(likelihood: DetectionTimes) -> float:
    """Return the rms, in pixels, of a window that gathers enough evidence to tell signal from background.

    What a pixel brings on average is the divergence of Kullback and Leibler between its tags with signal
    and without, integral of (p + noise) log(1 + p / noise) - p for each expected signal tag; more than
    enough counts as enough.
    """
    tags = _tags(likelihood)
    seen = likelihood.noise[likelihood.has_data]
    if not seen.size:
        return WIDEST
    pulse = likelihood.pulse
    p = pulse.density(pulse.knots)
    nodes = np.geomspace(seen.min(), seen.max() * 1.001, 64)
    divergence = np.array([pulse.step * float(np.sum((p + n) * np.log1p(p / n))) - 1.0 for n in nodes])
    signal = tags / (1.0 + likelihood.noise * pulse.period)
    each = np.interp(np.log(likelihood.noise), np.log(nodes), divergence)
    mean = float(np.mean(np.minimum(signal * each, ENOUGH)))
    return float(np.clip(math.sqrt(ENOUGH / (2.0 * math.pi * max(mean, 1e-12))), NARROWEST, WIDEST))


def _tags(likelihood: DetectionTimes) -> np.ndarray:
    """Return the number of tags of every pixel, 0 where they tell nothing."""
    return np.where(likelihood.has_data, np.diff(likelihood.start).reshape(likelihood.shape), 0)


def _trust(likelihood: DetectionTimes) -> np.ndarray:
    """Return the weight of every pixel's tags."""
    tags = _tags(likelihood)
    return np.minimum(1.0, MOST * max(1.0, float(tags.mean())) / np.maximum(tags, 1))


def _evidence(likelihood: DetectionTimes, width: float, bins: int) -> tuple[np.ndarray, np.ndarray, int]:
    """Return which ratio of signal to background each pixel has, the tables, and their first bin."""
    pulse, noise = likelihood.pulse, likelihood.noise
    least = float(noise[likelihood.has_data].min())
    kind = np.where(likelihood.has_data, 10.0 * np.log(noise / least), -1.0).astype(np.int32)
    levels = least * np.exp(0.1 * (np.arange(kind.max() + 1) + 0.5))
    seen = pulse.knots[pulse.density(pulse.knots) > FAINT * least]
    # For a tag at y the pulse is seen from depths y - last knot to y - first knot.
    first = math.floor(-seen[-1] / width) - 1
    length = min(math.ceil(-seen[0] / width) + 2 - first, bins)
    tag = (np.arange(PHASES) + 0.5) / PHASES
    centre = first + np.arange(length) + 0.5
    p = pulse.density(width * (tag[:, None] - centre))
    return kind, np.log1p(p / levels[:, None, None]).astype(np.float32), first


def _scene(likelihood: DetectionTimes, bins: int) -> np.ndarray:
    """Return the log of the scene's density of depth, relative to its least (float32, one a bin)."""
    tags, trust = _tags(likelihood), _trust(likelihood)
    weight = np.repeat(np.where(likelihood.has_data, trust, 0.0).ravel(), np.diff(likelihood.start))
    place = np.minimum(likelihood.y * (bins / likelihood.pulse.period), bins - 1).astype(np.int32)
    smooth = gaussian_filter1d(np.bincount(place, weight, bins), SCENE_BLUR * FINE, mode="wrap")
    noise = likelihood.noise * likelihood.pulse.period
    background = float(np.sum(tags * trust * noise / (1.0 + noise)))
    signal = np.maximum(smooth - background / bins, 0.0)
    total = signal.sum()
    if total == 0.0:
        return np.zeros(bins, np.float32)
    return np.log1p((1.0 / ANYWHERE - 1.0) * bins * signal / total).astype(np.float32)


def _window(rms: float) -> np.ndarray:
    """Return the weights of a Gaussian window, 1 at its centre."""
    reach = math.ceil(CUT * rms)
    offset = np.arange(-reach, reach + 1)
    square = (offset[:, None] ** 2 + offset**2) / rms**2
    return np.where(square <= CUT**2, np.exp(-0.5 * square), 0.0).astype(np.float32)
