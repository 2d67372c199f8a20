"""Files that are missing, incomplete, of another kind, or made to do harm: one sentence, nothing else."""

import os

import h5py
import numpy as np
import pytest

from recon.errors import InputError
from recon.files import guard, load, load_note, load_truth, save

DETECTOR = "entry/instrument/detector"


@pytest.fixture
def path(tags, tmp_path):
    path = tmp_path / "a.h5"
    save(path, tags, truth={"depth": np.ones((6, 5))}, note="n")
    return path


def refused(path, message, read=load):
    with pytest.raises(InputError, match=message) as caught:
        read(path)
    sentence = str(caught.value)
    assert sentence.startswith(str(path))
    assert sentence.endswith(".")
    assert "\n" not in sentence


def replaced(path, place, **dataset):
    """Put another dataset in the place of one of the file's."""
    with h5py.File(path, "r+") as file:
        del file[place]
        file.create_dataset(place, **dataset)


def test_places_that_are_no_file(tmp_path):
    for read in (load, load_truth, load_note):
        refused(tmp_path / "none.h5", "does not exist; check the name", read)
        refused(tmp_path, "is not a file; give the name of an acquisition file", read)
    os.mkfifo(tmp_path / "pipe")
    refused(tmp_path / "pipe", "is not a file")


@pytest.mark.parametrize("path", [None, 3.5, "a\0b", b"a\0b"])
def test_what_is_no_path(path):
    with pytest.raises(InputError, match="is not the name of a file"):
        load(path)


def test_permission(path, monkeypatch):
    def forbidden(*_args):
        raise PermissionError

    monkeypatch.setattr(h5py, "File", forbidden)  # a mode would not stop a test that runs as root
    refused(path, "may not be read; change its permissions")


@pytest.mark.parametrize("content", [b"", b"text", b"\x89HDF\r\n\x1a\n", b"PK\x03\x04" + bytes(500)])
def test_other_content(tmp_path, content):
    (tmp_path / "a.h5").write_bytes(content)
    refused(tmp_path / "a.h5", "is not an HDF5 file, or it is truncated or damaged")


def test_a_pickle_is_not_opened(tmp_path):
    np.save(tmp_path / "a.npy", np.array([{}], dtype=object), allow_pickle=True)
    refused(tmp_path / "a.npy", "is not an HDF5 file")


@pytest.mark.parametrize(
    "place",
    [DETECTOR, f"{DETECTOR}/trials", f"{DETECTOR}/gain", f"{DETECTOR}/offset", f"{DETECTOR}/shape",
     "entry/instrument/source/period", "entry/instrument/source/pulse_shape", "entry/events/event_id",
     "entry/events/event_time_offset", "entry/instrument/source/pulse_shape/values"],
)  # fmt: skip
def test_missing_fields_are_named(path, place):
    with h5py.File(path, "r+") as file:
        del file[place]
    refused(path, f"{place}.* is missing; add it")


def test_missing_and_unknown_kinds(path):
    def attribute(name, value):
        with h5py.File(path, "r+") as file:
            file["entry"].attrs[name] = value

    attribute("acquisition", np.bytes_("spectrum"))
    refused(path, "entry@acquisition is spectrum; give one of counts, time_tags, time_histogram, frames")
    attribute("acquisition", np.bytes_("frames"))
    refused(path, "entry/instrument/detector/dose is missing")
    attribute("acquisition", 3)
    refused(path, "entry@acquisition is not a string of fixed length")
    attribute("acquisition", np.bytes_(b"\xff\xfe"))
    refused(path, "entry@acquisition cannot be read")
    attribute("acquisition_version", np.bytes_("2"))
    refused(path, "entry@acquisition_version is 2; give a file of version 1")
    with h5py.File(path, "r+") as file:
        del file["entry"].attrs["acquisition_version"]
    refused(path, "entry@acquisition_version is missing")


@pytest.mark.parametrize(
    ("values", "message"),
    [
        (np.array([b"1"]), "holds .* values; store plain numbers"),
        (np.array(["a"], dtype=h5py.string_dtype()), "holds object values"),
        (np.zeros(90, complex), "holds complex128 values"),
        (np.zeros(90, bool), "holds bool values"),
        (np.zeros(90, [("a", float)]), "holds .* values"),
        (np.zeros((9, 10)), "time has shape|and time"),
        (np.full(90, 1.0), r"time at \(0,\) is 1\.0"),
        (h5py.Empty(float), "is not a dataset"),
    ],
)
def test_wrong_types_and_values(path, values, message):
    replaced(path, "entry/events/event_time_offset", data=values)
    refused(path, message)


