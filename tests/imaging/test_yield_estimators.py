"""Yield estimators against published values, closed forms, information bounds and simulation."""

import math

import numpy as np
import pytest
from scipy.optimize import brentq

from recon.acquisition.frames import Frames
from recon.acquisition.mark_law import MarkLaw
from recon.errors import InputError
from recon.imaging.yield_estimators import (
    conventional_yield,
    cost_of_frames,
    one_frame_note,
    primaries_seen,
    primaries_seen_yield,
    time_resolved_yield,
    total_count_yield,
)
from recon.simulate import frames as simulate_frames

COUNTING = (conventional_yield, primaries_seen_yield, time_resolved_yield, total_count_yield)


def test_primaries_seen_published():
    # continuous time, Y = 45, M = 13, lam = 15 (recomputed)
    assert math.isclose(float(primaries_seen(45.0, 13.0, 15.0)[0]), 3.32337, abs_tol=5e-6)


@pytest.mark.parametrize("seed", range(3))
def test_primaries_seen_is_a_root(seed):
    rng = np.random.default_rng(seed)
    for _ in range(20):
        lam = 10.0 ** rng.uniform(-1.0, 3.0)
        hit = rng.integers(1, 2 + int(lam))
        electrons = hit + rng.poisson(hit * rng.uniform(0.1, 6.0))
        got = float(primaries_seen(electrons, hit, lam)[0])

        def excess(eta, hit=hit, lam=lam, electrons=electrons):
            return eta * (hit + lam * math.exp(-eta)) - electrons

        scan = np.linspace(electrons / hit, 1e-6, 4000)
        below = np.flatnonzero([excess(eta) < 0.0 for eta in scan])[0]
        root = brentq(excess, scan[below], scan[max(below - 1, 0)] + 1e-12, xtol=1e-14)
        assert math.isclose(got, root, rel_tol=1e-9)


def test_conventional_is_the_ratio():
    counts = np.array([[[3, 0]], [[4, 1]], [[0, 0]]])
    got = conventional_yield(Frames(counts, 0.5))
    np.testing.assert_allclose(got.image, [[7 / 1.5, 1 / 1.5]])
    eta = np.array([[7 / 1.5, 1 / 1.5]])
    np.testing.assert_allclose(got.uncertainty, np.sqrt(eta * (1.0 + eta) / 1.5))
    got = conventional_yield(Frames(counts, 0.5, current=[1.0, 2.0, 0.5]))
    np.testing.assert_allclose(got.image, [[7 / 1.75, 1 / 1.75]])


@pytest.mark.parametrize("seed", range(3))
def test_conventional_of_readings(seed):
    law = MarkLaw(gain=2.0, variance=3.0, offset=5.0, noise=0.5)
    rng = np.random.default_rng(seed)
    electrons = rng.poisson(3.0 * rng.poisson(0.4, (50, 40, 40)))
    spread = np.sqrt(law.variance * electrons + law.noise**2)
    readings = law.offset + law.gain * electrons + spread * rng.standard_normal(electrons.shape)
    got = conventional_yield(Frames(readings, 0.4, law=law))
    assert abs(got.image.mean() - 3.0) < 5.0 * got.image.std() / 40.0
    assert abs(np.mean(got.uncertainty**2) / np.var(got.image) - 1.0) < 0.15
    with pytest.raises(InputError, match="analog readings"):
        total_count_yield(Frames(readings, 0.4, law=law))
    with pytest.raises(InputError, match="analog readings"):
        primaries_seen_yield(Frames(readings, 0.4, law=law))


def test_time_resolved_of_readings():
    law = MarkLaw(gain=2.0, noise=0.05)
    counts = simulate_frames(np.full((6, 7), 2.0), 0.3, 30, seed=1)
    readings = Frames(counts.counts * 2.0, 0.3, law=law)
    clean, counted = time_resolved_yield(readings), time_resolved_yield(counts)
    np.testing.assert_allclose(clean.image, counted.image, rtol=1e-5, atol=1e-6)
    np.testing.assert_allclose(clean.uncertainty, counted.uncertainty, rtol=1e-4)


@pytest.mark.parametrize("seed", range(3))
def test_one_frame_holds_its_total_alone(seed):
    frames = simulate_frames(np.random.default_rng(seed).uniform(0.5, 5.0, (8, 9)), 6.0, 1, seed=seed)
    one, total = time_resolved_yield(frames), total_count_yield(frames)
    np.testing.assert_array_equal(one.image, total.image)
    np.testing.assert_array_equal(one.uncertainty, total.uncertainty)


