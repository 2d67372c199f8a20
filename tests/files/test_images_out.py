"""TIFF and JSON files written for people and programs, and images read for a simulation."""

import json
from xml.etree import ElementTree

import numpy as np
import pytest
import tifffile

from recon.errors import InputError
from recon.files.json_text import json_text, write_json
from recon.files.known_image import load_known_image
from recon.files.tiff import read_tiff, write_tiff

IMAGE = np.random.default_rng(5).normal(3.0, 1.0, (7, 11)).astype(np.float32)


def test_a_tiff_holds_the_image_as_float32_bit_for_bit(tmp_path):
    IMAGE[2, 3] = np.float32(1.1754944e-38)
    write_tiff(tmp_path / "depth.tif", IMAGE, "depth", "m")
    read = tifffile.imread(tmp_path / "depth.tif")
    assert read.dtype == np.float32
    np.testing.assert_array_equal(read, IMAGE)
    np.testing.assert_array_equal(read_tiff(tmp_path / "depth.tif"), IMAGE)


def test_a_tiff_says_what_it_shows_and_in_which_unit(tmp_path):
    write_tiff(tmp_path / "depth.tif", IMAGE, "depth", "m")
    with tifffile.TiffFile(tmp_path / "depth.tif") as file:
        assert file.is_ome
        tree = ElementTree.fromstring(file.ome_metadata)
    inside = "{http://www.openmicroscopy.org/Schemas/OME/2016-06}"
    image = tree.find(f"{inside}Image")
    assert image.get("Name") == "depth"
    assert image.find(f"{inside}Description").text == "depth; unit of the values: m"
    pixels = image.find(f"{inside}Pixels")
    assert (pixels.get("SizeY"), pixels.get("SizeX"), pixels.get("Type")) == ("7", "11", "float")
    assert pixels.find(f"{inside}Channel").get("Name") == "depth (m)"


def test_a_tiff_that_cannot_be_written_leaves_the_old_one(tmp_path, monkeypatch):
    path = tmp_path / "depth.tif"
    write_tiff(path, IMAGE, "depth", "m")
    before = path.read_bytes()

    def half(target, *_, **__):
        target.write_bytes(b"half")
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(tifffile, "imwrite", half)
    with pytest.raises(OSError, match="No space"):
        write_tiff(path, 2 * IMAGE, "depth", "m")
    assert path.read_bytes() == before
    assert list(tmp_path.iterdir()) == [path]


@pytest.mark.parametrize("keep", [0, 3, 40, 200, 500])
def test_a_truncated_tiff_is_refused(tmp_path, keep, caplog):
    path = tmp_path / "depth.tif"
    write_tiff(path, IMAGE, "depth", "m")
    path.write_bytes(path.read_bytes()[:keep])
    with pytest.raises(InputError, match=r"depth\.tif cannot be read as a TIFF"):
        read_tiff(path)
    assert caplog.text == ""


@pytest.mark.parametrize("keep", [0, 5, 100, 140])
def test_a_truncated_array_is_refused(tmp_path, keep):
    path = tmp_path / "scene.npy"
    np.save(path, IMAGE)
    path.write_bytes(path.read_bytes()[:keep])
    with pytest.raises(InputError, match=r"scene\.npy is not a \.npy file of numbers, or is damaged"):
        load_known_image(path, "depth")


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("name", ["scene.npy", "scene.tif"])
def test_bytes_changed_at_random_are_read_or_refused(tmp_path, name, seed):
    """No other exception, and no warning (an error in these tests), reaches the caller."""
    path, rng = tmp_path / name, np.random.default_rng(seed)
    if name == "scene.npy":
        np.save(path, IMAGE)
    else:
        write_tiff(path, IMAGE, "depth", "m")
    good, refused = path.read_bytes(), 0
    for _ in range(100):
        bad = bytearray(good)
        for place in rng.integers(0, min(len(good), 600), 3):
            bad[place] = rng.integers(256)
        path.write_bytes(bad)
        try:
            load_known_image(path, "depth")
        except InputError:
            refused += 1
    assert refused > 0


def test_an_array_that_declares_far_more_than_it_holds_is_refused(tmp_path):
    path = tmp_path / "huge.npy"
    with path.open("wb") as file:
        header = {"descr": "<f8", "fortran_order": False, "shape": (10**7, 10**7)}
        np.lib.format.write_array_header_1_0(file, header)
    with pytest.raises(InputError, match="damaged"):
        load_known_image(path, "depth")


def test_objects_are_never_unpickled(tmp_path):
    path = tmp_path / "scene.npy"
    np.save(path, np.array([{}], dtype=object), allow_pickle=True)
    with pytest.raises(InputError, match=r"not a \.npy file of numbers"):
        load_known_image(path, "depth")


@pytest.mark.parametrize("name", ["scene.npz", "scene", "scene.png"])
def test_other_kinds_of_file_are_refused(tmp_path, name):
    with pytest.raises(InputError, match=r"is none of \.npy, \.tif, \.tiff, \.h5, \.hdf5"):
        load_known_image(tmp_path / name, "depth")


@pytest.mark.parametrize("name", ["absent.npy", "absent.tif", "absent.h5"])
def test_missing_files_are_refused(tmp_path, name):
    with pytest.raises(InputError, match=f"{name} is not a file"):
        load_known_image(tmp_path / name, "depth")


def test_json_has_null_for_what_is_not_finite():
    record = {
        "a": np.float32(0.5), "b": [np.nan, 1.0, -np.inf], "c": {"d": np.arange(3), "e": (), "f": {}},
        "g": None, "h": True, "i": 'quoted "text"\n', "j": np.bool_(False),
    }  # fmt: skip
    text = json_text(record)
    assert json.loads(text, parse_constant=pytest.fail) == {
        "a": 0.5, "b": [None, 1.0, None], "c": {"d": [0, 1, 2], "e": [], "f": {}},
        "g": None, "h": True, "i": 'quoted "text"\n', "j": False,
    }  # fmt: skip
    assert '  "b": [null, 1.0, null],\n' in text


def test_json_is_written_as_a_file(tmp_path):
    write_json(tmp_path / "a.json", {"name": "depth"})
    assert json.loads((tmp_path / "a.json").read_text()) == {"name": "depth"}
