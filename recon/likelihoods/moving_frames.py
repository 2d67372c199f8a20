"""The yield at rest, from frames that were taken while the stage moved."""

from __future__ import annotations

from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike

from recon.acquisition.frames import Frames
from recon.errors import InputError
from recon.likelihoods.contract import Interval
from recon.likelihoods.inputs import drawing_image
from recon.likelihoods.marks import Marks
from recon.likelihoods.neyman import coefficients
from recon.likelihoods.neyman_information import frame_information
from recon.likelihoods.poisson import Poisson
from recon.validation import NONNEGATIVE, Range, real_values, refuse

STEPS_A_PIXEL = 16  # shifts are rounded to these
_CLIMB = 6  # steps towards the best image
_SHIFT = Range("shifts in pixels between -1e6 and 1e6", -1e6, 1e6)


class MovingFrames(Marks):
    """Half the deviance of frames of electron counts that have moved, as a function of the yield at rest.

        value(eta) = sum over frames f and their pixels p of
                     log P(y_f(p); lam, best) - log P(y_f(p); lam, m),     m = sum of w_q eta_q

    The pixel p of frame f sees the image at p - shifts[f]: the mixture m of four pixels q, with bilinear
    weights w. P is the law of Neyman (1939), Type A. No count is interpolated. `best` is the image of
    `estimate`, close to the best there is; an image that fits more closely has a value a little below zero.
    Not convex.

    Neighbours are seen together, so nothing is separable: `value_map` shares what a pixel of a frame says
    among the four by weight, `curvature` and `fisher_information` are the diagonals of their matrices,
    which leave out what neighbours tell together: with shifts at random, 4/9 of the sum of a row.

    frames: the acquisition; memory grows with its electrons. Pixels of a frame that see beyond the image
        are left out: what is there is not known.
    shifts: (frames, 2), pixels (row, column), rounded to 1/16 of a pixel. Time grows with the electrons,
        and with the pixels once for each different shift.

    Raises InputError for readings, and for shifts of another shape or so large that no pixel is left.
    """

    def __init__(self, frames: Frames, shifts: ArrayLike) -> None:
        from recon.likelihoods import moving_frames_kernels as kernels

        if frames.law is not None:
            raise InputError("frames hold analog readings, of law=MarkLaw(...); give counts of electrons.")
        shifts = real_values(shifts, "shifts", _SHIFT)
        if shifts.shape != (frames.frames, 2):
            raise InputError(
                f"shifts has shape {shifts.shape}; give ({frames.frames}, 2): a shift in pixels (row, column)"
                " for each frame."
            )
        self.shape = frames.shape
        self._acquired = frames.dose, frames.mask, frames.current
        self._shifts = np.round(shifts * STEPS_A_PIXEL) / STEPS_A_PIXEL
        usable = np.ones(self.shape, bool) if frames.mask is None else frames.mask
        one = isinstance(frames.dose, float)
        self._dose = np.full((1, self.shape[1]), frames.dose) if one else frames.dose.astype(np.float64)
        seen, kind = np.unique(-self._shifts, axis=0, return_inverse=True)
        kind = kind.ravel()
        whole = np.floor(seen).astype(np.int64)
        factors = frames.factors
        total = np.zeros((len(seen), self.shape[0]))
        np.add.at(total, kind, factors.astype(np.float64))
        self._stage = usable, self._dose, total, whole, seen - whole
        given = frames.counts, usable, self._dose, factors, whole, seen - whole, kind
        types = np.int64, np.int32, np.min_scalar_type(int(frames.counts.max())), np.float32
        events = kernels.find(*given, *(np.empty(0, dtype) for dtype in types))
        self._events = tuple(np.empty(events, dtype) for dtype in types)
        if events:
            kernels.find(*given, *self._events)
        maps = np.zeros((kernels.CHUNKS, 2, self.shape[0] + 1, self.shape[1] + 1))
        kernels.exposures(*self._stage, maps)
        self._exposure, self._squared = maps.sum(axis=0)[:, :-1, :-1]
        self._has_data = self._exposure > 0.0
        if not self._has_data.any():
            raise InputError("shifts moves every usable pixel off the image; give shifts in pixels.")

    @property
    def domain(self) -> Interval:
        """eta > 0, or eta >= 0 if no electron was detected."""
        return Interval(0.0, np.inf, low_open=bool(self._events[0].size))

    @property
    def electrons(self) -> float:
        """See `Marks.electrons`."""
        return float(self._events[2].sum(dtype=np.float64))

    @property
    def constant(self) -> float:
        """The negative log-likelihood of the image of `estimate`."""
        return -float(np.sum(self._best[1]))

    def estimate(self) -> np.ndarray:
        """Return an image close to that of greatest likelihood; the mean of the others without data.

        It is reached by steps of expectation-maximisation from electrons over expected primaries.
        """
        return self._best[0].copy()

    def value_map(self, x: np.ndarray) -> np.ndarray:
        """Return the share of each pixel in the value; inf where x is negative or explains nothing."""
        out = self._best[1] - self._maps(x)[0]
        return np.where(self._has_data & ~(np.asarray(x) >= 0.0), np.inf, np.where(self._has_data, out, 0.0))

    def gradient(self, x: np.ndarray) -> np.ndarray:
        """Return the expected primaries, given the electrons, less electrons / eta, shared by weight."""
        _, primaries, electrons, _ = self._maps(x)
        return primaries - self._over(electrons, np.asarray(x, np.float64))

    def curvature(self, x: np.ndarray) -> np.ndarray:
        """Return the diagonal of the matrix of second derivatives."""
        return self._maps(x)[3]

    def fisher_information(self, x: np.ndarray) -> np.ndarray:
        """Return the diagonal of the Fisher information, as if the four pixels of a mixture were alike."""
        eta = np.asarray(x, np.float64)
        shown = self._has_data & np.isfinite(eta) & (eta >= 0.0)
        out = np.where(self._has_data, np.nan, 0.0)
        if shown.any():
            each = frame_information(np.where(shown, eta, eta[shown].min()), self._dose) / self._dose
            out[shown] = (each * self._squared)[shown]
        return out

    def residuals(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.residuals`; positive where the likelihood rises with the yield."""
        return np.sign(-self.gradient(x)) * np.sqrt(2.0 * np.maximum(self.value_map(x), 0.0))

    def draw(self, x: np.ndarray, seed: int | np.random.Generator) -> MovingFrames:
        """Return the same likelihood on as many frames drawn at the yield x >= 0."""
        from scipy.ndimage import shift

        eta = drawing_image(x, self.shape)
        if eta.min() < 0.0:
            refuse("the image", eta, eta < 0.0, NONNEGATIVE.words)
        dose, mask, current = self._acquired
        rng = np.random.default_rng(seed)
        frames = []
        for f, moved in enumerate(self._shifts):
            mixed = shift(eta, moved, order=1, mode="nearest")
            factor = 1.0 if current is None else np.asarray(current[f], np.float64)
            lam = np.broadcast_to(dose, self.shape) * (factor[:, None] if np.ndim(factor) else factor)
            electrons = rng.poisson(rng.poisson(lam) * np.maximum(mixed, 0.0))
            frames.append(electrons.astype(np.min_scalar_type(electrons.max())))
        return MovingFrames(Frames(np.stack(frames), dose, mask, current=current), self._shifts)

    def majorise(self, x: np.ndarray) -> Poisson:
        """Return the Poisson likelihood that knows the primaries, and the pixel each electron came from.

        The step of expectation-maximisation: the primaries expected at x are shared among the four pixels
        of a mixture by weight, the electrons by weight x yield. Raises InputError where x is not a finite
        number, 0 or more.
        """
        bad = self._has_data & ~(np.isfinite(x) & (np.asarray(x) >= 0.0))
        if bad.any():
            refuse("the image", np.asarray(x), bad, NONNEGATIVE.words)
        _, primaries, electrons, _ = self._maps(x)
        # Where eta is so large that a pixel without electrons expects no primaries, float32 keeps a trace.
        mean = np.maximum(primaries, np.where(self._has_data, np.finfo(np.float32).tiny, 0.0))
        return Poisson.from_arrays(
            electrons.astype(np.float32), mean.astype(np.float32), has_data=self._has_data
        )

    def _maps(self, x: np.ndarray) -> np.ndarray:
        """Return the four maps of `moving_frames_kernels.every_frame`."""
        from recon.likelihoods import moving_frames_kernels as kernels

        eta = np.asarray(x, np.float64)
        if eta.shape != self.shape:
            raise InputError(
                f"the image has shape {eta.shape} but the data has {self.shape}; make them equal."
            )
        # Pixels without data meet the weight zero alone; NaN stands for what no law describes.
        eta = np.where(self._has_data, np.where(eta < 0.0, np.nan, eta), 1.0)
        out = np.zeros((kernels.CHUNKS, 4, self.shape[0] + 1, self.shape[1] + 1))
        wide = np.pad(eta, ((0, 1), (0, 1)), mode="edge")
        kernels.every_frame(wide, *self._stage, *self._events, coefficients(), out)
        maps = out.sum(axis=0)[:, :-1, :-1]
        if not np.isfinite(maps[0]).all():  # a mixture of zeros that shows an electron
            maps[0][~np.isfinite(maps[0])] = -np.inf
            maps[1:] = np.nan_to_num(maps[1:], nan=0.0, posinf=0.0, neginf=0.0)
        return maps

    @cached_property
    def _best(self) -> tuple[np.ndarray, np.ndarray]:
        """The image of `estimate` (float32), and the map of its log likelihood."""
        ones = np.ones(self.shape)
        electrons = self._maps(ones)[2]
        x = np.where(self._has_data, self._over(electrons, self._exposure), 1.0)
        x = np.maximum(x, 1e-6 * max(float(x.max()), 1e-30))
        for _ in range(_CLIMB):
            _, primaries, electrons, _ = self._maps(x)
            x = np.where(self._has_data, self._over(electrons, np.maximum(primaries, 1e-300)), 1.0)
        # an electron needs a yield, and underflow would take it
        x = np.where((electrons > 0.0) & (x < 1e-30), 1e-30, x)
        image = x.astype(np.float32)
        image[~self._has_data] = image[self._has_data].mean()
        return image, self._maps(image)[0]

    def _over(self, electrons: np.ndarray, divisor: np.ndarray) -> np.ndarray:
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.divide(electrons, divisor, out=np.zeros(self.shape), where=electrons > 0.0)
