"""Numbers of detections per pixel."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from recon.errors import InputError
from recon.validation import (
    NONNEGATIVE,
    POSITIVE,
    check_whole,
    first,
    flag,
    frozen,
    number_or_map,
    store,
    usable_pixels,
    whole_numbers,
)


@dataclass(frozen=True, eq=False)
class Counts:
    """Detections of every pixel in a known number of trials.

    The mean number of detections per trial at image value x is `gain * x + background`.

    detections: (rows, columns), whole numbers; kept as int32 where they fit, else int64.
    trials: number of trials, one for all pixels or a map. Whole numbers, unless `several_per_trial`,
        where it is an exposure in trials and may have a fraction. 0 = the pixel was never looked at.
    gain: expected signal detections per trial at image value 1, above 0, a number or a map.
    background: expected other detections per trial (ambient light, dark counts), a number or a map.
    mask: boolean map, True = usable pixel; None = all. Detections of other pixels are kept as recorded.
    several_per_trial: whether one trial may detect more than once; if not, detections never exceed
        trials.

    Maps are kept as float32 where that is exact for the type given, else as float64. Arrays are copied
    and read-only. Raises InputError.
    """

    detections: NDArray[np.integer]
    trials: float | NDArray[np.floating]
    gain: float | NDArray[np.floating] = 1.0
    background: float | NDArray[np.floating] = 0.0
    mask: NDArray[np.bool_] | None = None
    several_per_trial: bool = False

    def __post_init__(self) -> None:
        detections = whole_numbers(self.detections, "detections")
        if detections.ndim != 2:
            raise InputError(f"detections has shape {detections.shape}; give a (rows, columns) array.")
        shape = detections.shape
        store(
            self,
            detections=detections,
            trials=number_or_map(self.trials, "trials", shape, NONNEGATIVE),
            gain=number_or_map(self.gain, "gain", shape, POSITIVE),
            background=number_or_map(self.background, "background", shape, NONNEGATIVE),
            mask=usable_pixels(self.mask, shape),
            several_per_trial=flag(self.several_per_trial, "several_per_trial"),
        )
        if not self.several_per_trial:
            check_whole(
                self.trials, "trials", "a whole number, or several_per_trial=True if it is an exposure"
            )
        self._check_exposure()
        self._check_detections()

    @property
    def shape(self) -> tuple[int, int]:
        """(rows, columns)."""
        return self.detections.shape

    @property
    def exposure(self) -> float | NDArray[np.floating]:
        """Trials, 0 where a pixel is masked: a map, or a float where one number serves all pixels."""
        if self.mask is None:
            return self.trials
        return frozen(np.where(self.mask, self.trials, 0.0))

    def _check_exposure(self) -> None:
        if isinstance(self.trials, float):
            exposed = self.trials > 0
        elif self.mask is None:
            exposed = self.trials.max() > 0
        else:
            exposed = bool(np.any((self.trials > 0) & self.mask))
        if not exposed:
            raise InputError("trials is 0 in every usable pixel; give at least one pixel an exposure.")

    def _check_detections(self) -> None:
        one_number = isinstance(self.trials, float)
        if one_number and (self.several_per_trial or self.detections.max() <= self.trials):
            return
        if self.several_per_trial:
            bad = self.detections > 0
            bad &= self.trials == 0
        else:
            bad = self.detections > self.trials
        if self.mask is not None:
            bad &= self.mask
        if not bad.any():
            return
        place = first(bad)
        detections = self.detections[place]
        trials = self.trials if one_number else self.trials[place]
        if trials == 0:
            raise InputError(
                f"detections at {place} is {detections} where trials is 0; "
                "give the trials of that pixel, or mask it."
            )
        raise InputError(
            f"detections at {place} is {detections}, above trials {trials:.17g}; "
            "correct it, or give several_per_trial=True if one trial may detect more than once."
        )
