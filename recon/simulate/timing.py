"""Draws the arrival times of single photons."""

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.acquisition import DeadTime, GaussianPulse, SampledPulse, TimeTags
from recon.acquisition.time_tags import SPEED_OF_LIGHT
from recon.errors import InputError
from recon.simulate.clock import Clock
from recon.simulate.detector import Detector
from recon.simulate.inputs import affordable, boolean_map, generator, image_of, product
from recon.validation import DURATION, NONNEGATIVE, Range, check_whole, number, number_or_map

MOST_PHOTONS = 2e8  # more would not fit the memory of an ordinary computer
TOGETHER = 4e6  # photons drawn at once, give or take those of a pixel
DISTANCE = Range("a distance in metres between -1e9 and 1e9", low=-1e9, high=1e9)
JITTER = Range("0, or a time in seconds up to 1e9", low=0.0, high=DURATION.high)


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
    dither: float | None = None,
    dead_time: DeadTime | None = None,
    gate: tuple[float, float] | None = None,
    jitter: float = 0.0,
    hot: ArrayLike | None = None,
    dead: ArrayLike | None = None,
    seed: int | np.random.Generator,
) -> TimeTags:
    """Draw the detection times of every pixel.

    Over its trials a pixel sees a Poisson number of signal photons, `trials * gain * reflectivity`
    expected, and of other photons, `trials * background` expected. Each signal photon comes at
    `time_zero + offset + 2 * refractive_index * depth / c` plus a time drawn from the pulse, modulo the
    period; each other photon at any time of the period alike. The tags are listed pixel by pixel, row
    after row, and within a pixel in the order of arrival over the exposure. There may be none at all.

    With a dead time the photons of a pixel are spread over its periods alike, a wrapped echo staying in
    its period, and met one by one over the whole exposure. A photon that comes while the detector is
    dead is lost. Any other blinds the detector for `dead_time.detector`, and is recorded unless it comes
    within `dead_time.electronics` of the last recorded one. A photon that the electronics miss has
    blinded the detector all the same, which DeadTime leaves out.

    Parameters
    ----------
    depth : range in metres, image (rows, columns); beyond c * period / (2 * refractive_index) it wraps.
    reflectivity : image (rows, columns), zero or more.
    trials, gain, background : scalar or map (rows, columns); trials are whole with a dead time.
    period, time_zero : seconds; offset : seconds, scalar or map (rows, columns).
    pulse : the pulse as the detector sees it.
    interval : step of the clock in seconds; a tag is then the centre of its interval. The period must
        hold a whole number of them, and so must the gate and the time before it, unless there is a dither.
    dither : each detection is delayed by its own time, drawn between 0 and this many seconds alike,
        before the clock reads it. The tags hold the delays. Needs an interval.
    dead_time : DeadTime; with `reset_every_period` detector and electronics are armed when a period starts.
    gate : (start, stop) in seconds within the period; the detector meets no photon outside.
    hot : other photons per trial, uniform over the period, that the acquisition does not tell of, scalar
        or map (rows, columns): hot pixels.
    dead : boolean map; True pixels record nothing, and are not masked.
    jitter : rms in seconds of a Gaussian error of the moment at which the detector answers, signal and
        others alike, modulo the period. The acquisition holds the pulse as given, without it: an
        instrument that is wrongly calibrated.
    seed : whole number, or a numpy Generator to go on drawing from.

    Raises InputError if an argument is not as described.
    """
    depth = image_of(depth, "depth", DISTANCE)
    shape = depth.shape
    reflectivity = image_of(reflectivity, "reflectivity")
    if reflectivity.shape != shape:
        raise InputError(f"reflectivity has shape {reflectivity.shape}; give the shape of depth, {shape}.")
    if not isinstance(pulse, GaussianPulse | SampledPulse):
        raise InputError(f"pulse is a {type(pulse).__name__}; give a GaussianPulse or a SampledPulse.")
    period = number(period, "period", DURATION)
    blank = TimeTags(
        [],
        [],
        [],
        shape=shape,
        trials=trials,
        period=period,
        pulse=pulse,
        gain=gain,
        background=background,
        time_zero=time_zero,
        offset=offset,
        refractive_index=refractive_index,
        dead_time=dead_time,
        gate=gate,
    )
    if dead_time is not None:
        check_whole(blank.trials, "trials", "whole periods where there is a dead time")
    clock = Clock.of(period, interval, dither, blank.gate)
    detector = Detector(period, pulse, number(jitter, "jitter", JITTER), blank.gate, dead_time)
    rng = generator(seed)

    signal = product(shape, blank.trials, blank.gain, reflectivity)
    other = product(shape, blank.trials, blank.background)
    if hot is not None:
        other += product(shape, blank.trials, number_or_map(hot, "hot", shape, NONNEGATIVE))
    if dead is not None:
        silent = boolean_map(dead, "dead", shape)
        signal[silent] = other[silent] = 0.0
    expected = signal.sum() + other.sum()
    affordable("reflectivity, gain, background and trials", expected, "photons", MOST_PHOTONS)
    echo = blank.time_zero + blank.offset + 2.0 * blank.refractive_index * depth / SPEED_OF_LIGHT
    exposure = np.broadcast_to(blank.trials, shape)

    lots = []
    for lot in _lots((signal + other).ravel()):
        pixel, time = detector.detections(*(m.flat[lot] for m in (echo, signal, other, exposure)), rng)
        time, delay = clock.read(time, rng)
        row, column = np.divmod((pixel + lot.start).astype(np.int32), np.int32(shape[1]))
        lots.append((row, column, time, delay))
    row, column, time = (np.concatenate([lot[i] for lot in lots]) for i in range(3))
    delays = None if dither is None else np.concatenate([lot[3] for lot in lots])
    del lots
    return replace(blank, row=row, column=column, time=time, interval=interval, dither=delays)


def _lots(expected: NDArray) -> Iterator[slice]:
    """Runs of pixels that expect about TOGETHER photons each, so that memory stays bounded."""
    turn = np.floor(np.cumsum(expected) / TOGETHER)
    ends = np.append(np.flatnonzero(np.diff(turn)) + 1, expected.size)
    begin = 0
    for end in ends:
        yield slice(begin, int(end))
        begin = int(end)
