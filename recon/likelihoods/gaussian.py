"""Readings with Gaussian noise of known variance: analog signals, and textbook problems."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from recon.errors import InputError
from recon.kernels import as_rows
from recon.likelihoods.contract import Interval, Likelihood
from recon.likelihoods.inputs import drawing_image
from recon.validation import FINITE, POSITIVE, number_or_map, real_array, usable_pixels

if TYPE_CHECKING:
    import cvxpy as cp


class Gaussian(Likelihood):
    """Half the deviance of Gaussian readings, as a function of the image x.

        value(x) = sum over pixels of  (reading - gain x - offset)^2 / (2 variance)

    readings: (rows, columns), finite where the mask is True.
    variance: variance of a reading, above zero, a number or a map.
    gain: reading per unit of x, above zero, a number or a map.
    offset: reading at x = 0, a number or a map.
    mask: boolean map, True = usable pixel; None = all. Other pixels contribute zero.

    Raises InputError.
    """

    has_linear_score = True

    def __init__(
        self,
        readings: np.ndarray,
        variance: float | np.ndarray = 1.0,
        gain: float | np.ndarray = 1.0,
        offset: float | np.ndarray = 0.0,
        mask: np.ndarray | None = None,
    ) -> None:
        image = real_array(readings, "readings")
        if image.ndim != 2:
            raise InputError(f"readings has shape {image.shape}; give a (rows, columns) array.")
        mask = usable_pixels(mask, image.shape)
        has_data = np.ones(image.shape, bool) if mask is None else mask
        bad = has_data & ~np.isfinite(image)
        if bad.any():
            place = tuple(int(i) for i in np.argwhere(bad)[0])
            raise InputError(
                f"readings at {place} is {image[place]}; give a finite reading, or mask the pixel."
            )
        variance = number_or_map(variance, "variance", image.shape, POSITIVE)
        gain = number_or_map(gain, "gain", image.shape, POSITIVE)
        offset = number_or_map(offset, "offset", image.shape, FINITE)
        precision = np.square(gain) / variance
        if not has_data.all():
            image = np.where(has_data, image, 0.0)
            precision = np.where(has_data, precision, 0.0)
        self._set((image - offset) / gain, precision, has_data)

    @classmethod
    def from_arrays(
        cls, target: np.ndarray, precision: float | np.ndarray, has_data: np.ndarray | None = None
    ) -> Gaussian:
        """Return the likelihood precision / 2 (x - target)^2, from arrays that are known to be good.

        precision is zero where there is no data; the target there is any finite number.
        """
        self = cls.__new__(cls)
        shown = np.broadcast_to(np.asarray(precision) > 0.0, target.shape) if has_data is None else has_data
        self._set(target, precision, shown)
        return self

    def _set(self, target: np.ndarray, precision: Any, has_data: np.ndarray) -> None:
        self.shape = target.shape
        self._target = np.asarray(target, np.float32)
        self._precision = as_rows(precision, target.shape)
        self._has_data = has_data

    @property
    def has_data(self) -> np.ndarray:
        """See `Likelihood.has_data`."""
        return self._has_data

    @property
    def domain(self) -> Interval:
        """Every number."""
        return Interval(-np.inf, np.inf, low_open=True, high_open=True)

    @property
    def default_bounds(self) -> tuple[float, float]:
        """None where every pixel has data; else well beyond the range of the readings."""
        if self._has_data.all():
            return -np.inf, np.inf
        seen = self._target[self._has_data]
        low, high = (float(seen.min()), float(seen.max())) if seen.size else (0.0, 0.0)
        room = (high - low) or 1.0
        return low - room, high + room

    @property
    def constant(self) -> float:
        """Sum of log(2 pi / precision) / 2, the density being that of the reading in units of x."""
        precision = np.broadcast_to(self._precision, self.shape)[self._has_data].astype(np.float64)
        return float(np.sum(0.5 * np.log(2.0 * np.pi / precision)))

    def estimate(self) -> np.ndarray:
        """Return (reading - offset) / gain; the mean of the others where there is no data."""
        image = self._target.copy()
        if not self._has_data.all():
            image[~self._has_data] = image[self._has_data].mean() if self._has_data.any() else 0.0
        return image

    def _off(self, x: np.ndarray) -> np.ndarray:
        return np.asarray(x, np.float64) - self._target

    def value_map(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.value_map`."""
        return 0.5 * self._precision * self._off(x) ** 2

    def value(self, x: np.ndarray) -> float:
        """See `Likelihood.value`."""
        from recon.likelihoods import gaussian_kernels

        return gaussian_kernels.value(np.asarray(x), self._target, self._precision)

    def gradient(self, x: np.ndarray) -> np.ndarray:
        """Return precision (x - target)."""
        return self._precision * self._off(x)

    def curvature(self, x: np.ndarray) -> np.ndarray:
        """Return the precision."""
        return np.broadcast_to(self._precision, self.shape).astype(np.float64)

    def fisher_information(self, x: np.ndarray) -> np.ndarray:
        """Return the precision."""
        return self.curvature(x)

    def residuals(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.residuals`."""
        return -self._off(x) * np.sqrt(self._precision.astype(np.float64))

    def draw(self, x: np.ndarray, seed: int | np.random.Generator) -> Gaussian:
        """Return the same likelihood on readings drawn at x."""
        noise = np.random.default_rng(seed).standard_normal(self.shape)
        with np.errstate(divide="ignore", invalid="ignore"):
            noise = np.where(self._has_data, noise / np.sqrt(self._precision), 0.0)
        return Gaussian.from_arrays(drawing_image(x, self.shape) + noise, self._precision, self._has_data)

    def folds(self, number: int, seed: int) -> list[tuple[Likelihood, Likelihood]]:
        """Return pairs that share out the precision: readings with independent errors (Tian et al. 2024).

        Each of `number` parts is the reading plus noise of `number - 1` times its variance; the parts' noises
        add up to none, so their mean is the reading.
        """
        rng = np.random.default_rng(seed)
        with np.errstate(divide="ignore"):
            rms = np.where(self._precision > 0.0, np.sqrt(number / self._precision), 0.0)
        noise = rng.standard_normal((number, *self.shape))
        noise = (noise - noise.mean(axis=0)) * rms
        pairs = []
        for part in self._target + noise:
            rest = (number * self._target - part) / (number - 1)
            share = 1.0 / number
            pairs.append(
                (
                    Gaussian.from_arrays(rest, self._precision * (1.0 - share)),
                    Gaussian.from_arrays(part, self._precision * share),
                )
            )
        return pairs

    @property
    def scores_add_up(self) -> bool:
        """See `Likelihood.scores_add_up`."""
        return True

    def score_map(self, x: np.ndarray) -> np.ndarray:
        """Return (x - reading)^2, 0 without data."""
        distance = np.asarray(x, np.float64) - self._target
        return np.where(self.has_data, distance * distance, 0.0)

    def prox(self, v: np.ndarray, step: float) -> np.ndarray:
        """Return (v + step precision target) / (1 + step precision)."""
        pull = step * self._precision.astype(np.float64)
        return (np.asarray(v, np.float64) + pull * self._target) / (1.0 + pull)

    def conjugate_map(self, u: np.ndarray, low: float, high: float) -> np.ndarray:
        """See `Likelihood.conjugate_map`."""
        u = np.asarray(u, np.float64)
        q = np.broadcast_to(self._precision, self.shape).astype(np.float64)
        with np.errstate(divide="ignore", invalid="ignore"):
            x = np.clip(np.where(q > 0.0, self._target + u / q, np.where(u > 0.0, high, low)), low, high)
            return np.where((q == 0.0) & (u == 0.0), 0.0, u * x - 0.5 * q * (x - self._target) ** 2)

    def conjugate(self, u: np.ndarray, low: float, high: float) -> float:
        """See `Likelihood.conjugate`."""
        from recon.likelihoods import gaussian_kernels

        return gaussian_kernels.conjugate(
            np.asarray(u), self._target, self._precision, float(low), float(high)
        )

    def proximal_step(
        self,
        x: np.ndarray,
        adjoint: np.ndarray,
        extrapolated: np.ndarray,
        step: float,
        relaxation: float,
        low: float,
        high: float,
    ) -> None:
        """See `Likelihood.proximal_step`."""
        from recon.likelihoods import gaussian_kernels

        gaussian_kernels.proximal_step(
            x,
            adjoint,
            extrapolated,
            self._target,
            self._precision,
            np.float32(step),
            np.float32(relaxation),
            np.float32(low),
            np.float32(high),
        )

    def expression(self, x: cp.Expression) -> tuple[cp.Expression, list[Any]]:
        """See `Likelihood.expression`."""
        import cvxpy as cp

        root = np.sqrt(self.curvature(x.value))
        return 0.5 * cp.sum_squares(cp.multiply(root, x - self._target.astype(np.float64))), []
