"""Reflectivity from the tags near the return: without bias, and less noisy than all tags together."""

import numpy as np
import pytest
from scipy import constants

from recon.acquisition import DeadTime, GaussianPulse, SampledPulse
from recon.errors import InputError
from recon.imaging.reflectivity import (
    gate_reach,
    gated_likelihood,
    gated_reflectivity,
    live_counts,
    reflectivity,
)
from recon.likelihoods import DetectionTimes
from recon.simulate import time_tags

SEEDS = range(3)
PERIOD = 100e-9
METRES = 0.5 * constants.c
RANGE = METRES * PERIOD
GAUSSIAN = GaussianPulse(0.27e-9)
TIMES = np.arange(-1.5, 6.0, 0.05) * 1e-9
TAILED = SampledPulse(
    TIMES, np.where(TIMES < 0.0, np.exp(-0.5 * (TIMES / 0.2e-9) ** 2), np.exp(-TIMES / 0.8e-9))
)
SHAPE = (30, 40)


def raw(likelihood):
    """Each pixel's own estimate, without the clip at zero, which would bias it."""
    slope, offset = np.asarray(likelihood._slope, float), np.asarray(likelihood._offset, float)
    return (likelihood._count - slope * offset) / slope


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("pulse", [GAUSSIAN, TAILED])
@pytest.mark.parametrize("more", [{}, {"gate": (20e-9, 47e-9)}, {"interval": 0.4e-9}])
def test_no_bias_at_the_true_depth(seed, pulse, more):
    """Depths to the very ends of the gate, which then cuts the pulse. The law of the counts is held, too."""
    rng = np.random.default_rng(seed)
    z = rng.uniform(METRES * 19.9e-9, METRES * 47.1e-9, SHAPE)
    if more.get("interval"):  # a gate's ends among the clock's ticks would say more than the law knows of
        z = 0.5 * np.round(z / 0.5)
    tags = time_tags(z, np.full(SHAPE, 0.7), 100, PERIOD, pulse, 0.2, 0.1, seed=rng, **more)
    likelihood = gated_likelihood(tags, z)
    seen = likelihood.has_data
    assert seen.mean() > 0.95
    mean = np.asarray(likelihood._slope, float) * (0.7 + np.asarray(likelihood._offset, float))
    count = likelihood._count.astype(float)
    assert count[seen].sum() == pytest.approx(mean[seen].sum(), rel=4.0 / np.sqrt(mean[seen].sum()) + 2e-3)
    strong = mean > 3.0
    assert np.mean((count - mean)[strong] ** 2 / mean[strong]) == pytest.approx(1.0, abs=0.2)


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("pulse", [GAUSSIAN, TAILED])
def test_no_bias_under_pile_up(seed, pulse):
    """Two signal and one background photon a period, and blind for three quarters of it after each."""
    rng = np.random.default_rng(seed)
    z = rng.uniform(0.0, RANGE, SHAPE)
    tags = time_tags(z, np.ones(SHAPE), 200, PERIOD, pulse, 2.0, 1.0, dead_time=DeadTime(75e-9), seed=rng)
    assert raw(gated_likelihood(tags, z)).mean() == pytest.approx(1.0, abs=0.02)
    counts = tags.counts()
    naive = (counts.detections / 200.0 - 1.0) / 2.0
    assert abs(naive.mean() - 1.0) > 0.3


@pytest.mark.parametrize("seed", SEEDS)
def test_no_bias_where_dead_time_ends_with_the_period(seed):
    rng = np.random.default_rng(seed)
    z = rng.uniform(0.05 * RANGE, 0.9 * RANGE, SHAPE)
    dead_time = DeadTime(300e-9, reset_every_period=True)
    tags = time_tags(z, np.ones(SHAPE), 400, PERIOD, GAUSSIAN, 1.0, 1.0, dead_time=dead_time, seed=rng)
    assert raw(gated_likelihood(tags, z)).mean() == pytest.approx(1.0, abs=0.02)


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("flux", [0.05, 0.3])
def test_live_counts_are_the_rate_to_begin_with(seed, flux):
    """With as much background as signal; where the light comes in the period is left out, so to 10 %."""
    rng = np.random.default_rng(seed)
    z = rng.uniform(0.0, RANGE, SHAPE)
    dead_time = DeadTime(75e-9)
    tags = time_tags(z, np.ones(SHAPE), 400, PERIOD, GAUSSIAN, flux, flux, dead_time=dead_time, seed=rng)
    counts = live_counts(tags)
    rate = counts.detections / counts.trials
    assert rate.mean() == pytest.approx(2.0 * flux, rel=0.1)
    assert live_counts(time_tags(z, np.ones(SHAPE), 9, PERIOD, GAUSSIAN, seed=1)).trials == 9.0


