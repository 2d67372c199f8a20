"""Numbers of detected electrons per pixel, or their analog readings, frame by frame."""

import warnings
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.acquisition.mark_law import MarkLaw, checked_law
from recon.errors import InputError
from recon.validation import (
    LARGEST_COUNT,
    SMALLEST,
    Range,
    frozen,
    number_or_map,
    real_array,
    real_values,
    refuse,
    store,
    usable_pixels,
    whole_numbers,
)

_FLOAT32 = float(np.finfo(np.float32).max)
_READING = Range("finite readings", -_FLOAT32, _FLOAT32)
_COUNT = Range(
    "whole numbers between 0 and 2**53, or, if they are readings, not counts, law=recon.MarkLaw(...)",
    0,
    LARGEST_COUNT,
)
_DOSE = Range("the expected primaries per pixel and frame, a finite number above 0", low=SMALLEST)
# A beam that changes a millionfold is a current in amperes, taken for a factor.
_FACTOR = Range("factors of the dose between 1e-6 and 1e6, such as current / current.mean()", 1e-6, 1e6)


@dataclass(frozen=True, eq=False)
class Frames:
    """Counts of a dwell split into frames, or the readings of an analog chain.

    counts: (frames, rows, columns). Without `law` whole numbers of electrons: integer types of up to
        four bytes are kept as they are, anything else takes the smallest unsigned type that holds it.
        With `law` readings, in its units, kept as float32; those above its ceiling are set to it.
    dose: expected primary particles per pixel and frame, above 0, a number or a (rows, columns) map.
    mask: boolean (rows, columns) map, True = usable pixel; None = all. Counts of other pixels are kept
        as recorded.
    law: what a number of electrons reads; None = counts.
    current: factors of the dose, (frames,) or (frames, rows) for every line of a frame, between 1e-6
        and 1e6: frame f expects dose * current primaries in a pixel of row i. None = all 1.
    dropped: indices, in the stack given, of frames left out because they held no finite number. A
        UserWarning names them; their entries of `current` go with them.

    Arrays are copied and read-only. Raises InputError.
    """

    counts: NDArray[np.integer] | NDArray[np.float32]
    dose: float | NDArray[np.floating]
    mask: NDArray[np.bool_] | None = None
    law: MarkLaw | None = field(default=None, kw_only=True)
    current: NDArray[np.floating] | None = field(default=None, kw_only=True)
    dropped: tuple[int, ...] = field(default=(), init=False)

    def __post_init__(self) -> None:
        law = checked_law(self.law)
        given = real_array(self.counts, "counts")
        if given.ndim == 2:
            raise InputError(
                f"counts has shape {given.shape}; give (frames, rows, columns), counts[None] for one frame."
            )
        if given.ndim != 3:
            raise InputError(f"counts has shape {given.shape}; give a (frames, rows, columns) array.")
        shape = given.shape[1:]
        if self.dose is None:
            raise InputError(f"dose is None; give {_DOSE.words}.")
        dose = number_or_map(self.dose, "dose", shape, _DOSE)
        mask = usable_pixels(self.mask, shape)
        lost = _lost_frames(given)
        if lost:  # stand-ins, so that the checks below name places in the stack that was given
            given = given.copy()
            given[lost] = 0
        counts = checked_counts(given, law)
        current = self.current
        if current is not None:
            current = line_factors(current, "current", len(given), shape[0], lost)
        if lost:
            counts = frozen(np.delete(counts, lost, axis=0))
            current = current if current is None else frozen(np.delete(current, lost, axis=0))
            warnings.warn(
                f"counts holds no finite number in frames {', '.join(map(str, lost))} of {len(given)}; "
                "they are left out.",
                UserWarning,
                stacklevel=3,
            )
        store(self, counts=counts, dose=dose, mask=mask, current=current, dropped=tuple(lost))

    @property
    def shape(self) -> tuple[int, int]:
        """(rows, columns)."""
        return self.counts.shape[1:]

    @property
    def frames(self) -> int:
        """Number of frames."""
        return self.counts.shape[0]

    @property
    def factors(self) -> NDArray[np.float32]:
        """Factors of the dose of every line of every frame, (frames, rows); 1 without `current`."""
        factors = np.ones((self.frames, self.shape[0]), np.float32)
        if self.current is not None:
            factors[:] = self.current if self.current.ndim == 2 else self.current[:, None]
        return frozen(factors)

    @property
    def saturated(self) -> float:
        """Share of the readings of usable pixels that are at the ceiling; 0 without `law`."""
        if self.law is None or np.isinf(self.law.ceiling):
            return 0.0
        usable = np.ones(self.shape, bool) if self.mask is None else self.mask
        full = sum(np.count_nonzero((frame >= self.law.ceiling) & usable) for frame in self.counts)
        return full / (self.frames * np.count_nonzero(usable))


def checked_counts(values: ArrayLike, law: MarkLaw | None, name: str = "counts") -> NDArray:
    """A read-only copy of whole numbers, or with a law of readings, as `Frames` keeps them."""
    if law is None:
        return whole_numbers(values, name, _COUNT, keep_small=True)
    values = real_array(values, name)
    with np.errstate(all="ignore"):
        readings = np.array(values, np.float32, order="C", copy=True)
        if not _READING.holds(float(readings.min()), float(readings.max())):
            refuse(name, values, _READING.outside(readings), _READING.words)
    if np.isfinite(law.ceiling):
        np.minimum(readings, np.float32(law.ceiling), out=readings)
    return frozen(readings)


def line_factors(
    value: ArrayLike, name: str, frames: int, rows: int, lost: list[int] | tuple[int, ...] = ()
) -> NDArray[np.floating]:
    """A read-only copy of factors of the dose, (frames,) or (frames, rows); those of lost frames are 1."""
    factors = real_array(value, name)
    remedy = "give one factor of the dose for each frame, or (frames, rows) factors for its lines."
    if factors.ndim not in (1, 2):
        raise InputError(f"{name} has shape {factors.shape}; {remedy}")
    if len(factors) != frames:
        raise InputError(f"{name} has {len(factors)} entries for {frames} frames; {remedy}")
    if factors.ndim == 2 and factors.shape[1] != rows:
        raise InputError(f"{name} has {factors.shape[1]} entries a frame for {rows} rows; {remedy}")
    if lost:
        factors = factors.copy()
        factors[list(lost)] = 1
    return real_values(factors, name, _FACTOR)


def _lost_frames(counts: NDArray) -> list[int]:
    """Indices of the frames without a finite number."""
    if counts.dtype.kind != "f":
        return []
    suspects = np.flatnonzero(~np.isfinite(counts[:, 0, 0]))
    lost = [int(f) for f in suspects if not np.isfinite(counts[f]).any()]
    if len(lost) == len(counts):
        raise InputError("counts holds no finite number in any frame; give at least one frame of numbers.")
    return lost
