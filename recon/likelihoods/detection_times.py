"""Times of single detections, as a function of depth."""

from __future__ import annotations

from dataclasses import replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from recon.acquisition.time_tags import SPEED_OF_LIGHT, TimeTags
from recon.errors import InputError
from recon.likelihoods.contract import LEAST_SHARED, Interval, Likelihood
from recon.likelihoods.detection_time_draws import draw_given_exposure, draw_given_number
from recon.likelihoods.gaussian import Gaussian
from recon.likelihoods.inputs import drawing_image
from recon.likelihoods.live_exposure import LiveExposure, live_exposure
from recon.likelihoods.range_pulse import range_pulse
from recon.validation import NONNEGATIVE, POSITIVE, number_or_map

FLOOR = 1e-6  # least background over a period, in expected signal detections
MOST = 1e12  # largest background over a period; beyond it a tag tells nothing
SHARE = 0.1  # of the background, counted as pulse where the pulse's log has no bounded curvature


class DetectionTimes(Likelihood):
    """Half the deviance of the times of detections; z is depth in m.

        value(z) = L(z) - L(z^)
        L(z) = signal A(z) - sum over tags of log(p(y - z) + noise)

    with y the range from which an echo arrives at the tag's time, p the pulse as a periodic density of
    range (`RangePulse`), noise the background per metre for each expected signal detection, and z^ the
    pixel's best depth. A(z) is the number of periods in which the detector could have seen the pulse,
    weighed by the pulse (`exposure_at`); dead time and gate are accounted for exactly (`LiveExposure`).

    Without either, A is the number of trials at any depth, and how many detections there are tells
    nothing about depth. Their number is then taken as given: `draw` keeps it, and `fisher_information` is
    that of the tags there are. With either, the live exposure is taken as given: the tags of a draw are
    Poisson with rate E(t) r(t), and `fisher_information` is that of tags so drawn.

    tags: the acquisition; a tag with an `interval` has the pulse averaged over it, and one with a `dither`
        is moved back by it.
    reflectivity: known, 0 or more, a map or a number. Where gain * reflectivity is 0, tags tell nothing.
    background: expected other detections per trial, a number or a map; None takes that of the tags.

    The background is taken to be at least a millionth of the signal. Not convex: `majorise` takes each
    tag as signal or background with the probabilities it has at z (Dempster, Laird and Rubin 1977) and
    bounds minus the log of the pulse by a parabola, which for a Gaussian pulse it is; A lies below the
    parabola whose curvature is half the swing of E times the integral of |p''|.

    pulse: the `RangePulse`.
    signal: (rows, columns), gain * reflectivity, expected signal detections per trial.
    trials: (rows, columns).
    exposed: boolean map, False where a pixel is masked or cannot cause a signal.
    live: the `LiveExposure`.
    law: the pulse of the acquisition. metres: of range per second.
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
        self.signal = np.ascontiguousarray(signal)
        self.exposed = signal > 0.0 if tags.mask is None else (signal > 0.0) & tags.mask
        self._used = (np.diff(tags.start) > 0).reshape(self.shape) & self.exposed
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            ratio = np.clip(background / signal, FLOOR, MOST)
        self.noise = np.where(signal > 0.0, ratio, MOST) / self.pulse.period
        self.law = tags.pulse
        self.metres = SPEED_OF_LIGHT / (2.0 * tags.refractive_index)  # per second
        self.start = np.array(tags.start)  # writable, as that of folds is: one type to compile kernels for
        delay = np.atleast_2d(np.asarray(tags.time_zero + tags.offset, np.float64))
        period = self.pulse.period
        time = tags.time if tags.dither is None else tags.time - tags.dither
        self.y = kernels.ranges(time, self.start, self.shape[1], delay, self.metres, period)
        zero = np.mod(-self.metres * delay, period)
        self.live = live_exposure(tags, self.y, np.where(zero < period, zero, 0.0), self.metres)
        self.trials = self.live.trials

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
        """The best depth of every pixel, and there sum of log(1 + p / noise) + signal (trials - A)."""
        from recon.likelihoods import detection_time_search

        pulse = self.pulse
        depth, excess = np.zeros(self.shape), np.zeros(self.shape)
        if self.live.is_whole:
            detection_time_search.best_whole(*self._tags, pulse.mode, pulse.core, *self._table, depth, excess)
            return depth, excess
        detection_time_search.best(
            *self._tags, self.signal, *self.live.edges, pulse.mode, pulse.core, pulse.low, pulse.step,
            pulse.pieces, pulse.shares, pulse.period, depth, excess,
        )  # fmt: skip
        return depth, excess

    @property
    def constant(self) -> float:
        """Minus the log of the density (per s) of the times at the best depths.

        Given their number; where periods are lost, that of the Poisson process with the live exposure:
        the integral of E r - sum over tags of log r.
        """
        tags = np.where(self._used, np.diff(self.start).reshape(self.shape), 0)
        ratio = self.noise * self.pulse.period
        if self.live.is_whole:
            each = np.log(self.noise / (1.0 + ratio) * self.metres)
            return -float(np.sum(self._best[1][self._used] + (tags * each)[self._used]))
        expected = self.signal * (self.trials + ratio * self.live.uniform)
        with np.errstate(divide="ignore", invalid="ignore"):
            each = np.log(self.signal * self.noise * self.metres)
            total = expected - tags * each - self._best[1]
        return float(np.sum(total[self._used]))

    def estimate(self) -> np.ndarray:
        """Return the depth that fits each pixel's tags best; the mean of the others without data."""
        image = self._best[0].astype(np.float32)
        if not self._used.all():
            image[~self._used] = image[self._used].mean() if self._used.any() else 0.5 * self.pulse.period
        return image

    def starting_image(self) -> np.ndarray:
        """Return `estimate`: from a flat image most surfaces are out of sight."""
        return self.estimate()

    def value_map(self, z: np.ndarray) -> np.ndarray:
        """See `Likelihood.value_map`."""
        return self._best[1] + self._loss(z)

    def _loss(self, z: np.ndarray) -> np.ndarray:
        """Return signal (A - trials) - sum of log(1 + p / noise)."""
        from recon.likelihoods import detection_time_kernels as kernels

        excess = np.zeros(self.shape)
        kernels.excess(np.asarray(z, np.float64), *self._tags, *self._table, excess)
        if not self.live.is_whole:
            excess += self.signal * self.live.losses(z, self.pulse, self._used)[0]
        return -excess

    def _derivatives(self, z: np.ndarray, share: float = 0.0) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        from recon.likelihoods import detection_time_kernels as kernels

        written = tuple(np.zeros(self.shape) for _ in range(3))
        kernels.derivatives(np.asarray(z, np.float64), *self._tags, share, *self._table, *written)
        if not self.live.is_whole:
            _, first, second = self.live.losses(z, self.pulse, self._used)
            written[0][...] -= self.signal * first
            written[1][...] -= self.signal * second
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
        """Return the expected curvature if z is true: of the pixel's number of tags, or its live exposure.

        The latter is the integral of E(t) (S p')^2 / (S p + b / T). Where nothing is lost, exact tags tell
        as much at any depth; how much a coarse clock tells depends on its phase.
        """
        if self.pulse.interval == 0.0 and self.live.is_whole:
            return self._information.copy()
        from recon.likelihoods import detection_time_kernels as kernels
        from recon.likelihoods import live_exposure_kernels

        # A fine clock is taken a quarter of the pulse's finest detail at a time.
        interval = self.pulse.interval
        stride = interval and interval * max(1.0, 2.0 * self.pulse.step // interval)
        z, out = np.asarray(z, np.float64), np.zeros(self.shape)
        if not self.live.is_whole:
            live_exposure_kernels.information(
                z, self.y, self.start, self.noise, self.signal, self.trials, self._used, stride,
                *self.live.edges, *self._table, out,
            )  # fmt: skip
            return out
        kernels.coarse_information(z, *self._tags, stride, *self._table, out)
        return out

    @cached_property
    def _information(self) -> np.ndarray:
        """The Fisher information of every pixel's tags, if they are exact."""
        tags = np.diff(self.start).reshape(self.shape)
        return np.where(self._used, tags * self.pulse.information(self.noise), 0.0)

    def exposure_at(self, z: np.ndarray) -> np.ndarray:
        """Return A(z), the integral of E(y) p(y - z) dy, in periods (float64 map), for all pixels.

        Tags or not, masked or not: it is the exposure with which a pulse at z would have been counted.
        """
        return self.trials - self.live.losses(z, self.pulse)[0]

    def gated(self, z: np.ndarray, reach: ArrayLike) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Return what each pixel, masked or not, holds from range z - reach to z + reach.

        reach: m, above 0, a number or a map; half a period is all there is.

        Returns three maps: the number of tags (int64), the live exposure of the pulse, integral of
        E(y) p(y - z) dy, and that of the background, integral of E(y) dy over the unambiguous range (both
        float64, periods). Raises InputError.
        """
        reach = np.atleast_2d(np.asarray(number_or_map(reach, "reach", self.shape, POSITIVE), np.float64))
        return self.live.gated(z, reach, self.y, self.start, self.pulse)

    def residuals(self, z: np.ndarray) -> np.ndarray:
        """See `Likelihood.residuals`."""
        sign = np.where(self._best[0] >= z, 1.0, -1.0)
        return sign * np.sqrt(2.0 * np.maximum(self.value_map(z), 0.0))

    def draw(self, z: np.ndarray, seed: int | np.random.Generator) -> DetectionTimes:
        """Return the same likelihood on as many tags, drawn at z; a coarse clock keeps its phases.

        Where periods are lost, the recorded live exposure is kept, and the number of tags is drawn too.
        """
        from recon.likelihoods import detection_time_kernels as kernels

        draws = draw_given_number if self.live.is_whole else draw_given_exposure
        tags, y = draws(self, drawing_image(z, self.shape), np.random.default_rng(seed))
        start = np.concatenate([[0], np.cumsum(tags)])
        y = kernels.ranges(y, start, self.shape[1], np.zeros((1, 1)), 1.0, self.pulse.period)
        return self._with(y, tags, self.live, self._used)

    def _with(self, y: np.ndarray, tags: np.ndarray, live: LiveExposure, used: np.ndarray) -> DetectionTimes:
        """Return the same likelihood of other tags, so many of each pixel (pixels,)."""
        other = object.__new__(type(self))
        other.__dict__.update(self.__dict__)
        for name in ("_best", "_information"):
            other.__dict__.pop(name, None)
        other.y, other.start = y, np.concatenate([[0], np.cumsum(tags)])
        other._used, other.live, other.trials = used, live, live.trials
        return other

    def folds(self, number: int, seed: int) -> list[tuple[Likelihood, Likelihood]]:
        """Return pairs that share out the tags: each falls into any of `number` parts alike.

        The live exposure is shared with them, as it is known from all tags.
        """
        part = np.random.default_rng(seed).integers(number, size=self.y.size)
        share = 1.0 / number
        return [(self._of(part != f, 1.0 - share), self._of(part == f, share)) for f in range(number)]

    def _of(self, chosen: np.ndarray, share: float) -> DetectionTimes:
        """Return the same likelihood of some tags, in that share of the exposure."""
        tags = np.add.reduceat(np.append(chosen, False), self.start[:-1], dtype=np.int64)
        tags[np.diff(self.start) == 0] = 0
        live = self.live
        live = replace(live, trials=share * live.trials, level=share * live.level)
        return self._with(self.y[chosen], tags, live, (tags > 0).reshape(self.shape) & self.exposed)

    @property
    def can_be_shared_out(self) -> bool:
        """See `Likelihood.can_be_shared_out`."""
        tags = np.diff(self.start).reshape(self.shape)
        return int(np.sum(tags, where=self._used)) >= LEAST_SHARED

    def score_map(self, z: np.ndarray) -> np.ndarray:
        """Return minus the log of the tags' density, less what does not depend on z."""
        return self._loss(z)

    @property
    def scores_add_up(self) -> bool:
        """See `Likelihood.scores_add_up`: a pixel that knows little of its depth says little."""
        return True

    def majorise(self, z: np.ndarray) -> Gaussian:
        """Return the parabola that touches at z and lies above; without losses, no weight where no tag is."""
        gradient, _, weight = self._derivatives(z, 0.0 if self.pulse.log_concave else SHARE)
        precision = weight * self._sharpest
        if not self.live.is_whole:
            swing = np.where(self._used, self.signal * self.live.swing, 0.0)
            precision += 0.5 * self.pulse.turning * swing
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
