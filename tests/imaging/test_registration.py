"""The drift of the stage from faint frames, against drifts that the simulation knows."""

import numpy as np
import pytest
from scipy.ndimage import gaussian_filter1d

import recon
from recon.errors import InputError
from recon.imaging.registration import FAINTEST, register


def scene(n: int) -> np.ndarray:
    """Discs, a bar and gratings; yields 1 to 5."""
    i, j = np.mgrid[:n, :n]
    y, x = i / n, j / n
    eta = 1.5 + x + 0.8 * (y > 0.62)
    eta[(y > 0.08) & (y < 0.3) & (x > 0.1) & (x < 0.45)] = 3.5
    for cx, cy, r, v in [(0.7, 0.25, 0.15, 4.8), (0.25, 0.48, 0.1, 1.1), (0.55, 0.5, 0.08, 4.0)]:
        eta[(x - cx) ** 2 + (y - cy) ** 2 < r * r] = v
    upright = (y > 0.7) & (y < 0.92) & (x > 0.08) & (x < 0.45)
    eta[upright] = np.where(j[upright] // 4 % 2, 4.5, 1.2)
    along = (y > 0.7) & (y < 0.92) & (x > 0.55) & (x < 0.92)
    eta[along] = np.where(i[along] // 4 % 2, 3.6, 2.0)
    return eta


def drift(kind: str, frames: int, seed: int, reach: float = 2.0) -> np.ndarray:
    """A drift of mean zero: linear, or a random smooth walk that covers `reach` pixels."""
    if kind == "linear":
        path = reach * np.outer(np.linspace(-0.5, 0.5, frames), [0.8, -0.6])
    else:
        steps = np.random.default_rng(seed).normal(size=(frames, 2))
        path = gaussian_filter1d(steps.cumsum(axis=0), 4.0, axis=0)
        path *= reach / np.ptp(path, axis=0).max()
    return path - path.mean(axis=0)


def rms(values: np.ndarray) -> float:
    return float(np.sqrt(np.mean(values**2)))


@pytest.mark.parametrize(("kind", "limit"), [("linear", 0.06), ("walk", 0.13)])
@pytest.mark.parametrize("seed", [0, 1])
def test_a_drift_of_two_pixels_is_found_to_a_fraction_of_one(kind: str, limit: float, seed: int) -> None:
    true = drift(kind, 96, seed)
    found = register(recon.simulate.frames(scene(96), 0.125, 96, stage_drift=true, seed=seed))
    assert rms(found.shifts - true) < limit
    assert np.allclose(found.shifts.mean(axis=0), 0.0, atol=1e-9)
    assert rms((found.shifts - true) / found.uncertainty) < 2.0
    assert found.uncertainty.max() < 0.5
    assert "moves by" in found.note


def test_a_drift_of_many_pixels_is_found() -> None:
    true = drift("linear", 64, 0, reach=16.0)
    found = register(recon.simulate.frames(scene(96), 0.25, 64, stage_drift=true, seed=0))
    assert rms(found.shifts - true) < 0.1


@pytest.mark.parametrize("seed", [0, 1])
def test_a_stage_at_rest_is_left_at_rest(seed: int) -> None:
    found = register(recon.simulate.frames(scene(96), 0.125, 64, seed=seed))
    assert rms(found.shifts) < 0.1
    assert rms(found.shifts / found.uncertainty) < 2.0


def test_jumps_from_frame_to_frame_are_followed_where_a_frame_shows_them() -> None:
    true = np.random.default_rng(0).normal(0.0, 0.6, (32, 2))
    true -= true.mean(axis=0)
    found = register(recon.simulate.frames(scene(96), 1.0, 32, stage_drift=true, seed=1))
    assert rms(found.shifts - true) < 0.15


@pytest.mark.parametrize("seed", [0, 1])
def test_the_faintest_frames_that_the_docstring_claims(seed: int) -> None:
    true = drift("linear", 128, seed, reach=4.0)
    drawn = recon.simulate.frames(scene(128), 0.01, 128, stage_drift=true, seed=seed)
    assert drawn.counts.sum() / 128 == pytest.approx(FAINTEST, rel=0.15)
    assert rms(register(drawn).shifts - true) < 0.5 < rms(true)


def test_frames_too_faint_say_so() -> None:
    drawn = recon.simulate.frames(scene(64), 0.002, 32, seed=0)
    assert "faint" in register(drawn).note


def test_masks_recorded_currents_and_dose_maps() -> None:
    true = drift("linear", 48, 0)
    current = np.linspace(0.7, 1.3, 48)
    dose = np.full((96, 96), 0.25) * np.linspace(0.8, 1.2, 96)
    drawn = recon.simulate.frames(scene(96), dose, 48, stage_drift=true, current=current, seed=2)
    counts, mask = drawn.counts.copy(), np.ones((96, 96), bool)
    mask[30:34, 20:25] = False
    counts[:, ~mask] = 90
    assert rms(register(recon.Frames(counts, dose, mask, current=current)).shifts - true) < 0.1


def test_one_frame_and_what_cannot_be_used() -> None:
    assert np.array_equal(register(recon.Frames(np.ones((1, 16, 16), int), 1.0)).shifts, [[0.0, 0.0]])
    with pytest.raises(InputError, match="readings"):
        register(recon.Frames(np.ones((2, 8, 8)), 1.0, law=recon.MarkLaw(noise=0.1)))
    with pytest.raises(InputError, match="no electron"):
        register(recon.Frames(np.zeros((2, 16, 16), int), 1.0))
    with pytest.raises(InputError, match="16 rows"):
        register(recon.Frames(np.ones((2, 15, 16), int), 1.0))


@pytest.mark.parametrize("shape", [(2, 16, 16), (3, 16, 40), (5, 17, 19)])
def test_small_stacks_do_not_fail(shape: tuple[int, int, int]) -> None:
    counts = np.random.default_rng(0).poisson(2.0, shape)
    assert np.isfinite(register(recon.Frames(counts, 1.0)).shifts).all()
