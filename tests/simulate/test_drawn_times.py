"""Drawn detection times against the pulse, the uniform background and the laws of counting."""

import numpy as np
import pytest
from scipy import constants, stats
from scipy.interpolate import InterpolatedUnivariateSpline

from recon.acquisition import GaussianPulse, SampledPulse
from recon.simulate import time_tags

PERIOD = 100e-9
PULSE = GaussianPulse(0.27e-9)
TAILED = SampledPulse(np.array([-0.2, 0.0, 0.1, 0.7, 3.0]) * 1e-9, np.array([1.0, 6.0, 9.0, 2.0, 0.5]))
UNLIKELY = 1e-3


def flat(value: float, shape: tuple[int, int] = (40, 50)) -> np.ndarray:
    return np.full(shape, value)


def test_numbers_of_tags_are_poisson(seed, chance):
    drawn = time_tags(flat(4.0), flat(0.6), 200, PERIOD, PULSE, gain=0.005, background=0.002, seed=seed)
    numbers = np.bincount(drawn.row * 50 + drawn.column, minlength=2000)
    assert chance(numbers, stats.poisson.pmf(np.arange(20), 200 * (0.005 * 0.6 + 0.002))) > UNLIKELY


def test_signal_times_are_gaussian(seed):
    drawn = time_tags(flat(4.0), flat(1.0), 10, PERIOD, PULSE, seed=seed)
    scaled = (drawn.time - 8.0 / constants.c) / PULSE.rms
    assert stats.kstest(scaled, "norm").pvalue > UNLIKELY


def test_signal_times_follow_a_sampled_pulse(seed):
    drawn = time_tags(flat(4.0), flat(1.0), 10, PERIOD, TAILED, seed=seed)
    area = InterpolatedUnivariateSpline(TAILED.times * 1e9, TAILED.values, k=1).antiderivative()
    delay = (drawn.time - 8.0 / constants.c) * 1e9
    assert delay.min() > -0.2
    assert delay.max() < 3.0
    assert stats.kstest(delay, lambda t: area(t) / area(3.0)).pvalue > UNLIKELY


def test_background_times_are_uniform(seed):
    drawn = time_tags(flat(4.0), flat(0.0), 10, PERIOD, PULSE, background=1.0, seed=seed)
    assert stats.kstest(drawn.time / PERIOD, "uniform").pvalue > UNLIKELY


def test_share_of_signal(seed):
    drawn = time_tags(flat(4.0), flat(0.5), 100, PERIOD, PULSE, gain=0.02, background=0.03, seed=seed)
    near = np.abs(drawn.time - 8.0 / constants.c) < 6 * PULSE.rms
    share = (0.01 + 0.03 * 12 * PULSE.rms / PERIOD) / 0.04
    assert near.mean() == pytest.approx(share, abs=4 * np.sqrt(share * (1 - share) / near.size))


def test_signal_and_background_arrive_in_any_order(seed):
    drawn = time_tags(flat(4.0), flat(1.0), 4, PERIOD, PULSE, background=1.0, seed=seed)
    pixel = drawn.row * 50 + drawn.column
    signal = np.abs(drawn.time - 8.0 / constants.c) < 6 * PULSE.rms
    firsts = signal[np.unique(pixel, return_index=True)[1]]
    assert firsts.mean() == pytest.approx(signal.mean(), abs=4 * 0.5 / np.sqrt(firsts.size))


def test_spread_of_range_from_one_photon(seed):
    """c sigma / 2 = 14.9896 mm at 100 ps (Bar-David 1969)."""
    drawn = time_tags(flat(4.0), flat(1.0), 10, PERIOD, GaussianPulse(100e-12), seed=seed)
    spread = np.std(constants.c * drawn.time / 2)
    assert spread == pytest.approx(14.9896e-3, rel=4 / np.sqrt(2 * drawn.time.size))


