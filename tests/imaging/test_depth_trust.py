"""Depth: the uncertainty against the true error, and halves of the tags against all of them."""

from functools import cache

import numpy as np
import pytest
from scipy import constants, integrate, stats

import priors
import recon
from recon.acquisition import DeadTime, GaussianPulse, TimeTags
from recon.errors import InputError
from recon.imaging.depth import depth
from recon.imaging.task import Effort
from recon.likelihoods import DetectionTimes
from recon.simulate import time_tags

PERIOD, RMS = 100e-9, 0.27e-9
PULSE = GaussianPulse(RMS)
METRES = 0.5 * constants.c
CORE = METRES * RMS
QUICK = Effort(max_iterations=600)


def step(size: int = 64) -> np.ndarray:
    i, j = np.mgrid[:size, :size]
    scene = 5.0 + 0.004 * j + 0.002 * i
    scene[size // 4 : 3 * size // 4, size // 3 : 2 * size // 3] -= 0.8
    return scene


def acquire(scene, seed, signal, background, **more) -> TimeTags:
    return time_tags(
        scene, np.ones(scene.shape), 1000, PERIOD, PULSE, signal / 1000, background / 1000, seed=seed, **more
    )


@cache
def judged(seed: int, signal: float):
    scene = step()
    return depth(acquire(scene, seed, signal, 0.5), np.ones(scene.shape), priors.TotalVariation(), QUICK)


@pytest.mark.parametrize("signal", [1.5, 4.0])
def test_the_truth_is_held_as_often_as_said(signal: float) -> None:
    scene, narrow, wide = step(), [], []
    for seed in range(3):
        found = judged(seed, signal)
        (low, high), (least, most) = found.interval(0.68), found.interval(0.95)
        narrow.append(np.mean((low <= scene) & (scene <= high)))
        wide.append(np.mean((least <= scene) & (scene <= most)))
        assert np.all(least <= low)
        assert np.all(high <= most)
    assert 0.5 < np.mean(narrow) < 0.9
    assert np.mean(wide) > 0.85


def test_more_light_is_surer() -> None:
    """And the error of a pixel falls with what is said of it."""
    u = [np.median(judged(0, signal).uncertainty) for signal in (1.5, 4.0)]
    assert u[1] < u[0]
    found, scene = judged(0, 1.5), step()
    error = np.abs(found.image - scene)
    ends = np.quantile(found.uncertainty, (0.3, 0.9))
    assert error[found.uncertainty >= ends[1]].mean() > error[found.uncertainty <= ends[0]].mean()


def test_narrower_than_the_belief_where_light_is_plenty() -> None:
    """The belief of a pixel takes no credit for the surface that the prior draws through its neighbours."""
    from recon.imaging.depth_belief import depth_belief

    scene = step(32)
    tags = acquire(scene, 0, 20.0, 1.0)
    found = depth(tags, np.ones(scene.shape), priors.TotalVariation(), QUICK)
    belief = depth_belief(found.problem.likelihood)
    width = 0.5 * (belief.quantile(0.84) - belief.quantile(0.16))
    assert np.median(found.uncertainty) < np.median(width)
    assert np.median(np.abs(found.image - scene)) < np.median(width)


def test_a_weight_that_is_given_is_judged_too() -> None:
    scene = step(32)
    prior = priors.TotalVariation(30.0 / CORE)
    found = depth(acquire(scene, 1, 3.0, 0.5), np.ones(scene.shape), prior, QUICK)
    assert found.choice is None
    assert len(found.held_out) == 2
    assert np.all(found.uncertainty > 0.0)


@pytest.mark.parametrize("number", [0, 1, 20])
def test_too_few_tags_are_said(number: int) -> None:
    rng = np.random.default_rng(3)
    tags = TimeTags(
        rng.integers(0, 12, number), rng.integers(0, 12, number), 40e-9 + RMS * rng.standard_normal(number),
        shape=(12, 12), trials=100, period=PERIOD, pulse=PULSE, gain=0.01, background=1e-4,
    )  # fmt: skip
    found = depth(tags, np.ones((12, 12)), priors.TotalVariation(), QUICK)
    assert found.held_out == ()
    assert any("too few tags" in note for note in found.notes)
    assert np.all(np.isfinite(found.uncertainty))


def test_where_another_surface_is_likely_the_interval_reaches_to_it() -> None:
    found = judged(1, 1.5)
    doubtful = found.wrong_surface >= 0.02
    assert doubtful.any()
    low, high = found.interval(0.95)
    assert np.all(low[doubtful] <= found.farthest[0][doubtful])
    assert np.all(high[doubtful] >= found.farthest[1][doubtful])
    with pytest.raises(InputError, match=r"share is 0\.5; give 0\.68 or 0\.95"):
        found.interval(0.5)


def test_the_mean_of_a_region() -> None:
    """A flat target: pulls over seeds of the mean depth of 100 pixels."""
    pulls = []
    region = np.zeros((16, 16), bool)
    region[3:13, 3:13] = True
    for seed in range(12):
        tags = acquire(np.full((16, 16), 6.0), seed, 3.0, 0.5)
        found = depth(tags, np.ones((16, 16)), priors.TotalVariation(5.0 / CORE), Effort(max_iterations=200))
        mean = found.region(region)
        pulls.append((mean.mean - 6.0) / mean.uncertainty)
    # chi-squared of 12
    assert 0.005 < stats.chi2.cdf(np.sum(np.square(pulls)), 12) < 0.995
    assert mean.uncertainty == pytest.approx(CORE / np.sqrt(3.0 * 100), rel=0.35)


SETTINGS = {
    "nothing lost": {},
    "dead time": {"dead_time": DeadTime(10e-9)},
    "dead time and reset": {"dead_time": DeadTime(30e-9, reset_every_period=True)},
    "gate": {"gate": (20e-9, 70e-9)},
}


def likelihood_of(name: str, seed: int = 0) -> DetectionTimes:
    scene = np.full((6, 7), 6.0)
    scene[2:4] = 5.6
    tags = time_tags(scene, np.ones(scene.shape), 50, PERIOD, PULSE, 0.08, 0.1, seed=seed, **SETTINGS[name])
    return DetectionTimes(tags, 1.0)


@pytest.mark.parametrize("number", [2, 3])
@pytest.mark.parametrize("name", SETTINGS)
def test_folds_share_out_the_tags(name: str, number: int) -> None:
    whole = likelihood_of(name)
    pairs = whole.folds(number, 5)
    assert len(pairs) == number
    scored = []
    for fit, score in pairs:
        both = np.diff(fit.start) + np.diff(score.start)
        np.testing.assert_array_equal(both, np.diff(whole.start))
        pixel = [np.repeat(np.arange(42), np.diff(part.start)) for part in (fit, score)]
        pooled = np.concatenate([fit.y, score.y])
        order = np.lexsort((pooled, np.concatenate(pixel)))
        np.testing.assert_array_equal(pooled[order], whole.y)
        np.testing.assert_array_equal(fit.has_data, np.diff(fit.start).reshape(6, 7) > 0)
        z = np.linspace(3.2, 9.0, 42).reshape(6, 7)
        for part, share in ((fit, 1.0 - 1.0 / number), (score, 1.0 / number)):
            np.testing.assert_allclose(part.exposure_at(z), share * whole.exposure_at(z), rtol=1e-9)
            np.testing.assert_allclose(part.trials, share * whole.trials, rtol=1e-12)
        scored.append(np.diff(score.start))
    np.testing.assert_array_equal(np.sum(scored, axis=0), np.diff(whole.start))


@pytest.mark.parametrize("name", SETTINGS)
def test_gradients_and_values_of_the_parts_add_up(name: str) -> None:
    whole = likelihood_of(name)
    z = np.full((6, 7), 5.9) + 0.01 * np.arange(7)
    for fit, score in whole.folds(2, 1):
        used = whole.has_data & fit.has_data & score.has_data
        both = fit.gradient(z) + score.gradient(z)
        np.testing.assert_allclose(both[used], whole.gradient(z)[used], rtol=1e-7, atol=1e-6)
        both = fit.score_map(z) + score.score_map(z)
        np.testing.assert_allclose(both[used], whole.score_map(z)[used], rtol=1e-7, atol=1e-7)


def awake(settings, times: np.ndarray, trials: float, at: np.ndarray) -> np.ndarray:
    """The periods in which a pixel could record at each time, by counting its blind windows."""
    live = np.full(at.shape, float(trials))
    dead = settings.get("dead_time")
    for time in times if dead is not None else ():
        since = at - time
        if dead.reset_every_period:
            live -= (since >= 0.0) & (since < dead.blind)
        else:
            live -= np.mod(since, PERIOD) < dead.blind
    if "gate" in settings:
        live *= (at >= settings["gate"][0]) & (at < settings["gate"][1])
    return live


@pytest.mark.parametrize("name", SETTINGS)
def test_the_score_is_minus_the_log_of_the_density(name: str) -> None:
    """Of tags that are Poisson with the live exposure times the rate, integrated on a fine grid of times."""
    whole, settings = likelihood_of(name, 2), SETTINGS[name]
    _, score = whole.folds(2, 3)[0]
    at = (np.arange(200_000) + 0.5) * (PERIOD / 200_000)
    depths = (5.2, 5.6, 5.97, 6.0, 6.03, 8.0)
    maps = [score.score_map(np.full((6, 7), z)) for z in depths]
    for q in range(0, 42, 5):
        place = np.unravel_index(q, (6, 7))
        everything = whole.y[whole.start[q] : whole.start[q + 1]] / METRES
        own = score.y[score.start[q] : score.start[q + 1]] / METRES
        if not own.size:
            continue
        live = 0.5 * awake(settings, everything, 50, at)
        losses = []
        for z in depths:
            mean = z / METRES
            expected = integrate.simpson(live * 0.08 * stats.norm.pdf(at, mean, RMS), x=at)
            rate = 0.08 * stats.norm.pdf(own, mean, RMS) + 0.1 / PERIOD
            losses.append(expected * (name != "nothing lost") - np.sum(np.log(rate)))
        found = np.array([each[place] for each in maps])
        # a window's edge falls on the grid to 0.5 ps
        np.testing.assert_allclose(found - found[0], np.array(losses) - losses[0], rtol=2e-3, atol=5e-3)


def test_when_tags_can_be_shared_out() -> None:
    rng = np.random.default_rng(0)
    for number, enough in ((0, False), (29, False), (30, True)):
        settings = {"shape": (8, 8), "trials": 100, "period": PERIOD, "pulse": PULSE}
        row, column = rng.integers(0, 8, (2, number))
        time = rng.uniform(0.0, PERIOD, number)
        tags = TimeTags(row, column, time, **settings)
        assert DetectionTimes(tags, 1.0).can_be_shared_out is enough
        mask = np.zeros((8, 8), bool)
        mask[0, 0] = True
        masked = TimeTags(row, column, time, mask=mask, **settings)
        assert not DetectionTimes(masked, 1.0).can_be_shared_out


def test_a_solve_of_depth_starts_where_each_pixel_fits_best() -> None:
    likelihood = likelihood_of("nothing lost")
    problem = recon.Problem(likelihood, priors.TotalVariation(10.0))
    own = recon.solve(problem, max_iterations=40)
    told = recon.solve(problem, max_iterations=40, start=likelihood.estimate())
    np.testing.assert_array_equal(own.image, told.image)
