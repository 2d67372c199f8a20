"""Pooled evidence against its formula written out, and on scenes with known truth."""

import numpy as np
import pytest
from scipy import constants, stats
from scipy.ndimage import gaussian_filter

from recon.acquisition import GaussianPulse, SampledPulse, TimeTags
from recon.errors import InputError
from recon.imaging.evidence import pooled_depth, suggested_window
from recon.likelihoods import DetectionTimes
from recon.simulate import time_tags

SEEDS = range(3)
PERIOD = 40e-9
RANGE = 0.5 * constants.c * PERIOD
PULSE = GaussianPulse(0.3e-9)
WIDTH = 0.5 * constants.c * 0.3e-9


def acquire(depth, seed, signal=0.5, background=0.5, reflectivity=1.0, **more):
    depth = np.asarray(depth, float)
    reflectivity = np.broadcast_to(reflectivity, depth.shape)
    settings = {"pulse": PULSE, **more}
    rates = {"gain": signal / 100, "background": background / 100}
    return time_tags(depth, reflectivity, 100, PERIOD, **rates, seed=seed, **settings)


def written_out(tags, reflectivity, rms, z):
    """Evidence of every pixel for every depth z; (rows, columns, depths)."""
    late = 0.5 * constants.c * tags.time[:, None] - z
    late -= RANGE * np.round(late / RANGE)
    noise = (tags.background / (tags.gain * reflectivity))[tags.row, tags.column, None] / RANGE
    cube = np.zeros((*tags.shape, z.size))
    np.add.at(cube, (tags.row, tags.column), np.log1p(stats.norm.pdf(late, scale=WIDTH) / noise))
    # scipy's filter has unit sum; ours has weight 1 at the centre.
    reach = int(np.ceil(3.0 * rms))
    blurred = gaussian_filter(cube, (rms, rms, 0), mode="constant", radius=(reach, reach, 0))
    offset = np.arange(-reach, reach + 1)
    blurred *= np.exp(-0.5 * offset**2 / rms**2).sum() ** 2
    # The scene: all tags, smoothed over five widths, less the background; a hundredth of it anywhere.
    density = stats.norm.pdf(late, scale=5.0 * WIDTH).sum(axis=0) / tags.time.size
    share = np.mean(noise * RANGE / (1.0 + noise * RANGE))
    signal = np.maximum(density - share / RANGE, 0.0)
    return blurred + np.log1p(99.0 * signal / signal.mean())


@pytest.mark.parametrize("seed", SEEDS)
def test_pooled_depth_has_the_largest_evidence(seed):
    rng = np.random.default_rng(seed)
    reflectivity = rng.uniform(0.2, 1.0, (20, 16))
    depth = np.where(np.arange(16) < 8, 2.0, 4.0) + np.zeros((20, 1))
    tags = acquire(depth, seed, reflectivity=reflectivity)
    z = np.linspace(0.0, RANGE, 2400, endpoint=False)
    evidence = written_out(tags, reflectivity, 1.5, z)
    got = pooled_depth(tags, reflectivity, 1.5)
    np.testing.assert_allclose(got.evidence, evidence.max(axis=2), rtol=0.05)
    assert np.mean(np.abs(got.image - z[evidence.argmax(axis=2)]) < 0.1 * WIDTH) > 0.95


@pytest.mark.parametrize("depth", [0.0, 0.003, 3.0, RANGE - 0.004])
def test_depth_is_found_round_the_period_and_within_a_bin(depth):
    tags = acquire(np.full((24, 24), depth), 4, signal=3.0)
    off = pooled_depth(tags, np.ones((24, 24)), 2.0).image - depth
    off -= RANGE * np.round(off / RANGE)
    tags_in_window = 3.0 * 4.0 * np.pi  # the square of the weights sums to pi rms^2, their sum to twice that
    assert np.sqrt(np.mean(off**2)) < 1.5 * WIDTH / np.sqrt(tags_in_window)
    assert np.abs(off.mean()) < 0.1 * WIDTH


