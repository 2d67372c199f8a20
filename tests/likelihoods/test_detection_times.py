"""The likelihood of depth against the density of the tags, brute force, closed forms and simulation."""

import numpy as np
import pytest
from scipy import constants, stats
from scipy.special import ndtr

from recon.acquisition import GaussianPulse, SampledPulse, TimeTags
from recon.errors import InputError
from recon.likelihoods import DetectionTimes
from recon.simulate import time_tags
from recon.testing import check_likelihood

SEEDS = range(3)
PERIOD = 40e-9
SHAPE = (6, 7)
GAUSSIAN = GaussianPulse(0.3e-9)
TIMES = np.arange(-1.5, 6.0, 0.05) * 1e-9
TAILED = SampledPulse(
    TIMES, np.where(TIMES < 0.0, np.exp(-0.5 * (TIMES / 0.2e-9) ** 2), np.exp(-TIMES / 0.8e-9))
)
SETTINGS = {"time_zero": 3e-9, "refractive_index": 1.3}
METRES = 0.5 * constants.c / 1.3  # per second
WIDTH = METRES * 0.3e-9


def acquire(seed, pulse=GAUSSIAN, signal=2.0, background=1.0, shape=SHAPE, clutter=0.0, depth=None, **more):
    """Tags of random depths and reflectivities, some of them moved to any time; depths, reflectivities."""
    rng = np.random.default_rng(seed)
    z = rng.uniform(0.3, 4.0, shape) if depth is None else np.full(shape, depth)
    reflectivity = rng.uniform(0.3, 1.0, shape)
    settings = {**SETTINGS, "offset": rng.uniform(0.0, 1e-9, shape), **more}
    tags = time_tags(
        z, reflectivity, 100, PERIOD, pulse, signal / 100, background / 100, seed=rng, **settings
    )
    if clutter:
        time = np.where(rng.random(tags.time.size) < clutter, PERIOD * rng.random(tags.time.size), tags.time)
        tags = TimeTags(
            tags.row, tags.column, time, shape=shape, trials=100, period=PERIOD, pulse=pulse, gain=tags.gain,
            background=tags.background, **settings,
        )  # fmt: skip
    return tags, reflectivity, z


def log_density(tags, reflectivity, z):
    """Sum over tags of the log of their density (per s), written out; exact tags or whole intervals."""
    delay = tags.time_zero + tags.offset + 2.0 * tags.refractive_index * z / constants.c
    late = tags.time - delay[tags.row, tags.column]
    density = np.zeros(late.size)
    for turn in range(-3, 4):
        t = late + turn * tags.period
        if tags.interval is None:
            density += tags.pulse.density(t)
        else:
            half = tags.interval / 2
            density += (ndtr((t + half) / tags.pulse.rms) - ndtr((t - half) / tags.pulse.rms)) / (2 * half)
    signal = (tags.gain * reflectivity)[tags.row, tags.column]
    return np.sum(np.log((signal * density + tags.background / tags.period) / (signal + tags.background)))


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("interval", [None, 1e-9])
def test_value_and_constant_give_the_log_density(seed, interval):
    tags, reflectivity, z = acquire(seed, interval=interval)
    likelihood = DetectionTimes(tags, reflectivity)
    for image in (z, np.random.default_rng(seed).uniform(-9.0, 9.0, SHAPE)):
        total = likelihood.value(image) + likelihood.constant
        assert total == pytest.approx(-log_density(tags, reflectivity, image), rel=1e-9)


def test_a_sampled_pulse_is_followed_closely():
    tags, reflectivity, z = acquire(0, TAILED, signal=40.0)
    likelihood = DetectionTimes(tags, reflectivity)
    total = likelihood.value(z) + likelihood.constant
    assert total == pytest.approx(-log_density(tags, reflectivity, z), abs=1e-3 * tags.time.size)


@pytest.mark.parametrize("pulse", [GAUSSIAN, TAILED])
@pytest.mark.parametrize(
    ("signal", "background", "clutter"), [(4, 1e-4, 0.5), (2, 2, 0), (0.5, 20, 0), (30, 1, 0.2)]
)
def test_the_estimate_is_the_best_of_all_depths(pulse, signal, background, clutter):
    for seed in SEEDS:
        tags, reflectivity, _ = acquire(seed, pulse, signal, background, clutter=clutter)
        likelihood = DetectionTimes(tags, reflectivity)
        best = likelihood.estimate()
        assert likelihood.value(best) == pytest.approx(0.0, abs=1e-6 * tags.time.size)
        assert np.all((best >= 0.0) & (best <= METRES * PERIOD))
        for z in np.linspace(0.0, METRES * PERIOD, 3001):
            assert likelihood.value_map(np.full(SHAPE, z)).min() >= -1e-9


