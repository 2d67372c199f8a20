"""The beam's current from frames alone, against factors that the simulation knows."""

import numpy as np
import pytest
from scipy.special import gammaln

import priors
import recon
from recon.errors import InputError
from recon.imaging.beam_current import estimate_current
from recon.likelihoods import PoissonMarks
from recon.likelihoods.neyman import coefficients

DOSE, FRAMES = 0.125, 128


def scene(rows: int, columns: int) -> np.ndarray:
    """Discs, a bar, gratings, a gradient and an edge along the lines; yields 1 to 5."""
    i, j = np.mgrid[:rows, :columns]
    y, x = i / rows, j / columns
    eta = 1.5 + x + 0.8 * (y > 0.62)
    eta[(y > 0.08) & (y < 0.3) & (x > 0.1) & (x < 0.45)] = 3.5
    for cx, cy, r, v in [(0.7, 0.2, 0.12, 4.8), (0.25, 0.48, 0.09, 1.1), (0.55, 0.48, 0.06, 4.0)]:
        eta[(x - cx) ** 2 + (y - cy) ** 2 < r * r] = v
    upright = (y > 0.7) & (y < 0.92) & (x > 0.08) & (x < 0.45)
    eta[upright] = np.where(j[upright] // 4 % 2, 4.5, 1.2)
    along = (y > 0.7) & (y < 0.92) & (x > 0.55) & (x < 0.92)
    eta[along] = np.where(i[along] // 4 % 2, 3.6, 2.0)
    return eta


def stripes(frames: int, rows: int, per_frame: bool, seed: int) -> np.ndarray:
    factors = recon.simulate.flicker(frames, rows, 0.1, per_frame=per_frame, seed=seed)
    return factors / factors.mean()


def image(frames: recon.Frames) -> np.ndarray:
    problem = recon.Problem(PoissonMarks(frames), priors.TotalVariation(1.8))
    return recon.solve(problem, tolerance=1e-3).image


def stripe_error(estimated: np.ndarray, true: np.ndarray) -> float:
    ratio = estimated.mean(axis=0) / true.mean(axis=0)
    return float(np.std(ratio / ratio.mean()))


@pytest.mark.parametrize("seed", [0, 1])
def test_stripes_that_all_frames_share_are_found_as_closely_as_primaries_can_be_counted(seed: int) -> None:
    eta, true = scene(96, 512), stripes(FRAMES, 96, False, seed)
    drawn = recon.simulate.frames(eta, DOSE, FRAMES, hidden_current=true, seed=10 + seed)
    found = estimate_current(drawn)
    # 512 x 16 primaries in a line: no estimate leaves less than 1.1 % of the stripes' 10 %
    assert stripe_error(found.factors, true) < 0.017
    assert 0.08 < found.rms[0] < 0.12
    assert found.rms[2] == 0.0
    assert found.identified_by == "frames without electrons"
    assert abs(found.factors.mean() - 1.0) < 1e-6
    pull = (np.log(found.factors) - np.log(true))[0] / (found.uncertainty / found.factors)[0]
    assert 0.8 < np.std(pull) < 1.45


@pytest.mark.parametrize("seed", [0, 1])
def test_changes_from_frame_to_frame_are_told_from_stripes(seed: int) -> None:
    eta, true = scene(96, 96), stripes(FRAMES, 96, True, seed)
    drawn = recon.simulate.frames(eta, DOSE, FRAMES, hidden_current=true, seed=10 + seed)
    found = estimate_current(drawn)
    assert stripe_error(found.factors, true) < 0.015
    assert 0.07 < found.rms[2] < 0.12
    assert np.corrcoef(found.factors.ravel(), true.ravel())[0, 1] > 0.2


@pytest.mark.parametrize("per_frame", [False, True])
def test_the_image_is_nearly_as_good_as_without_stripes(per_frame: bool) -> None:
    eta = scene(96, 96)
    still, striped = [], []
    for seed in range(3):
        true = stripes(FRAMES, 96, per_frame, seed)
        plain = recon.simulate.frames(eta, DOSE, FRAMES, seed=10 + seed)
        drawn = recon.simulate.frames(eta, DOSE, FRAMES, hidden_current=true, seed=20 + seed)
        found = estimate_current(drawn, priors.TotalVariation(1.8))
        corrected = recon.Frames(drawn.counts, DOSE, current=found.factors)
        still.append(np.mean((image(plain) - eta) ** 2))
        striped.append(np.mean((image(corrected) - eta) ** 2))
    assert np.mean(striped) < 1.15 * np.mean(still)


@pytest.mark.parametrize("seed", [0, 1, 2])
def test_a_steady_beam_is_left_steady(seed: int) -> None:
    drawn = recon.simulate.frames(scene(96, 96), DOSE, FRAMES, seed=seed)
    found = estimate_current(drawn)
    assert found.rms[2] == 0.0
    assert np.std(found.factors) < 0.015


def test_a_slow_drift_of_the_beam_is_followed() -> None:
    drift = np.linspace(0.8, 1.2, FRAMES)
    drawn = recon.simulate.frames(scene(96, 96), DOSE, FRAMES, hidden_current=drift, seed=4)
    found = estimate_current(drawn)
    assert np.sqrt(np.mean((found.factors.mean(axis=1) - drift) ** 2)) < 0.04


def test_a_bright_frame_keeps_its_lines_and_says_why() -> None:
    true = stripes(1, 64, False, 0)
    drawn = recon.simulate.frames(scene(64, 64), 50.0, 1, hidden_current=true, seed=5)
    found = estimate_current(drawn)
    assert np.array_equal(found.factors, np.ones((1, 64), np.float32))
    assert found.identified_by == "nothing"
    assert "too bright" in found.note


def test_masked_pixels_and_recorded_factors() -> None:
    eta, true = scene(64, 96), stripes(FRAMES, 64, False, 3)
    drawn = recon.simulate.frames(eta, DOSE, FRAMES, current=true, seed=6)
    mask = np.ones(eta.shape, bool)
    mask[20] = False
    mask[:, :10] = False
    counts = drawn.counts.copy()
    counts[:, ~mask] = 200
    found = estimate_current(recon.Frames(counts, DOSE, mask, current=true))
    used = np.arange(64) != 20
    assert stripe_error(found.factors[:, used], true[:, used]) < 0.02
    assert np.isfinite(found.uncertainty).all()


def test_the_scores_are_derivatives_of_the_law() -> None:
    from recon.imaging.beam_current_kernels import line_scores

    def log_law(y: int, lam: float, eta: float) -> float:
        m = np.arange(1, 200)
        terms = m * np.log(lam) - lam - gammaln(m + 1) + y * np.log(m * eta) - m * eta - gammaln(y + 1)
        return np.log(np.exp(terms).sum() + (y == 0) * np.exp(-lam))

    def line(u: float, v: float) -> float:
        return sum(log_law(y, 0.7 * np.exp(u), x * np.exp(v)) for y, x in zip(counts, eta, strict=True))

    counts, eta, h = [0, 3, 1, 7, 0], [1.5, 2.0, 0.4, 3.0, 2.5], 1e-3
    score, information = np.empty((1, 1, 2)), np.empty((1, 1, 3))
    line_scores(
        np.array(counts, np.uint8).reshape(1, 1, -1),
        np.array([eta]),
        np.full((1, 5), 0.35),
        np.ones((1, 5), bool),
        np.full((1, 1), 2.0),
        coefficients(),
        score,
        information,
    )
    first = [(line(h, 0) - line(-h, 0)) / (2 * h), (line(0, h) - line(0, -h)) / (2 * h)]
    mixed = (line(h, h) - line(h, -h) - line(-h, h) + line(-h, -h)) / (4 * h * h)
    second = [(line(h, 0) - 2 * line(0, 0) + line(-h, 0)) / h**2, mixed]
    second.append((line(0, h) - 2 * line(0, 0) + line(0, -h)) / h**2)
    assert np.allclose(score[0, 0], first, rtol=1e-5)
    assert np.allclose(information[0, 0], -np.array(second), rtol=1e-4)


def test_what_cannot_be_used_is_refused() -> None:
    with pytest.raises(InputError, match="readings"):
        estimate_current(recon.Frames(np.ones((2, 8, 8)), 1.0, law=recon.MarkLaw(noise=0.1)))
    with pytest.raises(InputError, match="no electron"):
        estimate_current(recon.Frames(np.zeros((2, 8, 8), int), 1.0))