def test_a_pulse_with_a_tail_is_found_at_its_time_zero():
    times = np.arange(-1.0, 6.0, 0.05) * 1e-9
    rise = np.exp(-0.5 * (times / 0.2e-9) ** 2)
    pulse = SampledPulse(times, np.where(times < 0.0, rise, np.exp(-times / 0.8e-9)))
    tags = acquire(np.full((24, 24), 2.5), 5, signal=3.0, pulse=pulse)
    off = pooled_depth(tags, np.ones((24, 24)), 2.0).image - 2.5
    assert np.abs(off.mean()) < 0.02
    assert np.abs(off).max() < 0.15


def test_pixels_far_from_any_tag_take_the_nearest():
    tags = TimeTags(
        [0, 0, 0, 9, 9], [0, 1, 1, 8, 9], np.array([8.0, 8.1, 7.9, 20.0, 20.1]) * 1e-9, shape=(10, 10),
        trials=10, period=PERIOD, pulse=PULSE, gain=0.1, background=0.01,
    )  # fmt: skip
    pooled = pooled_depth(tags, np.ones((10, 10)), 0.8)
    assert pooled.image[0, 0] == pytest.approx(0.5 * constants.c * 8e-9, abs=WIDTH)
    assert pooled.evidence[5, 4] == 0.0
    assert pooled.image[4, 2] == pytest.approx(pooled.image[0, 0], abs=WIDTH)
    assert pooled.image[6, 8] == pytest.approx(0.5 * constants.c * 20.05e-9, abs=WIDTH)


def test_no_signal_anywhere():
    tags = acquire(np.full((6, 6), 2.0), 1)
    pooled = pooled_depth(tags, np.zeros((6, 6)))
    assert np.all(pooled.evidence == 0.0)
    assert np.all((pooled.image >= 0.0) & (pooled.image <= RANGE))


def test_the_suggested_window_gathers_the_same_evidence():
    """2 pi rms^2 times the mean divergence of signal from background, by simulation, does not change."""
    gathered = []
    for signal, background in ((0.5, 0.5), (1.0, 1.0), (0.3, 1.0), (2.0, 30.0)):
        tags = acquire(np.full((60, 60), 2.0), 6, signal, background)
        ones = np.ones((60, 60))
        rms = suggested_window(DetectionTimes(tags, ones))
        late = 0.5 * constants.c * tags.time - 2.0
        ratio = stats.norm.pdf(late, scale=WIDTH) / (background / signal / RANGE)
        divergence = np.log1p(ratio).sum() / ones.size - signal
        gathered.append(2.0 * np.pi * rms**2 * divergence)
    assert np.ptp(gathered) < 0.15 * np.mean(gathered)


@pytest.mark.parametrize("window", [0.0, -1.0, np.nan])
def test_a_window_has_a_width(window):
    tags = acquire(np.full((4, 4), 2.0), 1)
    with pytest.raises(InputError, match="window is"):
        pooled_depth(tags, np.ones((4, 4)), window)


def test_a_hot_pixel_does_not_outshout_its_neighbours():
    tags = acquire(np.full((30, 30), 2.0), 7)
    rng = np.random.default_rng(7)
    extra = 10_000
    hot = TimeTags(
        np.append(tags.row, np.full(extra, 15)), np.append(tags.column, np.full(extra, 15)),
        np.append(tags.time, PERIOD * rng.random(extra)), shape=tags.shape, trials=tags.trials,
        period=PERIOD, pulse=PULSE, gain=tags.gain, background=tags.background,
    )  # fmt: skip
    reflectivity = np.ones((30, 30))
    reflectivity[15, 15] = extra / (tags.trials * tags.gain)  # what counting says
    assert np.abs(pooled_depth(hot, reflectivity).image - 2.0).max() < WIDTH


def test_a_period_beyond_all_measure_is_refused():
    tags = TimeTags([0], [0], [1e-9], shape=(1, 1), trials=1, period=1e-4, pulse=GaussianPulse(1e-12))
    with pytest.raises(InputError, match=r"period is .* times as long as the pulse"):
        pooled_depth(tags, np.ones((1, 1)))
