"""A depth image as points in space."""

import dataclasses

import numpy as np
import pytest

import recon
from recon.imaging import point_cloud


@pytest.fixture(scope="module")
def found() -> recon.imaging.Reconstruction:
    depth = np.full((20, 30), 4.0)
    tags = recon.simulate.time_tags(
        depth, np.ones_like(depth), 1000, 1e-7, recon.GaussianPulse(3e-10), 5e-3, 1e-3, seed=0
    )
    return recon.reconstruct(tags, weight="rule")


def test_parallel_rays(found) -> None:
    cloud = point_cloud(found.depth, found.reflectivity, pitch=(0.1, 0.2), filled=True)
    assert cloud.size == 600
    rows, columns = cloud["row"], cloud["column"]
    np.testing.assert_allclose(cloud["x"], 0.2 * (columns - 14.5))
    np.testing.assert_allclose(cloud["y"], 0.1 * (9.5 - rows))
    np.testing.assert_array_equal(cloud["z"], found.depth.image[rows, columns])
    np.testing.assert_array_equal(cloud["uncertainty"], found.depth.uncertainty[rows, columns])


def test_rays_from_the_instrument_keep_their_length(found) -> None:
    cloud = point_cloud(found.depth, found.reflectivity, field_of_view=(0.5, 0.9), filled=True)
    length = np.sqrt(cloud["x"] ** 2 + cloud["y"] ** 2 + cloud["z"] ** 2)
    np.testing.assert_allclose(length, found.depth.image[cloud["row"], cloud["column"]], rtol=1e-6)
    left = cloud[(cloud["row"] == 10) & (cloud["column"] == 0)]
    assert np.arctan2(left["x"], left["z"]) == pytest.approx(-0.45 * 29 / 30, rel=1e-3)


def test_pixels_without_target_are_left_out(found) -> None:
    target = found.depth.target.copy()
    target[:5] = 0.2
    surface = dataclasses.replace(found.depth, target=target)
    assert point_cloud(surface, found.reflectivity, pitch=1.0, filled=True)["row"].min() == 5
    everything = point_cloud(surface, found.reflectivity, pitch=1.0, least_target=0.1, filled=True)
    assert everything.size == 600


def test_filled_pixels_are_left_out_unless_asked_for(found) -> None:
    cloud = point_cloud(found.depth, found.reflectivity, pitch=1.0)
    assert cloud.size == np.count_nonzero(~found.depth.filled & (found.depth.target >= 0.5))


@pytest.mark.parametrize(
    ("settings", "words"),
    [
        ({}, "give either pitch or field_of_view"),
        ({"pitch": 1.0, "field_of_view": (0.1, 0.1)}, "give either pitch or field_of_view"),
        ({"pitch": -1.0}, "pitch is -1"),
        ({"pitch": (1.0, 2.0, 3.0)}, "pitch has 3 entries"),
        ({"field_of_view": (0.1, 4.0)}, r"field_of_view\[1\] is 4"),
        ({"pitch": 1.0, "least_target": 2.0}, "least_target is 2"),
    ],
)
def test_bad_input(found, settings, words) -> None:
    with pytest.raises(recon.InputError, match=words):
        point_cloud(found.depth, found.reflectivity, **settings)
