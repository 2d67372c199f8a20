"""The bins of depth and the scene's own law of depth."""

import numpy as np
import pytest
from scipy import constants

from recon.acquisition import GaussianPulse, TimeTags
from recon.errors import InputError
from recon.imaging.depth_lattice import ANYWHERE, MOST, SPLIT, TOP, depth_lattice, tags_used, trust
from recon.likelihoods import DetectionTimes
from recon.simulate import time_tags

SEEDS = range(3)
PERIOD = 100e-9
PULSE = GaussianPulse(0.27e-9)
METRES = 0.5 * constants.c
CORE = METRES * 0.27e-9


def acquire(seed, scene, signal=1.0, background=1.0, **more):
    return time_tags(
        scene, np.ones(np.shape(scene)), 1000, PERIOD, PULSE, signal / 1000, background / 1000, seed=seed,
        **more,
    )  # fmt: skip


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("period", [3e-9, 100e-9, 5e-6])
def test_every_level_is_a_law_and_the_sum_of_the_finer_one(seed, period):
    rng = np.random.default_rng(seed)
    scene = rng.uniform(0.0, METRES * period, (12, 14))
    tags = time_tags(scene, np.ones(scene.shape), 1000, period, PULSE, 1e-3, 1e-3, seed=rng)
    lattice = depth_lattice(DetectionTimes(tags, 1.0))
    assert lattice.width * lattice.scene[0].size == pytest.approx(METRES * period, rel=1e-12)
    assert lattice.width <= 0.5 * CORE * (1.0 + 1e-9)
    assert lattice.levels == len(lattice.scene)
    for law in lattice.scene:
        assert law.min() > 0.0
        assert law.sum(dtype=float) == pytest.approx(1.0, abs=1e-5)
    assert lattice.scene[-1].size <= TOP
    for finer, coarser in zip(lattice.scene, lattice.scene[1:], strict=False):
        begins = np.arange(0, finer.size, SPLIT)
        np.testing.assert_allclose(coarser, np.add.reduceat(finer.astype(float), begins), rtol=1e-5)


@pytest.mark.parametrize("seed", SEEDS)
def test_the_background_is_taken_off(seed):
    """As many background tags as signal; a third of the signal at 4 m, the rest at 9 m."""
    scene = np.full((60, 60), 9.0)
    scene[:, ::3] = 4.0
    lattice = depth_lattice(DetectionTimes(acquire(seed, scene), 1.0))
    law = lattice.scene[0]
    middle = lattice.width * (np.arange(law.size) + 0.5)
    near, far = (law[np.abs(middle - z) < 12.0 * CORE].sum() for z in (4.0, 9.0))
    assert near == pytest.approx((1.0 - ANYWHERE) / 3.0, abs=0.05)
    assert far == pytest.approx((1.0 - ANYWHERE) * 2.0 / 3.0, abs=0.05)
    assert near + far < 1.0
    # with the background left in, the rest would hold half of all
    assert 1.0 - near - far < 0.15


def test_a_scene_at_the_edge_of_the_period_is_not_cut():
    scene = np.zeros((40, 40))
    lattice = depth_lattice(DetectionTimes(acquire(0, scene, signal=4.0, background=0.01), 1.0))
    law = lattice.scene[0]
    middle = lattice.width * (np.arange(law.size) + 0.5)
    assert law[middle < 12.0 * CORE].sum() == pytest.approx(0.5, abs=0.03)
    assert law[middle > METRES * PERIOD - 12.0 * CORE].sum() == pytest.approx(0.5, abs=0.03)


def test_a_hot_pixel_counts_no_more_than_a_bright_one():
    scene = np.full((30, 30), 4.0)
    hot = np.zeros(scene.shape)
    hot[7, 8] = 10.0
    likelihood = DetectionTimes(acquire(1, scene, hot=hot), 1.0)
    tags = tags_used(likelihood)
    assert tags[7, 8] > 9000
    weighted = trust(likelihood) * tags
    assert weighted[7, 8] == pytest.approx(MOST * tags.mean(), rel=1e-5)
    assert weighted.max() <= MOST * tags.mean() * (1.0 + 1e-5)
    np.testing.assert_array_equal(trust(likelihood)[tags <= MOST * tags.mean()], 1.0)


def test_a_hot_pixel_does_not_bend_the_law_of_the_scene():
    """A thousand tags at 9 m in one pixel of 900 with two each at 4 m weigh as ten pixels at most."""
    row, column = (np.repeat(index.ravel(), 2) for index in np.indices((30, 30)))
    time = np.full(row.size, 4.0 / METRES)
    row, column = np.append(row, np.full(1000, 3)), np.append(column, np.full(1000, 3))
    time = np.append(time, np.full(1000, 9.0 / METRES))
    tags = TimeTags(row, column, time, shape=(30, 30), trials=9, period=PERIOD, pulse=PULSE)
    lattice = depth_lattice(DetectionTimes(tags, 1.0))
    middle = lattice.width * (np.arange(lattice.scene[0].size) + 0.5)
    mean = time.size / 900.0
    share = MOST * mean / (1800.0 + MOST * mean)
    assert lattice.scene[0][np.abs(middle - 9.0) < 15.0 * CORE].sum() == pytest.approx(share, abs=0.01)


def test_tags_of_masked_pixels_and_pixels_without_signal_do_not_count():
    mask = np.ones((20, 20), bool)
    mask[:5] = False
    scene = np.where(mask, 4.0, 9.0)
    scene[5:10] = 12.0
    reflectivity = np.ones(scene.shape)
    reflectivity[5:10] = 0.0
    tags = acquire(2, scene, signal=5.0, background=0.01)
    tags = TimeTags(
        tags.row, tags.column, tags.time, shape=tags.shape, trials=1000, period=PERIOD, pulse=PULSE,
        gain=tags.gain, background=tags.background, mask=mask,
    )  # fmt: skip
    likelihood = DetectionTimes(tags, reflectivity)
    assert not tags_used(likelihood)[:10].any()
    lattice = depth_lattice(likelihood)
    middle = lattice.width * (np.arange(lattice.scene[0].size) + 0.5)
    assert lattice.scene[0][np.abs(middle - 4.0) < 12.0 * CORE].sum() > 0.95


def test_no_tags_say_nothing_of_the_scene():
    tags = TimeTags([], [], [], shape=(3, 4), trials=9, period=PERIOD, pulse=PULSE, background=0.1)
    for law in depth_lattice(DetectionTimes(tags, 1.0)).scene[:1]:
        np.testing.assert_allclose(law, 1.0 / law.size, rtol=1e-6)


def test_a_period_too_long_for_the_pulse_is_refused():
    tags = TimeTags([0], [0], [1e-3], shape=(1, 1), trials=9, period=1.0, pulse=PULSE)
    with pytest.raises(
        InputError, match=r"period is 3.7e\+09 times as long as the pulse; give at most 2097152"
    ):
        depth_lattice(DetectionTimes(tags, 1.0))
