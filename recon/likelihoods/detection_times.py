"""Times of single detections, as a function of depth."""

from __future__ import annotations

import math
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from recon.acquisition.pulses import GaussianPulse
from recon.acquisition.time_tags import SPEED_OF_LIGHT, TimeTags
from recon.errors import InputError
from recon.likelihoods.contract import Interval, Likelihood
from recon.likelihoods.gaussian import Gaussian
from recon.likelihoods.inputs import drawing_image
from recon.likelihoods.range_pulse import range_pulse
from recon.validation import NONNEGATIVE, number_or_map

FLOOR = 1e-6  # least background over a period, in expected signal detections
MOST = 1e12  # largest background over a period; beyond it a tag tells nothing
SHARE = 0.1  # of the background, counted as pulse where the pulse's log has no bounded curvature


class DetectionTimes(Likelihood):
    """Half the deviance of the times of detections, given how many each pixel has; z is depth in m.

        value(z) = sum over tags of  log(p(y - z^) + noise) - log(p(y - z) + noise)

    with y the range from which an echo arrives at the tag's time, p the pulse as a periodic density of
    range (`RangePulse`), noise the background per metre for each expected signal detection, and z^ the
    pixel's best depth. How many detections there are tells nothing about depth, so it is taken as given:
    `draw` keeps it, and `fisher_information` is that of the tags there are.

    tags: the acquisition; a tag with an `interval` has the pulse averaged over it.
    reflectivity: known, 0 or more, a map or a number. Where gain * reflectivity is 0, tags tell nothing.
    background: expected other detections per trial, a number or a map; None takes that of the tags.

    The background is taken to be at least a millionth of the signal. Not convex: `majorise` takes each
    tag as signal or background with the probabilities it has at z (Dempster, Laird and Rubin 1977) and
    bounds minus the log of the pulse by a parabola, which for a Gaussian pulse it is.

    pulse: the `RangePulse`.
    y, start: (tags,) ranges in m, ascending within a pixel, those of pixel q at start[q] to start[q + 1].
    noise: (rows, columns), 1/m.

    Raises InputError.
    """

    convex = False

    def __init__(self, tags: TimeTags, reflectivity: ArrayLike, background: ArrayLike | None = None) -> None:
        from recon.likelihoods import detection_time_kernels as kernels

        if not isinstance(tags, TimeTags):
            raise InputError(f"tags is a {type(tags).__name__}; give a recon.TimeTags.")
        reflectivity = np.asarray(number_or_map(reflectivity, "reflectivity", tags.shape, NONNEGATIVE))
        given = tags.background if background is None else background
        background = np.asarray(number_or_map(given, "background", tags.shape, NONNEGATIVE), np.float64)
        self.shape = tags.shape
        self.pulse = range_pulse(tags)
        signal = np.broadcast_to(np.asarray(tags.gain, np.float64) * reflectivity, self.shape)
        used = (np.diff(tags.start) > 0).reshape(self.shape) & (signal > 0.0)
        self._used = used if tags.mask is None else used & tags.mask
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            ratio = np.clip(background / signal, FLOOR, MOST)
        self.noise = np.where(signal > 0.0, ratio, MOST) / self.pulse.period
        self._law = tags.pulse
        self._metres = SPEED_OF_LIGHT / (2.0 * tags.refractive_index)  # per second
        self.start = tags.start
        delay = np.atleast_2d(np.asarray(tags.time_zero + tags.offset, np.float64))
        self.y = kernels.ranges(tags.time, tags.start, self.shape[1], delay, self._metres, self.pulse.period)

    @property
    def _tags(self) -> tuple[np.ndarray, ...]:
        return self.y, self.start, self.noise, self._used

    @property
    def _table(self) -> tuple[Any, ...]:
        return self.pulse.low, self.pulse.step, self.pulse.pieces, self.pulse.period

    @property
    def has_data(self) -> np.ndarray:
        """True where there is a tag that a signal could have caused."""
        return self._used

    @property
    def domain(self) -> Interval:
        """Every depth; depths a period apart fit alike."""
        return Interval(-np.inf, np.inf, low_open=True, high_open=True)

    @property
    def default_bounds(self) -> tuple[float, float]:
        """Zero and the unambiguous range."""
        return 0.0, self.pulse.period

    @cached_property
    def _best(self) -> tuple[np.ndarray, np.ndarray]:
        """The best depth of every pixel, and the sum over its tags of log(1 + p / noise) there."""
        from recon.likelihoods import detection_time_search

        pulse = self.pulse
        depth, excess = np.zeros(self.shape), np.zeros(self.shape)
        detection_time_search.best(*self._tags, pulse.mode, pulse.core, *self._table, depth, excess)
        return depth, excess

    @property
    def constant(self) -> float:
        """Minus the log of the density (per s) of the times, given their number, at the best depths."""
        tags = np.where(self._used, np.diff(self.start).reshape(self.shape), 0)
        each = np.log(self.noise / (1.0 + self.noise * self.pulse.period) * self._metres)
        return -float(np.sum(self._best[1][self._used] + (tags * each)[self._used]))

    def estimate(self) -> np.ndarray:
        """Return the depth that fits each pixel's tags best; the mean of the others without data."""
        image = self._best[0].astype(np.float32)
        if not self._used.all():
            image[~self._used] = image[self._used].mean() if self._used.any() else 0.5 * self.pulse.period
        return image

    def value_map(self, z: np.ndarray) -> np.ndarray:
        """See `Likelihood.value_map`."""
        from recon.likelihoods import detection_time_kernels as kernels

        excess = np.zeros(self.shape)
        kernels.excess(np.asarray(z, np.float64), *self._tags, *self._table, excess)
        return self._best[1] - excess

    def _derivatives(self, z: np.ndarray, share: float = 0.0) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        from recon.likelihoods import detection_time_kernels as kernels

        written = tuple(np.zeros(self.shape) for _ in range(3))
        kernels.derivatives(np.asarray(z, np.float64), *self._tags, share, *self._table, *written)
        return written

    def gradient(self, z: np.ndarray) -> np.ndarray:
        """See `Likelihood.gradient`."""
        return self._derivatives(z)[0]

    def curvature(self, z: np.ndarray) -> np.ndarray:
        """See `Likelihood.curvature`; it may be negative."""
        return self._derivatives(z)[1]

    def signal_tags(self, z: np.ndarray) -> np.ndarray:
        """Return the expected number of each pixel's tags that are signal, if z is true (float64)."""
        return self._derivatives(z)[2]

    def fisher_information(self, z: np.ndarray) -> np.ndarray:
        """Return the expected curvature of the pixel's number of tags, if z is true.

        Exact tags tell as much at any depth; how much a coarse clock tells depends on its phase.
        """
        if self.pulse.interval == 0.0:
            return self._information.copy()
        from recon.likelihoods import detection_time_kernels as kernels

        # A fine clock is taken a quarter of the pulse's finest detail at a time.
        stride = self.pulse.interval * max(1.0, 2.0 * self.pulse.step // self.pulse.interval)
        out = np.zeros(self.shape)
        kernels.coarse_information(np.asarray(z, np.float64), *self._tags, stride, *self._table, out)
        return out

    @cached_property
    def _information(self) -> np.ndarray:
        """The Fisher information of every pixel's tags, if they are exact."""
        tags = np.diff(self.start).reshape(self.shape)
        return np.where(self._used, tags * self.pulse.information(self.noise), 0.0)

    def residuals(self, z: np.ndarray) -> np.ndarray:
        """See `Likelihood.residuals`."""
        sign = np.where(self._best[0] >= z, 1.0, -1.0)
        return sign * np.sqrt(2.0 * np.maximum(self.value_map(z), 0.0))

    def draw(self, z: np.ndarray, seed: int | np.random.Generator) -> DetectionTimes:
        """Return the same likelihood on as many tags, drawn at z; a coarse clock keeps each tag's phase."""
        from recon.likelihoods import detection_time_kernels as kernels

        rng = np.random.default_rng(seed)
        tags, period = np.diff(self.start), self.pulse.period
        noise = np.repeat(self.noise.ravel(), tags)
        y = np.repeat(drawing_image(z, self.shape).ravel(), tags)
        y += self._pulse_draws(y.size, rng)
        is_noise = rng.random(y.size) * (1.0 + noise * period) >= 1.0
        y[is_noise] = period * rng.random(int(is_noise.sum()))
        if self.pulse.interval > 0.0:
            y = self.y + self.pulse.interval * np.round((y - self.y) / self.pulse.interval)
        other = object.__new__(type(self))
        other.__dict__.update(self.__dict__)
        for name in ("_best", "_information"):
            other.__dict__.pop(name, None)
        other.y = kernels.ranges(y, self.start, self.shape[1], np.zeros((1, 1)), 1.0, period)
        return other

    def _pulse_draws(self, size: int, rng: np.random.Generator) -> np.ndarray:
        """Draw from the pulse, metres, before a clock's intervals."""
        smooth = self.pulse.resolution * rng.standard_normal(size)
        if isinstance(self._law, GaussianPulse):
            return smooth
        first, last = self._law.support
        fine = np.linspace(first, last, 2 + math.ceil(4.0 * self._metres * (last - first) / self.pulse.step))
        share = self._law.cumulative(fine)
        return smooth + self._metres * np.interp(rng.uniform(share[0], share[-1], size), share, fine)

    def majorise(self, z: np.ndarray) -> Gaussian:
        """Return the parabola that touches at z and lies above; no weight where no tag is near."""
        gradient, _, weight = self._derivatives(z, 0.0 if self.pulse.log_concave else SHARE)
        precision = weight * self._sharpest
        z = np.asarray(z, np.float64)
        with np.errstate(divide="ignore", invalid="ignore"):
            target = np.where(precision > 0.0, z - gradient / precision, z)
        return Gaussian.from_arrays(target, precision)

    @cached_property
    def _sharpest(self) -> np.ndarray | float:
        """An upper bound of -(log p)'' of each pixel, with the share of the background added to p."""
        if self.pulse.log_concave:
            return 1.0 / self.pulse.resolution**2
        return self.pulse.sharpest(SHARE * self.noise)