@pytest.mark.parametrize("seed", SEEDS)
def test_less_noise_than_counts_where_background_is_strong(seed):
    """Signal-to-background 0.1: nearly all of the background falls outside the gate."""
    row, column = np.mgrid[:32, :40]
    z = 4.0 + 0.01 * column
    truth = 0.5 + 0.5 * (column < 20) + 0.3 * ((row // 8) % 2)
    tags = time_tags(z, truth, 1000, PERIOD, GAUSSIAN, 2e-3, 20e-3, seed=seed)
    errors = []
    for image in (gated_reflectivity(tags, z), reflectivity(tags.counts())):
        assert image.unit == "1"
        errors.append(np.mean((image.image - truth) ** 2))
    assert errors[0] < 0.65 * errors[1]
    own = raw(gated_likelihood(tags, z))
    assert own.mean() == pytest.approx(truth.mean(), rel=0.05)
    assert np.mean((own - truth) ** 2) < 0.3 * np.mean((tags.counts().detections / 2.0 - 10.0 - truth) ** 2)


@pytest.mark.parametrize("pulse", [GAUSSIAN, TAILED])
def test_the_gate_holds_nearly_all_of_the_pulse(pulse):
    tags = time_tags(np.full((2, 2), 4.0), np.ones((2, 2)), 9, PERIOD, pulse, seed=0)
    table = DetectionTimes(tags, 1.0).pulse
    half = gate_reach(table)
    assert pulse.cumulative(half / METRES) - pulse.cumulative(-half / METRES) >= 0.98
    assert half < METRES * 5e-9


def test_the_gate_is_at_most_the_period():
    tags = time_tags(np.full((2, 2), 4.0), np.ones((2, 2)), 9, PERIOD, GaussianPulse(40e-9), seed=0)
    assert gate_reach(DetectionTimes(tags, 1.0).pulse) == pytest.approx(0.5 * RANGE)


def test_half_a_period_is_all_there_is():
    """Then the law is that of the counts."""
    tags = time_tags(np.full(SHAPE, 4.0), np.ones(SHAPE), 100, PERIOD, GAUSSIAN, 0.02, 0.01, seed=3)
    likelihood = gated_likelihood(tags, np.full(SHAPE, 4.0), reach=0.5 * RANGE)
    np.testing.assert_array_equal(likelihood._count, tags.counts().detections)
    np.testing.assert_allclose(raw(likelihood), tags.counts().detections / 2.0 - 0.5, atol=1e-5)


def test_masked_pixels_and_those_that_saw_nothing_are_filled():
    mask = np.ones(SHAPE, bool)
    mask[3:6] = False
    z = np.full(SHAPE, 4.0)
    z[:, :5] = 9.0  # outside the gate
    tags = time_tags(z, np.ones(SHAPE), 100, PERIOD, GAUSSIAN, 0.05, 0.01, gate=(10e-9, 50e-9), seed=4)
    tags = type(tags)(
        tags.row, tags.column, tags.time, shape=SHAPE, trials=100, period=PERIOD, pulse=GAUSSIAN, gain=0.05,
        background=0.01, mask=mask, gate=tags.gate,
    )  # fmt: skip
    image = gated_reflectivity(tags, z)
    expected = ~mask
    expected[:, :5] = True
    np.testing.assert_array_equal(image.filled, expected)
    assert np.isfinite(image.image).all()
    np.testing.assert_allclose(image.image[3:6, 8:].mean(), 1.0, atol=0.2)


@pytest.mark.parametrize("reach", [0.0, -1.0, np.nan])
def test_bad_reach(reach):
    tags = time_tags(np.full((2, 2), 4.0), np.ones((2, 2)), 9, PERIOD, GAUSSIAN, seed=0)
    with pytest.raises(InputError, match="reach is"):
        gated_likelihood(tags, np.full((2, 2), 4.0), reach)
