"""What an analog detection chain makes of a number of electrons."""

import math
from dataclasses import dataclass

import numpy as np

from recon.errors import InputError
from recon.validation import Range, number, store

# Twelve decades to either side keep squares and quotients finite, in float32 readings too.
_GAIN = Range("the mean reading of one electron, between 1e-12 and 1e12", 1e-12, 1e12)
_VARIANCE = Range("the variance of the reading of one electron, between 0 and 1e24", 0.0, 1e24)
_OFFSET = Range("the mean reading without electrons, between -1e12 and 1e12", -1e12, 1e12)
_NOISE = Range("the rms of a reading without electrons, between 1e-12 and 1e12", 1e-12, 1e12)
_CEILING = Range("a number, or inf for a chain that never saturates", high=math.inf)


@dataclass(frozen=True)
class MarkLaw:
    """The law of a reading given the number N of electrons, all in units of the reading.

        reading ~ Normal(mean = offset + gain N, variance = variance N + noise^2)

    gain: mean reading of one electron, between 1e-12 and 1e12.
    variance: of the reading of one electron, 0 to 1e24: the spread of the multiplication.
    offset: mean reading without electrons, up to 1e12 either way.
    noise: rms of a reading without electrons, between 1e-12 and 1e12. Its default is refused: every
        analog chain has noise, and without it a reading has no density.
    ceiling: readings at or above it are saturated and recorded as the ceiling; inf = never. Rounded to
        float32, the type of a reading, so that the two compare exactly.

    Raises InputError, also if the ceiling is not above offset + gain.
    """

    gain: float = 1.0
    variance: float = 0.0
    offset: float = 0.0
    noise: float = 0.0
    ceiling: float = math.inf

    def __post_init__(self) -> None:
        ceiling = number(self.ceiling, "ceiling", _CEILING)
        with np.errstate(over="ignore"):
            ceiling = float(np.float32(ceiling))
        store(
            self,
            gain=number(self.gain, "gain", _GAIN),
            variance=number(self.variance, "variance", _VARIANCE),
            offset=number(self.offset, "offset", _OFFSET),
            noise=number(self.noise, "noise", _NOISE),
            ceiling=ceiling,
        )
        if not self.ceiling > self.offset + self.gain:
            raise InputError(
                f"ceiling is {self.ceiling:g}, not above offset + gain = {self.offset + self.gain:g}; "
                "give the reading at which the chain saturates, above that of one electron."
            )


def checked_law(law: MarkLaw | None) -> MarkLaw | None:
    """The law, if it is one or None. Raises InputError."""
    if not isinstance(law, MarkLaw | None):
        raise InputError(f"law is {type(law).__name__}; give a recon.MarkLaw, or None for whole numbers.")
    return law
