"""What acquisitions of single-photon ranging have in common."""

import math
from dataclasses import KW_ONLY, dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.acquisition.counts import Counts
from recon.acquisition.dead_time import DeadTime
from recon.acquisition.pulses import GaussianPulse, SampledPulse
from recon.errors import InputError
from recon.validation import (
    DURATION,
    INSTANT,
    NONNEGATIVE,
    Range,
    first,
    memory_limit,
    number,
    number_or_map,
    store,
    whole_numbers,
)

SPEED_OF_LIGHT = 299792458.0  # m/s, exact
MOST_PIXELS = 2**31 - 1  # a pixel index is an int32
REFRACTIVE_INDEX = Range("a refractive index between 1 and 1000", low=1.0, high=1000.0)
ROUNDING = 1e-9  # relative, of a product of settings


@dataclass(frozen=True, eq=False)
class Ranging:
    """The settings of an instrument that times single photons; the base of what it can record.

    TimeTags and TimeHistogram say what each setting means.
    """

    _: KW_ONLY
    trials: float | NDArray[np.floating]
    period: float
    pulse: GaussianPulse | SampledPulse
    gain: float | NDArray[np.floating] = 1.0
    background: float | NDArray[np.floating] = 0.0
    mask: NDArray[np.bool_] | None = None
    time_zero: float = 0.0
    offset: float | NDArray[np.floating] = 0.0
    refractive_index: float = 1.0
    dead_time: DeadTime | None = None
    _counts: Counts = field(init=False, repr=False)

    @property
    def unambiguous_range(self) -> float:
        """Range in m from which a return takes one period longer than from range 0."""
        return SPEED_OF_LIGHT * self.period / (2 * self.refractive_index)

    def counts(self) -> Counts:
        """The number of detections of every pixel, with `several_per_trial`: a period may hold more than one.

        The background is that within the gate. The trials are those made, whatever the dead time took
        of them.
        """
        return self._counts

    def _check_settings(self, shape: tuple[int, int]) -> None:
        if not isinstance(self.pulse, GaussianPulse | SampledPulse):
            raise InputError(f"pulse is {type(self.pulse).__name__}; give a GaussianPulse or a SampledPulse.")
        if not isinstance(self.dead_time, DeadTime | None):
            raise InputError(f"dead_time is {type(self.dead_time).__name__}; give a DeadTime or None.")
        store(
            self,
            period=number(self.period, "period", DURATION),
            background=number_or_map(self.background, "background", shape, NONNEGATIVE),
            time_zero=number(self.time_zero, "time_zero", INSTANT),
            offset=number_or_map(self.offset, "offset", shape, INSTANT),
            refractive_index=number(self.refractive_index, "refractive_index", REFRACTIVE_INDEX),
        )

    def _check_detections(self, detections: NDArray[np.integer], gate: tuple[float, float] | None) -> None:
        share = 1.0 if gate is None else (gate[1] - gate[0]) / self.period
        background = self.background if share == 1 else self.background * share
        counts = Counts(detections, self.trials, self.gain, background, self.mask, several_per_trial=True)
        store(self, trials=counts.trials, gain=counts.gain, mask=counts.mask, _counts=counts)
        if self.dead_time is not None:
            self._refuse_more_than_dead_time_allows(self.dead_time)

    def _refuse_more_than_dead_time_allows(self, dead_time: DeadTime) -> None:
        periods = self.period / dead_time.blind
        trials = np.asarray(self.trials, dtype=np.float64)
        with np.errstate(over="ignore"):  # no limit, then
            if dead_time.reset_every_period:  # part of a period may record as many as a whole one
                most = np.ceil(trials) * math.ceil(periods)
            else:
                most = np.floor(trials * periods * (1 + ROUNDING)) + 1
        bad = self._counts.detections > most
        if self.mask is not None:
            bad &= self.mask
        if bad.any():
            place = first(bad)
            limit = np.broadcast_to(most, bad.shape)[place]
            raise InputError(
                f"detections at {place} is {self._counts.detections[place]}, above the {limit:.0f} that "
                f"dead_time {dead_time.blind} s allows in the trials of that pixel; "
                "correct dead_time or trials, or mask the pixel."
            )


def image_shape(shape: ArrayLike) -> tuple[int, int]:
    """(rows, columns) as Python integers, both at least 1 and few enough to index and to hold."""
    sizes = whole_numbers(shape, "shape", Range("whole numbers, 1 or more", 1, MOST_PIXELS))
    if sizes.shape != (2,):
        raise InputError(f"shape has {sizes.size} entries; give (rows, columns).")
    rows, columns = (int(size) for size in sizes)
    most = min(MOST_PIXELS, memory_limit() // 32)
    if rows * columns > most:
        raise InputError(
            f"shape is ({rows}, {columns}), {rows * columns} pixels; give at most {most} on this machine."
        )
    return rows, columns
