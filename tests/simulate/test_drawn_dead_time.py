"""Drawn detections of a detector with a dead time, against renewal theory and a plain walk."""

import numpy as np
import pytest
from scipy import constants, stats

from recon.acquisition import DeadTime, GaussianPulse
from recon.simulate import time_tags
from recon.simulate.timing_kernels import by_pixel, walk

PERIOD = 100e-9
PULSE = GaussianPulse(1e-9)
UNLIKELY = 1e-3


def drawn(trials, seed, signal=0.0, background=2.0, shape=(20, 20), **settings):
    depth = np.full(shape, 40e-9 * constants.c / 2)
    return time_tags(
        depth, np.full(shape, signal), trials, PERIOD, PULSE, 1.0, background, seed=seed, **settings
    )


def per_period(tags):
    """Mean detections a period and its standard error, from the pixels as independent repeats."""
    numbers = tags.counts().detections / tags.trials
    return numbers.mean(), numbers.std() / np.sqrt(numbers.size)


def plain_walk(moments, period, detector, electronics, reset):
    """Positions in a sorted list of the photons recorded."""
    recorded = []
    blind_until = deaf_until = -np.inf
    for i, t in enumerate(moments):
        if reset and i and t // period > moments[i - 1] // period:
            blind_until = deaf_until = -np.inf
        if t < blind_until:
            continue
        blind_until = t + detector
        if t >= deaf_until:
            deaf_until = t + electronics
            recorded.append(i)
    return recorded


@pytest.mark.parametrize("reset", [False, True])
@pytest.mark.parametrize(("detector", "electronics"), [(0.3, 0.0), (0.2, 0.5), (0.0, 0.7), (2.6, 1.0)])
def test_the_walk_is_that_of_a_plain_loop(detector, electronics, reset, seed):
    rng = np.random.default_rng(seed)
    pixel, turn, time = rng.integers(0, 7, 3000), rng.integers(0, 100, 3000).astype(float), rng.random(3000)
    pixel[pixel == 4] = 3  # one pixel saw nothing
    order, start = by_pixel(pixel, 7)
    recorded = walk(order, start, turn, time, 1.0, detector, electronics, reset)
    for p in range(7):
        moments = np.sort((turn + time)[pixel == p])
        found = order[start[p] : start[p + 1]][recorded[start[p] : start[p + 1]]]
        expected = moments[plain_walk(moments, 1.0, detector, electronics, reset)]
        np.testing.assert_array_equal((turn + time)[found], expected)
        assert np.all(pixel[found] == p)


def test_uniform_light(seed):
    """n / (1 + n tau): 2 photons a period and a dead time of 0.75 of it give 0.8 a period, all over it."""
    tags = drawn(1000, seed, dead_time=DeadTime(0.75 * PERIOD))
    mean, error = per_period(tags)
    assert mean == pytest.approx(0.8, abs=4 * error + 1 / 1000)
    assert error < 1e-3
    assert tags.dead_time == DeadTime(0.75 * PERIOD)
    # successive detections are not independent: test on one in twenty
    assert stats.kstest(tags.time[::20] / PERIOD, "uniform").pvalue > UNLIKELY


def test_electronics_dead_for_longer_than_the_detector(seed):
    """With tau_d < tau_e < 2 tau_d a record comes at the first firing after tau_e, the second at the latest.

    Mean gap (tau_d + 1/n) (2 - exp(-n (tau_e - tau_d))).
    """
    tags = drawn(1000, seed, dead_time=DeadTime(0.5 * PERIOD, 0.8 * PERIOD))
    mean, error = per_period(tags)
    expected = 1 / ((0.5 + 1 / 2) * (2 - np.exp(-2 * 0.3)))
    assert mean == pytest.approx(expected, abs=4 * error + 1 / 1000)
    assert abs(expected - 1 / (0.8 + 1 / 2)) > 40 * error  # what the longer dead time alone would give


def test_a_reset_records_the_first_photon_of_a_period(seed, chance):
    """Dead for the rest of the period: Bernoulli trials with p = 1 - exp(-mu), the earlier of the photons."""
    tags = drawn(50, seed, dead_time=DeadTime(5 * PERIOD, reset_every_period=True))
    numbers = tags.counts().detections
    assert chance(numbers, stats.binom.pmf(np.arange(51), 50, -np.expm1(-2.0))) > UNLIKELY
    first = stats.truncexpon(b=2.0, scale=0.5)  # of Poisson photons, 2 a period
    assert stats.kstest(tags.time / PERIOD, first.cdf).pvalue > UNLIKELY


def test_a_gate_shuts_the_detector_to_what_is_outside(seed):
    """The light outside the gate blinds nothing: the first photon after it opens is recorded."""
    gate = (30e-9, 50e-9)
    tags = drawn(50, seed, background=5.0, dead_time=DeadTime(PERIOD, reset_every_period=True), gate=gate)
    assert tags.gate == gate
    assert tags.time.min() >= gate[0]
    assert tags.time.max() < gate[1]
    mean, error = per_period(tags)
    assert mean == pytest.approx(-np.expm1(-5.0 * 0.2), abs=4 * error)
    first = stats.truncexpon(b=1.0, loc=30e-9, scale=20e-9)
    assert stats.kstest(tags.time, first.cdf).pvalue > UNLIKELY


def test_a_vanishing_dead_time_takes_nothing(seed):
    open_to_all = drawn(100, seed, signal=0.7, background=0.3)
    blinking = drawn(100, seed, signal=0.7, background=0.3, dead_time=DeadTime(1e-18))
    np.testing.assert_array_equal(blinking.counts().detections, open_to_all.counts().detections)
    order = np.lexsort((open_to_all.time, open_to_all.row * 20 + open_to_all.column))
    again = np.lexsort((blinking.time, blinking.row * 20 + blinking.column))
    np.testing.assert_array_equal(blinking.time[again], open_to_all.time[order])


def test_pixels_drawn_in_several_lots_are_alike(seed, monkeypatch):
    monkeypatch.setattr("recon.simulate.timing.TOGETHER", 5000)
    tags = drawn(100, seed, dead_time=DeadTime(0.75 * PERIOD))
    assert tags.shape == (20, 20)
    numbers = tags.counts().detections
    assert abs(numbers[:10].mean() - numbers[10:].mean()) < 5 * numbers.std() / np.sqrt(100)
    mean, error = per_period(tags)
    assert mean == pytest.approx(0.8, abs=4 * error + 1 / 100)


def test_the_seed_decides():
    one, same, other = (drawn(50, s, dead_time=DeadTime(30e-9, 40e-9)) for s in (4, 4, 5))
    np.testing.assert_array_equal(one.time, same.time)
    assert not np.array_equal(one.time, other.time)
