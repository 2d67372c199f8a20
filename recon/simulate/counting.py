"""Draws numbers of detections, photon by photon."""

import numpy as np
from numpy.typing import ArrayLike, NDArray

from recon.acquisition import Counts
from recon.errors import InputError
from recon.simulate.inputs import affordable, generator, image_of, positive_whole, product
from recon.validation import NONNEGATIVE, POSITIVE, check_whole, first, flag, number_or_map

RAREST = 1e-12  # photons per trial; rarer ones need more trials than a float64 counts exactly
MOST_CLICKS = 5e9  # minutes of work
MOST_PHOTONS = 1e15  # in a pixel; a float64 counts as far exactly


def counts(
    image: ArrayLike,
    trials: ArrayLike | None,
    gain: ArrayLike = 1.0,
    background: ArrayLike = 0.0,
    *,
    stop_after: int | None = None,
    several_per_trial: bool = False,
    seed: int | np.random.Generator,
) -> Counts:
    """Draw the detections of every pixel.

    Photons arrive in each trial as a Poisson process with `gain * image + background` photons expected.

    By default a trial clicks once if a photon comes, however many more follow in it, and every pixel
    makes its `trials`. With `stop_after=1` a pixel waits for its first detection, with `stop_after=L` for
    its L-th, and makes no further trial; `trials` is then the most it may make, or None for no limit, and
    the acquisition's trials are those it made. With `several_per_trial=True` every photon is detected.

    Parameters
    ----------
    image : image (rows, columns), zero or more.
    trials : whole number or map (rows, columns); any non-negative number with `several_per_trial`.
    gain, background : scalar or map (rows, columns), expected detections per trial at image value 1, and
        from elsewhere.
    seed : whole number, or a numpy Generator to go on drawing from.

    Raises InputError if an argument is not as described. Time grows with the number of clicks.
    """
    image = image_of(image, "image")
    shape = image.shape
    gain = number_or_map(gain, "gain", shape, POSITIVE)
    background = number_or_map(background, "background", shape, NONNEGATIVE)
    if trials is not None:
        trials = number_or_map(trials, "trials", shape, NONNEGATIVE)
    elif stop_after is None:
        raise InputError("trials is None; give the number of trials, or stop_after.")
    rng = generator(seed)

    if flag(several_per_trial, "several_per_trial"):
        if stop_after is not None:
            raise InputError(f"stop_after is {stop_after!r} with several_per_trial; give one of the two.")
        signal, other = product(shape, trials, gain, image), product(shape, trials, background)
        brightest = max(signal.max(), other.max())
        affordable("image, gain, background and trials", brightest, "photons in a pixel", MOST_PHOTONS)
        detections = rng.poisson(signal) + rng.poisson(other)
        return Counts(detections, trials, gain, background, several_per_trial=True)

    rate = product(shape, gain, image) + background
    if trials is not None:
        check_whole(trials, "trials", "a whole number")
    elif rate.min() < RAREST:
        place = first(rate < RAREST)
        raise InputError(
            f"gain * image + background at {place} is {rate[place]:g} photons per trial, and the wait for "
            "a detection may not end; give trials as a limit."
        )
    wanted = np.inf if stop_after is None else positive_whole(stop_after, "stop_after")
    most = np.full(rate.size, np.inf) if trials is None else product(shape, trials).ravel()
    detections, made = _clicks(rate.ravel(), most, wanted, rng)
    return Counts(
        detections.reshape(shape), trials if stop_after is None else made.reshape(shape), gain, background
    )


def _clicks(
    rate: NDArray, most: NDArray, wanted: float, rng: np.random.Generator
) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
    """Follow each pixel from click to click; return its numbers of clicks and of trials made.

    The photons after the trial that clicked come as freshly as from the start (a Poisson process has no
    memory), so one exponential wait, counted in trials, leads from the end of that trial to the next click.
    """
    expected = np.minimum(product(rate.shape, most, rate), np.minimum(most, wanted))
    affordable("image, gain, background and trials", expected.sum(), "detections", MOST_CLICKS)
    clicks = np.zeros(rate.size, dtype=np.int64)
    made = most.copy()
    pixel = np.flatnonzero(rate > 0)
    now = np.zeros(pixel.size)
    while pixel.size:
        with np.errstate(over="ignore"):  # a wait beyond all numbers is beyond the limit too
            empty = np.floor(rng.standard_exponential(pixel.size) / rate[pixel])
        now = now + empty + 1.0
        clicked = now <= most[pixel]
        pixel, now = pixel[clicked], now[clicked]
        clicks[pixel] += 1
        finished = clicks[pixel] == wanted
        made[pixel[finished]] = now[finished]
        pixel, now = pixel[~finished], now[~finished]
    return clicks, made
