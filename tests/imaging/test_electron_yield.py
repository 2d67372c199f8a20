"""The yield image, and what it says besides."""

import numpy as np
import pytest

import priors
import recon
from recon.imaging.electron_yield import frame_folds
from recon.likelihoods import PoissonMarks

LAW = recon.MarkLaw(gain=2.0, variance=1.0, noise=0.3, offset=5.0, ceiling=60.0)


def scene() -> np.ndarray:
    eta = np.full((32, 40), 1.5)
    eta[8:24, 10:30] = 4.0
    return eta


def test_counts_and_readings_give_the_yield() -> None:
    eta = scene()
    counted = recon.simulate.frames(eta, 0.125, 64, seed=0)
    read = recon.simulate.frames(eta, 0.125, 64, law=LAW, seed=0)
    for frames in (counted, read):
        image = recon.reconstruct(frames).electron_yield
        assert np.mean((image.image - eta) ** 2) < 0.15 * np.mean((counted_ratio(counted) - eta) ** 2)
        assert image.choice.folds == 4
        assert image.notes == ()


def counted_ratio(frames: recon.Frames) -> np.ndarray:
    return frames.counts.sum(axis=0) / (frames.frames * frames.dose)


def test_one_frame_says_what_it_costs() -> None:
    image = recon.reconstruct(recon.simulate.frames(scene(), 8.0, 1, seed=0)).electron_yield
    assert any("a single frame" in note and "faint frames" in note for note in image.notes)


def test_saturated_readings_and_lost_frames_are_told() -> None:
    low = recon.MarkLaw(gain=2.0, variance=1.0, noise=0.3, ceiling=9.0)
    drawn = recon.simulate.frames(scene(), 0.3, 20, law=low, seed=0)
    readings = drawn.counts.copy()
    readings[7] = np.nan
    with pytest.warns(UserWarning, match="7"):
        frames = recon.Frames(readings, 0.3, law=low)
    notes = recon.reconstruct(frames, weight="rule").electron_yield.notes
    assert any("dropped: 7" in note for note in notes)
    assert any("ceiling" in note for note in notes)


@pytest.mark.parametrize("seed", range(3))
def test_charging_is_told_and_steady_frames_are_not(seed: int) -> None:
    steady = recon.simulate.frames(scene(), 0.125, 64, seed=seed)
    charging = recon.simulate.frames(scene(), 0.125, 64, charging=0.5, seed=seed)
    prior = priors.TotalVariation(1.5)
    assert recon.reconstruct(steady, prior).electron_yield.notes == ()
    assert recon.reconstruct(charging, prior).electron_yield.notes != ()


def test_the_folds_share_out_the_frames() -> None:
    frames = recon.simulate.frames(scene(), 0.125, 31, seed=0)
    pairs = frame_folds(frames, 3, 0)
    dealt = np.random.default_rng(0).permutation(31) % 3
    total = 0
    for part, (fit, score) in enumerate(pairs):
        assert isinstance(fit, PoissonMarks)
        held = score.estimate() * (0.125 * np.count_nonzero(dealt == part))
        np.testing.assert_allclose(fit._electrons + held, frames.counts.sum(axis=0), rtol=1e-4, atol=1e-4)
        total = total + held
    np.testing.assert_allclose(total, frames.counts.sum(axis=0), rtol=1e-4, atol=1e-4)


def test_stripes_and_drift_on_demand() -> None:
    eta = np.kron(scene(), np.ones((2, 2)))
    factors = recon.simulate.flicker(64, 64, 0.2, per_frame=False, seed=1)
    path = np.linspace(-1.5, 1.5, 64)[:, None] * np.array([1.0, 0.5])
    striped = recon.simulate.frames(eta, 0.25, 64, hidden_current=factors, seed=0)
    moved = recon.simulate.frames(eta, 0.25, 64, stage_drift=path, seed=0)
    prior, inner = priors.TotalVariation(1.5), (slice(4, -4), slice(4, -4))

    def error(frames: recon.Frames, **settings: bool) -> float:
        image = recon.reconstruct(frames, prior, **settings).electron_yield
        return float(np.mean((image.image - eta)[inner] ** 2))

    assert error(striped, unknown_current=True) < 1.05 * error(striped)
    assert error(moved, moving=True) < 0.7 * error(moved)


def test_these_are_for_frames() -> None:
    counts = recon.Counts(np.ones((4, 4), int), 10)
    with pytest.raises(recon.InputError, match="moving is for Frames"):
        recon.reconstruct(counts, moving=True)
