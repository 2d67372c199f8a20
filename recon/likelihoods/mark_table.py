"""Readings in classes, and the probability of each class given the number of electrons.

A class is an interval of readings, a quarter of the noise wide; the likelihood of a class is exact. (Noise
of less than gain / 32 does not blur the electrons together, and finer classes than that would tell
nothing more.) The saturated readings are a class by themselves.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from recon.acquisition.mark_law import MarkLaw
from recon.errors import InputError
from recon.likelihoods.frame_tally import LARGEST
from recon.validation import BLOCK, first

_REACH = 100.0  # twice the exponent down to which probabilities are kept: exp(-50) = 2e-22


def class_width(law: MarkLaw) -> float:
    """Return the width of a class, in units of the reading."""
    spread = min(np.sqrt(law.variance) or law.gain, law.gain)
    return max(law.noise / 4.0, spread / 128.0)


@dataclass(frozen=True, eq=False)
class MarkTable:
    """The classes of some readings. Class c holds readings from low[c] up to high[c].

    low, high: (classes,), readings less the offset; high = inf: saturated.
    begin: (classes,) int64, the number of electrons of the first weight; start: (classes + 1,) int64,
        where the weights of a class start.
    weight: P(class | N) exp(-peak[class]) for N from begin on; those left out are below 1e-21. Of the
        saturated class first P(class | N), then 1 - P(class | N), from N = 0 on; then they are 1 and 0.
    law: (3,) float64, gain, variance per electron, variance of the noise.
    """

    low: np.ndarray
    high: np.ndarray
    begin: np.ndarray
    start: np.ndarray
    peak: np.ndarray
    weight: np.ndarray
    law: np.ndarray

    @property
    def parts(self) -> tuple:
        """What kernels take."""
        return self.low, self.high, self.begin, self.start, self.peak, self.weight, self.law

    @property
    def most(self) -> int:
        """One more than the largest number of electrons with a weight."""
        number = np.diff(self.start) // np.where(np.isinf(self.high), 2, 1)
        return int(np.max(self.begin + number))


def mark_table(low: np.ndarray, high: np.ndarray, law: MarkLaw) -> MarkTable:
    """Return the table of classes from low to high (readings less the offset; high = inf: saturated)."""
    from recon.likelihoods import mark_table_kernels as kernels

    gain, variance, noise = law.gain, law.variance, law.noise**2
    saturated = np.isinf(high)
    # (reading - gain N)^2 = _REACH (variance N + noise), for the ends of the class
    ends = []
    for reading, sign in ((low, -1.0), (np.where(saturated, low, high), 1.0)):
        middle = gain * reading + 0.5 * _REACH * variance
        root = np.sqrt(np.maximum(middle**2 - gain**2 * (reading**2 - _REACH * noise), 0.0))
        ends.append((middle + sign * root) / gain**2)
    begin = np.maximum(np.floor(ends[0]), 0.0).astype(np.int64)
    last = np.maximum(np.ceil(ends[1]), begin + 1.0).astype(np.int64)
    begin[saturated] = 0
    number = (last - begin + 1) * np.where(saturated, 2, 1)
    start = np.concatenate([[0], np.cumsum(number)])
    peak, weight = np.empty(low.size), np.empty(start[-1])
    shape = np.array([gain, variance, noise])
    kernels.weigh(low, high, begin, start, shape, peak, weight)
    return MarkTable(low, high, begin, start, peak, weight, shape)


def classify(readings: np.ndarray, law: MarkLaw) -> tuple[np.ndarray, MarkTable]:
    """Return the class of every reading, from 1 on (uint16 or uint32), and the table of the classes.

    readings: (frames, rows, columns).

    Raises InputError if a reading is far beyond any that electrons and noise explain.
    """
    width = class_width(law)
    lowest, highest = float(readings.min()) - law.offset, float(readings.max()) - law.offset
    bottom, top = round(lowest / width) - 1, round(highest / width) + 1
    if max(highest / law.gain, abs(lowest) / law.gain) > LARGEST or top - bottom > 16 * LARGEST:
        far = np.abs(readings - law.offset) >= max(highest, -lowest)
        place = first(far)
        raise InputError(
            f"counts at {place} is {readings[place]:g}, a reading of more electrons than law={law} can tell "
            "apart; give the law of these readings, or a ceiling at which they are saturated."
        )
    used = np.zeros(top - bottom + 2, bool)
    block = max(1, BLOCK // readings[0].size)
    begins = range(0, len(readings), block)
    for begin in begins:
        used[_places(readings[begin : begin + block], law, width, bottom, used.size)] = True
    code = np.cumsum(used)
    code = code.astype(np.uint16 if code[-1] <= np.iinfo(np.uint16).max else np.uint32)
    codes = np.empty(readings.shape, code.dtype)
    for begin in begins:
        some = slice(begin, begin + block)
        codes[some] = code[_places(readings[some], law, width, bottom, used.size)]
    place = np.flatnonzero(used)
    low = (place + bottom - 0.5) * width
    high = np.minimum(low + width, law.ceiling - law.offset)
    saturated = place == used.size - 1
    low[saturated], high[saturated] = law.ceiling - law.offset, np.inf
    return codes, mark_table(low, high, law)


def _places(readings: np.ndarray, law: MarkLaw, width: float, bottom: int, size: int) -> np.ndarray:
    """Return the place of the class of every reading in a row of all classes, the saturated one last."""
    place = np.floor((readings.astype(np.float64) - law.offset) / width + 0.5).astype(np.int64) - bottom
    return np.where(readings >= law.ceiling, size - 1, place)
