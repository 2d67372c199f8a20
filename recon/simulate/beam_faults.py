"""What a real beam and stage do beyond the ideal: flicker, drift and charging."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.errors import InputError
from recon.simulate.inputs import affordable, generator, positive_whole
from recon.validation import Range, flag, number, real_values

MOST_LINES = 1e9
_RMS = Range("the rms of a factor of mean 1, between 0 and 1", 0.0, 1.0)
_CHARGING = Range("the relative change of the yield over all frames, -1 or more", -1.0, 1e6)
_DRIFT = Range("shifts in pixels between -1e6 and 1e6", -1e6, 1e6)


def flicker(
    frames: int, rows: int, rms: float, *, per_frame: bool = True, seed: int | np.random.Generator
) -> NDArray[np.float64]:
    """Draw the factors by which a flickering beam changes from line to line, (frames, rows).

    Log-normal factors of mean 1 and the given rms about it, independent from line to line. For
    `recon.simulate.frames(hidden_current=...)`.

    frames, rows: size of the stack.
    rms: between 0 and 1; 0 gives ones.
    per_frame: whether every frame draws its own factors; if not, all frames have the same.
    seed: whole number, or a numpy Generator to go on drawing from.

    Raises InputError if an argument is not as described.
    """
    frames, rows = positive_whole(frames, "frames"), positive_whole(rows, "rows")
    affordable("frames and rows", frames * rows, "lines", MOST_LINES)
    drawn = frames if flag(per_frame, "per_frame") else 1
    # A normal logarithm of variance s^2 and mean -s^2/2 gives mean 1 and variance exp(s^2) - 1.
    squared = np.log1p(number(rms, "rms", _RMS) ** 2)
    lines = generator(seed).normal(-squared / 2, np.sqrt(squared), (drawn, rows))
    return np.exp(np.broadcast_to(lines, (frames, rows)))


class MovingScene:
    """The yields that every frame sees: the known image, drifting and charging.

    eta: the image (rows, columns).
    drift: (frames, 2) shifts in pixels, (row, column), or None: frame f sees at pixel (i, j) the image at
        (i - drift[f, 0], j - drift[f, 1]), beyond its border the nearest pixel. Interpolation is bilinear:
        exact where the image is constant within each pixel and a beam averages over a pixel's area.
    charging: the yields change in equal steps, by 1 + charging from the first frame to the last.
    """

    def __init__(self, eta: NDArray, frames: int, drift: ArrayLike | None, charging: float) -> None:
        self._eta = eta
        self._drift = None if drift is None else _shifts(drift, frames)
        self._growth = 1.0 + number(charging, "charging", _CHARGING) * np.linspace(0.0, 1.0, frames)

    @property
    def most(self) -> NDArray[np.float64]:
        """Bound on the yields of all frames, (rows, columns)."""
        most = self._eta if self._drift is None else np.full_like(self._eta, self._eta.max())
        with np.errstate(over="ignore"):
            return most * self._growth.max()

    def frame(self, f: int) -> NDArray[np.float64]:
        """The yields of frame f, (rows, columns)."""
        eta = self._eta
        if self._drift is not None:
            from scipy.ndimage import shift

            eta = shift(eta, self._drift[f], order=1, mode="nearest")
        return eta * self._growth[f]


def _shifts(drift: ArrayLike, frames: int) -> NDArray:
    shifts = real_values(drift, "stage_drift", _DRIFT)
    if shifts.shape != (frames, 2):
        raise InputError(
            f"stage_drift has shape {shifts.shape}; give ({frames}, 2): a shift in pixels (row, column) "
            "for each frame."
        )
    return shifts
