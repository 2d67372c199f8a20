"""The error without a reference, against the true error of the same fits."""

import numpy as np
import pytest
from scipy.ndimage import gaussian_filter

import priors
import recon
from recon.errors import InputError
from recon.imaging.held_out_error import held_out_error
from recon.likelihoods import PoissonMarks


def scene(n: int) -> np.ndarray:
    """Discs, a grating and a gradient; yields 1 to 5."""
    i, j = np.mgrid[:n, :n]
    y, x = i / n, j / n
    eta = 1.5 + x + 0.8 * (y > 0.62)
    for cx, cy, r, v in [(0.7, 0.25, 0.15, 4.8), (0.25, 0.4, 0.12, 1.1), (0.55, 0.5, 0.08, 4.0)]:
        eta[(x - cx) ** 2 + (y - cy) ** 2 < r * r] = v
    grating = (y > 0.7) & (y < 0.92) & (x > 0.08) & (x < 0.45)
    eta[grating] = np.where(j[grating] // 4 % 2, 4.5, 1.2)
    return eta


def blurred(frames: recon.Frames) -> np.ndarray:
    total = frames.counts.sum(axis=0, dtype=np.float64)
    return gaussian_filter(total / (frames.dose * frames.factors.sum(axis=0)[:, None]), 1.0)


def variation(frames: recon.Frames) -> np.ndarray:
    problem = recon.Problem(PoissonMarks(frames), priors.TotalVariation(1.2))
    return recon.solve(problem, tolerance=5e-3).image


def compared(frames: recon.Frames, fit, eta: np.ndarray, **settings: int):
    """The estimate, and the true mean squared error of the fits it was made of."""
    true = []

    def watched(part: recon.Frames) -> np.ndarray:
        image = fit(part)
        usable = np.ones(eta.shape, bool) if part.mask is None else part.mask
        true.append(np.mean((image - eta)[usable] ** 2))
        return image

    return held_out_error(frames, watched, **settings), float(np.mean(true))


def test_within_its_standard_error_of_the_true_error_over_five_seeds() -> None:
    """No bias: the mean of five is within two standard errors, which are 14 % of it."""
    eta = scene(256)
    drawn = (recon.simulate.frames(eta, 0.25, 64, seed=seed) for seed in range(5))
    pairs = [compared(frames, variation, eta, folds=3, seed=1) for frames in drawn]
    off = np.mean([e.error - t for e, t in pairs])
    error = np.sqrt(np.sum([e.standard_error**2 for e, _ in pairs])) / len(pairs)
    assert abs(off) < 2.0 * error
    assert error < 0.08 * np.mean([t for _, t in pairs])


@pytest.mark.parametrize("folds", [2, 5])
def test_unbiased_with_a_standard_error_that_covers(folds: int) -> None:
    eta = scene(64)
    pulls = []
    for seed in range(60):
        frames = recon.simulate.frames(eta, 0.2, 20, seed=seed, current=np.linspace(0.6, 1.4, 20))
        estimate, true = compared(frames, blurred, eta, folds=folds, seed=seed)
        pulls.append((estimate.error - true) / estimate.standard_error)
    assert abs(np.mean(pulls)) < 0.4
    assert 0.5 < np.std(pulls) < 1.3


def test_a_worse_fit_has_the_larger_error() -> None:
    frames = recon.simulate.frames(scene(64), 0.25, 32, seed=0)
    mean = blurred(frames).mean()
    good = held_out_error(frames, blurred)
    bad = held_out_error(frames, lambda part: np.full((64, 64), mean))
    assert bad.error > good.error + 3.0 * good.standard_error


def test_readings_of_an_analog_chain() -> None:
    eta, law = scene(64), recon.MarkLaw(gain=20.0, variance=60.0, offset=5.0, noise=6.0)

    def fit(part: recon.Frames) -> np.ndarray:
        return gaussian_filter((part.counts.mean(axis=0) - 5.0) / 20.0 / part.dose, 1.5)

    pulls = []
    for seed in range(40):
        frames = recon.simulate.frames(eta, 1.0, 8, law=law, seed=seed)
        estimate, true = compared(frames, fit, eta, seed=seed)
        pulls.append((estimate.error - true) / estimate.standard_error)
    assert abs(np.mean(pulls)) < 0.5


def test_the_share_of_the_dose_and_the_mask() -> None:
    eta = scene(48)
    drawn = recon.simulate.frames(eta, 0.5, 10, seed=3)
    mask = np.ones(eta.shape, bool)
    mask[:5] = False
    counts = drawn.counts.copy()
    counts[:, :5] = 200
    estimate, true = compared(recon.Frames(counts, 0.5, mask), lambda part: eta + 0.5, eta, folds=5)
    assert estimate.dose_share == pytest.approx(0.8, abs=1e-6)
    assert estimate.folds == 5
    assert true == pytest.approx(0.25)
    assert abs(estimate.error - 0.25) < 4.0 * estimate.standard_error < 0.4


def test_what_cannot_be_used_is_refused() -> None:
    frames = recon.Frames(np.ones((4, 8, 8), int), 1.0)
    with pytest.raises(InputError, match="folds is 5"):
        held_out_error(frames, blurred, folds=5)
    with pytest.raises(InputError, match="folds is 1"):
        held_out_error(frames, blurred, folds=1)
    with pytest.raises(InputError, match="fit returns shape"):
        held_out_error(frames, lambda part: np.ones((8, 9)))
    with pytest.raises(InputError, match=r"fit returns nan at \(0, 0\)"):
        held_out_error(frames, lambda part: np.full((8, 8), np.nan))
    full = recon.Frames(np.ones((4, 8, 8)), 1.0, law=recon.MarkLaw(gain=0.4, noise=0.1, ceiling=1.0))
    with pytest.raises(InputError, match="ceiling"):
        held_out_error(full, blurred)
