"""The depth task on scenes with known truth: accuracy, monotony, flags, and what is left to the user."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import constants
from scipy.ndimage import distance_transform_edt

import priors
from recon import Problem
from recon.acquisition import GaussianPulse
from recon.errors import InputError
from recon.imaging.depth import depth, open_settings, pooled_depth, scene_bounds
from recon.imaging.task import Effort
from recon.likelihoods import DetectionTimes
from recon.simulate import time_tags

SEEDS = range(3)
PERIOD = 100e-9
PULSE = GaussianPulse(0.27e-9)
CORE = 0.5 * constants.c * 0.27e-9
QUICK = Effort(tolerance=2e-3, max_iterations=1500)


def acquire(scene, seed, detections=1.0, ratio=1.0, reflectivity=None):
    """Tags at a signal-to-background ratio; signal in proportion to reflectivity."""
    reflectivity = np.ones(scene.shape) if reflectivity is None else reflectivity
    signal = detections * ratio / (1.0 + ratio)
    gain = signal / 1000 / reflectivity.mean()
    return time_tags(scene, reflectivity, 1000, PERIOD, PULSE, gain, (detections - signal) / 1000, seed=seed)


def steps():
    """A slope behind, a block in front of it, and a bar in front of both; 64 x 64."""
    row, column = np.mgrid[:64, :64]
    scene = 4.0 + 0.004 * column + 0.002 * row
    scene[20:50, 12:40] = 3.2
    scene[:, 48:52] = 2.5
    return scene


@pytest.mark.parametrize("seed", SEEDS)
def test_depth_lowers_the_objective_and_the_error(seed):
    scene = steps()
    tags = acquire(scene, seed, detections=2.0)
    ones = np.ones(scene.shape)
    result = depth(tags, ones, effort=QUICK)
    problem = Problem(DetectionTimes(tags, ones), result.priors, result.bounds)
    assert problem.objective(result.image) < problem.objective(result.start.image)
    objective = result.diagnostics.trace.objective
    assert np.all(np.diff(objective) <= 1e-6 * objective[:-1])
    error = np.abs(result.image - scene)
    assert error.mean() < np.abs(result.start.image - scene).mean()
    assert np.median(error) < 0.2 * CORE
    alone = np.abs(DetectionTimes(tags, ones).estimate() - scene)
    assert error.mean() < 0.1 * alone.mean()


@pytest.mark.parametrize("seed", SEEDS[:2])
def test_open_scene(seed):
    """Best Gaussian window at signal-to-background 1 (measured on a prototype): .059 m, .0115 m, 6.0 %."""
    scene, reflectivity = open_scene()
    result = depth(acquire(scene, seed, reflectivity=reflectivity), reflectivity, effort=QUICK)
    for image in (result.start.image, result.image):
        error = np.abs(image - scene)
        assert error.mean() <= 0.059
        assert np.median(error) <= 0.0115
        assert np.mean(error > 0.1) <= 0.06


def open_scene():
    """scikit-image's stereo_motorcycle: depth (m) and reflectivity, 240 x 360."""
    from skimage import data

    left, _, disparity = data.stereo_motorcycle()
    nearest = distance_transform_edt(~np.isfinite(disparity), return_distances=False, return_indices=True)
    scene = 994.978 * 0.193001 / (disparity[tuple(nearest)] + 31.086)
    reflectivity = 0.05 + 0.9 * left.mean(axis=2) / 255.0
    return scene[::2, ::2][:240, :360], reflectivity[::2, ::2][:240, :360]


def test_pixels_without_signal_are_filled_and_flagged():
    scene = np.full((40, 40), 3.0)
    tags = acquire(scene, 3, detections=4.0, ratio=20.0)
    mask = np.ones(scene.shape, bool)
    mask[18:21] = False
    result = depth(replace(tags, mask=mask), np.ones(scene.shape), effort=QUICK)
    assert result.filled[18:21].all()
    assert np.all(result.signal_tags[18:21] == 0.0)
    assert np.abs(result.image - scene)[18:21].max() < 0.5 * CORE
    seen = np.zeros(scene.shape, int)
    signal = np.abs(0.5 * constants.c * tags.time - 3.0) < 4.0 * CORE
    np.add.at(seen, (tags.row[signal], tags.column[signal]), 1)
    assert np.mean(result.filled[mask] == (seen == 0)[mask]) > 0.99
    low, high = result.bounds
    np.testing.assert_allclose(result.uncertainty[result.filled], (high - low) / np.sqrt(12.0), rtol=1e-6)
    assert result.uncertainty[~result.filled].max() < 1.2 * CORE


def test_uncertainty_covers_a_pixel_by_itself():
    """From 20 signal detections on, with the prior all but off, errors are as large as stated."""
    scene = np.full((40, 40), 3.0)
    tags = acquire(scene, 4, detections=60.0)
    result = depth(tags, np.ones(scene.shape), priors.TotalVariation(1e-6), QUICK)
    normalised = (result.image - scene) / result.uncertainty
    assert np.sqrt(np.mean(normalised**2)) == pytest.approx(1.0, abs=0.1)


def test_a_prior_that_is_given_whole_is_left_alone():
    scene = np.full((12, 12), 3.0)
    likelihood = DetectionTimes(acquire(scene, 5), np.ones(scene.shape))
    given = priors.TotalVariation(3.0)
    assert open_settings(given, likelihood, scene) == [given]
    first, second = open_settings(given + priors.Smoothness(), likelihood, scene)
    assert first is given
    assert second.weight > 0.0


def test_open_weights_follow_the_information_and_open_edges_the_start():
    scene = np.full((30, 30), 3.0)
    scene[:, 15:] = 4.0
    weights = []
    for detections in (1.0, 4.0):
        likelihood = DetectionTimes(acquire(scene, 6, detections), np.ones(scene.shape))
        (settled,) = open_settings(priors.TotalVariation(), likelihood, scene)
        weights.append(settled.weight)
        expected = 1.0 / (1.0 + 1.0 / (2.0 * CORE))
        np.testing.assert_allclose(settled.edge_weights[1][:, 14], expected, rtol=1e-6)
        np.testing.assert_array_equal(np.delete(settled.edge_weights[1], 14, axis=1), 1.0)
        np.testing.assert_array_equal(settled.edge_weights[0], 1.0)
    assert weights[1] / weights[0] == pytest.approx(2.0, rel=0.1)


def test_bounds_leave_stray_pixels_out():
    scene = steps()
    tags = acquire(scene, 7, detections=2.0)
    likelihood = DetectionTimes(tags, np.ones(scene.shape))
    start = pooled_depth(tags, np.ones(scene.shape), 1.2)
    image = scene.astype(np.float32)
    image[30:32, 3:5] = 13.0
    low, high = scene_bounds(likelihood, replace(start, image=image))
    assert scene.min() - 16.0 * CORE <= low < scene.min()
    assert scene.max() < high <= scene.max() + 16.0 * CORE


def test_a_prior_for_the_conic_solver_is_refused():
    tags = acquire(np.full((6, 6), 3.0), 8)
    prior = priors.TotalVariation(1.0)
    object.__setattr__(prior, "conic_only", True)
    with pytest.raises(InputError, match="prior TotalVariation exists only as a cvxpy expression"):
        depth(tags, np.ones((6, 6)), prior)


def test_no_signal_anywhere_is_filled_everywhere():
    tags = acquire(np.full((8, 8), 3.0), 9)
    result = depth(tags, np.zeros((8, 8)), effort=QUICK)
    assert result.filled.all()
    assert np.isfinite(result.image).all()
    assert np.isfinite(result.uncertainty).all()
