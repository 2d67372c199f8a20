"""What a task returns: images in physical units."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from recon.acquisition import Counts, Frames, TimeHistogram, TimeTags
from recon.diagnostics import Diagnostics, Status
from recon.errors import InputError
from recon.problem import Prior, Problem
from recon.uncertainty import OF_95, RegionAverage, region_average
from recon.weights import Choice, HeldOutFit

SHARES = {0.68: 1.0, 0.95: OF_95}  # of an interval, and its half width in standard uncertainties


@dataclass(frozen=True, eq=False)
class PhysicalImage:
    """An image in a physical unit, with its uncertainty and how it was solved for.

    image: float32 (rows, columns), in `unit`.
    unit: SI unit, "1" for a ratio.
    uncertainty: float32 standard uncertainty of each pixel, in `unit`: the truth is within it in 68 % of
        pixels, what the prior smoothed away included (`recon.uncertainty.calibrated`), or, where nothing
        could be held out, that of the pixel's own data (a note says so).
    filled: boolean map, True where the pixel has no usable data and the prior alone fills it in.
    problem: what was solved: likelihood, priors with their weights, bounds.
    tolerance: the relative gap that was aimed at.
    notes: sentences that a reader should know; often none.
    held_out: the fits to all data but a part, and what scores them; empty where nothing was held out.
    choice: how the open weights were chosen by held-out data; None if they were not.
    status, diagnostics: how the solve ended.
    """

    image: np.ndarray
    unit: str
    uncertainty: np.ndarray
    filled: np.ndarray
    problem: Problem
    tolerance: float
    held_out: tuple[HeldOutFit, ...]
    choice: Choice | None
    notes: tuple[str, ...]
    status: Status
    diagnostics: Diagnostics

    @property
    def priors(self) -> tuple[Prior, ...]:
        """The priors used, with their weights."""
        return self.problem.priors

    @property
    def bounds(self) -> tuple[float, float]:
        """The bounds used."""
        return self.problem.bounds

    def interval(self, share: float = 0.95) -> tuple[np.ndarray, np.ndarray]:
        """Return the ends of an interval that holds the truth in 68 % or 95 % of pixels (float32 maps).

        Errors have longer tails than a normal law: the wider one is 2.5 times the other. Neither reaches
        beyond the bounds. share: 0.68 or 0.95. Raises InputError.
        """
        if share not in SHARES:
            raise InputError(f"share is {share!r}; give 0.68 or 0.95, for which the width was calibrated.")
        half = self.uncertainty * np.float32(SHARES[share])
        low, high = self.bounds
        return np.clip(self.image - half, low, high), np.clip(self.image + half, low, high)

    def region(self, region: np.ndarray) -> RegionAverage:
        """Return the mean over a region (boolean map) and its uncertainty, see `region_average`."""
        return region_average(self.problem.likelihood, self.image, region)


@dataclass(frozen=True, eq=False)
class Reconstruction:
    """The images an acquisition allows; the others are None.

    acquisition: what they were made from.
    reflectivity: ratio, from counts or time tags.
    depth: range in metres, from time tags.
    electron_yield: detected secondary electrons per primary particle, from frames.
    """

    acquisition: Counts | TimeTags | TimeHistogram | Frames
    reflectivity: PhysicalImage | None = None
    depth: PhysicalImage | None = None
    electron_yield: PhysicalImage | None = None

    @property
    def images(self) -> Mapping[str, PhysicalImage]:
        """The images that there are, by name."""
        named = {
            "reflectivity": self.reflectivity, "depth": self.depth, "electron_yield": self.electron_yield,
        }  # fmt: skip
        return {name: image for name, image in named.items() if image is not None}

    @property
    def diagnostics(self) -> Mapping[str, Diagnostics]:
        """The diagnostics of every image, by name."""
        return {name: image.diagnostics for name, image in self.images.items()}

    @property
    def converged(self) -> bool:
        """Whether every image came within the tolerance."""
        return all(image.status is Status.CONVERGED for image in self.images.values())
