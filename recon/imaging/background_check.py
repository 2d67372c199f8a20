"""Whether the tags away from the surface are as many as the declared background says."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from recon.acquisition import TimeTags
from recon.likelihoods.detection_times import DetectionTimes

CLEAR = 8.0  # of the pulse's core: what is further from the surface is taken for background
CERTAIN = 0.02  # largest chance of a wrong surface in a pixel that is asked
SECTIONS = 50  # of the period, that `allowed_background` compares
SURE = 5.0  # standard errors that a difference must have to be called one
SHARE, SIGNAL = 0.1, 0.02  # of the declared background, of the signal: differences below are let pass


@dataclass(frozen=True)
class BackgroundCheck:
    """Background per trial, declared and found, in the mean over the pixels that were asked.

    found: tags further than eight cores of the pulse from the surface, over the exposure there.
    standard_error: of found. fits: whether the two agree as well as can be told. pixels: how many were asked.
    """

    declared: float
    found: float
    standard_error: float
    fits: bool
    pixels: int

    @property
    def words(self) -> str:
        """What there is to say, in a sentence; empty where the background fits."""
        if self.fits:
            return ""
        return (
            f"the background does not fit: {self.declared:.3g} detections a trial are declared, and the tags"
            f" away from the surface say {self.found:.3g} +- {self.standard_error:.1g}; correct it"
        )


def allowed_background(tags: TimeTags) -> float:
    """Return the largest factor, up to 1, of the declared background that the tags allow.

    Background is uniform over the period, so it cannot be more than what the quietest fifth of the period
    holds, what is lost by choosing it (1.4 standard deviations a section, the mean of the lowest fifth of a
    normal sample), and three standard errors. 1 with a dead time, which makes tags themselves uneven.
    """
    if tags.dead_time is not None or not tags.time.size:
        return 1.0
    opening, closing = (0.0, tags.period) if tags.gate is None else tags.gate
    usable = np.ones(tags.shape, bool) if tags.mask is None else tags.mask
    each = np.repeat(usable.ravel(), np.diff(tags.start))
    tagged = np.sort(np.histogram(tags.time[each], SECTIONS, (opening, closing))[0])
    quiet = tagged[: SECTIONS // 5]
    declared = np.broadcast_to(np.asarray(tags.trials * np.asarray(tags.background)), tags.shape)[
        usable
    ].sum()
    expected = float(declared) * (closing - opening) / tags.period / SECTIONS * quiet.size
    if expected <= 0.0:
        return 1.0
    # the mean m whose lowest fifth is like this: m - 1.4 sqrt(m) = mean of the quiet
    most = (0.7 + np.sqrt(0.49 + quiet.mean())) ** 2
    return float(min(1.0, quiet.size * (most + 3.0 * np.sqrt((most + 1.0) / quiet.size)) / expected))


def background_check(
    likelihood: DetectionTimes, declared: np.ndarray | float, depth: np.ndarray, wrong_surface: np.ndarray
) -> BackgroundCheck:
    """Count the tags away from the surface, in pixels whose surface is certain.

    declared: per trial, a number or a map. depth: m; wrong_surface: probability, (rows, columns).
    """
    reach = min(CLEAR * likelihood.pulse.core, 0.5 * likelihood.pulse.period)
    inside, _, near = likelihood.gated(depth, reach)
    asked = likelihood.exposed & (wrong_surface < CERTAIN)
    outside = np.diff(likelihood.start).reshape(likelihood.shape) - inside
    exposure = np.maximum(likelihood.live.uniform - near, 0.0)
    total = float(exposure[asked].sum())
    if total <= 0.0:
        return BackgroundCheck(float(np.mean(declared)), np.nan, np.inf, True, 0)
    tags = float(outside[asked].sum())
    said = float((np.broadcast_to(declared, likelihood.shape) * exposure)[asked].sum()) / total
    found, error = tags / total, np.sqrt(max(tags, 1.0)) / total
    passed = max(SHARE * said, SIGNAL * float(likelihood.signal[asked].mean()), SURE * error)
    return BackgroundCheck(said, found, float(error), abs(found - said) <= passed, int(asked.sum()))
