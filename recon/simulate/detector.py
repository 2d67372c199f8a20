"""The photons that reach a detector, and those it answers."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from recon.acquisition import DeadTime, GaussianPulse, SampledPulse

Pulse = GaussianPulse | SampledPulse


@dataclass(frozen=True)
class Detector:
    """Draws detections. Times in s; see `time_tags` for what the fields mean."""

    period: float
    pulse: Pulse
    jitter: float
    gate: tuple[float, float] | None
    dead_time: DeadTime | None

    def detections(
        self, echo: NDArray, signal: NDArray, other: NDArray, trials: NDArray, rng: np.random.Generator
    ) -> tuple[NDArray[np.intp], NDArray[np.float64]]:
        """Draw the pixel and the time within the period of every detection.

        echo: (pixels,), when the signal comes; signal, other: (pixels,), photons expected over the
        exposure; trials: (pixels,). Listed pixel by pixel, in the order of arrival over the exposure.
        """
        signal, other = rng.poisson(signal), rng.poisson(other)
        time = self._times(np.repeat(echo, signal), int(other.sum()), rng)
        each = np.arange(echo.size)
        pixel = np.concatenate([np.repeat(each, signal), np.repeat(each, other)])
        if self.gate is not None:
            seen = (time >= self.gate[0]) & (time < self.gate[1])
            pixel, time = pixel[seen], time[seen]
        share = rng.random(pixel.size)  # of the exposure, after which a photon comes
        if self.dead_time is None:
            order = np.argsort(pixel + share)
        else:
            order = self._answered(pixel, np.floor(share * trials[pixel]), time, echo.size)
        return pixel[order], time[order]

    def _times(self, echoes: NDArray, other: int, rng: np.random.Generator) -> NDArray[np.float64]:
        """Times of the signal photons and then of the others, as the detector answers them."""
        echoes += pulse_times(self.pulse, echoes.size, rng)
        np.mod(echoes, self.period, out=echoes)
        time = np.concatenate([echoes, self.period * rng.random(other)])
        if self.jitter:
            time = np.mod(time + self.jitter * rng.standard_normal(time.size), self.period)
        time[time >= self.period] = 0.0  # rounding can lift a time just below 0 to the period itself
        return time

    def _answered(self, pixel: NDArray, turn: NDArray, time: NDArray, pixels: int) -> NDArray[np.int64]:
        from recon.simulate.timing_kernels import by_pixel, walk

        dead = self.dead_time
        order, start = by_pixel(pixel, pixels)
        recorded = walk(
            order, start, turn, time, self.period, dead.detector, dead.electronics, dead.reset_every_period
        )
        return order[recorded]


def pulse_times(pulse: Pulse, size: int, rng: np.random.Generator) -> NDArray[np.float64]:
    """Draw times from the pulse.

    A sampled pulse, straight between its samples and zero beyond them, is a sum of hats, one over each
    sample: draw the hat by its area, then a time from its triangle.
    """
    if isinstance(pulse, GaussianPulse):
        return pulse.rms * rng.standard_normal(size)
    middle = pulse.times
    left = np.concatenate([middle[:1], middle[:-1]])
    right = np.concatenate([middle[1:], middle[-1:]])
    area = pulse.values / pulse.values.max() * (right - left)
    hat = rng.choice(middle.size, size=size, p=area / area.sum())
    return rng.triangular(left[hat], middle[hat], right[hat])
