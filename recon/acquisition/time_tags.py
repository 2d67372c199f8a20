"""Times of single detections, pixel by pixel."""

import math
from collections.abc import Callable
from dataclasses import KW_ONLY, dataclass, field
from typing import Any, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.acquisition.ranging import REFRACTIVE_INDEX as REFRACTIVE_INDEX
from recon.acquisition.ranging import ROUNDING, Ranging, image_shape
from recon.acquisition.ranging import SPEED_OF_LIGHT as SPEED_OF_LIGHT
from recon.errors import InputError
from recon.validation import (
    DURATION,
    INSTANT,
    LARGEST_COUNT,
    Range,
    frozen,
    number,
    real_values,
    refuse,
    store,
    whole_numbers,
)


@dataclass(frozen=True, eq=False)
class TimeTags(Ranging):
    """One entry per detection: where, and when within its period. There may be none at all.

    The rate within a period at reflectivity x and range z is
    `gain * x * p(t - time_zero - offset - 2 * refractive_index * z / c) + background / period`, with p
    the density of the pulse. Within a gate it is the same, outside it nothing is recorded.

    row, column: (detections,), pixel of each detection.
    time: (detections,), s since the start of the period, in [0, period).
    shape: (rows, columns) of the image.
    trials: number of periods, one for all pixels or a map; an exposure in periods may have a fraction.
    period: s.
    pulse: GaussianPulse or SampledPulse.
    gain, background: as for Counts; the background is per trial over a whole period, and uniform.
    mask: boolean map, True = usable pixel; None = all. Tags of other pixels are kept as recorded.
    time_zero: s, the time at which a return from range 0 arrives.
    offset: s, added to time_zero, a number or a map.
    refractive_index: of the medium between instrument and scene.
    interval: width in s of the interval each tag stands for, the tag at its centre; None = exact tags.
    dead_time: DeadTime, or None where a detection never hides another. A usable pixel must not hold more
        tags than it allows.
    gate: (start, stop) in s since the start of the period, 0 <= start < stop <= period: the detector
        records only within; None = whole period. Every tag must lie in it, tags that stand for an
        interval with their centre.
    dither: (detections,), s, a known delay added to each detection before the clock read it: the true
        time is `time - dither` modulo the period, and that is what lies within the gate, to half an
        interval; None = no delay.

    The tags are kept sorted by pixel, row by row, in the order given within a pixel: those of pixel
    (i, j) are `start[p]` to `start[p + 1]` with p = i * columns + j. Arrays are copied and read-only.
    Raises InputError.
    """

    row: NDArray[np.int32]
    column: NDArray[np.int32]
    time: NDArray[np.float64]
    _: KW_ONLY
    shape: tuple[int, int]
    interval: float | None = None
    gate: tuple[float, float] | None = None
    dither: NDArray[np.float64] | None = None
    start: NDArray[np.int64] = field(init=False, repr=False)

    @classmethod
    def from_ticks(
        cls,
        row: ArrayLike,
        column: ArrayLike,
        ticks: ArrayLike,
        *,
        tick: float,
        period: float,
        **settings: Any,
    ) -> Self:
        """Return the tags a clock gives as whole numbers of ticks.

        ticks: (detections,), ticks completed since the start of the period. The time is
            (ticks + 1/2) * tick, which must be before the end of the period, and the interval is `tick`.
        tick: s.
        settings: all others, as for TimeTags.

        Raises InputError.
        """
        period = number(period, "period", DURATION)
        tick = number(tick, "tick", _up_to("seconds", period))
        last = min(int(period / tick) + 1, LARGEST_COUNT)
        while (last + 0.5) * tick >= period:
            last -= 1
        words = f"whole numbers from 0 to {last}, ticks with their centre before the end of period {period}"
        time = (checked_list(ticks, "ticks", Range(words, 0, last), whole_numbers) + 0.5) * tick
        return cls(row, column, time, period=period, interval=tick, **settings)

    def __post_init__(self) -> None:
        shape = image_shape(self.shape)
        store(self, shape=shape)
        self._check_settings(shape)
        if self.interval is not None:
            width = _up_to("None, or seconds", self.period)
            store(self, interval=number(self.interval, "interval", width))
        if self.gate is not None:
            store(self, gate=_gate(self.gate, self.period))
        self._sort_tags()
        self._check_detections(np.diff(self.start).reshape(shape), self.gate)

    def _sort_tags(self) -> None:
        rows, columns = self.shape
        row = checked_list(self.row, "row", _indices(rows), whole_numbers)
        column = checked_list(self.column, "column", _indices(columns), whole_numbers)
        time = checked_list(self.time, "time", _before(self.period), real_values).astype(
            np.float64, copy=False
        )
        if not (row.ndim == 1 and row.shape == column.shape == time.shape):
            raise InputError(
                f"row has shape {row.shape}, column {column.shape} and time {time.shape}; "
                "give three lists with one entry per detection."
            )
        dither = self.dither
        if dither is not None:
            dither = checked_list(dither, "dither", INSTANT, real_values).astype(np.float64, copy=False)
            if dither.shape != time.shape:
                raise InputError(
                    f"dither has shape {dither.shape} and time {time.shape}; give one delay per detection."
                )
        if self.gate is not None:
            self._check_gate(time, dither)
        pixel = row * np.int32(columns) + column
        detections = np.bincount(pixel, minlength=rows * columns)
        if np.any(pixel[1:] < pixel[:-1]):
            order = _stable_order(pixel)
            time = time[order]
            dither = None if dither is None else dither[order]
            # written out from the counts, which is faster than carrying them through the sort
            row = np.repeat(np.arange(rows, dtype=np.int32), detections.reshape(rows, columns).sum(axis=1))
            column = np.repeat(np.tile(np.arange(columns, dtype=np.int32), rows), detections)
        start = np.zeros(rows * columns + 1, dtype=np.int64)
        np.cumsum(detections, out=start[1:])
        store(self, row=frozen(row), column=frozen(column), time=frozen(time), start=frozen(start))
        if dither is not None:
            store(self, dither=frozen(dither))

    def _check_gate(self, time: NDArray[np.float64], dither: NDArray[np.float64] | None) -> None:
        start, stop = self.gate
        if dither is None:
            bad = (time < start) | (time > stop)
            if bad.any():
                refuse("time", time, bad, f"seconds within gate {self.gate}, or leave that detection out")
            return
        half = 0.0 if self.interval is None else self.interval / 2
        half += ROUNDING * self.period
        # how far the true time is after the middle of the gate, by the shorter way round the period
        after = np.remainder(time - dither - (start + stop) / 2 + self.period / 2, self.period)
        bad = np.abs(after - self.period / 2) > (stop - start) / 2 + half
        if bad.any():
            words = f"seconds within gate {self.gate} once dither is taken off, or leave that detection out"
            refuse("time", time, bad, words)


