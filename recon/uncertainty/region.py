"""The mean of an image over a region, where data are many and no prior is needed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.ndimage import gaussian_filter

from recon.errors import InputError
from recon.likelihoods.contract import Likelihood
from recon.weights.scoring import lifted

STEPS = 4
BLUR = 1.5  # pixels
LEAST = 0.02  # of the mean of an image: taken where it is less, for the information
NORMAL_95 = 1.959964  # standard deviations that hold 95 % of a normal law


@dataclass(frozen=True)
class RegionAverage:
    """The mean over a region, in the unit of the image.

    uncertainty: standard uncertainty. interval_68, interval_95: (low, high), of a normal law.
    pixels: those in the region that have data.
    of_image: the mean of the image itself, in which what the prior smoothed away is missing.
    """

    mean: float
    uncertainty: float
    interval_68: tuple[float, float]
    interval_95: tuple[float, float]
    pixels: int
    of_image: float


def region_average(
    likelihood: Likelihood, image: np.ndarray, region: np.ndarray, shared: bool = False
) -> RegionAverage:
    """Return the mean over the pixels of a region that have data, by steps from the image.

    A step of Fisher scoring from the image, x - (dL/dx) / I, is unbiased to first order whatever the prior
    did to x (Le Cam 1956); for Poisson counts it is the detections over the exposure, less the background.
    Its mean over a region has the standard uncertainty sqrt(sum of 1 / I) / pixels. The image in the region
    is moved by it, and the step taken again from there, four times in all, since I is that of the image. It
    starts from the image blurred a little, lest a pixel's own noise weigh it.

    region: boolean (rows, columns).
    shared: take one step for the whole region, sum of dL/dx over sum of I, for likelihoods where single
        pixels know next to nothing; the uncertainty is 1 / sqrt(sum of I).

    Raises InputError.
    """
    region = np.asarray(region)
    if region.shape != tuple(likelihood.shape) or region.dtype != bool:
        raise InputError(
            f"region has shape {region.shape} and type {region.dtype}; give booleans of shape"
            f" {tuple(likelihood.shape)}."
        )
    x = np.asarray(image, np.float64)
    here = x if shared else lifted(gaussian_filter(x, BLUR), likelihood, LEAST)
    for _ in range(1 if shared else STEPS):
        with np.errstate(divide="ignore", invalid="ignore"):
            gradient, information = likelihood.gradient(here), likelihood.fisher_information(here)
        used = region & likelihood.has_data & np.isfinite(gradient) & np.isfinite(information)
        used &= information > 0.0
        pixels = int(np.count_nonzero(used))
        if not pixels:
            raise InputError("region holds no pixel with data; give a larger one.")
        g, i = gradient[used], information[used]
        if shared:
            step, uncertainty = g.sum() / i.sum(), 1.0 / np.sqrt(i.sum())
        else:
            step, uncertainty = np.mean(g / i), np.sqrt(np.sum(1.0 / i)) / pixels
        mean = float(here[used].mean() - step)
        here = np.where(region, here - step, here)
        here = here if shared else lifted(here, likelihood, LEAST)
    uncertainty = float(uncertainty)
    low, high = (mean - NORMAL_95 * uncertainty, mean + NORMAL_95 * uncertainty)
    return RegionAverage(
        mean, uncertainty, (mean - uncertainty, mean + uncertainty), (low, high), pixels,
        float(x[used].mean()),
    )  # fmt: skip