def test_a_pixel_without_tags_takes_the_mean():
    tags = TimeTags([0, 0], [0, 2], [1e-9, 2e-9], shape=(1, 4), trials=9, period=PERIOD, pulse=GAUSSIAN)
    likelihood = DetectionTimes(tags, np.array([[1.0, 1.0, 1.0, 0.0]]))
    first, second = 0.5 * constants.c * np.array([1e-9, 2e-9])
    expected = [first, 0.5 * (first + second), second, 0.5 * (first + second)]
    np.testing.assert_allclose(likelihood.estimate()[0], expected, rtol=1e-6)
    np.testing.assert_array_equal(likelihood.has_data, [[True, False, True, False]])


@pytest.mark.parametrize("interval", [None, 1e-9])
def test_depths_a_period_apart_fit_alike(interval):
    tags, reflectivity, z = acquire(1, interval=interval)
    likelihood = DetectionTimes(tags, reflectivity)
    np.testing.assert_allclose(
        likelihood.value_map(z + likelihood.pulse.period), likelihood.value_map(z), rtol=1e-8, atol=1e-8
    )


def test_a_return_at_the_edge_of_the_period():
    """The echo from 10 mm beyond the unambiguous range is on both ends of the record; it looks like 10 mm."""
    beyond = METRES * PERIOD + 0.01
    tags, reflectivity, _ = acquire(2, signal=200.0, depth=beyond, time_zero=0.0, offset=0.0)
    assert np.ptp(tags.time) > 0.9 * PERIOD
    off = DetectionTimes(tags, reflectivity).estimate() - 0.01
    off -= METRES * PERIOD * np.round(off / (METRES * PERIOD))
    assert np.abs(off).max() < 5.0 * WIDTH / np.sqrt(60.0)


def test_the_parabola_of_a_gaussian_pulse_is_weighted_least_squares():
    tags, reflectivity, z = acquire(3, background=0.5)
    likelihood = DetectionTimes(tags, reflectivity)
    delay = tags.time_zero + tags.offset + z / METRES
    late = tags.time - delay[tags.row, tags.column]
    late -= PERIOD * np.round(late / PERIOD)
    signal = (tags.gain * reflectivity)[tags.row, tags.column] * tags.pulse.density(late)
    weight = signal / (signal + tags.background / PERIOD)
    pixel = tags.row * SHAPE[1] + tags.column
    total = np.bincount(pixel, weight, z.size).reshape(SHAPE)
    moved = np.bincount(pixel, weight * METRES * late, z.size).reshape(SHAPE)
    above = likelihood.majorise(z)
    np.testing.assert_allclose(above.curvature(z), total / WIDTH**2, rtol=1e-5, atol=1e-20)
    np.testing.assert_allclose(likelihood.signal_tags(z), total, rtol=1e-8, atol=1e-20)
    near = total > 0.1
    np.testing.assert_allclose(above.estimate()[near], (z + moved / np.maximum(total, 1e-9))[near], rtol=1e-5)


def test_the_parabola_of_a_coarse_tag_aims_at_the_mean_of_its_interval():
    """Given its interval, the hidden exact time is a truncated Gaussian."""
    tags = TimeTags([0], [0], [10e-9], shape=(1, 1), trials=9, period=PERIOD, pulse=GAUSSIAN, interval=2e-9)
    z = np.array([[0.5 * constants.c * 8.3e-9]])
    ends = (np.array([9e-9, 11e-9]) - 8.3e-9) / 0.3e-9
    expected = 0.5 * constants.c * stats.truncnorm.mean(*ends, loc=8.3e-9, scale=0.3e-9)
    above = DetectionTimes(tags, 1.0, background=1e-5).majorise(z)
    assert above.estimate()[0, 0] == pytest.approx(expected, rel=1e-6)