def test_wrong_pixels_and_flags(path, counts, tmp_path):
    replaced(path, "entry/events/event_id", data=np.full(90, 30))
    refused(path, r"event_id at \(0,\) is 30; give whole numbers from 0 to 29")
    replaced(path, f"{DETECTOR}/shape", data=[10**6, 10**6])
    refused(path, r"shape is \(1000000, 1000000\)")
    save(tmp_path / "b.h5", counts)
    replaced(tmp_path / "b.h5", f"{DETECTOR}/several_per_trial", data=7)
    refused(tmp_path / "b.h5", "several_per_trial is 7; give 0 or 1")


@pytest.fixture
def clocked_path(clocked, tmp_path):
    save(tmp_path / "c.h5", clocked)
    return tmp_path / "c.h5"


@pytest.fixture
def histogram_path(histogram, tmp_path):
    save(tmp_path / "h.h5", histogram)
    return tmp_path / "h.h5"


@pytest.mark.parametrize("name", ["dead_time", "electronics_dead_time", "dead_time_reset"])
def test_part_of_a_dead_time_is_not_taken_for_none(clocked_path, name):
    with h5py.File(clocked_path, "r+") as file:
        del file[f"{DETECTOR}/{name}"]
    refused(clocked_path, f"{DETECTOR}/{name} is missing; add it")


@pytest.mark.parametrize("name", ["bin_width", "first_edge"])
def test_a_histogram_says_where_its_bins_are(histogram_path, name):
    with h5py.File(histogram_path, "r+") as file:
        del file[f"{DETECTOR}/{name}"]
    refused(histogram_path, f"{DETECTOR}/{name} is missing; add it")


@pytest.mark.parametrize(
    ("place", "value", "message"),
    [
        (f"{DETECTOR}/dead_time", -1.0, r"detector is -1\.0; give a time in seconds"),
        (f"{DETECTOR}/dead_time", [1e-9, 1e-9], r"detector has shape \(2,\)"),
        (f"{DETECTOR}/dead_time", 1e-3, r"detections at .* allows in the trials"),
        (f"{DETECTOR}/dead_time_reset", 2, "dead_time_reset is 2; give 0 or 1"),
        (f"{DETECTOR}/gate", [1e-8, 2e-7], r"gate at \(1,\) is 2e-07"),
        (f"{DETECTOR}/gate", [1e-8, 4e-8], r"time at \(\d+,\) is .*; give seconds within gate"),
        (f"{DETECTOR}/gate", 1e-8, r"gate has shape \(\)"),
        ("entry/events/event_time_dither", np.zeros(89), r"dither has shape \(89,\) and time \(90,\)"),
        ("entry/events/event_time_dither", np.full(90, np.nan), r"dither at \(0,\) is nan"),
        ("entry/events/event_id", np.zeros(0, int), r"row has shape \(0,\)"),
        ("entry/events/event_time_offset", np.zeros((0, 90)), "time is empty"),
    ],
)
def test_wrong_clocks(clocked_path, place, value, message):
    replaced(clocked_path, place, data=value)
    refused(clocked_path, message)


@pytest.mark.parametrize(
    ("place", "value", "message"),
    [
        ("entry/data/detections", np.ones((6, 5)), r"detections has shape \(6, 5\); give a"),
        ("entry/data/detections", np.full((6, 5, 3), -1), r"detections at \(0, 0, 0\) is -1"),
        ("entry/data/detections", np.zeros((6, 5, 0), int), "detections is empty"),
        ("entry/data/detections", np.ones((6, 5, 400), int), "the 400 bins of detections run from"),
        (f"{DETECTOR}/bin_width", 1e-8, "the 40 bins of detections run from"),
    ],
)
def test_wrong_histograms(histogram_path, place, value, message):
    replaced(histogram_path, place, data=value)
    refused(histogram_path, message)


def test_clocks_and_histograms_in_other_units_are_not_misread(clocked_path, histogram_path):
    for path, place in [
        (clocked_path, f"{DETECTOR}/gate"),
        (clocked_path, f"{DETECTOR}/electronics_dead_time"),
        (clocked_path, "entry/events/event_time_dither"),
        (histogram_path, f"{DETECTOR}/bin_width"),
    ]:
        with h5py.File(path, "r+") as file:
            file[place].attrs["units"] = np.bytes_("ns")
        refused(path, f"{place} is in ns; store it in s")
        with h5py.File(path, "r+") as file:
            file[place].attrs["units"] = np.bytes_("s")


