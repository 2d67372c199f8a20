"""The depth route on invented scenes: accuracy, monotony, what is left to the user, and what clocks cost."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import constants

import priors
from recon import Problem
from recon.acquisition import GaussianPulse, TimeTags
from recon.diagnostics import Status
from recon.errors import InputError
from recon.imaging.depth import depth, faintest_target, open_settings, scene_bounds
from recon.imaging.task import Effort
from recon.likelihoods import DetectionTimes
from recon.simulate import time_tags

SEEDS = range(4)
PERIOD = 100e-9
RMS = 0.27e-9
PULSE = GaussianPulse(RMS)
METRES = 0.5 * constants.c
CORE = METRES * RMS
QUICK = Effort(max_iterations=300, weight="rule", judge=False)


def acquire(scene, seed, signal=0.5, background=0.5, reflectivity=1.0, **more):
    """Tags of a scene of uniform reflectivity; signal and background are detections a pixel."""
    reflectivity = np.full(scene.shape, reflectivity)
    return time_tags(
        scene, reflectivity, 1000, PERIOD, PULSE, signal / 1000, background / 1000, seed=seed, **more
    )


def post():
    """Two planes and a thin post in front of the farther one; 32 x 48."""
    scene = np.full((32, 48), 6.0)
    scene[:, 24:] = 4.0
    scene[4:28, 10:12] = 2.5
    return scene


def slopes():
    """A slope behind, a tilted block in front of it, and a bar in front of both; 64 x 96."""
    row, column = np.mgrid[:64, :96]
    scene = 5.0 + 0.004 * column + 0.002 * row
    scene[16:48, 20:50] = 4.2 + 0.003 * row[16:48, 20:50]
    scene[:, 70:76] = 3.1
    return scene


PRIORS = {
    "left out": (None, 15.0),
    "total variation": (priors.TotalVariation(), 15.0),
    "generalized variation": (priors.GeneralizedVariation(), 15.0),
    "wavelets, which take no edge weights": (priors.WaveletSparsity(), 5.0),
}


@pytest.mark.parametrize("name", PRIORS)
def test_depth_lowers_the_objective_and_the_error(name):
    """Half a signal detection a pixel, half a background one."""
    prior, factor = PRIORS[name]
    scene = post()
    for seed in SEEDS[:2]:
        tags, objective = acquire(scene, seed), []

        def told(image, state, kept=objective):
            assert image == "depth"
            kept.append(state.objective)

        result = depth(
            tags,
            np.ones(scene.shape),
            prior,
            Effort(max_iterations=700, callback=told, weight="rule", judge=False),
        )
        assert len(objective) > 1
        assert np.all(np.diff(objective) <= 1e-6 * np.abs(objective[:-1]))
        problem = Problem(DetectionTimes(tags, 1.0), result.priors, result.bounds)
        # a prior's own slopes are at their best in one, and where the solve left them in the other
        assert problem.objective(result.image) <= objective[-1] * (1.0 + 1e-5)
        assert problem.objective(result.image) == pytest.approx(objective[-1], rel=1e-3)
        error = np.abs(result.image - scene)
        alone = np.abs(DetectionTimes(tags, 1.0).estimate() - scene)
        assert error.mean() < alone.mean() / factor
        assert np.median(error) < 0.3 * CORE


@pytest.mark.parametrize("seed", SEEDS)
def test_the_start_is_near_already(seed):
    """On planes total variation takes more off it; the post stays where it stood."""
    scene = post()
    tags = acquire(scene, seed)
    result = depth(tags, np.ones(scene.shape), priors.TotalVariation(), QUICK)
    before, after = np.abs(result.start - scene), np.abs(result.image - scene)
    assert before.mean() < 0.1
    assert after.mean() < before.mean()
    assert after[4:28, 10:12].mean() < before[4:28, 10:12].mean() + 0.5 * CORE


def test_wrong_surfaces_are_as_many_as_said():
    """On four seeds in all, within a factor of two, and mostly where they are said to be."""
    said, wrong = [], []
    for seed in SEEDS:
        scene = post()
        result = depth(acquire(scene, seed), np.ones(scene.shape), effort=QUICK)
        said.append(result.wrong_surface)
        wrong.append(np.abs(result.image - scene) > 3.0 * CORE)
    said, wrong = np.array(said), np.array(wrong)
    assert 0.5 < said.sum() / wrong.sum() < 2.0
    assert said[wrong].mean() > 5.0 * said[~wrong].mean()
    assert wrong[said < 0.02].mean() < 0.01


def test_what_is_said_of_pixels():
    scene = post()
    tags = acquire(scene, 1, signal=2.0)
    result = depth(tags, np.ones(scene.shape), effort=QUICK)
    near = np.abs(tags.time * METRES - scene[tags.row, tags.column]) < 4.0 * CORE
    signal = np.zeros(scene.shape)
    np.add.at(signal, (tags.row[near], tags.column[near]), 1)
    np.testing.assert_array_equal(result.filled, result.signal_tags < 0.5)
    assert np.mean(result.filled == (signal == 0)) > 0.98
    assert np.mean(np.abs(result.signal_tags - signal) < 0.3) > 0.95
    assert result.unit == "m"
    assert result.uncertainty.shape == scene.shape
    assert result.target.mean() > 0.95


def test_uncertainty_covers_two_thirds_of_the_errors():
    """On the surface that a pixel is on; in the mean over draws of a scene that is small."""
    scene, inside = slopes()[:32, :48], []
    for seed in SEEDS:
        tags = acquire(scene, seed, signal=2.0, background=2.0)
        result = depth(tags, np.ones(scene.shape), effort=Effort(max_iterations=1000))
        error = np.abs(result.image - scene)
        inside.append(np.mean((error < result.uncertainty)[error < 3.0 * CORE]))
    assert 0.55 < np.mean(inside) < 0.85


def test_a_tolerance_is_recorded_and_kept():
    scene = post()[:, :20]
    tags = acquire(scene, 0, signal=2.0)
    loose = depth(tags, np.ones(scene.shape), priors.TotalVariation(), Effort(tolerance=0.3))
    assert loose.tolerance == 0.3
    assert loose.status is Status.CONVERGED
    assert loose.diagnostics.relative_gap <= 0.3
    left_out = depth(tags, np.ones(scene.shape), priors.TotalVariation(), Effort(max_iterations=10))
    assert left_out.tolerance == 1e-2
    assert (left_out.status is Status.CONVERGED) == (left_out.diagnostics.relative_gap <= 1e-2)


def test_a_callback_can_stop():
    scene = post()[:, :20]
    result = depth(acquire(scene, 0), np.ones(scene.shape), effort=Effort(1e-9, callback=lambda *_: True))
    assert result.status is Status.STOPPED


@pytest.mark.parametrize("seed", SEEDS)
def test_generalized_variation_converges(seed):
    scene = slopes()[::4, ::4]
    tags = acquire(scene, seed, signal=1.0, background=1.0)
    result = depth(tags, np.ones(scene.shape))
    assert result.status is Status.CONVERGED
    assert result.diagnostics.relative_gap <= 1e-2


@pytest.mark.parametrize("seed", SEEDS)
def test_generalized_variation_converges_closely(seed):
    scene = slopes()[::4, ::4]
    tags = acquire(scene, seed, signal=1.0, background=1.0)
    effort = Effort(1e-3, weight="rule", judge=False)
    assert depth(tags, np.ones(scene.shape), effort=effort).status is Status.CONVERGED


# Settings


def test_a_prior_that_is_given_whole_is_left_alone():
    scene = np.full((12, 12), 3.0)
    tags = acquire(scene, 5)
    likelihood = DetectionTimes(tags, 1.0)
    given = priors.TotalVariation(3.0)
    assert open_settings(given, likelihood, scene) == [given]
    first, second = open_settings(given + priors.Smoothness(), likelihood, scene)
    assert first is given
    assert second.weight > 0.0
    assert depth(tags, np.ones(scene.shape), given, QUICK).priors == (given,)


def test_open_weights_follow_the_information_and_open_edges_the_start():
    scene = np.full((30, 30), 3.0)
    scene[:, 15:] = 4.0
    weights = []
    for many in (1.0, 4.0):
        likelihood = DetectionTimes(acquire(scene, 6, 0.5 * many, 0.5 * many), 1.0)
        (settled,) = open_settings(priors.TotalVariation(), likelihood, scene)
        weights.append(settled.weight)
        expected = 1.0 / (1.0 + 1.0 / (2.0 * CORE))
        np.testing.assert_allclose(settled.edge_weights[1][:, 14], expected, rtol=1e-6)
        np.testing.assert_array_equal(np.delete(settled.edge_weights[1], 14, axis=1), 1.0)
        np.testing.assert_array_equal(settled.edge_weights[0], 1.0)
    assert weights[1] / weights[0] == pytest.approx(2.0, rel=0.1)


def test_edge_weights_that_are_given_stay():
    scene = np.full((6, 7), 3.0)
    edges = np.full((2, 6, 7), 0.25)
    likelihood = DetectionTimes(acquire(scene, 6, 5.0), 1.0)
    (settled,) = open_settings(priors.TotalVariation(edge_weights=edges), likelihood, scene + np.eye(6, 7))
    assert settled.weight > 0.0
    np.testing.assert_array_equal(settled.edge_weights, 0.25)


def test_bounds_hold_the_start_and_some_room():
    scene = post()
    likelihood = DetectionTimes(acquire(scene, 7), 1.0)
    low, high = scene_bounds(likelihood, scene)
    assert (low, high) == (pytest.approx(2.5 - 8.0 * CORE), pytest.approx(6.0 + 8.0 * CORE))
    ends = np.where(scene > 5.0, METRES * PERIOD - 0.01, 0.01)
    assert scene_bounds(likelihood, ends) == (0.0, pytest.approx(METRES * PERIOD))


def test_a_dark_target_is_taken_to_have_some_reflectivity():
    tags = acquire(np.full((4, 5), 3.0), 8, signal=100.0)
    np.testing.assert_allclose(faintest_target(tags, np.ones((4, 5))), 0.1)
    np.testing.assert_allclose(faintest_target(tags, np.full((4, 5), 1e-6)), 0.1 / 100.0)
    none = replace(tags, trials=np.where(np.eye(4, 5) > 0, 0.0, 1000.0), row=[], column=[], time=[])
    np.testing.assert_array_equal(np.isfinite(faintest_target(none, np.ones((4, 5)))), True)


def test_a_prior_for_the_conic_solver_is_refused():
    tags = acquire(np.full((6, 6), 3.0), 8)
    prior = priors.TotalVariation(1.0)
    object.__setattr__(prior, "conic_only", True)
    with pytest.raises(InputError, match="prior TotalVariation exists only as a cvxpy expression"):
        depth(tags, np.ones((6, 6)), prior)


@pytest.mark.parametrize(
    ("reflectivity", "message"),
    [
        (np.full((6, 6), np.nan), r"reflectivity at \(0, 0\) is nan; give a finite number, 0 or more"),
        (np.ones((6, 5)), "reflectivity has shape"),
        (np.full((6, 6), -1.0), r"reflectivity at \(0, 0\) is -1.0; give a finite number, 0 or more"),
    ],
)
def test_bad_reflectivity(reflectivity, message):
    with pytest.raises(InputError, match=message):
        depth(acquire(np.full((6, 6), 3.0), 8), reflectivity)


def test_no_signal_anywhere_is_filled_everywhere():
    tags = acquire(np.full((8, 8), 3.0), 9)
    result = depth(tags, np.zeros((8, 8)), effort=QUICK)
    assert np.isfinite(result.image).all()
    assert np.isfinite(result.uncertainty).all()
    nothing = replace(tags, row=[], column=[], time=[])
    assert depth(nothing, np.zeros((8, 8)), effort=QUICK).filled.all()


def test_a_background_above_all_signal():
    scene = np.full((4, 4), 3.0)
    result = depth(acquire(scene, 0, 1.0, 2000.0), np.zeros((4, 4)), effort=QUICK)
    assert np.isfinite(result.image).all()


# The Cramer-Rao bound and the clock

BOUND_SHAPE = (20, 25)


def flat_target(seed, signal, ratio, interval, phase):
    """Tags of a flat target as `phase` places it within an interval of the clock, and its depth.

    ratio: of signal to background.
    """
    rng = np.random.default_rng(seed)
    pixels = BOUND_SHAPE[0] * BOUND_SHAPE[1]
    at = 27e-9 if interval is None else (67.0 + phase) * interval
    of_signal, of_noise = rng.poisson(signal, pixels), rng.poisson(signal / ratio, pixels)
    time = np.append(at + RMS * rng.standard_normal(of_signal.sum()), PERIOD * rng.random(of_noise.sum()))
    if interval is not None:
        time = interval * (np.floor(time / interval) + 0.5)
    pixel = np.append(np.repeat(np.arange(pixels), of_signal), np.repeat(np.arange(pixels), of_noise))
    tags = TimeTags(
        *np.divmod(pixel, BOUND_SHAPE[1]), time, shape=BOUND_SHAPE, trials=1000, period=PERIOD, pulse=PULSE,
        gain=signal / 1000, background=signal / ratio / 1000, interval=interval,
    )  # fmt: skip
    return tags, METRES * at


CLOCKS = [(None, 0.0), (0.4e-9, 0.0), (0.4e-9, 0.25), (0.4e-9, 0.5)]


@pytest.mark.parametrize(("interval", "phase"), CLOCKS)
@pytest.mark.parametrize(
    ("signal", "ratio", "published"), [(20.0, np.inf, 1.0), (20.0, 1.0, 0.940218), (60.0, 0.04, 0.575780)]
)
def test_a_pixel_alone_comes_near_the_bound(interval, phase, signal, ratio, published):
    """Bar-David 1969; `published` is the information of an exact signal tag, times the pulse's variance."""
    squares, bounds = [], []
    for seed in range(5):
        tags, z = flat_target(seed, signal, ratio, interval, phase)
        likelihood = DetectionTimes(tags, 1.0)
        information = likelihood.fisher_information(np.full(BOUND_SHAPE, z))
        squares.append(np.mean((likelihood.estimate() - z) ** 2))
        bounds.append(np.mean(1.0 / information))
        each = information.mean() * CORE**2 / signal
        assert each == pytest.approx(published, rel=0.03) if interval is None else each < published
    assert np.sqrt(np.mean(squares) / np.mean(bounds)) == pytest.approx(1.0, abs=0.1)


