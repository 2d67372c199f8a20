"""The layout of an acquisition file is NeXus: groups, classes, signals, axes and units."""

import dataclasses

import h5py
import numpy as np
import pytest

from recon.acquisition import GaussianPulse
from recon.files import load, save


def classes(path):
    found = {}
    with h5py.File(path) as file:
        file.visititems(lambda name, item: found.update({name: item.attrs.get("NX_class", b"").decode()}))
    return {name: nx for name, nx in found.items() if nx}


COMMON = {
    "entry": "NXentry",
    "entry/instrument": "NXinstrument",
    "entry/instrument/detector": "NXdetector",
    "entry/truth": "NXcollection",
    "entry/note": "NXnote",
}


def test_counts(counts, tmp_path):
    save(tmp_path / "a.h5", counts, truth={"yield_": [1.0]}, note="n")
    assert classes(tmp_path / "a.h5") == COMMON | {"entry/data": "NXdata"}
    with h5py.File(tmp_path / "a.h5") as file:
        assert file.attrs["default"] == b"entry"
        assert file["entry"].attrs["default"] == b"data"
        assert file["entry"].attrs["acquisition"] == b"counts"
        data = file["entry/data"]
        assert data.attrs["signal"] == b"detections"
        assert data.attrs["axes"].tolist() == [b"row", b"column"]
        np.testing.assert_array_equal(data["detections"], counts.detections)
        np.testing.assert_array_equal(data["column"], np.arange(5))
        detector = file["entry/instrument/detector"]
        np.testing.assert_array_equal(detector["pixel_mask"], ~counts.mask)  # NeXus: 0 = usable
        assert detector["gain"].attrs["units"] == b"1"


def test_frames(frames, tmp_path):
    save(tmp_path / "a.h5", frames)
    with h5py.File(tmp_path / "a.h5") as file:
        assert file["entry/data"].attrs["axes"].tolist() == [b"frame", b"row", b"column"]
        np.testing.assert_array_equal(file["entry/data/counts"], frames.counts)


def test_readings(readings, tmp_path):
    save(tmp_path / "a.h5", readings)
    assert classes(tmp_path / "a.h5")["entry/instrument/detector/mark_law"] == "NXcollection"
    with h5py.File(tmp_path / "a.h5") as file:
        assert file["entry/data/counts"].dtype == np.float32
        np.testing.assert_array_equal(file["entry/data/counts"], readings.counts)
        detector = file["entry/instrument/detector"]
        np.testing.assert_array_equal(detector["current"], readings.current)
        stored = {name: float(value[()]) for name, value in detector["mark_law"].items()}
        assert stored == dataclasses.asdict(readings.law)


def test_time_tags(tags, tmp_path):
    save(tmp_path / "a.h5", tags, truth={"depth": [1.0]}, note="n")
    found = classes(tmp_path / "a.h5")
    assert found.pop("entry/instrument/source/pulse_shape") == "NXdata"
    assert found == COMMON | {"entry/events": "NXevent_data", "entry/instrument/source": "NXsource"}
    with h5py.File(tmp_path / "a.h5") as file:
        events = file["entry/events"]
        np.testing.assert_array_equal(events["event_id"], tags.row * 5 + tags.column)
        np.testing.assert_array_equal(events["event_time_offset"], tags.time)
        assert events["event_time_offset"].attrs["units"] == b"s"
        assert events["event_index"][()].tolist() == [0]
        assert events["event_time_zero"].shape == (1,)
        source, detector = file["entry/instrument/source"], file["entry/instrument/detector"]
        for setting in (source["period"], detector["time_zero"], detector["offset"], detector["interval"]):
            assert setting.attrs["units"] == b"s"


def test_clocks(clocked, tmp_path):
    save(tmp_path / "a.h5", clocked)
    with h5py.File(tmp_path / "a.h5") as file:
        detector, dither = file["entry/instrument/detector"], file["entry/events/event_time_dither"]
        assert detector["dead_time"][()] == 20e-9 / 3
        assert detector["electronics_dead_time"][()] == 80e-9
        assert detector["dead_time_reset"][()] == 0
        np.testing.assert_array_equal(detector["gate"], [1e-8 / 3, 7e-8])
        np.testing.assert_array_equal(dither, clocked.dither)
        for stored in (detector["dead_time"], detector["electronics_dead_time"], detector["gate"], dither):
            assert stored.attrs["units"] == b"s"


