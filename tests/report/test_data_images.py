"""The data, and the conventional image of every pixel by itself."""

import numpy as np
import pytest

import recon
from recon.imaging import Reconstruction
from recon.report.data_images import data_image, detections, pixel_by_pixel


def test_counts_by_themselves_are_the_inverse_of_the_click_law(counts, result):
    alone = pixel_by_pixel(counts, result)["reflectivity"]
    k, n = counts.detections.astype(float), 300.0
    expected = np.maximum((-np.log1p(-k / n) - 0.002) / 0.01, 0.0)
    assert np.isnan(alone[0]).all()
    np.testing.assert_allclose(alone[1:], expected[1:], rtol=1e-5, atol=1e-7)


def test_frames_by_themselves_are_electrons_over_primaries(image):
    rng = np.random.default_rng(0)
    mask = np.arange(16)[:, None] > np.zeros(20)
    frames = recon.Frames(rng.poisson(2.0, (5, *mask.shape)), 0.5, mask)
    alone = pixel_by_pixel(frames, Reconstruction(frames, electron_yield=image))["electron_yield"]
    expected = frames.counts.sum(axis=0) / 2.5
    np.testing.assert_allclose(alone[1:], expected[1:], rtol=1e-6)
    assert np.isnan(alone[0]).all()


def test_tags_by_themselves_are_the_likeliest_depth():
    pulse = recon.GaussianPulse(1e-9)
    times = np.array([20e-9, 60e-9, 60.5e-9, 61e-9, 33e-9])
    tags = recon.TimeTags(
        [0, 0, 0, 0, 1], [0, 0, 0, 0, 1], times, shape=(2, 2), trials=10, period=1e-7, pulse=pulse,
        gain=0.1, background=0.01,
    )  # fmt: skip
    result = recon.reconstruct(tags, tolerance=1e-2)
    alone = pixel_by_pixel(tags, result)["depth"]
    metres = 299792458.0 / 2
    assert alone[0, 0] == pytest.approx(60.5e-9 * metres, rel=1e-3)
    assert alone[1, 1] == pytest.approx(33e-9 * metres, rel=1e-3)
    assert np.isnan(alone[[0, 1], [1, 0]]).all()


def test_many_frames_do_not_overflow():
    frames = recon.Frames(np.full((3, 1, 2), 250, np.uint8), 1.0)
    np.testing.assert_array_equal(detections(frames), [[750, 750]])


def test_the_data_are_detections_and_nothing_where_masked(counts):
    shown = data_image(counts)
    assert (shown.label, shown.whole) == ("detections", True)
    assert np.isnan(shown.values[0]).all()
    np.testing.assert_array_equal(shown.values[1:], counts.detections[1:])


def test_where_trials_differ_the_data_are_detections_per_trial():
    shown = data_image(recon.Counts([[1, 1, 0]], np.array([[4.0, 10.0, 0.0]])))
    assert (shown.label, shown.whole) == ("detections per trial", False)
    np.testing.assert_allclose(shown.values, [[0.25, 0.1, np.nan]])


@pytest.mark.parametrize("rows", [1, 3])
def test_tags_are_counted_pixel_by_pixel(rows):
    pulse = recon.GaussianPulse(1e-10)
    tags = recon.TimeTags([0, 0], [1, 1], [1e-9, 2e-9], shape=(rows, 2), trials=10, period=1e-8, pulse=pulse)
    assert detections(tags)[0, 1] == data_image(tags).values[0, 1] == 2
