"""How a solve went: status, trace, certificate."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum

import numpy as np


class Status(Enum):
    """How a solve ended; each member carries its meaning and what to do about it."""

    CONVERGED = ("the relative gap is within the tolerance", "nothing needs to be done")
    ITERATION_LIMIT = (
        "the iteration limit came before the tolerance; the image is the last iterate",
        "raise max_iterations, or start from this image",
    )
    PRECISION_LIMIT = (
        "the gap stopped falling where single precision ends; the image is as good as it gets",
        'ask for a tolerance of 1e-6 or more, or give solver="conic" for a small image',
    )
    NOT_FINITE = (
        "a value stopped being finite; the image is the last finite iterate",
        "give tighter finite bounds, and check gain and background for extreme values",
    )
    NOT_MONOTONE = (
        "a majorise-minimise step could not lower the objective; the image is the best so far",
        "accept it if the relative gap is small enough, or loosen the tolerance",
    )
    STOPPED = ("the callback asked to stop; the image is the last iterate", "start from this image to go on")
    SOLVER_FAILED = (
        "the conic solver ended without an optimum; the image is what it last held, or the start",
        "use the primal-dual solver, or a smaller image, or check that bounds and data agree",
    )

    @property
    def meaning(self) -> str:
        """What happened."""
        return self.value[0]

    @property
    def remedy(self) -> str:
        """What to do about it."""
        return self.value[1]


@dataclass(frozen=True, eq=False)
class Trace:
    """What was measured while solving; arrays of equal length, one entry a measurement."""

    iteration: np.ndarray
    objective: np.ndarray
    dual_value: np.ndarray
    relative_gap: np.ndarray
    seconds: np.ndarray


@dataclass(frozen=True, eq=False)
class Diagnostics:
    """The certificate of a solve and how it was reached.

    objective: half the deviance + the priors at the image.
    dual_value: a value that no image within the bounds can get below. For a likelihood that is not
        convex: the value that no image can get below in the convex majorant at the last iterate.
    relative_gap: see `relative_gap`.
    iterations: number of iterations (for majorise-minimise, of all inner solves together).
    seconds: wall-clock time.
    deviance_per_pixel: deviance over the number of pixels with data; near 1 where counts are many
        and the model is right, less or more at about one count a pixel.
    pixels_at_bounds: number of pixels at a bound of the problem.
    solver: the name of the solver that ran.
    trace: the history.
    """

    objective: float
    dual_value: float
    relative_gap: float
    iterations: int
    seconds: float
    deviance_per_pixel: float
    pixels_at_bounds: int
    solver: str
    trace: Trace


def relative_gap(objective: float, dual_value: float, pixels: int) -> float:
    """Return (objective - dual value) / max(|objective|, pixels * 1e-6).

    The floor, a millionth of a half deviance a pixel, lets data that a flat image fits exactly converge.
    """
    if objective == np.inf:
        return np.inf
    return (objective - dual_value) / max(abs(objective), pixels * 1e-6)