def test_histograms_beyond_the_file(histogram_path):
    place = "entry/data/detections"
    replaced(histogram_path, place, shape=(10**4, 10**4, 10**4), dtype="u1", chunks=(1, 100, 100))
    refused(histogram_path, "detections has shape .*, which is 1000000000000 bytes")
    replaced(histogram_path, place, shape=(6, 5, 40), dtype="u1", chunks=(6, 5, 40))
    refused(histogram_path, "but not all of its values are stored")


def test_other_units_are_not_misread(path):
    with h5py.File(path, "r+") as file:
        file["entry/instrument/source/period"].attrs["units"] = np.bytes_("ns")
    refused(path, "entry/instrument/source/period is in ns; store it in s")


def test_a_dataset_in_place_of_a_group(path):
    replaced(path, DETECTOR, data=1.0)
    refused(path, f"{DETECTOR}/trials is missing")
    replaced(path, "entry/truth", data=1.0)
    refused(path, "entry/truth is not a group", load_truth)


@pytest.mark.parametrize("make", [h5py.SoftLink, lambda place: h5py.ExternalLink("other.h5", place)])
@pytest.mark.parametrize("place", ["entry/events/event_time_offset", DETECTOR, "entry/truth"])
def test_links_are_not_followed(path, tmp_path, make, place):
    (tmp_path / "other.h5").write_bytes(path.read_bytes())
    with h5py.File(path, "r+") as file:
        del file[place]
        file[place] = make("/entry/truth/depth")
    refused(path, "is a link to another place", load_truth if place == "entry/truth" else load)


def test_values_outside_the_file_are_not_read(path, tmp_path):
    secret = tmp_path / "secret"
    secret.write_bytes(np.zeros(90).tobytes())
    replaced(path, "entry/events/event_time_offset", shape=90, dtype=float, external=[(str(secret), 0, 720)])
    refused(path, "event_time_offset keeps its values outside the file")
    layout = h5py.VirtualLayout(90, float)
    layout[:] = h5py.VirtualSource(str(path), "entry/events/event_id", shape=90)
    with h5py.File(path, "r+") as file:
        del file["entry/events/event_time_offset"]
        file.create_virtual_dataset("entry/events/event_time_offset", layout)
    refused(path, "event_time_offset keeps its values outside the file")


def test_unusual_filters_are_not_run(path):
    replaced(path, "entry/events/event_time_offset", data=np.zeros(90), compression="lzf")
    refused(path, "event_time_offset is compressed by filter 32000; repack it with gzip")


def test_shapes_beyond_the_file(path):
    place = "entry/events/event_time_offset"
    for settings in ({"chunks": (45,), "compression": "gzip"}, {}):
        replaced(path, place, shape=(10**12,), dtype=float, **settings)
        refused(path, r"event_time_offset has shape \(1000000000000,\), which is 8000000000000 bytes")
        replaced(path, place, shape=(90,), dtype=float, **settings)
        refused(path, "but not all of its values are stored")
    replaced(path, place, shape=(1,), maxshape=(None,), dtype=float, chunks=(1 << 27,), compression="gzip")
    refused(path, "more than such a file can hold")


def test_compression_beyond_what_gzip_can_do(path, monkeypatch):
    """Zeros packed twice shrink a million times."""
    monkeypatch.setattr(guard, "ALWAYS_ALLOWED", 0)
    place = "entry/truth/depth"
    with h5py.File(path, "r+") as file:
        del file[place]
        creation = h5py.h5p.create(h5py.h5p.DATASET_CREATE)
        creation.set_chunk((1 << 22,))
        for _ in range(2):
            creation.set_filter(h5py.h5z.FILTER_DEFLATE, h5py.h5z.FLAG_MANDATORY, (9,))
        space = h5py.h5s.create_simple((1 << 22,))
        dataset = h5py.h5d.create(file.id, place.encode(), h5py.h5t.NATIVE_DOUBLE, space, creation)
        h5py.Dataset(dataset)[...] = 0
    assert path.stat().st_size < 20_000
    refused(path, "entry/truth/depth has shape .* more than such a file can hold", load_truth)


def test_the_memory_of_the_machine_is_a_limit(path, monkeypatch):
    monkeypatch.setattr(guard, "memory_limit", lambda: 1000)
    refused(path, "or this machine can take")
