"""Draws the arrival times of single photons."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.acquisition import GaussianPulse, SampledPulse, TimeTags
from recon.acquisition.time_tags import REFRACTIVE_INDEX, SPEED_OF_LIGHT
from recon.errors import InputError
from recon.simulate.inputs import affordable, generator, image_of, product
from recon.validation import DURATION, INSTANT, NONNEGATIVE, POSITIVE, Range, number, number_or_map

MOST_PHOTONS = 2e8  # more would not fit the memory of an ordinary computer
DISTANCE = Range("a distance in metres between -1e9 and 1e9", low=-1e9, high=1e9)


def time_tags(
    depth: ArrayLike,
    reflectivity: ArrayLike,
    trials: ArrayLike,
    period: float,
    pulse: GaussianPulse | SampledPulse,
    gain: ArrayLike = 1.0,
    background: ArrayLike = 0.0,
    *,
    time_zero: float = 0.0,
    offset: ArrayLike = 0.0,
    refractive_index: float = 1.0,
    interval: float | None = None,
    seed: int | np.random.Generator,
) -> TimeTags:
    """Draw the detection times of every pixel.

    Over its trials a pixel sees a Poisson number of signal photons, `trials * gain * reflectivity`
    expected, and of other photons, `trials * background` expected. Each signal photon comes at
    `time_zero + offset + 2 * refractive_index * depth / c` plus a time drawn from the pulse, modulo the
    period; each other photon at any time of the period alike. The tags are listed pixel by pixel, row
    after row, and within a pixel in the order of arrival over the exposure.

    Parameters
    ----------
    depth : range in metres, image (rows, columns); beyond c * period / (2 * refractive_index) it wraps.
    reflectivity : image (rows, columns), zero or more.
    trials, gain, background : scalar or map (rows, columns).
    period, time_zero, interval : seconds; offset : seconds, scalar or map (rows, columns).
    pulse : the pulse as the detector sees it.
    interval : step of the clock; a tag is then the centre of its interval. The period must hold a whole
        number of them.
    seed : whole number, or a numpy Generator to go on drawing from.

    Raises InputError if an argument is not as described.
    """
    depth = image_of(depth, "depth", DISTANCE)
    shape = depth.shape
    reflectivity = image_of(reflectivity, "reflectivity")
    if reflectivity.shape != shape:
        raise InputError(f"reflectivity has shape {reflectivity.shape}; give the shape of depth, {shape}.")
    trials = number_or_map(trials, "trials", shape, NONNEGATIVE)
    gain = number_or_map(gain, "gain", shape, POSITIVE)
    background = number_or_map(background, "background", shape, NONNEGATIVE)
    offset = number_or_map(offset, "offset", shape, INSTANT)
    time_zero = number(time_zero, "time_zero", INSTANT)
    period = number(period, "period", DURATION)
    refractive_index = number(refractive_index, "refractive_index", REFRACTIVE_INDEX)
    steps = None if interval is None else _steps(period, number(interval, "interval", DURATION))
    rng = generator(seed)

    signal = product(shape, trials, gain, reflectivity).ravel()
    other = product(shape, trials, background).ravel()
    expected = signal.sum() + other.sum()
    affordable("reflectivity, gain, background and trials", expected, "photons", MOST_PHOTONS)
    signal, other = rng.poisson(signal), rng.poisson(other)
    echo = (time_zero + offset + 2.0 * refractive_index * depth / SPEED_OF_LIGHT).ravel()
    signal_times = np.repeat(echo, signal)
    signal_times += _pulse_times(pulse, signal_times.size, rng)
    np.mod(signal_times, period, out=signal_times)
    times = np.concatenate([signal_times, period * rng.random(int(other.sum()))])
    if not times.size:
        raise InputError(f"trials expects {expected:.3g} photons in all, and none came; give more trials.")
    times[times >= period] = 0.0  # rounding can lift a time just below 0 to the period itself
    if steps is not None:
        times = (np.minimum(np.floor(times / period * steps), steps - 1) + 0.5) * (period / steps)

    each = np.arange(depth.size)
    pixel = np.concatenate([np.repeat(each, signal), np.repeat(each, other)])
    moment = pixel + rng.random(pixel.size)  # the pixel's turn, and when in its exposure
    order = np.argsort(moment)
    row, column = np.divmod(pixel[order], shape[1])
    return TimeTags(
        row,
        column,
        times[order],
        shape=shape,
        trials=trials,
        period=period,
        pulse=pulse,
        gain=gain,
        background=background,
        time_zero=time_zero,
        offset=offset,
        refractive_index=refractive_index,
        interval=interval,
    )


def _pulse_times(pulse: GaussianPulse | SampledPulse, size: int, rng: np.random.Generator) -> NDArray:
    """Draw times from the pulse.

    A sampled pulse, straight between its samples and zero beyond them, is a sum of hats, one over each
    sample: draw the hat by its area, then a time from its triangle.
    """
    if isinstance(pulse, GaussianPulse):
        return pulse.rms * rng.standard_normal(size)
    if not isinstance(pulse, SampledPulse):
        raise InputError(f"pulse is a {type(pulse).__name__}; give a GaussianPulse or a SampledPulse.")
    middle = pulse.times
    left = np.concatenate([middle[:1], middle[:-1]])
    right = np.concatenate([middle[1:], middle[-1:]])
    area = pulse.values / pulse.values.max() * (right - left)
    hat = rng.choice(middle.size, size=size, p=area / area.sum())
    return rng.triangular(left[hat], middle[hat], right[hat])


def _steps(period: float, interval: float) -> int:
    """How many intervals the period holds."""
    steps = round(period / interval)
    if steps < 1 or abs(steps * interval - period) > 1e-6 * interval:
        raise InputError(f"interval is {interval:g} s; give one that divides the period of {period:g} s.")
    return steps
