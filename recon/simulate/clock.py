"""How a clock reads the moment of a detection."""

from dataclasses import dataclass
from typing import Self

import numpy as np
from numpy.typing import NDArray

from recon.errors import InputError
from recon.validation import DURATION, number

ROUNDING = 1e-6  # of an interval


@dataclass(frozen=True)
class Clock:
    """Reads times in `steps` intervals a period; None = exactly.

    dither: s, full width of the delays added before reading, or None.
    first, last: the intervals it may give where there is no delay.
    """

    period: float
    steps: int | None = None
    dither: float | None = None
    first: int = 0
    last: int = 0

    @classmethod
    def of(
        cls,
        period: float,
        interval: float | None,
        dither: float | None,
        gate: tuple[float, float] | None,
    ) -> Self:
        """Return the clock these settings describe, or raise InputError."""
        if interval is None:
            if dither is not None:
                raise InputError(f"dither is {dither} and interval None; give the interval of the clock too.")
            return cls(period)
        steps = whole_intervals(period, interval)
        if dither is not None:
            return cls(period, steps, number(dither, "dither", DURATION))
        ends = np.array([0.0, period] if gate is None else gate) / period * steps
        if np.any(np.abs(ends - np.rint(ends)) > ROUNDING):
            raise InputError(
                f"gate is {gate} s, parts of an interval of {interval:g} s; "
                "start and stop it at a whole number of intervals."
            )
        first, stop = np.rint(ends).astype(int)
        return cls(period, steps, None, first, stop - 1)

    def read(self, time: NDArray, rng: np.random.Generator) -> tuple[NDArray, NDArray | None]:
        """Return what the clock says of times within the period, and the delays added before."""
        if self.steps is None:
            return time, None
        width = self.period / self.steps
        if self.dither is None:
            step = np.clip(np.floor(time / self.period * self.steps), self.first, self.last)
            return (step + 0.5) * width, None
        delay = self.dither * rng.random(time.size)
        step = np.mod(np.floor((time + delay) / self.period * self.steps), self.steps)
        return (step + 0.5) * width, delay


def whole_intervals(period: float, interval: float) -> int:
    """How many intervals the period holds."""
    interval = number(interval, "interval", DURATION)
    steps = round(period / interval)
    if steps < 1 or abs(steps * interval - period) > ROUNDING * interval:
        raise InputError(f"interval is {interval:g} s; give one that divides the period of {period:g} s.")
    return steps
