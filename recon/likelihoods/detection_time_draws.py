"""Tags drawn as if a depth were true: each function returns how many every pixel has, and their ranges."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from recon.acquisition.pulses import GaussianPulse

if TYPE_CHECKING:
    from recon.likelihoods.detection_times import DetectionTimes


def draw_given_number(
    likelihood: DetectionTimes, z: np.ndarray, rng: np.random.Generator
) -> tuple[np.ndarray, np.ndarray]:
    """Draw as many tags as there are; a coarse clock keeps each tag's phase."""
    tags, pulse = np.diff(likelihood.start), likelihood.pulse
    noise = np.repeat(likelihood.noise.ravel(), tags)
    y = np.repeat(z.ravel(), tags)
    y += _pulse_draws(likelihood, y.size, rng)
    is_noise = rng.random(y.size) * (1.0 + noise * pulse.period) >= 1.0
    y[is_noise] = pulse.period * rng.random(int(is_noise.sum()))
    if pulse.interval > 0.0:
        y = likelihood.y + pulse.interval * np.round((y - likelihood.y) / pulse.interval)
    return tags, y


def draw_given_exposure(
    likelihood: DetectionTimes, z: np.ndarray, rng: np.random.Generator
) -> tuple[np.ndarray, np.ndarray]:
    """Draw the Poisson process of rate E r, E being the live exposure that was recorded.

    All that falls on every period is drawn, and the share seen that is awake. A coarse clock takes the
    phase of any tag of the pixel.
    """
    pulse, live, pixels = likelihood.pulse, likelihood.live, np.arange(likelihood.signal.size)
    expected = np.where(likelihood.has_data, likelihood.trials * likelihood.signal, 0.0).ravel()
    signal = np.repeat(pixels, rng.poisson(expected))
    noise = np.repeat(pixels, rng.poisson(expected * likelihood.noise.ravel() * pulse.period))
    y = z.ravel()[signal] + _pulse_draws(likelihood, signal.size, rng)
    y, pixel = np.append(y, pulse.period * rng.random(noise.size)), np.append(signal, noise)
    # A window that starts at a coarse tag starts anywhere in its interval.
    blurred = y + pulse.interval * (rng.random(y.size) - 0.5)
    seen = np.flatnonzero(rng.random(y.size) < live.awake(blurred, pixel))
    seen = seen[np.argsort(pixel[seen], kind="stable")]
    y, pixel = y[seen], pixel[seen]
    if pulse.interval > 0.0:
        tags = np.diff(likelihood.start)[pixel]
        like = likelihood.y[likelihood.start[pixel] + (rng.random(y.size) * tags).astype(np.int64)]
        y = like + pulse.interval * np.round((y - like) / pulse.interval)
    return np.bincount(pixel, minlength=pixels.size), y


def _pulse_draws(likelihood: DetectionTimes, size: int, rng: np.random.Generator) -> np.ndarray:
    """Draw from the pulse, metres, before a clock's intervals."""
    pulse, law, metres = likelihood.pulse, likelihood.law, likelihood.metres
    smooth = pulse.resolution * rng.standard_normal(size)
    if isinstance(law, GaussianPulse):
        return smooth
    first, last = law.support
    fine = np.linspace(first, last, 2 + math.ceil(4.0 * metres * (last - first) / pulse.step))
    share = law.cumulative(fine)
    return smooth + metres * np.interp(rng.uniform(share[0], share[-1], size), share, fine)