@pytest.mark.parametrize("pulse", [GAUSSIAN, TAILED])
@pytest.mark.parametrize("interval", [None, 1.6e-9])
def test_majorising_and_minimising_never_rises_and_ends_stationary(pulse, interval):
    for seed in SEEDS:
        tags, reflectivity, truth = acquire(seed, pulse, interval=interval)
        likelihood = DetectionTimes(tags, reflectivity)
        z = truth + 0.05 * np.random.default_rng(seed).standard_normal(SHAPE)
        before = likelihood.value_map(z)
        for _ in range(300):
            z = likelihood.majorise(z).estimate().astype(np.float64)
            after = likelihood.value_map(z)
            assert np.all(after <= before + 1e-5 * (1.0 + before))
            before = after
        settled = np.abs(likelihood.gradient(z)) < 0.02 * np.sqrt(likelihood.fisher_information(z) + 1e-9)
        assert settled[likelihood.signal_tags(z) > 0.5].mean() > 0.95


@pytest.mark.parametrize(
    ("background", "interval", "depth"),
    [(1e-3, None, 2.0), (20.0, None, 2.0), (1e-3, 0.4e-9, 2.0), (20.0, 0.4e-9, 2.02), (20.0, 1e-9, 2.05)],
)
def test_error_at_twenty_signal_detections_is_the_cramer_rao_bound(background, interval, depth):
    """A flat target, no prior: within 10 % of the bound, at any phase of a coarse clock."""
    tags, reflectivity, _ = acquire(
        5, signal=60.0, background=background, shape=(50, 60), depth=depth, interval=interval
    )
    likelihood = DetectionTimes(tags, reflectivity)
    error = likelihood.estimate().astype(np.float64) - depth
    normalised = error * np.sqrt(likelihood.fisher_information(np.full((50, 60), depth)))
    assert np.sqrt(np.mean(normalised**2)) == pytest.approx(1.0, abs=0.1)


def test_draws_keep_the_number_of_tags_and_the_share_of_signal():
    tags, reflectivity, z = acquire(6, signal=60.0, background=40.0)
    likelihood = DetectionTimes(tags, reflectivity)
    drawn = likelihood.draw(z, 1)
    np.testing.assert_array_equal(drawn.start, likelihood.start)
    signal = tags.gain * reflectivity / (tags.gain * reflectivity + tags.background)
    expected = np.diff(tags.start).reshape(SHAPE) * signal
    off = (drawn.signal_tags(z) - expected) / np.sqrt(expected * (1.0 - signal) + 1.0)
    assert np.abs(off).max() < 4.5
    assert np.mean(off) == pytest.approx(0.0, abs=4.0 / np.sqrt(off.size))


def test_a_coarse_clock_keeps_its_places_in_a_draw():
    tags, reflectivity, z = acquire(7, interval=0.8e-9, offset=0.0, time_zero=0.0)
    drawn = DetectionTimes(tags, reflectivity).draw(z, 2)
    places = drawn.y / (METRES * 0.8e-9)
    np.testing.assert_allclose(places % 1.0, 0.5, atol=1e-6)


def test_a_pulse_as_long_as_the_period_keeps_the_contract():
    tags, reflectivity, _ = acquire(8, GaussianPulse(6e-9))
    check_likelihood(DetectionTimes(tags, reflectivity))


def test_the_background_given_replaces_that_of_the_tags():
    tags, reflectivity, z = acquire(9)
    other = acquire(9, background=2.0)[0]
    given = DetectionTimes(tags, reflectivity, background=other.background)
    moved = TimeTags(
        tags.row, tags.column, tags.time, shape=SHAPE, trials=100, period=PERIOD, pulse=GAUSSIAN,
        gain=tags.gain, background=other.background, offset=tags.offset, **SETTINGS,
    )  # fmt: skip
    np.testing.assert_array_equal(given.value_map(z), DetectionTimes(moved, reflectivity).value_map(z))


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (("tags", 1.0), "tags is a str; give a recon.TimeTags"),
        ((None, np.ones((2, 2))), r"reflectivity has shape \(2, 2\); give one number or a map of shape"),
        ((None, -1.0), "reflectivity is -1.0; give a finite number, 0 or more"),
        ((None, 1.0, np.nan), "background is nan; give a finite number, 0 or more"),
    ],
)
def test_bad_input(arguments, message):
    tags = acquire(0)[0]
    with pytest.raises(InputError, match=message):
        DetectionTimes(*(tags if part is None else part for part in arguments))
