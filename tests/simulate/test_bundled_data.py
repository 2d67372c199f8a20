"""The bundled acquisitions: made again from their scripts, and holding what data/README.md says."""

import importlib.util
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest
from scipy import constants

from recon.acquisition import Frames, TimeTags
from recon.files import load, load_note, load_truth

DATA = Path(__file__).parents[2] / "data"
SUM_OF_SIZES = 8_000_000  # bytes


def script(name: str) -> ModuleType:
    spec = importlib.util.spec_from_file_location(name, DATA / f"{name}.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def bench() -> tuple[TimeTags, np.ndarray, np.ndarray]:
    truth = load_truth(DATA / "bench.h5")
    return load(DATA / "bench.h5"), truth["depth"], truth["reflectivity"]


@pytest.fixture(scope="module")
def coupon() -> tuple[Frames, np.ndarray]:
    return load(DATA / "coupon.h5"), load_truth(DATA / "coupon.h5")["electron_yield"]


def test_the_bench_is_what_its_script_makes(bench):
    acquisition, depth, reflectivity = bench
    make = script("make_bench")
    for stored, made in zip((depth, reflectivity), make.render(), strict=True):
        np.testing.assert_allclose(made, stored, rtol=1e-6)
    again = make.draw(depth, reflectivity)
    for name in ("row", "column"):
        np.testing.assert_array_equal(getattr(again, name), getattr(acquisition, name))
    np.testing.assert_allclose(again.time, acquisition.time, rtol=1e-12, atol=1e-21)
    assert (again.period, again.trials, again.background) == (1e-7, 1000, 0.0005)
    assert again.pulse.rms == acquisition.pulse.rms == 0.27e-9
    assert again.gain == pytest.approx(acquisition.gain, rel=1e-12)


def test_the_coupon_is_what_its_script_makes(coupon):
    acquisition, eta = coupon
    make = script("make_coupon")
    np.testing.assert_allclose(make.render(), eta, rtol=1e-5)
    np.testing.assert_array_equal(make.draw(eta).counts, acquisition.counts)
    assert acquisition.dose == 0.125


def test_one_detection_a_pixel_half_of_them_background(bench):
    acquisition, depth, reflectivity = bench
    pixels = depth.size
    assert acquisition.shape == depth.shape == (256, 256)
    assert acquisition.trials * acquisition.gain * reflectivity.mean() == pytest.approx(0.5, rel=1e-5)
    assert acquisition.trials * acquisition.background == pytest.approx(0.5)
    assert acquisition.time.size == pytest.approx(pixels, abs=4 * np.sqrt(pixels))
    late = acquisition.time - 2 * depth[acquisition.row, acquisition.column] / constants.c
    near = np.count_nonzero(np.abs(late) < 6 * 0.27e-9)
    expected = 0.5 * pixels * (1 + 12 * 0.27e-9 / 100e-9)
    assert near == pytest.approx(expected, abs=4 * np.sqrt(expected))


def test_the_bench_shows_true_ranges(bench):
    """Closed forms at single rays: the balls, the wall and the steps, computed apart from the renderer."""
    _, depth, _ = bench

    def ray(column: int, row: int) -> np.ndarray:
        ahead = np.array([column - 127.5, row - 127.5, 350.0])
        return ahead / np.linalg.norm(ahead)

    for centre, radius in ((np.array([-0.92, 0.09, 3.42]), 0.2), (np.array([-0.36, 0.16, 3.0]), 0.09)):
        column, row = np.rint(127.5 + 350 * centre[:2] / centre[2]).astype(int)
        towards = ray(column, row) @ centre
        miss = centre @ centre - towards**2
        assert depth[row, column] == pytest.approx(towards - np.sqrt(radius**2 - miss), abs=1e-5)
    wall = 4.6 / (ray(100, 130)[2] - 0.06 * ray(100, 130)[0])
    assert depth[130, 100] == pytest.approx(wall, abs=1e-5)
    ahead = [depth[180, column] * ray(column, 180)[2] for column in (128, 140, 151, 163, 172)]
    np.testing.assert_allclose(np.diff(ahead), [0.05, 0.04, 0.03, 0.02], atol=1e-5)


def test_the_bench_is_demanding(bench):
    _, depth, reflectivity = bench
    assert 2 < depth.min() < 3
    assert 4.5 < depth.max() < 6
    assert np.mean(reflectivity < 0.06) > 0.01  # the dark object
    assert reflectivity.max() > 0.9
    across = np.abs(np.diff(depth, axis=1))
    assert np.mean(across > 0.3) > 0.01  # occlusions
    jumps = np.diff(depth, axis=1)
    thin = (jumps[:, :-1] < -0.3) & (jumps[:, 1:] > 0.3)  # in front of both neighbours
    assert thin.sum() > 200


def test_yields_and_counts_of_the_coupon(coupon):
    acquisition, eta = coupon
    assert acquisition.counts.shape == (160, 256, 256)
    assert eta.shape == (256, 256)
    assert 1 < eta.min() < 1.2
    assert 5 < eta.max() < 6
    eta = eta.astype(float)
    mean, variance = 20 * eta.sum(), 20 * np.sum(eta * (1 + eta))  # Neyman 1939, over all frames and pixels
    assert acquisition.counts.sum(dtype=float) == pytest.approx(mean, abs=4 * np.sqrt(variance))


@pytest.mark.parametrize("name", ["bench.h5", "coupon.h5"])
def test_the_note_says_that_the_scene_is_invented(name):
    assert load_note(DATA / name).startswith("Invented")


def test_the_files_are_small():
    assert sum(path.stat().st_size for path in DATA.glob("*.h5")) < SUM_OF_SIZES
