"""Numbers of detections per pixel and interval of time."""

from dataclasses import KW_ONLY, dataclass, field, fields

import numpy as np
from numpy.typing import NDArray

from recon.acquisition.ranging import Ranging, image_shape
from recon.acquisition.time_tags import TimeTags
from recon.errors import InputError
from recon.validation import DURATION, INSTANT, Range, memory_limit, number, store, whole_numbers

LARGEST_IN_BIN = 2**32 - 1
BIN_ROUNDING = 1e-3  # of a bin, by which the edges may miss the ends of the period
BYTES_PER_TAG = 100  # while tags are made


@dataclass(frozen=True, eq=False)
class TimeHistogram(Ranging):
    """Detections of every pixel in bins of equal width within the period.

    The rate within a period at reflectivity x and range z is that of TimeTags:
    `gain * x * p(t - time_zero - offset - 2 * refractive_index * z / c) + background / period`.

    detections: (rows, columns, bins), whole numbers. Integer types of up to four bytes are kept as they are;
        anything else takes the smallest unsigned type that holds it.
    trials: number of periods, one for all pixels or a map; an exposure in periods may have a fraction.
    period: s.
    pulse: GaussianPulse or SampledPulse.
    bin_width: s.
    first_edge: s since the start of the period at which the first bin starts. The bins lie within the
        period, to a thousandth of a bin. Where they do not cover it, nothing is recorded outside them.
    gain, background: as for Counts; the background is per trial over a whole period, and uniform.
    mask: boolean map, True = usable pixel; None = all. Detections of other pixels are kept as recorded.
    time_zero: s, the time at which a return from range 0 arrives.
    offset: s, added to time_zero, a number or a map.
    refractive_index: of the medium between instrument and scene.
    dead_time: DeadTime, or None where a detection never hides another. A usable pixel must not hold more
        detections than it allows.

    gate: (start, stop) in s of all bins together; None where they cover the period.

    Memory: the array is kept once, at 1 to 4 bytes a bin, however few detections it holds: 512 x 512
    pixels of 1024 bins are 268 MB at one byte. Reconstruction works on `tags()`, which take 16 bytes a
    detection and nothing for an empty bin, and up to 100 while they are made. Arrays are copied and
    read-only. Raises InputError.
    """

    detections: NDArray[np.integer]
    _: KW_ONLY
    bin_width: float
    first_edge: float = 0.0
    gate: tuple[float, float] | None = field(init=False, repr=False)

    def __post_init__(self) -> None:
        each = Range(f"whole numbers between 0 and {LARGEST_IN_BIN}", 0, LARGEST_IN_BIN)
        detections = whole_numbers(self.detections, "detections", each, keep_small=True)
        if detections.ndim != 3:
            raise InputError(
                f"detections has shape {detections.shape}; give a (rows, columns, bins) array, the time last."
            )
        store(self, detections=detections)
        self._check_settings(image_shape(self.shape))
        store(self, gate=self._checked_gate())
        self._check_detections(detections.sum(axis=2, dtype=np.int64), self.gate)

    @property
    def shape(self) -> tuple[int, int]:
        """(rows, columns)."""
        return self.detections.shape[:2]

    @property
    def bins(self) -> int:
        """Number of bins."""
        return self.detections.shape[2]

    @property
    def edges(self) -> NDArray[np.float64]:
        """(bins + 1,), edges of the bins in s since the start of the period."""
        return self.first_edge + self.bin_width * np.arange(self.bins + 1)

    @property
    def centres(self) -> NDArray[np.float64]:
        """(bins,), centres of the bins in s since the start of the period."""
        return self.first_edge + self.bin_width * (np.arange(self.bins) + 0.5)

    def tags(self) -> TimeTags:
        """Return the detections one by one, each at the centre of its bin and with the bin as its interval.

        They say exactly what the histogram says. Raises InputError if they would not fit the memory.
        """
        number_of_tags = int(self._counts.detections.sum())
        if number_of_tags * BYTES_PER_TAG > memory_limit():
            raise InputError(
                f"detections has a sum of {number_of_tags}, more than {memory_limit() // BYTES_PER_TAG}, "
                "which is what this machine can take as time tags; give fewer rows at a time."
            )
        flat = self.detections.reshape(-1)
        filled = np.flatnonzero(flat)
        cell = np.repeat(filled, flat[filled])
        pixel, bin_index = np.divmod(cell, self.bins)
        row, column = np.divmod(pixel, self.shape[1])
        settings = {entry.name: getattr(self, entry.name) for entry in fields(Ranging) if entry.init}
        return TimeTags(
            row,
            column,
            self.centres[bin_index],
            shape=self.shape,
            interval=self.bin_width,
            gate=self.gate,
            **settings,
        )

    def _checked_gate(self) -> tuple[float, float] | None:
        """(start, stop) of all bins together, None where they cover the period."""
        period = self.period
        within = Range(f"seconds above 0 and up to period {period}", DURATION.low, period)
        store(
            self,
            bin_width=number(self.bin_width, "bin_width", within),
            first_edge=number(self.first_edge, "first_edge", INSTANT),
        )
        rounding = BIN_ROUNDING * self.bin_width
        start, stop = self.first_edge, self.first_edge + self.bins * self.bin_width
        if start < -rounding or stop > period + rounding:
            raise InputError(
                f"first_edge is {start} and bin_width {self.bin_width}, so that the {self.bins} bins of "
                f"detections run from {start} s to {stop} s; make them lie between 0 and period {period}."
            )
        if start <= rounding and stop >= period - rounding:
            return None
        return max(start, 0.0), min(stop, period)
