"""Times of single detections, pixel by pixel."""

import math
from dataclasses import KW_ONLY, dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.acquisition.counts import Counts
from recon.acquisition.pulses import GaussianPulse, SampledPulse
from recon.errors import InputError
from recon.validation import (
    DURATION,
    INSTANT,
    Range,
    frozen,
    memory_limit,
    number,
    number_or_map,
    real_values,
    store,
    whole_numbers,
)

SPEED_OF_LIGHT = 299792458.0  # m/s, exact
MOST_PIXELS = 2**31 - 1  # a pixel index is an int32
REFRACTIVE_INDEX = Range("a refractive index between 1 and 1000", low=1.0, high=1000.0)


@dataclass(frozen=True, eq=False)
class TimeTags:
    """One entry per detection: where, and when within its period.

    The rate within a period at reflectivity x and range z is
    `gain * x * p(t - time_zero - offset - 2 * refractive_index * z / c) + background / period`, with p
    the density of the pulse.

    row, column: (detections,), pixel of each detection.
    time: (detections,), s since the start of the period, in [0, period).
    shape: (rows, columns) of the image.
    trials: number of periods, one for all pixels or a map; an exposure in periods may have a fraction.
    period: s.
    pulse: GaussianPulse or SampledPulse.
    gain, background: as for Counts; the background is uniform over the period.
    mask: boolean map, True = usable pixel; None = all. Tags of other pixels are kept as recorded.
    time_zero: s, the time at which a return from range 0 arrives.
    offset: s, added to time_zero, a number or a map.
    refractive_index: of the medium between instrument and scene.
    interval: width in s of the interval each tag stands for, the tag at its centre; None = exact tags.

    The tags are kept sorted by pixel, row by row, in the order given within a pixel: those of pixel
    (i, j) are `start[p]` to `start[p + 1]` with p = i * columns + j. Arrays are copied and read-only.
    Raises InputError.
    """

    row: NDArray[np.int32]
    column: NDArray[np.int32]
    time: NDArray[np.float64]
    _: KW_ONLY
    shape: tuple[int, int]
    trials: float | NDArray[np.floating]
    period: float
    pulse: GaussianPulse | SampledPulse
    gain: float | NDArray[np.floating] = 1.0
    background: float | NDArray[np.floating] = 0.0
    mask: NDArray[np.bool_] | None = None
    time_zero: float = 0.0
    offset: float | NDArray[np.floating] = 0.0
    refractive_index: float = 1.0
    interval: float | None = None
    start: NDArray[np.int64] = field(init=False, repr=False)
    _counts: Counts = field(init=False, repr=False)

    def __post_init__(self) -> None:
        if not isinstance(self.pulse, GaussianPulse | SampledPulse):
            raise InputError(f"pulse is {type(self.pulse).__name__}; give a GaussianPulse or a SampledPulse.")
        shape = image_shape(self.shape)
        period = number(self.period, "period", DURATION)
        store(
            self,
            shape=shape,
            period=period,
            time_zero=number(self.time_zero, "time_zero", INSTANT),
            offset=number_or_map(self.offset, "offset", shape, INSTANT),
            refractive_index=number(self.refractive_index, "refractive_index", REFRACTIVE_INDEX),
        )
        if self.interval is not None:
            width = Range(f"None, or seconds above 0 and up to period {period}", DURATION.low, period)
            store(self, interval=number(self.interval, "interval", width))
        self._sort_tags()
        detections = np.diff(self.start).reshape(shape)
        counts = Counts(
            detections, self.trials, self.gain, self.background, self.mask, several_per_trial=True
        )
        store(
            self,
            trials=counts.trials,
            gain=counts.gain,
            background=counts.background,
            mask=counts.mask,
            _counts=counts,
        )

    @property
    def unambiguous_range(self) -> float:
        """Range in m from which a return takes one period longer than from range 0."""
        return SPEED_OF_LIGHT * self.period / (2 * self.refractive_index)

    def counts(self) -> Counts:
        """The number of tags of every pixel, with `several_per_trial`: a period may hold more than one."""
        return self._counts

    def _sort_tags(self) -> None:
        rows, columns = self.shape
        period = self.period
        row = whole_numbers(self.row, "row", Range(f"whole numbers from 0 to {rows - 1}", 0, rows - 1))
        column = whole_numbers(
            self.column, "column", Range(f"whole numbers from 0 to {columns - 1}", 0, columns - 1)
        )
        within = Range(f"seconds from 0 to less than period {period}", 0.0, math.nextafter(period, 0))
        time = real_values(self.time, "time", within).astype(np.float64, copy=False)
        if not (row.ndim == 1 and row.shape == column.shape == time.shape):
            raise InputError(
                f"row has shape {row.shape}, column {column.shape} and time {time.shape}; "
                "give three lists with one entry per detection."
            )
        pixel = row * np.int32(columns) + column
        detections = np.bincount(pixel, minlength=rows * columns)
        if np.any(pixel[1:] < pixel[:-1]):
            time = time[_stable_order(pixel)]
            # written out from the counts, which is faster than carrying them through the sort
            row = np.repeat(np.arange(rows, dtype=np.int32), detections.reshape(rows, columns).sum(axis=1))
            column = np.repeat(np.tile(np.arange(columns, dtype=np.int32), rows), detections)
        start = np.zeros(rows * columns + 1, dtype=np.int64)
        np.cumsum(detections, out=start[1:])
        store(self, row=frozen(row), column=frozen(column), time=frozen(time), start=frozen(start))


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


def _stable_order(pixel: NDArray[np.int32]) -> NDArray[np.intp]:
    """Stable sorting order by radix, 16 bits at a time: numpy sorts 16-bit integers in linear time."""
    order = np.argsort(pixel.astype(np.uint16), kind="stable")
    return order[np.argsort((pixel >> 16).astype(np.uint16)[order], kind="stable")]