def test_where_the_echo_falls(seed):
    depth = np.array([[1.0, 4.0, 4.0], [8.0, 0.0, 20.0]])
    offset = np.array([[0.0, 0.0, 3e-9], [0.0, -2e-9, 0.0]])
    shifts = {"time_zero": 1e-9, "offset": offset, "refractive_index": 1.33}
    drawn = time_tags(depth, flat(1.0, (2, 3)), 20_000, PERIOD, PULSE, **shifts, seed=seed)
    expected = (1e-9 + offset + 2 * 1.33 * depth / constants.c) % PERIOD
    for place in np.ndindex(2, 3):
        here = drawn.time[(drawn.row == place[0]) & (drawn.column == place[1])]
        from_echo = (here - expected[place] + PERIOD / 2) % PERIOD - PERIOD / 2
        assert from_echo.mean() == pytest.approx(0.0, abs=4 * PULSE.rms / np.sqrt(here.size))
        assert np.std(from_echo) == pytest.approx(PULSE.rms, rel=4 / np.sqrt(2 * here.size))
    assert drawn.time.min() >= 0
    assert drawn.time.max() < PERIOD


def test_a_time_just_below_zero_stays_within_the_period(seed):
    """Modulo 100 s, -1e-16 s rounds to 100 s itself."""
    drawn = time_tags(flat(0.0), flat(1.0), 1, 100.0, GaussianPulse(1e-16), seed=seed)
    assert drawn.time.size > 1000
    assert np.all((drawn.time < 100.0) & ((drawn.time < 1e-14) | (drawn.time > 99.9)))


def test_the_unambiguous_range(seed):
    """c T / 2 at 100 ns is 14.98962 m (exact SI value of c): an echo from there looks like one from 0."""
    far = time_tags(flat(14.98962), flat(1.0), 5, PERIOD, PULSE, seed=seed)
    near = time_tags(flat(0.0), flat(1.0), 5, PERIOD, PULSE, seed=seed)
    from_zero = [(tags.time + PERIOD / 2) % PERIOD - PERIOD / 2 for tags in (far, near)]
    np.testing.assert_allclose(from_zero[0], from_zero[1], atol=1e-13)


@pytest.mark.parametrize("pulse", [PULSE, TAILED])
def test_a_coarse_clock_gives_the_centre_of_the_interval(pulse, seed):
    exact = time_tags(flat(4.0), flat(1.0), 5, PERIOD, pulse, background=0.5, seed=seed)
    coarse = time_tags(flat(4.0), flat(1.0), 5, PERIOD, pulse, background=0.5, interval=0.5e-9, seed=seed)
    assert coarse.interval == 0.5e-9
    assert np.all(np.abs(coarse.time - exact.time) <= 0.2500001e-9)
    np.testing.assert_allclose(coarse.time / 0.5e-9 % 1, 0.5, atol=1e-9)


def test_every_map_counts_where_it_stands(seed):
    repeats = 3000
    reflectivity, trials, gain, background = (
        np.repeat([row], repeats, axis=0)
        for row in ([0.0, 0.5, 0.5, 0.5, 0.5], [9, 9, 30, 9, 9], [1, 1, 1, 2, 1], [0, 0, 0, 0, 0.7])
    )
    drawn = time_tags(
        flat(2.0, reflectivity.shape), reflectivity, trials, PERIOD, PULSE, gain, background, seed=seed
    )
    seen = np.bincount(drawn.column, minlength=5) / repeats
    expected = np.array([0.0, 4.5, 15.0, 9.0, 10.8])
    assert np.all(np.abs(seen - expected) <= 4 * np.sqrt(expected / repeats))


def test_the_seed_decides():
    scene = (flat(3.0), flat(1.0), 2, PERIOD, PULSE)
    first, again, other = (time_tags(*scene, background=0.5, seed=s) for s in (5, 5, 6))
    for name in ("row", "column", "time"):
        np.testing.assert_array_equal(getattr(first, name), getattr(again, name))
    assert not np.array_equal(first.time, other.time)
    rng = np.random.default_rng(5)
    np.testing.assert_array_equal(time_tags(*scene, background=0.5, seed=rng).time, first.time)
