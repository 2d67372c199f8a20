"""Images made without a prior, to lay beside the reconstruction."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from recon.acquisition import Counts, Frames, TimeHistogram, TimeTags
from recon.imaging.reflectivity import counting_likelihood
from recon.imaging.yield_estimators import conventional_yield, total_dose

if TYPE_CHECKING:
    from recon.imaging import Reconstruction
    from recon.likelihoods import Likelihood

Acquisition = Counts | TimeTags | TimeHistogram | Frames


def detections(acquisition: Acquisition) -> np.ndarray:
    """Return the number of detections of every pixel, over all its trials or frames.

    Of readings, the electrons that their sum stands for, rounded.
    """
    if isinstance(acquisition, Frames):
        if acquisition.law is not None:
            electrons = conventional_yield(acquisition).image * total_dose(acquisition)
            return np.maximum(np.rint(np.nan_to_num(electrons)), 0.0).astype(np.int64)
        return acquisition.counts.sum(axis=0, dtype=np.int64)
    return _counts(acquisition).detections


@dataclass(frozen=True, eq=False)
class DataImage:
    """What was recorded, as an image: float32, NaN where a pixel is not usable; whole where it is numbers."""

    values: np.ndarray
    label: str
    whole: bool


def data_image(acquisition: Acquisition) -> DataImage:
    """Return the detections of every pixel, or detections per trial where pixels made different trials."""
    values, label, whole = detections(acquisition).astype(np.float32), "detections", True
    if not isinstance(acquisition, Frames) and isinstance(acquisition.trials, np.ndarray):
        with np.errstate(divide="ignore", invalid="ignore"):
            values = np.where(acquisition.trials > 0, values / acquisition.trials, np.nan)
        label, whole = "detections per trial", False
    if acquisition.mask is not None:
        values = np.where(acquisition.mask, values, np.nan)
    return DataImage(values, label, whole)


def pixel_by_pixel(acquisition: Acquisition, reconstruction: Reconstruction) -> dict[str, np.ndarray]:
    """Return the conventional image of every pixel by itself, by name; NaN where it has no data.

    reflectivity: maximum likelihood from the pixel's own detections.
    depth: maximum likelihood from the pixel's own tags, at the reconstructed reflectivity.
    electron_yield: electrons over expected primaries.
    """
    return {name: _conventional(name, acquisition, reconstruction) for name in reconstruction.images}


def _conventional(name: str, acquisition: Acquisition, reconstruction: Reconstruction) -> np.ndarray:
    if isinstance(acquisition, Frames):
        return conventional_yield(acquisition).image.astype(np.float32)
    if name == "depth":
        from recon.likelihoods.detection_times import DetectionTimes

        tags = acquisition.tags() if isinstance(acquisition, TimeHistogram) else acquisition
        likelihood: Likelihood = DetectionTimes(tags, reconstruction.reflectivity.image)
    else:
        likelihood = counting_likelihood(_counts(acquisition))
    return np.where(likelihood.has_data, likelihood.estimate(), np.float32(np.nan))


def _counts(acquisition: Counts | TimeTags | TimeHistogram) -> Counts:
    return acquisition if isinstance(acquisition, Counts) else acquisition.counts()