def _up_to(words: str, period: float) -> Range:
    return Range(f"{words} above 0 and up to period {period}", DURATION.low, period)


def _before(period: float) -> Range:
    return Range(f"seconds from 0 to less than period {period}", 0.0, math.nextafter(period, 0))


def _indices(size: int) -> Range:
    return Range(f"whole numbers from 0 to {size - 1}", 0, size - 1)


def checked_list(value: ArrayLike, name: str, allowed: Range, check: Callable[..., NDArray]) -> NDArray:
    """`check(value, name, allowed)`, but an empty list is let through: nothing may have been detected."""
    try:
        nothing = not isinstance(value, np.ma.MaskedArray) and np.shape(value) == (0,)
        nothing = nothing and np.asarray(value).dtype.kind in "iuf"
    except Exception:  # an object may raise anything; `check` says what is wrong with it
        nothing = False
    return np.zeros(0, np.int32) if nothing else check(value, name, allowed)


def _gate(gate: ArrayLike, period: float) -> tuple[float, float]:
    within = Range(f"None, or (start, stop) in seconds from 0 to period {period}", 0.0, period)
    ends = real_values(gate, "gate", within)
    if ends.shape != (2,):
        raise InputError(f"gate has shape {ends.shape}; give (start, stop) in seconds.")
    start, stop = (float(end) for end in ends)
    if not start < stop:
        raise InputError(f"gate is ({start}, {stop}); give a start before the stop.")
    return start, stop


def _stable_order(pixel: NDArray[np.int32]) -> NDArray[np.intp]:
    """Stable sorting order by radix, 16 bits at a time: numpy sorts 16-bit integers in linear time."""
    order = np.argsort(pixel.astype(np.uint16), kind="stable")
    return order[np.argsort((pixel >> 16).astype(np.uint16)[order], kind="stable")]
