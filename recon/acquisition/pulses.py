"""The shape in time of a returning pulse, as the detector sees it."""

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.errors import InputError
from recon.validation import DURATION, INSTANT, NONNEGATIVE, frozen, number, real_values, refuse, store

LOST_MASS = 1e-9  # share of a pulse that its support may leave out


@dataclass(frozen=True, eq=False)
class GaussianPulse:
    """A Gaussian pulse about time 0.

    rms: standard deviation in s. Raises InputError.
    """

    rms: float

    def __post_init__(self) -> None:
        store(self, rms=number(self.rms, "rms", DURATION))

    @property
    def mean(self) -> float:
        """Mean time in s."""
        return 0.0

    @property
    def support(self) -> tuple[float, float]:
        """Times (s) between which all but 1e-9 of the pulse lies."""
        from scipy.special import ndtri

        half = -self.rms * float(ndtri(LOST_MASS / 2))
        return -half, half

    def density(self, t: ArrayLike) -> NDArray[np.float64]:
        """Probability density of the time of a detection, 1/s."""
        return np.exp(self.log_density(t))

    def log_density(self, t: ArrayLike) -> NDArray[np.float64]:
        """Logarithm of the density."""
        with np.errstate(over="ignore"):
            square = np.square(np.asarray(t, dtype=float) / self.rms)
        return -0.5 * square - math.log(self.rms * math.sqrt(2 * math.pi))

    def score(self, t: ArrayLike) -> NDArray[np.float64]:
        """Derivative of the log density by time, 1/s."""
        with np.errstate(over="ignore"):
            return -np.asarray(t, dtype=float) / self.rms**2

    def cumulative(self, t: ArrayLike) -> NDArray[np.float64]:
        """Share of the pulse that comes before time t."""
        from scipy.special import ndtr

        with np.errstate(over="ignore"):
            return ndtr(np.asarray(t, dtype=float) / self.rms)


@dataclass(frozen=True, eq=False)
class SampledPulse:
    """A pulse given by samples: linear between them, zero outside them, scaled to unit area.

    times: (samples,) in s, increasing by at least 1e-18 s, two samples or more.
    values: (samples,) in any unit, 0 or more and not all 0; kept as given.

    Arrays are copied and read-only. Raises InputError.
    """

    times: NDArray[np.float64]
    values: NDArray[np.float64]
    _density: NDArray[np.float64] = field(init=False, repr=False)
    _slope: NDArray[np.float64] = field(init=False, repr=False)
    _cumulative: NDArray[np.float64] = field(init=False, repr=False)

    def __post_init__(self) -> None:
        times = real_values(self.times, "times", INSTANT).astype(np.float64)
        values = real_values(self.values, "values", NONNEGATIVE).astype(np.float64)
        if times.ndim != 1 or times.shape != values.shape or times.size < 2:
            raise InputError(
                f"times has shape {times.shape} and values {values.shape}; "
                "give two lists of the same length, two samples or more."
            )
        steps = np.diff(times)
        if steps.min() < DURATION.low:
            late = np.concatenate([[False], steps < DURATION.low])
            refuse("times", times, late, "increasing times, each at least 1e-18 s after the one before")
        if values.max() == 0:
            raise InputError("values is 0 everywhere; give the pulse at least one sample above 0.")
        density = values / values.max()  # first to 1, so that no sum overflows
        cumulative = np.concatenate([[0.0], np.cumsum(steps * (density[1:] + density[:-1]) / 2)])
        area = cumulative[-1]
        density /= area
        store(
            self,
            times=frozen(times),
            values=frozen(values),
            _density=frozen(density),
            _slope=frozen(np.diff(density) / steps),
            _cumulative=frozen(cumulative / area),
        )

    @property
    def mean(self) -> float:
        """Mean time in s."""
        centre = float(self.times[np.argmax(self._density)])
        return centre + self._moment(self.times - centre)

    @property
    def rms(self) -> float:
        """Standard deviation in s, about the mean."""
        t = self.times - self.mean
        square = self._density * t * t
        # exact for the product of a line and a square, segment by segment
        cross = (self._density[:-1] + self._density[1:]) * (t[:-1] + t[1:]) ** 2
        return math.sqrt(np.sum(np.diff(t) * (cross + 2 * (square[:-1] + square[1:]))) / 12)

    @property
    def support(self) -> tuple[float, float]:
        """Sample times (s) between which all but 1e-9 of the pulse lies."""
        before = np.searchsorted(self._cumulative, LOST_MASS / 2, side="right") - 1
        after = np.searchsorted(self._cumulative, 1 - LOST_MASS / 2, side="left")
        return float(self.times[before]), float(self.times[after])

    def density(self, t: ArrayLike) -> NDArray[np.float64]:
        """Probability density of the time of a detection, 1/s."""
        return np.interp(np.asarray(t, dtype=float), self.times, self._density, left=0.0, right=0.0)

    def log_density(self, t: ArrayLike) -> NDArray[np.float64]:
        """Logarithm of the density, -inf where the pulse is zero."""
        with np.errstate(divide="ignore"):
            return np.log(self.density(t))

    def score(self, t: ArrayLike) -> NDArray[np.float64]:
        """Derivative of the log density by time, 1/s.

        From the right at a sample; 0 where the pulse is zero.
        """
        density = np.asarray(self.density(t))
        slope = self._slope[self._segment(t)]
        with np.errstate(over="ignore"):
            return np.divide(slope, density, out=np.zeros_like(density), where=density > 0)[()]

    def cumulative(self, t: ArrayLike) -> NDArray[np.float64]:
        """Share of the pulse that comes before time t."""
        inside = np.clip(np.asarray(t, dtype=float), self.times[0], self.times[-1])
        segment = self._segment(inside)
        u = inside - self.times[segment]
        share = self._cumulative[segment] + u * (self._density[segment] + 0.5 * u * self._slope[segment])
        return np.where(inside < self.times[-1], np.minimum(share, 1.0), 1.0)[()]

    def _segment(self, t: ArrayLike) -> NDArray[np.intp]:
        return np.clip(np.searchsorted(self.times, t, side="right") - 1, 0, self.times.size - 2)

    def _moment(self, t: NDArray[np.float64]) -> float:
        """Integral of a function, linear between the samples, times the density."""
        d = self._density
        both = d[:-1] * (2 * t[:-1] + t[1:]) + d[1:] * (t[:-1] + 2 * t[1:])
        return float(np.sum(np.diff(self.times) * both) / 6)