def test_cost_of_frames_limits():
    # (1 + eta)(1 - eta exp(-eta)) for one long dwell: 1.264, 2.188, 3.403, 5.798 (recomputed)
    for eta, gain in zip((1.0, 2.0, 3.0, 5.0), (1.264, 2.188, 3.403, 5.798), strict=True):
        assert math.isclose(cost_of_frames(1e7, eta), gain, abs_tol=5e-4)
        assert math.isclose(cost_of_frames(1e-7, eta), 1.0, rel_tol=1e-5)
    # lam = 16, eta = 3: information per primary .08448 against 1/3 - exp(-3) (recomputed)
    assert math.isclose(cost_of_frames(16.0, 3.0), (1 / 3 - math.exp(-3.0)) / 0.08448, rel_tol=1e-4)
    assert "3.36" in one_frame_note(16.0, 3.0)
    with pytest.raises(InputError, match=r"dose is 0\.0"):
        one_frame_note(0.0, 3.0)


@pytest.mark.parametrize("seed", range(3))
def test_uncertainties_are_what_repeats_scatter(seed):
    # 160 primaries a pixel: near the information bound
    frames = simulate_frames(np.full((40, 40), 2.0), 0.02, 8000, seed=seed)
    for estimator in COUNTING:
        got = estimator(frames)
        pull = (got.image - got.image.mean()) / got.uncertainty
        assert abs(pull.std() - 1.0) < 0.12, estimator.__name__
    time, total = time_resolved_yield(frames), total_count_yield(frames)
    gain = np.mean((total.image - 2.0) ** 2) / np.mean((time.image - 2.0) ** 2)
    assert 1.8 < gain < 2.5  # 2.15 by the information


@pytest.mark.parametrize("seed", range(3))
def test_bias_of_primaries_seen(seed):
    # two primaries in a frame count as one: too large by dose (1 - exp(-eta))^2 / (2 (1 - eta exp(-eta)))
    eta, dose = 3.0, 0.05
    frames = simulate_frames(np.full((30, 30), eta), dose, 2000, seed=seed)
    expected = dose * (1 - math.exp(-eta)) ** 2 / (2 * (1 - eta * math.exp(-eta)))
    got = primaries_seen_yield(frames).image
    error = got.std() / 30.0 / eta
    assert abs(got.mean() / eta - 1.0 - expected) < 4.0 * error + 0.2 * expected
    unbiased = time_resolved_yield(frames).image
    assert abs(unbiased.mean() / eta - 1.0) < 4.0 * error + 0.001


@pytest.mark.parametrize("seed", range(2))
def test_gain_at_few_primaries(seed):
    # 128 frames of .125: 1.968, 2.913, 4.685 by the information, a tenth less with 16 primaries a pixel
    for eta, bound in ((2.0, 1.968), (3.0, 2.913), (5.0, 4.685)):
        frames = simulate_frames(np.full((96, 96), eta), 0.125, 128, seed=seed)
        ratio, resolved = conventional_yield(frames).image, time_resolved_yield(frames).image
        gain = np.mean((ratio - eta) ** 2) / np.mean((resolved - eta) ** 2)
        assert 0.8 * bound < gain < 1.02 * bound


@pytest.mark.parametrize(("count", "dose", "eta"), [(1, 0.01, 20.0), (1, 20.0, 20.0), (2000, 20.0, 0.1)])
def test_finite_at_extremes(count, dose, eta):
    frames = simulate_frames(np.full((3, 4), eta), dose, count, seed=1)
    for estimator in COUNTING:
        got = estimator(frames)
        assert np.all(np.isfinite(got.image))
        assert np.all(np.isfinite(got.uncertainty) & (got.uncertainty > 0.0))


def test_bright_total_of_many_frames():
    counts = np.full((3000, 1, 2), 900)
    counts[:, 0, 1] = 0
    got = total_count_yield(Frames(counts, 45.0)).image
    assert math.isclose(got[0, 0], 20.0, rel_tol=1e-3)
    assert got[0, 1] == 0.0


def test_masked_pixels_are_not_a_number():
    mask = np.array([[True, False]])
    for estimator in COUNTING:
        got = estimator(Frames(np.array([[[1, 5]], [[2, 9]]]), 0.5, mask))
        assert np.isnan(got.image[0, 1])
        assert np.isnan(got.uncertainty[0, 1])
        assert np.isfinite(got.image[0, 0])
