"""The best range of pixels with many tags against the objective on a fine grid, written out."""

import numpy as np
import pytest
from scipy import constants
from scipy.special import ndtr

from recon.acquisition import DeadTime, GaussianPulse, SampledPulse, TimeTags
from recon.likelihoods import DetectionTimes
from recon.likelihoods.detection_time_scan import MANY

PERIOD = 40e-9
METRES = 0.5 * constants.c
RANGE = METRES * PERIOD
GAUSSIAN = GaussianPulse(0.3e-9)
TIMES = np.arange(-1.5, 6.0, 0.05) * 1e-9
TAILED = SampledPulse(
    TIMES, np.where(TIMES < 0.0, np.exp(-0.5 * (TIMES / 0.2e-9) ** 2), np.exp(-TIMES / 0.8e-9))
)
NUMBERS = (12, 13, 20, 45, 90, 200)
GRID = np.linspace(0.0, RANGE, 3000, endpoint=False)  # a twentieth of the Gaussian pulse's rms


def acquire(seed, pulse, ratio, dead_time=None, depth=None, **more):
    """Pixels with as many tags as NUMBERS says; background `ratio` times the signal, rightly declared."""
    rng = np.random.default_rng(seed)
    pixel = np.repeat(np.arange(len(NUMBERS)), NUMBERS)
    z = rng.uniform(0.0, RANGE, len(NUMBERS)) if depth is None else np.full(len(NUMBERS), depth)
    fine = np.linspace(*pulse.support, 20000)
    late = np.interp(rng.random(pixel.size), pulse.cumulative(fine), fine)
    time = np.mod(z[pixel] / METRES + late, PERIOD)
    noisy = rng.random(pixel.size) < ratio / (1.0 + ratio)
    time[noisy] = PERIOD * rng.random(noisy.sum())
    numbers = np.array([NUMBERS])
    tags = TimeTags(
        np.zeros(pixel.size, int), pixel, time, shape=(1, len(NUMBERS)), trials=300.0, period=PERIOD,
        pulse=pulse, gain=1.0, background=numbers / 300.0 * ratio / (1.0 + ratio), dead_time=dead_time,
        **more,
    )  # fmt: skip
    return DetectionTimes(tags, numbers / 300.0 / (1.0 + ratio))


def gaussian_objective(likelihood, pixel, z, dead=None):
    """Sum of log(1 + p / noise) + signal lost, for exact tags and a Gaussian pulse."""
    rms = METRES * GAUSSIAN.rms
    y = likelihood.y[likelihood.start[pixel] : likelihood.start[pixel + 1]]
    late = np.subtract.outer(y, z)
    near = late - RANGE * np.round(late / RANGE)
    p = np.exp(-0.5 * (near / rms) ** 2) / (rms * np.sqrt(2.0 * np.pi))
    total = np.log1p(p / likelihood.noise[0, pixel]).sum(axis=0)
    if dead is not None:
        for turn in RANGE * np.arange(-2, 3):
            covered = ndtr((late + turn + METRES * dead) / rms) - ndtr((late + turn) / rms)
            total += likelihood.signal[0, pixel] * covered.sum(axis=0)
    return total


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("ratio", [1e-4, 1.0, 10.0])
@pytest.mark.parametrize("dead", [None, 7e-9, 33e-9])
def test_a_gaussian_pulse(seed, ratio, dead):
    assert min(NUMBERS) == MANY  # fewer tags take another way
    likelihood = acquire(seed, GAUSSIAN, ratio, None if dead is None else DeadTime(dead))
    best, excess = likelihood._best
    for pixel in range(len(NUMBERS)):
        on_grid = gaussian_objective(likelihood, pixel, GRID, dead)
        there = gaussian_objective(likelihood, pixel, best[:, pixel], dead)
        assert excess[0, pixel] == pytest.approx(there[0], rel=1e-6, abs=1e-6)
        assert excess[0, pixel] >= on_grid.max() - 1e-2
        assert 0.0 <= best[0, pixel] < RANGE


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("ratio", [1e-4, 1.0, 10.0])
@pytest.mark.parametrize(
    "more",
    [
        {},
        {"dead_time": DeadTime(7e-9)},
        {"dead_time": DeadTime(9e-9, reset_every_period=True)},
        {"interval": 0.4e-9},
    ],
)
def test_a_pulse_with_a_tail(seed, ratio, more):
    """The objective at one place is held to the density elsewhere; here the best one is sought."""
    likelihood = acquire(seed, TAILED, ratio, **more)
    excess = likelihood._best[1]
    top = np.full(excess.shape, -np.inf)
    for z in GRID[:: 2 if more else 1]:
        top = np.maximum(top, excess - likelihood.value_map(np.full(excess.shape, z)))
    assert np.all(excess >= top - 1e-2)


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("depth", [0.0, 0.01, RANGE - 0.01])
def test_a_return_at_the_edge_of_the_period(seed, depth):
    likelihood = acquire(seed, GAUSSIAN, 0.5, depth=depth)
    best, excess = likelihood._best
    for pixel in range(len(NUMBERS)):
        assert excess[0, pixel] >= gaussian_objective(likelihood, pixel, GRID).max() - 1e-2
    off = best - depth
    off -= RANGE * np.round(off / RANGE)
    assert np.abs(off[0, 2:]).max() < 4.0 * METRES * GAUSSIAN.rms / np.sqrt(20 / 1.5)


@pytest.mark.parametrize("each", [6, 20, 60])
def test_two_returns_that_fit_nearly_alike(each):
    """Which of them is better often hangs on less than a grid can tell; the best of both is found."""
    rng, pixels = np.random.default_rng(each), 300
    places = np.array([6e-9, 21e-9]) + rng.uniform(0.0, 2e-9, (pixels, 2))
    time = (places[:, :, None] + GAUSSIAN.rms * rng.standard_normal((pixels, 2, each))).ravel()
    tags = TimeTags(
        np.zeros(time.size, int), np.repeat(np.arange(pixels), 2 * each), time, shape=(1, pixels), trials=300,
        period=PERIOD, pulse=GAUSSIAN, background=0.01,
    )  # fmt: skip
    likelihood = DetectionTimes(tags, 0.1)
    excess = likelihood._best[1]
    for pixel in range(pixels):
        near = np.concatenate([z + METRES * np.linspace(-0.4e-9, 0.4e-9, 81) for z in METRES * places[pixel]])
        assert excess[0, pixel] >= gaussian_objective(likelihood, pixel, near).max() - 1e-2


def test_tags_all_alike():
    """As from a coarse clock: many at one time, and fewer at another."""
    time = np.repeat([5e-9, 21e-9], [30, 29])
    tags = TimeTags(
        np.zeros(59, int), np.zeros(59, int), time, shape=(1, 1), trials=300, period=PERIOD, pulse=GAUSSIAN,
        background=0.01,
    )  # fmt: skip
    assert DetectionTimes(tags, 0.1).estimate()[0, 0] == pytest.approx(METRES * 5e-9, rel=1e-6)