def test_histogram(histogram, tmp_path):
    save(tmp_path / "a.h5", histogram)
    common = {name: kind for name, kind in COMMON.items() if name not in ("entry/truth", "entry/note")}
    assert classes(tmp_path / "a.h5") == common | {
        "entry/data": "NXdata",
        "entry/instrument/source": "NXsource",
        "entry/instrument/source/pulse_shape": "NXdata",
    }
    with h5py.File(tmp_path / "a.h5") as file:
        assert file["entry"].attrs["default"] == b"data"
        assert file["entry"].attrs["acquisition"] == b"time_histogram"
        data = file["entry/data"]
        assert data.attrs["signal"] == b"detections"
        assert data.attrs["axes"].tolist() == [b"row", b"column", b"time"]
        np.testing.assert_array_equal(data["detections"], histogram.detections)
        np.testing.assert_allclose(data["time"], 1e-8 / 3 + (np.arange(40) + 0.5) * 1e-9 / 3, rtol=1e-14)
        assert data["time"].attrs["units"] == b"s"
        detector = file["entry/instrument/detector"]
        for name, value in [("bin_width", 1e-9 / 3), ("first_edge", 1e-8 / 3)]:
            assert detector[name][()] == value
            assert detector[name].attrs["units"] == b"s"


def test_a_file_made_with_plain_h5py_is_read(tmp_path):
    """The documented layout is enough: no checksums, big-endian numbers, unsorted events, 2-byte ids."""
    path = tmp_path / "foreign.h5"
    with h5py.File(path, "w") as file:
        entry = file.create_group("entry")
        entry.attrs["acquisition"] = np.bytes_("time_tags")
        entry.attrs["acquisition_version"] = np.bytes_("1")
        detector = entry.create_group("instrument/detector")
        for name, value in {"trials": 50, "gain": 0.5, "background": 0.1, "refractive_index": 1}.items():
            detector[name] = value
        detector["time_zero"], detector["offset"] = 0.0, np.zeros((2, 3), ">f8")
        detector["shape"] = [2, 3]
        entry["instrument/source/period"] = 1e-7
        entry["instrument/source/pulse_shape/rms"] = 1e-9
        entry["events/event_id"] = np.array([5, 0, 2], ">u2")
        entry["events/event_time_offset"] = np.array([1e-8, 2e-8, 3e-8], ">f8")
    tags = load(path)
    assert tags.counts().detections.tolist() == [[1, 0, 1], [0, 0, 1]]
    assert tags.time.tolist() == [2e-8, 3e-8, 1e-8]
    assert (tags.trials, tags.gain, tags.background, tags.interval, tags.mask) == (50, 0.5, 0.1, None, None)
    assert isinstance(tags.pulse, GaussianPulse)
    assert tags.pulse.rms == 1e-9


@pytest.mark.parametrize("settings", [{}, {"chunks": (7,), "maxshape": (None,)}])
def test_a_file_without_events_is_read(tags, tmp_path, settings):
    save(tmp_path / "a.h5", tags)
    with h5py.File(tmp_path / "a.h5", "r+") as file:
        for name, kind in [("event_id", "i4"), ("event_time_offset", "f4")]:
            del file[f"entry/events/{name}"]
            file["entry/events"].create_dataset(name, shape=(0,), dtype=kind, **settings)
    assert load(tmp_path / "a.h5").counts().detections.sum() == 0


@pytest.mark.parametrize("name", ["counts", "tags", "clocked", "nothing", "histogram", "frames", "readings"])
def test_every_stored_byte_is_under_a_checksum(name, request, tmp_path):
    save(tmp_path / "a.h5", request.getfixturevalue(name))
    with h5py.File(tmp_path / "a.h5") as file:

        def check(_, item):
            if isinstance(item, h5py.Dataset):
                layout = item.id.get_create_plist().get_layout()
                assert item.fletcher32 or layout == h5py.h5d.COMPACT

        file.visititems(check)
