"""Drawn gates, delays and faults of a ranging instrument."""

import numpy as np
import pytest
from scipy import constants, stats

from recon.acquisition import GaussianPulse
from recon.simulate import time_tags

PERIOD = 100e-9
PULSE = GaussianPulse(0.3e-9)
ECHO = 40e-9
UNLIKELY = 1e-3


def drawn(seed, signal=1.0, background=0.0, trials=20, shape=(20, 30), **settings):
    depth = np.full(shape, ECHO * constants.c / 2)
    return time_tags(
        depth, np.full(shape, signal), trials, PERIOD, PULSE, 1.0, background, seed=seed, **settings
    )


def test_a_gate_thins_the_background(seed, chance):
    tags = drawn(seed, 0.0, 1.0, gate=(10e-9, 35e-9))
    assert chance(tags.counts().detections, stats.poisson.pmf(np.arange(40), 5.0)) > UNLIKELY
    assert stats.kstest((tags.time - 10e-9) / 25e-9, "uniform").pvalue > UNLIKELY
    assert tags.background == 1.0


def test_a_gate_on_a_coarse_clock(seed):
    tags = drawn(seed, 0.0, 1.0, gate=(10e-9, 12e-9), interval=0.5e-9)
    numbers = np.bincount(np.rint(tags.time / 0.5e-9 - 0.5).astype(int), minlength=200)
    assert np.flatnonzero(numbers).tolist() == [20, 21, 22, 23]
    assert stats.chisquare(numbers[20:24]).pvalue > UNLIKELY


def test_a_dither_is_recorded_and_makes_a_coarse_clock_fine(seed):
    """Delays over whole intervals: time - dither has a uniform error of one interval, whatever the time.

    Without them a pulse narrower than the interval is read at one or two centres.
    """
    interval = 4e-9
    tags = drawn(seed, interval=interval, dither=2 * interval)
    assert tags.dither.min() >= 0
    assert tags.dither.max() < 2 * interval
    assert stats.kstest(tags.dither / (2 * interval), "uniform").pvalue > UNLIKELY
    np.testing.assert_allclose(tags.time / interval % 1, 0.5, atol=1e-9)
    error = tags.time - tags.dither - ECHO
    assert np.abs(error).max() <= interval / 2 + 6 * PULSE.rms
    spread = np.sqrt(interval**2 / 12 + PULSE.rms**2)
    assert error.mean() == pytest.approx(0.0, abs=4 * spread / np.sqrt(error.size))
    assert error.std() == pytest.approx(spread, rel=0.02)


def test_a_delay_past_the_period_wraps(seed):
    tags = drawn(seed, 0.0, 2.0, interval=1e-9, dither=30e-9)
    assert tags.time.max() < PERIOD
    assert tags.time.min() >= 0
    assert np.any(tags.time < tags.dither - 1e-9)
    assert stats.chisquare(np.bincount((tags.time / 1e-9).astype(int), minlength=100)).pvalue > UNLIKELY


def test_a_gate_holds_for_the_time_without_the_dither(seed):
    tags = drawn(seed, 0.0, 2.0, interval=1e-9, dither=30e-9, gate=(90.3e-9, 97.1e-9))
    true = (tags.time - tags.dither) % PERIOD
    assert true.min() >= 89.8e-9
    assert true.max() <= 97.6e-9
    assert np.any(tags.time < 30e-9)


def test_jitter_widens_what_the_pulse_does_not_tell(seed):
    tags = drawn(seed, jitter=0.4e-9)
    assert tags.pulse is PULSE
    assert stats.kstest((tags.time - ECHO) / 0.5e-9, "norm").pvalue > UNLIKELY  # 0.3 and 0.4 in square
    flat = drawn(seed, 0.0, 1.0, jitter=20e-9)
    assert stats.kstest(flat.time / PERIOD, "uniform").pvalue > UNLIKELY


def test_hot_pixels_that_nobody_declared(seed):
    hot = np.zeros((20, 30))
    hot[:, :10] = 0.5
    tags = drawn(seed, 0.1, 0.2, trials=100, hot=hot)
    numbers = tags.counts().detections
    assert numbers[:, :10].mean() == pytest.approx(80, abs=4 * np.sqrt(80 / 200))
    assert numbers[:, 10:].mean() == pytest.approx(30, abs=4 * np.sqrt(30 / 400))
    assert tags.background == 0.2
    glow = drawn(seed, 0.0, 0.0, hot=hot)
    assert np.all(glow.column < 10)
    assert stats.kstest(glow.time / PERIOD, "uniform").pvalue > UNLIKELY


def test_dead_pixels_record_nothing_and_are_not_masked(seed):
    dead = np.zeros((20, 30), bool)
    dead[3:9, 5] = True
    tags = drawn(seed, 1.0, 0.5, dead=dead, hot=0.1)
    assert tags.mask is None
    np.testing.assert_array_equal(tags.counts().detections == 0, dead)


@pytest.mark.parametrize("settings", [{}, {"interval": 1e-9, "dither": 1e-9}, {"gate": (0.0, 1e-9)}])
def test_nothing_at_all(settings):
    tags = drawn(3, 0.0, 0.0, **settings)
    assert tags.time.size == tags.row.size == tags.column.size == 0
    assert tags.counts().detections.sum() == 0
    assert (tags.dither is None) == ("dither" not in settings)