@pytest.mark.parametrize(("interval", "phase"), CLOCKS)
def test_where_the_bound_is_not_tight(interval, phase):
    """20 signal tags among 500: a few in a thousand pixels fit better elsewhere, the others are near it."""
    squares, bounds, astray = [], [], []
    for seed in range(5):
        tags, z = flat_target(seed, 20.0, 0.04, interval, phase)
        likelihood = DetectionTimes(tags, 1.0)
        error = np.abs(likelihood.estimate() - z)
        far = error > 5.0 * CORE
        truth = np.full(BOUND_SHAPE, z)
        assert np.all(likelihood.value_map(truth)[far] > 0.0)  # so the truth fits less well there
        squares.append(np.mean(error[~far] ** 2))
        bounds.append(np.mean(1.0 / likelihood.fisher_information(truth)))
        astray.append(far.mean())
    assert np.sqrt(np.mean(squares) / np.mean(bounds)) == pytest.approx(1.0, abs=0.1)
    assert np.mean(astray) < 0.01


def test_a_coarse_clock_costs_little_and_a_known_dither_less():
    """Two detections a pixel, a clock half as coarse again as the pulse; the same photons in all three.

    A few pixels in ten thousand are on a wrong surface, which by themselves are a tenth of the mean error.
    """
    scene = slopes()
    clocks = ({}, {"interval": 0.4e-9}, {"interval": 0.4e-9, "dither": 0.4e-9})
    near, whole, far = np.zeros((3, 3))
    for seed in range(3):
        for k, clock in enumerate(clocks):
            tags = acquire(scene, seed, 1.0, 1.0, **clock)
            error = np.abs(depth(tags, np.ones(scene.shape), effort=QUICK).image - scene)
            near[k] += error[error < 0.3].mean()
            whole[k] += error.mean()
            far[k] += np.mean(error > 0.3)
    assert near[1] <= 1.25 * near[0]
    assert near[2] <= 1.15 * near[0]
    assert np.all(whole[1:] <= 1.4 * whole[0])
    assert np.all(far[1:] <= far[0] + 3 * 5e-4)
