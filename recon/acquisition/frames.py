"""Numbers of detected electrons per pixel, frame by frame."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from recon.errors import InputError
from recon.validation import POSITIVE, number_or_map, store, usable_pixels, whole_numbers


@dataclass(frozen=True, eq=False)
class Frames:
    """Counts of a dwell split into frames.

    counts: (frames, rows, columns), whole numbers. Integer types of up to four bytes are kept as they
        are; anything else takes the smallest unsigned type that holds it.
    dose: expected primary particles per pixel and frame, above 0, a number or a (rows, columns) map.
    mask: boolean (rows, columns) map, True = usable pixel; None = all. Counts of other pixels are kept
        as recorded.

    Arrays are copied and read-only. Raises InputError.
    """

    counts: NDArray[np.integer]
    dose: float | NDArray[np.floating]
    mask: NDArray[np.bool_] | None = None

    def __post_init__(self) -> None:
        counts = whole_numbers(self.counts, "counts", keep_small=True)
        if counts.ndim == 2:
            raise InputError(
                f"counts has shape {counts.shape}; give (frames, rows, columns), counts[None] for one frame."
            )
        if counts.ndim != 3:
            raise InputError(f"counts has shape {counts.shape}; give a (frames, rows, columns) array.")
        shape = counts.shape[1:]
        store(
            self,
            counts=counts,
            dose=number_or_map(self.dose, "dose", shape, POSITIVE),
            mask=usable_pixels(self.mask, shape),
        )

    @property
    def shape(self) -> tuple[int, int]:
        """(rows, columns)."""
        return self.counts.shape[1:]

    @property
    def frames(self) -> int:
        """Number of frames."""
        return self.counts.shape[0]
