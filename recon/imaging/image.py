"""What a task returns: images in physical units."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from recon.acquisition import Counts, Frames, TimeHistogram, TimeTags
from recon.diagnostics import Diagnostics, Status
from recon.problem import Prior, Problem
from recon.weights import Choice


@dataclass(frozen=True, eq=False)
class PhysicalImage:
    """An image in a physical unit, with its uncertainty and how it was solved for.

    image: float32 (rows, columns), in `unit`.
    unit: SI unit, "1" for a ratio.
    uncertainty: float32 standard uncertainty of each pixel, in `unit`.
    filled: boolean map, True where the pixel has no usable data and the prior alone fills it in.
    problem: what was solved: likelihood, priors with their weights, bounds.
    tolerance: the relative gap that was aimed at.
    notes: sentences that a reader should know; often none.
    choice: how the open weights were chosen by held-out data; None if they were not.
    status, diagnostics: how the solve ended.
    """

    image: np.ndarray
    unit: str
    uncertainty: np.ndarray
    filled: np.ndarray
    problem: Problem
    tolerance: float
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
