"""Frames read by blocks of rows: what a load gives, without the whole stack, and the same guards."""

import tracemalloc

import h5py
import numpy as np
import pytest

from recon.acquisition import Frames, MarkLaw
from recon.errors import InputError
from recon.files import frame_blocks, guard, load, save

COUNTS = "entry/data/counts"
LAW = "entry/instrument/detector/mark_law"


@pytest.fixture
def path(readings, tmp_path):
    save(tmp_path / "a.h5", readings)
    return tmp_path / "a.h5"


def refused(path, message, rows_at_once=2):
    with pytest.raises(InputError, match=message) as raised:
        list(frame_blocks(path, rows_at_once))
    assert "\n" not in str(raised.value)


def replaced(path, **settings):
    with h5py.File(path, "r+") as file:
        del file[COUNTS]
        file.create_dataset(COUNTS, **settings)


@pytest.mark.parametrize("rows_at_once", [1, 2, 4, 6, 100])
@pytest.mark.parametrize("kind", ["frames", "readings"])
def test_blocks_make_up_the_stack(request, kind, rows_at_once, tmp_path):
    acquisition = request.getfixturevalue(kind)
    save(tmp_path / "a.h5", acquisition)
    rows, blocks = zip(*frame_blocks(tmp_path / "a.h5", rows_at_once), strict=True)
    assert [r.start for r in rows] == list(range(0, 6, rows_at_once))
    assert all(b.dtype == acquisition.counts.dtype for b in blocks)
    assert all(b.shape == (4, r.stop - r.start, 5) for r, b in zip(rows, blocks, strict=True))
    np.testing.assert_array_equal(np.concatenate(blocks, axis=1), acquisition.counts)


def test_the_stack_is_never_in_memory(tmp_path):
    stack = np.random.default_rng(3).integers(0, 9, (40, 600, 500), np.uint8)
    save(tmp_path / "a.h5", Frames(stack, 0.1))
    tracemalloc.start()
    total = 0
    for _, block in frame_blocks(tmp_path / "a.h5", 50):
        total += int(block.sum(dtype=np.int64))
    most = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert total == stack.sum(dtype=np.int64)
    assert most < stack.nbytes / 3


def test_a_stack_beyond_memory_is_read_by_blocks(tmp_path, monkeypatch):
    stack = np.random.default_rng(4).integers(0, 9, (8, 512, 512), np.uint8)
    save(tmp_path / "a.h5", Frames(stack, 0.1))
    monkeypatch.setattr(guard, "memory_limit", lambda: stack.nbytes * 2 // 3)
    with pytest.raises(InputError, match="counts has shape"):
        load(tmp_path / "a.h5")
    refused(tmp_path / "a.h5", "counts has shape", 500)
    for rows, block in frame_blocks(tmp_path / "a.h5", 200):
        np.testing.assert_array_equal(block, stack[:, rows])


@pytest.mark.parametrize("settings", [{}, {"chunks": (1, 6, 5)}])
def test_other_layouts_and_byte_orders(path, readings, settings):
    replaced(path, data=readings.counts.astype(">f8"), **settings)
    blocks = [block for _, block in frame_blocks(path, 4)]
    assert blocks[0].dtype == np.float32
    np.testing.assert_array_equal(np.concatenate(blocks, axis=1), readings.counts)


@pytest.mark.parametrize(
    ("rows_at_once", "message"),
    [
        (0, "rows_at_once is 0; give a whole number of rows, 1 or more"),
        (1.5, "rows_at_once is 1.5"),
        (None, "rows_at_once holds"),
        ([1, 2], r"rows_at_once has shape \(2,\)"),
    ],
)
def test_impossible_heights(path, rows_at_once, message):
    refused(path, message, rows_at_once)


@pytest.mark.parametrize(
    ("settings", "message"),
    [
        ({"data": np.ones((6, 5))}, r"counts has shape \(6, 5\); store \(frames, rows, columns\)"),
        ({"data": np.ones((4, 0, 5))}, r"counts has shape \(4, 0, 5\)"),
        ({"data": np.full((4, 6, 5), np.nan)}, r"counts of rows 0 to 1 at \(0, 0, 0\) is nan"),
        ({"data": np.zeros((4, 6, 5), complex)}, "counts holds complex128 values"),
        ({"shape": (10**4, 10**4, 10**4), "dtype": "u1"}, "which is 1000000000000 bytes"),
        ({"shape": (4, 6, 5), "dtype": "u1", "chunks": (4, 6, 5)}, "not all of its values are stored"),
        ({"data": np.ones((4, 6, 5)), "compression": "lzf"}, "compressed by filter 32000"),
    ],
)
def test_the_guards_of_a_load(path, settings, message):
    replaced(path, **settings)
    refused(path, message)


def test_other_files_are_refused(path, counts, tmp_path):
    save(tmp_path / "b.h5", counts)
    refused(tmp_path / "b.h5", "entry@acquisition is counts; give a file of frames")
    refused(tmp_path / "c.h5", "does not exist")
    with h5py.File(path, "r+") as file:
        del file[f"{LAW}/noise"]
    refused(path, f"{LAW}/noise is missing; add it")


@pytest.mark.parametrize("name", ["gain", "variance", "offset", "noise", "ceiling"])
def test_part_of_a_law_is_not_taken_for_one(path, name):
    with h5py.File(path, "r+") as file:
        del file[f"{LAW}/{name}"]
    with pytest.raises(InputError, match=f"{LAW}/{name} is missing; add it"):
        load(path)


@pytest.mark.parametrize(
    ("place", "value", "message"),
    [
        (f"{LAW}/noise", 0.0, r"noise is 0\.0; give the rms"),
        (f"{LAW}/gain", [1.0, 1.0], r"gain has shape \(2,\)"),
        ("entry/instrument/detector/current", np.ones(5), "current has 5 entries for 4 frames"),
        ("entry/instrument/detector/dropped_frames", [-1], r"dropped_frames at \(0,\) is -1"),
    ],
)
def test_wrong_settings_of_frames(path, place, value, message):
    with h5py.File(path, "r+") as file:
        if place in file:
            del file[place]
        file[place] = value
    with pytest.raises(InputError, match=message):
        load(path)


def test_readings_without_their_law_are_not_taken_for_counts(path):
    with h5py.File(path, "r+") as file:
        del file[LAW]
    with pytest.raises(InputError, match=r"law=recon\.MarkLaw"):
        load(path)


def test_frames_lost_by_another_program_are_dropped(tmp_path):
    save(tmp_path / "a.h5", Frames(np.ones((4, 6, 5)), 0.1, law=MarkLaw(noise=1.0)))
    stack = np.ones((4, 6, 5))
    stack[1] = np.nan
    replaced(tmp_path / "a.h5", data=stack)
    with pytest.warns(UserWarning, match="frames 1 of 4"):
        read = load(tmp_path / "a.h5")
    assert read.dropped == (1,)
