"""Frames that have moved: against the law written out, against frames at rest, and on drifting scenes."""

import numpy as np
import pytest
from scipy.ndimage import gaussian_filter, shift
from scipy.special import gammaln, logsumexp

import priors
import recon
from recon.errors import InputError
from recon.likelihoods import PoissonMarks
from recon.likelihoods.moving_frames import MovingFrames

SEEDS = [0, 1, 2]


def small(seed: int, mask: bool = False) -> tuple[recon.Frames, np.ndarray, np.ndarray]:
    """Frames of 7 x 6 pixels with a dose map and a current, shifts of 1/16 pixels, and an image."""
    rng = np.random.default_rng(seed)
    shifts = rng.integers(-24, 25, (5, 2)) / 16.0
    shifts[0] = 0.0, -1.0
    usable = rng.random((7, 6)) < 0.9 if mask else None
    dose, current = rng.uniform(0.3, 2.0, (7, 6)), rng.uniform(0.5, 1.5, (5, 7))
    counts = rng.poisson(rng.poisson(1.0, (5, 7, 6)) * 2.0)
    frames = recon.Frames(counts, dose, usable, current=current)
    return frames, shifts, rng.uniform(0.5, 4.0, (7, 6))


def log_law(y: int, lam: float, eta: float) -> float:
    """Log P(y) of Neyman's law, summed over the primaries."""
    m = np.arange(1, 150)
    terms = m * np.log(lam) - lam - gammaln(m + 1) + y * np.log(m * eta) - m * eta - gammaln(y + 1)
    return float(logsumexp(np.append(terms, -lam) if y == 0 else terms))


def written_out(frames: recon.Frames, shifts: np.ndarray, eta: np.ndarray) -> float:
    """The log likelihood, pixel by pixel of every frame."""
    total, (rows, columns) = 0.0, frames.shape
    for f, (down, right) in enumerate(shifts):
        for i in range(rows):
            for j in range(columns):
                y, x = i - down, j - right
                inside = 0 <= y <= rows - 1 and 0 <= x <= columns - 1
                if not inside or (frames.mask is not None and not frames.mask[i, j]):
                    continue
                a, b = min(int(y), rows - 2), min(int(x), columns - 2)
                v, h = y - a, x - b
                mixed = (1 - v) * ((1 - h) * eta[a, b] + h * eta[a, b + 1])
                mixed += v * ((1 - h) * eta[a + 1, b] + h * eta[a + 1, b + 1])
                lam = frames.dose[i, j] * float(frames.factors[f, i])
                total += log_law(int(frames.counts[f, i, j]), lam, mixed)
    return total


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("mask", [False, True])
def test_the_value_is_that_of_the_law_written_out(seed: int, mask: bool) -> None:
    frames, shifts, eta = small(seed, mask)
    moving = MovingFrames(frames, shifts)
    assert moving.value(eta) + moving.constant == pytest.approx(-written_out(frames, shifts, eta), rel=1e-6)
    assert moving.value(moving.estimate()) == pytest.approx(0.0, abs=1e-9)
    assert moving.value(eta) > 0.0


@pytest.mark.parametrize("seed", SEEDS)
def test_gradient_and_curvature_are_derivatives_of_the_value(seed: int) -> None:
    frames, shifts, eta = small(seed, True)
    moving, h = MovingFrames(frames, shifts), 1e-3
    gradient, curvature = moving.gradient(eta), moving.curvature(eta)
    for place in np.argwhere(moving.has_data)[::5]:
        step = np.zeros_like(eta)
        step[tuple(place)] = h
        low, middle, high = (moving.value(eta + k * step) for k in (-1, 0, 1))
        assert gradient[tuple(place)] == pytest.approx((high - low) / (2 * h), rel=1e-4, abs=1e-4)
        assert curvature[tuple(place)] == pytest.approx((high - 2 * middle + low) / h**2, rel=1e-3, abs=1e-3)


@pytest.mark.parametrize("seed", SEEDS)
def test_the_majorant_touches_and_lies_above(seed: int) -> None:
    frames, shifts, eta = small(seed, True)
    moving = MovingFrames(frames, shifts)
    above = moving.majorise(eta)
    assert np.allclose(above.gradient(eta), moving.gradient(eta), atol=1e-5, rtol=1e-5)
    rng = np.random.default_rng(seed)
    for _ in range(20):
        other = eta * np.exp(rng.normal(0.0, 0.5, eta.shape))
        assert moving.value(other) - moving.value(eta) <= above.value(other) - above.value(eta) + 1e-4


@pytest.mark.parametrize("seed", SEEDS)
def test_at_rest_it_is_the_likelihood_of_separate_pixels(seed: int) -> None:
    frames, _, eta = small(seed)
    moving, still = MovingFrames(frames, np.zeros((5, 2))), PoissonMarks(frames)
    assert moving.value(eta) + moving.constant == pytest.approx(still.value(eta) + still.constant, rel=1e-7)
    assert np.allclose(moving.gradient(eta), still.gradient(eta))
    assert np.allclose(moving.curvature(eta), still.curvature(eta))
    assert np.array_equal(moving.has_data, still.has_data)


def test_the_information_of_a_flat_image_is_the_mean_curvature() -> None:
    shifts = np.array([[0.5, 0.25], [-0.25, 0.5], [0.0, -1.0]])
    flat = np.full((24, 24), 2.0)
    still = recon.simulate.frames(flat, 0.5, 3, seed=0)
    moving = MovingFrames(still, shifts)
    mean = np.mean([moving.draw(flat, seed).curvature(flat) for seed in range(150)], axis=0)
    inner = (slice(3, -3), slice(3, -3))
    assert mean[inner].mean() == pytest.approx(moving.fisher_information(flat)[inner].mean(), rel=0.03)


