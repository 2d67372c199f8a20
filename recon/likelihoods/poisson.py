"""Poisson counts: any number of detections a trial, or an exposure in seconds."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from scipy.special import gammaln, xlogy

from recon.acquisition.counts import Counts
from recon.kernels import as_rows
from recon.likelihoods.contract import LEAST_SHARED, Interval, Likelihood
from recon.likelihoods.inputs import drawing_image, pixelwise_bound

if TYPE_CHECKING:
    import cvxpy as cp


class Poisson(Likelihood):
    """Half the deviance of Poisson counts, as a function of the image x.

        value(x) = sum over pixels of  m - k + k log(k / m),     m = exposure (gain x + background)

    counts: the acquisition; its trials are the exposure. Pixels masked or without exposure
        contribute zero.
    """

    has_linear_score = True

    def __init__(self, counts: Counts) -> None:
        exposure = counts.exposure
        has_data = np.broadcast_to(np.asarray(exposure) > 0.0, counts.shape)
        count = counts.detections.astype(np.float32)
        count[~has_data] = 0.0
        self._set(
            count, np.multiply(exposure, counts.gain), np.divide(counts.background, counts.gain), has_data
        )

    @classmethod
    def from_arrays(
        cls,
        count: np.ndarray,
        slope: float | np.ndarray,
        offset: float | np.ndarray = 0.0,
        has_data: np.ndarray | None = None,
    ) -> Poisson:
        """Return the likelihood with m = slope (x + offset), from arrays that are known to be good.

        count and slope are zero where there is no data; count need not be whole.
        """
        self = cls.__new__(cls)
        shown = np.ones(count.shape, bool) if has_data is None else has_data
        self._set(np.asarray(count, np.float32), slope, offset, shown)
        return self

    def _set(self, count: np.ndarray, slope: Any, offset: Any, has_data: np.ndarray) -> None:
        self.shape = count.shape
        self._count = count
        self._slope = as_rows(slope, count.shape)
        self._offset = as_rows(offset, count.shape)
        self._has_data = has_data

    @property
    def has_data(self) -> np.ndarray:
        """See `Likelihood.has_data`."""
        return self._has_data

    @property
    def domain(self) -> Interval:
        """x > -background / gain."""
        return Interval(-float(self._offset.min()), np.inf, low_open=True)

    @property
    def default_bounds(self) -> tuple[float, float]:
        """Zero, and a value that no pixel's own estimate comes near."""
        return 0.0, pixelwise_bound(self.estimate())

    @property
    def constant(self) -> float:
        """See `Likelihood.constant`."""
        k = self._count.astype(np.float64)
        return float(np.sum(k - xlogy(k, k) + gammaln(k + 1.0)))

    def estimate(self) -> np.ndarray:
        """Return max(count / slope - offset, 0); the mean of the others where there is no data."""
        with np.errstate(divide="ignore", invalid="ignore"):
            image = np.maximum(self._count / self._slope - self._offset, np.float32(0.0))
        if not self._has_data.all():
            image[~self._has_data] = image[self._has_data].mean() if self._has_data.any() else 0.0
        return image

    def _mean(self, x: np.ndarray) -> np.ndarray:
        return self._slope.astype(np.float64) * (np.asarray(x, np.float64) + self._offset)

    def value_map(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.value_map`; inf where x explains a detection by nothing."""
        k = self._count.astype(np.float64)
        mean = self._mean(x)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(k > 0.0, mean - k + k * np.log(k / mean), mean)

    def value(self, x: np.ndarray) -> float:
        """See `Likelihood.value`."""
        from recon.likelihoods import poisson_kernels

        return poisson_kernels.value(np.asarray(x), self._count, self._slope, self._offset)

    def gradient(self, x: np.ndarray) -> np.ndarray:
        """Return slope - k / (x + offset)."""
        return self._slope - self._ratio(x, 1)

    def curvature(self, x: np.ndarray) -> np.ndarray:
        """Return k / (x + offset)^2."""
        return self._ratio(x, 2)

    def _ratio(self, x: np.ndarray, power: int) -> np.ndarray:
        k = self._count.astype(np.float64)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(k > 0.0, k / (np.asarray(x, np.float64) + self._offset) ** power, 0.0)

    def fisher_information(self, x: np.ndarray) -> np.ndarray:
        """Return slope / (x + offset)."""
        with np.errstate(divide="ignore", invalid="ignore"):
            information = self._slope / (np.asarray(x, np.float64) + self._offset)
        return np.where(self._has_data, information, 0.0)

    def residuals(self, x: np.ndarray) -> np.ndarray:
        """See `Likelihood.residuals`."""
        return np.sign(self._count - self._mean(x)) * np.sqrt(2.0 * np.maximum(self.value_map(x), 0.0))

    def draw(self, x: np.ndarray, seed: int | np.random.Generator) -> Poisson:
        """Return the same likelihood on counts drawn from the Poisson law at x."""
        mean = self._mean(drawing_image(x, self.shape))
        count = np.random.default_rng(seed).poisson(np.maximum(mean, 0.0))
        return Poisson.from_arrays(count, self._slope, self._offset, self._has_data)

    def folds(self, number: int, seed: int) -> list[tuple[Likelihood, Likelihood]]:
        """Return pairs that share out the detections: each falls into any of `number` parts alike.

        The parts of a Poisson number are independent Poisson numbers, each with its share of the
        exposure. A count that is not whole cannot be shared out; whole pixels are hidden then.
        """
        if np.any(self._count % 1.0):
            return super().folds(number, seed)
        rng, left = np.random.default_rng(seed), self._count.astype(np.int64)
        pairs = []
        for f in range(number):
            part = rng.binomial(left, 1.0 / (number - f))
            left = left - part
            share = 1.0 / number
            pairs.append(
                (
                    Poisson.from_arrays(
                        self._count - part, self._slope * (1.0 - share), self._offset, self._has_data
                    ),
                    Poisson.from_arrays(part, self._slope * share, self._offset, self._has_data),
                )
            )
        return pairs

    @property
    def can_be_shared_out(self) -> bool:
        """See `Likelihood.can_be_shared_out`."""
        return float(self._count.sum(dtype=np.float64)) >= LEAST_SHARED

    @property
    def scores_add_up(self) -> bool:
        """See `Likelihood.scores_add_up`."""
        return True

    def score_map(self, x: np.ndarray) -> np.ndarray:
        """Return (x - (count / slope - offset))^2, 0 without data."""
        with np.errstate(divide="ignore", invalid="ignore"):
            distance = np.asarray(x, np.float64) - (self._count / self._slope - self._offset)
        return np.where(self._has_data, distance * distance, 0.0)

    def prox(self, v: np.ndarray, step: float) -> np.ndarray:
        """Return the prox in closed form: the positive root of a quadratic in x + offset."""
        slope = self._slope.astype(np.float64)
        half = 0.5 * (np.asarray(v, np.float64) - step * slope + self._offset)
        return half + np.sqrt(half * half + step * self._count.astype(np.float64)) - self._offset

    def conjugate_map(self, u: np.ndarray, low: float, high: float) -> np.ndarray:
        """See `Likelihood.conjugate_map`."""
        u, k = np.asarray(u, np.float64), self._count.astype(np.float64)
        slack = self._slope - u
        with np.errstate(divide="ignore", invalid="ignore"):
            stationary = np.clip(k / slack - self._offset, low, high)
            x = np.where(slack > 0.0, stationary, np.where((slack < 0.0) | (k > 0.0), high, low))
            return np.where(np.isinf(x), np.where(u == 0.0, 0.0, np.inf), u * x - self.value_map(x))

    def conjugate(self, u: np.ndarray, low: float, high: float) -> float:
        """See `Likelihood.conjugate`."""
        from recon.likelihoods import poisson_kernels

        return poisson_kernels.conjugate(
            np.asarray(u), self._count, self._slope, self._offset, float(low), float(high)
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
        from recon.likelihoods import poisson_kernels

        poisson_kernels.proximal_step(
            x,
            adjoint,
            extrapolated,
            self._count,
            self._slope,
            self._offset,
            np.float32(step),
            np.float32(relaxation),
            np.float32(low),
            np.float32(high),
        )

    def expression(self, x: cp.Expression) -> tuple[cp.Expression, list[Any]]:
        """See `Likelihood.expression`."""
        import cvxpy as cp

        k = self._count.astype(np.float64)
        slope = np.broadcast_to(self._slope, self.shape).astype(np.float64)
        offset = np.broadcast_to(self._offset, self.shape).astype(np.float64)
        seen = np.nonzero(k > 0.0)
        saturated = float(np.sum(k - xlogy(k, k) + xlogy(k, slope)))
        total = cp.sum(cp.multiply(slope, x + offset)) - saturated
        if seen[0].size:
            total = total - k[seen] @ cp.log(x[seen] + offset[seen])
        return total, []
