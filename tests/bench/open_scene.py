"""The open scene of the depth benchmarks, and the plain way to its depth."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
from scipy.ndimage import distance_transform_edt, gaussian_filter
from skimage.data import stereo_motorcycle

import recon
from recon.acquisition.time_tags import SPEED_OF_LIGHT

PULSE, PERIOD = 0.27e-9, 100e-9
TRIALS = 1000
BIN = 0.5  # of the pulse's rms


@cache
def open_scene() -> tuple[np.ndarray, np.ndarray]:
    """Return depth (m) and reflectivity of scikit-image's stereo pair, 240 x 360.

    Calibration of the pair: depth = 994.978 * 0.193001 / (disparity + 31.086) m; holes take the nearest
    value.
    """
    left, _, disparity = stereo_motorcycle()
    depth = 994.978 * 0.193001 / (np.asarray(disparity, float) + 31.086)
    hole = ~np.isfinite(disparity)
    nearest = distance_transform_edt(hole, return_distances=False, return_indices=True)
    reflectivity = 0.05 + 0.9 * left.mean(axis=2) / 255.0
    return depth[tuple(nearest)][::2, ::2][:240, :360], reflectivity[::2, ::2][:240, :360]


def acquisition(
    signal: float, background: float, seed: int, part: tuple[slice, slice] | None = None, **settings: object
) -> recon.TimeTags:
    """Draw the scene (or a part of it) at these mean detections a pixel."""
    depth, reflectivity = open_scene()
    if part is not None:
        depth, reflectivity = depth[part], reflectivity[part]
    trials = settings.pop("trials", TRIALS)
    return recon.simulate.time_tags(
        depth, reflectivity, trials, PERIOD, recon.GaussianPulse(PULSE),
        gain=signal / trials / reflectivity.mean(), background=background / trials, seed=seed, **settings,
    )  # fmt: skip


@dataclass(frozen=True)
class DepthError:
    """Mean and median absolute error, m, and the share of pixels off by more than 0.1 m, in per cent."""

    mean: float
    median: float
    far: float

    def __str__(self) -> str:
        return f"{self.mean:.4f} m, {self.median:.4f} m, {self.far:.1f} %"


def depth_error(image: np.ndarray, truth: np.ndarray) -> DepthError:
    """Compare a depth image with the truth."""
    error = np.abs(np.asarray(image, float) - truth)
    return DepthError(float(error.mean()), float(np.median(error)), 100.0 * float(np.mean(error > 0.1)))


def windowed(tags: recon.TimeTags, reflectivity: np.ndarray, widths: tuple[float, ...]) -> list[np.ndarray]:
    """Return, for each rms of a Gaussian window (pixels), the depth of the best pooled log-likelihood."""
    metres = SPEED_OF_LIGHT / 2.0
    rms, far = metres * PULSE, metres * PERIOD
    bins = round(far / (BIN * rms))
    place = (np.arange(bins) + 0.5) * far / bins
    cube = np.zeros((*tags.shape, bins), np.float32)
    ratio = np.asarray(tags.gain * reflectivity / tags.background) * far
    reach = 12
    centre = (metres * tags.time / far * bins).astype(int)
    for k in range(-reach, reach + 1):
        bin_ = (centre + k) % bins
        u = np.abs(place[bin_] - metres * tags.time)
        u = np.minimum(u, far - u) / rms
        p = np.exp(-0.5 * u * u) / (rms * np.sqrt(2.0 * np.pi))
        np.add.at(cube, (tags.row, tags.column, bin_), np.log1p(ratio[tags.row, tags.column] * p))
    return [place[np.argmax(gaussian_filter(cube, (w, w, 0.0)), axis=2)] for w in widths]