@pytest.mark.parametrize("seed", SEEDS)
def test_it_agrees_with_the_simulation_of_a_drift(seed: int) -> None:
    """At the true image the score of the law is zero on average, at the image unmoved it is not."""
    eta = scene(64)
    shifts = np.linspace([-1.5, 1.0], [1.5, -1.0], 48)
    drawn = recon.simulate.frames(eta, 0.5, 48, stage_drift=np.round(shifts * 16) / 16, seed=seed)
    moving, unmoved = MovingFrames(drawn, shifts), MovingFrames(drawn, np.zeros((48, 2)))
    assert moving.value(eta) + moving.constant < unmoved.value(eta) + unmoved.constant - 100.0
    score = moving.gradient(eta)[4:-4, 4:-4]
    assert abs(score.mean()) < 4.0 * score.std() / np.sqrt(score.size)


def scene(n: int) -> np.ndarray:
    """Discs and gratings of 4 pixels, seen by a probe of 0.7 pixels rms; yields 1 to 5."""
    i, j = np.mgrid[:n, :n]
    y, x = i / n, j / n
    eta = 1.5 + x + 0.8 * (y > 0.62)
    for cx, cy, r, v in [(0.7, 0.25, 0.15, 4.8), (0.25, 0.4, 0.12, 1.1), (0.55, 0.5, 0.08, 4.0)]:
        eta[(x - cx) ** 2 + (y - cy) ** 2 < r * r] = v
    upright = (y > 0.7) & (y < 0.92) & (x > 0.08) & (x < 0.45)
    eta[upright] = np.where(j[upright] // 4 % 2, 4.5, 1.2)
    along = (y > 0.7) & (y < 0.92) & (x > 0.55) & (x < 0.92)
    eta[along] = np.where(i[along] // 4 % 2, 3.6, 2.0)
    return gaussian_filter(eta, 0.7, mode="nearest")


def test_a_solve_falls_all_the_way_and_undoes_the_drift() -> None:
    eta, prior = scene(96), priors.TotalVariation(1.5)
    shifts = np.linspace([-1.0, 0.8], [1.0, -0.8], 64)
    errors = np.zeros(3)
    for seed in range(3):
        still = recon.simulate.frames(eta, 0.25, 64, seed=seed)
        drawn = recon.simulate.frames(eta, 0.25, 64, stage_drift=shifts, seed=seed)
        objectives = []
        solution = recon.solve(
            recon.Problem(MovingFrames(drawn, shifts), prior),
            tolerance=1e-3,
            callback=lambda state, kept=objectives: kept.append(state.objective),
        )
        assert solution.status is recon.Status.CONVERGED
        assert np.all(np.diff(objectives) <= 1e-6 * abs(objectives[0]))
        others = [recon.solve(recon.Problem(PoissonMarks(f), prior), tolerance=1e-3) for f in (still, drawn)]
        errors += [np.mean((s.image - eta) ** 2) for s in (solution, *others)]
    moved, rest, ignored = errors
    assert moved < 1.2 * rest
    assert ignored > 1.25 * moved


def test_draws_follow_the_shifts() -> None:
    eta = scene(32)
    shifts = np.array([[2.0, -3.0], [0.5, 0.0]])
    moving = MovingFrames(recon.simulate.frames(eta, 400.0, 2, seed=0), shifts)
    restored = moving.draw(eta, 1).estimate()
    inner = (slice(4, -4), slice(4, -4))
    assert np.mean((restored - eta)[inner] ** 2) < 0.05
    assert np.mean((shift(eta, (1, 1), mode="nearest") - eta)[inner] ** 2) > 0.25


def test_no_electron_at_all_and_zero_yields() -> None:
    dark = MovingFrames(recon.Frames(np.zeros((3, 5, 5), int), 1.0), np.full((3, 2), 0.25))
    assert 0.0 in dark.domain
    assert dark.value(np.zeros((5, 5))) == pytest.approx(0.0, abs=1e-9)
    lit = np.zeros((3, 5, 5), int)
    lit[1, 2, 2] = 3
    assert MovingFrames(recon.Frames(lit, 1.0), np.zeros((3, 2))).value(np.zeros((5, 5))) == np.inf
    assert not MovingFrames(recon.Frames(lit, 1.0), np.full((3, 2), 2.0)).has_data[4].any()


def test_what_cannot_be_used_is_refused() -> None:
    frames = recon.Frames(np.ones((2, 5, 5), int), 1.0)
    with pytest.raises(InputError, match=r"shifts has shape \(3, 2\)"):
        MovingFrames(frames, np.zeros((3, 2)))
    with pytest.raises(InputError, match="off the image"):
        MovingFrames(frames, np.full((2, 2), 9.0))
    with pytest.raises(InputError, match="shifts at"):
        MovingFrames(frames, np.full((2, 2), np.nan))
    with pytest.raises(InputError, match="readings"):
        MovingFrames(recon.Frames(np.ones((2, 8, 8)), 1.0, law=recon.MarkLaw(noise=0.1)), np.zeros((2, 2)))
    with pytest.raises(InputError, match="the image at"):
        MovingFrames(frames, np.zeros((2, 2))).majorise(np.full((5, 5), -1.0))
    with pytest.raises(InputError, match="shape"):
        MovingFrames(frames, np.zeros((2, 2))).value_map(np.ones((4, 5)))
