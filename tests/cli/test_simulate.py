"""fewcount simulate: the same draw as recon.simulate, from every kind of file."""

import json

import numpy as np
import pytest
import tifffile

import recon
from recon import simulate
from recon.files import load_truth, save
from recon.files.tiff import write_tiff

IMAGE = np.linspace(0.2, 1.0, 12 * 9).reshape(12, 9)
COUNTS = ("--trials", 100, "--gain", 0.02, "--background", 0.01, "--seed", 3)


@pytest.fixture
def image_file(tmp_path):
    """Write an image as a file of a kind."""

    def write(name: str, image: np.ndarray = IMAGE, truth: str = "reflectivity"):
        path = tmp_path / name
        if path.suffix == ".npy":
            np.save(path, image)
        elif path.suffix == ".h5":
            save(path, simulate.counts(np.ones((2, 2)), 1, seed=0), truth={truth: image})
        else:
            write_tiff(path, image, truth, "1")
        return path

    return write


@pytest.mark.parametrize("name", ["scene.npy", "scene.tif", "scene.TIFF", "scene.h5"])
def test_counts(run, image_file, tmp_path, name):
    path = image_file(name)
    ran = run("simulate", "counts", path, *COUNTS, "--out", "drawn.h5")
    assert (ran.code, ran.err) == (0, "")
    image = IMAGE.astype(np.float32) if path.suffix.lower().startswith(".tif") else IMAGE
    expected = simulate.counts(image, 100, 0.02, 0.01, seed=3)
    drawn = recon.load(tmp_path / "drawn.h5")
    np.testing.assert_array_equal(drawn.detections, expected.detections)
    assert (drawn.trials, drawn.gain, drawn.background) == (100, 0.02, 0.01)
    np.testing.assert_array_equal(load_truth(tmp_path / "drawn.h5")["reflectivity"], image)
    assert f"{expected.detections.sum()} detections" in ran.out


def test_counts_until_the_first_detection(run, image_file, tmp_path):
    words = ("--gain", 0.2, "--stop-after", 1, "--seed", 3, "--out", "drawn.h5", "--quiet")
    assert run("simulate", "counts", image_file("scene.npy"), *words) == (0, "", "")
    drawn = recon.load(tmp_path / "drawn.h5")
    expected = simulate.counts(IMAGE, None, 0.2, stop_after=1, seed=3)
    np.testing.assert_array_equal(drawn.trials, expected.trials)
    assert np.all(drawn.detections == 1)


def test_counts_of_several_per_trial(run, image_file, tmp_path):
    run("simulate", "counts", image_file("scene.npy"), "--several-per-trial", *COUNTS, "--out", "drawn.h5")
    drawn = recon.load(tmp_path / "drawn.h5")
    assert drawn.several_per_trial
    expected = simulate.counts(IMAGE, 100, 0.02, 0.01, several_per_trial=True, seed=3)
    np.testing.assert_array_equal(drawn.detections, expected.detections)


def test_time_tags(run, image_file, tmp_path):
    depth = image_file("depth.npy", 3.0 + IMAGE)
    settings = ("--trials", 200, "--period", 1e-7, "--pulse-rms", 3e-10, "--gain", 0.01, "--seed", 5)
    more = ("--background", 0.002, "--time-zero", 2e-9, "--refractive-index", 1.3, "--interval", 1e-10)
    ran = run("simulate", "tags", depth, image_file("scene.npy"), *settings, *more, "--out", "t.h5", "--json")
    assert (ran.code, ran.err) == (0, "")
    pulse = recon.GaussianPulse(3e-10)
    expected = simulate.time_tags(
        3.0 + IMAGE, IMAGE, 200, 1e-7, pulse, 0.01, 0.002, time_zero=2e-9, refractive_index=1.3,
        interval=1e-10, seed=5,
    )  # fmt: skip
    drawn = recon.load(tmp_path / "t.h5")
    np.testing.assert_array_equal(drawn.time, expected.time)
    np.testing.assert_array_equal(drawn.counts().detections, expected.counts().detections)
    assert (drawn.interval, drawn.time_zero, drawn.refractive_index) == (1e-10, 2e-9, 1.3)
    assert set(load_truth(tmp_path / "t.h5")) == {"depth", "reflectivity"}
    said = json.loads(ran.out)
    assert said["file"] == "t.h5"
    assert said["acquisition"]["kind"] == "time tags"
    assert said["acquisition"]["detections"] == expected.time.size


def test_frames(run, image_file, tmp_path):
    eta = image_file("yield.npy", 3.0 * IMAGE)
    ran = run("simulate", "frames", eta, "--dose", 0.125, "--frames", 7, "--seed", 2, "--out", "f.h5")
    assert ran.code == 0
    expected = simulate.frames(3.0 * IMAGE, 0.125, 7, seed=2)
    np.testing.assert_array_equal(recon.load(tmp_path / "f.h5").counts, expected.counts)
    np.testing.assert_array_equal(load_truth(tmp_path / "f.h5")["electron_yield"], 3.0 * IMAGE)


@pytest.mark.parametrize(
    ("image", "said"),
    [
        (-IMAGE, "image at (0, 0) is -0.2"),
        (np.where(IMAGE > 0.9, np.nan, IMAGE), "is nan"),
        (IMAGE[0], "image has shape (9,)"),
        (np.zeros((0, 3)), "image is empty"),
        (IMAGE.astype(complex), "holds complex128 values"),
    ],
)
def test_images_that_cannot_be_used(run, image_file, tmp_path, image, said):
    ran = run("simulate", "counts", image_file("scene.npy", image), *COUNTS, "--out", "drawn.h5")
    assert ran.code == 2
    assert ran.out == ""
    assert said in ran.err
    assert ran.err.count("\n") == 1
    assert not (tmp_path / "drawn.h5").exists()


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("--trials", -1), "trials is -1.0"),
        (("--trials", 10, "--gain", 0), "gain is 0.0"),
        ((), "trials is None"),
        (("--trials", 10, "--seed", -1), "seed is -1"),
        (("--trials", 10, "--out", "no/such/folder/drawn.h5"), "directory that does not exist"),
    ],
)
def test_settings_that_cannot_be_used(run, image_file, tmp_path, words, said):
    ran = run("simulate", "counts", image_file("scene.npy"), "--seed", 1, "--out", "drawn.h5", *words)
    assert ran.code == 2
    assert said in ran.err
    assert [path.name for path in tmp_path.iterdir()] == ["scene.npy"]


def test_a_truth_that_is_not_in_the_file(run, image_file, tmp_path):
    path = image_file("scene.h5", truth="temperature")
    ran = run("simulate", "counts", path, *COUNTS, "--out", "drawn.h5")
    assert ran.code == 2
    assert "has no truth reflectivity (it has temperature)" in ran.err


def test_a_tiff_from_elsewhere(run, tmp_path):
    tifffile.imwrite(tmp_path / "whole.tif", np.arange(1, 13, dtype=np.uint16).reshape(3, 4))
    ran = run("simulate", "frames", "whole.tif", "--dose", 1, "--frames", 2, "--seed", 1, "--out", "f.h5")
    assert ran.code == 0
    assert recon.load(tmp_path / "f.h5").shape == (3, 4)
